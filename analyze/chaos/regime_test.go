package chaos

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

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
		if c.want == Beating {
			near(t, "beat period", r.BeatS.V, 2*math.Pi/(0.08*w), 0.01*2*math.Pi/(0.08*w))
		}
	}
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
	if len(r.Findings("lamp")) < 4 || len(r.Curves("lamp")) < 4 {
		t.Error("findings or curves are missing")
	}
	r, err = Assess(context.Background(), motion(rng, 12, 0.05, at))
	if err != nil {
		t.Fatal(err)
	}
	if r.Kind != Irregular || r.NeedS < 20 || !strings.Contains(r.Text, "film for") {
		t.Errorf("from 12 s: %s, %v", r.Text, r.NeedS)
	}
	m := motion(rng, 140, 0.05, at)
	m.Never = "one part on a hinge that nothing drives"
	if r, err = Assess(context.Background(), m); err != nil {
		t.Fatal(err)
	}
	if r.Kind != Irregular || !strings.Contains(r.Text, "not chaotic") {
		t.Errorf("a toy that cannot be chaotic: %s", r.Text)
	}
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
