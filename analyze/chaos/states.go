package chaos

import (
	"math"

	"lodeswing/analyze/recurrence"
	"lodeswing/analyze/spectrum"
)

// States turns a motion into states for a recurrence plot: the longest stretch
// without a gap, at even steps, each column by its value and its value an eighth of
// the strongest period later (so that rates count as well), in units of the
// column's standard deviation. At most are kept, by thinning. periodS is the
// strongest period in s: what lies nearer in time than that should be left out
// (Options.Theiler).
func States(m Motion, most int) (v recurrence.Vectors, periodS float64, err error) {
	e, err := even(m)
	if err != nil {
		return v, 0, err
	}
	s, err := spectrum.Compute(e.times(), e.columns[e.main], nil, spectrum.Options{MaxLines: 1, Spare: -1, FalseAlarm: 0.5})
	if err != nil {
		return v, 0, err
	}
	periodS = e.step * float64(e.n) / 8
	if len(s.Lines) > 0 {
		periodS = min(periodS, 1/s.Lines[0].Frequency)
	}
	thin := max(1, int(math.Ceil(float64(e.n)/float64(max(most, 100)))))
	delay := max(1, int(math.Round(periodS/8/e.step/float64(thin))))
	var columns [][]float64
	for _, c := range e.columns {
		_, sd := meanSD(c)
		if sd == 0 {
			continue
		}
		out := make([]float64, 0, len(c)/thin+1)
		for i := 0; i < len(c); i += thin {
			out = append(out, c[i]/sd)
		}
		columns = append(columns, out)
	}
	v, err = recurrence.Embed(e.from, e.step*float64(thin), 2, delay, columns...)
	return v, periodS, err
}
