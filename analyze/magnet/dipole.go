package magnet

import "math"

// Mu0 is the vacuum permeability in T·m/A (CODATA 2018: 1.25663706212e-6).
const Mu0 = 1.25663706212e-6

// DipoleEnergy returns the energy in J of two point dipoles m1 and m2 (A·m²),
// r (m) leading from the first to the second:
// U = μ₀/(4π r³) [m1·m2 − 3 (m1·r̂)(m2·r̂)].
func DipoleEnergy(m1, m2, r Vec) float64 {
	r2 := r.Dot(r)
	inv := 1 / math.Sqrt(r2)
	return Mu0 / (4 * math.Pi) * inv * inv * inv * (m1.Dot(m2) - 3*m1.Dot(r)*m2.Dot(r)*inv*inv)
}

// DipoleField returns the flux density in T at r from a point dipole m (A·m²).
func DipoleField(m, r Vec) Vec {
	r2 := r.Dot(r)
	inv2 := 1 / r2
	k := Mu0 / (4 * math.Pi) * inv2 * math.Sqrt(inv2)
	return r.Scale(3 * k * m.Dot(r) * inv2).Sub(m.Scale(k))
}

// DipolePair returns the energy (J) of two point dipoles, the force (N) on the
// second (the first feels its opposite), and the torque (N·m) on each about its
// own place. Force and torques are exact gradients of the energy. r leads from
// the first to the second.
func DipolePair(m1, m2, r Vec) (energy float64, force2, torque1, torque2 Vec) {
	r2 := r.X*r.X + r.Y*r.Y + r.Z*r.Z
	inv2 := 1 / r2
	inv := math.Sqrt(r2) * inv2 // the root does not wait for the division
	k := Mu0 / (4 * math.Pi) * inv2 * inv
	n := Vec{r.X * inv, r.Y * inv, r.Z * inv}
	a := m1.X*n.X + m1.Y*n.Y + m1.Z*n.Z
	b := m2.X*n.X + m2.Y*n.Y + m2.Z*n.Z
	mm := m1.X*m2.X + m1.Y*m2.Y + m1.Z*m2.Z
	energy = k * (mm - 3*a*b)
	f := 3 * k * inv
	c := f * (mm - 5*a*b)
	fa, fb := f*a, f*b
	force2 = Vec{fa*m2.X + fb*m1.X + c*n.X, fa*m2.Y + fb*m1.Y + c*n.Y, fa*m2.Z + fb*m1.Z + c*n.Z}
	// m2 × B1 = k (3a m2×n − m2×m1), m1 × B2 = k (3b m1×n − m1×m2)
	x := m1.Cross(m2)
	torque2 = m2.Cross(n).Scale(3 * k * a).Add(x.Scale(k))
	torque1 = m1.Cross(n).Scale(3 * k * b).Sub(x.Scale(k))
	return energy, force2, torque1, torque2
}
