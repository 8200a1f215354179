package follow

import (
	"math"
	"strings"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// discs draws dark discs on a light wall, antialiased by 8 × 8 samples a pixel.
func discs(w, h int, at [][3]float64) *clip.Frame {
	f := clip.NewFrame(0, 0, w, h)
	const n = 8
	for y := range h {
		for x := range w {
			cover := 0.0
			for _, d := range at {
				for i := range n * n {
					u := float64(x) + (float64(i%n)+0.5)/n - 0.5
					v := float64(y) + (float64(i/n)+0.5)/n - 0.5
					if math.Hypot(u-d[0], v-d[1]) < d[2] {
						cover += 1.0 / (n * n)
					}
				}
			}
			for k := range 3 {
				f.Pix[y*f.Stride+3*x+k] = byte(math.Round(200 - 170*cover))
			}
		}
	}
	return f
}

func TestTwoMarksAreFoundByThemselves(t *testing.T) {
	f := discs(320, 240, [][3]float64{{60.3, 50.7, 8}, {260.25, 61.4, 8}})
	s, err := Marks(f, &rig.Rig{Scale: rig.Scale{MarkLook: "dark"}}, false)
	if err != nil {
		t.Fatal(err)
	}
	a, b := s.Ends.At[0], s.Ends.At[1]
	got, want := math.Hypot(a[0]-b[0], a[1]-b[1]), math.Hypot(260.25-60.3, 61.4-50.7)
	if math.Abs(got-want) > 0.05 {
		t.Errorf("the marks are %.3f px apart, drawn %.3f", got, want)
	}
	if u := s.Ends.Pixel[0].AA; !(u > 0) || u > 0.1 {
		t.Errorf("variance of a mark's centre %g px²", u)
	}
}

func TestUnclearMarksAreSaidPlainly(t *testing.T) {
	for name, at := range map[string][][3]float64{
		"three alike": {{60, 50, 8}, {260, 60, 8}, {150, 150, 8}},
		"one":         {{60, 50, 8}},
		"sizes":       {{60, 50, 6}, {260, 60, 14}},
	} {
		_, err := Marks(discs(320, 240, at), &rig.Rig{Scale: rig.Scale{MarkLook: "dark"}}, false)
		if err == nil || !strings.Contains(err.Error(), "ends_px") {
			t.Errorf("%s: %v", name, err)
		}
	}
}
