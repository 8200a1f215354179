package lsq

import (
	"math"
	"slices"
)

// damping is one way to bound the steps: the first radius relative to
// Options.Radius, and how much of a column's greatest length so far goes on
// bounding its parameter (1: Moré's choice; 0: the present length alone).
type damping struct{ radius, memory float64 }

var dampings = [...]damping{{1, 0.5}, {1, 0.9}, {0.1, 0.7}, {0.01, 1}}

// try runs from the start. A long early step can throw a parameter to where it
// has no effect any more, and no gradient leads back: when the rank at the end is
// lower than it was at the start, or the search did not converge, it is tried
// again with other dampings, and the best end is kept.
func (s *search) try() error {
	type end struct {
		p, r []float64
		cost float64
		done bool
		why  string
		damp damping
	}
	start := end{p: slices.Clone(s.p), r: slices.Clone(s.r)}
	var best *end
	for _, d := range dampings {
		copy(s.p, start.p)
		copy(s.r, start.r)
		s.damp = d
		if err := s.run(); err != nil {
			return err
		}
		lost := s.n > 0 && s.rank() < s.rank0
		if lost {
			s.why += "; on the way a parameter lost the effect that it had at the start"
		}
		if best == nil || s.cost < best.cost {
			best = &end{slices.Clone(s.p), slices.Clone(s.r), s.cost, s.done, s.why, d}
		}
		if s.done && !lost || s.opt.Once {
			break
		}
	}
	copy(s.p, best.p)
	copy(s.r, best.r)
	s.cost, s.done, s.why, s.damp = best.cost, best.done, best.why, best.damp
	return nil
}

// rank is that of the last factored Jacobian.
func (s *search) rank() int {
	n, d := s.n, s.box.svd
	for c := range n {
		norm := s.colNorm[c]
		if norm == 0 {
			norm = 1
		}
		for i := range n {
			d.us[c*n+i] = s.tri[i*n+c] / norm
		}
	}
	d.factor(n, n)
	rank := 0
	for _, x := range d.s[:n] {
		if x > s.opt.RankTol*d.s[d.perm[0]] {
			rank++
		}
	}
	return rank
}

// robust fits again with the loss's scale found from the residuals, until the
// scale stays. The first fit was made with plain squares when no scale is known.
func (s *search) robust() error {
	if s.opt.Loss.Scale > 0 || s.opt.SigmaKnown {
		return nil
	}
	buf := make([]float64, s.pr.M)
	for range 50 {
		old := s.k
		scale := medianAbs(s.r[:s.pr.M], buf) / 0.6745
		if scale == 0 {
			s.why += "; more than half of the residuals vanish, so no outlier could be told"
			return nil
		}
		s.k = scale * s.opt.Loss.tuning()
		if math.Abs(s.k-old) <= 1e-6*s.k {
			return nil
		}
		if err := s.run(); err != nil {
			return err
		}
	}
	return nil
}
