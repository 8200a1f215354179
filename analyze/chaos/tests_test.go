package chaos

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// Surrogates have the spectrum of the series and nearly its values.
func TestSurrogateProperties(t *testing.T) {
	x := iterate(henon, []float64{0.1, 0.1}, 1024, 0)
	m := newSurrogateMaker(x)
	y := m.make(rand.New(rand.NewPCG(1, 2)))
	a, b := slices.Clone(x), slices.Clone(y)
	slices.Sort(a)
	slices.Sort(b)
	worst := 0.0
	for i := range a {
		worst = max(worst, math.Abs(a[i]-b[i]))
	}
	if worst > 0.1 {
		t.Errorf("the values are not those of the series: %v off", worst)
	}
	if slices.Equal(x, y) {
		t.Error("the surrogate is the series itself")
	}
	mean, _ := meanSD(x)
	auto := func(x []float64, lag int) float64 {
		s, v := 0.0, 0.0
		for i := range x {
			s += (x[i] - mean) * (x[(i+lag)%len(x)] - mean)
			v += (x[i] - mean) * (x[i] - mean)
		}
		return s / v
	}
	for lag := 1; lag < 20; lag++ {
		near(t, "autocorrelation", auto(y, lag), auto(x, lag), 1e-6)
	}
}

// Linear noise, strongly resonant and seen through a curve, is hardly ever
// rejected; chaos is.
func TestSurrogateTest(t *testing.T) {
	ctx := context.Background()
	rng := rand.New(rand.NewPCG(3, 4))
	runs, rejected := 24, 0
	for r := range runs {
		x, y, z := make([]float64, 600), 0.0, 0.0
		for i := range x {
			y, z = 1.6*y-0.8*z+rng.NormFloat64(), y // a damped swing driven by noise
			x[i] = y + 0.02*y*y*y
		}
		s, err := SurrogateTest(ctx, x, SurrogateOptions{Dim: 3, Delay: 2, Band: 10, Count: 19, Seed: uint64(r)})
		if err != nil {
			t.Fatal(err)
		}
		if s.Rejected {
			rejected++
		}
	}
	share := float64(rejected) / float64(runs)
	t.Logf("noise is rejected in %.0f %% of %d cases", 100*share, runs)
	if share > 0.025+3*math.Sqrt(0.025*0.975/float64(runs)) {
		t.Errorf("noise is rejected in %.0f %%", 100*share)
	}
	for _, c := range []struct {
		name       string
		x          []float64
		dim, delay int
	}{
		{"Hénon", iterate(henon, []float64{0.1, 0.1}, 1000, 0), 2, 1},
		{"Lorenz", sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 2000, 0, 0.1), 3, 2},
	} {
		s, err := SurrogateTest(ctx, c.x, SurrogateOptions{Dim: c.dim, Delay: c.delay, Band: 8})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: %s, z = %.1f", c.name, s.Why, s.Z)
		if !s.Rejected || s.Z < 5 {
			t.Errorf("%s is not told from noise: %+v", c.name, s)
		}
	}
}

// Passes and turning points of a swing come where they are known to be.
func TestCut(t *testing.T) {
	const n, dt, w = 600, 1. / 60, 5.7
	at, x, rate := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range at {
		at[i] = dt * float64(i)
		x[i], rate[i] = math.Sin(w*at[i]), w*math.Cos(w*at[i])
	}
	s, err := Cut(at, [][]float64{x, rate}, 0, 0, Up)
	if err != nil {
		t.Fatal(err)
	}
	if len(s.T) != 9 {
		t.Fatalf("%d passes to the right, want 9: %v", len(s.T), s.T)
	}
	for k, tk := range s.T {
		near(t, "pass", tk, 2*math.Pi*float64(k+1)/w, 1e-5)
		near(t, "rate at the pass", s.Values[k][1], w, 1e-4)
	}
	turns, err := Cut(at, [][]float64{x, rate}, 1, 0, Both)
	if err != nil {
		t.Fatal(err)
	}
	for k, tk := range turns.T {
		near(t, "turning point", tk, math.Pi*(float64(k)+0.5)/w, 1e-5)
		near(t, "angle there", math.Abs(turns.Values[k][0]), 1, 5e-6)
	}
	// Over a gap nothing is claimed.
	x[100], rate[100] = math.NaN(), math.NaN()
	gone := append(append([]float64{}, at[:300]...), at[330:]...)
	gx := append(append([]float64{}, x[:300]...), x[330:]...)
	g, err := Cut(gone, [][]float64{gx}, 0, 0, Both)
	if err != nil {
		t.Fatal(err)
	}
	for _, tk := range g.T {
		if tk > at[299] && tk < at[330] {
			t.Errorf("a crossing at %v s, within the gap", tk)
		}
	}
	if _, err := Cut(at, [][]float64{x[1:]}, 0, 0, Up); err == nil {
		t.Error("a column of another length was taken")
	}
}
