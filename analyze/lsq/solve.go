package lsq

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
)

// Solve searches for the least squares of pr from start (length N). It returns
// an error for a Problem that makes no sense, for a start at which the residuals
// do not exist, and with the Summary so far when ctx ends. A search that does
// not converge is no error: Summary.Converged and Summary.Reason tell.
func Solve(ctx context.Context, pr Problem, start []float64, opt Options) (*Summary, error) {
	if err := check(&pr, start, &opt); err != nil {
		return nil, err
	}
	s, err := newSearch(ctx, &pr, start, opt)
	if err != nil {
		return nil, err
	}
	err = s.try()
	if opt.Loss.Kind != Squares && err == nil {
		err = s.robust()
	}
	if err != nil && !errors.Is(err, ctx.Err()) {
		return nil, err
	}
	sum, sumErr := s.summary()
	if err == nil {
		err = sumErr
	}
	return sum, err
}

// search is the state of one search. Rows are residuals, then priors; columns
// are the free parameters.
type search struct {
	ctx     context.Context
	pr      *Problem
	opt     Options
	free    []int
	m, n    int
	p       []float64 // full
	trial   []float64 // full
	r, rt   []float64 // raw residuals and priors, at p and at trial
	jac     []float64 // raw, column-major m×n
	rows    []float64 // M×N, for the caller's Jacobian
	work    []float64 // column-major m×n, destroyed by triangle
	q       []float64 // m
	weight  []float64 // √ρ' per row; nil for plain squares
	tri     []float64 // n×n row-major
	grad    []float64 // half the gradient, n
	colNorm []float64
	d       []float64 // Moré's scale
	curve   []float64 // second-order part of a step
	box     *box
	diff    *differ
	k       float64 // tuning × scale of the loss
	cost    float64
	radius  float64
	rank0   int // rank at the start
	evals   int
	iters   int
	damp    damping // in force
	done    bool
	why     string
	lastErr error // of the last rejected trial
}

func newSearch(ctx context.Context, pr *Problem, start []float64, opt Options) (*search, error) {
	s := &search{ctx: ctx, pr: pr, opt: opt, k: 1, rank0: -1}
	if opt.Loss.Kind != Squares {
		s.k = opt.Loss.tuning() * opt.Loss.Scale // 0 while the scale is not known
		if opt.Loss.Scale <= 0 && opt.SigmaKnown {
			s.k = opt.Loss.tuning()
		}
	}
	for j, h := range pr.Hold {
		if !h {
			s.free = append(s.free, j)
		}
	}
	s.n, s.m = len(s.free), pr.M+len(pr.Prior)
	s.p, s.trial = slices.Clone(start), make([]float64, pr.N)
	for _, j := range s.free {
		s.p[j] = min(max(s.p[j], pr.Lo[j]), pr.Hi[j])
	}
	m, n := s.m, s.n
	s.r, s.rt, s.q = make([]float64, m), make([]float64, m), make([]float64, m)
	s.jac, s.work = make([]float64, m*n), make([]float64, m*n)
	s.tri, s.grad, s.colNorm, s.d = make([]float64, n*n), make([]float64, n), make([]float64, n), make([]float64, n)
	s.curve = make([]float64, n)
	if pr.Jacobian != nil {
		s.rows = make([]float64, pr.M*pr.N)
	} else {
		s.diff = newDiffer(s)
	}
	s.box = newBox(n)
	s.damp = dampings[0]
	if opt.Loss.Kind != Squares {
		s.weight = make([]float64, m)
		for i := range s.weight {
			s.weight[i] = 1
		}
	}
	bad, err := s.residuals(s.p, s.r)
	if err != nil {
		return nil, fmt.Errorf("lsq: the residuals cannot be computed at the start: %w", err)
	}
	if bad >= 0 {
		return nil, fmt.Errorf("lsq: residual %d of %d is %v at the start: start elsewhere or mend the data", bad, pr.M, s.r[bad])
	}
	return s, nil
}

// residuals evaluates data and priors; bad is the first row that is not finite,
// or −1.
func (s *search) residuals(p, r []float64) (bad int, err error) {
	s.evals++
	if err := s.pr.Residuals(p, r[:s.pr.M]); err != nil {
		return -1, err
	}
	for i, pri := range s.pr.Prior {
		r[s.pr.M+i] = (p[pri.Parameter] - pri.Value) / pri.U
	}
	return firstBad(r), nil
}

func firstBad(r []float64) int {
	for i, x := range r {
		if x-x != 0 { // NaN or ±Inf
			return i
		}
	}
	return -1
}

// total is the cost: ρ over the data, plain squares over the priors.
func (s *search) total(r []float64) float64 {
	m := s.pr.M
	return s.loss().cost(r[:m], s.k) + Loss{}.cost(r[m:], 1)
}

// loss is the loss in force: plain squares until a scale is known.
func (s *search) loss() Loss {
	if s.weight == nil || s.k == 0 {
		return Loss{}
	}
	return s.opt.Loss
}

// reweigh sets the rows' weights for the residuals at p.
func (s *search) reweigh() {
	if s.weight == nil {
		return
	}
	loss := s.loss()
	for i, x := range s.r[:s.pr.M] {
		if loss.Kind == Squares {
			s.weight[i] = 1
			continue
		}
		x /= s.k
		_, slope := loss.rho(x * x)
		s.weight[i] = math.Sqrt(slope)
	}
}

// jacobian fills jac at p.
func (s *search) jacobian() error {
	m, n := s.m, s.n
	if s.pr.Jacobian != nil {
		if err := s.pr.Jacobian(s.p, s.rows); err != nil {
			return fmt.Errorf("lsq: the Jacobian cannot be computed at %v: %w", s.p, err)
		}
		for c, j := range s.free {
			col := s.jac[c*m : c*m+s.pr.M]
			for i := range col {
				col[i] = s.rows[i*s.pr.N+j]
			}
			if bad := firstBad(col); bad >= 0 {
				return fmt.Errorf("lsq: the Jacobian of residual %d by %s is %v", bad, s.pr.Names[j], col[bad])
			}
		}
	} else if err := s.diff.fill(); err != nil {
		return err
	}
	for c := range n {
		tail := s.jac[c*m+s.pr.M : (c+1)*m]
		for i, pri := range s.pr.Prior {
			tail[i] = 0
			if pri.Parameter == s.free[c] {
				tail[i] = 1 / pri.U
			}
		}
	}
	return nil
}

// factor weights and factors the Jacobian at p: tri, q, grad, colNorm, d.
func (s *search) factor() {
	m, n := s.m, s.n
	copy(s.work, s.jac)
	copy(s.q, s.r)
	if s.weight != nil {
		for i, w := range s.weight {
			s.q[i] *= w
		}
		for c := range n {
			col := s.work[c*m : (c+1)*m]
			for i, w := range s.weight {
				col[i] *= w
			}
		}
	}
	triangle(s.work, m, n, s.q, s.tri)
	for c := range n {
		var g, ss float64
		for i := 0; i <= c; i++ {
			g += s.tri[i*n+c] * s.q[i]
			ss = math.Hypot(ss, s.tri[i*n+c])
		}
		s.grad[c], s.colNorm[c] = g, ss
		s.d[c] = max(s.damp.memory*s.d[c], ss)
	}
}

// run searches with the loss and scale in force until it stops.
func (s *search) run() error {
	s.done, s.why, s.radius, s.lastErr = false, "", 0, nil
	clear(s.d)
	s.cost = s.total(s.r)
	if s.n == 0 {
		s.done, s.why = true, "every parameter is held: nothing to search"
		return nil
	}
	for last := s.iters + s.opt.MaxIterations; ; s.iters++ {
		if err := s.ctx.Err(); err != nil {
			s.why = "stopped from outside before it had converged"
			return err
		}
		if s.iters >= last {
			s.why = fmt.Sprintf("not converged after %d iterations", s.opt.MaxIterations)
			return nil
		}
		s.reweigh()
		if err := s.jacobian(); err != nil {
			return err
		}
		if s.ctx.Err() != nil {
			continue // the differences may be incomplete
		}
		s.factor()
		if s.rank0 < 0 {
			s.rank0 = s.rank()
		}
		if s.flat() {
			return nil
		}
		if err := s.advance(); err != nil || s.why != "" {
			return err
		}
	}
}

// flat tells whether the gradient, with what bounds forbid taken out, vanishes.
func (s *search) flat() bool {
	norm := 0.0
	for i, x := range s.r {
		if s.weight != nil {
			x *= s.weight[i]
		}
		norm = math.Hypot(norm, x)
	}
	if norm == 0 {
		s.done, s.why = true, "the residuals vanish"
		return true
	}
	worst := 0.0
	for c, j := range s.free {
		if s.colNorm[c] == 0 || s.blocked(c, j) {
			continue
		}
		worst = max(worst, math.Abs(s.grad[c])/s.colNorm[c]/norm)
	}
	if worst <= s.opt.TolG {
		s.done, s.why = true, "the gradient vanishes: the residuals stand at right angles on every derivative"
		return true
	}
	return false
}

// blocked tells whether a bound forbids to go downhill along free parameter c.
func (s *search) blocked(c, j int) bool {
	return s.p[j] <= s.pr.Lo[j] && s.grad[c] >= 0 || s.p[j] >= s.pr.Hi[j] && s.grad[c] <= 0
}

// advance makes one accepted step from p, or sets why when the search is over.
func (s *search) advance() error {
	n := s.n
	for c := range n {
		if s.d[c] == 0 {
			s.d[c] = 1
		}
	}
	length := s.length(s.p)
	if s.radius == 0 {
		s.radius = s.opt.Radius * s.damp.radius
		if length > 0 {
			s.radius *= length
		}
	}
	s.box.load(s)
	for {
		step, foreseen := s.box.step(s.radius)
		stepLen := 0.0
		copy(s.trial, s.p)
		for c, j := range s.free {
			s.trial[j] = min(max(s.p[j]+step[c], s.pr.Lo[j]), s.pr.Hi[j])
			stepLen = math.Hypot(stepLen, s.d[c]*step[c])
		}
		foreseen /= s.cost
		if foreseen > 1e-4 && !s.box.bounded {
			if !s.bend(step, stepLen) {
				clear(s.curve)
			}
			for c, j := range s.free {
				s.trial[j] = min(max(s.p[j]+step[c]+s.curve[c], s.pr.Lo[j]), s.pr.Hi[j])
			}
		}
		bad, err := s.residuals(s.trial, s.rt)
		s.lastErr = err
		cost := math.Inf(1)
		if err == nil && bad < 0 {
			cost = s.total(s.rt)
		}
		if e := s.ctx.Err(); e != nil {
			s.why = "stopped from outside before it had converged"
			return e
		}
		actual := 1 - cost/s.cost
		ratio := 0.0
		if foreseen > 0 {
			ratio = actual / foreseen
		}
		const noise = 1e-13 // of a sum of squares, from rounding
		if foreseen < noise && math.Abs(actual) < noise {
			ratio = 1 // too small to be seen in the sum: the gradient knows better
		}
		if math.IsInf(actual, -1) {
			s.radius = 0.1 * min(s.radius, stepLen)
		} else if ratio < 0.25 {
			s.radius = min(s.radius, stepLen) * shrink(actual, foreseen, ratio)
		} else if ratio > 0.75 {
			s.radius = max(s.radius, 2*stepLen)
		}
		accepted := ratio > 1e-4
		if accepted {
			s.p, s.trial = s.trial, s.p
			s.r, s.rt = s.rt, s.r
			s.cost = cost
		}
		switch {
		case foreseen <= s.opt.TolF && math.Abs(actual) <= max(s.opt.TolF, noise) && ratio <= 2:
			s.done, s.why = true, "the sum of squares changes no more"
		case s.radius <= s.opt.TolP*length && (foreseen < 1e-6 || s.box.full && s.box.undamped <= 1e-6*length):
			s.done, s.why = true, "the parameters change no more"
		case s.radius <= 1e-16*length || stepLen == 0:
			s.why = "no shorter step lowers the sum of squares"
			if s.lastErr != nil {
				s.why += ", and the last one failed: " + s.lastErr.Error()
			}
		}
		if accepted || s.why != "" {
			return nil
		}
	}
}

// bend finds the geodesic acceleration that makes a long step follow a curved
// valley (M. K. Transtrum and J. P. Sethna, arXiv:1201.5885, 2012): half the
// least-squares answer to the second derivative of the residuals along the
// step. It fills curve and tells whether to add it; not when it is so long that
// the expansion cannot be trusted.
func (s *search) bend(step []float64, stepLen float64) bool {
	const h = 0.1 // of the step; as in the paper
	for c, j := range s.free {
		s.trial[j] += (h - 1) * step[c]
	}
	if bad, err := s.residuals(s.trial, s.rt); err != nil || bad >= 0 {
		return false
	}
	m, n := s.m, s.n
	for i := range m {
		s.rt[i] = (s.rt[i] - s.r[i]) / h
	}
	for c := range n {
		floats.AddScaled(s.rt, -step[c], s.jac[c*m:(c+1)*m])
	}
	floats.Scale(2/h, s.rt)
	if s.weight != nil {
		for i, w := range s.weight {
			s.rt[i] *= w * w
		}
	}
	for c := range n {
		s.curve[c] = floats.Dot(s.jac[c*m:(c+1)*m], s.rt)
	}
	s.box.answer(s.curve)
	length := 0.0
	for c := range n {
		s.curve[c] *= 0.5
		length = math.Hypot(length, s.d[c]*s.curve[c])
	}
	return 2*length <= 0.75*stepLen
}

// shrink is how much shorter the trust region gets after a step that did less
// than a quarter of what was foreseen: the least of the parabola through the
// cost and its slope at p and the cost at the trial, within 0.1 … 0.5.
func shrink(actual, foreseen, ratio float64) float64 {
	if actual >= 0 && ratio > 0 {
		return 0.5
	}
	// cost(t) ≈ 1 + g·t + (−actual − g)·t², where the slope g ≈ −2·foreseen.
	g := -2 * foreseen
	return min(max(-g/(2*(-actual-g)), 0.1), 0.5)
}

// length is the scaled length of the parameters.
func (s *search) length(p []float64) float64 {
	sum := 0.0
	for c, j := range s.free {
		sum = math.Hypot(sum, s.d[c]*p[j])
	}
	return sum
}
