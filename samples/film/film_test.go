package film

import (
	"math"
	"math/rand/v2"
	"testing"
)

// plainScene is one unshaded bob on an even wall.
func plainScene(c Camera, b Bob) *Scene {
	b.Plain, b.Name = true, "bob"
	b.Colour = RGB{60, 60, 60}
	return &Scene{Camera: c, Wall: Wall{Level: RGB{200, 200, 200}, Y: 0.3}, Bobs: []Bob{b}}
}

func still(p Vec) func(float64) Vec { return func(float64) Vec { return p } }

// centroid is the centre of what differs from the wall, and its area in px.
func centroid(s *Scene, t float64) (u, v, area float64) {
	w, h := s.Camera.Width, s.Camera.Height
	x := make([]float32, 3*w*h)
	s.Levels(t, x)
	for j := range h {
		for i := range w {
			a := (200 - float64(x[3*(j*w+i)])) / 140
			area += a
			u += a * float64(i)
			v += a * float64(j)
		}
	}
	return u / area, v / area, area
}

// A still flat disc's centroid is its centre, whatever the sub-pixel place.
func TestDiscCentroid(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 1))
	for _, blur := range []float64{0.4, 0.8, 1.5} {
		worst, worstArea := 0.0, 0.0
		for range 40 {
			d := 0.010 + 0.05*rnd.Float64()
			p := Vec{0.004 * (rnd.Float64() - 0.5), 0, 0.004 * (rnd.Float64() - 0.5)}
			s := plainScene(Camera{Width: 120, Height: 110, PixelsPerM: 1000, BlurPX: blur}, Bob{DiameterM: d, At: still(p), Flat: true})
			u, v, area := centroid(s, 0)
			q := s.Truth(0)[0]
			if math.Abs(q.U-(59.5+1000*p[0])) > 1e-9 || math.Abs(q.V-(54.5-1000*p[2])) > 1e-9 {
				t.Fatalf("truth (%g, %g) for %v", q.U, q.V, p)
			}
			worst = max(worst, math.Hypot(u-q.U, v-q.V))
			worstArea = max(worstArea, math.Abs(area/(math.Pi*1e6*d*d/4)-1))
		}
		t.Logf("blur %.1f px: centroid within %.1e px, area within %.1e", blur, worst, worstArea)
		if worst > 1e-3 || worstArea > 1e-3 {
			t.Errorf("blur %g: centroid error %g px, area error %g", blur, worst, worstArea)
		}
	}
}

// A sphere's image through a pinhole is an ellipse whose middle, in normalised
// coordinates, is (X Z, Y Z)/(Z² − R²) (projective geometry: the cone of tangent
// rays cᵀd = |d| sqrt(|c|² − R²) cut by the image plane). Its semi-axes are
// R sqrt(|c|²−R²)/(Z²−R²) along the radius and R/sqrt(Z²−R²) across it.
func TestBallEllipse(t *testing.T) {
	rnd := rand.New(rand.NewPCG(2, 1))
	worst, worstArea, offset := 0.0, 0.0, 0.0
	for range 25 {
		c := Camera{Width: 640, Height: 480, DistanceM: 0.8, FocalPX: 700}
		r := 0.01 + 0.02*rnd.Float64()
		p := Vec{0.5 * (rnd.Float64() - 0.5), 0.1 * (rnd.Float64() - 0.5), 0.36 * (rnd.Float64() - 0.5)}
		s := plainScene(c, Bob{DiameterM: 2 * r, At: still(p)})
		u, v, area := centroid(s, 0)
		x, y, z := p[0], -p[2], 0.8+p[1]
		f := 700 / (z*z - r*r)
		eu, ev := 319.5+f*x*z, 239.5+f*y*z
		ea := math.Pi * 700 * 700 * r * r * math.Sqrt(x*x+y*y+z*z-r*r) / math.Pow(z*z-r*r, 1.5)
		worst = max(worst, math.Hypot(u-eu, v-ev))
		worstArea = max(worstArea, math.Abs(area/ea-1))
		q := s.Truth(0)[0]
		if math.Hypot(q.U-(319.5+700*x/z), q.V-(239.5+700*y/z)) > 1e-9 {
			t.Fatal("the truth is not the image of the centre")
		}
		offset = max(offset, math.Hypot(u-q.U, v-q.V))
	}
	t.Logf("ellipse's middle within %.1e px, area within %.1e; largest offset from the centre's image %.3f px", worst, worstArea, offset)
	if worst > 1e-3 || worstArea > 1e-3 {
		t.Errorf("middle off by %g px, area by %g", worst, worstArea)
	}
}

// demoLike is a scene as busy as the demo's: a rod, a glossy ball, a shadow.
func demoLike() *Scene {
	at := func(r float64) func(t float64) Vec {
		return func(t float64) Vec {
			a := 0.6 * math.Cos(6*t)
			return Vec{r * math.Sin(a), 0, -r * math.Cos(a)}
		}
	}
	return &Scene{
		Camera: Camera{
			Width: 1280, Height: 720, PixelsPerM: 1900, DistanceM: 1.2, LookAt: Vec{0, 0, -0.14},
			K1: -0.03, ReadoutS: 0.012, ExposureS: 0.004,
		},
		Wall:       Wall{Level: RGB{196, 194, 186}, GradU: 14, GradV: -10, Texture: 2, Vignette: 0.15, Y: 0.06},
		Light:      Light{Shadow: 0.35},
		Bobs:       []Bob{{Name: "lamp", Colour: RGB{184, 38, 31}, DiameterM: 0.036, At: at(0.28), Gloss: 0.6}},
		Rods:       []Rod{{Colour: RGB{120, 120, 124}, DiameterM: 0.004, From: at(0), To: at(0.262)}},
		Noise:      Noise{Read: 1.2, Shot: 0.02},
		Sharpening: 0.3, FramesPerS: 60, Seed: 7,
	}
}

func BenchmarkRender720p(b *testing.B) {
	s := demoLike()
	dst := make([]byte, 3*1280*720)
	i := 0
	s.Render(0, dst)
	for b.Loop() {
		s.Render(s.Time(i), dst)
		i++
	}
}
