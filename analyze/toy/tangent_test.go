package toy

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/ode"
)

// The variational equations carry a small deviation as two near motions part.
func TestVariationalEquations(t *testing.T) {
	rnd := rand.New(rand.NewPCG(5, 6))
	for i := range 10 {
		m := mustNew(t, randomToy(rnd))
		y := randomState(m, rnd)
		n := m.StateLen()
		d := make([]float64, n)
		for j := range d {
			d[j] = rnd.NormFloat64()
		}
		m.OntoStates(y, d)
		const until = 0.4
		s := ode.New(2*n, m.Variational(1), ode.Options{RelTol: 1e-8, AbsTol: 1e-8})
		s.Reset(0, append(append([]float64(nil), y...), d...))
		for s.Time() != until {
			if err := s.Step(until); err != nil {
				t.Fatal(err)
			}
		}
		got := s.State()[n:]
		ends := [2][]float64{}
		const h = 1e-6
		for k, sign := range []float64{1, -1} {
			z := append([]float64(nil), y...)
			for j := range z {
				z[j] += sign * h * d[j]
			}
			if err := m.Run(context.Background(), 0, z, until, Options{Tol: 1e-12}, nil, nil); err != nil {
				t.Fatal(err)
			}
			ends[k] = z
		}
		size, off := 0.0, 0.0
		for j := range got {
			want := (ends[0][j] - ends[1][j]) / (2 * h)
			off += (got[j] - want) * (got[j] - want)
			size += want * want
		}
		if rel := math.Sqrt(off / size); rel > 2e-4 {
			t.Errorf("toy %d: the deviation is off by %.2g of its size", i, rel)
		}
	}
}

// The sensitivity of a small swing's angle to the inertia, in closed form:
// θ = a cos ωt, ω² = mgl/I, so ∂θ/∂I = a sin(ωt)·ωt/(2I).
func TestSensitivities(t *testing.T) {
	m := mustNew(t, pendulum())
	y := m.Rest()
	const a = 1e-4
	m.SetAngle(y, 0, a, 0)
	inertia, err := m.Index("arm.inertia")
	if err != nil {
		t.Fatal(err)
	}
	times := []float64{0, 0.3, 0.7, 1.9}
	values, slopes, err := m.Sensitivities(context.Background(), y, times, Options{Tol: 1e-12},
		[]Variable{{Param: inertia, Step: 1e-4 * m.Get(inertia)}, {Param: -1, State: 0}}, 1,
		func(y, out []float64) { out[0], _ = m.Angle(y, 0) })
	if err != nil {
		t.Fatal(err)
	}
	i0 := m.Get(inertia)
	w := math.Sqrt(0.1 * 9.81 * 0.25 / i0)
	for i, at := range times {
		if want := a * math.Cos(w*at); math.Abs(values[i]-want) > 1e-10 {
			t.Errorf("angle at %g s: %g, want %g", at, values[i], want)
		}
		if want := a * math.Sin(w*at) * w * at / (2 * i0); math.Abs(slopes[0][i]-want) > 1e-6*a/i0 {
			t.Errorf("slope by inertia at %g s: %g, want %g", at, slopes[0][i], want)
		}
		if want := math.Cos(w * at); math.Abs(slopes[1][i]-want) > 1e-6 {
			t.Errorf("slope by start at %g s: %g, want %g", at, slopes[1][i], want)
		}
	}
}
