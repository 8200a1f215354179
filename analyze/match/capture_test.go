package match

import (
	"context"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

// nearCapture draws clips of the near lantern that begins at angle, and counts how
// often the 95 % interval of the product holds the truth, and how often one is told.
func nearCapture(t *testing.T, angle, seconds float64, from, to uint64) (inside, told, profiled int) {
	t.Helper()
	r := nearRig(t)
	truth := r.Magnets[0].Moment.V * r.Magnets[0].Moment.V
	for seed := from; seed < to; seed++ {
		tr := simulate(t, r, take{seconds: seconds, noise: 0.05, seed: seed, start: []rig.Start{{Part: "arm", AngleRad: rig.Value{V: angle, Set: true}}}})
		res, err := Run(context.Background(), []Clip{{Track: tr}}, r, Options{})
		if err != nil {
			t.Fatal(err)
		}
		f := find(res, "match.product")
		if f.Kind != finding.Measured {
			if !strings.Contains(f.Text, "hardly got over") || !strings.Contains(f.Text, "farther out") {
				t.Errorf("unit %d: not told, without the reason and the remedy: %s", seed, f.Text)
			}
			continue
		}
		told++
		if f.Lo < truth && truth < f.Hi {
			inside++
		}
		if strings.Contains(f.Method, "profile") {
			profiled++
			if len(f.Cautions) == 0 || !strings.Contains(strings.Join(f.Cautions, " "), "hardly got over") {
				t.Errorf("unit %d: an interval by profile without its caution: %q", seed, f.Cautions)
			}
		}
		t.Logf("unit %d: %.4f ± %.4f, %.4f to %.4f; truth %.4f", seed, f.Value, f.U, f.Lo, f.Hi, truth)
	}
	t.Logf("from %.6f rad, %g s: %d of %d intervals hold the truth (%d by profile), none told of %d", angle, seconds, inside, told, profiled, int(to-from)-told)
	return inside, told, profiled
}

// Releases that just get over the magnet for the seventh time and are captured after
// that (the edge lies at 0.347066 rad), or hardly get over it twice: the interval is
// that of a profile, or the clip is said to be too near capture. Measured with -long, 100
// clips of 5 s: 68 of 68 intervals that were told held the truth; 32 gave none.
func TestNearCapture(t *testing.T) {
	if inside, told, profiled := nearCapture(t, 0.34706, 5, 4, 5); inside != 1 || told != 1 || profiled != 1 {
		t.Errorf("nearly captured: %d told, %d by profile, %d hold the truth", told, profiled, inside)
	}
	if _, told, _ := nearCapture(t, 0.321545, 5, 0, 1); told != 0 {
		t.Error("two passes, one of them hardly: a product is told")
	}
	if !*long {
		return
	}
	var inside, told int
	for _, angle := range []float64{0.347076, 0.347166, 0.34706, 0.35, 0.33} {
		i, n, _ := nearCapture(t, angle, 5, 100, 120)
		inside, told = inside+i, told+n
	}
	if told < 60 || float64(inside) < 0.9*float64(told) {
		t.Errorf("near capture %d of %d intervals hold the truth", inside, told)
	}
}
