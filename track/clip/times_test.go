package clip_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/clip/cliptest"
)

func TestUprightAsFFmpegTurnsIt(t *testing.T) {
	cliptest.Need(t, "libx264")
	for _, deg := range []int{0, 90, 180, 270} {
		t.Run(fmt.Sprint(deg), func(t *testing.T) {
			path := cliptest.Make(t, "turned.mp4", append(append([]string{}, small...), "-frames:v", "3", "-c:v", "libx264", "-qp", "10", "-pix_fmt", "yuv420p")...)
			cliptest.Turn(t, path, deg, 160, 96)
			facts, _, times, pix := readAll(t, path, clip.Options{})
			w, h := 160, 96
			if deg%180 == 90 {
				w, h = h, w
			}
			if facts.RotationDeg != deg || facts.W != w || facts.H != h || facts.StoredW != 160 || facts.StoredH != 96 {
				t.Fatalf("facts say %d°, upright %d × %d, stored %d × %d", facts.RotationDeg, facts.W, facts.H, facts.StoredW, facts.StoredH)
			}
			ref := decodedPictures(t, path) // ffmpeg turns the picture by itself
			if len(times) != 3 || len(ref) != len(pix) {
				t.Fatalf("%d frames, %d bytes, ffmpeg's own are %d", len(times), len(pix), len(ref))
			}
			if d := difference(pix, ref); d > 1.5 {
				t.Errorf("differs from ffmpeg's upright picture by %.2f grey levels on average", d)
			}
		})
	}
}

// TestTimes holds clips with awkward times against the decoded frames' times of
// ffprobe -show_frames, to the last frame.
func TestTimes(t *testing.T) {
	const vary = "settb=1/90000,setpts='N*3000+700*sin(N*0.9)+if(gt(N\\,11)\\,9000\\,0)+if(gt(N\\,17)\\,N*1500\\,0)'"
	variable := []string{"-vf", vary, "-vsync", "passthrough", "-enc_time_base", "1/90000"}
	x264 := []string{"-c:v", "libx264", "-bf", "3", "-g", "12", "-pix_fmt", "yuv420p"}
	cases := []struct {
		name, encoder string
		args          []string
		then          []string // a second run over the first one's file
		file          string
	}{
		{"variable rate, reordered", "libx264", append(append([]string{}, variable...), x264...), nil, "a.mp4"},
		{"variable rate in Matroska", "libx264", append(append([]string{}, variable...), x264...), nil, "a.mkv"},
		{"variable rate, HEVC", "libx265", append(append([]string{}, variable...), "-c:v", "libx265", "-x265-params", "log-level=none:bframes=4", "-pix_fmt", "yuv420p"), nil, "a.mov"},
		{"cut without decoding, edit list", "libx264", x264, []string{"-ss", "0.6", "-c", "copy"}, "a.mp4"},
		{"cut end and start", "libx264", x264, []string{"-ss", "0.3", "-t", "0.5", "-c", "copy"}, "a.mov"},
		{"late start", "libx264", x264, []string{"-c", "copy", "-output_ts_offset", "1.5"}, "a.mp4"},
		{"late start in Matroska", "libx264", x264, []string{"-c", "copy", "-output_ts_offset", "1.5"}, "a.mkv"},
		{"fragmented", "libx264", append(append([]string{}, x264...), "-movflags", "frag_keyframe+empty_moov"), nil, "a.mp4"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			cliptest.Need(t, c.encoder)
			path := cliptest.Make(t, c.file, append(append([]string{}, small...), c.args...)...)
			if c.then != nil {
				path = cliptest.Make(t, c.file, append([]string{"-i", path}, c.then...)...)
			}
			want := decodedTimes(t, path)
			_, src, times, _ := readAll(t, path, clip.Options{})
			sameTimes(t, "delivered times", times, want, 2e-6)
			if _, words := src.Damage(); words != "" {
				t.Errorf("an intact clip is called damaged: %s", words)
			}
			slow, err := clip.Inspect(context.Background(), path, clip.Options{RateFactor: 8})
			if err != nil {
				t.Fatal(err)
			}
			for i := range want {
				want[i] /= 8
			}
			sameTimes(t, "slow motion undone", slow.Times, want, 2e-6)
		})
	}
}

// TestRateAndLostFrames makes the holes itself, so they are known.
func TestRateAndLostFrames(t *testing.T) {
	cliptest.Need(t, "libx264")
	path := cliptest.Make(t, "holes.mp4", "-f", "lavfi", "-i", "testsrc2=size=64x64:rate=50:duration=2",
		"-vf", "select='not(eq(n,20)+between(n,60,62))'", "-vsync", "passthrough", "-c:v", "libx264", "-pix_fmt", "yuv420p")
	f, err := clip.Inspect(context.Background(), path, clip.Options{})
	if err != nil {
		t.Fatal(err)
	}
	want := []clip.LostFrames{{AfterIndex: 19, Count: 1, T: 0.38}, {AfterIndex: 58, Count: 3, T: 1.18}}
	if len(f.Lost) != 2 || f.LostCount() != 4 {
		t.Fatalf("lost frames %v, want %v", f.Lost, want)
	}
	for i, l := range f.Lost {
		if l.AfterIndex != want[i].AfterIndex || l.Count != want[i].Count || math.Abs(l.T-want[i].T) > 1e-4 {
			t.Errorf("hole %d is %v, want %v", i, l, want[i])
		}
	}
	if f.JitterS > 1e-4 {
		t.Errorf("jitter %g s of an even clip", f.JitterS)
	}
}

func TestCaptureRateTagAgainstRateFactor(t *testing.T) {
	cliptest.Need(t, "libx264")
	path := cliptest.Make(t, "slow.mp4", "-f", "lavfi", "-i", "testsrc2=size=64x64:rate=30:duration=1",
		"-c:v", "libx264", "-pix_fmt", "yuv420p", "-movflags", "use_metadata_tags", "-metadata", "com.android.capture.fps=240.0")
	ctx := context.Background()
	f, err := clip.Inspect(ctx, path, clip.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if f.CaptureFPS != 240 {
		t.Fatalf("capture rate %g, want 240; tags %v", f.CaptureFPS, f.Tags)
	}
	if len(f.Warnings) != 1 || !strings.Contains(f.Warnings[0], "rate_factor should be about 8") {
		t.Errorf("warnings %q do not tell that rate_factor should be about 8", f.Warnings)
	}
	f, err = clip.Inspect(ctx, path, clip.Options{RateFactor: 8})
	if err != nil {
		t.Fatal(err)
	}
	if len(f.Warnings) != 0 || math.Abs(f.TrueRate-240) > 0.1 {
		t.Errorf("with rate_factor 8: warnings %q, %g frames/s", f.Warnings, f.TrueRate)
	}
}

func TestHandledOnTheWay(t *testing.T) {
	phone := clip.Facts{
		Codec: "h264", Profile: "High", W: 1080, H: 1920, TrueRate: 60, RateFactor: 1, BitRate: 17e6,
		Tags: map[string]string{"com.android.version": "14", "handler_name": "VideoHandle"},
	}
	if h := phone.Handled(); !h.FromPhone || h.Poor || len(h.Signs) > 0 || h.Reencoded() {
		t.Errorf("a phone's own file: %+v", h)
	}
	sent := clip.Facts{
		Codec: "h264", Profile: "Constrained Baseline", W: 848, H: 478, TrueRate: 30, RateFactor: 1, BitRate: 6e5,
		Tags: map[string]string{"creation_time": "2026-01-01"},
	}
	if h := sent.Handled(); h.FromPhone || !h.Poor || len(h.Signs) != 2 || !h.Reencoded() {
		t.Errorf("a messenger's file: %+v", h)
	}
	copied := clip.Facts{Codec: "hevc", Profile: "Main", W: 1920, H: 1080, TrueRate: 60, RateFactor: 1, BitRate: 12e6, Encoder: "Lavf60.3.100"}
	if h := copied.Handled(); h.Reencoded() || len(h.Signs) != 1 {
		t.Errorf("a clip copied into another container: %+v", h)
	}
}
