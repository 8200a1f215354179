package magnet

import "math"

// LoopField is the flux density in T at p (m) of a circular loop of the given
// radius (m) about the origin that carries one ampere round the unit vector axis,
// by complete elliptic integrals: W. R. Smythe, "Static and Dynamic Electricity",
// 3rd ed., McGraw-Hill 1968, section 7.10, put into Bulirsch's cel so that
// nothing cancels near the axis.
func LoopField(radius float64, axis, p Vec) Vec {
	z := p.Dot(axis)
	across := p.Sub(axis.Scale(z))
	rho := across.Norm()
	a := radius
	outer := (a+rho)*(a+rho) + z*z
	inner := (a-rho)*(a-rho) + z*z
	kc := math.Sqrt(inner / outer)
	k := Mu0 / (2 * math.Pi * math.Sqrt(outer))
	g := (a*a - rho*rho - z*z) / inner
	bz := k * cel(kc, 1, 1+g, 1+g*kc*kc)
	b := axis.Scale(bz)
	if rho > 0 {
		bRho := 2 * k * z * a * cel(kc, 1, 1/inner, -1/outer)
		b = b.Add(across.Scale(bRho / rho))
	}
	return b
}
