package chaos

import (
	"context"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
)

// Embedded is a motion turned into states, for recurrence plots and sections.
type Embedded struct {
	States  recurrence.Vectors
	PeriodS float64 // s, of the strongest sinusoid; what lies nearer in time should be left out (Options.Theiler)
	// Delay and Dimension say how the column that moves most is embedded; nil where
	// it is too short or too regular for them.
	Delay     *Delay
	Dimension *Dimension
	Thinned   int   // of so many samples one was kept
	kept      []int // the motion's columns that move at all, in order
	each      int   // values of a column in a state
}

// Of are the states of some of the motion's columns alone; ok is false when none of
// them moves.
func (e *Embedded) Of(columns ...int) (v recurrence.Vectors, ok bool) {
	var take []int
	for i, k := range e.kept {
		if slices.Contains(columns, k) {
			for j := range e.each {
				take = append(take, i*e.each+j)
			}
		}
	}
	v = recurrence.Vectors{N: e.States.N, Dim: len(take), Step: e.States.Step, Start: e.States.Start}
	for i := range v.N {
		s := e.States.State(i)
		for _, k := range take {
			v.X = append(v.X, s[k])
		}
	}
	return v, len(take) > 0
}

// States turns a motion into states for a recurrence plot: the longest stretch
// without a gap, at even steps, each column in units of its standard deviation. Of
// several columns each gives its value and its value an eighth of the strongest
// period later (so that rates count as well), of one alone as many values as its
// false neighbours ask for, at the delay of its mutual information. At most so many
// states are kept, by thinning.
func States(ctx context.Context, m Motion, most int) (*Embedded, error) {
	e, err := even(m)
	if err != nil {
		return nil, err
	}
	if err := e.choose(ctx); err != nil {
		return nil, err
	}
	out := &Embedded{PeriodS: min(e.step*float64(e.n)/8, e.step*e.turn(e.main)), Thinned: max(1, int(math.Ceil(float64(e.n)/float64(max(most, 100)))))}
	if s, _, err := e.lines(e.main, 1); err == nil && len(s.Lines) > 0 {
		out.PeriodS = min(e.step*float64(e.n)/8, 1/s.Lines[0].Frequency)
	}
	// Never so thin that a turn has fewer than eight states.
	out.Thinned = max(1, min(out.Thinned, int(out.PeriodS/8/e.step)))
	out.each = 2
	thinned := &evenly{from: e.from, step: e.step * float64(out.Thinned)}
	for k, c := range e.columns {
		_, sd := meanSD(c)
		if sd == 0 {
			continue
		}
		out.kept = append(out.kept, k)
		if k == e.main {
			thinned.main = len(thinned.columns)
		}
		x := make([]float64, 0, len(c)/out.Thinned+1)
		for i := 0; i < len(c); i += out.Thinned {
			x = append(x, c[i]/sd)
		}
		thinned.n = len(x)
		thinned.columns = append(thinned.columns, x)
	}
	period := out.PeriodS / thinned.step
	if delay, dim, err := embedding(thinned.columns[thinned.main], thinned.step, period); err == nil {
		out.Delay, out.Dimension = delay, dim
	}
	if len(thinned.columns) > 1 || out.Dimension == nil {
		out.States, err = recurrence.Embed(thinned.from, thinned.step, 2, max(1, int(math.Round(period/8))), thinned.columns...)
	} else {
		out.each = min(max(2, out.Dimension.Dim), 5)
		out.States, err = recurrence.Embed(thinned.from, thinned.step, out.each, out.Delay.Samples, thinned.columns...)
	}
	return out, err
}
