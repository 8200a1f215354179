package match

import (
	"math"
	"slices"
)

// triangle brings the rows × cols matrix a (row-major) to upper triangular form by
// Householder reflections. The last column is the right-hand side and is carried
// along. Rows beyond cols hold what is left over.
func triangle(a []float64, rows, cols int) {
	work := make([]float64, cols)
	for j := 0; j < cols-1 && j < rows-1; j++ {
		norm := 0.0
		for i := j; i < rows; i++ {
			x := a[i*cols+j]
			norm += x * x
		}
		norm = math.Sqrt(norm)
		if norm == 0 {
			continue
		}
		x0 := a[j*cols+j]
		alpha := -math.Copysign(norm, x0)
		v0 := x0 - alpha
		beta := 1 / (norm * (norm + math.Abs(x0))) // 2/(vᵀv)
		a[j*cols+j] = v0
		// w = vᵀA for the columns to the right, row by row, then A −= β v w.
		ws := work[:cols-j-1]
		for c := range ws {
			ws[c] = 0
		}
		for i := j; i < rows; i++ {
			v := a[i*cols+j]
			if v == 0 {
				continue
			}
			row := a[i*cols+j+1 : (i+1)*cols]
			for c, x := range row {
				ws[c] += v * x
			}
		}
		for i := j; i < rows; i++ {
			v := beta * a[i*cols+j]
			if v == 0 {
				continue
			}
			row := a[i*cols+j+1 : (i+1)*cols]
			for c := range row {
				row[c] -= v * ws[c]
			}
		}
		a[j*cols+j] = alpha
		for i := j + 1; i < rows; i++ {
			a[i*cols+j] = 0
		}
	}
}

// back solves the upper triangular n × n system in the first n columns of a (rows
// of length cols) for the right-hand side b, in place. Where a pivot vanishes the
// unknown is 0.
func back(a []float64, cols, n int, b []float64) {
	most := 0.0
	for i := range n {
		most = math.Max(most, math.Abs(a[i*cols+i]))
	}
	for i := n - 1; i >= 0; i-- {
		sum := b[i]
		for j := i + 1; j < n; j++ {
			sum -= a[i*cols+j] * b[j]
		}
		if p := a[i*cols+i]; math.Abs(p) > 1e-14*most {
			b[i] = sum / p
		} else {
			b[i] = 0
		}
	}
}

// link is what elimination keeps of one segment: n rows [R | next | p | rhs] for
// its state's deviation, given that of the next segment and the parameters.
type link struct {
	rows []float64
	n    int
}

// system is the linear least squares of one Gauss–Newton step.
type system struct {
	np    int
	links [][]link  // by clip and segment
	top   []float64 // np rows of [R | rhs] for the parameters
	plain []float64 // the same without bounds
	scale []float64 // column lengths of the parameters, for damping
	jac   [][]block // by clip and segment, kept when asked for
	step  []float64 // of the parameters
	moves [][][]float64
}

// block is a segment's own rows: its observations' derivatives and residuals.
type block struct {
	rows, n int
	js, jp  []float64
	r       []float64
}

// solveChain finds the step of the parameters and of all states that least squares
// gives, damped by lambda.
func (f *fitter) solveChain(p []float64, lambda float64, keep bool) *system {
	np := len(f.params)
	s := &system{np: np, links: make([][]link, len(f.clips)), scale: make([]float64, np), moves: make([][][]float64, len(f.clips))}
	if keep {
		s.jac = make([][]block, len(f.clips))
	}
	blocks := make([][]block, len(f.clips))
	for c := range f.clips {
		k := &f.clips[c]
		rows := f.rower(c, p)
		blocks[c] = make([]block, len(k.segments))
		for i := range k.segments {
			blocks[c][i] = rows.block(&k.segments[i])
		}
		if keep {
			s.jac[c] = blocks[c]
		}
	}
	var top []float64 // rows of [p | rhs]
	for c := range f.clips {
		k := &f.clips[c]
		n := 2 * k.model.Freedoms()
		wide := 2*n + np + 1
		own := k.model.OwnTurns()
		var carry []float64 // rows of [s | p | rhs]
		s.links[c] = make([]link, len(k.segments))
		for i := range k.segments {
			g := &k.segments[i]
			b := &blocks[c][i]
			bound := i+1 < len(k.segments) && !g.broken && !math.IsInf(f.bind, 1)
			var a []float64
			row := func() []float64 {
				a = append(a, make([]float64, wide)...)
				return a[len(a)-wide:]
			}
			if bound { // the heavy rows first, for the sake of accuracy
				gap := make([]float64, n)
				k.model.Deviation(k.segments[i+1].y, g.end, gap)
				for v := range n {
					w := 1 / f.bind
					if v >= n/2 {
						w /= f.omega()
					}
					x := row()
					for u := range n {
						x[u] = -w * g.dend[u][v]
					}
					x[n+v] = w
					for j := range np {
						x[2*n+j] = -w * f.endBy(c, j, g, v)
					}
					x[wide-1] = w * gap[v]
				}
			}
			for r := 0; r < len(carry); r += n + np + 1 {
				x := row()
				copy(x, carry[r:r+n])
				copy(x[2*n:], carry[r+n:r+n+np+1])
			}
			size := make([]float64, n)
			for r := range b.rows {
				x := row()
				copy(x, b.js[r*n:(r+1)*n])
				copy(x[2*n:], b.jp[r*np:(r+1)*np])
				x[wide-1] = b.r[r]
				for v := range n {
					size[v] += x[v] * x[v]
				}
			}
			damp := lambda // in one motion the first state leads all others
			if i > 0 && !k.segments[i-1].broken && f.oneMotion {
				damp = 0
			}
			for v := range n {
				x := row()
				x[v] = damp*math.Sqrt(size[v]) + 1e-9*math.Sqrt(size[0]+1)
			}
			if math.IsInf(f.bind, 1) { // nothing tells a turn about the own axis yet
				for _, v := range own {
					row()[v] = 1e3 * math.Sqrt(size[0]+1)
					row()[n/2+v] = 1e3 * math.Sqrt(size[0]+1)
				}
			}
			if i == 0 || k.segments[i-1].broken { // how far it is turned at first is free
				for _, v := range own {
					row()[v] = 1e-2 * math.Sqrt(size[0]+1)
				}
			}
			rows := len(a) / wide
			triangle(a, rows, wide)
			s.links[c][i] = link{append([]float64(nil), a[:n*wide]...), n}
			if bound {
				left := min(rows-n, n+np)
				carry = carry[:0]
				for r := n; r < n+left; r++ {
					carry = append(carry, a[r*wide+n:(r+1)*wide]...)
				}
				continue
			}
			carry = carry[:0]
			for r := n; r < min(rows, wide-1); r++ { // no next state takes part
				top = append(top, a[r*wide+2*n:(r+1)*wide]...)
			}
			if len(top) > 4*(np+1)*(np+1) {
				top = shrink(top, np)
			}
		}
	}
	// Damping is by what all stretches together feel of a parameter.
	top = shrink(top, np)
	for j := range np {
		s.scale[j] = 0
		for i := range j + 1 {
			s.scale[j] += top[i*(np+1)+j] * top[i*(np+1)+j]
		}
	}
	for j := range f.params {
		q := &f.params[j]
		x := make([]float64, np+1)
		switch {
		case q.held:
			for r := j; r < len(top); r += np + 1 {
				top[r] = 0
			}
			x[j] = 1
		case q.prior:
			x[j], x[np] = 1/q.u, (q.mean-p[j])/q.u
			s.scale[j] += 1 / (q.u * q.u)
		}
		top = append(top, x...)
		if !q.held {
			x := make([]float64, np+1)
			x[j] = lambda*math.Sqrt(s.scale[j]) + 1e-10*(math.Sqrt(s.scale[j])+1e-10)
			top = append(top, x...)
		}
	}
	s.plain = shrink(slices.Clone(top), np)
	// A step that would leave a parameter's bounds is sought anew with that
	// parameter set down on the bound.
	rows := slices.Clone(s.plain)
	pinned := make([]bool, np)
	for {
		s.top = shrink(slices.Clone(rows), np)
		s.step = make([]float64, np)
		for j := range np {
			s.step[j] = s.top[j*(np+1)+np]
		}
		back(s.top, np+1, np, s.step)
		again := false
		for j := range f.params {
			q := &f.params[j]
			if q.held {
				s.step[j] = 0
				continue
			}
			d := q.inside(p[j], s.step[j])
			if d == s.step[j] || pinned[j] {
				continue
			}
			for r := 0; r < len(rows); r += np + 1 {
				rows[r+np] -= rows[r+j] * d
				rows[r+j] = 0
			}
			x := make([]float64, np+1)
			x[j] = math.Sqrt(s.scale[j]) + 1e-10
			x[np] = x[j] * d
			rows, pinned[j], again = append(rows, x...), true, true
		}
		if !again {
			break
		}
	}
	for c := range f.clips {
		s.moves[c] = s.states(c, s.step, true)
	}
	return s
}

// shrink reduces rows of [p | rhs] to np of them.
func shrink(a []float64, np int) []float64 {
	w := np + 1
	rows := len(a) / w
	if rows < np {
		a = append(a, make([]float64, (np-rows)*w)...)
		rows = np
	}
	triangle(a, rows, w)
	return a[:np*w]
}

// states finds the moves of a clip's states that go with a move of the
// parameters; with rhs those of the step, else only their response.
func (s *system) states(c int, dp []float64, rhs bool) [][]float64 {
	out := make([][]float64, len(s.links[c]))
	var next []float64
	for i := len(s.links[c]) - 1; i >= 0; i-- {
		l := &s.links[c][i]
		n := l.n
		wide := 2*n + s.np + 1
		b := make([]float64, n)
		for r := range n {
			row := l.rows[r*wide : (r+1)*wide]
			if rhs {
				b[r] = row[wide-1]
			}
			if next != nil {
				for v := range n {
					b[r] -= row[n+v] * next[v]
				}
			}
			for j, x := range dp {
				b[r] -= row[2*n+j] * x
			}
		}
		back(l.rows, wide, n, b)
		out[i], next = b, b
	}
	return out
}

// endBy is the derivative of component v of a segment's end by parameter j.
func (f *fitter) endBy(c, j int, g *segment, v int) float64 {
	q := &f.params[j]
	switch {
	case q.held:
		return 0
	case q.role == byModel:
		if len(q.targets[c]) == 0 {
			return 0
		}
		return g.dend[2*f.clips[c].model.Freedoms()+j][v]
	case q.role == byClock && f.concerns(j, c):
		return g.slope[v] * (g.t1 - g.t0)
	}
	return 0
}
