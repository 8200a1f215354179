package job

import (
	"errors"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/samples"
	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

var (
	long = flag.Bool("long", false, "film and measure whole lots")
	keep = flag.String("keep", "", "folder in which films and results of whole lots are left, to be looked at")
)

// smaller films a rig in fewer pixels, which is quicker.
func smaller(r *rig.Rig, k float64) {
	f := &r.Film
	for _, v := range []*rig.Value{&f.WidthPX, &f.HeightPX, &f.PixelsPerM} {
		v.V *= k
	}
	for _, points := range [][][2]float64{r.Scale.EndsPX, r.Camera.PlumbPX} {
		for i := range points {
			points[i][0], points[i][1] = k*points[i][0], k*points[i][1]
		}
	}
}

// number is a rig's number with a relative uncertainty.
func number(v, relative float64) rig.Value {
	return rig.Value{V: v, U: relative * v, Set: true, UGiven: true}
}

// knownGull is the gull with its kick and frictions as numbers.
func knownGull(t *testing.T) *rig.Rig {
	t.Helper()
	r, err := samples.Open("gull")
	if err != nil {
		t.Fatal(err)
	}
	f := &r.Parts[0].Friction
	f.Viscous, f.Dry, r.Coils[0].KickJ = number(4.5e-5, 0.01), number(6e-6, 0.01), number(0.11e-3, 0.01)
	return r
}

// filmAndMeasure films a toy and measures the clip by another rig, as its owner would.
func filmAndMeasure(t *testing.T, toy, owner *rig.Rig, opt samples.Options) *record.Record {
	t.Helper()
	if _, err := exec.LookPath("ffmpeg"); err != nil {
		t.Skip("ffmpeg is not installed: run make test, which installs it")
	}
	dir := t.TempDir()
	if *keep != "" {
		dir = filepath.Join(*keep, strings.NewReplacer("/", "-", ",", "").Replace(t.Name()))
	}
	files, err := samples.Film(t.Context(), toy, filepath.Join(dir, "film"), opt)
	if err != nil {
		t.Fatal(err)
	}
	own := owner.Clone()
	own.Film, own.Start = rig.Film{}, nil
	path := filepath.Join(dir, "owner.toml")
	if err := own.Save(path); err != nil {
		t.Fatal(err)
	}
	rec, err := (&Job{Clip: files.Clip, RigPath: path, Out: filepath.Join(dir, "result"), Version: "test"}).Measure(t.Context())
	if errors.Is(err, clip.ErrNoOpenCV) {
		t.Skip("built without OpenCV: run make test")
	}
	if err != nil {
		t.Fatal(err)
	}
	return rec
}

// A lot of twelve, filmed: 24 s with the battery in and 6 s with it out, good units
// scattering by 2 % from seat to seat. Each is told for what it is.
func TestFilmedUnits(t *testing.T) {
	if !*long {
		t.Skip("films twelve clips; run with -long")
	}
	for n, c := range []struct {
		name       string
		kick, loss float64
		want       string
	}{{"good", 1, 1, "Nothing is wrong"}, {"weak", 0.85, 1, "Reject: drive weak"}, {"more loss", 1, 1.15, "Reject: more loss"}} {
		for seed := range uint64(4) {
			t.Run(fmt.Sprintf("%s %d", c.name, seed), func(t *testing.T) {
				rng := rand.New(rand.NewPCG(seed, uint64(n)+501))
				toy, owner := knownGull(t), knownGull(t)
				smaller(toy, 0.5)
				smaller(owner, 0.5)
				loss := c.loss * (1 + 0.02*rng.NormFloat64())
				f := &toy.Parts[0].Friction
				f.Viscous.V, f.Dry.V = f.Viscous.V*loss, f.Dry.V*loss
				toy.Coils[0].KickJ.V *= c.kick * (1 + 0.02*rng.NormFloat64())
				toy.Start[0].AngleRad.V = 0.42 * (1 + 0.02*rng.NormFloat64())
				toy.Film.Seed.V = float64(100*n) + float64(seed)
				rec := filmAndMeasure(t, toy, owner, samples.Options{DurationS: 30, OffFromS: 24})
				said := rec.Find("kick.diagnosis", "")
				k := rec.Find("kick.energy", "")
				if said == nil || k == nil {
					t.Fatal("no diagnosis")
				}
				t.Logf("kick %.4g ± %.2g mJ, true %.4g; %s", 1e3*k.Value, 1e3*k.U, 1e3*toy.Coils[0].KickJ.V, said.Text)
				if !strings.HasPrefix(said.Text, c.want) || strings.Contains(said.Text, "And:") {
					t.Errorf("should be %q", c.want)
				}
				if math.Abs(k.Value/toy.Coils[0].KickJ.V-1) > 0.04 {
					t.Errorf("kick %.4g mJ, true %.4g", 1e3*k.Value, 1e3*toy.Coils[0].KickJ.V)
				}
			})
		}
	}
}

// The kick of filmed gulls and beacons is within 4 % of the truth from a start-up, a
// push, or 6 s with the coil off; of a gull at its steady amplitude nothing is told.
// Measured: gulls 0.1100 ± 0.0007 mJ (start-up) and 0.1096 ± 0.0010 (push), true
// 0.11; beacons 0.1485 ± 0.0031 (start-up) and 0.1504 ± 0.0028 (coil off), true 0.15.
func TestFilmedKicks(t *testing.T) {
	if !*long {
		t.Skip("films six clips; run with -long")
	}
	for _, c := range []struct {
		name, sample string
		start        float64 // rad; 0: the sample's
		opt          samples.Options
		truth        float64 // J; 0: cannot be separated
	}{
		{"gull, start-up", "gull", 0, samples.Options{DurationS: 30}, 0.11e-3},
		{"gull, push", "gull", 0.40, samples.Options{DurationS: 30, PushAtS: 8, PushRadS: 2.2}, 0.11e-3},
		{"gull, coil off", "gull", 0.42, samples.Options{DurationS: 30, OffFromS: 24}, 0.11e-3},
		{"gull, steady", "gull", 0.42265, samples.Options{DurationS: 20}, 0},
		{"beacon, start-up", "beacon", 0, samples.Options{DurationS: 30}, 0.15e-3},
		{"beacon, coil off", "beacon", 0, samples.Options{DurationS: 30, OffFromS: 24}, 0.15e-3},
	} {
		t.Run(c.name, func(t *testing.T) {
			r, err := samples.Open(c.sample)
			if err != nil {
				t.Fatal(err)
			}
			if c.start > 0 {
				r.Start[0].AngleRad.V = c.start
			}
			rec := filmAndMeasure(t, r, samples.OwnersRig(r), c.opt)
			k := rec.Find("kick.energy", "")
			switch {
			case k == nil:
				t.Errorf("%s: nothing is said of the kick; %s", c.name, rec.Find("kick.ledger", "").Text)
			case c.truth == 0:
				if k.Kind != finding.Undecided || !strings.Contains(k.Text, "cannot separate") {
					t.Errorf("%s: %+v", c.name, k)
				}
			default:
				t.Logf("%s: kick %.4g ± %.2g mJ, true %.4g", c.name, 1e3*k.Value, 1e3*k.U, 1e3*c.truth)
				if k.Kind != finding.Measured || math.Abs(k.Value/c.truth-1) > 0.04 || math.Abs(k.Value-c.truth) > 3*k.U {
					t.Errorf("%s: %+v", c.name, k)
				}
			}
		})
	}
}
