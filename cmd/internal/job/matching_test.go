package job

import (
	"context"
	"math"
	"path/filepath"
	"testing"
	"time"

	"lodeswing/analyze"
	"lodeswing/analyze/match"
	"lodeswing/samples"
	"lodeswing/track/rig"
)

// Every toy of the harbour set, rendered for 25 s with noise, H.264 and rolling
// shutter, followed and matched: each number that the rig leaves free lies within three
// standard uncertainties of the truth, and the pictures' share of a moment is within
// 2 % (95 %), of a product of two equal ones within 4 %. Measured on clips of 30 s so
// made, errors in standard uncertainties: lantern moment −1.6, frictions −0.0 and 0.1;
// gull kick 0.1, frictions −0.2 and 0.8; buoys moment 0.5, spring 0.5, friction 1.9; vanes
// moment 0.1, frictions 0.0; ball-joint lantern moment 1.0, friction 0.2; beacon moment
// 0.1, kick 0.2, friction −0.1; ferry moment 0.1, kick −0.1, frictions −0.2 and 0.1.
func TestRenderedToysAreMatched(t *testing.T) {
	if !*long {
		t.Skip("films and matches seven toys for a quarter of an hour; run with -long")
	}
	for _, name := range []string{"lantern", "gull", "buoys", "vanes", "lantern-ball", "beacon", "ferry"} {
		t.Run(name, func(t *testing.T) {
			rec, truth, dir := filmed(t, name, 25)
			sample, err := samples.Open(name)
			if err != nil {
				t.Fatal(err)
			}
			r, err := rig.Load(filepath.Join(dir, samples.Stem(sample)+".toml"))
			if err != nil {
				t.Fatal(err)
			}
			began := time.Now()
			fit, err := analyze.FitClips(context.Background(), []analyze.Input{{Name: name, Track: rec.Track}}, r, analyze.Options{}, match.Options{})
			if err != nil {
				t.Fatal(err)
			}
			t.Logf("matched in %.1f s; %s", time.Since(began).Seconds(), fit.Find("match.residuals", "").Text)
			for _, c := range fit.Findings {
				if c.Key == "match.left_out" {
					t.Log(c.Text)
				}
			}
			number := map[string]float64{}
			for _, n := range truth.Numbers {
				number[n.Name] = n.Value
			}
			if len(fit.Fits) == 0 || !fit.Fits[0].Converged {
				t.Fatalf("the matching did not settle: %+v", fit.Cautions)
			}
			asked := 0
			for _, p := range fit.Fits[0].Free {
				n, err := r.Number(p.Name)
				want, known := number[p.Name]
				if err != nil || !n.Fit || !known {
					continue
				}
				asked++
				off := (p.Value - want) / p.U
				t.Logf("%-40s %.6g ± %.2g %s, truth %.6g: off by %.2f u (%+.2f %%)", p.Name, p.Value, p.U, p.Unit, want, off, 100*(p.Value/want-1))
				if !(math.Abs(off) < 3) {
					t.Errorf("%s is off by %.1f standard uncertainties", p.Name, off)
				}
			}
			if asked == 0 {
				t.Error("no number was found")
			}
			for i := range fit.Findings {
				f := &fit.Findings[i]
				for _, s := range f.Budget {
					if most := map[string]float64{"match.moment": 0.02, "match.product": 0.04}[f.Key]; most > 0 && s.Source == "the pictures" && 1.96*s.U > most*f.Value {
						t.Errorf("%s of %s: the pictures' share is ±%.2g %%", f.Name, f.Subject, 196*s.U/f.Value)
					}
				}
			}
		})
	}
}
