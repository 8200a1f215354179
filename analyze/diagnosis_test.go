package analyze

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/analyze/record"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// sampleRig is one of the workshop's rigs.
func sampleRig(t *testing.T, name string) *rig.Rig {
	t.Helper()
	r, err := rig.Load("../samples/" + name + ".toml")
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// seenAngles is how a toy's first part moves, as an angle table of 60 rows a second
// with noise of sigma rad, the stand leaning by lean rad.
func seenAngles(t *testing.T, r *rig.Rig, seconds, sigma, lean float64) []record.Angles {
	t.Helper()
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	o, err := m.Simulate(context.Background(), y, seconds, toy.Options{Tol: 1e-9})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(3, 14))
	a := record.Angles{Part: m.Parts()[0]}
	for i := range int(60 * seconds) {
		s := float64(i) / 60
		o.At(s, y)
		x, _ := m.Angle(y, 0)
		a.T, a.Angle, a.U = append(a.T, s), append(a.Angle, x+lean+sigma*rng.NormFloat64()), append(a.U, sigma)
		a.Rate, a.URate = append(a.Rate, math.NaN()), append(a.URate, math.NaN())
	}
	return []record.Angles{a}
}

// Units with one known fault each, by the toy's own model, measured against the rig of
// the good one: the verdict names it.
func TestDiagnosisOfKnownFaults(t *testing.T) {
	known := func(name string) *rig.Rig {
		r := sampleRig(t, name)
		f := &r.Parts[0].Friction
		for _, v := range []*rig.Value{&f.Viscous, &f.Drag, &f.Dry} {
			v.Fit, v.U = false, 0.01*v.V
		}
		return r
	}
	for _, c := range []struct {
		name, sample string
		long         bool
		spoil        func(r *rig.Rig)
		lean         float64
		want         []string
	}{
		{"good lantern", "lantern", false, func(*rig.Rig) {}, 0, []string{"Nothing is wrong", "Judged: magnets."}},
		{"weak magnet", "lantern", false, func(r *rig.Rig) { r.Magnets[1].Moment.V *= 0.75 }, 0, []string{"Reject: magnet weak", "“lamp magnet”, “base magnet”", "product", "reference magnet"}},
		{"reversed magnet", "lantern", true, func(r *rig.Rig) { r.Magnets[1].Axis[1] *= -1 }, 0, []string{"Reject: magnet reversed"}},
		{"missing magnet", "lantern", true, func(r *rig.Rig) { r.Magnets[1].Moment.V = 1e-4 }, 0, []string{"missing"}},
		{"good swing", "lantern-magnet-out", false, func(*rig.Rig) {}, 0, []string{"Nothing is wrong", "friction"}},
		{"dry bearing", "lantern-magnet-out", false, func(r *rig.Rig) { r.Parts[0].Friction.Dry = rig.Value{V: 2e-4, Set: true} }, 0, []string{"Reject: more loss: bearing drag (dry)"}},
		{"air drag", "lantern-magnet-out", false, func(r *rig.Rig) { r.Parts[0].Friction.Drag.V *= 3 }, 0, []string{"Reject: more loss: air drag"}},
		{"leaning", "lantern-magnet-out", false, func(*rig.Rig) {}, 0.07, []string{"Reject: rest position off the vertical"}},
	} {
		if c.long && !*long {
			continue
		}
		good, bad := known(c.sample), known(c.sample)
		c.spoil(bad)
		rec, err := RunAngles(t.Context(), seenAngles(t, bad, 14, 1e-4, c.lean), good, Options{})
		if err != nil {
			t.Fatal(err)
		}
		f := rec.Find("diagnosis", "")
		if f == nil {
			t.Errorf("%s: no diagnosis", c.name)
			continue
		}
		t.Logf("%s: %s", c.name, f.Text)
		for _, w := range c.want {
			if !strings.Contains(f.Text, w) {
				t.Errorf("%s: %q lacks %q", c.name, f.Text, w)
			}
		}
	}
}

// A clip in slow motion, or of a part of another length than the rig's, by period and
// length of a filmed swing.
func TestDiagnosisOfPeriodAndLength(t *testing.T) {
	r := &rig.Rig{
		Name:  "Test lantern",
		Bobs:  []rig.Bob{{Name: "lamp", Part: "arm", AtM: []float64{0, -0.28}}},
		Parts: []rig.Part{{Name: "arm", Joint: "hinge", PivotFromTrack: true}},
	}
	right := 2 * math.Pi * math.Sqrt(0.28/9.81)
	for _, c := range []struct {
		name   string
		period float64
		want   string
	}{
		{"right", right, "Nothing is wrong"},
		{"slow motion", 4 * right, "Film again: filming fault: slow motion"},
		{"weight elsewhere", 0.9 * right, "Reject: wrong mass or length"},
	} {
		rec, err := Run(t.Context(), swing(30, 0.12, 0.005, c.period, 3e-5), r, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if f := rec.Find("diagnosis", ""); f == nil || !strings.HasPrefix(f.Text, c.want) {
			t.Errorf("%s: %+v, want %q", c.name, f, c.want)
		}
	}
}
