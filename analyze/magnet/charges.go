package magnet

import "math"

// Charge is a point of magnetic charge in A·m, Vec its place.
type Charge struct {
	At Vec
	Q  float64
}

// Rule is how a cylinder's charged faces are replaced by points of charge.
type Rule uint8

// The rules. Axis3 to Axis5 put three to five pairs of charges on the axis, which
// have the cylinder's own axial multipole moments of degree 1, 3, 5 … and are
// good outside of the sphere around it. The others cut the faces into points, by
// the degree to which they integrate polynomials over a disc exactly: A. H.
// Stroud, "Approximate Calculation of Multiple Integrals", Prentice-Hall 1971,
// S2 7-1 (12 points), and product rules of 36 and 100 points.
const (
	Axis3 Rule = iota
	Axis4
	Axis5
	Degree7
	Degree11
	Degree19
)

// Reach is the radius in m of the sphere around the cylinder.
func (c Cylinder) Reach() float64 { return math.Hypot(c.Radius, c.Height/2) }

// RuleFor is the cheapest rule that keeps the force between two cylinders right
// to 3e-4 of that of their dipoles. distance is the least from centre to centre
// over the mean of the two reaches, gap the least from face to face over the
// larger radius.
func RuleFor(distance, gap float64) Rule {
	switch {
	case distance > 7:
		return Axis3
	case distance > 4.2:
		return Axis4
	case distance > 3.5:
		return Axis5
	case gap > 2.2:
		return Degree7
	case gap > 1:
		return Degree11
	}
	return Degree19
}

type discPoint struct{ x, y, w float64 }

// disc returns points of the unit disc and their shares of its area.
func (r Rule) disc() []discPoint {
	var out []discPoint
	ring := func(n int, radius, turn, w float64) {
		for i := range n {
			s, c := math.Sincos(2*math.Pi*float64(i)/float64(n) + turn)
			out = append(out, discPoint{radius * c, radius * s, w})
		}
	}
	switch r {
	case Degree7:
		root := math.Sqrt(29)
		ring(4, math.Sqrt(0.75), 0, 2.0/27)
		ring(4, math.Sqrt((27-3*root)/52), math.Pi/4, (551+41*root)/6264)
		ring(4, math.Sqrt((27+3*root)/52), math.Pi/4, (551-41*root)/6264)
	case Degree11: // Gauss-Legendre with 3 nodes in the radius squared, 12 in angle
		for i, node := range [3]float64{-math.Sqrt(0.6), 0, math.Sqrt(0.6)} {
			w := [3]float64{5.0 / 18, 8.0 / 18, 5.0 / 18}[i]
			ring(12, math.Sqrt((1+node)/2), float64(i)*math.Pi/12, w/12)
		}
	default: // 5 nodes and 20
		a, b := 2*math.Sqrt(10.0/7), 13*math.Sqrt(70)
		for i, node := range [5]float64{0, math.Sqrt(5-a) / 3, -math.Sqrt(5-a) / 3, math.Sqrt(5+a) / 3, -math.Sqrt(5+a) / 3} {
			w := [5]float64{128.0 / 225, (322 + b) / 900, (322 + b) / 900, (322 - b) / 900, (322 - b) / 900}[i] / 2
			ring(20, math.Sqrt((1+node)/2), float64(i)*math.Pi/20, w/20)
		}
	}
	return out
}

// Charges replaces the cylinder by points of charge, for its centre at the origin
// and its axis (a unit vector) from south to north.
func (c Cylinder) Charges(axis Vec, r Rule) []Charge {
	switch r {
	case Axis3:
		return c.axisCharges(axis, 3, 0.5)
	case Axis4:
		return c.axisCharges(axis, 4, 0.5)
	case Axis5:
		return c.axisCharges(axis, 5, 0.7)
	}
	// Two directions across the axis.
	u := Vec{X: 1}
	if math.Abs(axis.X) > 0.8 {
		u = Vec{Y: 1}
	}
	u = u.Sub(axis.Scale(u.Dot(axis))).Unit()
	v := axis.Cross(u)
	total := c.Magnetisation() * math.Pi * c.Radius * c.Radius
	var out []Charge
	for _, side := range [2]float64{1, -1} {
		for _, p := range r.disc() {
			at := u.Scale(c.Radius * p.x).Add(v.Scale(c.Radius * p.y)).Add(axis.Scale(side * c.Height / 2))
			out = append(out, Charge{at, side * total * p.w})
		}
	}
	return out
}

// Multipole is the axial multipole moment Q of odd degree l in A·m^(l+1):
// on the axis the scalar potential is Σ Q/(4π z^(l+1)). Q is the integral of the
// faces' charge times the solid harmonic r^l P_l(cos θ).
func (c Cylinder) Multipole(l int) float64 {
	z := c.Height / 2
	harmonic := func(rho2 float64) float64 { // a polynomial in ρ²: the quadrature is exact
		r := math.Sqrt(rho2 + z*z)
		x := z / r
		before, p := 1.0, x
		for k := 1; k < l; k++ {
			before, p = p, (float64(2*k+1)*x*p-float64(k)*before)/float64(k+1)
		}
		return math.Pi * math.Pow(r, float64(l)) * p
	}
	return 2 * c.Magnetisation() * gauss(harmonic, 0, c.Radius*c.Radius)
}

// axisCharges are n pairs of charges, evenly spaced out to the given share of the
// reach, whose moments of degree 1, 3 … 2n−1 are the cylinder's.
func (c Cylinder) axisCharges(axis Vec, n int, share float64) []Charge {
	a := share * c.Reach()
	var m [5][6]float64 // Σᵢ 2 qᵢ (sᵢ/a)^l = Q_l/a^l, by elimination
	for k := range n {
		l := 2*k + 1
		for i := range n {
			m[k][i] = 2 * math.Pow(float64(i+1)/float64(n), float64(l))
		}
		m[k][n] = c.Multipole(l) / math.Pow(a, float64(l))
	}
	for i := range n {
		top := i
		for k := i + 1; k < n; k++ {
			if math.Abs(m[k][i]) > math.Abs(m[top][i]) {
				top = k
			}
		}
		m[i], m[top] = m[top], m[i]
		for k := range n {
			if k != i {
				f := m[k][i] / m[i][i]
				for j := i; j <= n; j++ {
					m[k][j] -= f * m[i][j]
				}
			}
		}
	}
	out := make([]Charge, 0, 2*n)
	for i := range n {
		s, q := a*float64(i+1)/float64(n), m[i][n]/m[i][i]
		out = append(out, Charge{axis.Scale(s), q}, Charge{axis.Scale(-s), -q})
	}
	return out
}

// ChargesPair returns the energy (J) of two bodies of charges, and the force (N)
// and torque (N·m) about the world's origin on the second; the first feels their
// opposites. Places are in world axes.
func ChargesPair(a, b []Charge) (energy float64, force, torque Vec) {
	const k = Mu0 / (4 * math.Pi)
	for i := range b {
		p := &b[i]
		var fx, fy, fz, u float64
		for j := range a {
			q := &a[j]
			x, y, z := p.At.X-q.At.X, p.At.Y-q.At.Y, p.At.Z-q.At.Z
			r2 := x*x + y*y + z*z
			i2 := 1 / r2
			e := q.Q * math.Sqrt(r2) * i2
			u += e
			e *= i2
			fx += e * x
			fy += e * y
			fz += e * z
		}
		energy += k * p.Q * u
		f := Vec{k * p.Q * fx, k * p.Q * fy, k * p.Q * fz}
		force = force.Add(f)
		torque = torque.Add(p.At.Cross(f))
	}
	return energy, force, torque
}

// ChargesDipole returns the energy (J) of a dipole m (A·m²) at r in the field of
// charges, and the force on it (N) and the torque about the world's origin
// (N·m); the charges feel their opposites.
func ChargesDipole(a []Charge, m, r Vec) (energy float64, force, torque Vec) {
	const k = Mu0 / (4 * math.Pi)
	var b Vec
	for j := range a {
		d := r.Sub(a[j].At)
		i2 := 1 / d.Dot(d)
		i3 := i2 * math.Sqrt(i2)
		q := k * a[j].Q * i3
		b = b.Add(d.Scale(q))
		// F = ∇(m·B) of one charge: q (m − 3 (m·d) d/d²)/d³
		force = force.Add(m.Sub(d.Scale(3 * m.Dot(d) * i2)).Scale(q))
	}
	return -m.Dot(b), force, m.Cross(b).Add(r.Cross(force))
}
