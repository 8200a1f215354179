package kick

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/track/rig"
)

func TestEveryCellHasACapacity(t *testing.T) {
	if len(cells) != len(rig.Cells) {
		t.Errorf("%d capacities for %d cells", len(cells), len(rig.Cells))
	}
	for _, name := range rig.Cells {
		if c := cells[name]; !(c.ampS > 0) || !(c.volt > 0) || c.words == "" {
			t.Errorf("%s: %+v", name, c)
		}
	}
}

// Of a current that was measured follow days and efficiency: a 9 V block of 500 mA·h
// at 1.5 mA lasts 333 h = 13.9 days. Without one nothing is said but what to measure.
func TestBatteryByItsCurrent(t *testing.T) {
	r := gull(t)
	a, events := filmed(t, model(t, r), rand.New(rand.NewPCG(8, 8)), 0.42, pictures, 0, []phase{{seconds: 14}, {seconds: 6, off: true}})
	res := analyzed(t, r, a)
	if f := find(res, "kick.battery_time"); f == nil || f.Kind != "undecided" || !strings.Contains(f.Text, "current_mA") || !strings.Contains(f.Text, "Common practice, no source") {
		t.Errorf("%+v", f)
	}
	if f := find(res, "kick.efficiency"); f != nil {
		t.Errorf("an efficiency from nothing: %+v", f)
	}
	r.Coils[0].CurrentA, r.Coils[0].Cell = rig.Value{V: 1.5e-3, U: 0.05e-3, Set: true}, "9 V block"
	res = analyzed(t, r, a)
	f := find(res, "kick.battery_time")
	if f == nil || math.Abs(f.Value/(500.0/1.5*3600)-1) > 1e-9 || f.U/f.Value < 0.19 {
		t.Fatalf("%+v", f)
	}
	if all := strings.Join(f.Cautions, " "); !strings.Contains(all, "500 mA·h (common practice, no source)") {
		t.Errorf("cautions %q", all)
	}
	// The mechanical power is kicks over the time that they took.
	n := 0.0
	for _, e := range events {
		if e.T < 14 && e.Energy > 0 {
			n++
		}
	}
	want := n * 0.11e-3 / 14 / (1.5e-3 * 9)
	if e := find(res, "kick.efficiency"); e == nil || math.Abs(e.Value/want-1) > 0.05 {
		t.Errorf("efficiency %+v, by hand %.4g", e, want)
	}
}
