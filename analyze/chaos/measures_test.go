package chaos

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Gottwald and Melbourne 2009: the logistic map is regular at r = 3.55 and chaotic
// at 3.97 (their figures 1 to 3), weakly chaotic at 3.6; quasi-periodic motion is
// regular.
func TestZeroOne(t *testing.T) {
	rotation := make([]float64, 2000)
	for i := range rotation {
		rotation[i] = math.Sin(2*math.Pi*float64(i)/math.Phi) + 0.5*math.Sin(math.Sqrt2*float64(i))
	}
	cases := []struct {
		name   string
		x      []float64
		lo, hi float64
	}{
		{"logistic 3.55", iterate(logistic(3.55), []float64{0.4}, 2000, 0), -0.15, 0.15},
		{"logistic 3.97", iterate(logistic(3.97), []float64{0.4}, 2000, 0), 0.95, 1.01},
		{"logistic 4", iterate(logistic(4), []float64{0.4}, 2000, 0), 0.95, 1.01},
		{"Hénon", iterate(henon, []float64{0.1, 0.1}, 2000, 0), 0.95, 1.01},
		{"Lorenz, every 0.3 s", sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 2000, 0, 0.3), 0.9, 1.01},
		{"two frequencies", rotation, -0.15, 0.15},
	}
	for _, c := range cases {
		z, err := ZeroOneTest(c.x)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-20s K = %.3f ± %.3f", c.name, z.K.V, z.K.U)
		if z.K.V < c.lo || z.K.V > c.hi {
			t.Errorf("%s: K = %v, want %v … %v", c.name, z.K, c.lo, c.hi)
		}
	}
}

// Grassberger and Procaccia 1983, table I: Hénon 1.21 ± 0.01 (by the plain method;
// 1.25 ± 0.02 with a better embedding), Lorenz 2.05 ± 0.01, logistic map at its
// accumulation point r = 3.5699456… 0.500 ± 0.005.
func TestCorrelationDimension(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	noise := make([]float64, 3000)
	for i := range noise {
		noise[i] = rng.NormFloat64()
	}
	circle := make([]float64, 4000)
	for i := range circle {
		circle[i] = math.Sin(0.2137 * float64(i))
	}
	cases := []struct {
		name        string
		x           []float64
		delay, band int
		want, tol   float64
	}{
		{"Hénon", iterate(henon, []float64{0.1, 0.1}, 10000, 0), 1, 1, 1.22, 0.04},
		{"Lorenz", sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 10000, 0, 0.1), 2, 8, 2.05, 0.08},
		{"logistic at the accumulation point", iterate(logistic(3.5699456), []float64{0.4}, 10000, 0), 1, 1, 0.5, 0.03},
		{"a circle", circle, 7, 30, 1, 0.05},
	}
	for _, c := range cases {
		d, err := CorrelationDimension(c.x, c.delay, 6, c.band)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-36s D = %.3f ± %.3f, found %v: %s; by dimension %.3v", c.name, d.D.V, d.D.U, d.Found, d.Why, d.ByDim)
		if !d.Found || math.Abs(d.D.V-c.want) > c.tol {
			t.Errorf("%s: %v, want %v ± %v: %s", c.name, d.D, c.want, c.tol, d.Why)
		}
	}
	d, err := CorrelationDimension(noise, 1, 6, 1)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("noise: found %v, %s, by dimension %.3v", d.Found, d.Why, d.ByDim)
	if d.Found {
		t.Errorf("noise has a dimension of %v: %s", d.D, d.Why)
	}
}

// The delay and the dimension of the embedding: of a sine the first minimum of the
// mutual information lies at a quarter period and two dimensions suffice; Lorenz's
// system needs three (Kennel et al. 1992, figure 3).
func TestEmbeddingChoice(t *testing.T) {
	sine := make([]float64, 5000)
	for i := range sine {
		sine[i] = math.Sin(2 * math.Pi * float64(i) / (40 * math.Phi / 1.6))
	}
	d, err := MutualInformation(sine, 0.1, 60)
	if err != nil {
		t.Fatal(err)
	}
	if d.Samples < 8 || d.Samples > 12 || math.Abs(d.S-0.1*float64(d.Samples)) > 1e-12 {
		t.Errorf("delay of a sine of 40 samples: %d (%s), %.3v", d.Samples, d.Why, d.Information[:30])
	}
	f, err := FalseNeighbours(sine, d.Samples, 8, 40)
	if err != nil {
		t.Fatal(err)
	}
	if f.Dim != 2 || !f.Clear {
		t.Errorf("dimension of a sine: %+v", f)
	}
	x := sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 6000, 0, 0.02)
	d, err = MutualInformation(x, 0.02, 60)
	if err != nil {
		t.Fatal(err)
	}
	f, err = FalseNeighbours(x, d.Samples, 8, 40)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("Lorenz: delay %d samples (%s), dimension %d, false %.3v", d.Samples, d.Why, f.Dim, f.False)
	if d.Samples < 5 || d.Samples > 12 || f.Dim != 3 {
		t.Errorf("Lorenz: delay %d, dimension %d (%v)", d.Samples, f.Dim, f.False)
	}
}
