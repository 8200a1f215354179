package analyze

import (
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/analyze/record"
	"lodeswing/track/rig"
)

// The model of a rig whose numbers are all known is run on: half a minute of a
// chaotic toy is too short to tell by itself, and its model says it; a steady one's
// model is regular, and one that nothing drives is not asked.
func TestModelsFuture(t *testing.T) {
	known := func(path string) *rig.Rig {
		r, err := rig.Load(path)
		if err != nil {
			t.Fatal(err)
		}
		for _, n := range r.Numbers() {
			n.Value.Fit = false
		}
		return r
	}
	for _, c := range []struct {
		path        string
		after, upto float64
		text, last  string // in the line, in the last sentence of the evidence
	}{
		{filepath.Join("chaos", "testdata", "thrown.toml"), 0, 30, "film for about", "is chaotic: a small"},
		{filepath.Join("..", "samples", "gull.toml"), 150, 180, "Steady", "is regular as well"},
		{filepath.Join("..", "samples", "lantern.toml"), 0, 20, "Decaying", ""},
	} {
		r := known(c.path)
		w := &work{rig: r, rec: &record.Record{}, track: watched(t, r, c.after, c.upto)}
		for _, step := range []string{"angles", "regime", "foretelling"} {
			var err error
			switch step {
			case "angles":
				err = angles(t.Context(), w)
			case "regime":
				err = regime(t.Context(), w)
			case "foretelling":
				err = foretelling(t.Context(), w)
			}
			if err != nil {
				t.Fatalf("%s, %s: %v", c.path, step, err)
			}
		}
		f, l := w.rec.Find("regime", ""), w.rec.Find("chaos.model_exponent", "")
		t.Log(f.Text, f.Evidence[len(f.Evidence)-1])
		if !strings.Contains(f.Text, c.text) {
			t.Errorf("%s: %q", c.path, f.Text)
		}
		if (l != nil) != (c.last != "") {
			t.Errorf("%s: exponent of the model: %v", c.path, l)
		}
		if l != nil && !strings.Contains(f.Evidence[len(f.Evidence)-1], c.last) {
			t.Errorf("%s: %q", c.path, f.Evidence)
		}
		if chaotic := strings.Contains(f.Text, "Its model is chaotic"); chaotic != (c.last == "is chaotic: a small") {
			t.Errorf("%s: %q", c.path, f.Text)
		}
	}
}
