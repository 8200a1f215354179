package chaos

import (
	"cmp"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
)

// follower follows near states in time and sums the logarithms of their distance.
type follower struct {
	v      recurrence.Vectors
	opt    DivergenceOptions
	flow   bool
	band   int
	tree   *tree
	sorted [][]logOf // after k samples, one per pair, in order
	pairs  int
}

func newFollower(v recurrence.Vectors, opt DivergenceOptions) *follower {
	f := &follower{v: v, opt: opt, flow: opt.Period >= 2, band: max(1, int(math.Ceil(opt.Period)))}
	f.tree = newTree(v, v.N-1)
	return f
}

// follow starts from at most refs states, evenly spread, and follows them over
// reach samples.
func (f *follower) follow(refs, reach int) {
	f.pairs = 0
	f.sorted = make([][]logOf, reach+1)
	last := f.v.N - reach - 1 // the last state that can be followed so far
	margin := 0
	if f.flow {
		margin = int(f.opt.Period/4) + 1
	}
	last -= margin
	if last <= margin {
		return
	}
	stride := max(1, (last-margin)/refs)
	for i := margin; i <= last; i += stride {
		q := f.v.State(i)
		if !whole(q) {
			continue
		}
		j := f.neighbour(q, i, last, margin)
		if j < 0 {
			continue
		}
		f.pairs++
		lag := 0
		b := uint8((i - margin) * blocks / (last - margin + 1))
		for k := range f.sorted {
			if r := f.distance(i+k, j+k, &lag, margin-1); r > 0 {
				f.sorted[k] = append(f.sorted[k], logOf{float32(math.Log(r)), b})
			}
		}
	}
	for _, all := range f.sorted {
		slices.SortFunc(all, func(a, b logOf) int { return cmp.Compare(a.log, b.log) })
	}
}

// logOf is the logarithm of a pair's distance, and the pair's block.
type logOf struct {
	log   float32
	block uint8
}

// neighbour is the state to follow beside state i: of a flow, the one of the ten
// nearest whose path passes nearest. −1 when there is none.
func (f *follower) neighbour(q []float64, i, last, margin int) int {
	few := 1
	if f.flow {
		few = 10
	}
	best, least := -1, math.Inf(1)
	for _, n := range f.tree.some(q, few, i, f.band) {
		lag := 0
		d := f.distance(i, n.i, &lag, margin-1)
		if j := n.i + lag; d > 0 && d < least && j >= margin && j <= last && abs(j-i) >= f.band {
			best, least = j, d
		}
	}
	return best
}

func abs(x int) int {
	if x < 0 {
		return -x
	}
	return x
}

// distance is that between states a and b; of a flow, from state a to the path
// near state b + lag, after lag has moved by at most one sample towards the
// nearest state, within ± most.
func (f *follower) distance(a, b int, lag *int, most int) float64 {
	q := f.v.State(a)
	if !f.flow {
		return math.Sqrt(square(q, f.v.State(b)))
	}
	at := func(l int) float64 {
		j := b + l
		if l > most || l < -most || j < 1 || j > f.v.N-2 {
			return math.Inf(1)
		}
		return square(q, f.v.State(j))
	}
	here, later, earlier := at(*lag), at(*lag+1), at(*lag-1)
	switch {
	case later < here && later <= earlier:
		*lag++
	case earlier < here:
		*lag--
	}
	j := b + *lag
	if j < 1 || j > f.v.N-2 {
		return math.NaN()
	}
	return f.toPath(q, j)
}

// toPath is the distance from q to the parabola through states j−1, j, j+1,
// within half a sample or a little more of j.
func (f *follower) toPath(q []float64, j int) float64 {
	p0, p1, p2 := f.v.State(j-1), f.v.State(j), f.v.State(j+1)
	// p(u) = p1 + s·u + c·u², u in samples; Newton on |p(u) − q|².
	u := 0.0
	for range 3 {
		var g, h float64
		for k, x := range p1 {
			s, c := (p2[k]-p0[k])/2, (p2[k]+p0[k])/2-x
			e := x + u*(s+c*u) - q[k]
			t := s + 2*c*u
			g += e * t
			h += t*t + 2*e*c
		}
		if !(h > 0) {
			break
		}
		u = min(max(u-g/h, -0.75), 0.75)
	}
	r := 0.0
	for k, x := range p1 {
		s, c := (p2[k]-p0[k])/2, (p2[k]+p0[k])/2-x
		e := x + u*(s+c*u) - q[k]
		r += e * e
	}
	return math.Sqrt(r)
}

// curve is the middle logarithm of the distance over the spread, with block skip
// left out: the mean without the lowest and the highest quarter. It goes with the many
// pairs that still part steadily; the plain mean would go with the few that are
// already far from each other.
func (f *follower) curve(skip int, spread float64) []float64 {
	out := make([]float64, len(f.sorted))
	for k, all := range f.sorted {
		n := len(all)
		if skip >= 0 {
			for _, l := range all {
				if int(l.block) == skip {
					n--
				}
			}
		}
		lo, hi := n/4, n-n/4
		at, sum := 0, 0.0
		for _, l := range all {
			if int(l.block) == skip {
				continue
			}
			if at >= lo && at < hi {
				sum += float64(l.log)
			}
			at++
		}
		out[k] = sum/float64(hi-lo) - math.Log(spread)
	}
	return out
}

// enough is how far it is worth to follow: twice as far as the distances take to
// come to nine tenths of their growth, and four periods more.
func (f *follower) enough(spread float64) int {
	c := smoothOver(f.curve(-1, spread), f.opt.Period)
	tail := slices.Clone(c[len(c)/2:])
	slices.Sort(tail)
	top := tail[len(tail)/2]
	for k, x := range c {
		if x > top-0.1*(top-c[0]) {
			return min(len(c)-1, 2*k+int(4*f.opt.Period)+8)
		}
	}
	return len(c) - 1
}
