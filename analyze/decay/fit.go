package decay

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/lsq"
)

// samples is the stretch that is fitted: angles with their random uncertainty.
type samples struct {
	t, y, u []float64
	tRef    float64 // where the model's start state stands
	// common holds, per cause that all samples share (the pivot, the shutter), what
	// one standard uncertainty of it does to each angle. The fit carries one number
	// per cause, known beforehand as 0 ± 1, so that the motion itself may tell of it
	// and the rest goes into every uncertainty.
	common [][]float64
}

// head is the first n samples.
func (s *samples) head(n int) *samples {
	return &samples{t: s.t[:n], y: s.y[:n], u: s.u[:n], tRef: s.tRef}
}

// fitted is one model fitted to samples.
type fitted struct {
	m       model
	p       []float64
	tRef    float64
	common  []float64 // what the fit made of the shared causes, in their standard uncertainties
	uCommon []float64 // and how well it knows them
	resid   []float64 // (angle − model)/u
	jac     []float64 // +∂model/∂p / u, row-major
	chi2    float64   // over samples and shared causes
	cov     []float64 // of p, shared causes included, row-major; frictions' bounds taken as not there
	bare    []float64 // of p, if the shared causes were known
	sum     *lsq.Summary
}

// fit fits m to s from start by weighted nonlinear least squares. Frictions are
// kept from being negative.
func (s *samples) fit(ctx context.Context, m model, start []float64, coarse bool) (*fitted, error) {
	opt := lsq.Options{SigmaKnown: true, TolF: 1e-8, TolP: 1e-9, MaxIterations: 60}
	switch {
	case len(m.pulls) > 0:
		// A magnet's law has a long narrow valley: a coarse search stops early there
		// and leaves residuals that look like a push.
		opt.MaxIterations = 200
	case coarse:
		opt.TolF, opt.MaxIterations = 1e-4, 25
	}
	return s.search(ctx, m, start, !coarse, opt)
}

// search is fit with options of one's choice; shared tells whether the causes
// that all samples share are carried.
func (s *samples) search(ctx context.Context, m model, start []float64, shared bool, opt lsq.Options) (*fitted, error) {
	n, size, extra := len(s.t), m.size(), len(s.common)
	if !shared {
		extra = 0
	}
	all := size + extra
	plain, grad := newMover(m, false), newMover(m, true)
	out, rows := make([]float64, n), make([]float64, n*size)
	inf := math.Inf(1)
	pr := lsq.Problem{
		N: all, M: n, Names: m.names(),
		Lo: slices.Repeat([]float64{-inf}, all), Hi: slices.Repeat([]float64{inf}, all),
		Scale: m.scales(start),
		Residuals: func(p, r []float64) error {
			if err := plain.run(p[:size], s.tRef, s.t, out, nil, nil); err != nil {
				return err
			}
			for i := range r {
				r[i] = (out[i] - s.y[i]) / s.u[i]
			}
			for k := range extra {
				for i, d := range s.common[k] {
					r[i] += p[size+k] * d / s.u[i]
				}
			}
			return nil
		},
		Jacobian: func(p, j []float64) error {
			if err := grad.run(p[:size], s.tRef, s.t, out, rows, nil); err != nil {
				return err
			}
			for i := range n {
				w := 1 / s.u[i]
				for c := range size {
					j[i*all+c] = rows[i*size+c] * w
				}
				for k := range extra {
					j[i*all+size+k] = s.common[k][i] * w
				}
			}
			return nil
		},
	}
	pr.Lo[atK] = 1e-12
	for _, l := range frictions {
		if m.law&l != 0 {
			pr.Lo[m.frictionAt(l)] = 0
		}
	}
	start = slices.Clone(start)
	for k := range extra {
		pr.Names = append(pr.Names, fmt.Sprintf("shared cause %d", k+1))
		pr.Scale = append(pr.Scale, 1)
		pr.Prior = append(pr.Prior, lsq.Prior{Parameter: size + k, Value: 0, U: 1})
		start = append(start, 0)
	}
	sum, err := lsq.Solve(ctx, pr, start, opt)
	if err != nil {
		return nil, fmt.Errorf("decay: the fit of %s friction failed: %w", m.law, err)
	}
	f := &fitted{
		m: m, p: sum.P[:size], common: sum.P[size:], uCommon: sum.U[size:], tRef: s.tRef,
		resid: make([]float64, n), jac: make([]float64, n*size), chi2: sum.ChiSquare, cov: make([]float64, size*size), sum: sum,
	}
	for i, r := range sum.Residuals {
		f.resid[i] = -r
		copy(f.jac[i*size:(i+1)*size], sum.Jacobian[i*all:])
	}
	for i := range size {
		copy(f.cov[i*size:(i+1)*size], sum.Cov[i*all:])
	}
	f.bare = f.cov
	if extra > 0 {
		if c, ok := normalInverse(f.jac, n, size); ok {
			f.bare = c
		}
	}
	return f, nil
}

// normalInverse is (JᵀJ)⁻¹ of n rows of size columns; ok is false where J lacks rank.
func normalInverse(jac []float64, n, size int) ([]float64, bool) {
	a := make([]float64, size*size)
	for i := range n {
		row := jac[i*size : (i+1)*size]
		for j, x := range row {
			for k, y := range row[:j+1] {
				a[j*size+k] += x * y
			}
		}
	}
	c := make([]float64, size*size)
	e := make([]float64, size)
	for j := range size {
		e[j] = 1
		x, ok := solveSPD(slices.Clone(a), e)
		if !ok {
			return nil, false
		}
		e[j] = 0
		for i := range size {
			c[i*size+j] = x[i]
		}
	}
	return c, true
}

// scales are the sizes of typical changes, for the search.
func (m model) scales(p []float64) []float64 {
	w := math.Sqrt(math.Max(p[atK], 1e-12))
	a := math.Max(math.Hypot(p[atAngle], p[atRate]/w), 1e-6)
	s := make([]float64, m.size())
	s[atAngle], s[atRate], s[atRest], s[atK] = a, a*w, a, w*w
	for i := range m.powers {
		s[atShape+i] = 0.1 / ipow(a, m.powers[i]-1)
	}
	for i := range m.pulls {
		s[atShape+len(m.powers)+i] = 0.1
	}
	for i, l := range frictions {
		if m.law&l != 0 {
			s[m.frictionAt(l)] = []float64{0.01 * w, 0.01 / a, 0.01 * w * w * a}[i]
		}
	}
	return s
}

// restart turns the parameters of one model into a start for another: what both
// have is kept, and frictions that only one has are exchanged so that the loss
// at amplitude a stays.
func restart(from *fitted, to model, a float64) []float64 {
	p := make([]float64, to.size())
	copy(p, from.p[:atShape])
	for i, e := range to.powers {
		if k := slices.Index(from.m.powers, e); k >= 0 {
			p[atShape+i] = from.p[atShape+k]
		}
	}
	for i, h := range to.pulls {
		if k := slices.Index(from.m.pulls, h); k >= 0 {
			p[atShape+len(to.powers)+i] = from.p[atShape+len(from.m.powers)+k]
		}
	}
	o, err := from.m.orbitAt(from.p, a)
	if err != nil {
		return p
	}
	lost, kept := 0.0, 0.0
	for i, l := range frictions {
		x := from.m.friction(from.p, l) * o.loss[i]
		lost += x
		if to.law&l != 0 {
			kept += x
			p[to.frictionAt(l)] = from.m.friction(from.p, l)
		}
	}
	if rest := lost - kept; rest > 0 {
		k := float64(to.law.count())
		for i, l := range frictions {
			if to.law&l != 0 {
				p[to.frictionAt(l)] += rest / k / o.loss[i]
			}
		}
	}
	return p
}

// guess is a start for a model with viscous friction alone, from the turning
// points of the stretch and the smoothed state at its first sample.
func (s *samples) guess(m model, swings []swing, angle0, rate0 float64) []float64 {
	p := make([]float64, m.size())
	var rest, weight, t0 float64
	for _, w := range swings {
		rest += w.middle * w.span
		weight += w.span
	}
	rest /= weight
	for _, w := range swings {
		half := w.duration
		if m.sine {
			if o, err := m.orbitAt([]float64{0, 0, 0, 1, 0}, w.span/2); err == nil {
				half *= 2 * math.Pi / o.period
			}
		}
		t0 += 2 * half * w.span / weight
	}
	first, last := swings[0], swings[len(swings)-1]
	p[atAngle], p[atRate], p[atRest], p[atK] = angle0-rest, rate0, rest, 4*math.Pi*math.Pi/(t0*t0)
	p[m.frictionAt(viscous)] = 1e-3 / t0
	if dt := last.at - first.at; dt > 0 && last.span > 0 {
		p[m.frictionAt(viscous)] = math.Max(1e-3/t0, 2*math.Log(first.span/last.span)/dt)
	}
	return p
}

// climb fits m to longer and longer beginnings of s, so that the phase is never
// lost, and then, coarsely, to the whole.
func (s *samples) climb(ctx context.Context, m model, start []float64) (*fitted, error) {
	period := 2 * math.Pi / math.Sqrt(start[atK])
	span := s.t[len(s.t)-1] - s.t[0]
	for reach := 4 * period; reach < span; reach *= 2.2 {
		n := 0
		for n < len(s.t) && s.t[n] <= s.t[0]+reach {
			n++
		}
		if n < 3*m.size() {
			continue
		}
		f, err := s.head(n).fit(ctx, m, start, true)
		if err != nil {
			return nil, err
		}
		start = f.p
	}
	return s.fit(ctx, m, start, true)
}

func medianAbs(x []float64) float64 {
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = math.Abs(v)
	}
	slices.Sort(y)
	return y[len(y)/2]
}
