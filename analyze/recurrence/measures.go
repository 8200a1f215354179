package recurrence

import "math"

// finish turns the counts into measures.
func (e *engine) finish(p *Plot, f *follower, workers []*rowTally) {
	p.Map = e.picture(workers)
	sides := int64(1)
	if e.band >= 0 {
		sides = 2
		p.Lag = make([]float64, e.n)
		pairs := e.pairsByLag()
		for d := range p.Lag {
			p.Lag[d] = math.NaN()
			if pairs[d] > 0 {
				p.Lag[d] = float64(f.lag[d]) / float64(pairs[d])
			}
		}
	}
	for _, c := range f.points {
		p.Points += sides * c
	}
	pairs := e.pairs()
	j := jackknife{e: e, f: f, pairs: pairs, lmin: e.opt.LMin, vmin: e.opt.VMin, step: p.Step}
	p.Measures = j.measures()
	for l := p.opt.LMin; l < len(f.diag.all); l++ {
		p.Measures.Diagonal += sides * f.diag.all[l]
	}
	for l := p.opt.VMin; l < len(f.vert.all); l++ {
		p.Measures.Vertical += f.vert.all[l]
	}
}

// present tells which rows and columns have a state in every plane.
func (e *engine) present() (rows, cols []bool) {
	rows, cols = make([]bool, e.n), make([]bool, e.m)
	for i := range rows {
		rows[i] = true
		for _, p := range e.planes {
			rows[i] = rows[i] && p.okRow[i]
		}
	}
	for j := range cols {
		cols[j] = true
		for _, p := range e.planes {
			cols[j] = cols[j] && p.valid[j]
		}
	}
	return rows, cols
}

// pairs counts the pairs that are compared, by stretch of rows and of columns.
func (e *engine) pairs() []int64 {
	rows, cols := e.present()
	out := make([]int64, e.segs*e.segs)
	after := make([]int64, e.segs) // columns from first(i) on, by stretch
	for j, ok := range cols {
		if ok {
			after[e.segCol[j]]++
		}
	}
	next := 0
	for i, ok := range rows {
		for ; next < min(e.first(i), e.m); next++ {
			if cols[next] {
				after[e.segCol[next]]--
			}
		}
		if !ok {
			continue
		}
		for s, c := range after {
			out[int(e.segRow[i])*e.segs+s] += c
		}
	}
	return out
}

// pairsByLag counts the pairs of states at each lag, missing ones left out.
func (e *engine) pairsByLag() []int64 {
	rows, _ := e.present()
	out := make([]int64, e.n)
	var gone []int
	for i, ok := range rows {
		if !ok {
			gone = append(gone, i)
		}
	}
	for d := e.band; d < e.n; d++ {
		out[d] = int64(e.n - d)
		// Pairs (i, i+d) with one state missing: each missing state spoils one pair to
		// either side, two missing states d apart share one.
		for _, i := range gone {
			if i+d < e.n {
				out[d]--
			}
			if i-d >= 0 && rows[i-d] {
				out[d]--
			}
		}
	}
	return out
}

// jackknife computes the measures from all lines and their scatter from leaving
// out one stretch of time after the other. A recurrence belongs to two stretches,
// its row's and its column's, and goes with either (the delete-a-group jackknife
// of a U-statistic: J. N. Arvesen, Annals of Mathematical Statistics 40 (1969)
// 2076).
type jackknife struct {
	e          *engine
	f          *follower
	pairs      []int64
	lmin, vmin int
	step       float64
	buf        [4][]int64
}

// numbers are the measures that are averages, in samples.
type numbers [8]float64

const (
	rr = iota
	det
	meanLine
	entropy
	lam
	trapping
	return1
	return2
)

func (j *jackknife) without(s int) numbers {
	f := j.f
	diag, vert := f.diag.without(s, j.buf[0]), f.vert.without(s, j.buf[1])
	gap, back := f.gap.without(s, j.buf[2]), f.back.without(s, j.buf[3])
	j.buf = [4][]int64{diag, vert, gap, back}
	d, v := sum(diag, j.lmin), sum(vert, j.vmin)
	var points, pairs int64
	for a := range j.e.segs {
		for b := range j.e.segs {
			if a != s && b != s {
				points += f.points[a*j.e.segs+b]
				pairs += j.pairs[a*j.e.segs+b]
			}
		}
	}
	g, r := sum(gap, 1), sum(back, 1)
	inside := v.points - v.lines // steps from point to point within vertical lines
	var out numbers
	out[rr] = float64(points) / float64(pairs)
	out[det] = share(d.long, d.points)
	out[meanLine] = d.long / d.longLines
	out[entropy] = d.entropy
	out[lam] = share(v.long, v.points)
	out[trapping] = v.long / v.longLines
	out[return1] = (g.points + inside) / (g.lines + inside)
	out[return2] = r.points / r.lines
	return out
}

func share(a, b float64) float64 {
	if b == 0 {
		return 0
	}
	return a / b
}

// lineSums are sums over a table of line lengths.
type lineSums struct{ points, lines, long, longLines, entropy float64 }

func sum(count []int64, least int) lineSums {
	var s lineSums
	for l, c := range count {
		if c == 0 {
			continue
		}
		n := float64(c)
		s.points += float64(l) * n
		s.lines += n
		if l >= least {
			s.long += float64(l) * n
			s.longLines += n
			s.entropy -= n * math.Log(n)
		}
	}
	if s.longLines > 0 {
		s.entropy = s.entropy/s.longLines + math.Log(s.longLines)
	}
	return s
}

func (j *jackknife) measures() Measures {
	all := j.without(-1)
	segs := j.e.segs
	var u numbers
	for q := range u {
		u[q] = math.NaN()
	}
	if segs >= 4 {
		var mean, square numbers
		for s := range segs {
			for q, v := range j.without(s) {
				mean[q] += v / float64(segs)
				square[q] += v * v / float64(segs)
			}
		}
		for q := range u {
			u[q] = math.Sqrt(max(0, square[q]-mean[q]*mean[q]) * float64(segs-1))
		}
	}
	v := func(q int, unit float64) Value { return Value{all[q] * unit, u[q] * unit} }
	m := Measures{
		RR: v(rr, 1), DET: v(det, 1), L: v(meanLine, j.step), ENTR: v(entropy, 1),
		LAM: v(lam, 1), TT: v(trapping, j.step), T1: v(return1, j.step), T2: v(return2, j.step),
	}
	m.LMax = longest(j.f.diag.all, j.step)
	m.VMax = longest(j.f.vert.all, j.step)
	m.DIV = Value{1 / m.LMax.V, m.LMax.U / (m.LMax.V * m.LMax.V)}
	if m.LMax.V == 0 {
		m.DIV = Value{math.NaN(), math.NaN()}
	}
	return m
}

// longest is the greatest length. Lengths of chaotic motion and of noise have an
// exponential tail, so the greatest scatters as Gumbel's law says: π/√6 times
// the tail's scale, which is the mean excess of the longest √n lines. That is
// rough: it was seen to be 0.8 to 1.7 times the true scatter.
func longest(count []int64, step float64) Value {
	total, top := int64(0), 0
	for l, c := range count {
		total += c
		if c > 0 {
			top = l
		}
	}
	if total == 0 {
		return Value{0, math.NaN()}
	}
	want := max(10, int64(math.Sqrt(float64(total))))
	seen, points, least := int64(0), int64(0), 0
	for l := top; l > 0 && seen < want; l-- {
		seen += count[l]
		points += int64(l) * count[l]
		least = l
	}
	excess := float64(points)/float64(seen) - float64(least) + 0.5
	return Value{float64(top) * step, excess * math.Pi / math.Sqrt(6) * step}
}
