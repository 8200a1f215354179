// Package follow turns a clip and its rig into a track. What comes in: a
// clip.Source, the rig, and the solved camera. What goes out: a track.Track with
// a sample per bob and frame, in pixels of the upright picture, metres in the
// plane of motion and seconds; or a *NotFound with a marked picture that shows
// what was seen and how to mend the rig. Overlay draws what was followed.
//
// The first frame is searched whole; after that each bob is predicted, fitted
// in a small window (track/detect), and told from the others by its path
// (track/link). What a clip shows where no bob is gets remembered, so that a
// patterned wall does not pull the centres. Memory does not grow with the clip
// but for the samples.
package follow

import (
	"context"
	"errors"
	"fmt"
	"image"
	"io"
	"math"
	"strings"
	"time"

	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/detect"
	"lodeswing/track/rig"
	"lodeswing/track/shake"
)

// Options are what a caller may choose. The zero value is good.
type Options struct {
	// Progress, if not nil, is called a few times a second and at the end.
	Progress func(Progress)
	// Shake, if not nil, is handed the report on the camera's own motion.
	Shake func(*shake.Report)
	// Again opens the clip once more, for bobs that are found by their motion
	// before following starts. nil: the file that the source's facts name.
	Again func(context.Context) (clip.Source, error)
}

// Progress says how far following has come.
type Progress struct {
	Frame      int // frames done
	Of         int // frames in the clip as far as its container knows
	FramesPerS float64
}

// follower is one run.
type follower struct {
	src      clip.Source
	rig      *rig.Rig
	cam      *camera.Camera
	opt      Options
	facts    *clip.Facts
	bobs     []*bob
	wall     *detect.Wall
	watch    *shake.Watch
	active   image.Rectangle // where there is picture
	picture  image.Rectangle
	dt       float64 // median time between frames, s
	expo     exposure
	discs    []detect.Disc
	whole    clip.Patch
	frames   int
	doubt    int           // frames running in which the wall's picture did not fit
	repeated int           // sightings in frames that repeat the one before
	problem  *NotFound     // what was wrong in the first frame
	scouted  []*clip.Patch // later pictures, for bobs known by their motion
}

// Follow follows the rig's bobs through the clip. It reads src to its end and
// does not close it. Where ctx is cancelled it returns ctx's error; where the
// bobs cannot be found at the start, a *NotFound.
func Follow(ctx context.Context, src clip.Source, r *rig.Rig, cam *camera.Camera, opt Options) (*track.Track, error) {
	if len(r.Bobs) == 0 {
		return nil, fmt.Errorf("the rig %s names no bob: add a [[bob]] with a name and a colour or look", r.Path)
	}
	f := &follower{src: src, rig: r, cam: cam, opt: opt, facts: src.Facts()}
	f.dt = f.usualInterval()
	f.expo = newExposure(r, f.dt)
	if err := f.prepare(); err != nil {
		return nil, err
	}
	begun := time.Now()
	told := begun
	for {
		frame, err := src.Next(ctx)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, err
		}
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := f.step(ctx, frame); err != nil {
			return nil, err
		}
		f.frames++
		if now := time.Now(); opt.Progress != nil && now.Sub(told) > 200*time.Millisecond {
			told = now
			f.tell(begun)
		}
	}
	if f.frames == 0 {
		return nil, fmt.Errorf("the clip %s has no frame that can be read", f.facts.Path)
	}
	if !f.started() {
		return nil, f.problem
	}
	if opt.Progress != nil {
		f.tell(begun)
	}
	return f.finish(), nil
}

func (f *follower) tell(begun time.Time) {
	p := Progress{Frame: f.frames, Of: max(len(f.facts.Times), f.frames)}
	if s := time.Since(begun).Seconds(); s > 0 {
		p.FramesPerS = float64(f.frames) / s
	}
	f.opt.Progress(p)
}

// usualInterval is the median time between frames.
func (f *follower) usualInterval() float64 {
	t := f.facts.Times
	if len(t) < 2 {
		if f.facts.TrueRate > 0 {
			return 1 / f.facts.TrueRate
		}
		return 1.0 / 30
	}
	d := make([]float64, len(t)-1)
	for i := range d {
		d[i] = t[i+1] - t[i]
	}
	return median(d)
}

// prepare checks the rig against the picture and sets up the bobs.
func (f *follower) prepare() error {
	f.picture = f.facts.Bounds()
	if cal := f.cam.Calibration(); cal.PictureW != f.picture.Dx() || cal.PictureH != f.picture.Dy() {
		return fmt.Errorf("the camera was solved for a picture of %d × %d pixels, and the clip has %d × %d", cal.PictureW, cal.PictureH, f.picture.Dx(), f.picture.Dy())
	}
	subsampled := strings.Contains(f.facts.PixelFormat, "420") || strings.Contains(f.facts.PixelFormat, "nv12") ||
		strings.Contains(f.facts.PixelFormat, "422") || strings.Contains(f.facts.PixelFormat, "p010")
	for i := range f.rig.Bobs {
		rb := &f.rig.Bobs[i]
		look, err := detect.ParseLook(rb.Colour, rb.Look)
		if err != nil {
			return fmt.Errorf("bob %q: %w", rb.Name, err)
		}
		b := &bob{f: f, rig: rb, look: look, subsampled: subsampled}
		if len(rb.StartPX) == 2 {
			b.startU, b.startV, b.hasStart = rb.StartPX[0], rb.StartPX[1], true
			if u, v := int(math.Round(b.startU)), int(math.Round(b.startV)); !image.Pt(u, v).In(f.picture) {
				return fmt.Errorf("bob %q: start_px = [%g, %g] lies outside the picture of %d × %d pixels; read it from the upright picture, u to the right and v down",
					rb.Name, b.startU, b.startV, f.picture.Dx(), f.picture.Dy())
			}
		}
		b.samples = make([]track.Sample, 0, len(f.facts.Times))
		f.bobs = append(f.bobs, b)
	}
	f.wall = detect.NewWall(f.picture)
	return nil
}

// started tells whether the bobs have been found.
func (f *follower) started() bool { return f.bobs[0].filter != nil }

// step takes in one frame.
func (f *follower) step(ctx context.Context, frame *clip.Frame) error {
	if !f.started() {
		return f.start(ctx, frame)
	}
	if f.watch.Wants(frame.Index) {
		f.watch.Observe(frame)
	}
	for _, b := range f.bobs {
		b.expect(frame)
	}
	for _, b := range f.bobs {
		b.look1(frame)
	}
	f.untangle()
	f.seekLost(frame)
	for _, b := range f.bobs {
		b.settle(frame)
	}
	f.learnWall(frame)
	return nil
}

// doubtFrames is in how many frames running the wall must not fit before it is
// taken that the camera has moved.
const doubtFrames = 4

// learnWall takes in what the windows show around the bobs.
func (f *follower) learnWall(frame *clip.Frame) {
	f.discs = f.discs[:0]
	for _, b := range f.bobs {
		f.discs = append(f.discs, b.shadow())
	}
	wrong := false
	for _, b := range f.bobs {
		wrong = wrong || b.have && b.result.WallWrong
	}
	if f.doubt++; !wrong {
		f.doubt = 0
	}
	if f.doubt == doubtFrames {
		// Start again with this frame.
		frame.Patch(&f.whole, f.picture)
		f.wall.Forget()
		f.wall.Learn(&f.whole, f.discs, 1)
		f.doubt = 0
		return
	}
	for _, b := range f.bobs {
		if b.lost == 0 && b.patch.W > 0 {
			f.wall.Learn(&b.patch, f.discs, 8)
		}
	}
}
