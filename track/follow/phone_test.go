package follow

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

const phoneRig = `
name = "Weight on a rod"
[camera]
vertical = "picture"
[scale]
length_mm = 500
ends_px = [[637, 325], [644, 676]]
[[bob]]
name = "weight"
look = "dark"
start_px = [644, 676]
ball = false
[[bob]]
name = "axle"
look = "dark"
start_px = [635, 290]
diameter_mm = 120
ball = false
`

// openClip opens a clip of ../shared/data, or skips.
func openShared(t testing.TB, name string) clip.Source {
	t.Helper()
	path := filepath.Join("..", "..", "..", "shared", "data", name)
	if _, err := os.Stat(path); err != nil {
		t.Skipf("skipped: %s is not here", path)
	}
	return openClip(t, path)
}

func openClip(t testing.TB, path string) clip.Source {
	t.Helper()
	ctx := context.Background()
	facts, err := clip.Inspect(ctx, path, clip.Options{})
	if err != nil {
		t.Fatal(err)
	}
	src, err := clip.Open(ctx, facts)
	if err != nil {
		if strings.Contains(err.Error(), "without OpenCV") {
			t.Skipf("skipped: %v", err)
		}
		t.Fatal(err)
	}
	t.Cleanup(func() { src.Close() })
	return src
}

func solve(t testing.TB, text string, w, h int) (*rig.Rig, *camera.Camera) {
	t.Helper()
	r, err := rig.Parse("test.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	cam, err := camera.New(r, w, h, nil)
	if err != nil {
		t.Fatal(err)
	}
	return r, cam
}

// The weight of the laboratory's clip is followed in every frame in which it is
// inside the picture, and stays at one distance from the axle: 1.5 % r.m.s.
// (The rod is rigid; the camera's own motion in the first frames moves both.)
func TestPhoneClip(t *testing.T) {
	src := openShared(t, "phone-clip/weight-on-rod.mp4")
	r, cam := solve(t, phoneRig, src.Facts().W, src.Facts().H)
	tr, err := Follow(context.Background(), src, r, cam, Options{})
	if err != nil {
		t.Fatal(err)
	}
	weight, axle := tr.Find("weight").Samples, tr.Find("axle").Samples
	var count [4]int
	var n, sum, sum2 float64
	for i, s := range weight {
		count[s.State]++
		if s.State == track.Missing {
			t.Logf("frame %d: missing", i)
		}
		// It leaves over the edge: only there may it be missing.
		if s.State == track.Missing && (weight[i-1].State != track.AtEdge && weight[i-1].State != track.Missing) {
			t.Errorf("frame %d: the weight is lost inside the picture", i)
		}
		if axle[i].State == track.Missing {
			t.Errorf("frame %d: the axle is lost", i)
		}
		if s.State.Usable() {
			d := math.Hypot(s.U-axle[i].U, s.V-axle[i].V)
			n++
			sum += d
			sum2 += d * d
		}
	}
	mean := sum / n
	rms := math.Sqrt(sum2/n - mean*mean)
	t.Logf("weight: %d seen, %d partly hidden, %d at the edge, %d missing; from the axle %.1f px, ± %.2f px r.m.s. = %.2f %%", count[track.Seen], count[track.PartlyHidden], count[track.AtEdge], count[track.Missing], mean, rms, 100*rms/mean)
	if rms > 0.015*mean {
		t.Errorf("distance from the axle: %.2f %% r.m.s., more than 1.5 %%", 100*rms/mean)
	}
	if count[track.Missing] > 4 {
		t.Errorf("the weight is missing in %d frames", count[track.Missing])
	}
}
