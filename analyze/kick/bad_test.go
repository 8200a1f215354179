package kick

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// What has no ledger says why.
func TestNoLedger(t *testing.T) {
	ball, err := rig.Load("../../samples/beacon.toml")
	if err != nil {
		t.Fatal(err)
	}
	if got := Parts(ball); len(got) != 1 || got[0] != "stem" {
		t.Errorf("the beacon's coil kicks %v", got)
	}
	r := gull(t)
	fitted := gull(t)
	fitted.Magnets = append(fitted.Magnets, rig.Magnet{Name: "base magnet", Part: rig.Base, AtM: []float64{0.05, -0.2}, Axis: []float64{0, 1}, Moment: rig.Value{Fit: true}})
	still := make([]float64, 300)
	ts := make([]float64, 300)
	for i := range ts {
		ts[i], still[i] = float64(i)/60, 1e-4*math.Mod(float64(i)*0.7548776662466927, 1)
	}
	a, err := series.FromTable("swing", ts, still, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name string
		rig  *rig.Rig
		part string
		want string
	}{
		{"ball joint by a table of angles", ball, "stem", "not a table of angles"},
		{"no such part", r, "wing", `no part "wing"`},
		{"unknown magnet", fitted, "swing", "match it first"},
		{"at rest", r, "swing", "turning points"},
	} {
		_, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(c.rig, c.part, nil))
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want %q in it", c.name, err, c.want)
		}
	}
	if _, err := Analyze(context.Background(), nil, Options{}); err == nil {
		t.Error("no clip is no error")
	}
	if _, err := ReferenceFrom(nil); err == nil || !strings.Contains(err.Error(), "at least two good units") {
		t.Errorf("error %v", err)
	}
}

// A base magnet beside the foot bends the potential: with the rig's number of it the
// ledger goes by the toy's own energy. And without weight and inertia it goes per
// unit inertia.
func TestWells(t *testing.T) {
	r := gull(t)
	r.Magnets[0].Moment = number(0.32)
	r.Magnets = append(r.Magnets, rig.Magnet{Name: "base magnet", Part: rig.Base, AtM: []float64{0, -0.24}, Axis: []float64{0, 1}, Moment: number(0.3)})
	a, _ := filmed(t, model(t, r), rand.New(rand.NewPCG(8, 8)), 0.42, pictures, 0, withOff)
	res := analyzed(t, r, a)
	if !res.Separated || math.Abs(res.Kick/1.1e-4-1) > 0.02 || res.How != CoilOff {
		t.Errorf("over a base magnet: kick %.4g ± %.2g, separated %v by %d", res.Kick, res.UKick, res.Separated, res.How)
	}
	bare := gull(t)
	a, _ = filmed(t, model(t, bare), rand.New(rand.NewPCG(9, 9)), 0.42, pictures, 0, withOff)
	bare.Parts[0].MassKg, bare.Parts[0].Inertia = rig.Value{}, rig.Value{}
	res = analyzed(t, bare, a)
	if want := 1.1e-4 / 8.2e-4; res.Unit != "J/(kg·m²)" || math.Abs(res.Kick/want-1) > 0.01 {
		t.Errorf("per unit inertia: %.4g %s, want %.4g", res.Kick, res.Unit, want)
	}
}

// A second clip with the battery out separates what a steady swing alone does not.
func TestSecondClip(t *testing.T) {
	r := gull(t)
	m := model(t, r)
	on, _ := filmed(t, m, rand.New(rand.NewPCG(1, 5)), 0.42265, pictures, 0.001, []phase{{seconds: 20}})
	off, _ := filmed(t, m, rand.New(rand.NewPCG(2, 5)), 0.44, pictures, -0.002, []phase{{seconds: 8, off: true}})
	res, err := Analyze(context.Background(), []Clip{{Angle: on}, {Angle: off, Off: true}}, OptionsFor(r, "swing", nil))
	if err != nil {
		t.Fatal(err)
	}
	if !res.Separated || res.How != CoilOff || math.Abs(res.Kick/1.1e-4-1) > 0.02 {
		t.Errorf("kick %.4g ± %.2g, separated %v by %d", res.Kick, res.UKick, res.Separated, res.How)
	}
	n := 0
	for _, p := range res.Passes {
		if p.Clip == 1 {
			n++
		}
	}
	if n < 18 {
		t.Errorf("%d passes of the second clip", n)
	}
}

func BenchmarkFiveMinutes(b *testing.B) {
	r := gull(b)
	a, _ := filmed(b, model(b, r), rand.New(rand.NewPCG(1, 1)), 0.2, pictures, 0, []phase{{seconds: 240}, {seconds: 60, off: true}})
	o := OptionsFor(r, "swing", nil)
	for b.Loop() {
		if _, err := Analyze(context.Background(), []Clip{{Angle: a}}, o); err != nil {
			b.Fatal(err)
		}
	}
}
