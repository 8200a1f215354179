package follow

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
	"strings"
	"time"

	"lodeswing/track"
	"lodeswing/track/clip"
)

// inks tell bobs apart, also for most people who see few colours: they differ in
// lightness as well as in hue.
var inks = []ink{{255, 200, 40}, {70, 200, 255}, {255, 120, 200}, {150, 255, 120}, {255, 255, 255}, {255, 140, 60}}

const trailTime = 0.6 // s of path that is drawn behind a bob

// Overlay reads the clip that facts describe once more and writes an mp4 that
// shows what was followed: each bob's outline, name and recent path, and in
// words how it was seen where it was not seen whole. The file appears whole or
// not at all. It plays at the clip's mean rate. progress may be nil.
func Overlay(ctx context.Context, facts *clip.Facts, tr *track.Track, path string, progress func(Progress)) error {
	src, err := clip.Open(ctx, facts)
	if err != nil {
		return err
	}
	defer src.Close()
	return overlay(ctx, src, tr, path, progress)
}

func overlay(ctx context.Context, src clip.Source, tr *track.Track, path string, progress func(Progress)) error {
	facts := src.Facts()
	ffmpeg, err := exec.LookPath("ffmpeg")
	if err != nil {
		return errors.New("ffmpeg, which writes the overlay clip, was not found: install it (Debian: apt install ffmpeg)")
	}
	dir, err := os.MkdirTemp(filepath.Dir(path), ".overlay-*")
	if err != nil {
		return fmt.Errorf("the overlay clip cannot be written: %w", err)
	}
	defer os.RemoveAll(dir)
	part := filepath.Join(dir, "overlay.mp4")
	rate := facts.NominalRate
	if n := len(facts.Times); n > 1 && facts.Times[n-1] > 0 {
		rate = float64(n-1) / facts.Times[n-1] / math.Max(facts.RateFactor, 1)
	}
	if !(rate > 0.1 && rate < 1000) {
		rate = 30
	}
	cmd := exec.CommandContext(ctx, ffmpeg, "-hide_banner", "-loglevel", "error", "-nostdin", "-y",
		"-f", "rawvideo", "-pix_fmt", "bgr24", "-s", fmt.Sprintf("%dx%d", facts.W, facts.H), "-r", fmt.Sprintf("%.6f", rate), "-i", "-",
		// Players want even sizes and 4:2:0.
		"-vf", "pad=ceil(iw/2)*2:ceil(ih/2)*2", "-c:v", "libx264", "-preset", "veryfast", "-crf", "21", "-pix_fmt", "yuv420p", "-movflags", "+faststart", part)
	var said bytes.Buffer
	cmd.Stderr = &said
	in, err := cmd.StdinPipe()
	if err != nil {
		return err
	}
	if err := cmd.Start(); err != nil {
		return fmt.Errorf("ffmpeg did not start: %w", err)
	}
	drawn := drawAll(ctx, src, tr, in, progress)
	in.Close()
	ended := cmd.Wait()
	switch {
	case ctx.Err() != nil:
		return ctx.Err()
	case ended != nil:
		words := strings.TrimSpace(said.String())
		if words == "" {
			words = ended.Error()
		}
		return fmt.Errorf("ffmpeg could not write the overlay clip %s: %s", path, words)
	case drawn != nil:
		return fmt.Errorf("drawing the overlay clip: %w", drawn)
	}
	return settle(part, path)
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
		return fmt.Errorf("the overlay clip cannot be written: %w", err)
	}
	return os.Rename(part, path)
}

// drawAll sends every frame, drawn on, to w.
func drawAll(ctx context.Context, src clip.Source, tr *track.Track, w io.Writer, progress func(Progress)) error {
	c := canvas{new(clip.Patch)}
	begun := time.Now()
	told := begun
	for n := 0; ; n++ {
		frame, err := src.Next(ctx)
		if errors.Is(err, io.EOF) {
			if n == 0 {
				return errors.New("the clip has no frame that can be read")
			}
			return nil
		}
		if err != nil {
			return err
		}
		frame.Patch(c.Patch, frame.Bounds())
		for i := range tr.Bobs {
			c.bob(&tr.Bobs[i], n, inks[i%len(inks)])
		}
		c.label(8, c.H-8, fmt.Sprintf("%.3f s   frame %d", frame.T, frame.Index), ink{255, 255, 255})
		if _, err := w.Write(c.BGR); err != nil {
			return err
		}
		if now := time.Now(); progress != nil && now.Sub(told) > 200*time.Millisecond {
			told = now
			progress(Progress{Frame: n + 1, Of: len(src.Facts().Times), FramesPerS: float64(n+1) / now.Sub(begun).Seconds()})
		}
	}
}

// bob draws one bob as its n-th sample has it.
func (c canvas) bob(b *track.Bob, n int, k ink) {
	if n >= len(b.Samples) {
		return
	}
	s := b.Samples[n]
	from := n
	for from > 0 && s.T-b.Samples[from-1].T < trailTime {
		from--
	}
	for i := from + 1; i <= n; i++ {
		p, q := &b.Samples[i-1], &b.Samples[i]
		if p.State != track.Missing && q.State != track.Missing {
			c.line(p.U, p.V, q.U, q.V, k, 0.25+0.6*float64(i-from)/float64(n-from))
		}
	}
	r := b.RadiusPX
	if !(r > 0) {
		r = 12
	}
	words := b.Name
	if s.State != track.Seen {
		words += ", " + s.State.String()
	}
	if s.State == track.Missing {
		// Where it was last.
		for i := n - 1; i >= 0; i-- {
			if q := &b.Samples[i]; q.State != track.Missing {
				c.cross(q.U, q.V, 6, k)
				c.label(int(q.U+0.75*r)+6, int(q.V-0.75*r)-4, words, k)
				return
			}
		}
		return
	}
	c.ring(s.U, s.V, r, k)
	c.cross(s.U, s.V, math.Min(0.35*r, 6), k)
	c.label(int(s.U+0.75*r)+6, int(s.V-0.75*r)-4, words, k)
}
