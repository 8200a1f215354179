package analyze

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/match"
	"lodeswing/analyze/record"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// matchingTime is how long a measurement waits for the matching; `lodeswing fit`
// on the result takes as long as it needs.
const matchingTime = 45 * time.Second

// matching fits the model of the toy where the rig leaves numbers to that. A
// matching that does not settle, or not in time, says that and nothing else: the
// measurement does not wait for it and tells no number of it.
func matching(ctx context.Context, w *work) error {
	if !match.Asks(w.rig) {
		return nil
	}
	limited, stop := context.WithTimeout(ctx, matchingTime)
	defer stop()
	res, err := match.Run(limited, []match.Clip{{Track: w.track, Angles: w.angles, Entry: w.clip}}, w.rig, match.Options{})
	const how = "simulated model matched to the measured motion"
	switch {
	case ctx.Err() != nil:
		return ctx.Err()
	case limited.Err() != nil:
		w.undecided("match.fit", "", "Model matched to the motion",
			fmt.Sprintf("the matching was not done within %.0f s and was left out; lodeswing fit on this result takes the time that it needs", matchingTime.Seconds()), how)
		return nil
	case err != nil:
		return err
	case !res.Converged:
		why := "the search did not settle"
		if len(res.Fits) > 0 && res.Fits[0].Why != "" {
			why = "the search did not settle: " + res.Fits[0].Why
		}
		w.undecided("match.fit", "", "Model matched to the motion", why+"; a longer clip, or one that starts when the hand has let go, may help", how)
		return nil
	}
	intoRecord(w.rec, res)
	w.fitted = res.Fitted
	return nil
}

func fitInto(ctx context.Context, rec *record.Record, clips []match.Clip, r *rig.Rig, opt match.Options) error {
	res, err := match.Run(ctx, clips, r, opt)
	if err != nil {
		return err
	}
	intoRecord(rec, res)
	return nil
}

func intoRecord(rec *record.Record, res *match.Result) {
	rec.Findings = append(rec.Findings, res.Findings...)
	rec.Fits = append(rec.Fits, res.Fits...)
	rec.Curves = append(rec.Curves, res.Curves...)
	rec.Cautions = append(rec.Cautions, res.Cautions...)
	if res.Fitted != nil {
		rec.FittedRig = string(res.Fitted.Marshal())
	}
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

// fitHeadline sums the matching up: whether the model fits, and the numbers that it is
// mostly made for.
func fitHeadline(rec *record.Record) string {
	if len(rec.Fits) > 0 && !rec.Fits[0].Converged {
		return "The model was matched to the motion, but the search did not settle, so no number is told."
	}
	if f := rec.Find("match.cause", ""); f != nil {
		return f.Text
	}
	out := magnetWords(rec)
	for i := range rec.Findings {
		f := &rec.Findings[i]
		if words, ok := map[string]string{"match.kick": "Each pass over “%s” is kicked with %s.", "match.spring_rate": "The spring rate of %s is %s."}[f.Key]; ok && f.Kind == finding.Measured {
			out = append(out, fmt.Sprintf(words, f.Subject, inWords(f)))
		}
	}
	if len(out) > 0 {
		return strings.Join(out, " ")
	}
	n := 0
	for i := range rec.Findings {
		if rec.Findings[i].Kind == finding.Measured {
			n++
		}
	}
	if n == 0 {
		return "The model was matched to the motion, but the clip determines none of the numbers asked for; the findings say why, and what would."
	}
	return fmt.Sprintf("The model was matched to the motion; the findings hold the %d numbers that came out of it.", n)
}
