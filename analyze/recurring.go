package analyze

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/recurrence"
)

const (
	// mostStates is how many moments of a motion are compared with each other, unless
	// a turn would then have fewer than eight; that takes a few tenths of a second.
	mostStates = 8000
	// likePairs is the share of all pairs of moments that count as alike. (Common
	// practice, no source.)
	likePairs = 0.05
	plotSide  = 420 // cells along a side of the recurrence plot
	mostPairs = 3   // of parts that are compared
)

// recurring compares all moments of the clip with each other: the recurrence plot,
// its measures and their course, how the motion was embedded for it, what the toy
// does at each pass, and which parts come back together.
func recurring(ctx context.Context, w *work) error {
	if w.regime == nil || w.regime.Kind == chaos.AtRest {
		return nil
	}
	e, err := chaos.States(ctx, w.whole.Motion, mostStates)
	if err != nil {
		return err
	}
	subject := w.onlyPart()
	turn := max(1, int(math.Round(e.PeriodS/e.States.Step)))
	// Whatever swings passes any place quickly: alike are passages that stay so for an
	// eighth of a turn, and it lingers where it stays for a quarter of one.
	opt := recurrence.Options{Norm: recurrence.Euclidean, Rate: likePairs, Theiler: turn, LMin: max(2, turn/8), VMin: max(2, turn/4), Map: plotSide}
	p, err := recurrence.Auto(e.States, opt)
	if err != nil {
		return err
	}
	w.rec.Findings = append(w.rec.Findings, p.Findings(subject)...)
	w.rec.Curves = append(w.rec.Curves, p.Curves(subject)...)
	window := max(min(10*turn, e.States.N/3), e.States.N/8, 64)
	if c, err := recurrence.Sliding(e.States, window, max(1, window/6), opt); err == nil && len(c.Time) >= 4 { // a shorter clip has no course
		w.rec.Curves = append(w.rec.Curves, c.Curve(subject))
	}
	if c, ok := w.section(); ok {
		w.rec.Curves = append(w.rec.Curves, c)
	}
	if e.Delay != nil {
		w.rec.Curves = append(w.rec.Curves, e.Delay.Curve(subject, e.States.Step), e.Dimension.Curve(subject))
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	return w.inPairs(ctx, e, opt)
}

// inPairs tells of each two parts how often both come back at once.
func (w *work) inPairs(ctx context.Context, e *chaos.Embedded, opt recurrence.Options) error {
	type part struct {
		name   string
		states recurrence.Vectors
	}
	var parts []part
	for i := range w.angles {
		var own []int
		for k, p := range w.whole.Parts {
			if p == i {
				own = append(own, k)
			}
		}
		if v, ok := e.Of(own...); ok {
			parts = append(parts, part{w.angles[i].Part, v})
		}
	}
	drawn, told := false, 0
	for i := range parts {
		for j := i + 1; j < len(parts) && told < mostPairs; j++ {
			if err := ctx.Err(); err != nil {
				return err
			}
			a, b := &parts[i], &parts[j]
			both := opt
			both.Map = 0
			p, err := recurrence.Joint(both, a.states, b.states)
			if err != nil {
				return err
			}
			told++
			subject := a.name + " and " + b.name
			f := finding.Normal("recurrence.together", subject, "How often both come back at once",
				p.Measures.RR.V/likePairs, p.Measures.RR.U/likePairs, "1",
				fmt.Sprintf("joint recurrence: of the pairs of moments in which one is where it was, the share in which the other is as well; %.0f %% if they had nothing to do with each other, 100 %% if one told all of the other", 100*likePairs))
			f.Lo, f.Hi = math.Max(f.Lo, 0), math.Min(f.Hi, 1)
			w.rec.Findings = append(w.rec.Findings, f)
			if !drawn && a.states.Dim == b.states.Dim {
				cross, err := recurrence.Cross(a.states, b.states, opt)
				if err != nil {
					return err
				}
				for _, c := range cross.Curves(subject) {
					c.Key = "recurrence_cross"
					c.Caption = fmt.Sprintf("First: %s; second: %s. ", a.name, b.name) + c.Caption
					w.rec.Curves = append(w.rec.Curves, c)
				}
				drawn = true
			}
		}
	}
	return nil
}

// onlyPart is the part that all is about, where only one was measured.
func (w *work) onlyPart() string {
	if len(w.angles) == 1 {
		return w.angles[0].Part
	}
	return ""
}

// has tells whether a curve of that key is in the record.
func (w *work) has(key string) bool {
	return slices.ContainsFunc(w.rec.Curves, func(c finding.Curve) bool { return c.Key == key })
}
