package job

import (
	"fmt"
	"strings"
	"testing"

	"lodeswing/samples"
	"lodeswing/track/rig"
)

// Each claim's three answers on filmed toys.
func TestFilmedClaims(t *testing.T) {
	if !*long {
		t.Skip("films seven clips; run with -long")
	}
	known := func(sample string) *rig.Rig {
		r, err := samples.Open(sample)
		if err != nil {
			t.Fatal(err)
		}
		for _, n := range r.Numbers() {
			n.Value.Fit = false // nothing is matched: the claims are asked
		}
		smaller(r, 0.5)
		return r
	}
	value := func(x float64) rig.Value { return rig.Value{V: x, Set: true} }
	const degree = 3.141592653589793 / 180
	const still, no, cannot = "Still true", "No longer true", "Cannot tell"
	type ask struct {
		claim rig.Claim
		want  string
	}
	amplitude := func(deg float64) rig.Claim { return rig.Claim{AmplitudeAtLeastRad: value(deg * degree)} }
	handsOver := func(s float64) rig.Claim { return rig.Claim{HandsOverWithinS: value(s)} }
	runs := func(s float64) rig.Claim { return rig.Claim{RunsForS: value(s)} }
	period := func(s, u float64) rig.Claim {
		return rig.Claim{PeriodS: rig.Value{V: s, U: u, Set: true, UGiven: true}}
	}
	never := rig.Claim{NeverSettles: true}
	for _, c := range []struct {
		name, sample string
		start        float64 // rad; 0: the sample's
		opt          samples.Options
		asks         []ask
	}{
		// Steady at 24.2°, where kick and loss are equal; 0.7574 s by its own model.
		{"gull", "gull", 0.42265, samples.Options{DurationS: 12}, []ask{
			{amplitude(20), still},
			{amplitude(30), no},
			{amplitude(24.216), cannot},
			{period(0.75, 0.015), still},
			{period(0.8, 0.015), no},
			{never, still},
			{runs(14 * 86400), cannot},
		}},
		// One swing and a half do not tell a period to 2 %.
		{"gull, short", "gull", 0.42265, samples.Options{DurationS: 1.2}, []ask{{period(0.75, 0.015), cannot}}},
		{"gull, coil off", "gull", 0.42265, samples.Options{DurationS: 12, Undriven: true}, []ask{{never, cannot}}},
		// Let go at 40°, it falls towards the steady amplitude.
		{"gull, falling", "gull", 0.7, samples.Options{DurationS: 12}, []ask{{never, cannot}}},
		{"swing", "lantern-magnet-out", 0, samples.Options{DurationS: 12}, []ask{
			{runs(8), still}, {runs(20), still}, {runs(3600), no}, {never, no},
		}},
		// Handing over takes 5 s or so; the clip ends before 60 s.
		{"buoys", "buoys", 0, samples.Options{DurationS: 10}, []ask{
			{handsOver(9), still}, {handsOver(0.8), no},
		}},
		{"buoys, short", "buoys", 0, samples.Options{DurationS: 1.5}, []ask{{handsOver(9), cannot}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			toy, owner := known(c.sample), known(c.sample)
			if c.start > 0 {
				toy.Start[0].AngleRad.V = c.start
			}
			for i := range c.asks {
				a := c.asks[i].claim
				a.Label = fmt.Sprintf("Claim %d.", i+1)
				owner.Claims = append(owner.Claims, a)
			}
			rec := filmAndMeasure(t, toy, owner, c.opt)
			for i, a := range c.asks {
				f := rec.Find(fmt.Sprintf("claim.%d", i+1), "")
				if f == nil {
					t.Errorf("claim %d is not answered", i+1)
					continue
				}
				t.Logf("%+v: %s", a.want, f.Text)
				if !strings.HasPrefix(f.Text, a.want) {
					t.Errorf("claim %d: %q, want %q", i+1, f.Text, a.want)
				}
			}
		})
	}
}
