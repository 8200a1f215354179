package lsq

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// check looks at the shapes of what came in and fills in the defaults.
func check(pr *Problem, start []float64, opt *Options) error {
	switch {
	case pr.N <= 0 || pr.M <= 0:
		return fmt.Errorf("lsq: a problem needs parameters and residuals, it has N = %d, M = %d", pr.N, pr.M)
	case pr.Residuals == nil:
		return errors.New("lsq: a problem needs a residual function")
	case len(start) != pr.N:
		return fmt.Errorf("lsq: the start has %d parameters, the problem %d", len(start), pr.N)
	}
	for _, l := range []struct {
		what string
		n    int
	}{{"Names", len(pr.Names)}, {"Lo", len(pr.Lo)}, {"Hi", len(pr.Hi)}, {"Scale", len(pr.Scale)}, {"Hold", len(pr.Hold)}} {
		if l.n != 0 && l.n != pr.N {
			return fmt.Errorf("lsq: %s has %d entries for %d parameters", l.what, l.n, pr.N)
		}
	}
	if pr.Names == nil {
		pr.Names = make([]string, pr.N)
		for i := range pr.Names {
			pr.Names[i] = fmt.Sprintf("p%d", i+1)
		}
	}
	if pr.Hold == nil {
		pr.Hold = make([]bool, pr.N)
	}
	fill := func(x []float64, v float64) []float64 {
		if x != nil {
			return x
		}
		return slices.Repeat([]float64{v}, pr.N)
	}
	pr.Lo, pr.Hi = fill(pr.Lo, math.Inf(-1)), fill(pr.Hi, math.Inf(1))
	pr.Scale = slices.Clone(fill(pr.Scale, 0))
	pr.least = slices.Clone(pr.Scale)
	for i, name := range pr.Names {
		if math.IsNaN(start[i]) || math.IsInf(start[i], 0) {
			return fmt.Errorf("lsq: the start of %s is %v", name, start[i])
		}
		if !pr.Hold[i] && !(pr.Lo[i] < pr.Hi[i]) {
			return fmt.Errorf("lsq: the bounds of %s leave no room: %v … %v", name, pr.Lo[i], pr.Hi[i])
		}
		if !(pr.Scale[i] > 0) || math.IsInf(pr.Scale[i], 0) {
			pr.Scale[i] = math.Abs(start[i])
			pr.least[i] = 0.01 * pr.Scale[i]
			if pr.Scale[i] == 0 {
				pr.Scale[i], pr.least[i] = 1, 1
			}
		}
	}
	if len(pr.Prior) > 0 && !opt.SigmaKnown {
		return errors.New("lsq: priors need residuals in units of their standard uncertainty (Options.SigmaKnown)")
	}
	for _, p := range pr.Prior {
		if p.Parameter < 0 || p.Parameter >= pr.N || !(p.U > 0) || math.IsNaN(p.Value) {
			return fmt.Errorf("lsq: prior on parameter %d of %d with value %v and uncertainty %v", p.Parameter, pr.N, p.Value, p.U)
		}
	}
	free := 0
	for _, h := range pr.Hold {
		if !h {
			free++
		}
	}
	if rows := pr.M + len(pr.Prior); free > rows {
		return fmt.Errorf("lsq: %d residuals cannot determine %d free parameters: hold some or give more data", rows, free)
	}
	def := func(x *float64, v float64) {
		if *x <= 0 {
			*x = v
		}
	}
	def(&opt.TolF, 1e-16)
	def(&opt.TolP, 1e-12)
	def(&opt.TolG, 1e-14)
	def(&opt.Radius, 1)
	def(&opt.DiffStep, 6.055454452393343e-06)
	def(&opt.RankTol, 1e-7)
	if pr.Jacobian != nil && opt.RankTol == 1e-7 {
		opt.RankTol = 1e-11
	}
	if opt.MaxIterations <= 0 {
		opt.MaxIterations = 500
	}
	return nil
}
