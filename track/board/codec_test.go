package board

import (
	"bytes"
	"math"
	"math/rand/v2"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"

	"lodeswing/track/clip"
)

// A phone's H.264 does not hide the target: the first frames of a clip of
// 8 Mb/s are encoded and decoded again by ffmpeg.
func TestThroughH264(t *testing.T) {
	tool, err := exec.LookPath("ffmpeg")
	if err != nil {
		t.Skip("ffmpeg is not here")
	}
	s := scenes()["tilt 10"]
	rng := rand.New(rand.NewPCG(4, 4))
	clean := s.render(t, nil)
	size := strconv.Itoa(s.w) + "x" + strconv.Itoa(s.h)
	var raw bytes.Buffer
	for range 12 {
		for _, b := range clean.Pix {
			raw.WriteByte(byte(math.Round(math.Min(math.Max(float64(b)+4*rng.NormFloat64(), 0), 255))))
		}
	}
	path := filepath.Join(t.TempDir(), "t.mp4")
	in := exec.Command(tool, "-v", "error", "-f", "rawvideo", "-pix_fmt", "bgr24", "-s", size, "-r", "60", "-i", "-",
		"-c:v", "libx264", "-preset", "veryfast", "-b:v", "8M", "-pix_fmt", "yuv420p", "-threads", "2", path)
	in.Stdin = &raw
	if out, err := in.CombinedOutput(); err != nil {
		t.Skipf("this ffmpeg does not encode H.264: %s", out)
	}
	back, err := exec.Command(tool, "-v", "error", "-i", path, "-f", "rawvideo", "-pix_fmt", "bgr24", "-").Output()
	if err != nil {
		t.Fatal(err)
	}
	var frames []*clip.Frame
	for i := 0; (i+1)*3*s.w*s.h <= len(back) && i < 5; i++ {
		f := clip.NewFrame(i, float64(i)/60, s.w, s.h)
		copy(f.Pix, back[i*3*s.w*s.h:])
		frames = append(frames, f)
	}
	seen, err := Find(frames, s.spec.Name())
	if err != nil {
		t.Fatal(err)
	}
	look(t, frames[0], seen, "h264")
	c := s.truth(t)
	var sum, chi float64
	for _, p := range seen.Points {
		u, v := c.ToPixel(s.at[0]+p.X, 0, s.at[1]+p.Z)
		du, dv := p.U-u, p.V-v
		sum += du*du + dv*dv
		chi += du*du/p.Pixel.AA + dv*dv/p.Pixel.BB
	}
	n := float64(2 * len(seen.Points))
	t.Logf("%d crossings, error %.4f px r.m.s., χ²/n %.2f", len(seen.Points), math.Sqrt(sum/n), chi/n)
	if rms := math.Sqrt(sum / n); rms > 0.04 || len(seen.Points) < 40 {
		t.Errorf("%d crossings, off by %.3f px", len(seen.Points), rms)
	}
	if chi/n > 6 { // measured 3.2; what is left over, the pose's fit widens (Birge ratio)
		t.Errorf("χ²/n is %.2f", chi/n)
	}
}

func BenchmarkFind(b *testing.B) {
	s := scenes()["tilt 10"]
	f := s.render(b, rand.New(rand.NewPCG(1, 1)))
	for b.Loop() {
		if _, err := Find([]*clip.Frame{f}, s.spec.Name()); err != nil {
			b.Fatal(err)
		}
	}
}
