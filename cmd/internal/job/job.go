// Package job runs one measurement from a clip and a rig to a result folder,
// or its first steps. What comes in: file names. What goes out: a record, in SI
// units, and the folder. Commands call it, with a context that stops it and a
// meter that shows how far it is.
package job

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"image/png"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"lodeswing/analyze"
	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/progress"
	"lodeswing/plots"
	"lodeswing/track"
	"lodeswing/track/board"
	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/follow"
	"lodeswing/track/rig"
)

// Job is one measurement. Clip, RigPath and Out must be set.
type Job struct {
	Clip    string
	RigPath string
	Out     string // the result folder
	Overlay bool   // also a clip that shows what was followed
	// BatteryOut is the result folder of a clip of the same unit with the coil's
	// battery out; empty for none.
	BatteryOut string
	Version    string // of the program, for the record
	Options    map[string]string
	Meter      *progress.Meter
	Say        io.Writer // plain sentences about what is being done; nil: none
}

// OutFor is the result folder's name where the user gives none: beside the
// working directory's other files, after the clip.
func OutFor(clipPath string) string {
	base := filepath.Base(filepath.Clean(clipPath))
	return strings.TrimSuffix(base, filepath.Ext(base)) + "-result"
}

// Measure does it all: track, analyse, draw, report, write.
func (j *Job) Measure(ctx context.Context) (*record.Record, error) {
	var off *record.Record
	if j.BatteryOut != "" {
		var err error
		if off, err = record.Read(j.BatteryOut); err != nil {
			return nil, fmt.Errorf("the battery-out result: %w", err)
		}
	}
	rec, r, err := j.follow(ctx)
	if err != nil {
		return nil, err
	}
	began := time.Now()
	j.Meter.Start("analysing", 0, "")
	full, err := analyze.Run(ctx, rec.Track, r, analyze.Options{Run: rec.Run, Still: rec.Still, BatteryOut: off})
	if err != nil {
		return nil, err
	}
	j.Meter.End()
	full.Kept = rec.Kept
	full.Run.Took("analyse", time.Since(began))
	return full, j.finish(ctx, full)
}

// Track only follows the bobs and writes the track's record.
func (j *Job) Track(ctx context.Context) (*record.Record, error) {
	rec, _, err := j.follow(ctx)
	if err != nil {
		return nil, err
	}
	return rec, j.finish(ctx, rec)
}

// finish draws the record and puts it in its place.
func (j *Job) finish(ctx context.Context, rec *record.Record) error {
	began := time.Now()
	if err := plots.Draw(ctx, rec); err != nil {
		return fmt.Errorf("drawing the figures: %w", err)
	}
	rec.Run.Took("draw", time.Since(began))
	err := record.Write(ctx, j.Out, rec)
	for _, k := range rec.Kept {
		if k.Name == overlayName {
			os.Remove(k.Path) // the scratch copy; the folder has its own now
		}
	}
	return err
}

// follow reads the rig and the clip and follows the bobs.
func (j *Job) follow(ctx context.Context) (*record.Record, *rig.Rig, error) {
	text, err := os.ReadFile(j.RigPath)
	if err != nil {
		return nil, nil, fmt.Errorf("the rig cannot be read: %w", plain(err))
	}
	r, err := rig.Load(j.RigPath)
	if err != nil {
		return nil, nil, err
	}
	if err := r.CheckScale(); err != nil {
		return nil, nil, err
	}
	if err := record.CheckTarget(j.Out); err != nil {
		return nil, nil, err
	}
	rec := &record.Record{}
	rec.Run = record.Run{
		Version: j.Version, Started: time.Now().UTC().Truncate(time.Second), Options: j.Options,
		Rig: record.Rig{Name: r.Name, File: filepath.Base(j.RigPath), Text: string(text)},
	}
	facts, err := clip.Inspect(ctx, j.Clip, clip.Options{RateFactor: r.Camera.TimeRatio(), FramesPerS: r.Camera.FramesPerS.Or(0)})
	if err != nil {
		return nil, nil, err
	}
	rec.Run.Clip = clipOf(facts)

	cam, still, err := setUp(ctx, facts, r)
	if err != nil {
		return nil, nil, err
	}
	rec.Still = still
	began := time.Now()
	tr, err := j.followAll(ctx, facts, r, cam)
	if err != nil {
		return nil, nil, err
	}
	rec.Track = tr
	rec.Run.Took("track", time.Since(began))
	rec.Cautions = tr.Cautions
	if j.Overlay {
		if err := j.overlay(ctx, facts, r, tr, rec); err != nil {
			return nil, nil, err
		}
	}
	return rec, r, nil
}

// followAll opens the clip and follows the bobs to its end.
func (j *Job) followAll(ctx context.Context, facts *clip.Facts, r *rig.Rig, cam *camera.Camera) (*track.Track, error) {
	src, err := clip.Open(ctx, facts)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	j.Meter.Start("following", len(facts.Times), "frames")
	tr, err := follow.Follow(ctx, src, r, cam, follow.Options{
		Progress: func(p follow.Progress) { j.Meter.Set(p.Frame) },
	})
	if err != nil {
		var lost *follow.NotFound
		if errors.As(err, &lost) {
			return nil, j.showWhatWasSeen(lost)
		}
		return nil, err
	}
	j.Meter.Set(len(facts.Times))
	j.Meter.End()
	return tr, nil
}

// showWhatWasSeen writes the marked picture beside the place of the result and
// returns the error that names it.
func (j *Job) showWhatWasSeen(lost *follow.NotFound) error {
	if lost.Picture == nil {
		return lost
	}
	path := strings.TrimSuffix(filepath.Clean(j.Out), string(filepath.Separator)) + "-seen.png"
	var buf bytes.Buffer
	if err := png.Encode(&buf, lost.Picture); err != nil {
		return lost
	}
	if err := os.WriteFile(path, buf.Bytes(), 0o666); err != nil {
		return fmt.Errorf("%w\n(The marked picture could not be written: %v)", lost, err)
	}
	lost.Path = path
	return lost
}

// looked is how many of the first frames are searched for the printed target.
const looked = 5

// setUp reads the first frames for the still, for the printed target or the
// scale's marks, and solves the camera.
func setUp(ctx context.Context, facts *clip.Facts, r *rig.Rig) (*camera.Camera, []byte, error) {
	src, err := clip.Open(ctx, facts)
	if err != nil {
		return nil, nil, err
	}
	defer src.Close()
	n := 1
	if r.Scale.Target != "" {
		n = looked
	}
	var first []*clip.Frame
	for len(first) < n {
		f, err := src.Next(ctx)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, nil, err
		}
		first = append(first, f.Clone())
	}
	if len(first) == 0 {
		return nil, nil, fmt.Errorf("the clip %s has no frame that can be read; copy it from the phone again", facts.Path)
	}
	var seen *camera.Sighting
	switch {
	case r.Scale.Target != "":
		seen, err = board.Find(first, r.Scale.Target)
	case r.Scale.MarkLook != "" && len(r.Scale.EndsPX) == 0:
		seen, err = follow.Marks(first[0], r, strings.Contains(facts.PixelFormat, "420"))
	}
	if err != nil {
		return nil, nil, err
	}
	cam, err := camera.New(r, facts.W, facts.H, seen)
	if err != nil {
		return nil, nil, err
	}
	var still bytes.Buffer
	if err := png.Encode(&still, first[0].Upright()); err != nil {
		return nil, nil, fmt.Errorf("the still picture: %w", err)
	}
	return cam, still.Bytes(), nil
}

// overlayName is the overlay clip's name in the result folder.
const overlayName = "overlay.mp4"

// overlay renders the clip again with what was followed drawn on it.
func (j *Job) overlay(ctx context.Context, facts *clip.Facts, r *rig.Rig, tr *track.Track, rec *record.Record) error {
	scratch, err := os.CreateTemp("", "lodeswing-overlay-*.mp4")
	if err != nil {
		return fmt.Errorf("the overlay clip: %w", plain(err))
	}
	scratch.Close()
	began := time.Now()
	j.Meter.Start("drawing the overlay", len(facts.Times), "frames")
	err = follow.Overlay(ctx, facts, tr, scratch.Name(), func(p follow.Progress) { j.Meter.Set(p.Frame) })
	if err != nil {
		os.Remove(scratch.Name())
		return err
	}
	j.Meter.End()
	rec.Run.Took("overlay", time.Since(began))
	rec.Kept = append(rec.Kept, record.Kept{Name: overlayName, Path: scratch.Name()})
	return nil
}

func clipOf(facts *clip.Facts) *record.Clip {
	c := &record.Clip{File: filepath.Base(facts.Path), SHA256: facts.SHA256, Facts: facts}
	if info, err := os.Stat(facts.Path); err == nil && info.Mode().IsRegular() {
		c.Bytes = info.Size()
	}
	return c
}

// plain takes the system call's name out of a file error.
func plain(err error) error {
	var path *os.PathError
	if errors.As(err, &path) {
		return fmt.Errorf("%s: %w", path.Path, path.Err)
	}
	return err
}
