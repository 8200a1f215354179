package ode

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"lodeswing/analyze/ode/odetest"
)

// integrate goes to t1 by plain steps and returns the state there.
func integrate(t testing.TB, s *Solver, t0 float64, y []float64, t1 float64) []float64 {
	t.Helper()
	s.Reset(t0, y)
	for s.Time() != t1 {
		if err := s.Step(t1); err != nil {
			t.Fatal(err)
		}
	}
	return append([]float64(nil), s.State()...)
}

// kepler is the plane two-body problem with GM = 1.
func kepler(_ float64, y, dy []float64) {
	r2 := y[0]*y[0] + y[1]*y[1]
	r3 := r2 * math.Sqrt(r2)
	dy[0], dy[1], dy[2], dy[3] = y[2], y[3], -y[0]/r3, -y[1]/r3
}

const eccentricity = 0.2

var keplerStart = []float64{1 - eccentricity, 0, 0, math.Sqrt((1 + eccentricity) / (1 - eccentricity))}

// keplerAt is the exact orbit, by Kepler's equation E − e sin E = t.
func keplerAt(t float64) [4]float64 {
	e := t
	for range 50 {
		e -= (e - eccentricity*math.Sin(e) - t) / (1 - eccentricity*math.Cos(e))
	}
	s, c := math.Sincos(e)
	b := math.Sqrt(1 - eccentricity*eccentricity)
	rate := 1 / (1 - eccentricity*c)
	return [4]float64{c - eccentricity, b * s, -s * rate, b * c * rate}
}

// fixed is a solver that takes steps of one size.
func fixed(h float64) *Solver {
	return New(4, kepler, Options{RelTol: 1e9, AbsTol: 1e9, FirstStep: h, MaxStep: h})
}

// The error of one step falls as h⁹, so that over a given time it falls as h⁸; that
// of the dense output inside the step as h⁸, one more than its order 7 (Hairer et
// al. II.5, II.6). Root mean square over steps from 100 places of an orbit.
func TestOrder(t *testing.T) {
	var end, inside [3]float64
	steps := [3]float64{0.4, 0.2, 0.1}
	got := make([]float64, 4)
	for j, h := range steps {
		for k := range 100 {
			t0 := 2 * math.Pi * float64(k) / 100
			start := keplerAt(t0)
			s := fixed(h)
			s.Reset(t0, start[:])
			if err := s.Step(t0 + 10); err != nil {
				t.Fatal(err)
			}
			for _, u := range []float64{0.15, 0.5, 0.7, 1} {
				s.At(t0+u*h, got)
				want := keplerAt(t0 + u*h)
				for i := range got {
					d := got[i] - want[i]
					if u == 1 {
						end[j] += d * d
					} else {
						inside[j] += d * d
					}
				}
			}
		}
	}
	for j := 1; j < len(steps); j++ {
		e, i := math.Log2(end[j-1]/end[j])/2, math.Log2(inside[j-1]/inside[j])/2
		t.Logf("step %g: errors fall with the power %.2f at the end, %.2f inside", steps[j], e, i)
		if math.Abs(e-9) > 0.6 || i < 7.6 {
			t.Errorf("step %g: errors fall with the power %.2f at the end (9 is due), %.2f inside (8 is due)", steps[j], e, i)
		}
	}
}

// Hairer, Nørsett, Wanner, "Solving Ordinary Differential Equations I", 2nd ed.
// 1993, II.0, equations (0.1) and (0.2): Arenstorf's orbit closes after its
// period.
func TestArenstorf(t *testing.T) {
	const (
		mu  = 0.012277471
		mu1 = 1 - mu
	)
	f := func(_ float64, y, dy []float64) {
		d1 := math.Pow((y[0]+mu)*(y[0]+mu)+y[1]*y[1], 1.5)
		d2 := math.Pow((y[0]-mu1)*(y[0]-mu1)+y[1]*y[1], 1.5)
		dy[0], dy[1] = y[2], y[3]
		dy[2] = y[0] + 2*y[3] - mu1*(y[0]+mu)/d1 - mu*(y[0]-mu1)/d2
		dy[3] = y[1] - 2*y[2] - mu1*y[1]/d1 - mu*y[1]/d2
	}
	start := []float64{0.994, 0, 0, -2.00158510637908252240537862224}
	const period = 17.0652165601579625588917206249
	for _, c := range []struct{ tol, off float64 }{{1e-7, 1e-1}, {1e-10, 1e-4}, {1e-14, 1e-7}} {
		s := New(4, f, Options{RelTol: c.tol, AbsTol: c.tol})
		y := integrate(t, s, 0, start, period)
		off := math.Hypot(y[0]-start[0], y[1]-start[1])
		t.Logf("tolerance %g: misses its start by %.2g in %+v", c.tol, off, s.Stats())
		if off > c.off {
			t.Errorf("tolerance %g: the orbit misses its start by %g", c.tol, off)
		}
	}
}

// An undamped pendulum of large swing keeps its energy to 1e-9 over 1,000
// swings at the tightest tolerance.
func TestEnergyOverThousandSwings(t *testing.T) {
	f := func(_ float64, y, dy []float64) { dy[0], dy[1] = y[1], -math.Sin(y[0]) }
	energy := func(y []float64) float64 { return y[1]*y[1]/2 + 1 - math.Cos(y[0]) }
	s := New(2, f, Options{RelTol: 1e-14, AbsTol: 1e-14})
	start := []float64{1.5, 0}
	e0, worst := energy(start), 0.0
	s.Reset(0, start)
	for s.Time() != 1000*7.3 {
		if err := s.Step(1000 * 7.3); err != nil {
			t.Fatal(err)
		}
		worst = math.Max(worst, math.Abs(energy(s.State())/e0-1))
	}
	t.Logf("relative change of energy at most %.2g in %+v", worst, s.Stats())
	if worst > 1e-9 {
		t.Errorf("the energy changes by %.2g", worst)
	}
}

// A harmonic oscillator's zeros are known, in whichever direction, forwards and
// backwards in time; two zeros inside one step are found with points inside.
func TestEventsAreFound(t *testing.T) {
	f := func(_ float64, y, dy []float64) { dy[0], dy[1] = y[1], -y[0] }
	zero := func(_ float64, y []float64) float64 { return y[0] }
	for _, c := range []struct {
		dir  Direction
		end  float64
		want []float64 // in units of π
	}{
		{Both, 10, []float64{0.5, 1.5, 2.5}},
		{Falling, 10, []float64{0.5, 2.5}},
		{Rising, 10, []float64{1.5}},
		{Both, -10, []float64{-0.5, -1.5, -2.5}},
	} {
		s := New(2, f, Options{RelTol: 1e-12, AbsTol: 1e-12})
		s.Reset(0, []float64{1, 0})
		var got []float64
		for s.Time() != c.end {
			hits, err := s.Advance(c.end, []Event{{G: zero, Direction: c.dir}})
			if err != nil {
				t.Fatal(err)
			}
			for _, h := range hits {
				got = append(got, h.T/math.Pi)
			}
		}
		if len(got) != len(c.want) {
			t.Fatalf("direction %d to %g: zeros at %v π, want %v", c.dir, c.end, got, c.want)
		}
		for i := range got {
			if math.Abs(got[i]-c.want[i]) > 1e-11 {
				t.Errorf("zero %d at %.13f π, want %g", i, got[i], c.want[i])
			}
		}
	}
	near := func(_ float64, y []float64) float64 { return y[0] + 0.999 } // both zeros within 0.09 of each other
	for inside, want := range []int{0, 1: 0, 3: 2, 9: 2} {
		if inside == 2 || (inside > 3 && inside < 9) {
			continue
		}
		s := New(2, f, Options{RelTol: 1e-4, AbsTol: 1e-4, FirstStep: 0.3, MaxStep: 0.3})
		s.Reset(math.Pi-0.15, []float64{math.Cos(math.Pi - 0.15), -math.Sin(math.Pi - 0.15)})
		hits, err := s.Advance(10, []Event{{G: near, Inside: inside}})
		if err != nil {
			t.Fatal(err)
		}
		if inside != 1 && len(hits) != want { // a point in the middle may or may not fall between
			t.Errorf("%d points inside: %d zeros found, want %d", inside, len(hits), want)
		}
	}
}

// A ball that bounces without loss: each bounce ends a step, reverses the speed
// and does not fire again at its own instant. Exact times √(8h/g)·n.
func TestTerminalEventsRestart(t *testing.T) {
	f := func(_ float64, y, dy []float64) { dy[0], dy[1] = y[1], -9.81 }
	events := []Event{{G: func(_ float64, y []float64) float64 { return y[0] }, Direction: Falling, Terminal: true}}
	s := New(2, f, Options{RelTol: 1e-10, AbsTol: 1e-10})
	y := []float64{1, 0}
	s.Reset(0, y)
	fall := math.Sqrt(2 / 9.81)
	n := 0
	for s.Time() != 20 {
		hits, err := s.Advance(20, events)
		if err != nil {
			t.Fatal(err)
		}
		for range hits {
			n++
			if want := fall * float64(2*n-1); math.Abs(s.Time()-want) > 1e-9 {
				t.Fatalf("bounce %d at %.12f, want %.12f", n, s.Time(), want)
			}
			copy(y, s.State())
			y[1] = -y[1]
			s.Reset(s.Time(), y)
		}
	}
	if want := int((20/fall + 1) / 2); n != want {
		t.Errorf("%d bounces, want %d", n, want)
	}
}

// The path gives back what the solver's dense output gave.
func TestPath(t *testing.T) {
	s := New(4, kepler, Options{RelTol: 1e-11, AbsTol: 1e-11})
	p := NewPath(4)
	s.Reset(0, keplerStart)
	for s.Time() != 20 {
		if err := s.Step(20); err != nil {
			t.Fatal(err)
		}
		p.Add(s)
	}
	y := make([]float64, 4)
	for i := range 2001 {
		at := float64(i) / 100
		p.At(at, y)
		want := keplerAt(at)
		for j := range y {
			if math.Abs(y[j]-want[j]) > 2e-8 {
				t.Fatalf("at %g: %v, want %v", at, y, want)
			}
		}
	}
}

func TestStepsAllocateNothing(t *testing.T) {
	s := New(4, kepler, Options{})
	events := []Event{{G: func(_ float64, y []float64) float64 { return y[1] }, Inside: 2}}
	s.Reset(0, keplerStart)
	if _, err := s.Advance(1e9, events); err != nil {
		t.Fatal(err)
	}
	y := make([]float64, 4)
	for range 100 { // let the list of hits grow
		if _, err := s.Advance(1e9, events); err != nil {
			t.Fatal(err)
		}
	}
	n := testing.AllocsPerRun(500, func() {
		if _, err := s.Advance(1e9, events); err != nil {
			t.Fatal(err)
		}
		s.At((s.TimeBefore()+s.Time())/2, y)
	})
	if n != 0 {
		t.Errorf("%g allocations per step", n)
	}
}

// What cannot be integrated gives an error, not a hang or a panic.
func TestErrors(t *testing.T) {
	for _, c := range []struct {
		name string
		f    Func
		opt  Options
		says string
	}{
		{"blows up", func(_ float64, y, dy []float64) { dy[0] = y[0] * y[0] }, Options{}, "t = "},
		{"no number", func(_ float64, _, dy []float64) { dy[0] = math.NaN() }, Options{}, "no number"},
		{"too many steps", func(_ float64, y, dy []float64) { dy[0] = -y[0] }, Options{MaxSteps: 3, MaxStep: 0.01}, "more than 3 steps"},
	} {
		s := New(1, c.f, c.opt)
		s.Reset(0, []float64{1})
		var err error
		for err == nil && s.Time() != 5 {
			err = s.Step(5)
		}
		if err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: error %v does not say %q", c.name, err, c.says)
		}
	}
}

// A double pendulum (two unit masses on unit strings, g = 9.81) against SciPy's
// LSODA-free reference: scipy.integrate.solve_ivp with Radau, which shares
// neither code nor method with ours.
func TestDoublePendulumAgainstSciPy(t *testing.T) {
	out := odetest.SciPy(t, `
import numpy as np
from scipy.integrate import solve_ivp
def f(t, y):
    a, b, u, v = y
    s, c = np.sin(a-b), np.cos(a-b)
    g = 9.81
    d = 2 - c*c
    du = (-g*2*np.sin(a) + g*np.sin(b)*c - s*(v*v + u*u*c)) / d
    dv = (2*s*u*u + 2*g*np.sin(a)*c - 2*g*np.sin(b) + s*c*v*v) / d
    return [u, v, du, dv]
r = solve_ivp(f, (0, 3), [1.2, -0.4, 0, 1], method='Radau', rtol=1e-11, atol=1e-12)
print(*["%.15g" % x for x in r.y[:, -1]])
`)
	f := func(_ float64, y, dy []float64) {
		a, b, u, v := y[0], y[1], y[2], y[3]
		s, c := math.Sincos(a - b)
		const g = 9.81
		d := 2 - c*c
		dy[0], dy[1] = u, v
		dy[2] = (-g*2*math.Sin(a) + g*math.Sin(b)*c - s*(v*v+u*u*c)) / d
		dy[3] = (2*s*u*u + 2*g*math.Sin(a)*c - 2*g*math.Sin(b) + s*c*v*v) / d
	}
	y := integrate(t, New(4, f, Options{RelTol: 1e-12, AbsTol: 1e-12}), 0, []float64{1.2, -0.4, 0, 1}, 3)
	for i, w := range strings.Fields(out) {
		want, err := strconv.ParseFloat(w, 64)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(y[i]-want) > 2e-8 {
			t.Errorf("component %d: %.12f, SciPy %.12f", i, y[i], want)
		}
	}
}

func BenchmarkKeplerOrbit(b *testing.B) {
	s := New(4, kepler, Options{RelTol: 1e-8, AbsTol: 1e-8})
	for b.Loop() {
		integrate(b, s, 0, keplerStart, 2*math.Pi)
	}
}
