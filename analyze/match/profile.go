package match

import (
	"context"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Where a motion nearly ended beside a magnet, or hardly got over it, small changes of
// a number change it out of proportion, and uncertainties from derivatives do not
// hold. There the 95 % interval is that of the profile likelihood: all values at which
// the best fit with the number held is worse by no more than 1.96² (D. J. Venzon and
// S. H. Moolgavkar, Applied Statistics 37 (1988) 87), times what correlated residuals
// stretch variances by.
const (
	straight   = 0.25 // relative departure of the sum of squares from a parabola up to which derivatives hold
	threshold  = 1.959963984540054 * 1.959963984540054
	profileIs  = "95 % interval from a profile of the likelihood: so near to being captured, uncertainties by derivatives do not hold"
	widest     = 6.0  // times the linear interval, beyond which a profile is not followed
	profiling  = 14   // trials on each side
	closeBy    = 0.04 // relative accuracy of the threshold
	profileLog = "profile of %s: %.5g to %.5g, by derivatives %.5g to %.5g"
)

// span is a 95 % interval by profile.
type span struct{ lo, hi float64 }

// profiler walks along a number from the optimum.
type profiler struct {
	f     *fitter
	i     int       // the parameter that is walked along
	dp    []float64 // how the others go with it by derivatives, per unit
	moves [][][]float64
	best  place
	base  float64 // sum of squares at the optimum
}

// profile finds the 95 % interval of parameter i, whose linear standard uncertainty
// is u, where those in pinned do not move. bent tells that it differs from the linear
// one; ok is false where it cannot be found.
func (r *reporter) profile(ctx context.Context, i int, u float64, pinned []int) (s span, bent, ok bool) {
	f := r.fitter
	c := conditional(r.j.inverse, r.j.np, pinned)
	v := c[i*r.j.np+i]
	if !(v > 0) || !(u > 0) {
		return s, false, false
	}
	w := &profiler{f: f, i: i, dp: make([]float64, r.j.np), best: f.mark(f.values(), 0)}
	for k := range w.dp {
		w.dp[k] = c[k*r.j.np+i] / v
	}
	for cl := range f.clips {
		w.moves = append(w.moves, f.final.states(cl, w.dp, false))
	}
	held := make([]bool, len(f.params))
	for k := range f.params {
		held[k] = f.params[k].held
	}
	tol, converged, why, chi2 := f.tol, f.converged, f.why, f.chi2
	f.tol = 1e-10
	defer func() {
		for k := range f.params {
			f.params[k].held = held[k]
		}
		f.tol = tol
		f.restore(w.best)
		_ = f.shootAll(context.WithoutCancel(ctx), w.best.p, false, false) // as it was before
		f.converged, f.why, f.chi2 = converged, why, chi2
	}()
	if f.shootAll(ctx, w.best.p, false, false) != nil {
		return s, false, false
	}
	w.base, _, _ = f.merit(w.best.p)
	if math.IsInf(w.base, 0) {
		return s, false, false
	}
	// By derivatives first: where the sum of squares rises as a parabola, they hold.
	linear := math.Sqrt(threshold) * u
	want := threshold * u * u / v
	rise := func(by float64) float64 {
		if w.walk(ctx, by) != nil {
			return math.Inf(1)
		}
		m, _, _ := f.merit(f.values())
		return m - w.base
	}
	up, down := rise(linear), rise(-linear)
	x := w.best.p[i]
	s = span{x - linear, x + linear}
	if math.Abs(up/want-1) < straight && math.Abs(down/want-1) < straight {
		return s, false, true
	}
	for _, k := range append(pinned, i) {
		f.params[k].held = true
	}
	for side, sign := range []float64{-1, 1} {
		d, found := w.edge(ctx, sign, linear, want)
		if !found {
			return s, true, false
		}
		// A profile that could not be followed to its bottom is too narrow: it only
		// ever widens.
		if side == 0 {
			s.lo = x - math.Max(d, linear)
		} else {
			s.hi = x + math.Max(d, linear)
		}
	}
	f.opt.log(profileLog, f.params[i].address, s.lo, s.hi, x-linear, x+linear)
	bent = math.Abs(s.lo-x+linear) > 0.1*linear || math.Abs(s.hi-x-linear) > 0.1*linear
	return s, bent, true
}

// walk goes to where the parameter is moved by so much and all others go with it as
// the derivatives say.
func (w *profiler) walk(ctx context.Context, by float64) error {
	f := w.f
	f.restore(w.best)
	step := make([]float64, len(w.dp))
	for k := range step {
		step[k] = w.dp[k] * by
	}
	f.setValues(f.stepped(w.best.p, step))
	for c := range f.clips {
		k := &f.clips[c]
		for s := range k.segments {
			m := make([]float64, len(w.moves[c][s]))
			for v := range m {
				m[v] = w.moves[c][s][v] * by
			}
			k.model.Displace(k.segments[s].y, f.capped(m))
			k.model.Normalise(k.segments[s].y)
		}
	}
	return f.shootAll(ctx, f.values(), false, false)
}

// rise is how much the sum of squares lies above the optimum's where the parameter is
// moved by so much and all others are fitted anew; near is a place to begin at, if any.
func (w *profiler) rise(ctx context.Context, by float64, near *place) (float64, place, bool) {
	f := w.f
	try := func() (float64, bool) {
		if f.descend(ctx, 12, 1e-5, true) != nil {
			return math.Inf(1), false
		}
		m, _, _ := f.merit(f.values())
		return m, !math.IsInf(m, 0)
	}
	best, at := math.Inf(1), w.best
	if w.walk(ctx, by) == nil {
		if m, ok := try(); ok && m < best {
			best, at = m, f.mark(f.values(), m)
		}
	}
	if near != nil { // from the last one, which a bent valley may need
		f.restore(*near)
		p := f.values()
		p[w.i] = w.best.p[w.i] + by
		f.setValues(p)
		if m, ok := try(); ok && m < best {
			best, at = m, f.mark(f.values(), m)
		}
	}
	return best - w.base, at, !math.IsInf(best, 0)
}

// edge is how far the parameter may go to one side until the sum of squares has risen
// by want.
func (w *profiler) edge(ctx context.Context, sign, linear, want float64) (float64, bool) {
	lo, hi := 0.0, 0.0 // inside, outside
	riseLo, riseHi := 0.0, 0.0
	var near *place
	d := 0.5 * linear
	for range profiling {
		if ctx.Err() != nil {
			return 0, false
		}
		t, at, ok := w.rise(ctx, sign*d, near)
		if t < -0.5 { // the optimum was none
			return 0, false
		}
		switch {
		case ok && math.Abs(t/want-1) < closeBy:
			return d, true
		case ok && t < want:
			lo, riseLo, near = d, t, &at
		default:
			hi, riseHi = d, t
		}
		switch {
		case hi == 0:
			next := 2 * lo
			if riseLo > 0 {
				next = math.Min(math.Max(lo*math.Sqrt(want/riseLo), 1.15*lo), 2*lo)
			}
			if d = next; d > widest*linear {
				return 0, false
			}
		case math.IsInf(riseHi, 0) || riseHi > 4*want:
			d = (lo + hi) / 2
		default: // the root of the rise is nearly a straight line
			a, b, c := math.Sqrt(math.Max(riseLo, 0)), math.Sqrt(riseHi), math.Sqrt(want)
			d = lo + (hi-lo)*math.Min(math.Max((c-a)/(b-a), 0.1), 0.9)
		}
		if hi > 0 && hi-lo < 0.02*linear {
			return (lo + hi) / 2, true
		}
	}
	return (lo + hi) / 2, hi > 0
}

// conditional is a covariance (row-major) where those in pinned are known.
func conditional(cov []float64, n int, pinned []int) []float64 {
	out := append([]float64(nil), cov...)
	for _, p := range pinned {
		d := out[p*n+p]
		if !(d > 0) {
			continue
		}
		col := mat.NewVecDense(n, nil)
		for k := range n {
			col.SetVec(k, out[k*n+p])
		}
		for a := range n {
			for b := range n {
				out[a*n+b] -= col.AtVec(a) * col.AtVec(b) / d
			}
		}
	}
	return out
}
