package detect

import "math"

// lamp tells how a bob's shading ends where the light does not reach: a ball's
// brightness is that of its surroundings' light plus, on the lamp's side only,
// the cosine of the angle to the lamp (Lambert). The turn is rounded off, since
// lamps are not points.
type lamp struct {
	sign float64 // of light in the projection; 0: no far side (a flat thing)
	soft float64 // levels over which the turn is rounded off, either side
	half float64 // 1/(2 soft)
}

// dim sets the lamp for the model from the bob's shading so far; it does not
// change during a fit, lest its softness be used to imitate something else.
func (m *model) dim(f *Fitter) {
	a := 0.1*math.Min(f.shading(), 120) + 3
	m.lamp = lamp{sign: f.ball, soft: a, half: 0.5 / a}
}

// shading is the size of the bob's shading, levels.
func (f *Fitter) shading() float64 {
	x, y, z := f.slow[0].mean, f.slow[1].mean, f.slow[2].mean
	return math.Sqrt(x*x + y*y + z*z)
}

// light turns the cosine term h, in levels, into what is seen of it, and returns
// the derivative: the larger of h and 0, rounded off by a parabola.
func (l *lamp) light(h float64) (seen, slope float64) {
	if l.sign == 0 {
		return h, 1
	}
	x := h * l.sign
	switch {
	case x >= l.soft:
		return h, 1
	case x <= -l.soft:
		return 0, 0
	}
	k := (x + l.soft) * l.half
	return l.sign * 0.5 * k * (x + l.soft), k
}

// shade is what light adds at (x, y) px from the bob's middle, levels.
func (m *model) shade(x, y float64) float64 {
	x, y = x/m.r, y/m.r
	nz := math.Sqrt(math.Max(1-x*x-y*y, 0))
	h, _ := m.lamp.light(m.at(pFx)*x + m.at(pFy)*y + m.at(pFz)*nz + m.at(pLit))
	return h
}
