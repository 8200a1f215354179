package match

import (
	"context"
	"fmt"
	"math"
	"slices"
)

// descend takes damped Gauss–Newton steps until the sum of squares falls by less
// than the fraction enough per step. With all the nuisance parameters' derivatives
// are fresh in each step, else only in the first.
func (f *fitter) descend(ctx context.Context, rounds int, enough float64, fresh bool) error {
	p := f.values()
	if err := f.shootAll(ctx, p, true, fresh); err != nil {
		return err
	}
	now, _, _ := f.merit(p)
	lambda := 1e-3
	f.converged, f.why = false, fmt.Sprintf("stopped after %d steps", rounds)
	stale := 0
	for round := range rounds {
		if err := ctx.Err(); err != nil {
			return err
		}
		accepted := false
		var fell float64
		for try := 0; try < 12; try++ {
			s := f.solveChain(p, lambda, false)
			old := make([][][]float64, len(f.clips))
			trial := f.stepped(p, s.step)
			for c := range f.clips {
				k := &f.clips[c]
				old[c] = make([][]float64, len(k.segments))
				for i := range k.segments {
					g := &k.segments[i]
					old[c][i] = append([]float64(nil), g.y...)
					g.swap()
					k.model.Displace(g.y, f.capped(s.moves[c][i]))
					k.model.Normalise(g.y)
				}
			}
			if err := f.shootAll(ctx, trial, false, false); err != nil {
				if ctx.Err() != nil {
					return err
				}
				trial = nil
			}
			next := math.Inf(1)
			if trial != nil {
				next, _, _ = f.merit(trial)
			}
			if next < now {
				fell = (now - next) / now
				p, now = trial, next
				f.setValues(p)
				lambda = math.Max(lambda*0.1, 1e-9)
				accepted = true
				break
			}
			for c := range f.clips {
				for i := range f.clips[c].segments {
					copy(f.clips[c].segments[i].y, old[c][i])
					f.clips[c].segments[i].swap()
				}
			}
			if next-now < 1e-9*now { // nothing more to gain
				break
			}
			lambda = math.Max(lambda*8, 1e-6)
		}
		if !accepted {
			if err := f.shootAll(ctx, p, false, false); err != nil {
				return err
			}
			f.converged, f.why = true, "no step lowers the sum of squares any more"
			break
		}
		if fell < enough {
			f.converged, f.why = true, fmt.Sprintf("the sum of squares fell by less than %.0e in a step", enough)
			break
		}
		stale++
		all := fresh || stale >= 4
		if all {
			stale = 0
		}
		if round+1 < rounds {
			f.regauge()
			if err := f.shootAll(ctx, p, true, all); err != nil {
				return err
			}
			now, _, _ = f.merit(p)
		}
	}
	f.chi2 = now
	return nil
}

// polish takes plain Gauss–Newton steps until the next one is foreseen to lower
// the sum of squares by next to nothing. It does not ask whether each step lowers
// it: near the optimum the integration's own error hides that.
func (f *fitter) polish(ctx context.Context) error {
	// closing is by how much more the sum of squares may be once the gaps are closed.
	const rounds, enough, nearly, closing = 20, 1e-3, 0.35, 0.02
	p := f.values()
	f.converged, f.exact = false, true
	tol := f.tol
	f.tol = 1e-11 // an integration's scatter over a difference's step must be small
	f.lax = meritBind
	if !f.oneMotion {
		f.lax = 30 * meritBind // a long step's gaps are closed by the next one
	}
	defer func() { f.exact, f.tol, f.lax = false, tol, meritBind }()
	if err := f.shootAll(ctx, p, true, true); err != nil {
		return err
	}
	now, _, rows := f.merit(p)
	lambda, unit, fall := 0.0, 1.0, math.Inf(1)
	failed, ahead := 0, 0
	// A step that lets the sum of squares rise is followed for a while, since in a
	// narrow bent valley the next ones may lead lower (a watchdog: R. M. Chamberlain
	// et al., Mathematical Programming Study 16 (1982) 1); best is where to go back to.
	best := f.mark(p, now)
	done := false
	for round := range rounds {
		unit = math.Max(1, best.merit/float64(rows)) // what a standard uncertainty counts, misfit included
		if unit > plainMisfit*plainMisfit || f.widened > plainMisfit {
			unit = math.Max(unit, 2e-3*best.merit) // and the residuals hang together
		}
		f.final = f.solveChain(p, 0, true)
		fall = f.final.foreseen()
		_, data, _ := f.merit(p)
		f.opt.log("polish: r.m.s. residual %.6g, gaps %.2g rad, foreseen %.2g, damped by %.1g", math.Sqrt(data/float64(rows)), f.gaps(), fall, lambda)
		if ahead > 0 && fall < enough*unit && now < best.merit+closing*best.merit {
			// Nothing is foreseen from here: best was only lower for its gaps.
			f.setValues(p)
			best, ahead, done = f.mark(p, now), 0, true
			break
		}
		if ahead == 0 && (fall < enough*unit || (failed > 0 || round > 6) && fall < nearly*unit || failed > 6) {
			done = true
			break
		}
		s := f.final
		if lambda > 0 {
			s = f.solveChain(p, lambda, false)
		}
		p = f.stepped(p, s.step)
		for c := range f.clips {
			k := &f.clips[c]
			for i := range k.segments {
				g := &k.segments[i]
				k.model.Displace(g.y, f.capped(s.moves[c][i]))
				k.model.Normalise(g.y)
			}
		}
		err := f.shootAll(ctx, p, false, false)
		if ctx.Err() != nil {
			return err
		}
		now, _, _ = f.merit(p)
		far := fall > 0.05*unit
		switch {
		case err == nil && now < best.merit+0.2*unit:
			failed, ahead = 0, 0
			f.setValues(p)
			best = f.mark(p, now)
			if lambda /= 3; lambda < 1e-6 {
				lambda = 0
			}
		case err == nil && ahead < 3 && now < 1e4*best.merit:
			ahead, far = ahead+1, true
		default:
			p = f.restore(best)
			lambda, far = math.Max(10*lambda, 1e-5), true
			failed, ahead = failed+1, 0
			if err := f.shootAll(ctx, p, false, false); err != nil {
				return err
			}
		}
		if far { // the derivatives are found anew where the step was not small
			f.regauge()
			if err := f.shootAll(ctx, p, true, true); err != nil {
				return err
			}
		}
	}
	if !done {
		p = f.restore(best)
		if err := f.shootAll(ctx, p, true, true); err != nil {
			return err
		}
		f.final = f.solveChain(p, 0, true)
		fall = f.final.foreseen()
	}
	now = best.merit
	f.converged = fall < unit
	f.why = fmt.Sprintf("one more step is foreseen to lower the sum of squares by %.1g", fall)
	f.unsettled = fall > 0.1*unit
	if failed >= givenUp && fall < trifle*best.merit && f.rms() < clearMisfit {
		// The foreseen is the derivatives' error in a direction that hardly anything
		// determines; the step is counted as an uncertainty.
		f.converged = true
		f.why = fmt.Sprintf("no step lowers the sum of squares any more, though one is foreseen to by %.1g", fall)
	}
	if f.converged && f.unsettled {
		f.cautions = append(f.cautions, "The matching settled only to within about one standard uncertainty of its numbers; what is left is in their uncertainties.")
	}
	f.chi2 = now
	return nil
}

const (
	givenUp = 4    // failures at ever stronger damping, after which no step lowers anything
	trifle  = 0.05 // share of the sum of squares that may yet be foreseen then
)

// place is a point of the search.
type place struct {
	p      []float64
	states [][]float64
	merit  float64
}

func (f *fitter) mark(p []float64, merit float64) place {
	m := place{p: p, merit: merit}
	for c := range f.clips {
		for i := range f.clips[c].segments {
			m.states = append(m.states, slices.Clone(f.clips[c].segments[i].y))
		}
	}
	return m
}

// restore goes back to a marked place; what was computed there is not.
func (f *fitter) restore(m place) []float64 {
	n := 0
	for c := range f.clips {
		for i := range f.clips[c].segments {
			copy(f.clips[c].segments[i].y, m.states[n])
			n++
		}
	}
	f.setValues(m.p)
	return m.p
}

// foreseen is how much the step of the parameters lowers the sum of squares in
// the linear approximation.
func (s *system) foreseen() float64 {
	sum := 0.0
	for i := range s.np {
		x := 0.0
		for j := i; j < s.np; j++ {
			x += s.plain[i*(s.np+1)+j] * s.step[j]
		}
		sum += x * x
	}
	return sum
}

// inside is the step from x by d, shortened where it would leave the bounds, or
// change a number that is surely above zero by more than a factor of four.
func (q *param) inside(x, d float64) float64 {
	y := x + d
	if q.positive && x > 0 {
		y = math.Min(math.Max(y, x/4), 4*x)
	}
	y = math.Min(math.Max(y, q.lo), q.hi)
	if y == x+d {
		return d
	}
	return y - x
}

// stepped is p moved by step, kept inside the bounds.
func (f *fitter) stepped(p, step []float64) []float64 {
	out := make([]float64, len(p))
	for j := range p {
		q := &f.params[j]
		x := p[j] + q.inside(p[j], step[j])
		out[j] = math.Min(math.Max(x, q.lo), q.hi)
	}
	return out
}

// capped limits a state's move to half a radian.
func (f *fitter) capped(d []float64) []float64 {
	most := 0.0
	for v, x := range d {
		if v >= len(d)/2 {
			x /= f.omega()
		}
		most = math.Max(most, math.Abs(x))
	}
	if most <= 0.5 {
		return d
	}
	out := make([]float64, len(d))
	for v := range d {
		out[v] = d[v] * 0.5 / most
	}
	return out
}
