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
// (The axle is the middle of the fitted circle; the camera's own motion in the
// first frames and its oblique view are in that figure.)
func TestPhoneClip(t *testing.T) {
	src := openShared(t, "phone-clip/weight-on-rod.mp4")
	r, cam := solve(t, phoneRig, src.Facts().W, src.Facts().H)
	tr, err := Follow(context.Background(), src, r, cam, Options{})
	if err != nil {
		t.Fatal(err)
	}
	weight := tr.Find("weight")
	var count [4]int
	for i, s := range weight.Samples {
		count[s.State]++
		if s.State == track.Missing {
			t.Logf("frame %d: missing", i)
		}
		// It leaves over the edge: only there may it be missing.
		if s.State == track.Missing && (weight.Samples[i-1].State != track.AtEdge && weight.Samples[i-1].State != track.Missing) {
			t.Errorf("frame %d: the weight is lost inside the picture", i)
		}
	}
	_, _, r0, rms := circleOf(weight.Usable())
	t.Logf("weight: %d seen, %d partly hidden, %d at the edge, %d missing; from the axle %.1f px, ± %.2f px r.m.s. = %.2f %%", count[track.Seen], count[track.PartlyHidden], count[track.AtEdge], count[track.Missing], r0, rms, 100*rms/r0)
	if rms > 0.015*r0 {
		t.Errorf("distance from the axle: %.2f %% r.m.s., more than 1.5 %%", 100*rms/r0)
	}
	if count[track.Missing] > 2 {
		t.Errorf("the weight is missing in %d frames", count[track.Missing])
	}
}

// circleOf fits a circle to samples: u²+v² = 2au+2bv+c by linear least squares
// (Kåsa 1976), which is good enough for an arc of more than a half circle.
func circleOf(s []track.Sample) (cu, cv, r, rms float64) {
	var a [3][4]float64
	o := s[0]
	for i := range s {
		u, v := s[i].U-o.U, s[i].V-o.V
		row := [3]float64{2 * u, 2 * v, 1}
		for p := range 3 {
			for q := range 3 {
				a[p][q] += row[p] * row[q]
			}
			a[p][3] += row[p] * (u*u + v*v)
		}
	}
	for i := range 3 { // normal equations are positive definite: no pivoting
		for k := range 3 {
			if k == i {
				continue
			}
			m := a[k][i] / a[i][i]
			for j := range 4 {
				a[k][j] -= m * a[i][j]
			}
		}
	}
	x, y, c := a[0][3]/a[0][0], a[1][3]/a[1][1], a[2][3]/a[2][2]
	cu, cv, r = o.U+x, o.V+y, math.Sqrt(c+x*x+y*y)
	for i := range s {
		e := math.Hypot(s[i].U-cu, s[i].V-cv) - r
		rms += e * e / float64(len(s))
	}
	return cu, cv, r, math.Sqrt(rms)
}
