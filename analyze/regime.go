package analyze

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/chaos"
)

// leastRegular is the share of a motion that its spectral lines must explain for it
// to be called regular in the report.
const leastRegular = 0.9

// regime says in one line how the whole toy behaves: its parts' angles together,
// at the moments at which any was measured.
func regime(ctx context.Context, w *work) error {
	if len(w.angles) == 0 {
		return nil
	}
	var times []float64
	for i := range w.angles {
		a := &w.angles[i]
		if w.joint(a.Part) == "ball" {
			return fmt.Errorf("“%s” swings freely on a ball joint, and one angle does not tell how it moves", a.Part)
		}
		if slices.Max(a.Angle)-slices.Min(a.Angle) > 2*math.Pi {
			return fmt.Errorf("“%s” goes all the way round, and the tests for regular and irregular motion are not sure of such motion", a.Part)
		}
		times = append(times, a.T...)
	}
	slices.Sort(times)
	times = slices.Compact(times)
	filmed := *w.rig
	if w.clip != nil && !w.clip.Battery {
		filmed.Coils = nil
	}
	m := chaos.Motion{T: times, Never: chaos.Never(&filmed)}
	beat := w.rec.Find("modes.beat.period", "")
	if beat != nil {
		m.BeatS = chaos.Value{V: beat.Value, U: beat.U}
	}
	for i := range w.angles {
		a := &w.angles[i]
		column, at := make([]float64, len(times)), 0
		for k, t := range times {
			column[k] = math.NaN()
			if at < len(a.T) && a.T[at] == t {
				column[k] = a.Angle[at]
				at++
			}
		}
		m.Columns = append(m.Columns, column)
		u := slices.Clone(a.UAngle)
		slices.Sort(u)
		m.U = math.Max(m.U, u[len(u)/2])
	}
	r, err := chaos.Assess(ctx, m)
	if err != nil {
		return err
	}
	switch r.Kind {
	case chaos.Decaying, chaos.Steady, chaos.Growing, chaos.Beating, chaos.QuasiPeriodic:
		if r.Explained < leastRegular || r.PeriodS > (times[len(times)-1]-times[0])/4 {
			return fmt.Errorf("its turning points look regular, but its strongest frequencies explain only %.0f %% of it or are too slow for the clip; film longer, or look at the figures", 100*r.Explained)
		}
	}
	subject := ""
	if len(w.angles) == 1 {
		subject = w.angles[0].Part
	}
	for _, f := range r.Findings(subject) {
		if beat != nil && f.Key == "regime.beat_period" {
			continue // the modes have told it
		}
		w.rec.Findings = append(w.rec.Findings, f)
	}
	w.rec.Curves = append(w.rec.Curves, r.Curves(subject)...)
	return nil
}

// joint is the kind of a part's joint by the rig; empty when the rig has no such part.
func (w *work) joint(part string) string {
	for i := range w.rig.Parts {
		if w.rig.Parts[i].Name == part {
			return w.rig.Parts[i].Joint
		}
	}
	return ""
}
