// Package match fits the model of a toy to measured motion: how strong are the
// magnets, what do springs, friction and kicks do.
//
// What comes in: one or several tracks (or angle tables) of one unit and its rig,
// in which some numbers are marked "fit". What goes out: those numbers with their
// uncertainties and what they are made of, what the clips cannot tell, curves of
// measured against model, and the rig with the fitted numbers. SI units.
//
// The method is multiple shooting (H. G. Bock, "Recent advances in parameter
// identification techniques for O.D.E.", 1983; H. U. Voss, J. Timmer and J.
// Kurths, Int. J. Bifurcation and Chaos 14 (2004) 1905): the clip is cut into
// short stretches with a state of their own each, first free of each other, then
// bound together ever more tightly until they are one motion. Each step is a
// damped Gauss–Newton step on the pixels (or metres, or angles), solved by
// orthogonal elimination along the chain of stretches, which stays stable where
// the motion is chaotic. What is not asked for but not exactly known either
// (inertia, weight, places of magnets, the camera, the shutter, the clock) is free
// too, held by what the rig and the camera say of it.
package match

import (
	"context"
	"errors"
	"fmt"
	"runtime"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// Clip is one clip of the unit: a track, or angles.
type Clip struct {
	Name   string
	Track  *track.Track
	Angles []series.Angle // used where Track is nil
	Entry  *rig.Clip      // what differed in this clip; nil: nothing
}

// Options sets how to match. The zero value is useful.
type Options struct {
	Workers int // goroutines; 0: as many as processors
	// Quick leaves out the search for other causes where the model does not fit.
	Quick bool
	// Log, when set, gets a line about each stage.
	Log func(format string, a ...any)
}

func (o Options) workers() int {
	if o.Workers > 0 {
		return o.Workers
	}
	return runtime.GOMAXPROCS(0)
}

func (o Options) log(format string, a ...any) {
	if o.Log != nil {
		o.Log(format, a...)
	}
}

// Result is what the matching says.
type Result struct {
	Findings []finding.Finding
	Fits     []finding.Fit
	Curves   []finding.Curve
	Cautions []string
	Fitted   *rig.Rig // nil where nothing could be fitted
	// Estimates are all parameters of the fit, in SI.
	Estimates []Estimate
	Scatter   float64 // r.m.s. of the residuals over what the pictures' noise allows
	Converged bool
}

// Estimate is one parameter as fitted.
type Estimate struct {
	Address  string // as rig addresses are written where the rig has such a number
	Unit     string
	Value, U float64
	UPicture float64 // the pictures' share of U
	Asked    bool    // the rig says "fit"
	Prior    bool    // what the rig or the camera says of it took part
}

// Estimate returns the estimate at an address, or nil.
func (r *Result) Estimate(address string) *Estimate {
	for i := range r.Estimates {
		if r.Estimates[i].Address == address {
			return &r.Estimates[i]
		}
	}
	return nil
}

// ErrNothing says that the rig leaves nothing to the matching.
var ErrNothing = errors.New("the rig marks no number \"fit\", so there is nothing to match")

// Run matches the rig's toy to the clips. An error is returned where that cannot
// be done at all, in plain words.
func Run(ctx context.Context, clips []Clip, r *rig.Rig, opt Options) (*Result, error) {
	if len(clips) == 0 {
		return nil, errors.New("there is no clip to match")
	}
	if !Asks(r) {
		return nil, ErrNothing
	}
	f, err := prepare(clips, r, opt)
	if err != nil {
		return nil, err
	}
	if err := f.fit(ctx); err != nil {
		return nil, fmt.Errorf("matching %q: %w", r.Name, err)
	}
	return f.report(ctx)
}

// Asks tells whether a rig leaves any number to the matching.
func Asks(r *rig.Rig) bool {
	if len(r.Parts) == 0 {
		return false
	}
	if len(r.Fitted.Of) > 0 {
		return true
	}
	for _, n := range r.Numbers() {
		if n.Value.Fit {
			return true
		}
	}
	for i := range r.Magnets {
		if r.Magnets[i].GapFit {
			return true
		}
	}
	return false
}
