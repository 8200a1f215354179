package analyze

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/analyze/toy"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// The workshop's toys as the model moves them and a film shows them (0.05 mm of
// noise, each bob at its own row's time): what the design of each says that it does,
// and every figure and measure of it.
func TestRegimesOfTheWorkshop(t *testing.T) {
	for _, c := range []struct {
		file        string
		after, upto float64 // s from the rig's start
		says        string
	}{
		{"gull", 0, 30, "Growing"}, // pushed from a small nod, it gathers first
		{"gull", 150, 180, "Steady"},
		{"gull", 0, 90, "Steady from about"},
		{"buoys", 0, 30, "Beating"},
		{"lantern", 0, 30, "Decaying"},
		{"lantern-magnet-out", 0, 20, "Decaying"},
		{"vanes", 0, 25, "Irregular and decaying"},
		{"ferry", 0, 30, "Irregular. Whether"},
		{"beacon", 0, 30, "Irregular. Whether"},
		{"lantern-ball", 0, 30, "Decaying"}, // launched in a wide circle, in order at first
		{"lantern-ball", 60, 120, "Irregular and decaying"},
	} {
		r, err := rig.Load(filepath.Join("..", "samples", c.file+".toml"))
		if err != nil {
			t.Fatal(err)
		}
		w := &work{rig: r, rec: &record.Record{}, track: watched(t, r, c.after, c.upto)}
		if err := angles(t.Context(), w); err != nil {
			t.Fatal(err)
		}
		if err := regime(t.Context(), w); err != nil {
			t.Errorf("%s: %v", c.file, err)
			continue
		}
		i := slices.IndexFunc(w.rec.Findings, func(f finding.Finding) bool { return f.Key == "regime" })
		if i < 0 {
			t.Errorf("%s: no regime", c.file)
			continue
		}
		f := w.rec.Findings[i]
		t.Logf("%s: %s %v", c.file, f.Text, f.Evidence)
		if !strings.HasPrefix(f.Text, c.says) {
			t.Errorf("%s from %g s to %g s: %q, want %q", c.file, c.after, c.upto, f.Text, c.says)
		}
		if strings.HasPrefix(c.says, "Irregular. Whether") && !strings.Contains(f.Text, "film for about") {
			t.Errorf("%s: %q does not say how long to film", c.file, f.Text)
		}
		if len(f.Evidence) < 4 || !strings.Contains(f.Text, "Confidence") {
			t.Errorf("%s: evidence or confidence is missing: %v", c.file, f)
		}
		if err := recurring(t.Context(), w); err != nil {
			t.Errorf("%s: %v", c.file, err)
		}
		for _, key := range []string{"recurrence", "recurrence_lag", "recurrence_course", "section"} {
			if !w.has(key) && !(key == "section" && strings.HasPrefix(c.file, "vanes")) {
				t.Errorf("%s: no figure %s", c.file, key)
			}
		}
		measures := 0
		for _, f := range w.rec.Findings {
			if strings.HasPrefix(f.Key, "recurrence.") {
				measures++
				if math.IsNaN(f.U) {
					t.Errorf("%s: %s has no uncertainty", c.file, f.Name)
				}
			}
		}
		if measures < 8 {
			t.Errorf("%s: %d measures of recurrence", c.file, measures)
		}
	}
}

// watched is the toy's track at 60 frames/s as a camera sees it that looks down by
// 20°, with 0.05 mm of noise, each bob a little later than the one before.
func watched(t *testing.T, r *rig.Rig, after, upto float64) *track.Track {
	t.Helper()
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	path, err := m.Simulate(t.Context(), y, upto+1, toy.Options{})
	if err != nil {
		t.Fatal(err)
	}
	const noise = 5e-5
	rng := rand.New(rand.NewPCG(1, 1))
	tr := &track.Track{BrokeAt: math.NaN(), Cal: track.Calibration{MetresPerPixel: 5e-4, UScale: 1e-3, VerticalKnown: true, UVertical: 1e-3, UClock: 5e-5, RateFactor: 1, PictureW: 1280, PictureH: 720}}
	for k, name := range m.Bobs() {
		b := track.Bob{Name: name, Part: r.Bobs[k].Part}
		for i := range int(60 * (upto - after)) {
			s := float64(i)/60 + 0.002*float64(k)
			path.At(after+s, y)
			p := m.Positions(y, nil)[k]
			b.Samples = append(b.Samples, track.Sample{
				Frame: i, T: s, State: track.Seen, X: p[0] + noise*rng.NormFloat64(), Z: p[2] + 0.36*p[1] + noise*rng.NormFloat64(),
				Plane: track.Cov{AA: noise * noise, BB: noise * noise}, Pixel: track.Cov{AA: 0.01, BB: 0.01},
			})
		}
		tr.Bobs = append(tr.Bobs, b)
	}
	return tr
}
