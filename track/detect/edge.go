package detect

import "math"

// The edge of a disc seen through a Gaussian blur is a normal distribution
// function of the distance; both it and its density are read from a table,
// because they are needed for every pixel of every outline.
const (
	edgeSpan = 4.5 // standard deviations on either side; beyond, Φ is 0 or 1 to 3e-6
	edgeFine = 56  // entries per standard deviation: the table fits a processor's fastest cache
	edgeLast = 2*edgeSpan*edgeFine - 1e-6
	edgeMask = 511
)

// edgeTable holds Φ and φ at each entry and their changes to the next.
var edgeTable = func() (t [edgeMask + 1][4]float64) {
	at := func(i int) (cdf, pdf float64) {
		z := float64(i)/edgeFine - edgeSpan
		return 0.5 * math.Erfc(-z/math.Sqrt2), math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
	}
	for i := range int(2 * edgeSpan * edgeFine) {
		c0, p0 := at(i)
		c1, p1 := at(i + 1)
		t[i] = [4]float64{c0, c1 - c0, p0, p1 - p0}
	}
	return t
}()

// edge returns Φ(z) and φ(z) of the standard normal distribution to 2e-5.
func edge(z float64) (cdf, pdf float64) {
	x := (z + edgeSpan) * edgeFine
	if x < 0 { // min and max would be slower
		x = 0
	}
	if x > edgeLast {
		x = edgeLast
	}
	i := int(x)
	x -= float64(i)
	t := &edgeTable[i&edgeMask]
	return t[0] + x*t[1], t[2] + x*t[3]
}

// edgeSmeared averages Φ(z + a·t) over t from −1/2 to 1/2: an edge that moved
// by a blurs during the exposure. It returns the average, its derivative by z,
// and its derivative by a, which is also the average of t·φ(z + a·t).
func edgeSmeared(z, a float64) (mean, dz, da float64) {
	b := math.Abs(a)
	if b < 0.3 {
		// Taylor: φ' = −zφ, φ'' = (z²−1)φ, φ''' = (3z−z³)φ.
		c, p := edge(z)
		a2 := a * a * (1.0 / 24)
		z2 := z * z
		return c - a2*z*p, p + a2*(z2-1)*p, -a * (1.0 / 12) * z * p
	}
	z1, z0 := z+b/2, z-b/2
	c1, p1 := edge(z1)
	c0, p0 := edge(z0)
	// ∫Φ = zΦ + φ
	ib := 1 / b
	mean = (z1*c1 + p1 - z0*c0 - p0) * ib
	dz = (c1 - c0) * ib
	da = (0.5*(c1+c0) - mean) * ib
	if a < 0 {
		da = -da
	}
	return mean, dz, da
}
