package match

import (
	"context"
	"errors"
	"math"
)

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
	if s := f.widened * f.rms(); s > plainMisfit && f.rms() > wrongShare*f.size() { // not worth the last, exact steps
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
	if f.widen() {
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
	// On free stretches, first where each begins and where the toy is in the picture,
	// then with what is asked for, in the end with all.
	const nothing, asked, all = 0, 1, 2
	descend := func(free, rounds int, enough float64) error {
		for j := range f.params {
			if q := &f.params[j]; q.role != byShiftX && q.role != byShiftZ {
				known := q.nuisance || q.prior && !q.gauge && !q.asked
				q.held = free == nothing || free == asked && known
			}
		}
		return f.descend(ctx, rounds, enough, false)
	}
	f.tol = 1e-8
	for c := range f.clips {
		f.anchor(c)
	}
	for round := 0; ; round++ { // again where a hand was found in the clip, or the toy elsewhere
		for c := range f.clips {
			span := math.Max(firstSpan, 12*f.clips[c].step())
			if err := f.starts(c, span); err != nil {
				return err
			}
		}
		f.typical()
		if err := f.seat(ctx); err != nil {
			return err
		}
		if err := descend(nothing, 4, 0.1); err != nil {
			return err
		}
		if err := descend(asked, 40, 1e-3); err != nil {
			return err
		}
		if round == 4 {
			break
		}
		again := false
		for c := range f.clips {
			again = f.findSwitch(c) || again
		}
		if !again { // a missing kick must not pass for a hand
			var err error
			if again, err = f.findHands(ctx); err != nil {
				return err
			}
		}
		if !again && !f.elsewhere() {
			break
		}
	}
	if err := descend(all, 8, 1e-2); err != nil {
		return err
	}
	if f.reweigh(); f.scatter < plainMisfit { // single samples that lie far out must not lead
		if err := f.descend(ctx, 4, 1e-2, false); err != nil {
			return err
		}
		f.reweigh()
	}
	f.opt.log("free stretches: r.m.s. residual %.4g", f.rms())
	if f.noBetter() {
		return errNoBetter
	}
	f.saddles()
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
		for {
			if err := f.descend(ctx, 20, 2e-2, false); err != nil {
				return err
			}
			f.opt.log("bound to %.1g rad: r.m.s. residual %.4g", f.bind, f.rms())
			if f.noBetter() {
				return errNoBetter
			}
			if f.rms() > mostWidened || !f.widen() {
				break
			}
		}
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

var errNoBetter = errors.New("it fits no better")

// noBetter tells whether a trial cannot fit better than giveUp any more: residuals only
// grow as the stretches are bound together.
func (f *fitter) noBetter() bool { return f.giveUp > 0 && f.widened*f.rms() > f.giveUp }

// finalBind is how far the ends of stretches may be apart in the end, rad: far
// below what a picture shows.
const finalBind = 1e-8

// looseBind is how near the ends of a regular motion's stretches are brought, rad,
// before they are made one.
const looseBind = 1e-4

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
