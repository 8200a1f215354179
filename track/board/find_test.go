package board

import (
	"flag"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

var long = flag.Bool("long", false, "run the full Monte Carlo of the target")

// scene is a board seen by a camera of known truth.
type scene struct {
	cam   string // [camera] and [scale] of the true camera
	spec  Spec
	at    [2]float64 // the board's middle in the plane, m
	turn  float64    // of the board in its plane, rad
	noise float64    // grey levels r.m.s.
	blur  float64    // px
	w, h  int
}

func (s scene) truth(t testing.TB) *camera.Camera {
	t.Helper()
	r, err := rig.Parse("truth.toml", []byte(s.cam))
	if err != nil {
		t.Fatal(err)
	}
	c, err := camera.New(r, s.w, s.h, nil)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// render draws the board as the camera sees it: light from one side, the true
// share of black in pixels on an edge (25 samples in a lattice that is shifted at
// random from pixel to pixel, so that no edge is favoured), blurred, with noise.
func (s scene) render(t testing.TB, rng *rand.Rand) *clip.Frame {
	t.Helper()
	c := s.truth(t)
	sin, cos := math.Sincos(s.turn)
	shift := rand.New(rand.NewPCG(1, 1))
	a, cols, rows := s.spec.SquareM, float64(s.spec.Cols), float64(s.spec.Rows)
	// board gives the place on the board in squares from its upper left corner.
	board := func(u, v float64) (bx, by float64) {
		px, pz, _ := c.ToPlane(u, v)
		dx, dz := px-s.at[0], pz-s.at[1]
		return (cos*dx+sin*dz)/a + cols/2, rows/2 - (cos*dz-sin*dx)/a
	}
	shade := func(bx, by float64) float64 {
		switch {
		case bx > 0 && bx < cols && by > 0 && by < rows:
			if s.spec.Black(int(bx), int(by)) {
				return 30
			}
			return 215
		case bx > -1 && bx < cols+1 && by > -1 && by < rows+1:
			return 215
		}
		return 120 // wall
	}
	line := func(x float64) float64 { return math.Abs(x - math.Round(x)) }
	g := make([]float64, s.w*s.h)
	for y := range s.h {
		for x := range s.w {
			u, v := float64(x), float64(y)
			bx, by := board(u, v)
			var sum float64
			if bx < -1.5 || by < -1.5 || bx > cols+1.5 || by > rows+1.5 || min(line(bx), line(by)) > 2*c.Calibration().MetresPerPixel/a {
				sum = shade(bx, by)
			} else {
				su, sv := shift.Float64(), shift.Float64()
				const n = 25
				for k := range n {
					_, du := math.Modf((float64(k) + su) / n)
					_, dv := math.Modf((float64(k*7) + sv) / n)
					sum += shade(board(u+du-0.5, v+dv-0.5)) / n
				}
			}
			g[y*s.w+x] = sum * (1 - 0.15*u/float64(s.w))
		}
	}
	f := clip.NewFrame(0, 0, s.w, s.h)
	for i, v := range blurred(g, s.w, s.h, s.blur) {
		if rng != nil {
			v += s.noise * rng.NormFloat64()
		}
		b := byte(math.Round(math.Min(math.Max(v, 0), 255)))
		f.Pix[3*i], f.Pix[3*i+1], f.Pix[3*i+2] = b, b, b
	}
	return f
}

func blurred(g []float64, w, h int, sigma float64) []float64 {
	if sigma == 0 {
		return g
	}
	r := int(math.Ceil(4 * sigma))
	k := make([]float64, 2*r+1)
	var sum float64
	for i := range k {
		k[i] = math.Exp(-float64((i-r)*(i-r)) / (2 * sigma * sigma))
		sum += k[i]
	}
	pass := func(in []float64, step, n, lines, lineStep int) []float64 {
		out := make([]float64, len(in))
		for l := range lines {
			for i := range n {
				var v float64
				for j, kk := range k {
					v += kk * in[l*lineStep+step*min(max(i+j-r, 0), n-1)]
				}
				out[l*lineStep+step*i] = v / sum
			}
		}
		return out
	}
	return pass(pass(g, 1, w, h, w), w, h, w, 1)
}

const phone = "[camera]\nfocal_px = 960\n%s[scale]\nlength_mm = 100\nends_px = [[500, 360], [620, 360]]\n"

func scenes() map[string]scene {
	cam := func(extra string) string { return fmt.Sprintf(phone, extra) }
	return map[string]scene{
		"square":      {cam: cam(""), spec: Spec{9, 6, 0.02}, noise: 4, blur: 0.8, w: 1280, h: 720},
		"tilt 10":     {cam: cam("tilt_deg = 10\n"), spec: Spec{9, 6, 0.02}, at: [2]float64{-0.2, 0.05}, noise: 4, blur: 0.8, w: 1280, h: 720},
		"lens":        {cam: cam("tilt_deg = 10\nlens = [-0.12, 0.02]\n"), spec: Spec{9, 6, 0.03}, at: [2]float64{0.1, -0.03}, noise: 4, blur: 0.8, w: 1280, h: 720},
		"upside down": {cam: cam("tilt_deg = -8\n"), spec: Spec{9, 6, 0.02}, turn: math.Pi, noise: 4, blur: 1.2, w: 1280, h: 720},
		"quarter":     {cam: cam(""), spec: Spec{7, 8, 0.02}, turn: 1.45, noise: 6, blur: 0.8, w: 1280, h: 720},
		"small":       {cam: cam(""), spec: Spec{9, 6, 0.011}, at: [2]float64{0.3, 0.1}, turn: 0.1, noise: 3, blur: 0.7, w: 1280, h: 720},
		"large":       {cam: cam("tilt_deg = 15\n"), spec: Spec{5, 4, 0.11}, turn: -0.2, noise: 5, blur: 2, w: 1280, h: 720},
		"blurred":     {cam: cam(""), spec: Spec{9, 6, 0.03}, turn: 0.3, noise: 8, blur: 3, w: 1280, h: 720},
	}
}

// look writes a picture for the eye when LODESWING_LOOK names a folder.
func look(t testing.TB, f *clip.Frame, s *camera.Sighting, name string) {
	dir := os.Getenv("LODESWING_LOOK")
	if dir == "" {
		return
	}
	im := f.Upright()
	if s != nil {
		for _, p := range s.Points {
			for d := -4; d <= 4; d++ {
				im.Set(int(math.Round(p.U))+d, int(math.Round(p.V)), color.RGBA{255, 0, 0, 255})
				im.Set(int(math.Round(p.U)), int(math.Round(p.V))+d, color.RGBA{255, 0, 0, 255})
			}
		}
	}
	writePNG(t, filepath.Join(dir, strings.ReplaceAll(name, " ", "-")+".png"), im)
}

func writePNG(t testing.TB, path string, im image.Image) {
	w, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer w.Close()
	if err := png.Encode(w, im); err != nil {
		t.Fatal(err)
	}
}

// Crossings are found where the true camera shows them, each within its own
// uncertainty, whichever way the board lies.
func TestCrossingsLieWhereTheyAre(t *testing.T) {
	for name, s := range scenes() {
		t.Run(name, func(t *testing.T) {
			rng := rand.New(rand.NewPCG(7, 11))
			f := s.render(t, rng)
			seen, err := Find([]*clip.Frame{f}, s.spec.Name())
			look(t, f, seen, name)
			if err != nil {
				t.Fatal(err)
			}
			if n := (s.spec.Cols - 1) * (s.spec.Rows - 1); len(seen.Points) != n {
				t.Errorf("%d of %d crossings", len(seen.Points), n)
			}
			c := s.truth(t)
			sin, cos := math.Sincos(s.turn)
			var chi, sum float64
			for _, p := range seen.Points {
				u, v := c.ToPixel(s.at[0]+cos*p.X-sin*p.Z, 0, s.at[1]+sin*p.X+cos*p.Z)
				du, dv := p.U-u, p.V-v
				det := p.Pixel.AA*p.Pixel.BB - p.Pixel.AB*p.Pixel.AB
				chi += (du*du*p.Pixel.BB - 2*du*dv*p.Pixel.AB + dv*dv*p.Pixel.AA) / det
				sum += du*du + dv*dv
			}
			n := float64(2 * len(seen.Points))
			t.Logf("%3.0f coordinates: error %.4f px r.m.s., χ²/n %.2f", n, math.Sqrt(sum/n), chi/n)
			// χ² of n coordinates: within 4 standard deviations √(2n) of n, and a
			// bias of a few thousandths of a pixel is allowed.
			if chi/n > 1.3+4*math.Sqrt(2/n) || chi/n < 1-4*math.Sqrt(2/n)-0.3 {
				t.Errorf("χ²/n is %.2f: the covariances are not honest", chi/n)
			}
			if rms := math.Sqrt(sum / n); rms > 0.08 {
				t.Errorf("crossings are off by %.3f px", rms)
			}
		})
	}
}

func TestNoBoard(t *testing.T) {
	s := scenes()["tilt 10"]
	f := s.render(t, nil)
	for _, c := range []struct {
		name string
		in   []*clip.Frame
		want string
	}{
		{"board-7x6-20mm", []*clip.Frame{f}, "of its 30 crossings, at most 40 were seen together"},
		{"board-9x6-20mm", []*clip.Frame{clip.NewFrame(0, 0, 640, 360)}, "at most 0 were seen"},
		{"board-9x6-20mm", []*clip.Frame{clip.NewFrame(0, 0, 3, 2)}, "at most 0 were seen"},
		{"board-9x6-20mm", nil, "no frame"},
		{"sheet", []*clip.Frame{f}, "looks like \"board-9x6-20mm\""},
		{"board-8x6-20mm", []*clip.Frame{f}, "odd number of squares across"},
		{"board-9x6-0mm", []*clip.Frame{f}, "squares must be"},
		{"board-9x6-NaNmm", []*clip.Frame{f}, "squares must be"},
		{"board-9999x6-20mm", []*clip.Frame{f}, "squares"},
	} {
		if _, err := Find(c.in, c.name); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want %q", c.name, err, c.want)
		}
	}
}

func TestNamesComeBack(t *testing.T) {
	for _, s := range []Spec{{9, 6, 0.02}, {5, 4, 0.0125}, {11, 14, 0.0075}} {
		if got, err := ParseName(s.Name()); err != nil || got != s {
			t.Errorf("%s came back as %+v, %v", s.Name(), got, err)
		}
	}
}
