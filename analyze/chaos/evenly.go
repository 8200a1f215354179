package chaos

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// evenly is the longest stretch of a motion without a gap, at even steps.
type evenly struct {
	from, step float64
	n          int
	columns    [][]float64
	main       int // the column that moves most
}

// even takes the longest stretch in which no step is longer than four usual ones
// and no sample is missing, and reads it at even steps by cubics through four
// samples.
func even(m Motion) (*evenly, error) {
	if len(m.Columns) == 0 || len(m.T) < 8 {
		return nil, fmt.Errorf("chaos: %d columns of %d samples are nothing to judge a motion by", len(m.Columns), len(m.T))
	}
	for _, c := range m.Columns {
		if len(c) != len(m.T) {
			return nil, fmt.Errorf("chaos: a column has %d values for %d times", len(c), len(m.T))
		}
	}
	steps := make([]float64, 0, len(m.T)-1)
	for i := 1; i < len(m.T); i++ {
		if !(m.T[i] > m.T[i-1]) {
			return nil, fmt.Errorf("chaos: times must increase, but sample %d has %g s after %g s", i, m.T[i], m.T[i-1])
		}
		steps = append(steps, m.T[i]-m.T[i-1])
	}
	usual := median(steps)
	bestFrom, bestTo, from := 0, -1, 0
	last := -1
	for i := range m.T {
		missing := slices.ContainsFunc(m.Columns, func(c []float64) bool { return math.IsNaN(c[i]) })
		if missing {
			continue
		}
		if last < 0 || m.T[i]-m.T[last] > 4*usual {
			from = i
		}
		last = i
		if i-from > bestTo-bestFrom {
			bestFrom, bestTo = from, i
		}
	}
	var t []float64
	cols := make([][]float64, len(m.Columns))
	for i := bestFrom; i <= bestTo; i++ {
		if slices.ContainsFunc(m.Columns, func(c []float64) bool { return math.IsNaN(c[i]) }) {
			continue
		}
		t = append(t, m.T[i])
		for k, c := range m.Columns {
			cols[k] = append(cols[k], c[i])
		}
	}
	if len(t) < 8 {
		return nil, errors.New("chaos: nowhere are there eight samples without a gap")
	}
	e := &evenly{from: t[0], step: usual, n: int((t[len(t)-1]-t[0])/usual) + 1, columns: make([][]float64, len(cols))}
	at := 0
	for i := range e.n {
		x := e.from + usual*float64(i)
		for at+1 < len(t)-1 && t[at+1] <= x {
			at++
		}
		lo := min(max(at-1, 0), len(t)-4)
		for k, c := range cols {
			e.columns[k] = append(e.columns[k], through(t[lo:lo+4], c[lo:lo+4], x))
		}
	}
	widest := -1.0
	for k, c := range e.columns {
		if _, sd := meanSD(c); sd > widest {
			e.main, widest = k, sd
		}
	}
	return e, nil
}

func (e *evenly) times() []float64 {
	t := make([]float64, e.n)
	for i := range t {
		t[i] = e.from + e.step*float64(i)
	}
	return t
}

// size is the standard deviation of the column that moves most.
func (e *evenly) size() float64 {
	_, sd := meanSD(e.columns[e.main])
	return sd
}

// moving cuts off what lies still at the start and at the end: stretches of a
// thirtieth of the clip in which all columns together move less than a
// twenty-fifth of what they do at most. It returns when the motion comes to rest,
// if a tenth of the clip or more is left then; else 0.
func (e *evenly) moving(u float64) (restsS float64) {
	w := max(8, e.n/30)
	var act []float64
	for i := 0; i+w <= e.n; i += w {
		ss := 0.0
		for _, c := range e.columns {
			_, sd := meanSD(c[i : i+w])
			ss += sd * sd
		}
		act = append(act, math.Sqrt(ss))
	}
	if len(act) < 4 {
		return 0
	}
	still := max(0.04*slices.Max(act), 4*u*math.Sqrt(float64(len(e.columns))))
	from, to := 0, len(act)-1
	for from < to && act[from] < still {
		from++
	}
	for to > from && act[to] < still {
		to--
	}
	end := e.n
	if to < len(act)-1 {
		end = (to + 1) * w
		if e.n-end >= e.n/10 {
			restsS = e.from + e.step*float64(end)
		}
	}
	for k := range e.columns {
		e.columns[k] = e.columns[k][from*w : end]
	}
	e.from += e.step * float64(from*w)
	e.n = end - from*w
	widest := -1.0
	for k, c := range e.columns {
		if _, sd := meanSD(c); sd > widest {
			e.main, widest = k, sd
		}
	}
	return restsS
}

// repeats looks for the time, from half a period to twenty or a third of the clip,
// after which all columns come again most nearly, and how nearly: the root mean
// square difference over that of unrelated moments, noise of u taken out.
func (e *evenly) repeats(periodS, u float64) (after, mismatch float64) {
	p := periodS / e.step
	lo, hi := max(1, int(p/2)), min(int(20*p)+1, e.n/3)
	stride := max(1, e.n/4000)
	total := 0.0
	for _, c := range e.columns {
		_, sd := meanSD(c)
		total += 2 * sd * sd
	}
	noise := 2 * u * u * float64(len(e.columns))
	mismatch = 1
	step := max(1, int(p/60))
	for lag := lo; lag <= hi; lag += step {
		ss, n := 0.0, 0.0
		for i := 0; i+lag < e.n; i += stride {
			for _, c := range e.columns {
				d := c[i+lag] - c[i]
				ss += d * d
			}
			n++
		}
		if m := math.Sqrt(max(0, ss/n-noise) / total); m < mismatch {
			after, mismatch = float64(lag)*e.step, m
		}
	}
	return after, mismatch
}

// pace is the change of the logarithm of all columns' speed together from start
// to end, by a straight line through stretches of two periods or more, with its
// standard uncertainty from the scatter about it. A part that goes round and slows
// shows it here, not in its amplitude.
func (e *evenly) pace(periodS float64) (change, u float64) {
	p := periodS / e.step
	lag := max(1, min(int(p/8), e.n/60))
	w := max((e.n-lag)/12, min(int(2*p), (e.n-lag)/8))
	var x, y []float64
	for i := 0; i+w+lag <= e.n; i += w {
		ss := 0.0
		for _, c := range e.columns {
			for k := i; k < i+w; k++ {
				ss += sq(c[k+lag] - c[k])
			}
		}
		if ss > 0 {
			x, y = append(x, float64(i)/float64(e.n)), append(y, 0.5*math.Log(ss))
		}
	}
	n := len(x)
	if n < 5 {
		return 0, math.Inf(1)
	}
	slope, level := line(x, y, 0, n-1)
	var ss, xx float64
	mx, _ := meanSD(x)
	for i := range x {
		ss += sq(y[i] - level - slope*x[i])
		xx += sq(x[i] - mx)
	}
	return slope, math.Sqrt(ss / float64(n-2) / xx)
}

// turning returns a column's distance from mean at its turning points, one between
// each two crossings of mean, and when.
func (e *evenly) turning(column int, mean float64) (amp, at []float64) {
	x := e.columns[column]
	top, where, side := 0.0, 0, 0.0
	crossed := false
	for i, v := range x {
		d := v - mean
		if d*side < 0 {
			if crossed {
				amp, at = append(amp, top), append(at, e.from+e.step*float64(where))
			}
			crossed = true
			top = 0
		}
		if d != 0 {
			side = d
		}
		if a := math.Abs(d); a > top {
			top, where = a, i
			if i > 0 && i+1 < len(x) { // the top of the parabola through three samples
				b, c := (x[i+1]-x[i-1])/2, (x[i+1]+x[i-1])/2-v
				if c != 0 && math.Abs(b) < 2*math.Abs(c) {
					top = math.Abs(d - b*b/(4*c))
				}
			}
		}
	}
	return amp, at
}

// course fits a straight line to the logarithm of the amplitude: its change from
// first to last, and the amplitude's scatter about it. Both sides of a swing
// about an uncertain middle are evened out first.
func course(at, amp []float64) (change, scatter float64) {
	var x, y []float64
	for i := 0; i+1 < len(amp); i++ {
		if a := (amp[i] + amp[i+1]) / 2; a > 0 {
			x, y = append(x, at[i]), append(y, math.Log(a))
		}
	}
	if len(x) < 4 {
		return 0, 0
	}
	slope, level := line(x, y, 0, len(x)-1)
	// A parabola's share is course too, not scatter: most decays are not exponential.
	mid, h := (x[0]+x[len(x)-1])/2, (x[len(x)-1]-x[0])/2
	var num, den float64
	for i := range x {
		p := sq((x[i]-mid)/h) - 1./3
		num += p * (y[i] - level - slope*x[i])
		den += p * p
	}
	ss := 0.0
	for i := range x {
		ss += sq(y[i] - level - slope*x[i] - num/den*(sq((x[i]-mid)/h)-1./3))
	}
	return slope * 2 * h, math.Sqrt(ss / float64(len(x)))
}

func sq(x float64) float64 { return x * x }

// jumps is how far each value lies from the course of its neighbours (the middle
// of the two before and after on the same side, by the cubic through four); it
// leaves out four at either end.
func jumps(x []float64) []float64 {
	var d []float64
	for i := 4; i+4 < len(x); i++ {
		told := (4*(x[i-2]+x[i+2]) - x[i-4] - x[i+4]) / 6
		d = append(d, math.Abs(x[i]-told))
	}
	return d
}

// median changes the order of x.
func median(x []float64) float64 {
	slices.Sort(x)
	n := len(x)
	return (x[(n-1)/2] + x[n/2]) / 2
}
