package match

import (
	"context"
	"fmt"
	"math"
	"slices"
)

func median(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	s := slices.Clone(v)
	slices.Sort(s)
	return s[len(s)/2]
}

func (f *fitter) values() []float64 {
	p := make([]float64, len(f.params))
	for j := range p {
		p[j] = f.params[j].value
	}
	return p
}

func (f *fitter) setValues(p []float64) {
	for j := range p {
		f.params[j].value = p[j]
	}
}

// The stretches at first, s: short enough that a motion that starts wrongly
// cannot leave the measured one far behind.
const firstSpan = 0.2

// fit finds the optimum.
func (f *fitter) fit(ctx context.Context) error {
	if err := f.approach(ctx); err != nil {
		return err
	}
	f.reweigh()
	if s := f.rms(); s > plainMisfit && s > wrongShare*f.size() { // not worth the last, exact steps
		if err := f.shootAll(ctx, f.values(), true, true); err != nil {
			return err
		}
		f.final = f.solveChain(f.values(), 1e-3, true)
		f.converged, f.why = false, "the motion of the model stays far from the measured one"
		return nil
	}
	if err := f.polish(ctx); err != nil {
		return err
	}
	if s := f.rms(); s > clearMisfit {
		// A model that is only nearly right must not force clock, weight and camera
		// to make up for it: its residuals count as noise of their own size.
		f.widened = s
		for c := range f.clips {
			k := &f.clips[c]
			for i := range k.obs {
				o := &k.obs[i]
				o.w0, o.w1, o.w2 = o.w0/s, o.w1/s, o.w2/s
			}
		}
		f.reweigh()
		f.cautions = nil
		if err := f.polish(ctx); err != nil {
			return err
		}
	}
	f.opt.log("final: r.m.s. residual %.6g, %s", f.rms(), f.why)
	return nil
}

// approach brings free stretches together into one motion near the optimum.
func (f *fitter) approach(ctx context.Context) error {
	f.bind = math.Inf(1)
	for c := range f.clips {
		span := math.Max(firstSpan, 12*f.clips[c].step())
		if err := f.starts(c, span); err != nil {
			return err
		}
	}
	f.typical()
	// First what is asked for, on free stretches.
	hold := func(held bool) {
		for j := range f.params {
			q := &f.params[j]
			q.held = held && q.nuisance && q.role != byShiftX && q.role != byShiftZ
		}
	}
	f.tol = 1e-8
	hold(true)
	if err := f.descend(ctx, 40, 1e-3, false); err != nil {
		return err
	}
	hold(false)
	if err := f.descend(ctx, 8, 1e-2, false); err != nil {
		return err
	}
	if f.reweigh(); f.scatter < plainMisfit { // single samples that lie far out must not lead
		if err := f.descend(ctx, 4, 1e-2, false); err != nil {
			return err
		}
		f.reweigh()
	}
	f.opt.log("free stretches: r.m.s. residual %.4g", f.rms())
	f.merge()
	f.tol = 1e-9
	if err := f.shootAll(ctx, f.values(), false, false); err != nil {
		return err
	}
	free := math.Max(f.rms(), 1)
	f.bind = 1
	f.regauge()
	f.bind = math.Max(f.gaps(), 1e-6)
	by := 10.0
	least := finalBind
	if f.regular() {
		least = looseBind
	}
	for f.bind > least {
		f.bind /= by
		if f.bind < 10*finalBind {
			f.bind = finalBind
		}
		if err := f.descend(ctx, 20, 2e-2, false); err != nil {
			return err
		}
		f.opt.log("bound to %.1g rad: r.m.s. residual %.4g", f.bind, f.rms())
		if by = 10; f.rms() < 1.5*free {
			by = 100
		}
	}
	if f.regular() {
		f.bind, f.oneMotion, f.exact = finalBind, true, true
		if err := f.descend(ctx, 60, 1e-3, true); err != nil {
			return err
		}
		f.exact = false
		f.opt.log("as one motion: r.m.s. residual %.4g", f.rms())
	}
	return f.descend(ctx, 6, 1e-4, false)
}

// finalBind is how far the ends of stretches may be apart in the end, rad: far
// below what a picture shows.
const finalBind = 1e-8

// looseBind is how near the ends of a regular motion's stretches are brought, rad,
// before they are made one.
const looseBind = 1e-4

// regular tells whether a whole clip may be computed as one motion: small
// deviations grow by no more than a few hundred over it.
func (f *fitter) regular() bool {
	for c := range f.clips {
		k := &f.clips[c]
		if f.growth*(k.obs[len(k.obs)-1].t-k.obs[0].t) > 6 {
			return false
		}
	}
	return true
}

// typical finds the motion's usual speed and size.
func (f *fitter) typical() {
	var rate, angle, n float64
	for c := range f.clips {
		k := &f.clips[c]
		m := k.model
		nv := m.Freedoms()
		for v := range nv {
			mean, m2 := 0.0, 0.0
			d := make([]float64, 2*nv)
			for i := range k.segments {
				y := k.segments[i].y
				w := y[len(y)-m.Aux()-nv+v]
				rate += w * w
				m.Deviation(k.segments[0].y, y, d)
				mean += d[v]
				m2 += d[v] * d[v]
				n++
			}
			s := float64(len(k.segments))
			angle += m2 - mean*mean/s
		}
	}
	f.rate, f.angle = math.Sqrt(rate/n), math.Sqrt(angle/n)
	w := f.omega()
	for j := range f.params {
		q := &f.params[j]
		if q.role != byModel || q.scale > 0 {
			continue
		}
		owner, what := split(q.address)
		inertia := 0.0
		for c := range f.clips {
			if i, err := f.clips[c].model.Index(owner + ".inertia"); err == nil {
				inertia = f.clips[c].model.Get(i)
			}
		}
		switch what {
		case "viscous":
			q.scale = 1e-4 * inertia * w
		case "drag":
			q.scale = 1e-4 * inertia
		case "dry":
			q.scale = 1e-4 * inertia * w * f.rate
		case "rate":
			q.scale = 1e-4 * inertia * w * w
		case "cubic":
			q.scale = 1e-3 * inertia * w * w
		case "rest":
			q.scale = 1e-4
		case "moment", "remanence", "inertia", "spin_inertia", "weight moment":
			q.scale = 1e-4 * math.Max(math.Abs(q.value), 1e-6)
		case "kick":
			q.scale = math.Max(1e-3*q.value, 1e-7)
		case "eddy":
			q.scale = 1e-7
		}
	}
}

// split parts an address into the owner and the quantity.
func split(address string) (owner, what string) {
	owner = address
	for i := len(address) - 1; i >= 0; i-- {
		if address[i] == '.' {
			what = address[i+1:]
			owner = address[:i]
			break
		}
	}
	for _, s := range []string{".friction", ".spring", ".cylinder"} {
		if n := len(owner) - len(s); n > 0 && owner[n:] == s {
			owner = owner[:n]
		}
	}
	return owner, what
}

// regauge turns parts about their own axes, where that is not felt, so that each
// stretch begins turned as the one before it ended.
func (f *fitter) regauge() {
	if math.IsInf(f.bind, 1) {
		return
	}
	for c := range f.clips {
		k := &f.clips[c]
		own := k.model.OwnTurns()
		if len(own) == 0 {
			continue
		}
		d := make([]float64, 2*k.model.Freedoms())
		for i := 0; i+1 < len(k.segments); i++ {
			g := &k.segments[i+1]
			// A few rounds: turns in space do not add up simply.
			for range 4 {
				k.model.Deviation(g.y, k.segments[i].end, d)
				for _, v := range own {
					k.model.TurnOwn(g.y, v, d[v])
					if len(g.end) > 0 {
						k.model.TurnOwn(g.end, v, d[v])
					}
				}
			}
		}
	}
}

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
	const rounds, enough, nearly = 20, 1e-3, 0.35
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
		f.opt.log("polish: r.m.s. residual %.6g, gaps %.2g rad, foreseen %.2g, damped by %.1g", f.rms(), f.gaps(), fall, lambda)
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
	if f.converged && f.unsettled {
		f.cautions = append(f.cautions, "The matching settled only to within about one standard uncertainty of its numbers; what is left is in their uncertainties.")
	}
	f.chi2 = now
	return nil
}

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

// rms is the residuals' r.m.s., in units of what the pictures' noise allows.
func (f *fitter) rms() float64 {
	_, data, rows := f.merit(f.values())
	return math.Sqrt(data / float64(max(rows, 1)))
}

// gaps is the r.m.s. of what lies between the ends of stretches and the starts of
// the next, rad.
func (f *fitter) gaps() float64 {
	sum, n := 0.0, 0.0
	for c := range f.clips {
		k := &f.clips[c]
		nv := k.model.Freedoms()
		gap := make([]float64, 2*nv)
		for i := 0; i+1 < len(k.segments); i++ {
			if k.segments[i].broken {
				continue
			}
			k.model.Deviation(k.segments[i+1].y, k.segments[i].end, gap)
			for v, x := range gap {
				if v >= nv {
					x /= f.omega()
				}
				sum += x * x
				n++
			}
		}
	}
	if n == 0 {
		return 0
	}
	return math.Sqrt(sum / n)
}

// longest is the longest stretch, s, and mostGrowth how much a deviation may grow
// over one.
const (
	longest    = 2.0
	mostGrowth = 3.0
)

// merge joins stretches to as long ones as the motion's own divergence allows.
func (f *fitter) merge() {
	for c := range f.clips {
		k := &f.clips[c]
		nv := k.model.Freedoms()
		// The mean growth of deviations over a stretch, by its matrix's size.
		var growth, n float64
		for i := range k.segments {
			g := &k.segments[i]
			dt := g.t1 - g.t0
			if dt <= 0 || len(g.dend) == 0 {
				continue
			}
			sum := 0.0
			for u := range 2 * nv {
				for v := range 2 * nv {
					x := g.dend[u][v]
					if u < nv && v >= nv {
						x /= f.omega()
					}
					if u >= nv && v < nv {
						x *= f.omega()
					}
					sum += x * x
				}
			}
			growth += 0.5 * math.Log(sum/float64(2*nv)) / dt
			n++
		}
		growth = math.Max(growth/math.Max(n, 1), 0)
		f.growth = math.Max(f.growth, growth)
		span := longest
		if growth > 0 {
			span = math.Min(span, math.Log(mostGrowth)/growth)
		}
		var times []float64
		var states [][]float64
		for i := range k.segments {
			g := &k.segments[i]
			afterBreak := i > 0 && k.segments[i-1].broken
			if len(times) == 0 || afterBreak || g.broken || g.t0-times[len(times)-1] > span-1e-9 {
				times, states = append(times, g.t0), append(states, g.y)
			}
		}
		f.opt.log("%d stretches of about %.2g s (growth %.2g /s)", len(times), span, growth)
		f.cut(c, times, states)
	}
}

// reweigh gives observations that lie far out less weight (Huber), and finds the
// residuals' scatter.
func (f *fitter) reweigh() {
	p := f.values()
	var all []float64
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				all = append(all, math.Abs(r0))
				if k.dims == 2 {
					all = append(all, math.Abs(r1))
				}
			}
		}
	}
	f.scatter = median(all) / 0.6745
	limit := 4 * math.Max(f.scatter, 1)
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				r := math.Abs(r0)
				if k.dims == 2 {
					r = math.Max(r, math.Abs(r1))
				}
				q := &k.obs[g.from+o]
				q.weight = 1
				if r > limit {
					q.weight = limit / r
				}
			}
		}
	}
}
