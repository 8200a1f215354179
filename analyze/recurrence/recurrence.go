// Package recurrence tells when a motion comes back to where it was. What comes
// in: states of a motion at even steps of time, as vectors (measured together or
// embedded by delays). What goes out: the measures of recurrence quantification
// with standard uncertainties, the recurrence plot as a picture of bounded size,
// and their course in sliding windows. Times are in s (samples × step), rates in
// 1/s, distances in the vectors' own unit; shares and entropies are plain
// numbers, entropies in nats.
//
// Measures are those of N. Marwan, M. C. Romano, M. Thiel and J. Kurths,
// "Recurrence plots for the analysis of complex systems", Physics Reports 438
// (2007) 237. Of an N×N plot no more than a few rows are held at a time, as
// bits; all distances are compared, none is sampled.
package recurrence

import (
	"errors"
	"fmt"
	"math"
	"runtime"
)

// Norm is how far two states are from each other.
type Norm int

// The norms.
const (
	Maximum   Norm = iota // greatest difference of a component
	Euclidean             // root of the sum of squares
	Manhattan             // sum of the differences
)

// Options says what counts as a recurrence. One of Threshold and Rate is needed.
type Options struct {
	Norm Norm
	// Threshold is the greatest distance of two states that are the same.
	Threshold float64
	// Rate is the share of all pairs that shall be recurrences; the threshold is
	// then found from half a million pairs (all, of 1,000 states or fewer), which
	// meets a rate of 5 % to 0.6 % of it.
	Rate float64
	// Theiler leaves out pairs nearer in time than this many samples (J. Theiler,
	// Physical Review A 34 (1986) 2427). 0: 1, only a state with itself. Not used
	// for cross recurrence.
	Theiler int
	// LMin and VMin are the least lengths, in samples, of a diagonal and a
	// vertical line. 0: 2.
	LMin, VMin int
	// Map is the greatest number of cells along a side of the picture; 0: none.
	Map int
	// Workers is the number of goroutines. 0: as many as there are processors.
	Workers int
}

// Plot is a recurrence plot's quantification.
type Plot struct {
	Kind      string // "auto", "cross" or "joint"
	N, M      int    // rows and columns: states of the first and of the second series
	Step      float64
	Threshold []float64 // of each series
	Points    int64     // recurrences in the whole plot, the excluded band not counted
	Measures  Measures
	// Lag is the recurrence rate at each lag (samples): the chance to be back after
	// that time. Nil for cross recurrence.
	Lag []float64
	Map *Map // nil unless asked for
	opt Options
}

// Value is a number with its standard uncertainty.
type Value struct{ V, U float64 }

// Measures are the numbers of a recurrence plot. A mean of lines that do not
// exist is NaN.
type Measures struct {
	RR       Value // recurrence rate: share of pairs
	DET      Value // determinism: share of recurrences on diagonal lines of LMin or more
	L        Value // s, mean length of those lines: how long two passages stay alike
	LMax     Value // s, the longest of them
	DIV      Value // 1/s, divergence: 1/LMax
	ENTR     Value // nats, entropy of their lengths
	LAM      Value // laminarity: share of recurrences on vertical lines of VMin or more
	TT       Value // s, trapping time: mean length of those lines
	VMax     Value // s, the longest of them
	T1       Value // s, recurrence time of the first type: from one recurrence to the next
	T2       Value // s, of the second type: from entering a neighbourhood to entering it again
	Diagonal int64 // number of diagonal lines of LMin or more
	Vertical int64 // number of vertical lines of VMin or more
}

// Auto is the recurrence plot of one series.
func Auto(v Vectors, opt Options) (*Plot, error) {
	return joint("auto", []Vectors{v}, opt)
}

// Joint is where all series recur at once; they must have the same number of
// states and the same step. A Rate holds for each series by itself.
func Joint(opt Options, series ...Vectors) (*Plot, error) {
	if len(series) < 2 {
		return nil, errors.New("recurrence: joint recurrence needs two series or more")
	}
	return joint("joint", series, opt)
}

func joint(kind string, series []Vectors, opt Options) (*Plot, error) {
	if err := opt.fill(); err != nil {
		return nil, err
	}
	n := series[0].N
	e := &engine{n: n, m: n, opt: opt, band: opt.Theiler}
	p := &Plot{Kind: kind, N: n, M: n, Step: series[0].Step, opt: opt}
	for i, v := range series {
		if err := v.check(); err != nil {
			return nil, fmt.Errorf("%w (series %d)", err, i+1)
		}
		if v.N != n || math.Abs(v.Step-p.Step) > 1e-9*p.Step {
			return nil, fmt.Errorf("recurrence: series %d has %d states each %g s, the first has %d each %g s; joint recurrence needs the same times", i+1, v.N, v.Step, n, p.Step)
		}
		eps, err := threshold(v, v, opt, e.band)
		if err != nil {
			return nil, err
		}
		p.Threshold = append(p.Threshold, eps)
		e.planes = append(e.planes, newPlane(v, v, eps, opt.Norm))
	}
	if n <= opt.Theiler {
		return nil, fmt.Errorf("recurrence: %d states are fewer than the excluded band of %d samples", n, opt.Theiler)
	}
	e.run(p)
	return p, nil
}

// Cross is where the states of b (columns) come near those of a (rows). Both
// must have the same dimension and step. A vertical line is one state of b that
// a stays near to. No band is left out.
func Cross(a, b Vectors, opt Options) (*Plot, error) {
	if err := opt.fill(); err != nil {
		return nil, err
	}
	for i, v := range []Vectors{a, b} {
		if err := v.check(); err != nil {
			return nil, fmt.Errorf("%w (series %d)", err, i+1)
		}
	}
	if a.Dim != b.Dim || math.Abs(a.Step-b.Step) > 1e-9*a.Step {
		return nil, fmt.Errorf("recurrence: states of dimension %d each %g s and of dimension %d each %g s cannot be compared", a.Dim, a.Step, b.Dim, b.Step)
	}
	eps, err := threshold(a, b, opt, -1)
	if err != nil {
		return nil, err
	}
	p := &Plot{Kind: "cross", N: a.N, M: b.N, Step: a.Step, Threshold: []float64{eps}, opt: opt}
	e := &engine{n: a.N, m: b.N, opt: opt, band: -1, planes: []*plane{newPlane(a, b, eps, opt.Norm)}}
	e.run(p)
	return p, nil
}

// fill checks the options and sets the defaults.
func (o *Options) fill() error {
	switch {
	case o.Norm < Maximum || o.Norm > Manhattan:
		return fmt.Errorf("recurrence: there is no norm %d", o.Norm)
	case (o.Threshold > 0) == (o.Rate > 0):
		return fmt.Errorf("recurrence: give either a threshold or a rate (they are %g and %g)", o.Threshold, o.Rate)
	case o.Rate >= 1 || math.IsNaN(o.Rate) || math.IsInf(o.Threshold, 0):
		return fmt.Errorf("recurrence: the rate must be below 1 and the threshold finite (they are %g and %g)", o.Rate, o.Threshold)
	case o.Theiler < 0 || o.LMin < 0 || o.VMin < 0 || o.Map < 0:
		return errors.New("recurrence: the excluded band, least lengths and the picture's size must not be negative")
	}
	if o.Theiler == 0 {
		o.Theiler = 1
	}
	if o.LMin == 0 {
		o.LMin = 2
	}
	if o.VMin == 0 {
		o.VMin = 2
	}
	if o.Workers <= 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	return nil
}
