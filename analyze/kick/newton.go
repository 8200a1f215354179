package kick

import (
	"context"
	"errors"
	"fmt"
	"math"
)

// solve lays the free motion through all stretches, by Levenberg's and Marquardt's
// method, in so many rounds at most.
func (f *freeFit) solve(ctx context.Context, rounds int) error {
	count := 0
	for _, v := range f.views {
		for _, s := range v.free {
			if s.y == nil {
				s.y = f.begin(v, s.lo)
			}
			count++
		}
	}
	if count < leastPasses+1 {
		return fmt.Errorf("kick: only %d stretches of free motion between the coil's pushes were seen; film for longer, or at more frames a second", count)
	}
	if err := f.residuals(ctx); err != nil {
		return err
	}
	damp, cost := 1e-3, f.cost()
	for range rounds {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := f.slopes(ctx); err != nil {
			return err
		}
		was := f.state()
		fell := false
		for range 6 {
			step, err := f.normal(damp)
			if err != nil {
				return err
			}
			f.take(step)
			if err := f.residuals(ctx); err == nil {
				if now := f.cost(); now < cost {
					fell = cost-now > 2e-4*now // beyond that nothing moves by a tenth of its uncertainty
					cost, damp = now, math.Max(1e-9, damp/10)
					break
				}
			}
			f.put(was)
			if err := f.residuals(ctx); err != nil {
				return err
			}
			damp *= 10
		}
		if !fell {
			break
		}
	}
	if err := f.residuals(ctx); err != nil {
		return err
	}
	if err := f.slopes(ctx); err != nil {
		return err
	}
	step, err := f.normal(0)
	if err != nil {
		return err
	}
	for i := range step.blocks {
		b := &step.blocks[i]
		b.s.judge(b.inv, b.ab, len(f.dims), len(f.shared))
	}
	return f.conclude(ctx, step.cov)
}

// approach solves roughly, from several strengths of the magnets where the rig gives
// not even a start.
func (f *freeFit) approach(ctx context.Context) error {
	tries := []float64{0}
	if len(f.guessed) > 0 {
		tries = []float64{-0.7, 0, 2} // of a start of 1 A·m²
	}
	first := f.state()
	best, least := first, math.Inf(1)
	var failed error
	for _, x := range tries {
		f.put(first)
		for _, g := range f.guessed {
			f.shared[g].x = x
		}
		f.set(nil)
		for _, v := range f.views {
			for _, s := range v.free {
				s.y = nil
			}
		}
		if err := f.solve(ctx, 5); err != nil {
			if ctx.Err() != nil {
				return ctx.Err()
			}
			failed = err
			continue
		}
		if c := f.cost(); c < least {
			least, best = c, f.state()
		}
	}
	if math.IsInf(least, 1) {
		return failed
	}
	f.put(best)
	return nil
}

// residuals moves all stretches.
func (f *freeFit) residuals(ctx context.Context) error {
	for _, v := range f.views {
		for _, s := range v.free {
			if n := s.hi - s.lo + 1; len(s.place) != n {
				s.res, s.place = make([]float64, 2*n), make([][3]float64, n)
			}
			var err error
			if s.energy, err = f.move(ctx, v, s, s.y, s.res, s.place); err != nil {
				return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
			}
		}
	}
	return nil
}

func (f *freeFit) slopes(ctx context.Context) error {
	for _, v := range f.views {
		for _, s := range v.free {
			if err := f.ownSlopes(ctx, v, s); err != nil {
				return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
			}
		}
	}
	if err := f.sharedSlopes(ctx); err != nil {
		return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
	}
	return nil
}

// state keeps all unknowns, and put puts them back.
func (f *freeFit) state() (x [][]float64) {
	x = append(x, nil)
	for i := range f.shared {
		x[0] = append(x[0], f.shared[i].x)
	}
	for _, v := range f.views {
		for _, s := range v.free {
			x = append(x, append([]float64(nil), s.y...))
		}
	}
	return x
}

func (f *freeFit) put(x [][]float64) {
	for i := range f.shared {
		f.shared[i].x = x[0][i]
	}
	n := 1
	for _, v := range f.views {
		for _, s := range v.free {
			copy(s.y, x[n])
			n++
		}
	}
	f.set(nil)
}

// block is one stretch's part of the normal equations: the inverse of its own, own
// times common, and the right-hand side.
type block struct {
	s            *stretch
	inv, ab, rhs []float64
}

// newton is one step of all unknowns, and the covariance of the common ones.
type newton struct {
	blocks []block
	cov    []float64
	common []float64
}

// normal solves the normal equations with each stretch's own unknowns eliminated.
func (f *freeFit) normal(damp float64) (*newton, error) {
	p, q := len(f.shared), len(f.dims)
	step := &newton{common: make([]float64, p)}
	sum, rhs := make([]float64, p*p), make([]float64, p)
	for i := range f.shared {
		if s := &f.shared[i]; s.prior > 0 {
			sum[i*p+i] += 1 / sq(s.prior)
			rhs[i] -= s.x / sq(s.prior)
		} else {
			sum[i*p+i] += 1e-12 / sq(s.step)
		}
	}
	for _, v := range f.views {
		for _, s := range v.free {
			b := block{s: s, ab: make([]float64, q*p), rhs: make([]float64, q)}
			aa := make([]float64, q*q)
			for i := range s.res {
				own, all := s.jy[i*q:(i+1)*q], s.jt[i*p:(i+1)*p]
				for j, x := range own {
					b.rhs[j] -= x * s.res[i]
					for k, y := range own {
						aa[j*q+k] += x * y
					}
					for k, y := range all {
						b.ab[j*p+k] += x * y
					}
				}
				for j, x := range all {
					rhs[j] -= x * s.res[i]
					for k, y := range all {
						sum[j*p+k] += x * y
					}
				}
			}
			// The spin about its own axis hardly shows.
			aa[(q-1)*q+q-1] += 1 / sq(usualSpin)
			b.rhs[q-1] -= f.spinOf(s) / sq(usualSpin)
			for j := range q {
				aa[j*q+j] *= 1 + damp
			}
			var ok bool
			if b.inv, ok = inverse(aa, q); !ok {
				return nil, errors.New("kick: a stretch of free motion does not tell where it began; look at the track's figure for jumps")
			}
			step.blocks = append(step.blocks, b)
		}
	}
	for i := range p {
		sum[i*p+i] *= 1 + damp
	}
	for i := range step.blocks {
		b := &step.blocks[i]
		for j := range q {
			for k := range q {
				w := b.inv[j*q+k]
				for a := range p {
					x := w * b.ab[j*p+a]
					rhs[a] -= x * b.rhs[k]
					for c := range p {
						sum[a*p+c] -= x * b.ab[k*p+c]
					}
				}
			}
		}
	}
	var ok bool
	if step.cov, ok = inverse(sum, p); !ok {
		return nil, errors.New("kick: the free motion between the pushes does not determine what the rig leaves open; give more numbers in the rig")
	}
	for j := range p {
		for k := range p {
			step.common[j] += step.cov[j*p+k] * rhs[k]
		}
	}
	return step, nil
}

// take moves all unknowns by a step.
func (f *freeFit) take(step *newton) {
	p, q := len(f.shared), len(f.dims)
	for j := range f.shared {
		f.shared[j].x += step.common[j]
	}
	d := make([]float64, 2*f.model.Freedoms())
	for i := range step.blocks {
		b := &step.blocks[i]
		own := append([]float64(nil), b.rhs...)
		for j := range q {
			for k := range p {
				own[j] -= b.ab[j*p+k] * step.common[k]
			}
		}
		for j := range q {
			x := 0.0
			for k := range q {
				x += b.inv[j*q+k] * own[k]
			}
			d[f.dims[j]] = x
		}
		f.model.Displace(b.s.y, d)
	}
	f.set(nil)
}

// cholesky returns the columns of L with a = L·Lᵀ.
func cholesky(a []float64, n int) ([][]float64, bool) {
	l := make([]float64, n*n)
	for i := range n {
		for j := 0; j <= i; j++ {
			s := a[i*n+j]
			for k := range j {
				s -= l[i*n+k] * l[j*n+k]
			}
			if i == j {
				if !(s > 0) {
					return nil, false
				}
				l[i*n+i] = math.Sqrt(s)
			} else {
				l[i*n+j] = s / l[j*n+j]
			}
		}
	}
	cols := make([][]float64, n)
	for e := range n {
		cols[e] = make([]float64, n)
		for i := e; i < n; i++ {
			cols[e][i] = l[i*n+e]
		}
	}
	return cols, true
}
