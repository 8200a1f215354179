package chaos

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
)

// DivergenceOptions says how near states are chosen and followed.
type DivergenceOptions struct {
	// Period is the mean time of one turn (one orbit, one pass and back) in samples;
	// 1 for a map. Neighbours are at least one apart in time, and the distances'
	// ripple over it is smoothed away.
	Period float64
	// Reach is how far states are followed, in samples. 0: until the distances
	// saturate, 40 periods at most.
	Reach int
}

// Divergence is how near states part.
type Divergence struct {
	// Exponent is the largest Lyapunov exponent in 1/s. Its uncertainty holds the
	// scatter over stretches of the series, the choice of the straight stretch, and
	// 8 % for the method.
	Exponent Value
	// Found tells whether there is a straight stretch at all; Why says why not, or
	// what it is.
	Found bool
	Why   string
	// LogDistance is the middle logarithm of the distance (relative to the states' spread)
	// at the times After, in s; Smooth is the same without the ripple of one period.
	After, LogDistance, Smooth []float64
	From, To                   float64 // s, the straight stretch
	Level                      float64 // of the straight line at After = 0
	Plateau                    float64 // logarithm at which the distances saturate
	Pairs                      int     // states that have a near one
	Orbits                     float64 // periods in the series
}

// blocks is into how many stretches of time the states are divided to see how
// the curve scatters.
const blocks = 16

// Diverge measures how the distance of near states grows in v: each state and its
// nearest neighbour are followed (M. T. Rosenstein, J. J. Collins and C. J. De
// Luca, Physica D 65 (1993) 117). The states must
// cover the motion many times: from 100 periods on the exponent is good for 10 to
// 20 %. Of a flow (Period of two samples or more) the distance is that from a
// state to the other's path near the same time, not to the state at that time
// itself: a mere lag along the path neither grows exponentially nor hides what
// does.
func Diverge(v recurrence.Vectors, opt DivergenceOptions) (*Divergence, error) {
	if v.N < 200 || v.Dim < 1 || len(v.X) != v.N*v.Dim || !(v.Step > 0) || !(opt.Period >= 1) {
		return nil, fmt.Errorf("chaos: %d states of dimension %d each %g s with a period of %g samples: 200 states, a positive step and a period of 1 sample are the least", v.N, v.Dim, v.Step, opt.Period)
	}
	spread := spread(v)
	if spread == 0 {
		return nil, fmt.Errorf("chaos: all states are the same; nothing moves")
	}
	if opt.Reach <= 0 {
		opt.Reach = int(40 * opt.Period)
	}
	opt.Reach = min(opt.Reach, v.N/3)
	d := &Divergence{Orbits: float64(v.N) / opt.Period}
	f := newFollower(v, opt)
	f.follow(400, opt.Reach)
	if f.pairs < 30 {
		d.Why = fmt.Sprintf("only %d states have a near one to be followed; the series is too short or too scattered", f.pairs)
		return d, nil
	}
	f.follow(2000, f.enough(spread))
	d.Pairs = f.pairs
	d.LogDistance = f.curve(-1, spread)
	for k := range d.LogDistance {
		d.After = append(d.After, float64(k)*v.Step)
	}
	d.Smooth = smoothOver(d.LogDistance, opt.Period)
	s, ok := d.straight(opt.Period, v.Step)
	if !ok {
		return d, nil
	}
	slope, level := line(d.After, d.Smooth, s.from, s.to)
	if s.whole {
		slope = s.slope
		level = d.LogDistance[s.from] - slope*d.After[s.from]
	}
	d.Exponent.V, d.Level = slope, level
	d.From, d.To = d.After[s.from], d.After[s.to]
	// The scatter from leaving out one block after the other.
	var mean, square float64
	for b := range blocks {
		l, _ := line(d.After, smoothOver(f.curve(b, spread), opt.Period), s.from, s.to)
		mean += l / blocks
		square += l * l / blocks
	}
	scatter := math.Sqrt(max(0, square-mean*mean) * (blocks - 1))
	// Eight percent of it for the finite distances: over 10 to 12 stretches of 120
	// orbits of Lorenz's and Rössler's systems the mean error was −7 to +9 %.
	d.Exponent.U = math.Hypot(math.Hypot(scatter, s.doubt), 0.08*slope)
	d.Found = true
	if s.whole {
		d.Why = fmt.Sprintf("by the growth over one turn, by a factor of %.2g; there is no room for a longer stretch", math.Exp(slope*opt.Period*v.Step))
		return d, nil
	}
	d.Why = fmt.Sprintf("straight from %.3g s to %.3g s, over a growth of the distances by %.2g", d.From, d.To, math.Exp(slope*(d.To-d.From)))
	return d, nil
}

// spread is the root mean square distance of the states from their mean.
func spread(v recurrence.Vectors) float64 {
	ss := 0.0
	x := make([]float64, v.N)
	for k := range v.Dim {
		for i := range x {
			x[i] = v.X[i*v.Dim+k]
		}
		_, sd := meanSD(x)
		ss += sd * sd
	}
	return math.Sqrt(ss)
}

// smoothOver is the running mean over one period; at the ends, over as much of
// it as stands evenly to both sides.
func smoothOver(x []float64, period float64) []float64 {
	half := int(math.Round(period / 2))
	if period < 2 {
		return slices.Clone(x)
	}
	out := make([]float64, len(x))
	run := make([]float64, len(x)+1)
	for i, v := range x {
		run[i+1] = run[i] + v
	}
	for i := range x {
		h := min(half, i, len(x)-1-i)
		out[i] = (run[i+h+1] - run[i-h]) / float64(2*h+1)
	}
	return out
}

// line is the least-squares line of y over x[from … to].
func line(x, y []float64, from, to int) (slope, level float64) {
	n := float64(to - from + 1)
	var mx, my, xx, xy float64
	for i := from; i <= to; i++ {
		mx += x[i] / n
		my += y[i] / n
	}
	for i := from; i <= to; i++ {
		xx += (x[i] - mx) * (x[i] - mx)
		xy += (x[i] - mx) * (y[i] - my)
	}
	slope = xy / xx
	return slope, my - slope*mx
}

// stretch is a straight stretch, in samples, and how much its slope depends on
// where exactly it lies.
type stretch struct {
	from, to int
	doubt    float64
	whole    bool    // read over whole periods
	slope    float64 // then
}

// straight looks for the stretch of the smoothed curve that is straight. At first
// what was not measured makes the distances grow: neighbours that differ in a spin or
// a coil's state that nobody sees, and noise. So it begins a period and a half after
// the start where a growth by a factor of 2.2 is left from there to saturation, with a
// slope that changes by less than a half from end to end; else after half a period (in
// which distances turn into the direction that grows), with a slope that changes by
// less than a fifth (where there is none, two fifths). Among all such the one with
// the greatest growth is taken. A growth below e, or shorter than a period and a
// half, is no exponential growth.
func (d *Divergence) straight(period, step float64) (stretch, bool) {
	n := len(d.Smooth)
	tail := slices.Clone(d.Smooth[n*2/3:])
	slices.Sort(tail)
	d.Plateau = tail[len(tail)/2]
	first := int(math.Round(period / 2))
	if period < 2 {
		first = 0
	}
	start := d.Smooth[min(first, n-1)]
	least := max(int(math.Ceil(1.5*period)), 3)
	// below is the last place before the curve comes within a share of its growth
	// from a place to saturation, where that begins to bend it.
	below := func(from int, share float64) int {
		roof := d.Plateau - share*(d.Plateau-d.Smooth[min(from, n-1)])
		last := from
		for last < n-1 && d.Smooth[last] < roof {
			last++
		}
		return last
	}
	best, gain := stretch{}, 0.0
	if period >= 2 && least < n {
		best, gain = d.longest(least, below(least, 0.25), least, 0.5)
	}
	if gain >= lateGrowth {
		return d.doubted(best), true
	}
	last := below(first, 0.35)
	best, gain = d.longest(first, last, least, 0.2)
	if gain < 1 { // noise bends the lower end up
		best, gain = d.longest(first, last, least, 0.4)
	}
	if gain < 1 && period >= 2 {
		best, gain = d.overPeriods(period)
	}
	switch {
	case d.Plateau-start < 0.7:
		d.Why = fmt.Sprintf("near states do not part: after %.3g s their distance has grown by a factor of %.2g only", float64(n-1)*step, math.Exp(d.Plateau-start))
		return best, false
	case gain < 1:
		d.Why = "the distances of near states do not grow exponentially: the curve has no straight stretch of a period and a half and a factor of e"
		return best, false
	}
	if best.whole {
		return best, true
	}
	return d.doubted(best), true
}

// lateGrowth is the least growth, as a logarithm, of a stretch that begins after
// what was not measured has shown itself.
const lateGrowth = 0.8

// doubted is the stretch with half the difference of the slopes in its first and its
// last two thirds.
func (d *Divergence) doubted(s stretch) stretch {
	third := (s.to - s.from) / 3
	a, _ := line(d.After, d.Smooth, s.from, s.to-third)
	b, _ := line(d.After, d.Smooth, s.from+third, s.to)
	s.doubt = math.Abs(a-b) / 2
	return s
}

// overPeriods serves motion that is lost within a turn or two, where no straight
// stretch can be longer: the growth over one period from each of the first times
// (after a tenth of a period) that leads to a place still below saturation. The
// ripple of a turn drops out of it.
func (d *Divergence) overPeriods(period float64) (best stretch, gain float64) {
	p := int(math.Round(period))
	from := max(1, p/10)
	roof := d.Plateau - 0.25*(d.Plateau-d.LogDistance[0])
	lo, hi, sum, n := math.Inf(1), math.Inf(-1), 0.0, 0.0
	to := from
	for k := from; k <= p/4 && k+p < len(d.LogDistance) && d.LogDistance[k+p] < roof; k++ {
		g := d.LogDistance[k+p] - d.LogDistance[k]
		lo, hi = min(lo, g), max(hi, g)
		sum += g
		n++
		to = k + p
	}
	if n == 0 {
		return best, 0
	}
	t := d.After[p]
	return stretch{from: from, to: to, whole: true, slope: sum / n / t, doubt: math.Hypot((hi-lo)/2/t, 0.12*sum/n/t)}, sum / n
}

// longest is the stretch between first and last, of least samples or more, with
// the greatest growth among those whose slope changes by less than bent of
// itself.
func (d *Divergence) longest(first, last, least int, bent float64) (best stretch, gain float64) {
	grid := max(1, (last-first)/60)
	for from := first; from <= last-least; from += grid {
		for to := from + least; to <= last; to += grid {
			slope, bend := d.bend(from, to)
			if slope <= 0 || math.Abs(bend) > bent*slope {
				continue
			}
			if g := slope * (d.After[to] - d.After[from]); g > gain {
				gain, best = g, stretch{from: from, to: to}
			}
		}
	}
	return best, gain
}

// bend returns the slope of the smoothed curve over from … to and by how much it
// changes from end to end, of the parabola through it, in 1/s.
func (d *Divergence) bend(from, to int) (slope, change float64) {
	slope, level := line(d.After, d.Smooth, from, to)
	// The even quadratic part on a window of half width h: y ≈ … + c·(x² − h²/3),
	// with c from its projection.
	mid, h := (d.After[from]+d.After[to])/2, (d.After[to]-d.After[from])/2
	var num, den float64
	for i := from; i <= to; i++ {
		x := d.After[i] - mid
		p := x*x - h*h/3
		num += p * (d.Smooth[i] - level - slope*d.After[i])
		den += p * p
	}
	return slope, 4 * h * num / den
}
