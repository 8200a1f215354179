package recurrence

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// Vectors are N states of dimension Dim at even steps of time, row-major: state
// i is X[i·Dim : (i+1)·Dim], at Start + i·Step in s. A state that holds a NaN
// is missing: it keeps its place in time and recurs with nothing.
type Vectors struct {
	N, Dim      int
	X           []float64
	Step, Start float64
}

// State returns state i; it is a view.
func (v Vectors) State(i int) []float64 { return v.X[i*v.Dim : (i+1)*v.Dim] }

func (v Vectors) check() error {
	switch {
	case v.N < 3 || v.Dim < 1 || len(v.X) != v.N*v.Dim:
		return fmt.Errorf("recurrence: %d numbers do not make %d states (3 or more) of dimension %d", len(v.X), v.N, v.Dim)
	case v.N > 1<<24:
		return fmt.Errorf("recurrence: %d states are too many; thin them out", v.N)
	case !(v.Step > 0):
		return fmt.Errorf("recurrence: the step between states is %g s; it must be positive", v.Step)
	}
	for i, x := range v.X {
		if math.IsInf(x, 0) {
			return fmt.Errorf("recurrence: component %d of state %d is infinite", i%v.Dim, i/v.Dim)
		}
	}
	return nil
}

// Embed makes states of series of equal length, taken at the same even times:
// dim values of each, delay samples apart (F. Takens, Lecture Notes in
// Mathematics 898 (1981) 366). State i holds the values from i on, so there are
// n − (dim−1)·delay states; the first is at start.
func Embed(start, step float64, dim, delay int, series ...[]float64) (Vectors, error) {
	if len(series) == 0 || dim < 1 || delay < 1 && dim > 1 {
		return Vectors{}, fmt.Errorf("recurrence: %d series cannot be embedded in %d values %d samples apart", len(series), dim, delay)
	}
	n := len(series[0]) - (dim-1)*delay
	if n < 3 {
		return Vectors{}, fmt.Errorf("recurrence: %d samples are too few for %d values %d samples apart", len(series[0]), dim, delay)
	}
	v := Vectors{N: n, Dim: dim * len(series), Step: step, Start: start, X: make([]float64, 0, n*dim*len(series))}
	for i, s := range series {
		if len(s) != len(series[0]) {
			return Vectors{}, fmt.Errorf("recurrence: series %d has %d samples, the first has %d", i+1, len(s), len(series[0]))
		}
	}
	for i := range n {
		for _, s := range series {
			for k := range dim {
				v.X = append(v.X, s[i+k*delay])
			}
		}
	}
	return v, v.check()
}

// Distance is the distance of two states of the same length.
func (n Norm) Distance(a, b []float64) float64 {
	d := 0.0
	switch n {
	case Euclidean:
		for i, x := range a {
			d += (x - b[i]) * (x - b[i])
		}
		return math.Sqrt(d)
	case Manhattan:
		for i, x := range a {
			d += math.Abs(x - b[i])
		}
		return d
	}
	for i, x := range a {
		d = max(d, math.Abs(x-b[i])) // NaN stays NaN
	}
	return d
}

// threshold is the given one, or the distance that makes the asked share of the
// pairs outside the band recurrences.
func threshold(a, b Vectors, opt Options, band int) (float64, error) {
	if opt.Threshold > 0 {
		return opt.Threshold, nil
	}
	const most = 1 << 19
	var d []float64
	take := func(i, j int) {
		if x := opt.Norm.Distance(a.State(i), b.State(j)); !math.IsNaN(x) {
			d = append(d, x)
		}
	}
	switch {
	case band >= 0 && a.N*(a.N-1)/2 <= most:
		for i := range a.N {
			for j := i + band; j < b.N; j++ {
				take(i, j)
			}
		}
	case band < 0 && a.N*b.N <= most:
		for i := range a.N {
			for j := range b.N {
				take(i, j)
			}
		}
	default:
		rng := rand.New(rand.NewPCG(2, 3)) // the same pairs each time
		for range most {
			i, j := rng.IntN(a.N), rng.IntN(b.N)
			if band < 0 || i-j >= band || j-i >= band {
				take(i, j)
			}
		}
	}
	if len(d) < 2 {
		return 0, fmt.Errorf("recurrence: of %d and %d states no two can be compared: they are missing or lie within the excluded band", a.N, b.N)
	}
	eps := smallest(d, max(int(math.Round(opt.Rate*float64(len(d))))-1, 0))
	if eps == 0 {
		eps = math.Inf(1)
		for _, x := range d {
			if x > 0 {
				eps = min(eps, x)
			}
		}
		if math.IsInf(eps, 1) {
			return 0, fmt.Errorf("recurrence: all states are the same; nothing moves")
		}
	}
	return eps, nil
}

// smallest returns the value that would stand at k were d in order, and changes
// d's order (C. A. R. Hoare's "Find", Communications of the ACM 4 (1961) 321).
func smallest(d []float64, k int) float64 {
	lo, hi := 0, len(d)-1
	for lo < hi {
		pivot := d[k]
		i, j := lo, hi
		for i <= j {
			for d[i] < pivot {
				i++
			}
			for pivot < d[j] {
				j--
			}
			if i <= j {
				d[i], d[j] = d[j], d[i]
				i++
				j--
			}
		}
		if j < k {
			lo = i
		}
		if k < i {
			hi = j
		}
	}
	return d[k]
}
