package kick

import "math"

// law is a set of frictions: bit j is friction j of row.work.
type law uint8

const (
	viscous law = 1 << iota
	drag
	dry
)

func (w law) has(j int) bool { return w&(1<<j) != 0 }

func (w law) String() string {
	names := [...]string{"viscous", "air drag", "dry"}
	out := ""
	for j, n := range names {
		if w.has(j) {
			if out != "" {
				out += " + "
			}
			out += n
		}
	}
	return out
}

// extra is a way in which the kick may differ from pass to pass, as a factor of
// the mean kick that is zero in the middle.
type extra struct {
	name string
	of   func(r *row) float64
}

// solution is one fit of the ledger: net = share·(kick + extras) − frictions − lean.
type solution struct {
	law    law
	extras []extra
	size   int
	kicks  int // 1 when there is a kick to fit
	beta   []float64
	cov    []float64
	by     []float64 // inverse of the normal equations
	chi2   float64
	dof    int
	sigma  float64 // J, scatter of the kicks from pass to pass
	logL   float64
	x      []float64 // whitened
	design []float64
	chol   []float64 // diagonal of the rows' Cholesky factor
	off    []float64 // and what stands left of it
	resid  []float64
	varRes []float64 // of one row's net
}

// share is how many kicks a pass in a state had.
func (s State) share() float64 {
	switch s {
	case Kicked:
		return 1
	case Double:
		return 2
	}
	return 0
}

// place of parameter groups: kick, extras, frictions, leans.
func (s *solution) frictionAt(j int) int {
	at := s.kicks + len(s.extras)
	for k := 0; k < j; k++ {
		if s.law.has(k) {
			at++
		}
	}
	return at
}

func (l *ledger) columns(s *solution) {
	n := len(l.rows)
	s.kicks = 0
	for i := range l.rows {
		if l.rows[i].state.share() > 0 {
			s.kicks = 1
		}
	}
	if s.kicks == 0 {
		s.extras = nil
	}
	f := 0
	for j := range 3 {
		if s.law.has(j) {
			f++
		}
	}
	s.size = s.kicks + len(s.extras) + f + len(l.clips)
	s.design = make([]float64, n*s.size)
	for i := range l.rows {
		r := &l.rows[i]
		d := s.design[i*s.size : (i+1)*s.size]
		h := r.state.share() * r.gain
		if s.kicks == 1 {
			d[0] = h
			for k, e := range s.extras {
				d[1+k] = h * e.of(r)
			}
		}
		at := s.kicks + len(s.extras)
		for j := range 3 {
			if s.law.has(j) {
				d[at] = -r.work[j]
				at++
			}
		}
		d[at+r.clip] = r.lean
	}
}

// whiten applies the inverse of the rows' Cholesky factor to v in place.
func (s *solution) whiten(v []float64) {
	for i := range v {
		if i > 0 {
			v[i] -= s.off[i] * v[i-1]
		}
		v[i] /= s.chol[i]
	}
}

// fit solves for the frictions of a law. sigma is the scatter of the kicks; below
// zero, the likeliest is looked for.
func (l *ledger) fit(w law, extras []extra, sigma float64) (*solution, bool) {
	if sigma >= 0 {
		return l.fitAt(w, extras, sigma)
	}
	best, ok := l.fitAt(w, extras, 0)
	if !ok {
		return nil, false
	}
	scale := 0.0
	for _, r := range best.resid {
		scale += r * r
	}
	scale = math.Sqrt(scale / float64(len(best.resid)))
	at := func(x float64) *solution {
		s, ok := l.fitAt(w, extras, scale*math.Exp(x))
		if !ok {
			return nil
		}
		return s
	}
	lo, hi := -6.0, 1.5
	const golden = 0.6180339887498949
	a, b := hi-golden*(hi-lo), lo+golden*(hi-lo)
	fa, fb := at(a), at(b)
	for range 12 {
		if fa == nil || fb == nil {
			break
		}
		if fa.logL > fb.logL {
			hi, b, fb = b, a, fa
			a = hi - golden*(hi-lo)
			fa = at(a)
		} else {
			lo, a, fa = a, b, fb
			b = lo + golden*(hi-lo)
			fb = at(b)
		}
	}
	for _, s := range []*solution{fa, fb} {
		if s != nil && s.logL > best.logL {
			best = s
		}
	}
	return best, true
}

func (l *ledger) fitAt(w law, extras []extra, sigma float64) (*solution, bool) {
	s := &solution{law: w, extras: extras, sigma: sigma}
	l.columns(s)
	n, p := len(l.rows), s.size
	s.chol, s.off, s.varRes = make([]float64, n), make([]float64, n), make([]float64, n)
	typical := 0.0
	for i := range l.rows {
		r := &l.rows[i]
		typical += r.before / float64(n)
		c := r.vFrom + r.vTo + sq(sigma*r.state.share()*r.gain)
		s.varRes[i] = c
		if r.state == Odd {
			c += sq(r.before + r.after) // says nothing
		} else {
			s.dof++
		}
		if i > 0 && r.joined {
			s.off[i] = -r.vFrom / s.chol[i-1]
		}
		c -= sq(s.off[i])
		if !(c > 0) {
			return nil, false
		}
		s.chol[i] = math.Sqrt(c)
		s.logL -= math.Log(s.chol[i])
	}
	s.x = make([]float64, n*p)
	col := make([]float64, n)
	for j := range p {
		for i := range n {
			col[i] = s.design[i*p+j]
		}
		s.whiten(col)
		for i := range n {
			s.x[i*p+j] = col[i]
		}
	}
	y := make([]float64, n)
	for i := range n {
		y[i] = l.rows[i].net()
	}
	wy := append([]float64(nil), y...)
	s.whiten(wy)
	m, b := make([]float64, p*p), make([]float64, p)
	for i := range n {
		for j := range p {
			b[j] += s.x[i*p+j] * wy[i]
			for k := range p {
				m[j*p+k] += s.x[i*p+j] * s.x[i*p+k]
			}
		}
	}
	// What is known beforehand: the vertical; and that neither a kick nor a pass's
	// loss is as large as the whole swing, which keeps the equations solvable.
	for j := range p {
		if c := j - (p - len(l.clips)); c >= 0 {
			m[j*p+j] += 1 / sq(l.uRest[c])
			continue
		}
		big := 0.0
		for i := range n {
			big = math.Max(big, math.Abs(s.design[i*p+j]))
		}
		if big > 0 {
			m[j*p+j] += sq(big / typical)
		} else {
			m[j*p+j] += 1
		}
	}
	s.beforehand(l, m, b)
	cov, ok := inverse(m, p)
	if !ok {
		return nil, false
	}
	s.cov, s.by, s.beta = cov, append([]float64(nil), cov...), make([]float64, p)
	for j := range p {
		for k := range p {
			s.beta[j] += cov[j*p+k] * b[k]
		}
	}
	s.dof -= p
	s.resid = make([]float64, n)
	for i := range n {
		s.resid[i] = y[i]
		for j := range p {
			s.resid[i] -= s.design[i*p+j] * s.beta[j]
		}
	}
	wr := append([]float64(nil), s.resid...)
	s.whiten(wr)
	for i, r := range wr {
		if l.rows[i].state != Odd {
			s.chi2 += r * r
		}
	}
	s.logL -= s.chi2 / 2
	for c := range l.clips {
		j := p - len(l.clips) + c
		s.logL -= sq(s.beta[j]/l.uRest[c]) / 2
	}
	s.inCommon(l)
	return s, true
}

// beforehand enters what the free motion between the pushes tells of the frictions.
func (s *solution) beforehand(l *ledger, m, b []float64) {
	if l.free == nil {
		return
	}
	f := l.free
	for i := range 3 {
		if !s.law.has(i) {
			continue
		}
		a := s.frictionAt(i)
		for j := range 3 {
			// A friction that the law lacks is zero.
			b[a] += f.info[3*i+j] * f.friction[j]
			if s.law.has(j) {
				m[a*s.size+s.frictionAt(j)] += f.info[3*i+j]
			}
		}
	}
}

// inCommon adds what all stretches of free motion have in common (camera, magnets
// and their places) to the covariance, and what is known of the frictions to the
// likelihood.
func (s *solution) inCommon(l *ledger) {
	if l.free == nil {
		return
	}
	f := l.free
	var off [3]float64
	for i := range 3 {
		off[i] = -f.friction[i]
		if s.law.has(i) {
			off[i] += s.beta[s.frictionAt(i)]
		}
	}
	for i := range 3 {
		for j := range 3 {
			s.logL -= off[i] * f.info[3*i+j] * off[j] / 2
		}
	}
	var ds [][]float64
	for _, dy := range f.common {
		ds = append(ds, s.response(dy))
	}
	for _, d := range ds {
		for j := range d {
			for k := range d {
				s.cov[j*s.size+k] += d[j] * d[k]
			}
		}
	}
}

// response is what a change dy of all nets does to the parameters.
func (s *solution) response(dy []float64) []float64 {
	v := append([]float64(nil), dy...)
	s.whiten(v)
	b := make([]float64, s.size)
	for i := range v {
		for j := range s.size {
			b[j] += s.x[i*s.size+j] * v[i]
		}
	}
	out := make([]float64, s.size)
	for j := range out {
		for k := range b {
			out[j] += s.by[j*s.size+k] * b[k]
		}
	}
	return out
}

// of returns g·beta and gᵀ·cov·h.
func (s *solution) of(g, h []float64) (value, cov float64) {
	for j := range g {
		value += g[j] * s.beta[j]
		for k := range h {
			cov += g[j] * s.cov[j*s.size+k] * h[k]
		}
	}
	return value, cov
}

// widen is by how much the ledger's own scatter exceeds what the pictures allow.
func (s *solution) widen() float64 {
	if s.dof < 1 {
		return 1
	}
	v := s.chi2 / float64(s.dof)
	if v < 1+2*math.Sqrt(2/float64(s.dof)) {
		return 1 // chance scatters it by that much
	}
	return v
}

// inverse of a symmetric positive matrix of size n, by Cholesky's method on the
// matrix scaled to a diagonal of one.
func inverse(a []float64, n int) ([]float64, bool) {
	d := make([]float64, n)
	for i := range n {
		if !(a[i*n+i] > 0) {
			return nil, false
		}
		d[i] = 1 / math.Sqrt(a[i*n+i])
	}
	l := make([]float64, n*n)
	for i := range n {
		for j := 0; j <= i; j++ {
			sum := a[i*n+j] * d[i] * d[j]
			for k := range j {
				sum -= l[i*n+k] * l[j*n+k]
			}
			if i == j {
				if !(sum > 1e-15) {
					return nil, false
				}
				l[i*n+i] = math.Sqrt(sum)
			} else {
				l[i*n+j] = sum / l[j*n+j]
			}
		}
	}
	out := make([]float64, n*n)
	x := make([]float64, n)
	for c := range n {
		for i := range n {
			x[i] = 0
			if i == c {
				x[i] = 1
			}
			for k := range i {
				x[i] -= l[i*n+k] * x[k]
			}
			x[i] /= l[i*n+i]
		}
		for i := n - 1; i >= 0; i-- {
			for k := i + 1; k < n; k++ {
				x[i] -= l[k*n+i] * x[k]
			}
			x[i] /= l[i*n+i]
		}
		for i := range n {
			out[i*n+c] = x[i] * d[i] * d[c]
		}
	}
	return out, true
}
