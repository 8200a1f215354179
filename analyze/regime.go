package analyze

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/match"
	"lodeswing/analyze/series"
)

// regime says in one line how the whole toy behaves: its parts' motion together.
func regime(ctx context.Context, w *work) error {
	if len(w.angles) == 0 {
		return nil
	}
	m, err := w.wholeMotion()
	if err != nil {
		return err
	}
	filmed, err := match.Filmed(w.rig, w.clip)
	if err != nil {
		return err
	}
	m.Never, m.Undriven = chaos.Never(filmed), len(filmed.Parts) > 0 && len(filmed.Coils) == 0
	beat := w.rec.Find("modes.beat.period", "")
	if beat != nil {
		m.BeatS = chaos.Value{V: beat.Value, U: beat.U}
	}
	r, err := chaos.Assess(ctx, m.Motion)
	if err != nil {
		return err
	}
	subject := w.onlyPart()
	for _, f := range r.Findings(subject) {
		if beat != nil && f.Key == "regime.beat_period" {
			continue // the modes have told it
		}
		w.rec.Findings = append(w.rec.Findings, f)
	}
	w.rec.Curves = append(w.rec.Curves, r.Curves(subject)...)
	w.regime, w.whole = r, m
	return nil
}

// wholeMotion is the motion of all measured parts together.
type wholeMotion struct {
	chaos.Motion
	Parts []int // the part of each column, as an index of w.angles
}

// wholeMotion gathers what is known of all parts at the moments of the one that was
// measured most often. An angle stands for itself, or, where its part goes all the
// way round, for its sine and cosine; a ball joint stands for its bob's place in the
// picture over its distance from the pivot. All is in radians, or as good as.
func (w *work) wholeMotion() (*wholeMotion, error) {
	most := 0
	for i := range w.angles {
		if len(w.angles[i].T) > len(w.angles[most].T) {
			most = i
		}
	}
	m := &wholeMotion{}
	m.T = w.angles[most].T
	add := func(part int, t, y []float64, u float64) {
		m.Columns = append(m.Columns, chaos.Resample(t, y, m.T))
		m.Parts = append(m.Parts, part)
		m.U = math.Max(m.U, u)
	}
	for i := range w.angles {
		a := &w.angles[i]
		u := middle(a.UAngle)
		switch {
		case a.Joint == "ball":
			x, z, ux, err := w.places(a)
			if err != nil {
				return nil, err
			}
			add(i, a.T, x, ux)
			add(i, a.T, z, ux)
		case goesRound(a):
			sin, cos := sinCos(a.Angle)
			add(i, a.T, sin, u)
			add(i, a.T, cos, u)
		default:
			add(i, a.T, a.Angle, u)
		}
	}
	return m, nil
}

// goesRound tells whether a part goes all the way round, so that its angle grows
// and grows.
func goesRound(a *series.Angle) bool { return slices.Max(a.Angle)-slices.Min(a.Angle) > 2*math.Pi }

func sinCos(angle []float64) (sin, cos []float64) {
	sin, cos = make([]float64, len(angle)), make([]float64, len(angle))
	for k, q := range angle {
		sin[k], cos[k] = math.Sincos(q)
	}
	return sin, cos
}

// places are where a ball joint's bob was in the plane of motion when its angle
// was measured, over its distance from the pivot, with the middle sample's
// uncertainty.
func (w *work) places(a *series.Angle) (x, z []float64, u float64, err error) {
	if w.track == nil || !(a.Pivot.R > 0) {
		return nil, nil, 0, fmt.Errorf("“%s” swings freely on a ball joint, and one angle does not tell how it moves; analyse its track", a.Part)
	}
	for i := range w.track.Bobs {
		b := &w.track.Bobs[i]
		if b.Name != a.Bob {
			continue
		}
		var t, bx, bz, us []float64
		for _, s := range b.Usable() {
			ux, uz := s.Plane.Sigmas()
			t, bx, bz, us = append(t, s.T), append(bx, s.X/a.Pivot.R), append(bz, s.Z/a.Pivot.R), append(us, math.Max(ux, uz)/a.Pivot.R)
		}
		if len(t) == 0 {
			break
		}
		return chaos.Resample(t, bx, a.T), chaos.Resample(t, bz, a.T), middle(us), nil
	}
	return nil, nil, 0, errors.New("the bob that gave the angle is not in the track")
}

// middle is the median.
func middle(x []float64) float64 {
	y := slices.Clone(x)
	slices.Sort(y)
	return y[len(y)/2]
}
