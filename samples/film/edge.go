package film

import "math"

// covered is the part of a square of unit side that lies on the inner side of a
// straight edge at the signed distance d of the square's middle (positive:
// outside), whose normal has the direction (a, b) of length one.
func covered(d, a, b float64) float64 {
	a, b = math.Abs(a), math.Abs(b)
	if a < b {
		a, b = b, a
	}
	out := d > 0
	d = math.Abs(d)
	var c float64 // on the side where the middle is not
	switch {
	case d >= (a+b)/2:
		c = 0
	case d <= (a-b)/2:
		c = 0.5 - d/a
	default:
		e := (a+b)/2 - d
		c = e * e / (2 * a * b)
	}
	if out {
		return c
	}
	return 1 - c
}
