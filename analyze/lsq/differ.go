package lsq

import (
	"fmt"
	"math"
	"sync"
	"sync/atomic"
)

// differ fills the Jacobian by differences: central ones inside the bounds, the
// three-point formula to one side where a bound or a place without a model is
// in the way (both of second order).
type differ struct {
	s     *search
	hands []hand
	next  atomic.Int64
}

// hand is one worker's room.
type hand struct {
	p      []float64
	up, dn []float64
	evals  int
	err    error
}

func newDiffer(s *search) *differ {
	d := &differ{s: s, hands: make([]hand, max(1, min(s.opt.Workers, s.n)))}
	for i := range d.hands {
		d.hands[i] = hand{p: make([]float64, s.pr.N), up: make([]float64, s.pr.M), dn: make([]float64, s.pr.M)}
	}
	return d
}

func (d *differ) fill() error {
	d.next.Store(0)
	if len(d.hands) == 1 {
		d.work(&d.hands[0])
	} else {
		var wg sync.WaitGroup
		for i := range d.hands {
			wg.Go(func() { d.work(&d.hands[i]) })
		}
		wg.Wait()
	}
	var first error
	for i := range d.hands {
		h := &d.hands[i]
		d.s.evals += h.evals
		h.evals = 0
		if h.err != nil && first == nil {
			first = h.err
		}
		h.err = nil
	}
	return first
}

// work takes columns until none is left.
func (d *differ) work(h *hand) {
	copy(h.p, d.s.p)
	for h.err == nil {
		c := int(d.next.Add(1)) - 1
		if c >= d.s.n || d.s.ctx.Err() != nil {
			return
		}
		h.err = d.column(h, c)
		h.p[d.s.free[c]] = d.s.p[d.s.free[c]]
	}
}

// column fills column c.
func (d *differ) column(h *hand, c int) error {
	s := d.s
	j := s.free[c]
	at := s.p[j]
	col := s.jac[c*s.m : c*s.m+s.pr.M]
	step := s.opt.DiffStep * max(math.Abs(at), s.pr.least[j])
	room := max(s.pr.Hi[j]-at, at-s.pr.Lo[j])
	var lastErr error
	for range 8 {
		up, dn := at+step, at-step
		if up <= s.pr.Hi[j] && dn >= s.pr.Lo[j] {
			ok, err := h.pair(s, j, up, dn)
			if ok {
				f := 1 / (up - dn)
				for i := range col {
					col[i] = (h.up[i] - h.dn[i]) * f
				}
				return nil
			}
			lastErr = err
		}
		// One side: r'(p) ≈ (−3r₀ + 4r₁ − r₂)/(2h) with h of either sign.
		for _, side := range [...]float64{step, -step} {
			one, two := at+side, at+2*side
			if two > s.pr.Hi[j] || two < s.pr.Lo[j] {
				continue
			}
			ok, err := h.pair(s, j, one, two)
			if !ok {
				lastErr = err
				continue
			}
			f := 1 / (two - at)
			for i := range col {
				col[i] = (4*h.up[i] - 3*s.r[i] - h.dn[i]) * f
			}
			return nil
		}
		step = min(step/10, room/4)
	}
	if lastErr != nil {
		return fmt.Errorf("lsq: no derivative by %s at %v: %w", s.pr.Names[j], at, lastErr)
	}
	return fmt.Errorf("lsq: no derivative by %s at %v: the residuals are not finite on either side", s.pr.Names[j], at)
}

// pair evaluates the residuals at two values of parameter j; ok is false when
// one of them does not exist.
func (h *hand) pair(s *search, j int, one, two float64) (ok bool, err error) {
	for i, at := range [...]float64{one, two} {
		r := h.up
		if i == 1 {
			r = h.dn
		}
		h.p[j] = at
		h.evals++
		if err := s.pr.Residuals(h.p, r); err != nil {
			return false, err
		}
		if firstBad(r) >= 0 {
			return false, nil
		}
	}
	return true, nil
}
