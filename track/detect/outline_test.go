package detect

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The edge's tables against the library's error function, and a smeared edge and
// its derivatives against Simpson's rule.
func TestEdge(t *testing.T) {
	phi := func(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }
	for z := -6.0; z <= 6; z += 0.0137 {
		c, p := edge(z)
		if math.Abs(c-phi(z)) > 3e-5 || math.Abs(p-math.Exp(-z*z/2)/math.Sqrt(2*math.Pi)) > 6e-5 {
			t.Fatalf("edge(%g) = %g, %g", z, c, p)
		}
	}
	simpson := func(f func(float64) float64) float64 {
		const n = 400
		s := f(-0.5) + f(0.5)
		for i := 1; i < n; i++ {
			s += float64(2+2*(i%2)) * f(-0.5+float64(i)/n)
		}
		return s / (3 * n)
	}
	for _, a := range []float64{-20, -3, -0.31, -0.29, 0, 0.1, 0.29, 0.31, 1, 7} {
		for z := -8.0; z <= 8; z += 0.173 {
			m, dz, da := edgeSmeared(z, a)
			wm := simpson(func(x float64) float64 { return phi(z + a*x) })
			wz := simpson(func(x float64) float64 { q := z + a*x; return math.Exp(-q*q/2) / math.Sqrt(2*math.Pi) })
			wa := simpson(func(x float64) float64 { q := z + a*x; return x * math.Exp(-q*q/2) / math.Sqrt(2*math.Pi) })
			if math.Abs(m-wm) > 2e-3 || math.Abs(dz-wz) > 2e-3 || math.Abs(da-wa) > 2e-3 {
				t.Fatalf("edgeSmeared(%g, %g) = %g, %g, %g; want %g, %g, %g", z, a, m, dz, da, wm, wz, wa)
			}
		}
	}
}

// The coverage of pixels against a drawing by brute force: blurred, smeared by up
// to a diameter in any direction, to 1.5 % of the contrast.
func TestCoverageAgainstDrawing(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 8))
	for _, r := range []float64{10, 20} {
		for _, part := range []float64{0, 0.1, 0.3, 0.7, 1} {
			l := 2 * r * part
			a := 2 * math.Pi * rng.Float64()
			w := int(2*r+l) + 20
			s := scene{w: w, h: w, u: float64(w)/2 + 0.3, v: float64(w)/2 - 0.2, r: r, bob: 1, wall: 0, blur: 0.8, smear: [2]float64{l * math.Cos(a), l * math.Sin(a)}}
			drawn := s.levels(rng)
			m := model{r: r, s: math.Sqrt(0.8*0.8 + 1.0/12), l: l, mu: math.Cos(a), mv: math.Sin(a)}
			o := m.outline()
			var c coverage
			worst := 0.0
			for y := range w {
				for x := range w {
					o.cover(float64(x)-s.u, float64(y)-s.v, &c)
					worst = math.Max(worst, math.Abs(c.alpha-drawn[y*w+x]))
				}
			}
			t.Logf("radius %g, smear %4.1f px in %d pieces: coverage off by at most %.4f", r, l, o.pieces, worst)
			if worst > 0.015 {
				t.Errorf("radius %g, smear %g: coverage off by %.4f", r, l, worst)
			}
		}
	}
}

// Derivatives of the coverage against differences.
func TestCoverageDerivatives(t *testing.T) {
	base := model{r: 15, s: 0.9, l: 8, mu: 0.6, mv: 0.8, e1: 0.03, e2: -0.02}
	at := func(change func(*model), x, y float64) float64 {
		m := base
		change(&m)
		o := m.outline()
		var c coverage
		o.cover(x-m.cu, y-m.cv, &c)
		return c.alpha
	}
	o := base.outline()
	const h = 1e-3
	diff := func(change func(*model, float64), x, y float64) float64 {
		return (at(func(m *model) { change(m, h) }, x, y) - at(func(m *model) { change(m, -h) }, x, y)) / (2 * h)
	}
	var c coverage
	for a := 0.0; a < 2*math.Pi; a += 0.37 {
		for _, d := range []float64{-3, -1, 0.5, 2} {
			x, y := (15+d)*math.Cos(a), (15+d)*math.Sin(a)
			o.cover(x, y, &c)
			for _, k := range []struct {
				name      string
				got, want float64
			}{
				{"radius", c.r, diff(func(m *model, h float64) { m.r += h }, x, y)},
				{"u", c.u, diff(func(m *model, h float64) { m.cu += h }, x, y)},
				{"v", c.v, diff(func(m *model, h float64) { m.cv += h }, x, y)},
				{"smear", c.l, diff(func(m *model, h float64) { m.l += h }, x, y)},
				{"blur", c.s, diff(func(m *model, h float64) { m.s += h }, x, y)},
			} {
				// The derivative by the smear leaves out that a longer one turns the normal.
				if math.Abs(k.got-k.want) > 0.02 {
					t.Errorf("at (%.1f, %.1f): by %s %.4f, by differences %.4f", x, y, k.name, k.got, k.want)
				}
			}
		}
	}
}

// One step from where prediction leaves the centre ends near enough to the
// minimum, so that the second is not worth its time.
func TestOneStepIsEnough(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	s := scene{w: 80, h: 80, u: 40.3, v: 39.8, r: 20, bob: 80, wall: 180, blur: 0.8, noise: 3, smear: [2]float64{4, 0.4}, shade: [3]float64{-15, -20, 20}}
	f := NewFitter(grey, 20, 0.3, rect(s))
	f.ball = 1
	g := Guess{U: s.u, V: s.v, UPos: 0.1, SmearU: 4, SmearV: 0.4, USmear: 0.3}
	var sum, n, sigma float64
	for i := range 60 {
		p := s.render(rng)
		g.U, g.V = s.u, s.v
		for range 3 { // to the minimum
			r := f.Fit(p, nil, g, nil, i < 10)
			g.U, g.V = r.U, r.V
		}
		best := g
		if i < 20 {
			r := f.Fit(p, nil, best, nil, i < 10)
			f.Learn(&r)
			continue
		}
		sin, cos := math.Sincos(float64(i))
		g.U, g.V = best.U+0.9*closeEnough*cos, best.V+0.9*closeEnough*sin
		r := f.Fit(p, nil, g, nil, false)
		du, dv := r.U-best.U, r.V-best.V
		sum += (du*du + dv*dv) / 2
		n++
		sigma = math.Sqrt(r.Cov.AA)
	}
	rms := math.Sqrt(sum / n)
	t.Logf("one step from %.2f px ends %.4f px r.m.s. per axis from the minimum; its uncertainty is %.4f px", 0.9*closeEnough, rms, sigma)
	if rms > 0.5*sigma {
		t.Errorf("one step ends %.4f px off, σ is %.4f", rms, sigma)
	}
}
