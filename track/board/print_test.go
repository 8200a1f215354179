package board

import (
	"bytes"
	"image/png"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"lodeswing/track/clip"
)

const mmPerPoint = 25.4 / 72 // ISO 32000-1: a point is 1/72 inch

// The SVG's squares and bar have their sizes to 0.01 mm.
func TestSVGIsTrueToSize(t *testing.T) {
	for _, p := range Papers {
		s, err := Fit(p, 0.02)
		if err != nil {
			t.Fatal(err)
		}
		if s != (Spec{9, 6, 0.02}) {
			t.Errorf("%s: the usual target is %s", p.Name, s.Name())
		}
		var b bytes.Buffer
		if err := s.Draw(&b, "svg", p); err != nil {
			t.Fatal(err)
		}
		text := b.String()
		head := regexp.MustCompile(`width="([0-9.]+)mm" height="([0-9.]+)mm" viewBox="0 0 ([0-9.]+) ([0-9.]+)"`).FindStringSubmatch(text)
		if head == nil {
			t.Fatalf("no size in mm: %.300s", text)
		}
		for i, want := range []float64{p.Width * 1e3, p.Height * 1e3, p.Width * 1e3 / mmPerPoint, p.Height * 1e3 / mmPerPoint} {
			if x, _ := strconv.ParseFloat(head[i+1], 64); math.Abs(x-want) > 0.01 {
				t.Errorf("%s: the sheet's measure %d is %g, want %g", p.Name, i, x, want)
			}
		}
		number := regexp.MustCompile(`-?[0-9.]+`)
		black := 0
		var lo, hi [2]float64
		lo = [2]float64{1e9, 1e9}
		bar := map[float64]bool{}
		for _, d := range regexp.MustCompile(`<path d="([^"]*)"`).FindAllStringSubmatch(text, -1) {
			if !strings.HasSuffix(d[1], "Z") || strings.Contains(d[1], "A") {
				continue
			}
			var x []float64
			for _, n := range number.FindAllString(d[1], -1) {
				v, _ := strconv.ParseFloat(n, 64)
				x = append(x, v*mmPerPoint)
			}
			w, h := math.Abs(x[2]-x[0]), math.Abs(x[5]-x[3])
			if math.Abs(w-20) < 0.01 && math.Abs(h-20) < 0.01 {
				black++
				for i := 0; i < len(x); i += 2 {
					for k := range 2 {
						lo[k], hi[k] = math.Min(lo[k], x[i+k]), math.Max(hi[k], x[i+k])
					}
				}
			} else {
				bar[x[0]], bar[x[2]] = true, true
			}
		}
		if black != 27 || math.Abs(hi[0]-lo[0]-180) > 0.01 || math.Abs(hi[1]-lo[1]-120) > 0.01 {
			t.Errorf("%s: %d black squares over %.3f × %.3f mm, want 27 over 180 × 120", p.Name, black, hi[0]-lo[0], hi[1]-lo[1])
		}
		least, most := math.Inf(1), math.Inf(-1)
		for x := range bar {
			least, most = math.Min(least, x), math.Max(most, x)
		}
		if math.Abs(most-least-100) > 0.01 {
			t.Errorf("%s: the bar is %.3f mm long", p.Name, most-least)
		}
	}
}

// The PDF, drawn by another program at 300 dots per inch, holds the board where
// it belongs, and our own finder knows it again.
func TestPDFIsTrueToSize(t *testing.T) {
	tool, err := exec.LookPath("pdftoppm")
	if err != nil {
		t.Skip("pdftoppm (Debian: poppler-utils) is not here")
	}
	for _, p := range Papers {
		s, err := Fit(p, 0.02)
		if err != nil {
			t.Fatal(err)
		}
		dir := t.TempDir()
		var b bytes.Buffer
		if err := s.Draw(&b, "pdf", p); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(dir, "t.pdf"), b.Bytes(), 0o600); err != nil {
			t.Fatal(err)
		}
		const dpi = 300
		cmd := exec.Command(tool, "-r", strconv.Itoa(dpi), "-png", "-singlefile", "t.pdf", "t")
		cmd.Dir = dir
		if out, err := cmd.CombinedOutput(); err != nil {
			t.Fatalf("%v: %s", err, out)
		}
		r, err := os.Open(filepath.Join(dir, "t.png"))
		if err != nil {
			t.Fatal(err)
		}
		defer r.Close()
		im, err := png.Decode(r)
		if err != nil {
			t.Fatal(err)
		}
		size := im.Bounds().Size()
		f := clip.NewFrame(0, 0, size.X, size.Y)
		for y := range size.Y {
			for x := range size.X {
				r, g, b, _ := im.At(x, y).RGBA()
				o := 3 * (y*size.X + x)
				f.Pix[o], f.Pix[o+1], f.Pix[o+2] = byte(b>>8), byte(g>>8), byte(r>>8)
			}
		}
		perMM := dpi / 25.4
		if w := float64(size.X) / perMM; math.Abs(w-p.Width*1e3) > 0.2 {
			t.Errorf("%s: the sheet is %.2f mm wide", p.Name, w)
		}
		seen, err := Find([]*clip.Frame{f}, s.Name())
		if err != nil {
			t.Fatal(err)
		}
		// The board's middle: in the middle of the sheet's width, headMM below its top.
		mu, mv := p.Width*1e3/2*perMM-0.5, (headMM+60)*perMM-0.5
		var su, xx, ux float64
		for _, q := range seen.Points {
			ux += (q.U - mu) * q.X * 1e3
			xx += q.X * q.X * 1e6
			su += (mv - q.V - q.Z*1e3*perMM) / float64(len(seen.Points))
			if d := math.Hypot(q.U-(mu+q.X*1e3*perMM), q.V-(mv-q.Z*1e3*perMM)); d > 1 { // the drawing program moves edges to whole dots
				t.Errorf("%s: the crossing at (%.0f, %.0f) mm is %.2f px (%.3f mm) off", p.Name, q.X*1e3, q.Z*1e3, d, d/perMM)
			}
		}
		if got := ux / xx / perMM; math.Abs(got-1) > 1e-3 {
			t.Errorf("%s: the board is drawn at %.5f times its size", p.Name, got)
		}
		if math.Abs(su) > 0.6 {
			t.Errorf("%s: the board is %.2f px too high", p.Name, su)
		}
	}
}

func TestFitSaysWhatIsPossible(t *testing.T) {
	for mm := 4.0; mm <= 34; mm += 0.5 {
		for _, p := range Papers {
			s, err := Fit(p, mm/1e3)
			if err != nil {
				if mm <= 33 {
					t.Errorf("%g mm on %s: %v", mm, p.Name, err)
				}
				continue
			}
			if w := float64(s.Cols) * mm; w > p.Width*1e3-2*sideMM+1e-9 {
				t.Errorf("%s is %g mm wide and does not go on %s", s.Name(), w, p.Name)
			}
		}
	}
	for _, mm := range []float64{0, -1, 3, 60, math.NaN(), math.Inf(1)} {
		if _, err := Fit(Papers[0], mm/1e3); err == nil || !strings.Contains(err.Error(), "choose 4 to") {
			t.Errorf("%g mm: %v", mm, err)
		}
	}
	if err := (Spec{9, 6, 0.02}).Draw(&bytes.Buffer{}, "gif", Papers[0]); err == nil {
		t.Error("drew a gif")
	}
	if err := (Spec{8, 6, 0.02}).Draw(&bytes.Buffer{}, "svg", Papers[0]); err == nil {
		t.Error("drew an even board")
	}
}
