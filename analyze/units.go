package analyze

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/analyze/recurrence"
)

// TwoUnits sets the motions of two units beside each other: how often the second
// does what the first does at some time, for how long at a stretch, and the cross
// recurrence plot. Both records need the angles of at least one part of the same
// name; each part counts in units of its swing in the first.
func TwoUnits(ctx context.Context, a, b *record.Record) ([]finding.Finding, *finding.Curve, error) {
	va, vb, turn, err := bothStates(ctx, a, b)
	if err != nil {
		return nil, nil, err
	}
	opt := recurrence.Options{Norm: recurrence.Euclidean, Rate: likePairs, Theiler: turn, LMin: max(2, turn/8), VMin: max(2, turn/4)}
	own, err := recurrence.Auto(va, opt)
	if err != nil {
		return nil, nil, err
	}
	// What counts as alike in the first counts as alike in both.
	opt.Rate, opt.Threshold, opt.Map = 0, own.Threshold[0], plotSide
	cross, err := recurrence.Cross(va, vb, opt)
	if err != nil {
		return nil, nil, err
	}
	m := cross.Measures
	const how = "cross recurrence (Marwan et al. 2007) at the threshold at which the twentieth part of the first unit's own moments are alike"
	share := finding.Normal("recurrence.units_alike", "", "Likeness of the motions", m.RR.V/own.Measures.RR.V, math.Hypot(m.RR.U, m.RR.V/own.Measures.RR.V*own.Measures.RR.U)/own.Measures.RR.V, "1",
		how+": how often the second is where the first is, over how often the first is where it is itself; 1 for two clips of one steady toy")
	share.Lo = math.Max(0, share.Lo)
	out := []finding.Finding{share}
	if m.LMax.V > 0 && !math.IsNaN(m.LMax.U) {
		long := finding.Normal("recurrence.units_together", "", "Longest time that both run through the same course", m.LMax.V, m.LMax.U, "s", how)
		long.Lo = math.Max(0, long.Lo)
		out = append(out, long)
	}
	for _, c := range cross.Curves("") {
		if c.Grid != nil {
			c.Key, c.Title = "recurrence_units", "Cross recurrence plot of two units"
			c.X.Label, c.Y.Label = "time in the second", "time in the first"
			c.Caption = "Dark where the second unit does what the first does. Long unbroken diagonals: both run through the same course; none: they move differently."
			return out, &c, nil
		}
	}
	return out, nil, nil
}

// bothStates are states of the parts that both records have, at the same step, and
// the strongest period in samples.
func bothStates(ctx context.Context, a, b *record.Record) (va, vb recurrence.Vectors, turn int, err error) {
	var ma, mb chaos.Motion
	var sizes []float64
	for i := range a.Angles {
		x := &a.Angles[i]
		k := slices.IndexFunc(b.Angles, func(o record.Angles) bool { return o.Part == x.Part })
		if k < 0 || len(x.T) < 64 || len(b.Angles[k].T) < 64 {
			continue
		}
		y := &b.Angles[k]
		if ma.T == nil {
			ma.T = x.T
			// The second at the step of the first.
			step := (x.T[len(x.T)-1] - x.T[0]) / float64(len(x.T)-1)
			for s := y.T[0]; s <= y.T[len(y.T)-1]; s += step {
				mb.T = append(mb.T, s)
			}
		}
		ya, yb := chaos.Resample(x.T, x.Angle, ma.T), chaos.Resample(y.T, y.Angle, mb.T)
		if round := func(z []float64) bool { return slices.Max(z)-slices.Min(z) > 2*math.Pi }; round(x.Angle) || round(y.Angle) {
			for _, f := range []func(float64) float64{math.Sin, math.Cos} {
				ma.Columns, mb.Columns = append(ma.Columns, each(ya, f)), append(mb.Columns, each(yb, f))
			}
			continue
		}
		ma.Columns, mb.Columns = append(ma.Columns, ya), append(mb.Columns, yb)
	}
	if len(ma.Columns) == 0 {
		return va, vb, 0, errors.New("the two results have no part of the same name whose angle both measured")
	}
	e, err := chaos.States(ctx, ma, len(ma.T)) // for its period
	if err != nil {
		return va, vb, 0, fmt.Errorf("the first result: %w", err)
	}
	step := (ma.T[len(ma.T)-1] - ma.T[0]) / float64(len(ma.T)-1)
	thin := max(1, len(ma.T)/mostStates, len(mb.T)/mostStates)
	turn = max(1, int(math.Round(e.PeriodS/step/float64(thin))))
	for _, c := range ma.Columns {
		_, sd := meanAndScatter(slices.DeleteFunc(slices.Clone(c), math.IsNaN))
		sizes = append(sizes, math.Max(sd, 1e-12))
	}
	embed := func(m *chaos.Motion) (recurrence.Vectors, error) {
		var columns [][]float64
		for k, c := range m.Columns {
			var x []float64
			for i := 0; i < len(c); i += thin {
				x = append(x, c[i]/sizes[k])
			}
			columns = append(columns, x)
		}
		return recurrence.Embed(0, step*float64(thin), 2, max(1, turn/8), columns...)
	}
	if va, err = embed(&ma); err != nil {
		return va, vb, 0, err
	}
	vb, err = embed(&mb)
	return va, vb, turn, err
}

func each(x []float64, f func(float64) float64) []float64 {
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = f(v)
	}
	return out
}
