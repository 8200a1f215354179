package follow

import (
	"context"
	"fmt"
	"io"
	"math"
	"strings"
	"testing"

	"lodeswing/samples/film"
	"lodeswing/track"
	"lodeswing/track/clip"
)

// filmed is a clip.Source that renders a scene in memory.
type filmed struct {
	scene *film.Scene
	n, i  int
	facts clip.Facts
	frame *clip.Frame
}

func newFilmed(s *film.Scene, n int) *filmed {
	f := &filmed{scene: s, n: n}
	f.facts = clip.Facts{Path: "rendered", PixelFormat: "bgr24", W: s.Camera.Width, H: s.Camera.Height, StoredW: s.Camera.Width, StoredH: s.Camera.Height, TrueRate: s.FramesPerS, NominalRate: s.FramesPerS, RateFactor: 1}
	for i := range n {
		f.facts.Times = append(f.facts.Times, s.Time(i))
	}
	f.frame = clip.NewFrame(0, 0, s.Camera.Width, s.Camera.Height)
	return f
}

func (f *filmed) Next(ctx context.Context) (*clip.Frame, error) {
	if f.i >= f.n {
		return nil, io.EOF
	}
	f.frame.Index, f.frame.T = f.i, f.scene.Time(f.i)
	f.scene.Render(f.frame.T, f.frame.Pix)
	f.i++
	return f.frame, nil
}
func (f *filmed) Facts() *clip.Facts        { return &f.facts }
func (f *filmed) Damage() (float64, string) { return math.NaN(), "" }
func (f *filmed) Close() error              { return nil }

// swing is the place of a bob on a pendulum of length l about (x, z), from an
// amplitude a (rad), at angular frequency w.
func swing(x, z, l, a, w, phase float64) func(float64) film.Vec {
	return func(t float64) film.Vec {
		q := a * math.Cos(w*t+phase)
		return film.Vec{x + l*math.Sin(q), 0, z - l*math.Cos(q)}
	}
}

// errors of one bob of a track against the truth, px.
type errs struct {
	n, missing, hidden int
	rms, bias, worst   float64
	nees               float64 // mean of eᵀC⁻¹e over 2
	world              float64 // m, r.m.s. per axis
	radial, along      float64
	u                  float64 // mean stated standard uncertainty, px
}

func (e errs) String() string {
	return fmt.Sprintf("%4d seen, %d hidden, %d missing: %.4f px r.m.s. per axis, bias %.4f, worst %.3f, stated %.4f, consistency %.2f, %.1f µm (radial %.1f along %.1f)", e.n, e.hidden, e.missing, e.rms, e.bias, e.worst, e.u, e.nees, e.world*1e6, e.radial*1e6, e.along*1e6)
}

// compare holds a track against the scene's truth. Ball outlines are not centred
// on the ball's image: the pixel truth is that of the outline where a camera
// gives it.
func compare(s *film.Scene, tr *track.Track, name string, skip int) (e errs) {
	b := tr.Find(name)
	var su, sv, sr, st float64
	for i := skip; i < len(b.Samples); i++ {
		q := &b.Samples[i]
		var p film.Point
		for _, c := range s.Truth(s.Time(i)) {
			if c.Name == name {
				p = c
			}
		}
		if !q.State.Usable() {
			e.missing++
			continue
		}
		if q.State == track.PartlyHidden {
			e.hidden++
		}
		du, dv := q.U-p.U, q.V-p.V
		e.n++
		su += du
		sv += dv
		e.rms += du*du + dv*dv
		e.worst = math.Max(e.worst, math.Max(math.Abs(du), math.Abs(dv)))
		e.u += math.Sqrt((q.Pixel.AA + q.Pixel.BB) / 2)
		dx, dz := q.X-p.At[0], q.Z-p.At[2]
		c := q.Plane
		e.nees += (dx*dx*c.BB - 2*dx*dz*c.AB + dz*dz*c.AA) / (c.AA*c.BB - c.AB*c.AB) / 2
		h := math.Hypot(p.At[0], p.At[2])
		sr += (dx*p.At[0] + dz*p.At[2]) / h
		st += (dz*p.At[0] - dx*p.At[2]) / h
		e.world += dx*dx + dz*dz
	}
	n := float64(e.n)
	e.rms = math.Sqrt(e.rms / (2 * n))
	e.bias = math.Max(math.Abs(su), math.Abs(sv)) / n
	e.nees /= n
	e.radial, e.along = sr/n, st/n
	e.u /= n
	e.world = math.Sqrt(e.world / (2 * n))
	return e
}

// pendulumScene is one ball on a rod before a wall, in a picture of 640 × 480.
func pendulumScene() *film.Scene {
	arm := swing(0, 0, 0.16, 0.5, 5.5, 0.3)
	return &film.Scene{
		Camera:     film.Camera{Width: 640, Height: 480, PixelsPerM: 1800, DistanceM: 1.2, LookAt: film.Vec{0, 0, -0.1}, ExposureS: 0.004},
		Wall:       film.Wall{Level: film.RGB{185, 183, 180}, Y: 0.3},
		Bobs:       []film.Bob{{Name: "lamp", Colour: film.RGB{170, 40, 35}, DiameterM: 0.022, At: arm}},
		Rods:       []film.Rod{{Colour: film.RGB{120, 120, 125}, DiameterM: 0.002, From: func(float64) film.Vec { return film.Vec{0, 0, 0} }, To: arm}},
		FramesPerS: 60, Seed: 1,
	}
}

const pendulumRig = `
name = "Pendulum"
[camera]
readout_ms = 0
vertical = "picture"
distance_mm = 1200
[scale]
length_mm = 100
ends_px = [[229.5, 239.5], [409.5, 239.5]]
origin_px = [319.5, 59.5]
[[bob]]
name = "lamp"
colour = "#aa2823"
diameter_mm = 22
`

func TestFilmScenes(t *testing.T) {
	for _, c := range []struct {
		name string
		set  func(*film.Scene)
	}{
		{"plain clean", func(s *film.Scene) { s.Rods = nil; s.Bobs[0].Plain = true }},
		{"clean shaded", func(s *film.Scene) { s.Rods = nil }},
		{"clean shaded rod", func(s *film.Scene) {}},
		{"plain rod", func(s *film.Scene) { s.Bobs[0].Plain = true }},
		{"plain rod behind", func(s *film.Scene) {
			s.Bobs[0].Plain = true
			s.Rods[0].From = func(float64) film.Vec { return film.Vec{0, 0.1, 0} }
			at := s.Rods[0].To
			s.Rods[0].To = func(t float64) film.Vec { v := at(t); v[1] = 0.02; return v }
		}},
		{"gloss rod", func(s *film.Scene) { s.Bobs[0].Gloss = 1 }},
		{"shadow", func(s *film.Scene) { s.Light.Shadow = 0.5; s.Wall.Y = 0.05 }},
		{"noise 5", func(s *film.Scene) { s.Noise.Read = 5 }},
		{"texture 8", func(s *film.Scene) { s.Wall.Texture = 8; s.Noise.Read = 2 }},
		{"texture 8 + shadow+gloss", func(s *film.Scene) { s.Wall.Texture = 8; s.Noise.Read = 2; s.Light.Shadow = 0.5; s.Bobs[0].Gloss = 1 }},
		{"sharpened", func(s *film.Scene) { s.Sharpening = 0.8; s.Noise.Read = 2 }},
		{"long exposure", func(s *film.Scene) { s.Camera.ExposureS = 0.015; s.Noise.Read = 2 }},
		{"long exposure plain", func(s *film.Scene) {
			s.Camera.ExposureS = 0.015
			s.Noise.Read = 2
			s.Rods = nil
			s.Bobs[0].Plain = true
		}},
		{"rolling", func(s *film.Scene) { s.Camera.ReadoutS = 0.012; s.Noise.Read = 2 }},
		{"vignette", func(s *film.Scene) { s.Wall.Vignette = 0.4; s.Noise.Read = 2 }},
	} {
		s := pendulumScene()
		c.set(s)
		src := newFilmed(s, 90)
		text := pendulumRig
		r, cam := solve(t, text, 640, 480)
		if s.Camera.ReadoutS > 0 {
			r.Camera.ReadoutS.V = s.Camera.ReadoutS
			r.Camera.ReadoutS.Set = true
			_, cam = solve(t, replaceReadout(text, s.Camera.ReadoutS), 640, 480)
		}
		tr, err := Follow(context.Background(), src, r, cam, Options{})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		t.Logf("%-26s %v, exposure %.1f ms, radius %.2f", c.name, compare(s, tr, "lamp", 10), 1e3*tr.Cal.ExposureS, tr.Bobs[0].RadiusPX)
	}
}

func replaceReadout(text string, s float64) string {
	return strings.Replace(text, "readout_ms = 0", fmt.Sprintf("readout_ms = %g", 1e3*s), 1)
}
