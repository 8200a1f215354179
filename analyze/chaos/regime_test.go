package chaos

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
)

var long = flag.Bool("long", false, "run the full Monte Carlo counts")

// motion samples f at 60 Hz with noise, one sample in fifty missing.
func motion(rng *rand.Rand, seconds, noise float64, f func(t float64) []float64) Motion {
	m := Motion{U: noise}
	for i := range int(seconds * 60) {
		t := float64(i) / 60
		y := f(t)
		if m.Columns == nil {
			m.Columns = make([][]float64, len(y))
		}
		m.T = append(m.T, t)
		gone := rng.Float64() < 0.02
		for k, v := range y {
			v += noise * rng.NormFloat64()
			if gone {
				v = math.NaN()
			}
			m.Columns[k] = append(m.Columns[k], v)
		}
	}
	return m
}

// Motions that are what they are by construction.
func TestRegimesByConstruction(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	w := 2 * math.Pi * 0.93
	cases := []struct {
		want    Kind
		seconds float64
		never   string
		f       func(t float64) []float64
	}{
		{AtRest, 10, "", func(float64) []float64 { return []float64{0.2} }},
		{Steady, 30, "", func(t float64) []float64 { return []float64{0.4 * math.Sin(w*t)} }},
		{Decaying, 30, "", func(t float64) []float64 { return []float64{0.4 * math.Exp(-0.05*t) * math.Sin(w*t)} }},
		{Decaying, 30, "", func(t float64) []float64 { return []float64{0.4 * max(0, 1-t/32) * math.Sin(w*t)} }},
		{Growing, 30, "", func(t float64) []float64 { return []float64{0.4 * (1 - 0.8*math.Exp(-0.1*t)) * math.Sin(w*t)} }},
		{Beating, 60, "", func(t float64) []float64 {
			return []float64{0.3*math.Sin(w*t) + 0.2*math.Sin(1.08*w*t), 0.3*math.Sin(w*t) - 0.2*math.Sin(1.08*w*t)}
		}},
		{QuasiPeriodic, 60, "", func(t float64) []float64 {
			return []float64{0.3*math.Sin(w*t) + 0.2*math.Sin(1.618*w*t+1)}
		}},
		{IntoStep, 60, "", func(t float64) []float64 {
			if t < 25 {
				return []float64{0.4 * math.Sin(w*t+2*math.Sin(1.3*t*t/10)+3*math.Sin(0.71*w*t)), 0.2 * math.Sin(2.3*w*t+t*t/20)}
			}
			return []float64{0.4*math.Sin(w*t) + 0.1*math.Sin(w*t/2), 0.2 * math.Sin(w*t/2)}
		}},
		{Unknown, 3, "", func(t float64) []float64 { return []float64{0.4 * math.Sin(w*t)} }},
	}
	for _, c := range cases {
		r, err := Assess(context.Background(), motion(rng, c.seconds, 0.002, c.f))
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-16s %.2f %s %v", r.Kind, r.Confidence, r.Text, r.Evidence)
		if r.Kind != c.want || r.Text == "" {
			t.Errorf("told %q (%s), want %q: %v", r.Kind, r.Text, c.want, r.Evidence)
		}
		if c.want == Unknown {
			if f := r.Findings("lamp")[0]; f.Kind != finding.Undecided || !strings.Contains(f.Text, "Film for about") || strings.Contains(f.Text, "Confidence") {
				t.Errorf("too short a clip is told %q", f.Text)
			}
		}
		if c.want == Beating {
			near(t, "beat period", r.BeatS.V, 2*math.Pi/(0.08*w), 0.01*2*math.Pi/(0.08*w))
		}
	}
}

// evenTimes are n times at 60 a second.
func evenTimes(n int) []float64 {
	t := make([]float64, n)
	for i := range t {
		t[i] = float64(i) / 60
	}
	return t
}

// Lorenz's system as a toy: chaotic from enough passes, irregular with the time
// to film from fewer, never chaotic when the rig says it cannot be.
func TestRegimeOfChaos(t *testing.T) {
	x := sample(t, lorenz(10, 28, 8./3), []float64{1, 1, 20}, 9000, 2, 0.02)
	rng := rand.New(rand.NewPCG(3, 4))
	at := func(t float64) []float64 { return []float64{x[int(math.Round(t*60))]} }
	r, err := Assess(context.Background(), motion(rng, 140, 0.05, at))
	if err != nil {
		t.Fatal(err)
	}
	t.Log(r.Text, r.Confidence, r.Evidence)
	if r.Kind != Chaotic {
		t.Errorf("%s: %v", r.Text, r.Evidence)
	}
	if len(r.Findings("lamp")) < 4 || len(r.Curves("lamp")) < 2 {
		t.Error("findings or curves are missing")
	}
	// White noise is irregular, and nothing more.
	white := make([]float64, 6000)
	for i := range white {
		white[i] = rng.NormFloat64()
	}
	if r, err = Assess(context.Background(), Motion{T: evenTimes(6000), Columns: [][]float64{white}, U: 0.01}); err != nil || r.Kind != Irregular {
		t.Errorf("white noise: %v, %v", r, err)
	}
	r, err = Assess(context.Background(), motion(rng, 12, 0.05, at))
	if err != nil {
		t.Fatal(err)
	}
	if r.Kind != Irregular || r.NeedS < 20 || !strings.Contains(r.Text, "film for") {
		t.Errorf("from 12 s: %s, %v", r.Text, r.NeedS)
	}
	m := motion(rng, 140, 0.05, at)
	m.Never = "one part on one hinge that no coil drives cannot be"
	if r, err = Assess(context.Background(), m); err != nil {
		t.Fatal(err)
	}
	if r.Kind != Irregular || !strings.Contains(r.Text, "not chaotic") {
		t.Errorf("a toy that cannot be chaotic: %s", r.Text)
	}
}

// The toys of the demo workshop and two that are chaotic, from what a camera sees of their bobs.
func TestRegimesOfToys(t *testing.T) {
	cases := []struct {
		name          string
		from, seconds float64
		want          Kind
	}{
		{"gull", 0, 40, Growing},
		{"gull", 200, 30, Steady},
		{"buoys", 0, 20, Beating},
		{"lantern", 0, 20, Decaying},
		{"lantern-magnet-out", 0, 20, Decaying},
		// Launched in a wide circle it goes round in order for a minute, then darts.
		{"lantern-ball", 0, 30, Decaying},
		{"lantern-ball", 90, 60, IrregularDecaying},
		{"lantern-ball", 0, 150, IrregularDecaying}, // ordered for more than half of it
		{"restless", 60, 30, Irregular},
		{"thrown", 60, 120, Chaotic},
	}
	for _, c := range cases {
		path := harbour(c.name)
		if c.name == "restless" || c.name == "thrown" {
			path = filepath.Join("testdata", c.name+".toml")
		}
		m, start := openToy(t, path)
		never := Never(openRig(t, path))
		rng := rand.New(rand.NewPCG(5, 6))
		seen := watch(t, m, start, c.from, 1./60, int(60*c.seconds))
		see := Motion{U: 1e-4, Never: never, Undriven: len(openRig(t, path).Coils) == 0}
		for i, p := range seen {
			see.T = append(see.T, float64(i)/60)
			k := 0
			for _, q := range p {
				for _, v := range []float64{q[0], q[2] + 0.5*q[1]} { // from above at 30°
					if i == 0 {
						see.Columns = append(see.Columns, nil)
					}
					see.Columns[k] = append(see.Columns[k], v+1e-4*rng.NormFloat64())
					k++
				}
			}
		}
		r, err := Assess(context.Background(), see)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s, %.0f s: %s %.2f %s\n   %s", c.name, c.seconds, r.Kind, r.Confidence, r.Text, strings.Join(r.Evidence, "; "))
		if r.Kind != c.want {
			t.Errorf("%s: told %q, want %q", c.name, r.Kind, c.want)
		}
	}
}

// Noise of a hundredth of the amplitude never makes a regular motion chaotic. With
// -long, of 1,000 motions (250 of each kind) none was told chaotic or irregular;
// steady, decaying and beating were all told right; of the quasi-periodic 127 were
// told so, 73 beating (their lines lie near), 50 steady (they nearly repeat).
func TestNoiseIsNotChaos(t *testing.T) {
	runs := 8
	if *long {
		runs = 250
	}
	rng := rand.New(rand.NewPCG(7, 8))
	told := map[string]map[Kind]int{}
	for range runs {
		w := 2 * math.Pi * (0.7 + 0.6*rng.Float64())
		ratio, share := 1.02+0.2*rng.Float64(), 0.2+0.6*rng.Float64()
		other, die := 1.3+rng.Float64(), 0.005+0.03*rng.Float64()
		for name, f := range map[string]func(t float64) []float64{
			"steady":         func(t float64) []float64 { return []float64{math.Sin(w*t) + 0.02*math.Sin(3*w*t)} },
			"decaying":       func(t float64) []float64 { return []float64{math.Exp(-die*t) * math.Sin(w*t)} },
			"beating":        func(t float64) []float64 { return []float64{math.Sin(w*t) + share*math.Sin(ratio*w*t)} },
			"quasi-periodic": func(t float64) []float64 { return []float64{math.Sin(w*t) + share*math.Sin(other*w*t)} },
		} {
			r, err := Assess(context.Background(), motion(rng, 120, 0.01, f))
			if err != nil {
				t.Fatal(err)
			}
			if told[name] == nil {
				told[name] = map[Kind]int{}
			}
			told[name][r.Kind]++
			if r.Kind == Chaotic {
				t.Errorf("%s is told chaotic: %v", name, r.Evidence)
			}
		}
	}
	for name, kinds := range told {
		t.Logf("%-16s told %v", name, kinds)
		if kinds[Irregular] > runs/8 {
			t.Errorf("%s: %d of %d told irregular", name, kinds[Irregular], runs)
		}
	}
}

// States of a swing of 200 samples a second, thinned: two numbers of size one, and
// a full turn apart they are the same.
func TestStates(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 10))
	m := motion(rng, 60, 0.0005, func(t float64) []float64 { return []float64{0.3 * math.Sin(2*math.Pi*t), 0} })
	e, err := States(context.Background(), m, 1000)
	if err != nil {
		t.Fatal(err)
	}
	v := e.States
	near(t, "period", e.PeriodS, 1, 0.01)
	turn := int(math.Round(1 / v.Step))
	if v.N > 1000 || v.N < 800 || v.Dim != 4 {
		t.Fatalf("%d states of dimension %d", v.N, v.Dim)
	}
	for i := 0; i+turn < v.N; i += 50 {
		a, b := v.State(i), v.State(i+turn)
		near(t, "a turn later", b[0], a[0], 0.1)
	}
	near(t, "size", math.Hypot(v.State(0)[0], v.State(int(math.Round(0.25 / v.Step)))[0]), math.Sqrt2, 0.15)
}

func TestAssessBadInput(t *testing.T) {
	for _, m := range []Motion{
		{},
		{T: []float64{1, 2, 3, 4, 5, 6, 7, 8}, Columns: [][]float64{{1, 2}}},
		{T: []float64{1, 2, 3, 4, 5, 6, 7, 7}, Columns: [][]float64{{1, 2, 3, 4, 5, 6, 7, 8}}},
		{T: []float64{1, 2, 3, 4, 5, 6, 7, 8}, Columns: [][]float64{{math.NaN(), 2, math.NaN(), 4, 5, 6, 7, 8}}},
	} {
		if r, err := Assess(context.Background(), m); err == nil {
			t.Errorf("%v was judged: %v", m, r)
		}
	}
}
