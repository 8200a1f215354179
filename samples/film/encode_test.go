package film

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

func needFFmpeg(t *testing.T) {
	for _, tool := range []string{"ffmpeg", "ffprobe"} {
		if _, err := exec.LookPath(tool); err != nil {
			t.Skipf("%s is not installed", tool)
		}
	}
}

// tiny is a small scene with something to see in every corner.
func tiny() *Scene {
	s := plainScene(Camera{Width: 96, Height: 64, PixelsPerM: 1000}, Bob{
		DiameterM: 0.012, At: func(t float64) Vec { return Vec{-0.03 + 0.1*t, 0, 0.02} },
	})
	s.Wall.GradU, s.FramesPerS = 60, 60
	return s
}

// probe asks ffprobe for the packets' times and the stream's facts.
func probe(t *testing.T, path string) (times []float64, facts string) {
	t.Helper()
	out, err := exec.Command("ffprobe", "-v", "error", "-select_streams", "v:0", "-show_entries", "frame=pts_time",
		"-of", "csv=p=0", path).Output()
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range strings.Fields(string(out)) {
		x, err := strconv.ParseFloat(strings.Trim(line, ","), 64)
		if err != nil {
			t.Fatalf("ffprobe said %q", line)
		}
		times = append(times, x)
	}
	all, err := exec.Command("ffprobe", "-v", "error", "-show_streams", "-show_format", "-of", "json", path).Output()
	if err != nil {
		t.Fatal(err)
	}
	return times, string(all)
}

// upright is the clip as a player shows it, frame by frame.
func upright(t *testing.T, path string) []byte {
	t.Helper()
	cmd := exec.Command("ffmpeg", "-v", "error", "-i", path, "-fps_mode", "passthrough", "-f", "rawvideo", "-pix_fmt", "bgr24", "-")
	var said bytes.Buffer
	cmd.Stderr = &said
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%v: %s", err, said.String())
	}
	return out
}

func TestEncodedTimes(t *testing.T) {
	needFFmpeg(t)
	const n = 130
	for _, c := range []struct {
		name   string
		rate   float64
		jitter bool
		factor float64
	}{
		{"60 frames/s", 60, false, 1},
		{"29.97 frames/s", 30000.0 / 1001, false, 1},
		{"variable", 60, true, 1},
		{"slow motion", 240, false, 8},
		{"slow motion, variable", 240, true, 8},
	} {
		s := tiny()
		s.FramesPerS = c.rate
		e := Encoding{RateFactor: c.factor}
		if c.jitter {
			e.Jitter = NewJitter(c.rate, n, 4)
			s.Times = e.Jitter.Times(n)
		}
		path := filepath.Join(t.TempDir(), "a.mp4")
		told := 0
		if err := s.Encode(t.Context(), path, n, e, func(done int) { told = done }); err != nil {
			t.Fatalf("%s: %v", c.name, err)
		}
		if told != n {
			t.Errorf("%s: progress ended at %d of %d", c.name, told, n)
		}
		times, facts := probe(t, path)
		if len(times) != n {
			t.Fatalf("%s: %d frames in the clip, want %d", c.name, len(times), n)
		}
		worst := 0.0
		for i, x := range times {
			worst = max(worst, math.Abs(x-s.Time(i)*c.factor))
		}
		t.Logf("%s: times within %.1e s", c.name, worst)
		if worst > 1.0/ticksPerS {
			t.Errorf("%s: the container's times are off by %g s", c.name, worst)
		}
		if c.jitter {
			longest := 0.0
			for i := 1; i < n; i++ {
				longest = max(longest, times[i]-times[i-1])
			}
			if longest < 1.5*c.factor/c.rate {
				t.Errorf("%s: no frame is missing", c.name)
			}
		}
		if has := strings.Contains(facts, "com.android.capture.fps"); has != (c.factor != 1) {
			t.Errorf("%s: capture-rate tag present: %v", c.name, has)
		}
	}
}

// A clip that is stored turned comes out upright in ffmpeg's own hands, and is
// the picture that an unturned sensor sees; its rolling shutter runs along the
// sensor's rows.
func TestRotation(t *testing.T) {
	needFFmpeg(t)
	plain := tiny()
	want := plain.Frame(0).Pix
	for _, deg := range []int{0, 90, 180, 270} {
		s := tiny()
		s.Camera.Turned = deg
		if got := s.Frame(0).Pix; !bytes.Equal(got, want) {
			t.Errorf("turned by %d°: the sensor sees another picture", deg)
		}
		path := filepath.Join(t.TempDir(), "a.mp4")
		if err := s.Encode(t.Context(), path, 3, Encoding{Lossless: true}, nil); err != nil {
			t.Fatal(err)
		}
		got := upright(t, path)
		if len(got) != 3*len(want) || !bytes.Equal(got[:len(want)], want) {
			t.Errorf("turned by %d°: the upright picture is not the rendered one", deg)
		}
		var facts struct{ Streams []struct{ Width, Height int } }
		_, text := probe(t, path)
		if err := json.Unmarshal([]byte(text), &facts); err != nil {
			t.Fatal(err)
		}
		if stored := facts.Streams[0].Width == 64; stored != (deg%180 != 0) {
			t.Errorf("turned by %d°: stored %d × %d", deg, facts.Streams[0].Width, facts.Streams[0].Height)
		}
		// The stored first row is the upright picture's top row, right column, bottom
		// row, left column.
		s = tiny()
		s.Camera.Turned, s.Camera.ReadoutS = deg, 0.012
		p := s.Truth(0)[0]
		share := map[int]float64{0: p.V / 63, 90: 1 - p.U/95, 180: 1 - p.V/63, 270: p.U / 95}[deg]
		if math.Abs(p.T-0.012*(share-0.5)) > 1e-9 {
			t.Errorf("turned by %d°: seen at %g s, want %g", deg, p.T, 0.012*(share-0.5))
		}
	}
	s := tiny()
	s.Camera.Turned = 45
	if err := s.Encode(t.Context(), filepath.Join(t.TempDir(), "a.mp4"), 3, Encoding{}, nil); err == nil {
		t.Error("a clip turned by 45° was written")
	}
}

// Lossy or not, H.264 or HEVC, the picture stays where it is.
func TestCodecsKeepThePlace(t *testing.T) {
	needFFmpeg(t)
	for _, e := range []Encoding{{}, {HEVC: true}} {
		s := tiny()
		path := filepath.Join(t.TempDir(), "a.mp4")
		if err := s.Encode(t.Context(), path, 20, e, nil); err != nil {
			t.Fatal(err)
		}
		_, facts := probe(t, path)
		if codec := map[bool]string{false: `"h264"`, true: `"hevc"`}[e.HEVC]; !strings.Contains(facts, codec) || !strings.Contains(facts, `"yuv420p"`) {
			t.Errorf("HEVC %v: the clip is not %s in 4:2:0", e.HEVC, codec)
		}
		got := upright(t, path)
		w, h := s.Camera.Width, s.Camera.Height
		worst := 0.0
		for i := range 20 {
			var u, v, area float64
			pix := got[i*3*w*h : (i+1)*3*w*h]
			q := s.Truth(s.Time(i))[0]
			for y := range h {
				for x := range w {
					if math.Hypot(float64(x)-q.U, float64(y)-q.V) > 12 {
						continue
					}
					wall := 200 + 60*((float64(x)+0.5)/float64(w)-0.5)
					a := wall - float64(pix[3*(y*w+x)+1])
					area += a
					u += a * float64(x)
					v += a * float64(y)
				}
			}
			worst = max(worst, math.Hypot(u/area-q.U, v/area-q.V))
		}
		t.Logf("HEVC %v: centroid within %.3f px of the truth", e.HEVC, worst)
		if worst > 0.2 {
			t.Errorf("HEVC %v: the encoded bob is off by %g px", e.HEVC, worst)
		}
	}
}

// Colour sampled on the left shifts what differs in colour alone, and nothing else.
func TestColourLeft(t *testing.T) {
	needFFmpeg(t)
	for _, left := range []bool{false, true} {
		s := tiny()
		s.Wall.GradU, s.Wall.Level = 0, RGB{200, 128, 40}
		// An edge between two colours of one brightness (BT.709): 0.2126 R + 0.0722 B.
		s.Plates = []Plate{{Colour: RGB{166, 128, 140}, Corners: []Vec{{0, 0.1, -1}, {1, 0.1, -1}, {1, 0.1, 1}, {0, 0.1, 1}}}}
		s.Bobs[0].Unmarked, s.Bobs[0].At = true, still(Vec{-0.03, 0, 0.02})
		path := filepath.Join(t.TempDir(), "a.mp4")
		if err := s.Encode(t.Context(), path, 1, Encoding{ColourLeft: left, MegabitPerS: 50}, nil); err != nil {
			t.Fatal(err)
		}
		row := upright(t, path)[3*96*50:]
		first, last := float64(row[3*30]), float64(row[3*65])
		edge := 29.5
		for u := 30; u < 66; u++ {
			edge += (float64(row[3*u]) - last) / (first - last)
		}
		want := 47.5 // world x = 0
		if left {
			want = 48
		}
		t.Logf("left %v: the blue edge lies at %.2f px", left, edge)
		if math.Abs(edge-want) > 0.15 {
			t.Errorf("left %v: the blue edge lies at %.2f px, want %.1f", left, edge, want)
		}
	}
}

// A stopped or failed encoding leaves nothing, and what was there stays.
func TestWholeOrNotAtAll(t *testing.T) {
	needFFmpeg(t)
	dir := t.TempDir()
	path := filepath.Join(dir, "a.mp4")
	if err := os.WriteFile(path, []byte("an older film"), 0o644); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	err := tiny().Encode(ctx, path, 100000, Encoding{}, func(done int) {
		if done == 5 {
			cancel()
		}
	})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("stopped: %v", err)
	}
	left, _ := os.ReadDir(dir)
	data, _ := os.ReadFile(path)
	if len(left) != 1 || string(data) != "an older film" {
		t.Errorf("stopped: %d files are left, the old one holds %q", len(left), data)
	}
	err = tiny().Encode(t.Context(), filepath.Join(dir, "nowhere", "a.mp4"), 3, Encoding{}, nil)
	if err == nil || !strings.Contains(err.Error(), "nowhere") || !strings.Contains(err.Error(), "--out") {
		t.Errorf("missing folder: %v", err)
	}
}

// A stand-in for ffmpeg on a full disk: its last words reach the user.
func TestFullDisk(t *testing.T) {
	dir := t.TempDir()
	script := "#!/bin/sh\nhead -c 20000 >/dev/null\necho 'a.mp4: No space left on device' >&2\nexit 1\n"
	if err := os.WriteFile(filepath.Join(dir, "ffmpeg"), []byte(script), 0o755); err != nil {
		t.Fatal(err)
	}
	t.Setenv("PATH", dir+string(os.PathListSeparator)+os.Getenv("PATH"))
	out := t.TempDir()
	err := tiny().Encode(t.Context(), filepath.Join(out, "a.mp4"), 50, Encoding{}, nil)
	if err == nil || !strings.Contains(err.Error(), "No space left on device") {
		t.Errorf("full disk: %v", err)
	}
	if left, _ := os.ReadDir(out); len(left) != 0 {
		t.Errorf("full disk: %v is left", left)
	}
	t.Setenv("PATH", out)
	err = tiny().Encode(t.Context(), filepath.Join(out, "a.mp4"), 50, Encoding{}, nil)
	if err == nil || !strings.Contains(err.Error(), "install") {
		t.Errorf("no ffmpeg: %v", err)
	}
}

func ExampleScene() {
	s := &Scene{
		Camera:     Camera{Width: 640, Height: 480, PixelsPerM: 1000},
		Wall:       Wall{Level: RGB{200, 200, 200}},
		FramesPerS: 60,
		Bobs: []Bob{{
			Name: "lamp", Colour: RGB{184, 38, 31}, DiameterM: 0.03,
			At: func(t float64) Vec { return Vec{0.1 * math.Cos(6*t), 0, 0} },
		}},
	}
	frame := s.Frame(0)
	truth := s.Truth(frame.T)[0]
	fmt.Printf("%d × %d px, %s at (%.1f, %.1f)\n", frame.Width, frame.Height, truth.Name, truth.U, truth.V)
	// Output: 640 × 480 px, lamp at (419.5, 239.5)
}
