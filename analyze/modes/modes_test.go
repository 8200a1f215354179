package modes

import (
	"errors"
	"math"
	"math/rand/v2"
	"path/filepath"
	"testing"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// series samples y(t) of several bobs with noise.
func series(rng *rand.Rand, n int, rate, sigma float64, names []string, y func(t float64, dst []float64)) []Bob {
	bobs := make([]Bob, len(names))
	v := make([]float64, len(names))
	for i := range n {
		t := (float64(i) + 0.1*(rng.Float64()-0.5)) / rate // a phone's uneven frames
		y(t, v)
		for b := range bobs {
			bobs[b].Name = names[b]
			bobs[b].T = append(bobs[b].T, t)
			bobs[b].Y = append(bobs[b].Y, v[b]+sigma*rng.NormFloat64())
			bobs[b].U = append(bobs[b].U, sigma)
		}
	}
	return bobs
}

// bound is the Cramér–Rao bound of the frequencies (Hz) of the sum of sinusoids
// Σ A_k exp(−d_k t) cos(2π f_k t + φ_k) in white noise: the inverse of the Fisher
// matrix (S. M. Kay, "Fundamentals of Statistical Signal Processing: Estimation
// Theory", 1993, chapter 3), here by plain differences and Gauss–Jordan, apart
// from the program's own way.
func bound(t []float64, sigma float64, p []float64) []float64 {
	f := func(p []float64, t float64) float64 {
		y := p[0]
		for k := 1; k < len(p); k += 4 {
			y += p[k] * math.Exp(-p[k+1]*t) * math.Cos(2*math.Pi*p[k+2]*t+p[k+3])
		}
		return y
	}
	n := len(p)
	a := make([][]float64, n)
	for i := range a {
		a[i] = make([]float64, 2*n)
		a[i][n+i] = 1
	}
	g := make([]float64, n)
	q := append([]float64(nil), p...)
	for _, s := range t {
		for i := range p {
			const h = 1e-6
			q[i] = p[i] + h
			up := f(q, s)
			q[i] = p[i] - h
			g[i] = (up - f(q, s)) / (2 * h)
			q[i] = p[i]
		}
		for i := range g {
			for k := range g {
				a[i][k] += g[i] * g[k] / (sigma * sigma)
			}
		}
	}
	for c := range n {
		piv := c
		for r := c; r < n; r++ {
			if math.Abs(a[r][c]) > math.Abs(a[piv][c]) {
				piv = r
			}
		}
		a[c], a[piv] = a[piv], a[c]
		x := a[c][c]
		for k := range a[c] {
			a[c][k] /= x
		}
		for r := range a {
			if r == c {
				continue
			}
			x := a[r][c]
			for k := range a[r] {
				a[r][k] -= x * a[c][k]
			}
		}
	}
	var out []float64
	for k := 1; k < n; k += 4 {
		out = append(out, math.Sqrt(a[k+2][n+k+2]))
	}
	return out
}

// Two frequencies 0.3/T apart at 30 dB (power of the weaker line over that of the
// noise in one sample) come apart, with errors near the bound.
func TestCloseModesReachTheBound(t *testing.T) {
	const seconds, rate = 20.0, 60.0
	const f1 = 1.5
	f2 := f1 + 0.3/seconds
	sigma := math.Sqrt(0.5 / 1000)
	truth := []float64{0, 1, 0.02, f1, 0.4, 1, 0.03, f2, 1.9}
	rng := rand.New(rand.NewPCG(5, 3))
	const runs = 24
	var times []float64
	sum, z := [2]float64{}, 0.0
	found := 0
	for range runs {
		bobs := series(rng, int(seconds*rate), rate, sigma, []string{"bob"}, func(s float64, dst []float64) {
			dst[0] = 0
			for k := 1; k < len(truth); k += 4 {
				dst[0] += truth[k] * math.Exp(-truth[k+1]*s) * math.Cos(2*math.Pi*truth[k+2]*s+truth[k+3])
			}
		})
		times = bobs[0].T
		r, err := Analyze(t.Context(), bobs, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if len(r.Modes) != 2 {
			continue
		}
		found++
		for k, f := range []float64{f1, f2} {
			e := r.Modes[k].Frequency - f
			sum[k] += e * e
			z += e * e / (r.Modes[k].UFrequency * r.Modes[k].UFrequency)
		}
	}
	b := bound(times, sigma, truth)
	if found < runs-1 {
		t.Errorf("two modes in %d of %d clips", found, runs)
	}
	for k := range b {
		rms := math.Sqrt(sum[k] / float64(found))
		t.Logf("mode %d: r.m.s. error %.3g Hz, bound %.3g Hz, ratio %.2f", k+1, rms, b[k], rms/b[k])
		// 24 errors: the ratio's own scatter is 14 %.
		if rms > 1.4*b[k] {
			t.Errorf("mode %d: r.m.s. error %.3g Hz is %.2f times the bound", k+1, rms, rms/b[k])
		}
	}
	if z = math.Sqrt(z / float64(2*found)); z < 0.75 || z > 1.3 {
		t.Errorf("errors are %.2f times the stated uncertainties", z)
	}
}

// Two equal pendulums joined by a weak spring: modes ω₀ in step and √(ω₀²+2κ)
// against each other (any textbook of mechanics, e.g. Landau and Lifshitz,
// Mechanics, § 23), beat 2π/(ω₂−ω₁), all energy wanders.
func TestTwoCoupledPendulums(t *testing.T) {
	const w0, kappa, seconds = 2 * math.Pi * 1.1, 1.4, 25.0
	w2 := math.Sqrt(w0*w0 + 2*kappa)
	rng := rand.New(rand.NewPCG(1, 2))
	bobs := series(rng, 1500, 60, 1e-3, []string{"left", "right"}, func(s float64, dst []float64) {
		a, b := 0.1*math.Cos(w0*s), 0.1*math.Cos(w2*s)
		dst[0], dst[1] = a+b, a-b
	})
	r, err := Analyze(t.Context(), bobs, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(r.Modes) != 2 || len(r.Beats) != 1 || len(r.Couplings) != 1 {
		t.Fatalf("%d modes, %d beats, %d couplings", len(r.Modes), len(r.Beats), len(r.Couplings))
	}
	within := func(what string, got, u, want float64) {
		t.Helper()
		if math.Abs(got-want) > 4*u || !(u > 0) {
			t.Errorf("%s: %g ± %g, want %g", what, got, u, want)
		}
	}
	m := r.Modes
	within("slow mode", m[0].Frequency, m[0].UFrequency, w0/(2*math.Pi))
	within("fast mode", m[1].Frequency, m[1].UFrequency, w2/(2*math.Pi))
	for b, want := range []float64{1, 1} {
		if m[0].URatio[b] > 0 {
			within("slow shape", m[0].Ratio[b], m[0].URatio[b], want)
		}
	}
	if m[1].Ratio[0]*m[1].Ratio[1] > -0.98 {
		t.Errorf("fast shape %v", m[1].Ratio)
	}
	within("beat", r.Beats[0].Period, r.Beats[0].U, 2*math.Pi/(w2-w0))
	within("coupling", r.Couplings[0].Hz, r.Couplings[0].U, (w2-w0)/(2*math.Pi))
	if r.Wandering < 0.99 {
		t.Errorf("%.3f of the energy wanders", r.Wandering)
	}
	// The left one was pushed: it gives first, for half a beat.
	e := r.Exchanges[0]
	if half := math.Pi / (w2 - w0); r.Bobs[e.Giver] != "left" || math.Abs(e.ToS-half) > 0.1*half {
		t.Errorf("first exchange %+v, want left gives until %g s", e, half)
	}
	if fs := r.Findings(); len(fs) < 8 {
		t.Errorf("%d findings", len(fs))
	}
}

// The buoys, as the model moves them at a nod of 2° (where it is linear), with
// noise: frequencies and beat within 1 % of the model's own modes.
func TestBuoysBeatAsTheModelSays(t *testing.T) {
	bobs, m := buoys(t, 2, 30)
	rest, _ := m.SettlesAt(m.Rest())
	modes := m.Modes(rest.State)
	r, err := Analyze(t.Context(), bobs, Options{Unit: "rad", Quantity: "angle", ShowUnit: "°", ShowFactor: 180 / math.Pi})
	if err != nil {
		t.Fatal(err)
	}
	if len(r.own()) != 3 {
		t.Fatalf("%d modes, want 3: %+v", len(r.own()), r.Modes)
	}
	for i, k := range r.own() {
		t.Logf("mode %d: %.5f ± %.5f Hz, model %.5f; ζ %.5f ± %.5f, model %.5f", i+1, r.Modes[k].Frequency, r.Modes[k].UFrequency, modes[i].Frequency, r.Modes[k].Zeta, r.Modes[k].UZeta, modes[i].Zeta)
		if math.Abs(r.Modes[k].Frequency/modes[i].Frequency-1) > 0.002 {
			t.Errorf("mode %d: %.5f Hz, model %.5f Hz", i+1, r.Modes[k].Frequency, modes[i].Frequency)
		}
	}
	if len(r.Beats) == 0 || t.Failed() {
		t.Fatal("no beat to compare")
	}
	for _, b := range r.Beats {
		first, second := r.number(b.First), r.number(b.Second)
		want := 1 / (modes[second-1].Frequency - modes[first-1].Frequency)
		t.Logf("beat of modes %d and %d: %.3f ± %.3f s, model %.3f", first, second, b.Period, b.U, want)
		if math.Abs(b.Period/want-1) > 0.01 {
			t.Errorf("beat %.3f s, model %.3f s", b.Period, want)
		}
	}
}

// buoys simulates the port buoy let go at an angle.
func buoys(t *testing.T, deg, seconds float64) ([]Bob, *toy.Model) {
	t.Helper()
	r, err := rig.Load(filepath.Join("..", "..", "samples", "buoys.toml"))
	if err != nil {
		t.Fatal(err)
	}
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	rest, ok := m.SettlesAt(m.Rest())
	if !ok {
		t.Fatal("the buoys do not settle")
	}
	y := append([]float64(nil), rest.State...)
	a0, _ := m.Angle(y, 0)
	m.SetAngle(y, 0, a0-deg*math.Pi/180, 0)
	path, err := m.Simulate(t.Context(), y, seconds, toy.Options{Tol: 1e-9})
	if err != nil {
		t.Fatal(err)
	}
	state := make([]float64, len(y))
	bobs := series(rand.New(rand.NewPCG(7, 7)), int(60*seconds), 60, 2e-4, m.Parts(), func(s float64, dst []float64) {
		path.At(math.Max(0, math.Min(s, seconds)), state)
		for k := range dst {
			dst[k], _ = m.Angle(state, k)
		}
	})
	return bobs, m
}

// Noise alone, and a frequency that runs away, have no modes; the error says so.
func TestNoModes(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 9))
	bobs := series(rng, 600, 60, 1, []string{"a", "b"}, func(_ float64, dst []float64) { dst[0], dst[1] = 0, 0 })
	if _, err := Analyze(t.Context(), bobs, Options{}); !errors.Is(err, ErrNoModes) {
		t.Errorf("noise: %v", err)
	}
	bobs = series(rng, 1200, 60, 1e-3, []string{"a"}, func(s float64, dst []float64) { dst[0] = math.Sin(2 * math.Pi * (s + 0.2*s*s)) })
	if _, err := Analyze(t.Context(), bobs, Options{}); !errors.Is(err, ErrNoModes) {
		t.Errorf("chirp: %v", err)
	}
	bad := []Bob{{Name: "a", T: make([]float64, 40), Y: make([]float64, 40)}}
	if _, err := Analyze(t.Context(), bad, Options{}); err == nil {
		t.Error("times that stand still were taken")
	}
}
