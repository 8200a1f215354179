package kick

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// The pulse of a real winding weakens with the magnet's speed. With the battery
// out for a while the ledger finds what the toy's model of the current did at each
// pass, and the charge, efficiency and time on a battery follow from the rig.
func TestWindingAgainstItsPulses(t *testing.T) {
	r := gull(t)
	r.Coils[0] = rig.Coil{
		Name: "coil", AtM: []float64{0, -0.186}, Turns: number(3000), RadiusM: number(0.011), Ohm: number(60),
		SupplyV: number(9), PulseS: number(0.006), TriggerV: number(0.02), CapacityAs: number(500 * 3.6),
	}
	m := model(t, r)
	a, events := filmed(t, m, rand.New(rand.NewPCG(4, 4)), 0.16, pictures, 0, []phase{{seconds: 22}, {seconds: 10, off: true}})
	res, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(r, "swing", nil))
	if err != nil {
		t.Fatal(err)
	}
	var kicks []toy.Event
	energy, charge := 0.0, 0.0
	for _, e := range events {
		if e.Kind == toy.Kick {
			kicks = append(kicks, e)
			energy, charge = energy+e.Energy, charge+e.Charge
		}
	}
	n := float64(len(kicks))
	energy, charge = energy/n, charge/n
	if !res.Separated || res.How != CoilOff {
		t.Fatalf("separated %v by %d: %s", res.Separated, res.How, find(res, "kick.passes").Text)
	}
	// The mean of the ledger's kicks, and each of them, against the model's pulses.
	got, worst, k := 0.0, 0.0, 0
	for _, p := range res.Passes {
		if p.State != Kicked {
			continue
		}
		got += p.Kick
		k++
		near := math.Inf(1)
		at := 0
		for i, e := range kicks {
			if d := math.Abs(e.T - p.T); d < near {
				near, at = d, i
			}
		}
		worst = math.Max(worst, math.Abs(p.Kick-kicks[at].Energy))
	}
	got /= float64(k)
	t.Logf("%d pulses from %.4g to %.4g mJ; mean %.4g, ledger %.4g mJ; farthest %.2g mJ", len(kicks), 1e3*kicks[1].Energy, 1e3*kicks[len(kicks)-1].Energy, 1e3*energy, 1e3*got, 1e3*worst)
	if math.Abs(got/energy-1) > 0.02 || worst > 0.15*energy {
		t.Errorf("mean kick %.4g mJ, the pulses' %.4g mJ; farthest %.2g mJ", 1e3*got, 1e3*energy, 1e3*worst)
	}
	drawn := slices.IndexFunc(res.Curves, func(c finding.Curve) bool { return c.Key == "kick-speed" })
	if drawn < 0 || len(res.Curves[drawn].Lines[0].X) != k {
		t.Errorf("the kicks against speed are not drawn, or not all %d of them", k)
	}
	f := find(res, "kick.efficiency")
	if want := energy / (9 * charge); f == nil || math.Abs(f.Value/want-1) > 0.1 {
		t.Errorf("efficiency %+v, the model's %.4g", f, want)
	}
	perDay := n / 22 * 86400
	if d := find(res, "kick.battery_time"); d == nil || math.Abs(d.Value/86400*charge*perDay/(500*3.6)-1) > 0.1 {
		t.Errorf("time on a battery %+v, the model's %.4g days", d, 500*3.6/(charge*perDay))
	}
}

// A long pulse of a strong winding leaves it unarmed for several passes: it fires at
// one pass in seven. The ledger must not take the silent ones for the usual.
func TestCoilThatFiresNowAndThen(t *testing.T) {
	r := gull(t)
	r.Coils[0] = rig.Coil{
		Name: "coil", AtM: []float64{0, -0.186}, Turns: number(2500), RadiusM: number(0.011), Ohm: number(60),
		SupplyV: number(9), PulseS: number(0.02), TriggerV: number(0.02),
	}
	a, events := filmed(t, model(t, r), rand.New(rand.NewPCG(4, 4)), 0.16, pictures, 0, []phase{{seconds: 22}, {seconds: 10, off: true}})
	res, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(r, "swing", nil))
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, e := range events {
		if e.Kind == toy.Kick && e.Energy > 5e-5 {
			n++
		}
	}
	if got := states(res); n < 10 || got[Kicked] < n-1 || got[Kicked] > n+1 || got[Odd]+got[Double] > 1 {
		t.Errorf("%v, want %d kicked", got, n)
	}
}
