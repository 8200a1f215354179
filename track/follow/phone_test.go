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

func TestPhoneClip(t *testing.T) {
	src := openShared(t, "phone-clip/weight-on-rod.mp4")
	r, cam := solve(t, phoneRig, src.Facts().W, src.Facts().H)
	tr, err := Follow(context.Background(), src, r, cam, Options{})
	if err != nil {
		t.Fatal(err)
	}
	b := tr.Find("weight")
	for i, s := range b.Samples {
		if i < 5 || i > 40 && i < 130 {
			su, sv := s.Pixel.Sigmas()
			t.Logf("%3d %.3f %v (%.2f, %.2f) ± (%.3f, %.3f)", s.Frame, s.T, s.State, s.U, s.V, su, sv)
		}
	}
	t.Log(tr.Cautions)
	cu, cv, rad, rms := circleOf(b.Usable())
	t.Logf("circle: (%.2f, %.2f) r %.2f, rms %.3f px = %.3f %%", cu, cv, rad, rms, 100*rms/rad)
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
