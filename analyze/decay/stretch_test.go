package decay

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
)

// clipOf makes an angle series of pieces, each told by a function of its own
// time, at 60 frames/s with white noise.
func clipOf(t *testing.T, rng *rand.Rand, sigma float64, pieces ...[]float64) series.Angle {
	t.Helper()
	var ts, ys, us []float64
	for _, p := range pieces {
		for _, y := range p {
			ts = append(ts, float64(len(ts))/60)
			ys = append(ys, y+sigma*rng.NormFloat64())
			us = append(us, sigma)
		}
	}
	a, err := series.FromTable("arm", ts, ys, us)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// free is a free decay without noise.
func free(seconds float64, p ...float64) []float64 {
	tr := truth{m: model{sine: true, law: viscous}, p: p, dt: 1.0 / 60, n: int(60 * seconds)}
	_, ys := tr.record(rand.New(rand.NewPCG(0, 0)))
	return ys
}

// held is a hand that holds still, with the tremor of a hand (about 9 Hz).
func held(rng *rand.Rand, seconds, at, tremor float64) []float64 {
	out := make([]float64, int(60*seconds))
	x, v := 0.0, 0.0
	for i := range out {
		v = 0.9*v - 0.9*x + tremor*rng.NormFloat64()
		x += v
		out[i] = at + x
	}
	return out
}

const simK = 32.0 // s⁻², T₀ = 1.1107 s

func near(t *testing.T, f finding.Finding, want, sigmas float64) {
	t.Helper()
	if math.IsNaN(f.Value) || math.Abs(f.Value-want) > sigmas*f.U {
		t.Errorf("%s = %.7g ± %.2g, true %.7g", f.Key, f.Value, f.U, want)
	}
}

func analyze(t *testing.T, a series.Angle, o Options) *Result {
	t.Helper()
	a.UClock = 0
	r, err := Analyze(context.Background(), a, o)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("found %v, %.2f … %.2f s, %.1f swings, law %s (%v), cautions %q", r.Found, r.FromS, r.ToS, r.Swings, r.Law, r.Decided, r.Cautions)
	if !r.Found {
		t.Log(r.Findings[0].Text)
	}
	return r
}

var t0 = 2 * math.Pi / math.Sqrt(simK)

// A hand holds, lets go, and catches the swing again.
func TestHandHoldsAndCatches(t *testing.T) {
	for seed := range uint64(6) {
		rng := rand.New(rand.NewPCG(seed, 11))
		swing := free(22, 0.6, 0, 0, simK, 0.06)
		catch := make([]float64, 60)
		last := swing[len(swing)-1]
		for i := range catch {
			catch[i] = last * math.Exp(-float64(i)/4)
		}
		a := clipOf(t, rng, 0.002, held(rng, 2.5, 0.6, 0.001), swing, catch, held(rng, 3, 0, 0.0005))
		r := analyze(t, a, Options{})
		if r.FromS < 2.45 || r.FromS > 2.5+t0 {
			t.Errorf("the decay begins at 2.5 s, found %.2f", r.FromS)
		}
		if r.ToS > 24.65 || r.ToS < 24.5-t0 {
			t.Errorf("the hand comes at 24.5 s, found %.2f", r.ToS)
		}
		near(t, byKey(t, r, "decay.period_zero"), t0, 3)
		near(t, byKey(t, r, "decay.zeta"), zetaOf(0.06, r.Amplitude), 3)
	}
}

// zetaOf is the truth for viscous friction alone.
func zetaOf(c1, amplitude float64) float64 {
	return zetaAt(amplitude)(model{sine: true, law: viscous}, []float64{0, 0, 0, simK, c1})
}

// A push in the middle, large or small, parts the clip: one side is used.
func TestPushInTheMiddle(t *testing.T) {
	for _, push := range []float64{1.0, 0.3, 0.1, 0.03, -0.03, -0.1, -0.2, -0.5} {
		rng := rand.New(rand.NewPCG(5, 12))
		tr := truth{m: model{sine: true, law: viscous}, p: []float64{0.5, 0, 0, simK, 0.05}, dt: 1.0 / 60, n: 600}
		_, first := tr.record(rng)
		mv := newMover(tr.m, false)
		if err := mv.run(tr.p, 0, []float64{10}, make([]float64, 1), nil, nil); err != nil {
			t.Fatal(err)
		}
		second := free(20, mv.last[0], mv.last[1]*(1+push), 0, simK, 0.05)
		r := analyze(t, clipOf(t, rng, 0.001, first, second), Options{})
		if r.FromS < 9.9 && r.ToS > 10.1 {
			t.Errorf("push of %g %% at 10 s lies in the stretch %.2f … %.2f s", 100*push, r.FromS, r.ToS)
		}
		near(t, byKey(t, r, "decay.period_zero"), t0, 3)
		near(t, byKey(t, r, "decay.zeta"), zetaOf(0.05, r.Amplitude), 3)
	}
}

// The swing sinks into the noise, or dry friction stops it: the rest of the clip
// does no harm.
func TestEndInNoise(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 13))
	r := analyze(t, clipOf(t, rng, 0.01, free(60, 0.5, 0, 0.01, simK, 0.3)), Options{})
	near(t, byKey(t, r, "decay.period_zero"), t0, 3)
	near(t, byKey(t, r, "decay.zeta"), zetaOf(0.3, r.Amplitude), 3)
	if r.ToS > 40 {
		t.Errorf("the stretch reaches to %.1f s, where the amplitude is %.1g of the noise", r.ToS, 0.5*math.Exp(-0.15*r.ToS)/0.01)
	}
	tr := truth{m: model{sine: true, law: dry}, p: []float64{0.5, 0, 0.01, simK, 0.4}, dt: 1.0 / 60, n: 3000, sigma: 0.003}
	r = analyze(t, tr.angle(t, rng), Options{})
	near(t, byKey(t, r, "decay.period_zero"), t0, 3)
	near(t, byKey(t, r, "decay.dry"), 0.4, 3)
	if r.Law != "dry" || !r.Decided {
		t.Errorf("law %s, decided %v", r.Law, r.Decided)
	}
}

// Motions that are no free decay are not made into one.
func TestNoFreeDecay(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 14))
	steady, beats := make([]float64, 1800), make([]float64, 1800)
	for i := range steady {
		s := float64(i) / 60
		steady[i] = 0.3 * math.Sin(5.6*s)
		beats[i] = 0.2*math.Sin(5.6*s) + 0.2*math.Sin(5.0*s)
	}
	still := held(rng, 20, 0.1, 0.0001)
	for name, y := range map[string][]float64{"beats": beats, "still": still} {
		r := analyze(t, clipOf(t, rng, 0.001, y), Options{})
		if r.Found {
			t.Errorf("%s: a free decay of %.1f swings was made of it", name, r.Swings)
		}
	}
	r := analyze(t, clipOf(t, rng, 0.001, steady), Options{NoDecay: "a coil kicks this part"})
	if r.Found || !strings.Contains(r.Findings[0].Text, "coil") || r.Findings[0].Kind != finding.Undecided {
		t.Errorf("%+v", r.Findings)
	}
}

// A part whose magnets let it turn over, and beats: trials of the fit in which it
// runs away must end, and the answer is words.
func TestRunaway(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 17))
	y := make([]float64, 1800)
	for i := range y {
		s := float64(i) / 60
		y[i] = math.Exp(-0.05*s)*(2.2*math.Sin(3.1*s)+0.9*math.Sin(4.7*s)) + 3*math.Tanh(10-s)
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	a := clipOf(t, rng, 0.002, y)
	r, err := Analyze(ctx, a, Options{Restoring: Magnets})
	if err != nil {
		t.Fatal(err)
	}
	if r.Found {
		t.Errorf("a free decay from %.2f s to %.2f s was made of it", r.FromS, r.ToS)
	}
	t.Log(r.Findings[0].Text)
}

// Lost frames, and samples on the wrong thing.
func TestGapsAndOutliers(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 15))
	tr := truth{m: model{sine: true, law: viscous}, p: []float64{0.5, 0, 0, simK, 0.05}, dt: 1.0 / 60, n: 1800, sigma: 0.002}
	ts, ys := tr.record(rng)
	us := make([]float64, len(ts))
	for i := range ys {
		us[i] = tr.sigma
		if i > 700 && i < 718 || i%97 == 0 {
			ys[i] = math.NaN()
		}
		if i%83 == 5 {
			ys[i] += 0.05
		}
	}
	a, err := series.FromTable("arm", ts, ys, us)
	if err != nil {
		t.Fatal(err)
	}
	r := analyze(t, a, Options{})
	near(t, byKey(t, r, "decay.period_zero"), t0, 3)
	near(t, byKey(t, r, "decay.zeta"), zetaOf(0.05, r.Amplitude), 3)
	if r.ToS-r.FromS < 25 {
		t.Errorf("only %.1f … %.1f s were used", r.FromS, r.ToS)
	}
	if !strings.Contains(strings.Join(a.Cautions, " "), "left out") {
		t.Errorf("the outliers are not told: %q", a.Cautions)
	}
}

// A stretch that the rig gives is used as it stands.
func TestToldStretch(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 16))
	r := analyze(t, clipOf(t, rng, 0.002, free(30, 0.5, 0, 0, simK, 0.05)), Options{Told: true, FromS: 5, ToS: 20})
	if r.FromS < 4.99 || r.FromS > 5.02 || r.ToS > 20.01 || r.ToS < 19.98 {
		t.Errorf("told 5 … 20 s, used %.2f … %.2f s", r.FromS, r.ToS)
	}
	near(t, byKey(t, r, "decay.period_zero"), t0, 3)
	r = analyze(t, clipOf(t, rng, 0.002, free(30, 0.5, 0, 0, simK, 0.05)), Options{Told: true, FromS: 5, ToS: 5.5})
	if r.Found || !strings.Contains(r.Findings[0].Text, "[decay]") {
		t.Errorf("half a second made a decay: %+v", r.Findings[0])
	}
}
