package clip_test

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"io"
	"math"
	"strconv"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/clip/cliptest"
)

// small is a moving test picture of 160 × 96, 25 frames at 25 frames/s.
var small = []string{"-f", "lavfi", "-i", "testsrc2=size=160x96:rate=25:duration=1"}

// formats are the containers and codecs that a clip may come in, with
// reordered frames wherever the codec has them.
var formats = []struct {
	name, encoder string
	args          []string
}{
	{"h264.mp4", "libx264", []string{"-c:v", "libx264", "-bf", "2", "-pix_fmt", "yuv420p"}},
	{"h264-pyramid.mov", "libx264", []string{"-c:v", "libx264", "-bf", "4", "-b_strategy", "2", "-pix_fmt", "yuv420p"}},
	{"h264.mkv", "libx264", []string{"-c:v", "libx264", "-bf", "2", "-pix_fmt", "yuv420p"}},
	{"h264.avi", "libx264", []string{"-c:v", "libx264", "-bf", "0", "-pix_fmt", "yuv420p"}},
	{"h264-reordered.avi", "libx264", []string{"-c:v", "libx264", "-bf", "2", "-pix_fmt", "yuv420p"}},
	{"hevc8.mp4", "libx265", []string{"-c:v", "libx265", "-x265-params", "log-level=none:bframes=3", "-tag:v", "hvc1", "-pix_fmt", "yuv420p"}},
	{"hevc10.mov", "libx265", []string{"-c:v", "libx265", "-x265-params", "log-level=none:bframes=3", "-tag:v", "hvc1", "-pix_fmt", "yuv420p10le"}},
	{"vp9.webm", "libvpx-vp9", []string{"-c:v", "libvpx-vp9", "-deadline", "realtime", "-cpu-used", "8"}},
	{"vp9.mkv", "libvpx-vp9", []string{"-c:v", "libvpx-vp9", "-auto-alt-ref", "1", "-lag-in-frames", "16", "-deadline", "good", "-cpu-used", "5", "-b:v", "300k"}},
	{"av1.mp4", "libaom-av1", []string{"-c:v", "libaom-av1", "-cpu-used", "8", "-usage", "realtime"}},
	{"av1.webm", "libsvtav1", []string{"-c:v", "libsvtav1", "-preset", "10"}},
	{"mjpeg.avi", "mjpeg", []string{"-c:v", "mjpeg", "-q:v", "3", "-pix_fmt", "yuvj420p"}},
	{"mjpeg.mov", "mjpeg", []string{"-c:v", "mjpeg", "-q:v", "3", "-pix_fmt", "yuvj420p"}},
}

// decodedTimes returns the times of a clip's frames as ffprobe decodes them, in
// seconds since the first.
func decodedTimes(tb testing.TB, path string) []float64 {
	tb.Helper()
	out := cliptest.Output(tb, "ffprobe", "-v", "error", "-select_streams", "v:0", "-show_frames",
		"-show_entries", "frame=best_effort_timestamp_time", "-of", "json", path)
	var p struct {
		Frames []struct {
			T string `json:"best_effort_timestamp_time"`
		} `json:"frames"`
	}
	if err := json.Unmarshal(out, &p); err != nil {
		tb.Fatal(err)
	}
	times := make([]float64, len(p.Frames))
	for i, f := range p.Frames {
		t, err := strconv.ParseFloat(f.T, 64)
		if err != nil {
			tb.Fatalf("frame %d of %s has the time %q", i, path, f.T)
		}
		times[i] = t
	}
	for i := len(times) - 1; i >= 0; i-- {
		times[i] -= times[0]
	}
	return times
}

// decodedPictures returns ffmpeg's own decoded pictures, upright, as BGR bytes.
func decodedPictures(tb testing.TB, path string) []byte {
	tb.Helper()
	// The vsync option's old spelling works in every version so far.
	return cliptest.Output(tb, "ffmpeg", "-v", "error", "-i", path, "-vsync", "passthrough", "-f", "rawvideo", "-pix_fmt", "bgr24", "-")
}

// readAll reads a clip to its end and returns the frames' times and all upright
// pictures. It skips where the program is built without OpenCV.
func readAll(tb testing.TB, path string, opt clip.Options) (*clip.Facts, clip.Source, []float64, []byte) {
	tb.Helper()
	ctx := context.Background()
	facts, err := clip.Inspect(ctx, path, opt)
	if err != nil {
		tb.Fatal(err)
	}
	src, err := clip.Open(ctx, facts)
	if errors.Is(err, clip.ErrNoOpenCV) {
		tb.Skip("built without OpenCV: no picture of a video file can be read")
	}
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { src.Close() })
	var times []float64
	var pix bytes.Buffer
	var p clip.Patch
	for {
		f, err := src.Next(ctx)
		if err == io.EOF {
			return facts, src, times, pix.Bytes()
		}
		if err != nil {
			tb.Fatal(err)
		}
		times = append(times, f.T)
		f.Patch(&p, f.Bounds())
		pix.Write(p.BGR)
	}
}

// sameTimes fails unless both lists agree to within tol seconds.
func sameTimes(t *testing.T, what string, got, want []float64, tol float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d frames, want %d", what, len(got), len(want))
	}
	for i := range got {
		if math.Abs(got[i]-want[i]) > tol {
			t.Fatalf("%s: frame %d at %.6f s, want %.6f s", what, i, got[i], want[i])
		}
	}
}

// difference is the mean absolute difference of two pictures' bytes.
func difference(a, b []byte) float64 {
	sum := 0
	for i := range a {
		d := int(a[i]) - int(b[i])
		if d < 0 {
			d = -d
		}
		sum += d
	}
	return float64(sum) / float64(len(a))
}

func TestFormats(t *testing.T) {
	for _, c := range formats {
		t.Run(c.name, func(t *testing.T) {
			cliptest.Need(t, c.encoder)
			path := cliptest.Make(t, c.name, append(append([]string{}, small...), c.args...)...)
			var want []float64
			if c.name == "h264-reordered.avi" {
				// An avi lists no presentation times and ffprobe has none for the last
				// reordered frames; its frames are evenly spaced by definition.
				for i := 0; i < 25; i++ {
					want = append(want, float64(i)/25)
				}
			} else {
				want = decodedTimes(t, path)
			}
			if len(want) != 25 {
				t.Fatalf("ffprobe decodes %d frames, want 25", len(want))
			}
			facts, src, times, pix := readAll(t, path, clip.Options{})
			sameTimes(t, "container's times", facts.Times, want, 2e-6)
			sameTimes(t, "delivered times", times, want, 2e-6)
			if facts.W != 160 || facts.H != 96 || math.Abs(facts.TrueRate-25) > 0.02 || len(facts.Lost) > 0 {
				t.Errorf("facts: %d × %d, %g frames/s, lost %v", facts.W, facts.H, facts.TrueRate, facts.Lost)
			}
			if at, words := src.Damage(); words != "" || !math.IsNaN(at) {
				t.Errorf("an intact clip is called damaged at %g: %s", at, words)
			}
			ref := decodedPictures(t, path)
			if len(ref) != len(pix) {
				t.Fatalf("%d bytes of pictures, ffmpeg's own are %d", len(pix), len(ref))
			}
			const n = 160 * 96 * 3
			for i := 0; i < 25; i++ {
				if d := difference(pix[i*n:(i+1)*n], ref[i*n:(i+1)*n]); d > 1.5 {
					t.Fatalf("frame %d differs from ffmpeg's own by %.2f grey levels on average", i, d)
				}
			}
		})
	}
}
