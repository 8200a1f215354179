package ode

import "sort"

// Path keeps the dense output of many steps, so that the state at any time can
// be had later. Jumps (a kick) are kept: at the instant of a jump it holds the
// state after it.
type Path struct {
	n    int
	from []float64 // each piece's start
	to   []float64 // and its end
	coef []float64 // 8n per piece
}

// NewPath returns an empty path for n components.
func NewPath(n int) *Path { return &Path{n: n} }

// Add appends the solver's last step. Steps must be added in their order.
func (p *Path) Add(s *Solver) {
	if !s.haveStep || s.tOld == s.t {
		return
	}
	s.prepareDense()
	p.from = append(p.from, s.tOld)
	p.to = append(p.to, s.t)
	p.coef = append(p.coef, s.coef...)
}

// Len is the number of pieces.
func (p *Path) Len() int { return len(p.from) }

// Span returns the first and last time that the path covers.
func (p *Path) Span() (t0, t1 float64) {
	if len(p.from) == 0 {
		return 0, 0
	}
	return p.from[0], p.to[len(p.to)-1]
}

// At writes the state at time t to dst (length n). Outside of the span the
// nearest end stands.
func (p *Path) At(t float64, dst []float64) {
	if len(p.from) == 0 {
		return
	}
	forward := p.to[0] > p.from[0]
	i := sort.Search(len(p.from), func(i int) bool {
		if forward {
			return p.from[i] > t
		}
		return p.from[i] < t
	}) - 1
	if i < 0 {
		i = 0
	}
	u := (t - p.from[i]) / (p.to[i] - p.from[i])
	if u < 0 {
		u = 0
	} else if u > 1 {
		u = 1
	}
	evalDense(p.coef[8*p.n*i:8*p.n*(i+1)], u, dst[:p.n])
}
