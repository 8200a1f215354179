package kick

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

var long = flag.Bool("long", false, "run the full Monte Carlo counts")

// phase is one stretch of a simulated film.
type phase struct {
	seconds float64
	off     bool
	push    float64 // rad/s added to the rate at its beginning
}

var toyOptions = toy.Options{Tol: 1e-8}

const pictures = 6e-5 // rad: 0.02 px at the gull's 325 px from pivot to bob

// gull is the sample's rig.
func gull(t testing.TB) *rig.Rig {
	t.Helper()
	r, err := rig.Load("../../samples/gull.toml")
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// filmed simulates the model's motion through phases and returns it as seen at
// 60 frames a second, tilted by lean, with the toy model's own kicks.
func filmed(t testing.TB, m *toy.Model, rng *rand.Rand, start, noise, lean float64, phases []phase) (series.Angle, []toy.Event) {
	t.Helper()
	y := m.Rest()
	m.SetAngle(y, 0, start, 0)
	var ts, as, us []float64
	var events []toy.Event
	at := 0.0
	for _, p := range phases {
		a, v := m.Angle(y, 0)
		m.SetAngle(y, 0, a, v+p.push)
		o, err := m.Simulate(context.Background(), y, p.seconds, toy.Options{Undriven: p.off, Tol: 1e-8})
		if err != nil {
			t.Fatal(err)
		}
		z := make([]float64, len(y))
		for i := 0; float64(i)/60 < p.seconds-1e-9; i++ {
			o.At(float64(i)/60, z)
			a, _ := m.Angle(z, 0)
			ts, as, us = append(ts, at+float64(i)/60), append(as, a+lean+noise*rng.NormFloat64()), append(us, noise)
		}
		for _, e := range o.Events {
			e.T += at
			events = append(events, e)
		}
		o.At(p.seconds, y)
		at += p.seconds
	}
	a, err := series.FromTable("swing", ts, as, us)
	if err != nil {
		t.Fatal(err)
	}
	a.Shared = []series.Shared{{Source: "vertical", D: make([]float64, len(a.T))}}
	for i := range a.Shared[0].D {
		a.Shared[0].D[i] = 0.002
	}
	return a, events
}

func find(r *Result, key string) *finding.Finding {
	for i := range r.Findings {
		if r.Findings[i].Key == key {
			return &r.Findings[i]
		}
	}
	return nil
}

func model(t testing.TB, r *rig.Rig) *toy.Model {
	t.Helper()
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// What 30 s must hold so that kick and loss are told apart (design section 6).
var separable = []struct {
	name   string
	start  float64
	phases []phase
	how    Separation
	sigma  float64 // most that the pictures' share of the kick may be, relative
}{
	{"start-up", 0.14, []phase{{seconds: 30}}, Constant, 0.01},
	{"push", 0.40, []phase{{seconds: 8}, {seconds: 22, push: 2.2}}, Constant, 0.02},
	{"battery out", 0.42, []phase{{seconds: 24}, {seconds: 6, off: true}}, CoilOff, 0.004},
	{"battery in", 0.5, []phase{{seconds: 6, off: true}, {seconds: 24}}, CoilOff, 0.004},
}

// The kick is within 4 % of the toy model's own (95 %, inertia given), and its
// interval holds it. With -long: 1,000 motions, 250 of each kind; measured so, 95 %
// of the kicks lie within 0.2 % (start-up), 1.3 % (push), 0.085 and 0.1 % (battery out
// and in), and the intervals hold the truth in 97.2, 96.8, 98.4 and 97.2 %, before
// chance alone no longer widened them; since then in 96, 96, 98 and 98 of 100 each. (A start-up alone had been at 91 %: the rate of
// swinging was 0.07 % low, since a push over a width delays the swing.)
func TestKickAgainstTheModel(t *testing.T) {
	r := gull(t)
	m := model(t, r)
	runs := 12
	if *long {
		runs = 250
	}
	o := OptionsFor(r, "swing", nil)
	o.WeightShares = nil // the model's weight is the rig's: the pictures' share alone is tried here
	all, held := 0, 0
	for _, c := range separable {
		var errs []float64
		in := 0
		for seed := range uint64(runs) {
			rng := rand.New(rand.NewPCG(seed, 2))
			a, events := filmed(t, m, rng, c.start*(1+0.02*rng.NormFloat64()), pictures, 0.002*rng.NormFloat64(), c.phases)
			res, err := Analyze(context.Background(), []Clip{{Angle: a}}, o)
			if err != nil {
				t.Fatalf("%s, seed %d: %v", c.name, seed, err)
			}
			truth, n := 0.0, 0.0
			for _, e := range events {
				if e.Kind == toy.Kick {
					truth, n = truth+e.Energy, n+1
				}
			}
			truth /= n
			if !res.Separated || res.How != c.how {
				t.Errorf("%s, seed %d: separated %v by %d (%s)", c.name, seed, res.Separated, res.How, find(res, "kick.passes").Text)
				continue
			}
			f := find(res, "kick.energy")
			errs = append(errs, math.Abs(f.Value/truth-1))
			if f.Lo <= truth && truth <= f.Hi {
				in++
			}
			if f.U > c.sigma*truth {
				t.Errorf("%s, seed %d: kick ± %.2g %%", c.name, seed, 100*f.U/truth)
			}
		}
		slices.Sort(errs)
		worst := errs[len(errs)*95/100]
		t.Logf("%s: of %d, 95 %% within %.2g %%, interval holds the truth in %.1f %%", c.name, len(errs), 100*worst, 100*float64(in)/float64(len(errs)))
		if worst > 0.04 {
			t.Errorf("%s: 95 %% of the kicks lie within %.2g %%, want 4 %%", c.name, 100*worst)
		}
		all, held = all+len(errs), held+in
	}
	share := float64(held) / float64(all)
	if low := 0.95 - 3*math.Sqrt(0.05*0.95/float64(all)); share < low {
		t.Errorf("intervals hold the truth in %.1f %% of %d", 100*share, all)
	}
}
