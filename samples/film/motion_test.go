package film

import (
	"math"
	"testing"
)

// The middle of a smear is the mean place over the exposure: that of the middle
// instant plus aτ²/24 (the second moment of an even exposure is τ²/12).
func TestSmear(t *testing.T) {
	const v, a, tau = 2.0, 400.0, 0.01 // m/s, m/s², s: 20 px of smear
	s := plainScene(Camera{Width: 160, Height: 80, PixelsPerM: 1000, ExposureS: tau}, Bob{
		DiameterM: 0.02, Flat: true,
		At: func(t float64) Vec { return Vec{0.0123 + v*t + a*t*t/2, 0, 0.0007} },
	})
	u, w, _ := centroid(s, 0)
	q := s.Truth(0)[0]
	want := q.U + 1000*a*tau*tau/24
	t.Logf("smear of 20 px: middle off by %.1e, %.1e px; acceleration term %.3f px", u-want, w-q.V, want-q.U)
	if math.Abs(u-want) > 1e-3 || math.Abs(w-q.V) > 1e-3 {
		t.Errorf("centroid (%.4f, %.4f), want (%.4f, %.4f)", u, w, want, q.V)
	}
}

// A smear is even: between its ends the brightness is that of the mean share of
// time for which the bob covers the pixel, without ripples.
func TestSmearIsSmooth(t *testing.T) {
	const v, tau = 6.0, 0.01 // 60 px
	s := plainScene(Camera{Width: 160, Height: 40, PixelsPerM: 1000, ExposureS: tau}, Bob{
		DiameterM: 0.01, Flat: true, At: func(t float64) Vec { return Vec{v * t, 0, 0} },
	})
	x := make([]float32, 3*160*40)
	s.Levels(0, x)
	// Through the middle row the chord is 10 px wide and passes at 60 px an exposure.
	worst := 0.0
	for u := 60; u < 100; u++ {
		worst = max(worst, math.Abs(float64(x[3*(19*160+u)])-float64(x[3*(19*160+80)])))
	}
	t.Logf("ripple along the smear %.3f grey levels", worst)
	if worst > 0.1 {
		t.Errorf("ripple of %g grey levels", worst)
	}
}

// With a rolling shutter a disc that moves evenly becomes an ellipse about the
// place where its centre's row sees it.
func TestRollingShutter(t *testing.T) {
	for _, dir := range []Vec{{3, 0, 0}, {0, 0, 3}, {2, 0, -2}} {
		s := plainScene(Camera{Width: 200, Height: 160, PixelsPerM: 1000, ReadoutS: 0.02}, Bob{
			DiameterM: 0.03, Flat: true, At: func(t float64) Vec { return add(Vec{-0.02, 0, 0}, scale(dir, t)) },
		})
		u, v, _ := centroid(s, 0)
		q := s.Truth(0)[0]
		delay := 0.02 * (q.V/159 - 0.5)
		if math.Abs(q.T-delay) > 1e-9 {
			t.Errorf("the row at v = %g is exposed at %g, not at %g", q.V, delay, q.T)
		}
		if math.Hypot(u-q.U, v-q.V) > 1e-3 {
			t.Errorf("direction %v: centroid (%.4f, %.4f), truth (%.4f, %.4f)", dir, u, v, q.U, q.V)
		}
		early := s.Bobs[0].At(-0.01)
		if moved := 1000 * math.Hypot(q.At[0]-early[0], q.At[2]-early[2]); moved < 10 {
			t.Errorf("the read-out moved the bob by only %.1f px: nothing was tested", moved)
		}
	}
}

// What a lens with distortion shows is checked against a slow computation of its
// own: rays through a fine grid, the distortion undone by fixed-point steps.
func TestLensAgainstSlowRays(t *testing.T) {
	c := Camera{Width: 400, Height: 300, DistanceM: 0.6, FocalPX: 420, K1: -0.12, K2: 0.03, Tilt: 0.2, Pan: -0.1, Roll: 0.3}
	r := 0.02
	for _, p := range []Vec{{0.2, 0.02, 0.1}, {-0.19, -0.05, -0.12}} {
		s := plainScene(c, Bob{DiameterM: 2 * r, At: still(p)})
		u, v, area := centroid(s, 0)
		q := s.Truth(0)[0]
		su, sv, sa := slowRays(&c, p, r, q.U, q.V)
		t.Logf("at (%.0f, %.0f): centroid off by (%.1e, %.1e) px, area by %.1e; centre's image %.3f px away",
			u, v, u-su, v-sv, area/sa-1, math.Hypot(u-q.U, v-q.V))
		if math.Hypot(u-su, v-sv) > 2e-3 || math.Abs(area/sa-1) > 1e-3 {
			t.Errorf("centroid (%.4f, %.4f), slow (%.4f, %.4f); area %.2f, slow %.2f", u, v, su, sv, area, sa)
		}
	}
}

func slowRays(c *Camera, p Vec, r, uc, vc float64) (u, v, area float64) {
	// Rotation by hand: pan about z, tilt about the camera's x, roll about its axis.
	sp, cp := math.Sincos(c.Pan)
	st, ct := math.Sincos(c.Tilt)
	sr, cr := math.Sincos(c.Roll)
	ahead := Vec{sp * ct, cp * ct, -st}
	right := Vec{cp, -sp, 0}
	down := Vec{-sp * st, -cp * st, -ct}
	eye := sub(c.LookAt, scale(ahead, c.DistanceM))
	const h = 0.04
	for y := vc - 18; y < vc+18; y += h {
		for x := uc - 18; x < uc+18; x += h {
			xd, yd := (x-float64(c.Width-1)/2)/c.FocalPX, (y-float64(c.Height-1)/2)/c.FocalPX
			xn, yn := xd, yd
			for range 25 { // contracts by about 2 K1 r² a step
				r2 := xn*xn + yn*yn
				g := 1 + c.K1*r2 + c.K2*r2*r2
				xn, yn = xd/g, yd/g
			}
			// The content was turned clockwise: turn the ray back.
			a, b := cr*xn+sr*yn, -sr*xn+cr*yn
			d := unit(add(ahead, add(scale(right, a), scale(down, b))))
			w := sub(p, eye)
			along := dot(w, d)
			if dot(w, w)-along*along < r*r {
				area += h * h
				u += x
				v += y
			}
		}
	}
	n := area / (h * h)
	return u / n, v / n, area
}
