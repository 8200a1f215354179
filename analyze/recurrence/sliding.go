package recurrence

import "fmt"

// Course is how the measures change along a series.
type Course struct {
	Time     []float64 // s, middle of each window
	Measures []Measures
	WindowS  float64
}

// Sliding computes the measures in windows of the given number of states, every
// step states. A Rate is met in each window by itself, so that a motion that dies
// is compared at its own size; a Threshold is the same for all.
func Sliding(v Vectors, window, step int, opt Options) (*Course, error) {
	if err := v.check(); err != nil {
		return nil, err
	}
	if window < 16 || window > v.N || step < 1 {
		return nil, fmt.Errorf("recurrence: a window of %d states every %d does not fit %d states (16 at least)", window, step, v.N)
	}
	opt.Map = 0
	c := &Course{WindowS: float64(window) * v.Step}
	for from := 0; from+window <= v.N; from += step {
		w := Vectors{N: window, Dim: v.Dim, Step: v.Step, Start: v.Start + float64(from)*v.Step, X: v.X[from*v.Dim : (from+window)*v.Dim]}
		p, err := Auto(w, opt)
		if err != nil {
			return nil, fmt.Errorf("in the window from %.4g s: %w", w.Start, err)
		}
		c.Time = append(c.Time, w.Start+v.Step*float64(window-1)/2)
		c.Measures = append(c.Measures, p.Measures)
	}
	return c, nil
}
