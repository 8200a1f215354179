package decay

import (
	"math"
	"testing"
)

// The periods of large swings against Abramowitz & Stegun, "Handbook of
// Mathematical Functions", table 17.2 (complete elliptic integral, modular
// angle α = half the amplitude): T/T₀ = 2K(α)/π.
func TestLargeSwingPeriods(t *testing.T) {
	cases := []struct{ deg, ratio float64 }{{30, 1.0174088}, {60, 1.0731820}, {90, 1.1803406}}
	const k = 35.0
	t0 := 2 * math.Pi / math.Sqrt(k)
	m := model{sine: true}
	for _, c := range cases {
		a := c.deg * math.Pi / 180
		p := []float64{a, 0, 0, k}
		o, err := m.orbitAt(p, a)
		if err != nil {
			t.Fatal(err)
		}
		if d := o.period/t0 - c.ratio; math.Abs(d) > 6e-8 {
			t.Errorf("quadrature at %g°: T/T0 = %.9f, table %.7f", c.deg, o.period/t0, c.ratio)
		}
		// The integrated swing: turning points of 20 swings.
		var last float64
		n := 0
		times := []float64{25 * t0}
		out := make([]float64, 1)
		err = newMover(m, false).run(p, 0, times, out, nil, func(at, _ float64) {
			if n++; n <= 40 {
				last = at
			}
		})
		if err != nil || n < 40 {
			t.Fatalf("%d turns, %v", n, err)
		}
		got := last / 20 / t0
		t.Logf("%2g°: T/T0 by quadrature %.9f, over 20 integrated swings %.9f, table %.7f", c.deg, o.period/t0, got, c.ratio)
		if math.Abs(got-c.ratio) > 1e-7 {
			t.Errorf("%g°: integrated T/T0 = %.9f, table %.7f", c.deg, got, c.ratio)
		}
	}
}

// Energy taken by each friction in the integrated motion against the orbit's
// quadrature, and the derivatives against central differences.
func TestDerivatives(t *testing.T) {
	for _, m := range []model{
		{sine: true, law: viscous | drag | dry},
		{sine: false, powers: []int{2, 3, 4, 5}, law: viscous | drag | dry},
		{sine: true, powers: []int{3}, law: drag | dry},
	} {
		p := []float64{0.9, 0.3, 0.01, 40}
		for range m.powers {
			p = append(p, -0.03)
		}
		for _, l := range frictions {
			if m.law&l != 0 {
				p = append(p, map[law]float64{viscous: 0.05, drag: 0.03, dry: 0.07}[l])
			}
		}
		var times []float64
		for i := range 300 {
			times = append(times, float64(i)*0.05)
		}
		n := m.size()
		out, jac := make([]float64, 300), make([]float64, 300*n)
		if err := newMover(m, true).run(p, 0, times, out, jac, nil); err != nil {
			t.Fatal(err)
		}
		plain := newMover(m, false)
		a, b := make([]float64, 300), make([]float64, 300)
		for j := range n {
			h := 1e-5 * math.Max(1e-1, math.Abs(p[j]))
			q := append([]float64(nil), p...)
			q[j] = p[j] + h
			_ = plain.run(q, 0, times, a, nil, nil)
			q[j] = p[j] - h
			_ = plain.run(q, 0, times, b, nil, nil)
			worst, size := 0.0, 0.0
			for i := range a {
				num := (a[i] - b[i]) / (2 * h)
				worst = math.Max(worst, math.Abs(num-jac[i*n+j]))
				size = math.Max(size, math.Abs(num))
			}
			if worst > 2e-4*size {
				t.Errorf("%v, %s: derivative off by %g of %g", m, m.names()[j], worst, size)
			}
		}
	}
}

func BenchmarkMove(b *testing.B) {
	m := model{sine: true, law: viscous | drag | dry}
	p := []float64{0.9, 0, 0.01, 39.5, 0.03, 0.01, 0.02}
	times := make([]float64, 1800)
	for i := range times {
		times[i] = float64(i) / 60
	}
	out, jac := make([]float64, 1800), make([]float64, 1800*m.size())
	for _, g := range []bool{false, true} {
		b.Run(map[bool]string{false: "plain", true: "derivatives"}[g], func(b *testing.B) {
			mv := newMover(m, g)
			for b.Loop() {
				_ = mv.run(p, 0, times, out, jac, nil)
			}
		})
	}
}
