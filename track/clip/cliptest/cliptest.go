// Package cliptest makes clips for tests and benchmarks with ffmpeg, at run
// time, so that none is stored. What comes in: ffmpeg's own arguments. What
// goes out: the path of a file in a folder that the test removes. Tests skip,
// saying why, where ffmpeg or an encoder is missing.
package cliptest

import (
	"bytes"
	"context"
	"encoding/binary"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"
)

var encoders = sync.OnceValue(func() string {
	out, err := exec.Command("ffmpeg", "-hide_banner", "-encoders").Output()
	if err != nil {
		return ""
	}
	return string(out)
})

// Need skips the test where ffmpeg, ffprobe or one of the named encoders is
// missing.
func Need(tb testing.TB, names ...string) {
	tb.Helper()
	for _, tool := range []string{"ffmpeg", "ffprobe"} {
		if _, err := exec.LookPath(tool); err != nil {
			tb.Skipf("%s is not installed: this test makes its clips with it", tool)
		}
	}
	for _, n := range names {
		if !strings.Contains(encoders(), " "+n+" ") {
			tb.Skipf("ffmpeg has no encoder %s here", n)
		}
	}
}

// Make runs ffmpeg with args, writes name into a fresh folder and returns its
// path. It fails the test when ffmpeg fails.
func Make(tb testing.TB, name string, args ...string) string {
	tb.Helper()
	path := filepath.Join(tb.TempDir(), name)
	Run(tb, append(args, path)...)
	return path
}

// Run runs ffmpeg with args, quietly, and fails the test when it fails.
func Run(tb testing.TB, args ...string) {
	tb.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 3*time.Minute)
	defer cancel()
	cmd := exec.CommandContext(ctx, "ffmpeg", append([]string{"-y", "-nostdin", "-hide_banner", "-v", "error"}, args...)...)
	var errs bytes.Buffer
	cmd.Stderr = &errs
	if err := cmd.Run(); err != nil {
		tb.Fatalf("ffmpeg %s: %v\n%s", strings.Join(args, " "), err, errs.String())
	}
}

// Output runs a tool and returns what it prints.
func Output(tb testing.TB, tool string, args ...string) []byte {
	tb.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 3*time.Minute)
	defer cancel()
	cmd := exec.CommandContext(ctx, tool, args...)
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.Output()
	if err != nil {
		tb.Fatalf("%s %s: %v\n%s", tool, strings.Join(args, " "), err, errs.String())
	}
	return out
}

// Phone1080p60 makes the benchmark's clip: seconds of 1080p at 60 frames/s,
// H.264 at 17 Mb/s or more, noise over a test picture, as a phone's sensor would
// give. It fails when the bitrate is not reached, for a light clip says nothing
// about speed.
func Phone1080p60(tb testing.TB, seconds string) string {
	tb.Helper()
	Need(tb, "libx264")
	path := Make(tb, "phone.mp4", "-f", "lavfi", "-i", "testsrc2=size=1920x1080:rate=60:duration="+seconds,
		"-vf", "noise=alls=7:allf=t", "-c:v", "libx264", "-preset", "veryfast", "-profile:v", "high",
		"-b:v", "19M", "-maxrate", "20M", "-bufsize", "20M", "-pix_fmt", "yuv420p")
	info, err := os.Stat(path)
	if err != nil {
		tb.Fatal(err)
	}
	s, err := time.ParseDuration(seconds + "s")
	if err != nil {
		tb.Fatal(err)
	}
	if rate := 8 * float64(info.Size()) / s.Seconds(); rate < 17e6 {
		tb.Fatalf("the benchmark's clip has %.1f Mb/s, which is under 17 and would flatter the figures", rate/1e6)
	}
	return path
}

// Turn writes into an mp4 or mov file the flag that its picture must be turned
// clockwise by deg (0, 90, 180, 270) to be upright, as a phone held upright or
// upside down does: the matrix of the track header box (ISO/IEC 14496-12, 8.3.2).
func Turn(tb testing.TB, path string, deg, storedW, storedH int) {
	tb.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		tb.Fatal(err)
	}
	at := bytes.Index(b, []byte("tkhd"))
	if at < 0 || b[at+4] != 0 {
		tb.Fatalf("%s has no track header of version 0", path)
	}
	const one = 1 << 16
	m := map[int][9]int32{
		0:   {one, 0, 0, 0, one, 0, 0, 0, 1 << 30},
		90:  {0, one, 0, -one, 0, 0, int32(storedH) * one, 0, 1 << 30},
		180: {-one, 0, 0, 0, -one, 0, int32(storedW) * one, int32(storedH) * one, 1 << 30},
		270: {0, -one, 0, one, 0, 0, 0, int32(storedW) * one, 1 << 30},
	}[deg]
	const matrix = 4 + 4 + 5*4 + 8 + 8 // name, version and flags, times and ids, reserved, layer … volume
	for i, v := range m {
		binary.BigEndian.PutUint32(b[at+matrix+4*i:], uint32(v))
	}
	if err := os.WriteFile(path, b, 0o644); err != nil {
		tb.Fatal(err)
	}
}
