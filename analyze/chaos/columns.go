package chaos

import (
	"cmp"
	"context"
	"math"
	"slices"

	"lodeswing/analyze/spectrum"
)

// busy lists the columns that move at least the share moves of what the main one
// does, the most moving first, four at most.
func (e *evenly) busy() []int {
	size := make([]float64, len(e.columns))
	order := make([]int, len(e.columns))
	for k, c := range e.columns {
		_, size[k] = meanSD(c)
		order[k] = k
	}
	slices.SortFunc(order, func(a, b int) int { return cmp.Compare(size[b], size[a]) })
	n := 0
	for n < len(order) && n < 4 && size[order[n]] >= moves*size[order[0]] && size[order[n]] > 0 {
		n++
	}
	return order[:n]
}

// choose makes that column the main one whose strongest sinusoid is the strongest of
// all, or of those that have nearly as much power the slowest: of two that move alike,
// one may do so at twice the frequency.
func (e *evenly) choose(ctx context.Context) error {
	busy := e.busy()
	if len(busy) < 2 {
		return nil
	}
	power, period := make([]float64, len(e.columns)), make([]float64, len(e.columns))
	best := 0.0
	for _, k := range busy {
		if err := ctx.Err(); err != nil {
			return err
		}
		s, explains, err := e.lines(k, 1)
		if err != nil || len(s.Lines) == 0 {
			continue
		}
		if period[k] = 1 / s.Lines[0].Frequency; period[k] > e.longest() {
			continue // a drift, not a swing
		}
		_, sd := meanSD(e.columns[k])
		power[k] = sd * sd * explains
		if power[k] > best {
			best, e.main = power[k], k
		}
	}
	for _, k := range busy {
		if power[k] > 0.3*best && period[k] > 1.2*period[e.main] {
			e.main = k
		}
	}
	return nil
}

// longest is the longest period, in s, that can be told.
func (e *evenly) longest() float64 { return e.step * float64(e.n) / 4 }

// mostLooked is how many samples a column's lines are looked for in, at most.
const mostLooked = 3000

// lines fits up to most sinusoids to a column, thinned to some twelve samples a turn;
// of a motion so long that this is not enough, to its middle. explains is the share of
// what it looked at that the sinusoids explain.
func (e *evenly) lines(column, most int) (s *spectrum.Spectrum, explains float64, err error) {
	all := e.columns[column]
	turn := e.turn(column)
	thin := max(1, int(turn/12))
	if e.n/thin > mostLooked {
		thin = max(thin, min(e.n/mostLooked, int(turn/6)))
	}
	from, to := 0, e.n
	if spare := e.n - mostLooked*thin; spare > 0 {
		from, to = spare/2, e.n-spare/2
	}
	var t, x []float64
	for i := from; i < to; i += thin {
		t, x = append(t, e.from+e.step*float64(i)), append(x, all[i])
	}
	s, err = spectrum.Compute(t, x, nil, spectrum.Options{MaxLines: most, Spare: -1, MinFreq: 4 / (e.step * float64(to-from))})
	if err != nil {
		return nil, 0, err
	}
	if _, sd := meanSD(x); sd > 0 {
		explains = 1 - s.Noise*s.Noise/(sd*sd)
	}
	return s, explains, nil
}

// turn is twice the usual time between crossings of a column's middle, in samples.
func (e *evenly) turn(column int) float64 {
	x := e.columns[column]
	mean, _ := meanSD(x)
	var gaps []float64
	last, side := 0, 0.0
	for i, v := range x {
		if (v-mean)*side < 0 {
			gaps = append(gaps, float64(i-last))
			last = i
		}
		if v != mean {
			side = v - mean
		}
	}
	if len(gaps) < 4 {
		return 1
	}
	return 2 * median(gaps)
}

// intoStep looks for the moment from which on a motion that darted about is regular
// and does not die, for three tenths of the time and twelve periods or more: all
// columns then come again (every is after how long) or are explained by their lines.
func (e *evenly) intoStep(periodS, u float64) (from, every float64, ok bool) {
	for _, part := range []int{3, 5, 6, 7} {
		cut := e.n * part / 10
		rest := e.after(cut)
		if rest.step*float64(rest.n) < 12*periodS {
			return 0, 0, false
		}
		busy := rest.busy()
		if len(busy) == 0 {
			return 0, 0, false
		}
		rest.main = busy[0]
		if rest.size() < e.size()/20 {
			return 0, 0, false // it rests
		}
		if pace, _ := rest.pace(periodS); math.Abs(pace) > 2*decayed {
			continue
		}
		// A little less is asked than of a steady motion: it may still be settling.
		if after, mismatch := rest.repeats(periodS, u); mismatch < 2*repeated {
			return rest.from, after, true
		}
		regular := true
		for _, k := range busy {
			_, explains, err := rest.lines(k, few)
			regular = regular && err == nil && (explains > explained-0.01 || explains > regularLines && rest.unruly(k, u) < regularJump)
		}
		if regular {
			return rest.from, 0, true
		}
	}
	return 0, 0, false
}

// after is the motion without its first samples.
func (e *evenly) after(cut int) *evenly {
	rest := &evenly{from: e.from + e.step*float64(cut), step: e.step, n: e.n - cut, main: e.main}
	for _, c := range e.columns {
		rest.columns = append(rest.columns, c[cut:])
	}
	return rest
}

// unruly is how far a column's turning points and passes lie from the course of
// their neighbours, over its amplitude: three quarters of them lie nearer. In
// height, and in time as the angle of a turn, since a part that goes round shows its
// whims in time alone. Noise of u is taken out.
func (e *evenly) unruly(column int, u float64) float64 {
	x := e.columns[column]
	mean, _ := meanSD(x)
	amp, _ := e.turning(column, mean)
	typical := median(slices.Clone(amp))
	cut, err := Cut(e.times(), [][]float64{x}, 0, mean, Both)
	if err != nil || len(amp) < 12 || typical == 0 {
		return 0
	}
	gaps := make([]float64, 0, len(cut.T))
	for i := 1; i < len(cut.T); i++ {
		gaps = append(gaps, cut.T[i]-cut.T[i-1])
	}
	turn := math.Pi / median(gaps) // a pass to the next is half a turn
	high, late := jumps(amp), jumps(cut.T)
	all := make([]float64, min(len(high), len(late)))
	for i := range all {
		all[i] = math.Hypot(high[i]/typical, turn*late[i])
	}
	if len(all) < 4 {
		return 0
	}
	slices.Sort(all)
	noise := 3 * u / typical
	return math.Sqrt(max(0, sq(all[len(all)*3/4])-noise*noise))
}
