package film

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
)

// Encoding says how a clip is written. The zero value is what a phone does:
// H.264, 4:2:0 colour, constant rate, 17 Mb/s at 1080p60 and in proportion to
// the pixels per second otherwise.
type Encoding struct {
	HEVC        bool
	MegabitPerS float64 // 0: 17 Mb/s × (pixels per second)/(1920·1080·60), at least 4
	Lossless    bool    // full colour, every byte as rendered
	// ColourLeft puts the halved colour samples over the left pixel of each pair, as
	// H.264 has it where a clip says nothing, instead of between the two. ffmpeg and
	// OpenCV take them to lie between, and then show colour, not brightness, half a
	// pixel too far to the right: phones do either.
	ColourLeft bool
	// RateFactor is recorded over played frames per second: above 1 the clip plays
	// in slow motion, its times are the scene's times that factor longer, and
	// the phone's tag with the capture rate is written. 0 means 1.
	RateFactor float64
	// Jitter writes the scene's Times, made by VariableTimes, into the container.
	Jitter *Jitter
}

// Jitter is a phone's variable frame rate: frame i is at
//
//	round(i·Step + Swing·(sin(A·i) + sin(B·i))/2) + Step·(number of Lost ≤ i)
//
// ticks of 1/90,000 s.
type Jitter struct {
	Step, Swing, A, B float64
	Lost              []int // frames before which one was dropped
}

const ticksPerS = 90000

// NewJitter gives a variable rate around framesPerS: each frame up to 12 % of a
// frame early or late, and about one frame in 150 missing.
func NewJitter(framesPerS float64, frames int, seed uint64) *Jitter {
	j := &Jitter{Step: ticksPerS / framesPerS, A: 2.399963, B: 1.713 + float64(seed%97)/1000}
	j.Swing = 0.12 * j.Step
	for k := 41 + int(seed%50); k < frames; k += 97 + (k*k)%101 {
		j.Lost = append(j.Lost, k)
	}
	return j
}

// Ticks is frame i's time in 1/90,000 s.
func (j *Jitter) Ticks(i int) int64 {
	x := float64(i)
	t := math.Round(x*j.Step + j.Swing*(math.Sin(j.A*x)+math.Sin(j.B*x))/2)
	for _, k := range j.Lost {
		if i >= k {
			t += math.Round(j.Step)
		}
	}
	return int64(t)
}

// Times lists the times of n frames in seconds, for Scene.Times.
func (j *Jitter) Times(n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = float64(j.Ticks(i)) / ticksPerS
	}
	return out
}

// expression is Ticks × factor in ffmpeg's language, N the frame's number.
func (j *Jitter) expression(factor float64) string {
	num := func(x float64) string { return strconv.FormatFloat(x, 'g', 17, 64) }
	var b strings.Builder
	fmt.Fprintf(&b, "%s*(round(N*%s+%s*(sin(%s*N)+sin(%s*N))/2)", num(factor), num(j.Step), num(j.Swing), num(j.A), num(j.B))
	for _, k := range j.Lost {
		fmt.Fprintf(&b, "+%s*gte(N\\,%d)", num(math.Round(j.Step)), k)
	}
	b.WriteString(")")
	return b.String()
}

// Encode renders frames 0 … frames−1 and writes them as an mp4 file at path,
// whole or not at all. progress, when not nil, is told how many frames are done.
// The error names what failed; after a cancelled ctx it is ctx's.
func (s *Scene) Encode(ctx context.Context, path string, frames int, e Encoding, progress func(done int)) (err error) {
	if frames < 1 {
		return fmt.Errorf("a film needs at least one frame: set duration_s and frames_per_s in [film]")
	}
	ffmpeg, err := exec.LookPath("ffmpeg")
	if err != nil {
		return fmt.Errorf("ffmpeg, which encodes the clip, was not found: install it (Debian: apt install ffmpeg)")
	}
	dir, err := os.MkdirTemp(filepath.Dir(path), ".film-*")
	if err != nil {
		return fmt.Errorf("cannot write in %s: %w; choose another folder with --out", filepath.Dir(path), err)
	}
	defer os.RemoveAll(dir)
	part := filepath.Join(dir, "clip.mp4")

	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	cmd := exec.CommandContext(ctx, ffmpeg, s.arguments(e, part)...)
	var said bytes.Buffer
	cmd.Stderr = &said
	in, err := cmd.StdinPipe()
	if err != nil {
		return err
	}
	if err := cmd.Start(); err != nil {
		return fmt.Errorf("ffmpeg did not start: %w", err)
	}
	sent := s.pour(ctx, in, frames, progress)
	in.Close()
	ended := cmd.Wait()
	switch {
	case context.Cause(ctx) != nil && ctx.Err() != nil:
		return context.Cause(ctx)
	case ended != nil || sent != nil:
		return fmt.Errorf("ffmpeg could not write %s: %s", path, lastLine(said.String(), errors.Join(ended, sent)))
	}
	if turned := s.place().cam.turned; turned != 0 {
		if err := setRotation(part, turned); err != nil {
			return err
		}
	}
	if err := settle(part, path); err != nil {
		return fmt.Errorf("cannot write %s: %w", path, err)
	}
	return nil
}

// settle flushes the finished file to the disk and gives it its name.
func settle(part, path string) error {
	f, err := os.OpenFile(part, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	err = f.Sync()
	if e := f.Close(); err == nil {
		err = e
	}
	if err != nil {
		return err
	}
	if err := os.Chmod(part, 0o644); err != nil {
		return err
	}
	return os.Rename(part, path)
}

func lastLine(said string, err error) string {
	lines := strings.Split(strings.TrimSpace(said), "\n")
	if last := strings.TrimSpace(lines[len(lines)-1]); last != "" {
		return last
	}
	return err.Error()
}

// arguments is ffmpeg's command line.
func (s *Scene) arguments(e Encoding, path string) []string {
	w, h := s.place().cam.w, s.place().cam.h
	factor := e.RateFactor
	if factor == 0 {
		factor = 1
	}
	rate := fraction(s.FramesPerS / factor)
	a := []string{
		"-hide_banner", "-loglevel", "error", "-nostdin", "-y",
		"-f", "rawvideo", "-pix_fmt", "bgr24", "-video_size", fmt.Sprintf("%dx%d", w, h),
		"-framerate", rate, "-i", "pipe:0",
	}
	var filters []string
	if !e.Lossless {
		// Without accurate_rnd ffmpeg takes a short way that samples colour from every
		// other row and rounds brightness down.
		site := 128 // in 1/256 pixel
		if e.ColourLeft {
			site = 0
		}
		filters = append(filters, fmt.Sprintf("scale=out_color_matrix=bt709:out_range=tv:out_h_chr_pos=%d:flags=bicubic+accurate_rnd,format=yuv420p", site))
	}
	if e.Jitter != nil {
		filters = append(filters, "settb=1/90000,setpts="+e.Jitter.expression(factor))
		a = append(a, "-fps_mode", "passthrough", "-enc_time_base", "1/90000")
	}
	if len(filters) > 0 {
		a = append(a, "-vf", strings.Join(filters, ","))
	}
	a = append(a, "-video_track_timescale", strconv.Itoa(ticksPerS))
	mb := e.MegabitPerS
	if mb == 0 {
		mb = max(4, 17*float64(w*h)*s.FramesPerS/(1920*1080*60))
	}
	// The rate that counts is per second of the clip as it plays.
	kb := mb * 1000 / factor
	bits := []string{"-b:v", fmt.Sprintf("%.0fk", kb), "-maxrate", fmt.Sprintf("%.0fk", kb*1.3), "-bufsize", fmt.Sprintf("%.0fk", kb*2)}
	switch {
	case e.Lossless:
		a = append(a, "-c:v", "libx264rgb", "-preset", "ultrafast", "-qp", "0")
	case e.HEVC:
		a = append(a, "-c:v", "libx265", "-preset", "superfast", "-tag:v", "hvc1", "-x265-params", "log-level=error")
		a = append(a, bits...)
	default:
		// A phone's encoder is a small circuit, about as thrifty as this preset
		// (common practice, no source). On one thread, since with several its rate
		// control depends on which is first: the same seed gives the same bytes.
		a = append(a, "-c:v", "libx264", "-preset", "veryfast", "-profile:v", "high", "-threads", "1")
		a = append(a, bits...)
	}
	if !e.Lossless {
		a = append(a, "-colorspace", "bt709", "-color_primaries", "bt709", "-color_trc", "bt709", "-color_range", "tv")
	}
	flags := "+faststart"
	if factor != 1 {
		flags += "+use_metadata_tags"
		a = append(a, "-metadata", fmt.Sprintf("com.android.capture.fps=%g", s.FramesPerS))
	}
	return append(a, "-movflags", flags, "-f", "mp4", path)
}

// fraction writes a frame rate as ffmpeg takes it, with NTSC's thousandths.
func fraction(x float64) string {
	for _, den := range []float64{1, 1001, 2, 3, 4, 5, 10, 100} {
		if n := math.Round(x * den); math.Abs(n/den-x) < 1e-9*x {
			return fmt.Sprintf("%.0f/%.0f", n, den)
		}
	}
	return fmt.Sprintf("%.0f/100000", x*100000)
}

// pour renders on all cores and writes the frames to w in their order.
func (s *Scene) pour(ctx context.Context, w io.Writer, frames int, progress func(done int)) error {
	size := 3 * s.Camera.Width * s.Camera.Height
	workers := runtime.GOMAXPROCS(0)
	type slot struct {
		i    int
		pix  []byte
		done chan struct{}
	}
	free := make(chan *slot, 2*workers)
	for range 2 * workers {
		free <- &slot{pix: make([]byte, size)}
	}
	s.stage() // once, before the workers
	work := make(chan *slot)
	order := make(chan *slot, 2*workers)
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	go func() {
		defer close(order)
		defer close(work)
		for i := range frames {
			select {
			case <-ctx.Done():
				return
			case t := <-free:
				t.i, t.done = i, make(chan struct{})
				order <- t
				select {
				case work <- t:
				case <-ctx.Done():
					close(t.done)
					return
				}
			}
		}
	}()
	for range workers {
		go func() {
			for t := range work {
				s.renderStored(s.Time(t.i), t.pix)
				close(t.done)
			}
		}()
	}
	var failed error
	for t := range order {
		<-t.done
		if failed == nil && ctx.Err() == nil {
			if _, err := w.Write(t.pix); err != nil {
				failed = err
				cancel()
			} else if progress != nil {
				progress(t.i + 1)
			}
		}
		free <- t
	}
	if failed == nil {
		failed = ctx.Err()
	}
	return failed
}
