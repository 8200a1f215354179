package claim

import (
	"context"
	"math"
	"strings"
	"testing"

	"lodeswing/analyze/decay"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

const noise = 1e-4

// swung is an angle series of 60 samples a second: amplitude(t)·cos(2πt/period).
func swung(t *testing.T, part string, seconds, period float64, amplitude func(t float64) float64) series.Angle {
	t.Helper()
	var ts, as, us []float64
	for i := range int(60 * seconds) {
		x := float64(i) / 60
		// A fixed sequence that scatters like noise.
		e := math.Mod(float64(i)*0.7548776662466927, 1) - 0.5
		ts, as, us = append(ts, x), append(as, amplitude(x)*math.Cos(2*math.Pi*x/period)+2*noise*e), append(us, noise)
	}
	a, err := series.FromTable(part, ts, as, us)
	if err != nil {
		t.Fatal(err)
	}
	a.Part = part
	return a
}

func constant(x float64) func(float64) float64 { return func(float64) float64 { return x } }

func set(x float64) rig.Value { return rig.Value{V: x, Set: true} }

// Each claim's three answers.
func TestThreeAnswersOfEachClaim(t *testing.T) {
	exponential := func(a0, tau float64) func(float64) float64 {
		return func(x float64) float64 { return a0 * math.Exp(-x/tau) }
	}
	beat := func(phase float64) func(float64) float64 {
		return func(x float64) float64 { return 0.02 + 0.2*math.Abs(math.Cos(2*math.Pi*x/40+phase)) }
	}
	pair := func(seconds float64) []series.Angle {
		return []series.Angle{swung(t, "port", seconds, 0.9, beat(0)), swung(t, "starboard", seconds, 0.9, beat(math.Pi/2))}
	}
	one := func(seconds float64, amplitude func(float64) float64) []series.Angle {
		return []series.Angle{swung(t, "swing", seconds, 0.75, amplitude)}
	}
	driven := []string{"swing"}
	amplitude := rig.Claim{Label: "It swings far.", AmplitudeAtLeastRad: set(10 * degree)}
	period := rig.Claim{PeriodS: set(0.75)}
	never := rig.Claim{NeverSettles: true}
	hand := rig.Claim{HandsOverWithinS: set(7)}
	runs := rig.Claim{RunsForS: set(20)}
	days := rig.Claim{RunsForS: set(14 * 86400)}
	battery := func(d, u float64) []finding.Finding {
		return []finding.Finding{finding.Normal("kick.battery_time", "swing", "", d*86400, u*86400, "s", "")}
	}
	for _, c := range []struct {
		name  string
		claim rig.Claim
		in    Input
		want  Verdict
		says  string
	}{
		{"amplitude, more", amplitude, Input{Angles: one(20, constant(0.2)), Driven: driven}, True, "by 11.5°"},
		{"amplitude, less", amplitude, Input{Angles: one(20, constant(0.15)), Driven: driven}, NoLonger, "by 8.6°"},
		{"amplitude, at the edge", amplitude, Input{Angles: one(20, constant(10*degree)), Driven: driven}, Undecided, "too near"},
		{"period", period, Input{Angles: one(20, constant(0.2))}, True, "every 0.75 s"},
		{"period, other", rig.Claim{PeriodS: set(0.8)}, Input{Angles: one(20, constant(0.2))}, NoLonger, "every 0.75 s"},
		{"period, short", period, Input{Angles: one(1.2, constant(0.2))}, Undecided, "two whole swings"},
		{"never settles", never, Input{Angles: one(30, constant(0.2)), Driven: driven}, True, "held its swing"},
		{"never settles, dies", never, Input{Angles: one(30, exponential(0.2, 4)), Driven: driven}, NoLonger, "It dies"},
		{"never settles, falls", never, Input{Angles: one(30, exponential(0.3, 60)), Driven: driven}, Undecided, "less than before"},
		{"never settles, no coil", never, Input{Angles: one(30, constant(0.2))}, Undecided, "nothing is known to drive it"},
		{"hands over", hand, Input{Angles: pair(20)}, True, "after 5"},
		{"hands over late", rig.Claim{HandsOverWithinS: set(3)}, Input{Angles: pair(20)}, NoLonger, "after 5"},
		{"hands over, clip ends", hand, Input{Angles: pair(4)}, Undecided, "before it handed over"},
		{"hands over, one part", hand, Input{Angles: one(20, constant(0.2))}, Undecided, "Only one part"},
		{"runs", runs, Input{Angles: one(30, exponential(0.3, 20))}, True, "still swung"},
		{"runs, stops", runs, Input{Angles: one(30, exponential(0.3, 4))}, NoLonger, "less than 1°"},
		{"runs on a battery", days, Input{Angles: one(30, constant(0.2)), Driven: driven, Findings: battery(20, 2)}, True, "20 days"},
		{"runs on a weak battery", days, Input{Angles: one(30, constant(0.2)), Driven: driven, Findings: battery(8, 2)}, NoLonger, "8 days"},
		{"runs, battery unknown", days, Input{Angles: one(30, constant(0.2)), Driven: driven}, Undecided, "did not grow weaker"},
	} {
		got, curves := Answers([]rig.Claim{c.claim}, c.in)
		if len(got) != 1 || got[0].Verdict != c.want || !strings.Contains(got[0].Why, c.says) || got[0].Label == "" {
			t.Errorf("%s: %+v, want %q with %q", c.name, got, c.want, c.says)
		}
		if got[0].Verdict == Undecided && got[0].Next == "" {
			t.Errorf("%s: cannot tell, and does not say what to do", c.name)
		}
		if !c.claim.PeriodS.Set && (len(curves) != 1 || curves[0].Key != got[0].Curve) {
			t.Errorf("%s: no curve behind it", c.name)
		}
	}
}

// Beyond the clip's end: from the law by which it dies. A viscous swing from 0.3 rad
// with a time constant of 20 s comes to 1° after 20·ln(0.3/0.01745) s = 56.9 s.
func TestRunsBeyondTheClip(t *testing.T) {
	a := swung(t, "swing", 25, 0.75, func(x float64) float64 { return 0.3 * math.Exp(-x/20) })
	d, err := decay.Analyze(context.Background(), a, decay.Options{Restoring: decay.Spring})
	if err != nil || !d.Found {
		t.Fatalf("%v, %+v", err, d)
	}
	lo, hi := stops(d)
	lo, hi = lo+d.FromS, hi+d.FromS
	if want := 20 * math.Log(0.3/still); lo > want || hi < want || hi/lo > 1.5 {
		t.Errorf("stops after %.1f to %.1f s, closed form %.1f s", lo, hi, want)
	}
	for want, verdict := range map[float64]Verdict{40: True, 56.9: Undecided, 90: NoLonger} {
		got, _ := Answers([]rig.Claim{{RunsForS: set(want)}}, Input{Angles: []series.Angle{a}, Decays: []*decay.Result{d}})
		if got[0].Verdict != verdict {
			t.Errorf("for %g s: %+v, want %s", want, got[0], verdict)
		}
	}
}

func TestNothingMoves(t *testing.T) {
	got, _ := Answers([]rig.Claim{{NeverSettles: true}}, Input{})
	if len(got) != 1 || got[0].Verdict != Undecided {
		t.Errorf("%+v", got)
	}
	if got, curves := Answers(nil, Input{}); got != nil || curves != nil {
		t.Error("answers without a claim")
	}
}
