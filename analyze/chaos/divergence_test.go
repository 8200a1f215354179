package chaos

import (
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/recurrence"
)

func embed(t testing.TB, x []float64, step float64, dim, delay int) recurrence.Vectors {
	t.Helper()
	v, err := recurrence.Embed(0, step, dim, delay, x)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// Exponents from data against those from the equations (TestPublishedExponents),
// within 20 % from 100 orbits or more.
func TestExponentFromData(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	noisy := func(x []float64, share float64) []float64 {
		_, sd := meanSD(x)
		out := make([]float64, len(x))
		for i, v := range x {
			out[i] = v + share*sd*rng.NormFloat64()
		}
		return out
	}
	cases := []struct {
		name       string
		x          []float64
		step       float64
		dim, delay int
		period     float64
		want       float64
	}{
		{"logistic map", iterate(logistic(4), []float64{0.3123}, 1000, 0), 1, 1, 1, 1, 0.6931},
		{"Hénon map", iterate(henon, []float64{0.1, 0.1}, 1500, 0), 1, 2, 1, 1, 0.4192},
		{"Hénon map, noise 0.1 %", noisy(iterate(henon, []float64{0.1, 0.1}, 3000, 0), 0.001), 1, 2, 1, 1, 0.4192},
		{"Lorenz (16, 45.92, 4)", sample(t, lorenz(16, 45.92, 4), []float64{1, 1, 40}, 5000, 0, 0.01), 0.01, 5, 11, 43, 1.50},
		{"Lorenz (10, 28, 8/3)", sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 5000, 0, 0.02), 0.02, 4, 8, 37, 0.9056},
		{"Lorenz (10, 28, 8/3), noise 1 %", noisy(sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 10000, 0, 0.02), 0.01), 0.02, 5, 8, 37, 0.9056},
		{"Rössler (0.2, 0.2, 5.7)", sample(t, rossler(0.2, 0.2, 5.7), []float64{1, 1, 1}, 6000, 0, 0.15), 0.15, 4, 9, 39, 0.0714},
		{"Rössler (0.15, 0.2, 10)", sample(t, rossler(0.15, 0.2, 10), []float64{1, 1, 1}, 6000, 0, 0.15), 0.15, 4, 9, 40, 0.089},
	}
	for _, c := range cases {
		{
			d, err := Diverge(embed(t, c.x, c.step, c.dim, c.delay), DivergenceOptions{Period: c.period})
			if err != nil {
				t.Fatal(err)
			}
			t.Logf("%-34s %.4g ± %.2g, from the equations %.4g (%+.0f %%), %.0f orbits, %s", c.name, d.Exponent.V, d.Exponent.U, c.want, 100*(d.Exponent.V/c.want-1), d.Orbits, d.Why)
			if !d.Found || math.Abs(d.Exponent.V-c.want) > 0.2*c.want {
				t.Errorf("%s: %v, want %v within 20 %%; found %v: %s", c.name, d.Exponent, c.want, d.Found, d.Why)
			}
		}
	}
}

// Motion that is not chaotic: no exponent is found.
func TestNoExponent(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	const n = 6000
	make1 := func(f func(i float64) float64, noise float64) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = f(float64(i)) + noise*rng.NormFloat64()
		}
		return x
	}
	steady := func(i float64) float64 { return math.Sin(0.21 * i) }
	quasi := func(i float64) float64 { return math.Sin(0.21*i) + 0.6*math.Sin(0.21*i*(math.Sqrt2-0.3)+1) }
	beat := func(i float64) float64 { return math.Sin(0.21*i) * (1 + 0.9*math.Cos(0.0043*i)) }
	for _, c := range []struct {
		name string
		x    []float64
	}{
		{"steady", make1(steady, 0)},
		{"steady, noise 1 %", make1(steady, 0.007)},
		{"quasi-periodic", make1(quasi, 0)},
		{"quasi-periodic, noise 1 %", make1(quasi, 0.008)},
		{"beating", make1(beat, 0)},
		{"beating, noise 1 %", make1(beat, 0.007)},
	} {
		{
			d, err := Diverge(embed(t, c.x, 0.02, 4, 7), DivergenceOptions{Period: 30})
			if err != nil {
				t.Fatal(err)
			}
			t.Logf("%-28s found %v, %v, %s", c.name, d.Found, d.Exponent, d.Why)
			if d.Found {
				t.Errorf("%s: an exponent of %v was found: %s", c.name, d.Exponent, d.Why)
			}
		}
	}
}
