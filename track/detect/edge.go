package detect

import "math"

// The edge of a disc seen through a Gaussian blur is a normal distribution
// function of the distance; both it and its density are read from a table,
// because they are needed for every pixel of every outline.
const (
	edgeSpan = 4.5 // standard deviations on either side; beyond, Φ is 0 or 1 to 3e-6
	edgeStep = 1.0 / 128
	edgeSize = int(2*edgeSpan/edgeStep) + 2
)

var edgeTable = func() (t [edgeSize][2]float64) {
	for i := range t {
		z := -edgeSpan + float64(i)*edgeStep
		t[i] = [2]float64{0.5 * math.Erfc(-z/math.Sqrt2), math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)}
	}
	return t
}()

// edge returns Φ(z) and φ(z) of the standard normal distribution to 1e-5.
func edge(z float64) (cdf, pdf float64) {
	x := (z + edgeSpan) * (1 / edgeStep)
	if !(x > 0) {
		return 0, 0
	}
	if x >= float64(edgeSize-1) {
		return 1, 0
	}
	i := int(x)
	f := x - float64(i)
	a, b := &edgeTable[i], &edgeTable[i+1]
	return a[0] + f*(b[0]-a[0]), a[1] + f*(b[1]-a[1])
}

// edgeSmeared averages Φ(z + a·t) over t from −1/2 to 1/2: an edge that moved
// by a blurs during the exposure. It returns the average, its derivative by z,
// and its derivative by a, which is also the average of t·φ(z + a·t).
func edgeSmeared(z, a float64) (mean, dz, da float64) {
	if a < 0 {
		mean, dz, da = edgeSmeared(z, -a)
		return mean, dz, -da
	}
	if a < 0.3 {
		// Taylor: φ' = −zφ, φ'' = (z²−1)φ, φ''' = (3z−z³)φ.
		c, p := edge(z)
		a2 := a * a * (1.0 / 24)
		z2 := z * z
		return c - a2*z*p, p + a2*(z2-1)*p, -a * (1.0 / 12) * z * p
	}
	c1, p1 := edge(z + a/2)
	c0, p0 := edge(z - a/2)
	// ∫Φ = zΦ + φ
	g := (z+a/2)*c1 + p1 - (z-a/2)*c0 - p0
	ia := 1 / a
	mean = g * ia
	dz = (c1 - c0) * ia
	da = (0.5*(c1+c0) - mean) * ia
	return mean, dz, da
}
