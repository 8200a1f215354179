package film

import (
	"bytes"
	"math"
	"sync"
	"testing"
)

// The usual grid of two samples per pixel gives the picture of a shaded, glossy
// ball that a grid four times as fine gives.
func TestGridIsFineEnough(t *testing.T) {
	for _, d := range []float64{0.02, 0.036} {
		build := func() *Scene {
			return &Scene{
				Camera: Camera{Width: 90, Height: 90, PixelsPerM: 1000, DistanceM: 0.8},
				Wall:   Wall{Level: RGB{200, 200, 200}},
				Bobs:   []Bob{{Name: "b", Colour: RGB{60, 60, 60}, DiameterM: d, Gloss: 0.7, At: still(Vec{0.0003, 0, -0.0004})}},
			}
		}
		a, b := build(), build()
		st := b.stage()
		st.fine = 8
		st.setTaps(8)
		x, y := make([]float32, 3*90*90), make([]float32, 3*90*90)
		a.Levels(0, x)
		b.Levels(0, y)
		worst, square := 0.0, 0.0
		for i := range x {
			e := math.Abs(float64(x[i] - y[i]))
			worst = max(worst, e)
			square += e * e
		}
		rms := math.Sqrt(square / float64(len(x)))
		t.Logf("%g px: largest difference %.2f grey levels, r.m.s. %.3f", d*1000, worst, rms)
		if worst > 1 || rms > 0.05 {
			t.Errorf("%g px: the grid is too coarse: %g, r.m.s. %g", d*1000, worst, rms)
		}
		ua, va, _ := centroid(a, 0)
		ub, vb, _ := centroid(b, 0)
		if math.Hypot(ua-ub, va-vb) > 1e-3 {
			t.Errorf("%g px: weighted centre moves by (%g, %g) px with the grid", d*1000, ua-ub, va-vb)
		}
	}
}

// A highlight is where the half vector between lamp and eye points, not at the
// ball's middle.
func TestHighlightIsOffTheCentre(t *testing.T) {
	s := &Scene{
		Camera: Camera{Width: 120, Height: 120, PixelsPerM: 1000},
		Wall:   Wall{Level: RGB{100, 100, 100}},
		Light:  Light{From: Vec{-1, -1, 1}},
		Bobs:   []Bob{{Colour: RGB{40, 40, 40}, DiameterM: 0.08, Gloss: 1, At: still(Vec{})}},
	}
	x := make([]float32, 3*120*120)
	s.Levels(0, x)
	best, bu, bv := float32(0), 0, 0
	for v := range 120 {
		for u := range 120 {
			if p := x[3*(v*120+u)]; p > best {
				best, bu, bv = p, u, v
			}
		}
	}
	// n = unit(unit(−1, −1, 1) + (0, −1, 0)); its x and z times the radius of 40 px.
	k := 1 / math.Sqrt(3)
	n := unit(Vec{-k, -k - 1, k})
	if math.Abs(float64(bu)-(59.5+40*n[0])) > 1 || math.Abs(float64(bv)-(59.5-40*n[2])) > 1 {
		t.Errorf("highlight at (%d, %d), want (%.1f, %.1f)", bu, bv, 59.5+40*n[0], 59.5-40*n[2])
	}
}

// The noise has the variance that it claims, no mean, and is new in each frame.
func TestNoise(t *testing.T) {
	for _, level := range []float64{40, 128, 220} {
		s := &Scene{
			Camera: Camera{Width: 320, Height: 240, PixelsPerM: 1000}, Wall: Wall{Level: RGB{level, level, level}},
			Noise: Noise{Read: 1.5, Shot: 0.03}, Seed: 5, FramesPerS: 60,
		}
		a, b := s.Frame(0), s.Frame(1)
		var mean, square, cross, next float64
		n := float64(len(a.Pix))
		for i := range a.Pix {
			x, y := float64(a.Pix[i])-level, float64(b.Pix[i])-level
			mean += x / n
			square += x * x / n
			cross += x * y / n
			if i > 2 {
				next += x * (float64(a.Pix[i-3]) - level) / n
			}
		}
		want := 1.5*1.5 + 0.03*level + 1.0/12 // rounding adds its own
		t.Logf("level %g: variance %.3f (claimed %.3f), mean %.3f, correlation with the next frame %.4f, next pixel %.4f",
			level, square-mean*mean, want, mean, cross/square, next/square)
		if math.Abs((square-mean*mean)/want-1) > 0.02 || math.Abs(mean) > 0.02 {
			t.Errorf("level %g: mean %g, variance %g, want 0 and %g", level, mean, square-mean*mean, want)
		}
		// 230,400 numbers: four standard deviations of a correlation are 0.0083.
		if math.Abs(cross/square) > 0.0083 || math.Abs(next/square) > 0.0083 {
			t.Errorf("level %g: noise is correlated: %g between frames, %g between pixels", level, cross/square, next/square)
		}
	}
}

func TestTexture(t *testing.T) {
	s := &Scene{
		Camera: Camera{Width: 320, Height: 240, PixelsPerM: 1000},
		Wall:   Wall{Level: RGB{150, 150, 150}, Texture: 8}, Seed: 3,
	}
	x, y := make([]float32, 3*320*240), make([]float32, 3*320*240)
	s.Levels(0, x)
	s.Levels(0.5, y)
	var square float64
	for i := range x {
		if x[i] != y[i] {
			t.Fatal("the wall's texture changes with time")
		}
		d := float64(x[i]) - 150
		square += d * d / float64(len(x))
	}
	if rms := math.Sqrt(square); math.Abs(rms-8) > 0.2 {
		t.Errorf("texture of %g grey levels r.m.s., want 8", rms)
	}
}

// Sharpening puts a bright halo outside and a dark one inside, and moves nothing.
func TestHalo(t *testing.T) {
	s := plainScene(Camera{Width: 120, Height: 120, PixelsPerM: 1000}, Bob{DiameterM: 0.04, Flat: true, At: still(Vec{0.0003, 0, 0.0002})})
	s.Sharpening = 0.5
	x := make([]float32, 3*120*120)
	s.Levels(0, x)
	lo, hi := float32(255), float32(0)
	for _, p := range x {
		lo, hi = min(lo, p), max(hi, p)
	}
	if hi < 203 || lo > 57 {
		t.Errorf("levels from %g to %g: no halo around 60 and 200", lo, hi)
	}
	u, v, _ := centroid(s, 0)
	q := s.Truth(0)[0]
	if math.Hypot(u-q.U, v-q.V) > 1e-3 {
		t.Errorf("sharpening moved the bob by (%g, %g) px", u-q.U, v-q.V)
	}
}

// The nearer bob covers the farther one; the share that shows is the closed form
// for two discs (the lens area).
func TestCovering(t *testing.T) {
	s := &Scene{
		Camera: Camera{Width: 160, Height: 120, PixelsPerM: 1000},
		Wall:   Wall{Level: RGB{200, 200, 200}},
		Bobs: []Bob{
			{Name: "near", Colour: RGB{255, 0, 0}, DiameterM: 0.04, At: still(Vec{0.01, -0.05, 0}), Plain: true},
			{Name: "far", Colour: RGB{0, 0, 255}, DiameterM: 0.04, At: still(Vec{-0.01, 0.05, 0}), Plain: true},
		},
	}
	x := make([]float32, 3*160*120)
	s.Levels(0, x)
	if p := x[3*(59*160+79):]; p[2] < 254 || p[0] > 1 {
		t.Errorf("between the centres the picture is (%g, %g, %g): the nearer bob should cover", p[0], p[1], p[2])
	}
	front := &Scene{Camera: s.Camera, Wall: s.Wall, Bobs: s.Bobs, Rods: []Rod{{
		Colour: RGB{9, 9, 9}, DiameterM: 0.01, Plain: true, Front: true,
		From: still(Vec{0, 0.2, -0.1}), To: still(Vec{0, 0.2, 0.1}),
	}}}
	front.Levels(0, x)
	if p := x[3*(59*160+79):]; p[2] > 12 {
		t.Errorf("a rod in front of all does not cover: red is %g", p[2])
	}
	q := s.Truth(0)
	d := 0.5 // centre distance over diameter
	lens := 2 / math.Pi * (math.Acos(d) - d*math.Sqrt(1-d*d))
	if math.Abs(q[0].Shown-1) > 0.01 || math.Abs(q[1].Shown-(1-lens)) > 0.02 {
		t.Errorf("shown %g and %g, want 1 and %g", q[0].Shown, q[1].Shown, 1-lens)
	}
}

// The same scene gives the same bytes, whoever renders it and in whatever order.
func TestSameBytes(t *testing.T) {
	small := func() *Scene {
		s := demoLike()
		s.Camera.Width, s.Camera.Height, s.Camera.PixelsPerM = 320, 180, 475
		return s
	}
	a, b := small(), small()
	var wg sync.WaitGroup
	frames := make([]Frame, 12)
	for i := range frames {
		wg.Go(func() { frames[i] = b.Frame(i) })
	}
	wg.Wait()
	for i := len(frames) - 1; i >= 0; i-- {
		if !bytes.Equal(a.Frame(i).Pix, frames[i].Pix) {
			t.Fatalf("frame %d depends on the order of rendering", i)
		}
	}
	c := small()
	c.Seed++
	if bytes.Equal(c.Frame(0).Pix, frames[0].Pix) {
		t.Error("another seed gives the same picture")
	}
}

// Only what moves is rendered anew: a worker that has rendered other frames
// gives the same picture as a fresh one.
func TestOnlyWhatMovesIsDrawn(t *testing.T) {
	small := func() *Scene {
		s := demoLike()
		s.Camera.Width, s.Camera.Height, s.Camera.PixelsPerM = 480, 270, 712
		s.Noise, s.Sharpening = Noise{}, 0.5
		return s
	}
	used, x, y := small(), make([]float32, 3*480*270), make([]float32, 3*480*270)
	for i := range 6 {
		at := 0.11 * float64(i)
		used.Levels(at, x)
		small().Levels(at, y)
		for k := range x {
			if x[k] != y[k] {
				t.Fatalf("at %g s the level at (%d, %d) is %g after other frames and %g at first", at, k/3%480, k/3/480, x[k], y[k])
			}
		}
	}
}
