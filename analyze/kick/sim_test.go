package kick

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// phase is one stretch of a simulated film.
type phase struct {
	seconds float64
	off     bool
	push    float64 // rad/s added to the rate at its beginning
}

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

func TestKickAgainstTheModel(t *testing.T) {
	r := gull(t)
	m := model(t, r)
	for _, c := range []struct {
		name   string
		start  float64
		phases []phase
		how    Separation
		sep    bool
	}{
		{"start-up", 0.14, []phase{{seconds: 30}}, Constant, true},
		{"push", 0.40, []phase{{seconds: 8}, {seconds: 22, push: 2.2}}, Constant, true},
		{"battery out", 0.42, []phase{{seconds: 20}, {seconds: 10, off: true}}, CoilOff, true},
		{"battery in", 0.5, []phase{{seconds: 7, off: true}, {seconds: 23}}, CoilOff, true},
	} {
		a, events := filmed(t, m, rand.New(rand.NewPCG(1, 2)), c.start, pictures, 0.001, c.phases)
		res, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(r, "swing", nil))
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		truth, n := 0.0, 0.0
		for _, e := range events {
			if e.Kind == toy.Kick {
				truth, n = truth+e.Energy, n+1
			}
		}
		truth /= n
		t.Logf("%s: kick %.5g ± %.2g mJ (pictures' share %.2g), truth %.5g; loss %.5g ± %.2g; steady %.3f°; %s; how %d; law %s", c.name, 1e3*res.Kick, 1e3*res.UKick, 0.0, 1e3*truth, 1e3*res.Loss, 1e3*res.ULoss, find(res, "kick.steady_amplitude").Value/degree, find(res, "kick.passes").Text, res.How, l2s(res))
		for _, f := range res.Findings {
			t.Logf("   %s %v %s %v", f.Key, f.Display(), f.Kind, f.Budget)
		}
		if res.Separated != c.sep || res.How != c.how {
			t.Errorf("%s: separated %v by %d", c.name, res.Separated, res.How)
		}
		if math.Abs(res.Kick/truth-1) > 0.04 {
			t.Errorf("%s: off", c.name)
		}
	}
}

func l2s(r *Result) string {
	s := ""
	for _, c := range r.Fits[0].Candidates {
		s += c.Name + " " + finding.DisplayU(c.Weight, "1") + "; "
	}
	return s
}
