package film

import "math"

// lamp is a Light made ready, in camera axes.
type lamp struct {
	to               Vec // unit, towards the lamp
	ambient, diffuse float64
	world            Vec // the same direction in world axes
	shadow, soft     float64
}

func newLamp(l Light, cam *view) *lamp {
	if l.From == (Vec{}) {
		l.From = Vec{-0.5, -1, 0.8}
	}
	if l.Ambient == 0 && l.Diffuse == 0 {
		l.Ambient, l.Diffuse = 0.55, 0.45
	}
	if l.Soft == 0 {
		l.Soft = 6e-3
	}
	w := unit(l.From)
	return &lamp{to: cam.turn(w), world: w, ambient: l.Ambient, diffuse: l.Diffuse, shadow: l.Shadow, soft: l.Soft}
}

// matt is the brightness of a matt surface with unit normal n (Lambert).
func (l *lamp) matt(c RGB, n Vec) RGB {
	k := l.ambient + l.diffuse*max(0, dot(n, l.to))
	return RGB{c[0] * k, c[1] * k, c[2] * k}
}

// glow shades one ball: Lambert for the body, Blinn's half vector for the
// highlight (Blinn 1977), which sits off the centre, towards the lamp.
type glow struct {
	plain    bool
	c        [3]float32
	a, d     float64
	inv      float64
	to, half Vec
	gloss    float64
}

func (l *lamp) ball(b *Bob, c Vec) glow {
	g := glow{plain: b.Plain, a: l.ambient, d: l.diffuse, inv: 2 / b.DiameterM, to: l.to, gloss: b.Gloss}
	g.c = [3]float32{float32(b.Colour[0]), float32(b.Colour[1]), float32(b.Colour[2])}
	eye := Vec{0, 0, -1}
	if c[2] != 0 {
		eye = scale(unit(c), -1)
	}
	g.half = unit(add(l.to, eye))
	return g
}

// at gives the colour where the outward normal is n (of the ball's radius).
func (g *glow) at(n Vec) (r, gr, b float32) {
	if g.plain {
		return g.c[0], g.c[1], g.c[2]
	}
	k := float32(g.a + g.d*max(0, dot(n, g.to)*g.inv))
	h := max(0, dot(n, g.half)*g.inv)
	h2 := h * h
	h4 := h2 * h2
	h8 := h4 * h4
	wide := 12 * h8
	s := wide
	if g.gloss > 0 {
		h16 := h8 * h8
		h64 := h16 * h16 * h16 * h16
		s = wide*(1-g.gloss) + g.gloss*(200*h64*h16+25*h8)
	}
	f := float32(s)
	return g.c[0]*k + f, g.c[1]*k + f, g.c[2]*k + f
}

// shade is the part of the lamp's light that a ball of radius r at p takes from
// the wall's point q: 1 in the middle of its shadow.
func (l *lamp) shade(p, q Vec, r float64) float64 {
	d := cross(sub(q, p), l.world)
	x := (r + l.soft - math.Sqrt(dot(d, d))) / (2 * l.soft)
	x = min(max(x, 0), 1)
	return x * x * (3 - 2*x)
}
