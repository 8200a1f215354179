package analyze

import (
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// The buoys as the workshop lets them go (12°), 30 s at 60 frames/s with 0.3 mrad
// of noise: three modes, a beat, who gives to whom, and the figures.
func TestBuoysTogether(t *testing.T) {
	r, err := rig.Load(filepath.Join("..", "samples", "buoys.toml"))
	if err != nil {
		t.Fatal(err)
	}
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	path, err := m.Simulate(t.Context(), y, 30, toy.Options{})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 1))
	tables := make([]record.Angles, len(m.Parts()))
	for i := range 1800 {
		s := float64(i) / 60
		path.At(s, y)
		for k, name := range m.Parts() {
			a, _ := m.Angle(y, k)
			tables[k].Part = name
			tables[k].T = append(tables[k].T, s)
			tables[k].Angle = append(tables[k].Angle, a+3e-4*rng.NormFloat64())
			tables[k].U = append(tables[k].U, 3e-4)
		}
	}
	w := &work{rig: r, rec: &record.Record{}, tables: tables}
	if err := angles(t.Context(), w); err != nil {
		t.Fatal(err)
	}
	if err := together(t.Context(), w); err != nil {
		t.Fatal(err)
	}
	rest, _ := m.SettlesAt(m.Rest())
	small := m.Modes(rest.State)
	has := func(key string) *finding.Finding {
		i := slices.IndexFunc(w.rec.Findings, func(f finding.Finding) bool { return f.Key == key })
		if i < 0 {
			t.Fatalf("no %s", key)
		}
		return &w.rec.Findings[i]
	}
	for _, f := range w.rec.Findings {
		t.Log(f.Key, f.Subject, f.Display(), f.Text, f.Cautions)
	}
	for k := range small {
		f := has("modes.mode" + string(rune('1'+k)) + ".frequency")
		// At 12° the magnets' push is no longer linear: frequencies are up to 2 %
		// above those of small motions.
		if r := f.Value / small[k].Frequency; r < 0.995 || r > 1.025 {
			t.Errorf("%s: %g Hz, small motions %g Hz", f.Name, f.Value, small[k].Frequency)
		}
	}
	if slices.ContainsFunc(w.rec.Findings, func(f finding.Finding) bool { return f.Key == "modes.mode4.frequency" }) {
		t.Error("four modes of three buoys")
	}
	if b := has("modes.beat.period"); !(b.Value > 2 && b.Value < 15) || b.U <= 0 {
		t.Errorf("beat %g ± %g s", b.Value, b.U)
	}
	if f := has("modes.energy.wanders"); f.Value < 0.5 {
		t.Errorf("%g of the energy wanders", f.Value)
	}
	if f := has("modes.energy.exchange"); !strings.HasPrefix(f.Text, "From 0.0 s to ") || !strings.Contains(f.Text, "“port stem” gives") {
		t.Errorf("exchange: %s", f.Text)
	}
	for _, key := range []string{"spectrogram", "modes-energy", "modes-spectrum"} {
		if !slices.ContainsFunc(w.rec.Curves, func(c finding.Curve) bool { return c.Key == key && len(c.Lines) > 0 }) {
			t.Errorf("no curve %s", key)
		}
	}
}
