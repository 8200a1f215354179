package magnet

import "math"

// Field is the flux density in T at p outside of the cylinder, in its own axes:
// its centre at the origin, its axis along z, south to north. Exact for uniform
// magnetisation, by complete elliptic integrals: N. Derby and S. Olbert,
// "Cylindrical magnets and ideal solenoids", Am. J. Phys. 78 (2010) 229,
// equations (4) to (6).
func (c Cylinder) Field(p Vec) Vec {
	rho := math.Hypot(p.X, p.Y)
	bRho, bZ := c.field(rho, p.Z)
	if rho == 0 {
		return Vec{Z: bZ}
	}
	return Vec{X: bRho * p.X / rho, Y: bRho * p.Y / rho, Z: bZ}
}

func (c Cylinder) field(rho, z float64) (bRho, bZ float64) {
	a, b := c.Radius, c.Height/2
	b0 := Mu0 * c.Magnetisation() / math.Pi
	gamma := (a - rho) / (a + rho)
	if math.Abs(gamma) < 1e-12 { // on the cylinder's own mantle, drawn out: take the limit beside it
		gamma = 1e-12
		rho = a * (1 - gamma) / (1 + gamma)
	}
	for _, side := range [2]float64{1, -1} {
		zs := z + side*b
		root := math.Sqrt(zs*zs + (rho+a)*(rho+a))
		kc := math.Sqrt((zs*zs + (a-rho)*(a-rho)) / (zs*zs + (a+rho)*(a+rho)))
		bRho += side * b0 * a / root * cel(kc, 1, 1, -1)
		bZ += side * b0 * a / (a + rho) * zs / root * cel(kc, gamma*gamma, 1, gamma)
	}
	return bRho, bZ
}

// AxialField is the flux density in T on the axis at the distance z (m) from the
// centre, outside of the cylinder: μ₀M/2 [cos α₁ − cos α₂].
func (c Cylinder) AxialField(z float64) float64 {
	cosine := func(x float64) float64 { return x / math.Hypot(x, c.Radius) }
	return Mu0 * c.Magnetisation() / 2 * (cosine(z+c.Height/2) - cosine(z-c.Height/2))
}

// gauss20 are the positive nodes and weights of Gauss-Legendre quadrature of
// order 20 on [−1, 1]: Abramowitz & Stegun, table 25.4.
var gauss20 = [10][2]float64{
	{0.076526521133497333755, 0.152753387130725850698},
	{0.227785851141645078080, 0.149172986472603746788},
	{0.373706088715419560673, 0.142096109318382051329},
	{0.510867001950827098004, 0.131688638449176626898},
	{0.636053680726515025453, 0.118194531961518417312},
	{0.746331906460150792614, 0.101930119817240435037},
	{0.839116971822218823395, 0.083276741576704748725},
	{0.912234428251325905868, 0.062672048334109063570},
	{0.963971927277913791268, 0.040601429800386941331},
	{0.993128599185094924786, 0.017614007139152118312},
}

// gauss integrates f from a to b by one panel.
func gauss(f func(float64) float64, a, b float64) float64 {
	centre, half := (a+b)/2, (b-a)/2
	sum := 0.0
	for _, g := range gauss20 {
		sum += g[1] * (f(centre+half*g[0]) + f(centre-half*g[0]))
	}
	return half * sum
}

// towards integrates f from a to b, halving the panels towards b until they are
// as short as fine: f bends sharply near b.
func towards(f func(float64) float64, a, b, fine float64) float64 {
	sum := 0.0
	for math.Abs(b-a) > fine && math.Abs(b-a) > 1e-12*math.Abs(b) {
		mid := (a + b) / 2
		sum += gauss(f, a, mid)
		a = mid
	}
	return sum + gauss(f, a, b)
}

// flux is the integral of the axial field of c over a coaxial disc of radius r
// at height z above its centre, in T·m². The field bends most near c's rim.
func (c Cylinder) flux(r, z float64) float64 {
	fine := math.Abs(math.Abs(z) - c.Height/2)
	ring := func(rho float64) float64 {
		_, b := c.field(rho, z)
		return 2 * math.Pi * rho * b
	}
	sum := towards(ring, 0, math.Min(r, c.Radius), fine)
	if r > c.Radius {
		sum -= towards(ring, r, c.Radius, fine)
	}
	return sum
}

// CoaxialForce is the force in N between two cylinders on one axis, gap apart
// from face to face, magnetised the same way: positive where they attract. It is
// the exact field of the first over the charged faces of the second, the
// charge model of E. P. Furlani, "Permanent Magnet and Electromechanical
// Devices", Academic Press 2001, chapter 3.
func CoaxialForce(c, d Cylinder, gap float64) float64 {
	near := c.Height/2 + gap
	m := d.Magnetisation()
	return m * (c.flux(d.Radius, near) - c.flux(d.Radius, near+d.Height))
}

// DipoleBias tells how much less (negative) or more two coaxial cylinders push
// than dipoles of their moments in their centres would, as a fraction of the
// dipoles' force, at the given distance between centres (m).
func DipoleBias(c, d Cylinder, distance float64) float64 {
	r4 := distance * distance * distance * distance
	dipoles := 3 * Mu0 * c.Moment() * d.Moment() / (2 * math.Pi * r4)
	return CoaxialForce(c, d, distance-(c.Height+d.Height)/2)/dipoles - 1
}
