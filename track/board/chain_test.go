package board

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// From the picture of a target, tilted by 10° and seen through a lens with
// distortion and noise, lengths in the plane come back within their stated
// uncertainty. With -long, 96.1 % of 3,160 lengths from 200 pictures lie in their
// 95 % interval.
func TestLengthsComeBack(t *testing.T) {
	count := 1
	if *long {
		count = 25
	}
	var in, n int
	var worst float64
	for name, s := range scenes() {
		if !*long && name != "tilt 10" && name != "lens" && name != "small" {
			continue
		}
		for k := range count {
			rng := rand.New(rand.NewPCG(uint64(k), 99))
			seen, err := Find([]*clip.Frame{s.render(t, rng)}, s.spec.Name())
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			r, err := rig.Parse("m.toml", []byte(fmt.Sprintf("[camera]\nreadout_ms = 0\n[scale]\ntarget = %q\nlength_mm = 100\nu_length_mm = 0.02\ndepth_mm = 0\nu_depth_mm = 0.05\n", s.spec.Name())))
			if err != nil {
				t.Fatal(err)
			}
			c, err := camera.New(r, s.w, s.h, seen)
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			truth := s.truth(t)
			for range 20 {
				a := [2]float64{320 + 640*rng.Float64(), 180 + 360*rng.Float64()}
				b := [2]float64{320 + 640*rng.Float64(), 180 + 360*rng.Float64()}
				if math.Hypot(a[0]-b[0], a[1]-b[1]) < 150 {
					continue
				}
				length := func(c *camera.Camera) float64 {
					x1, z1, _ := c.ToPlane(a[0], a[1])
					x2, z2, _ := c.ToPlane(b[0], b[1])
					return math.Hypot(x2-x1, z2-z1)
				}
				got, want := length(c), length(truth)
				var u float64
				for i := range c.Calibration().Lens.Unsure {
					by := make([]float64, i+1)
					by[i] = 1
					d := length(c.Moved(by)) - got
					u += d * d
				}
				pull := math.Abs(got-want) / math.Sqrt(u)
				worst = math.Max(worst, pull)
				n++
				if pull < 1.96 {
					in++
				}
			}
			if k == 0 {
				t.Logf("%-12s scale ±%.3f %%, focal %.0f px (true 960), from %v", name, 100*c.Calibration().UScale, c.Calibration().Lens.FocalPX, c.Calibration().ScaleShares)
			}
		}
	}
	share := float64(in) / float64(n)
	t.Logf("95 %% intervals hold %d of %d lengths (%.1f %%), largest error %.1f standard uncertainties", in, n, 100*share, worst)
	// Lengths of one picture share their errors, so that few pictures allow a wide band.
	if share < 0.85 || worst > 5 {
		t.Errorf("95 %% intervals hold %.1f %%, largest error %.1f standard uncertainties", 100*share, worst)
	}
}

// An unmeasured print is believed to half a per cent only, and says so.
func TestUnmeasuredPrint(t *testing.T) {
	s := scenes()["tilt 10"]
	seen, err := Find([]*clip.Frame{s.render(t, rand.New(rand.NewPCG(1, 2)))}, s.spec.Name())
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		more    string
		u       float64
		caution bool
		err     string
	}{
		{"", 0.005, true, ""},
		{"length_mm = 98\nu_length_mm = 0.1\n", 0.1 / 98, false, ""},
		{"length_mm = 50\n", 0, false, "must be the measured length of that bar"},
	} {
		r, err := rig.Parse("m.toml", []byte("[scale]\ntarget = \""+s.spec.Name()+"\"\n"+c.more))
		if err != nil {
			t.Fatal(err)
		}
		cam, err := camera.New(r, s.w, s.h, seen)
		if c.err != "" {
			if err == nil || !strings.Contains(err.Error(), c.err) {
				t.Errorf("%q: %v", c.more, err)
			}
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		for _, share := range cam.Calibration().ScaleShares {
			if share.Source == "the print's size" && math.Abs(share.U/c.u-1) > 0.01 {
				t.Errorf("%q: the print's share is %g, want %g", c.more, share.U, c.u)
			}
		}
		if said := strings.Contains(strings.Join(cam.Cautions(), " "), "not checked"); said != c.caution {
			t.Errorf("%q: caution %t", c.more, said)
		}
	}
}
