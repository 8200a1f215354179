package samples

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"lodeswing/samples/film"
	"lodeswing/track/rig"
)

// Options says how a film departs from its rig.
type Options struct {
	// Clean films without noise, texture, clutter, shadows and halo, and encodes
	// without loss.
	Clean bool
	// Undriven films with the coils off.
	Undriven bool
	// OffFromS, when above zero, is the time in s at which the battery is taken out.
	OffFromS float64
	// PushAtS, when above zero, is the time in s at which a hand adds PushRadS, rad/s,
	// to the rate of the first part.
	PushAtS, PushRadS float64
	// DurationS, when above zero, replaces the rig's.
	DurationS float64
	// Start and Progress, when not nil, are told the number of frames, and how
	// many are done.
	Start    func(frames int)
	Progress func(done int)
}

// Take is a toy ready to be filmed: the scene and what is known about it.
type Take struct {
	Rig      *rig.Rig
	Scene    *film.Scene
	Frames   int
	Encoding film.Encoding
	motion   *motion
}

// longest is the longest film in seconds; beyond it the truth's tables outgrow
// any use.
const longest = 3600

// Prepare computes the toy's motion and builds its scene.
func Prepare(ctx context.Context, r *rig.Rig, opt Options) (*Take, error) {
	f := r.Film
	if len(r.Bobs) == 0 {
		return nil, fmt.Errorf("the rig %s has no [[bob]]: there is nothing to film", r.Path)
	}
	if !f.PixelsPerM.Set {
		return nil, fmt.Errorf("the rig %s does not say how to film it: add [film] with pixels_per_mm, duration_s and centre_mm (see lodeswing film --help)", r.Path)
	}
	seconds := f.DurationS.Or(20)
	if opt.DurationS > 0 {
		seconds = opt.DurationS
	}
	rate := f.FramesPerS.Or(60)
	frames := int(math.Round(seconds * rate))
	switch {
	case seconds > longest:
		return nil, fmt.Errorf("a film of %g s is longer than the %d s that the film maker makes: set a shorter duration_s in [film]", seconds, longest)
	case frames < 1:
		return nil, fmt.Errorf("a film of %g s at %g frames/s has no frame: set a longer duration_s in [film]", seconds, rate)
	}
	for _, size := range []rig.Value{f.WidthPX, f.HeightPX} {
		if size.Set && (size.V < 16 || size.V > 7680 || math.Mod(size.V, 2) != 0) {
			return nil, fmt.Errorf("a picture side of %g px cannot be filmed: width_px and height_px in [film] must be even, from 16 to 7680", size.V)
		}
	}
	if opt.Clean {
		r = r.Clone()
		f := &r.Film
		f.Noise, f.Texture, f.Uneven, f.Shadow, f.Sharpening = rig.Value{}, rig.Value{}, rig.Value{}, rig.Value{}, rig.Value{}
		f.Clutter = false
	}
	t := &Take{Rig: r, Frames: frames}
	t.Encoding = film.Encoding{
		HEVC: f.HEVC, MegabitPerS: f.MegabitPerS.Or(0), Lossless: opt.Clean,
		RateFactor: r.Camera.RateFactor.Or(1),
	}
	if turned := f.TurnedRad.V * 180 / math.Pi; math.Abs(turned/90-math.Round(turned/90)) > 1e-9 {
		return nil, fmt.Errorf("a clip can be turned by 90, 180 or 270 degrees, not by %g: mend turned_deg in [film]", turned)
	}
	until := seconds + 0.2
	var times []float64
	if f.VariableRate {
		t.Encoding.Jitter = film.NewJitter(rate, frames, uint64(f.Seed.Or(1)))
		times = t.Encoding.Jitter.Times(frames)
		until = times[frames-1] + 0.2
	}
	var err error
	if t.motion, err = move(ctx, r, until, opt); err != nil {
		return nil, err
	}
	if t.Scene, err = scene(r, t.motion, until); err != nil {
		return nil, err
	}
	t.Scene.Times = times
	return t, nil
}

// OwnersRig is the rig as the toy's owner would write it: without the film's
// settings, the start, and the true values of what is left to the matching.
func OwnersRig(r *rig.Rig) *rig.Rig {
	o := r.Clone()
	o.Film, o.Start = rig.Film{}, nil
	for _, n := range o.Numbers() {
		if n.Value.Fit {
			*n.Value = rig.Value{Fit: true}
		}
	}
	return o
}

// Files are what a film leaves in its folder.
type Files struct {
	Clip    string `json:"clip"`
	Rig     string `json:"rig"`
	Truth   string `json:"truth"`
	Numbers string `json:"numbers"`
	Frames  int    `json:"frames"`
}

// Film films the rig into the folder dir: STEM.mp4, STEM.toml (the rig as its
// owner would write it), truth.csv (every bob in every frame) and truth.json
// (every number of the model). The folder is made if it is missing. All four
// appear, or none, and an older film of the same name is replaced; the film of
// another rig in the same folder is left alone and is an error.
func Film(ctx context.Context, r *rig.Rig, dir string, opt Options) (*Files, error) {
	t, err := Prepare(ctx, r, opt)
	if err != nil {
		return nil, err
	}
	stem := Stem(r)
	out := &Files{
		Clip: filepath.Join(dir, stem+".mp4"), Rig: filepath.Join(dir, stem+".toml"),
		Truth: filepath.Join(dir, "truth.csv"), Numbers: filepath.Join(dir, "truth.json"), Frames: t.Frames,
	}
	if err := mayReplace(out, r.Path); err != nil {
		return nil, err
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("the folder %s cannot be made: %w; choose another with --out", dir, cause(err))
	}
	work, err := os.MkdirTemp(dir, ".film-*")
	if err != nil {
		return nil, fmt.Errorf("cannot write into %s: %w; choose another folder with --out", dir, cause(err))
	}
	defer os.RemoveAll(work)
	if opt.Start != nil {
		opt.Start(t.Frames)
	}
	in := func(path string) string { return filepath.Join(work, filepath.Base(path)) }
	if err := t.Scene.Encode(ctx, in(out.Clip), t.Frames, t.Encoding, opt.Progress); err != nil {
		return nil, err
	}
	if err := t.writeTruth(in(out.Truth)); err != nil {
		return nil, fmt.Errorf("cannot write the truth into %s: %w", dir, cause(err))
	}
	if err := t.writeNumbers(in(out.Numbers), filepath.Base(out.Clip)); err != nil {
		return nil, fmt.Errorf("cannot write the truth into %s: %w", dir, cause(err))
	}
	if err := OwnersRig(r).Save(in(out.Rig)); err != nil {
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	for _, path := range []string{out.Truth, out.Numbers, out.Rig, out.Clip} {
		if err := os.Rename(in(path), path); err != nil {
			return nil, fmt.Errorf("cannot write %s: %w", path, cause(err))
		}
	}
	return out, nil
}

// mayReplace guards what is already there: the rig that is being filmed, and
// another film's truth.
func mayReplace(out *Files, source string) error {
	if a, err := filepath.Abs(out.Rig); err == nil {
		if b, err := filepath.Abs(source); err == nil && a == b {
			if _, err := os.Stat(a); err == nil {
				return fmt.Errorf("the film would replace its own rig %s: choose another folder with --out", source)
			}
		}
	}
	if _, err := os.Stat(out.Truth); err == nil {
		if _, err := os.Stat(out.Clip); errors.Is(err, os.ErrNotExist) {
			return fmt.Errorf("%s belongs to another film: choose another folder with --out", out.Truth)
		}
	}
	return nil
}

// cause strips the operation and path from a file error: the message has them.
func cause(err error) error {
	var p *os.PathError
	if errors.As(err, &p) {
		return p.Err
	}
	var l *os.LinkError
	if errors.As(err, &l) {
		return l.Err
	}
	return err
}
