package analyze

import (
	"context"
	"errors"
	"fmt"

	"lodeswing/analyze/match"
	"lodeswing/analyze/record"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// matching fits the model of the toy where the rig leaves numbers to that.
func matching(ctx context.Context, w *work) error {
	if !match.Asks(w.rig) {
		return nil
	}
	return fitInto(ctx, w.rec, []match.Clip{{Track: w.track, Angles: w.angles, Entry: w.clip}}, w.rig, match.Options{})
}

func fitInto(ctx context.Context, rec *record.Record, clips []match.Clip, r *rig.Rig, opt match.Options) error {
	res, err := match.Run(ctx, clips, r, opt)
	if err != nil {
		return err
	}
	rec.Findings = append(rec.Findings, res.Findings...)
	rec.Fits = append(rec.Fits, res.Fits...)
	rec.Curves = append(rec.Curves, res.Curves...)
	rec.Cautions = append(rec.Cautions, res.Cautions...)
	if res.Fitted != nil {
		rec.FittedRig = string(res.Fitted.Marshal())
	}
	return nil
}

// Input is one clip of several that FitClips matches together: a track, or angle
// tables.
type Input struct {
	Name   string // for people, and to find the rig's [[clip]] entry by its file
	File   string
	Track  *track.Track
	Tables []record.Angles
}

// FitClips matches the rig's toy to one or several clips of one unit together. The
// record holds the first clip's track and what the matching found.
func FitClips(ctx context.Context, inputs []Input, r *rig.Rig, opt Options, say match.Options) (*record.Record, error) {
	if len(inputs) == 0 {
		return nil, errors.New("there is no clip to match")
	}
	if r == nil || len(r.Parts) == 0 {
		return nil, errors.New("the matching needs a rig with the toy's parts; give it with --rig")
	}
	rec := &record.Record{Run: opt.Run, Track: inputs[0].Track, Still: opt.Still, Safety: safety(r)}
	if rec.Run.Rig.Name == "" {
		rec.Run.Rig.Name = r.Name
	}
	var clips []match.Clip
	for i := range inputs {
		in := &inputs[i]
		c := match.Clip{Name: in.Name, Track: in.Track, Entry: clipOf(r, in.File)}
		if in.Track == nil {
			var err error
			if c.Angles, err = fromTables(in.Tables); err != nil && len(c.Angles) == 0 {
				return nil, err
			}
			for _, t := range in.Tables {
				if i == 0 {
					rec.Angles = append(rec.Angles, t)
				}
			}
		} else if i == 0 {
			rec.Cautions = append(rec.Cautions, in.Track.Cautions...)
			if all, err := series.FromTrack(in.Track, r); err == nil {
				for _, a := range all {
					if a.Problem == "" {
						rec.Angles = append(rec.Angles, record.Angles{Part: a.Part, T: a.T, Angle: a.Angle, U: a.UAngle, Rate: a.Rate, URate: a.URate})
					}
				}
			}
		}
		clips = append(clips, c)
	}
	if len(inputs) > 1 {
		for i := range clips {
			if clips[i].Entry == nil && len(r.Clips) > 0 {
				rec.Cautions = append(rec.Cautions, fmt.Sprintf("The rig has no [[clip]] entry for %s: nothing was taken to differ in it.", inputs[i].Name))
			}
		}
	}
	if err := fitInto(ctx, rec, clips, r, say); err != nil {
		return nil, err
	}
	rec.Cautions = distinct(rec.Cautions)
	rec.Headline = fitHeadline(rec)
	return rec, nil
}

// fitHeadline sums the matching up.
func fitHeadline(rec *record.Record) string {
	for _, key := range []string{"match.moment", "match.product"} {
		for i := range rec.Findings {
			f := &rec.Findings[i]
			if f.Key == key && f.Kind == "" {
				return fmt.Sprintf("%s of %s: %s.", f.Name, f.Subject, inWords(f))
			}
		}
	}
	n := 0
	for i := range rec.Findings {
		if rec.Findings[i].Kind == "" {
			n++
		}
	}
	return fmt.Sprintf("The model was matched; %d numbers were found.", n)
}
