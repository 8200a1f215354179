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

// The workshop's toys as the model moves them, 0.3 mrad of noise: what the design
// of each says that it does, or an error that says why it is not told.
func TestRegimesOfTheWorkshop(t *testing.T) {
	for _, c := range []struct {
		file        string
		after, upto float64 // s from the rig's start
		says        string
	}{
		{"gull", 0, 30, "Growing"}, // pushed from a small nod, it gathers first
		{"gull", 150, 180, "Steady"},
		{"buoys", 0, 30, "Beating"},
		{"lantern", 0, 30, "Decaying"},
		{"lantern-magnet-out", 0, 20, "Decaying"},
		{"vanes", 0, 60, ""}, // these go round or swing freely: not said
		{"ferry", 0, 60, ""},
		{"lantern-ball", 0, 30, ""},
	} {
		r, err := rig.Load(filepath.Join("..", "samples", c.file+".toml"))
		if err != nil {
			t.Fatal(err)
		}
		w := &work{rig: r, rec: &record.Record{}, tables: filmed(t, r, c.after, c.upto)}
		if err := angles(t.Context(), w); err != nil {
			t.Fatal(err)
		}
		err = regime(t.Context(), w)
		if (err != nil) != (c.says == "") {
			t.Errorf("%s: %v", c.file, err)
		}
		if err != nil {
			continue
		}
		i := slices.IndexFunc(w.rec.Findings, func(f finding.Finding) bool { return f.Key == "regime" })
		if i < 0 {
			t.Errorf("%s: no regime", c.file)
			continue
		}
		text := w.rec.Findings[i].Text
		t.Logf("%s: %s %v", c.file, text, w.rec.Findings[i].Cautions)
		if !strings.HasPrefix(text, c.says) {
			t.Errorf("%s: %q, want %q", c.file, text, c.says)
		}
	}
}

// filmed is the toy's angles at 60 frames/s from the rig's own start, with noise.
func filmed(t *testing.T, r *rig.Rig, after, upto float64) []record.Angles {
	t.Helper()
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	path, err := m.Simulate(t.Context(), y, upto, toy.Options{})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 1))
	tables := make([]record.Angles, len(m.Parts()))
	for i := range int(60 * (upto - after)) {
		s := float64(i) / 60
		path.At(after+s, y)
		for k, name := range m.Parts() {
			a, _ := m.Angle(y, k)
			tables[k].Part = name
			tables[k].T = append(tables[k].T, s)
			tables[k].Angle = append(tables[k].Angle, a+3e-4*rng.NormFloat64())
			tables[k].U = append(tables[k].U, 3e-4)
		}
	}
	return tables
}
