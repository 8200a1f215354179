// Package ode integrates ordinary differential equations y' = f(t, y).
// What comes in: a right-hand side, a start, tolerances, and functions whose
// zeros are events. What goes out: the state at each accepted step, a
// polynomial of order 7 between two steps, and the times of events. Units are
// the caller's. It imports nothing of ours.
//
// The method is DOP853: explicit Runge-Kutta of order 8 by Dormand and Prince
// with error estimates of order 5 and 3, step size by a PI controller, and
// dense output of order 7 (Hairer, Nørsett, Wanner, "Solving Ordinary
// Differential Equations I", 2nd ed. 1993, II.4 to II.6, II.10). After the
// first step nothing is allocated.
package ode

import (
	"fmt"
	"math"
)

// Func writes the derivative at (t, y) to dy. It must not keep or change y.
type Func func(t float64, y, dy []float64)

// Options sets how a Solver works. The zero value is useful.
type Options struct {
	RelTol float64 // error per step relative to |y|; default 1e-8
	AbsTol float64 // error per step for small y; default 1e-8
	// AbsTols, when given, has one absolute tolerance per component of y and
	// stands in AbsTol's place. Inf takes a component out of the control.
	AbsTols   []float64
	FirstStep float64 // default: found by itself
	MaxStep   float64 // default: none
	MaxSteps  int     // tried steps since Reset before an error; default 100 million
}

// Stats counts what a Solver did since New.
type Stats struct {
	Steps, Rejected, Evaluations int
}

// Solver takes steps. It holds all work space; it is not for concurrent use.
type Solver struct {
	n   int
	rhs Func
	opt Options

	t, tOld          float64
	h                float64 // the next step to try, signed; 0: not known
	facOld           float64
	rejectedLast     bool
	dense            bool
	haveStep         bool
	tried            int
	y, yOld, yNew, w []float64
	k1, kOld, kNew   []float64
	k2, k3, k4, k5   []float64
	k6, k7, k8, k9   []float64
	k10, k11, k12    []float64
	k14, k15, k16    []float64
	coef             []float64 // 8 per component

	ev    eventState
	stats Stats
}

// New returns a Solver for n equations.
func New(n int, f Func, opt Options) *Solver {
	if opt.RelTol <= 0 {
		opt.RelTol = 1e-8
	}
	if opt.AbsTol <= 0 {
		opt.AbsTol = 1e-8
	}
	if opt.MaxSteps <= 0 {
		opt.MaxSteps = 100_000_000
	}
	s := &Solver{n: n, rhs: f, opt: opt, facOld: 1e-4}
	work := make([]float64, 30*n)
	for _, p := range []*[]float64{
		&s.y, &s.yOld, &s.yNew, &s.w, &s.k1, &s.kOld, &s.kNew,
		&s.k2, &s.k3, &s.k4, &s.k5, &s.k6, &s.k7, &s.k8, &s.k9, &s.k10, &s.k11, &s.k12,
		&s.k14, &s.k15, &s.k16,
	} {
		*p, work = work[:n:n], work[n:]
	}
	s.coef = work[: 8*n : 8*n]
	return s
}

func (s *Solver) f(t float64, y, dy []float64) {
	s.stats.Evaluations++
	s.rhs(t, y, dy)
}

// Reset puts the solver at (t, y): at the start, or after something made the
// state or the equations jump. The size of the next step is kept from before
// the jump, if there was one; the events that made the jump do not fire again
// at its own instant.
func (s *Solver) Reset(t float64, y []float64) {
	s.t, s.tOld = t, t
	copy(s.y, y)
	s.f(t, s.y, s.k1)
	s.facOld, s.rejectedLast, s.dense, s.haveStep, s.tried = 1e-4, false, false, false, 0
	s.ev.started = false
}

// Time is where the solver is.
func (s *Solver) Time() float64 { return s.t }

// TimeBefore is where the last step began.
func (s *Solver) TimeBefore() float64 { return s.tOld }

// State is the state at Time. It is the solver's own; do not change it.
func (s *Solver) State() []float64 { return s.y }

// Rate is the derivative at Time. It is the solver's own; do not change it.
func (s *Solver) Rate() []float64 { return s.k1 }

// Stats tells how much was done so far.
func (s *Solver) Stats() Stats { return s.stats }

// SetStep sets the size of the next step to try; 0 lets the solver find it.
func (s *Solver) SetStep(h float64) { s.h = h }

// scale is the error allowed in component i, as a length.
func (s *Solver) scale(i int, a, b float64) float64 {
	abs := s.opt.AbsTol
	if s.opt.AbsTols != nil {
		abs = s.opt.AbsTols[i]
	}
	return abs + s.opt.RelTol*math.Max(math.Abs(a), math.Abs(b))
}

// Step takes one step that the error control accepts, towards tEnd and never
// beyond it. It returns an error when the step would have to become too small
// to change t, or when the derivative is not a number.
func (s *Solver) Step(tEnd float64) error {
	const (
		safety  = 0.85 // fewest evaluations for its error on the lantern, tried 0.8 to 0.9
		beta    = 0.04 // stabilisation, Hairer et al. (II.4, IV.2)
		expo    = 1.0/8 - 0.2*beta
		slowest = 1 / 0.333 // the step shrinks at most to a third
		fastest = 1 / 6.0   // and grows at most sixfold
	)
	if tEnd == s.t {
		return nil
	}
	dir := math.Copysign(1, tEnd-s.t)
	if s.h == 0 || s.h*dir < 0 {
		if s.opt.FirstStep > 0 {
			s.h = dir * s.opt.FirstStep
		} else {
			s.h = s.firstStep(dir, math.Abs(tEnd-s.t))
		}
	}
	for {
		h := s.h
		if s.opt.MaxStep > 0 && math.Abs(h) > s.opt.MaxStep {
			h = dir * s.opt.MaxStep
		}
		// A step that would leave a crumb before the end goes to the end.
		last := false
		if (s.t+1.01*h-tEnd)*dir > 0 {
			h, last = tEnd-s.t, true
		}
		if s.tried++; s.tried > s.opt.MaxSteps {
			return fmt.Errorf("more than %d steps by t = %g: the motion is too quick for the tolerance; loosen it or shorten the time", s.opt.MaxSteps, s.t)
		}
		if math.Abs(h) <= 4e-16*math.Abs(s.t) && !last {
			return fmt.Errorf("the step became too small at t = %g: the motion runs into a singular place there", s.t)
		}
		s.dense = false // the stages below overwrite those of the step before
		s.stages(h)
		err := s.errorOf(h)
		if math.IsNaN(err) || math.IsInf(err, 0) {
			if math.Abs(h) < 1e-14*(1+math.Abs(s.t)) {
				return fmt.Errorf("the equations give no number near t = %g: the motion runs into a singular place there", s.t)
			}
			s.stats.Rejected++
			s.rejectedLast = true
			s.h = 0.1 * h
			continue
		}
		fac11 := 0.0
		if err > 0 {
			fac11 = roughPower(err, expo)
		}
		if err > 1 {
			s.stats.Rejected++
			s.rejectedLast = true
			s.h = h / math.Min(slowest, fac11/safety)
			continue
		}
		fac := fac11 / roughPower(s.facOld, beta)
		fac = math.Max(fastest, math.Min(slowest, fac/safety))
		next := h / fac
		if s.rejectedLast && math.Abs(next) > math.Abs(h) {
			next = h
		}
		s.facOld = math.Max(err, 1e-4)
		s.rejectedLast = false
		if !last || math.Abs(next) < math.Abs(s.h) {
			s.h = next
		}
		tNew := s.t + h
		if last {
			tNew = tEnd
		}
		s.accept(tNew)
		return nil
	}
}

// roughPower is x^p for x > 0 and small p, to a few parts in a thousand: enough
// for a step size, and several times quicker than math.Pow. It takes the binary
// logarithm as exponent plus a parabola through the mantissa, and back.
func roughPower(x, p float64) float64 {
	bits := math.Float64bits(x)
	mantissa := math.Float64frombits(bits&(1<<52-1) | 1023<<52) // 1 to 2
	log := float64(int(bits>>52)-1023) + (mantissa-1)*(4.0/3-(mantissa-1)/3)
	y := log * p
	whole := math.Floor(y)
	part := y - whole
	return math.Float64frombits(uint64(int(whole)+1023)<<52) * (1 + part*(2.0/3+part/3))
}

// accept makes the state just tried the present one.
func (s *Solver) accept(tNew float64) {
	s.f(tNew, s.yNew, s.kNew)
	s.tOld, s.t = s.t, tNew
	s.yOld, s.y, s.yNew = s.y, s.yNew, s.yOld
	s.kOld, s.k1, s.kNew = s.k1, s.kNew, s.kOld
	s.dense, s.haveStep = false, true
	s.stats.Steps++
}

// shorten takes the last step again so that it ends at t, which lies inside it.
func (s *Solver) shorten(t float64) {
	s.y, s.yOld, s.yNew = s.yOld, s.yNew, s.y
	s.k1, s.kOld, s.kNew = s.kOld, s.kNew, s.k1
	s.t = s.tOld
	s.stages(t - s.t)
	s.accept(t)
	s.stats.Steps--
}

// firstStep guesses a first step, Hairer et al. II.4, algorithm (4.14).
func (s *Solver) firstStep(dir, most float64) float64 {
	if s.opt.MaxStep > 0 {
		most = math.Min(most, s.opt.MaxStep)
	}
	var d0, d1 float64
	for i, y := range s.y {
		sc := 1 / s.scale(i, y, y)
		d0 += (y * sc) * (y * sc)
		d1 += (s.k1[i] * sc) * (s.k1[i] * sc)
	}
	h := 1e-6
	if d0 > 1e-10 && d1 > 1e-10 {
		h = 0.01 * math.Sqrt(d0/d1)
	}
	h = math.Min(h, most)
	for i, y := range s.y {
		s.w[i] = y + dir*h*s.k1[i]
	}
	s.f(s.t+dir*h, s.w, s.k2)
	var d2 float64
	for i, y := range s.y {
		d := (s.k2[i] - s.k1[i]) / s.scale(i, y, y)
		d2 += d * d
	}
	d2 = math.Sqrt(d2) / h
	big := math.Max(math.Sqrt(d1), d2)
	h1 := math.Max(1e-6, h*1e-3)
	if big > 1e-15 {
		h1 = math.Pow(0.01/big, 1.0/8)
	}
	h = math.Min(math.Min(100*h, h1), most)
	if math.IsNaN(h) || h <= 0 {
		h = 1e-6
	}
	return dir * h
}

// At writes the state at time t of the last step to dst, by the dense output.
// t may lie a little outside of the step, with less accuracy.
func (s *Solver) At(t float64, dst []float64) {
	if !s.haveStep || t == s.t {
		copy(dst, s.y)
		return
	}
	if t == s.tOld {
		copy(dst, s.yOld)
		return
	}
	s.prepareDense()
	evalDense(s.coef, (t-s.tOld)/(s.t-s.tOld), dst[:s.n])
}

// evalDense evaluates the dense output's nested polynomial at u in [0, 1],
// Hairer et al. II.6, as the code dop853 writes it.
func evalDense(coef []float64, u float64, dst []float64) {
	v := 1 - u
	for i := range dst {
		c := coef[8*i : 8*i+8 : 8*i+8]
		dst[i] = c[0] + u*(c[1]+v*(c[2]+u*(c[3]+v*(c[4]+u*(c[5]+v*(c[6]+u*c[7]))))))
	}
}
