package clip_test

import (
	"bytes"
	"context"
	"errors"
	"image"
	"image/color"
	"image/jpeg"
	"image/png"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/clip/cliptest"
)

// says fails unless err names the file and holds all words.
func says(t *testing.T, err error, path string, words ...string) {
	t.Helper()
	if err == nil {
		t.Fatal("no error")
	}
	for _, w := range append(words, path) {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("error %q does not say %q", err, w)
		}
	}
}

func write(t *testing.T, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, content, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestNotAClip(t *testing.T) {
	cliptest.Need(t, "libx264")
	whole := cliptest.Make(t, "whole.mp4", append(append([]string{}, small...), "-c:v", "libx264", "-pix_fmt", "yuv420p")...)
	bytesOf, err := os.ReadFile(whole)
	if err != nil {
		t.Fatal(err)
	}
	matroska, err := os.ReadFile(cliptest.Make(t, "whole.mkv", append(append([]string{}, small...), "-c:v", "libx264", "-pix_fmt", "yuv420p")...))
	if err != nil {
		t.Fatal(err)
	}
	sound := cliptest.Make(t, "sound.mp4", "-f", "lavfi", "-i", "sine=duration=0.2", "-c:a", "aac")
	noFrames := cliptest.Make(t, "none.mp4", append(append([]string{}, small...), "-frames:v", "0", "-c:v", "libx264", "-pix_fmt", "yuv420p")...)
	noise := make([]byte, 5000)
	for i := range noise {
		noise[i] = byte(i*i*7919 + i>>3)
	}
	for _, c := range []struct {
		name, path string
		words      []string
	}{
		{"missing", filepath.Join(t.TempDir(), "nothing.mp4"), []string{"does not exist", "check the path"}},
		{"empty", write(t, "a.mp4", nil), []string{"is empty", "copy it"}},
		{"truncated", write(t, "a.mp4", bytesOf[:len(bytesOf)/2]), []string{"no index", "copy it"}},
		{"header cut off", write(t, "a.mkv", matroska[200:]), []string{"not a video", "straight from the phone"}},
		{"noise", write(t, "a.mp4", noise), []string{"not a video", "straight from the phone"}},
		{"text", write(t, "a.mp4", []byte("Dear reader,\nthis is no clip.\n")), []string{"is text", "give the video"}},
		{"playlist", write(t, "a.mp4", []byte("#EXTM3U\n#EXT-X-TARGETDURATION:1\n#EXTINF:1,\n"+whole+"\n#EXT-X-ENDLIST\n")), []string{"is text", "playlist"}},
		{"concat list", write(t, "a.mp4", []byte("ffconcat version 1.0\nfile '"+whole+"'\n")), []string{"is text", "playlist"}},
		{"sound only", sound, []string{"no moving pictures", "give the video"}},
		{"no frames", noFrames, []string{"frames", "film or copy it again"}},
		{"folder without pictures", t.TempDir(), []string{"no numbered pictures", "frame-0001.png"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := clip.Inspect(context.Background(), c.path, clip.Options{FramesPerS: 30})
			says(t, err, c.path, c.words...)
		})
	}
	t.Run("no ffprobe", func(t *testing.T) {
		t.Setenv("PATH", t.TempDir())
		_, err := clip.Inspect(context.Background(), whole, clip.Options{})
		says(t, err, whole, "ffprobe is not installed", "apt-get install ffmpeg")
	})
	t.Run("bad rate factor", func(t *testing.T) {
		for _, f := range []float64{-1, math.NaN(), math.Inf(1)} {
			if _, err := clip.Inspect(context.Background(), whole, clip.Options{RateFactor: f}); err == nil || !strings.Contains(err.Error(), "rate_factor") {
				t.Errorf("rate factor %g: error %v", f, err)
			}
		}
	})
	t.Run("facts made by hand", func(t *testing.T) {
		for _, f := range []*clip.Facts{nil, {Times: []float64{0, 1}}, {Numbered: true}} {
			if _, err := clip.Open(context.Background(), f); err == nil || !strings.Contains(err.Error(), "Inspect") {
				t.Errorf("error %v", err)
			}
		}
	})
	t.Run("stopped", func(t *testing.T) {
		ctx, cancel := context.WithCancel(context.Background())
		cancel()
		if _, err := clip.Inspect(ctx, whole, clip.Options{}); !errors.Is(err, context.Canceled) {
			t.Errorf("error %v, want context.Canceled", err)
		}
	})
}

// TestDisguisedPlaylistIsNotDecoded goes past Inspect, to the decoder itself.
func TestDisguisedPlaylistIsNotDecoded(t *testing.T) {
	cliptest.Need(t, "libx264")
	whole := cliptest.Make(t, "whole.mp4", append(append([]string{}, small...), "-c:v", "libx264", "-pix_fmt", "yuv420p")...)
	ctx := context.Background()
	facts, err := clip.Inspect(ctx, whole, clip.Options{})
	if err != nil {
		t.Fatal(err)
	}
	other := filepath.Join(filepath.Dir(whole), "other.mp4")
	if err := os.Rename(whole, other); err != nil {
		t.Fatal(err)
	}
	for _, list := range []string{
		"ffconcat version 1.0\nfile 'other.mp4'\n",
		"#EXTM3U\n#EXT-X-TARGETDURATION:1\n#EXTINF:1,\nother.mp4\n#EXT-X-ENDLIST\n",
	} {
		if err := os.WriteFile(whole, []byte(list), 0o644); err != nil {
			t.Fatal(err)
		}
		src, err := clip.Open(ctx, facts)
		if errors.Is(err, clip.ErrNoOpenCV) {
			t.Skip("built without OpenCV: nothing decodes here")
		}
		if err == nil {
			src.Close()
			t.Errorf("a playlist was opened:\n%s", list)
			continue
		}
		says(t, err, whole, "cannot be decoded")
	}
}

// TestDamagedClip reads clips as far as they go.
func TestDamagedClip(t *testing.T) {
	cliptest.Need(t, "libx264")
	args := append(append([]string{}, small...), "-c:v", "libx264", "-bf", "0", "-g", "10", "-pix_fmt", "yuv420p")
	for _, c := range []struct {
		name, encoder string
		args          []string
	}{
		{"cut.mp4", "libx264", []string{"-c:v", "libx264", "-g", "10", "-pix_fmt", "yuv420p", "-movflags", "faststart"}},
		{"cut.mkv", "libx264", []string{"-c:v", "libx264", "-g", "10", "-pix_fmt", "yuv420p"}},
		{"cut.webm", "libvpx-vp9", []string{"-c:v", "libvpx-vp9", "-deadline", "realtime", "-cpu-used", "8"}},
		{"cut.avi", "mjpeg", []string{"-c:v", "mjpeg"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			cliptest.Need(t, c.encoder)
			path := cliptest.Make(t, c.name, append([]string{"-f", "lavfi", "-i", "testsrc2=size=160x96:rate=25:duration=2"}, c.args...)...)
			info, err := os.Stat(path)
			if err != nil {
				t.Fatal(err)
			}
			if err := os.Truncate(path, info.Size()*6/10); err != nil {
				t.Fatal(err)
			}
			_, src, times, _ := readAll(t, path, clip.Options{})
			at, words := src.Damage()
			if len(times) < 10 || len(times) > 45 {
				t.Fatalf("%d frames read of a clip cut at 60 %% of 50", len(times))
			}
			if !strings.Contains(words, "cut short") && !strings.Contains(words, "breaks off") || math.Abs(at-times[len(times)-1]) > 1e-6 {
				t.Errorf("broke at %g s (%q); the last frame read is at %g s", at, words, times[len(times)-1])
			}
			t.Log(words)
		})
	}
	t.Run("hole in the middle", func(t *testing.T) {
		path := cliptest.Make(t, "hole.mp4", args...)
		b, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		// Wipe a stretch of pictures; the index at the end stays.
		from := bytes.Index(b, []byte("mdat"))
		to := bytes.LastIndex(b, []byte("moov"))
		mid := from + (to-from)*45/100
		for i := mid; i < mid+(to-from)/10; i++ {
			b[i] = 0
		}
		if err := os.WriteFile(path, b, 0o644); err != nil {
			t.Fatal(err)
		}
		facts, src, times, _ := readAll(t, path, clip.Options{})
		_, words := src.Damage()
		for i, at := range times {
			k := int(math.Round(at * 25))
			if math.Abs(at-facts.Times[k]) > 1e-6 || i > 0 && at <= times[i-1] {
				t.Fatalf("frame %d has the time %g", i, at)
			}
		}
		if len(times) < 25 && words == "" {
			t.Errorf("%d of 25 frames came and no damage is told", len(times))
		}
		t.Logf("%d of 25 frames, last at %.3f s: %s", len(times), times[len(times)-1], words)
	})
}

func picture(w, h int, shade byte) image.Image {
	img := image.NewRGBA(image.Rect(0, 0, w, h))
	for y := 0; y < h; y++ {
		for x := 0; x < w; x++ {
			img.SetRGBA(x, y, color.RGBA{shade, byte(x), byte(y), 255})
		}
	}
	return img
}

func savePNG(t *testing.T, path string, img image.Image) {
	t.Helper()
	var b bytes.Buffer
	if err := png.Encode(&b, img); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
}

func TestNumberedPictures(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	for _, n := range []string{"p-2.png", "p-9.png", "p-10.png", "p-11.png", "p-13.png"} {
		savePNG(t, filepath.Join(dir, n), picture(20, 12, byte(len(n))))
	}
	savePNG(t, filepath.Join(dir, "still.png"), picture(5, 5, 0))
	_, err := clip.Inspect(ctx, dir, clip.Options{})
	says(t, err, dir, "frames_per_s = 60")

	facts, err := clip.Inspect(ctx, dir, clip.Options{FramesPerS: 100, RateFactor: 2})
	if err != nil {
		t.Fatal(err)
	}
	sameTimes(t, "times", facts.Times, []float64{0, 0.035, 0.04, 0.045, 0.055}, 1e-12)
	src, err := clip.Open(ctx, facts)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	n := 0
	for ; ; n++ {
		f, err := src.Next(ctx)
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		b, g, r := f.BGR(3, 7)
		if f.Index != n || f.T != facts.Times[n] || b != 7 || g != 3 || r != 7 && r != 8 {
			t.Errorf("frame %d: index %d, %g s, pixel %d %d %d", n, f.Index, f.T, b, g, r)
		}
	}
	if n != 5 {
		t.Errorf("%d frames, want 5", n)
	}

	t.Run("two sizes", func(t *testing.T) {
		d := t.TempDir()
		savePNG(t, filepath.Join(d, "1.png"), picture(20, 12, 0))
		savePNG(t, filepath.Join(d, "2.png"), picture(20, 14, 0))
		_, err := clip.Inspect(ctx, d, clip.Options{FramesPerS: 30})
		says(t, err, d, "2.png is 20 × 14", "one size")
	})
	t.Run("two series", func(t *testing.T) {
		d := t.TempDir()
		savePNG(t, filepath.Join(d, "a1.png"), picture(20, 12, 0))
		savePNG(t, filepath.Join(d, "b1.png"), picture(20, 12, 0))
		_, err := clip.Inspect(ctx, d, clip.Options{FramesPerS: 30})
		says(t, err, d, "folder of its own")
	})
	t.Run("damaged picture", func(t *testing.T) {
		d := t.TempDir()
		for _, n := range []string{"1.png", "2.png", "3.png"} {
			savePNG(t, filepath.Join(d, n), picture(20, 12, 0))
		}
		var b bytes.Buffer
		if err := jpeg.Encode(&b, picture(20, 12, 0), nil); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(d, "4.jpg"), b.Bytes()[:b.Len()-20], 0o644); err != nil {
			t.Fatal(err)
		}
		facts, err := clip.Inspect(ctx, d, clip.Options{FramesPerS: 30})
		if err != nil {
			t.Fatal(err)
		}
		src, err := clip.Open(ctx, facts)
		if err != nil {
			t.Fatal(err)
		}
		defer src.Close()
		n := 0
		for err = nil; err == nil; n++ {
			_, err = src.Next(ctx)
		}
		at, words := src.Damage()
		if err != io.EOF || n-1 != 3 || math.Abs(at-2.0/30) > 1e-9 || !strings.Contains(words, "4.jpg") {
			t.Errorf("%d frames, %v, broke at %g: %s", n-1, err, at, words)
		}
	})
}
