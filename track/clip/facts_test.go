package clip

import (
	"bytes"
	"context"
	"image"
	"image/jpeg"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// played returns facts with the given presentation times.
func played(pts ...float64) *Facts {
	f := &Facts{RateFactor: 1, pts: pts}
	f.deriveTimes()
	f.warn()
	return f
}

func TestJitterAndRamp(t *testing.T) {
	var even, uneven, ramp []float64
	at := 0.0
	for i := range 200 {
		even = append(even, float64(i)/60)
		uneven = append(uneven, float64(i)/60+0.001*float64(i%2))
		ramp = append(ramp, at)
		at += 1.0 / 30
		if i > 60 && i < 140 {
			at += 7.0 / 30
		}
	}
	if f := played(even...); f.JitterS > 1e-9 || len(f.Warnings) > 0 || math.Abs(f.TrueRate-60) > 1e-9 {
		t.Errorf("an even clip: jitter %g s, %g frames/s, warnings %q", f.JitterS, f.TrueRate, f.Warnings)
	}
	// Intervals alternate by ±1 ms about their mean; about their median, which
	// is one of the two, the r.m.s. is between 1 and 2 ms.
	if f := played(uneven...); f.JitterS < 0.9e-3 || f.JitterS > 2e-3 || len(f.Lost) > 0 {
		t.Errorf("jitter %g s, lost %v", f.JitterS, f.Lost)
	}
	if f := played(ramp...); len(f.Warnings) != 1 || !strings.Contains(f.Warnings[0], "frame rate changes within the clip, from 30 frames/s") {
		t.Errorf("a ramp: warnings %q", f.Warnings)
	}
}

func TestOddTimes(t *testing.T) {
	if f := played(3); f.TrueRate != 0 || len(f.Times) != 1 || f.Times[0] != 0 {
		t.Errorf("one frame: %+v", f)
	}
	if f := played(3, 3, 3); f.TrueRate != 0 || len(f.Warnings) != 1 {
		t.Errorf("frames of one time: %+v", f)
	}
	f := played(0, 0, 0, 0, 0.1)
	if len(f.Warnings) != 1 || !strings.Contains(f.Warnings[0], "3 frames have the same time") {
		t.Errorf("warnings %q", f.Warnings)
	}
	for _, x := range []float64{f.TrueRate, f.JitterS} {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			t.Errorf("not a number: %+v", f)
		}
	}
}

func TestFilmedInHighDynamicRangeOrInterlaced(t *testing.T) {
	f := &Facts{RateFactor: 1, pts: []float64{0, 1}, Transfer: "arib-std-b67", interlaced: true}
	f.warn()
	all := strings.Join(f.Warnings, "\n")
	if !strings.Contains(all, "high dynamic range (HLG)") || !strings.Contains(all, "interlaced") {
		t.Errorf("warnings %q", f.Warnings)
	}
}

func TestPhotographsComeUpright(t *testing.T) {
	// An 8 × 8 JPEG with an Exif block in front that says "turn by 90°".
	var plain bytes.Buffer
	if err := jpeg.Encode(&plain, image.NewGray(image.Rect(0, 0, 8, 4)), nil); err != nil {
		t.Fatal(err)
	}
	for _, order := range []string{"MM", "II"} {
		tiff := []byte(order + "\x00\x2a\x00\x00\x00\x08\x00\x01\x01\x12\x00\x03\x00\x00\x00\x01\x00\x06\x00\x00")
		if order == "II" {
			tiff = []byte(order + "\x2a\x00\x08\x00\x00\x00\x01\x00\x12\x01\x03\x00\x01\x00\x00\x00\x06\x00\x00\x00")
		}
		block := append([]byte("Exif\x00\x00"), tiff...)
		var file bytes.Buffer
		file.Write(plain.Bytes()[:2])
		file.Write([]byte{0xff, 0xe1, 0, byte(len(block) + 2)})
		file.Write(block)
		file.Write(plain.Bytes()[2:])
		dir := t.TempDir()
		for _, n := range []string{"1.jpg", "2.jpg"} {
			if err := os.WriteFile(filepath.Join(dir, n), file.Bytes(), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		f, err := Inspect(context.Background(), dir, Options{FramesPerS: 30})
		if err != nil {
			t.Fatal(err)
		}
		src, err := Open(context.Background(), f)
		if err != nil {
			t.Fatal(err)
		}
		frame, err := src.Next(context.Background())
		if err != nil {
			t.Fatal(err)
		}
		if w, h := frame.Size(); f.RotationDeg != 90 || f.W != 4 || f.H != 8 || w != 4 || h != 8 {
			t.Errorf("%s: %d°, %d × %d, frame %d × %d", order, f.RotationDeg, f.W, f.H, w, h)
		}
		// However it is cut, it must not fail.
		for n := range file.Len() {
			orientation(bytes.NewReader(file.Bytes()[:n]))
		}
	}
	if got := orientation(bytes.NewReader(plain.Bytes())); got != 0 {
		t.Errorf("a picture without Exif: orientation %d", got)
	}
}

func TestSmallReaders(t *testing.T) {
	for s, want := range map[string]float64{"30000/1001": 30000.0 / 1001, "240.0": 240, "0/0": 0, "x": 0, "": 0, "5/y": 0} {
		if got := ratio(s); got != want {
			t.Errorf("ratio(%q) = %g, want %g", s, got, want)
		}
	}
	if got := clock("01:02:03.5"); got != 3723.5 {
		t.Errorf("clock: %g", got)
	}
	if !mirrored("\n00000000:        -65536           0           0\n00000001:            0       65536           0\n") {
		t.Error("a mirrored display matrix was not told")
	}
	if mirrored("\n00000000:            0       65536           0\n00000001:       -65536           0           0\n") {
		t.Error("a quarter turn was taken for a mirror")
	}
}
