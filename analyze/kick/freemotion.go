package kick

import (
	"context"
	"math"

	"lodeswing/analyze/toy"
)

// move moves a stretch from state y; res gets its residuals and place, where it is
// not nil, where the bob was.
func (f *freeFit) move(ctx context.Context, v *view, s *stretch, y []float64, res []float64, place [][3]float64) (energy float64, err error) {
	var at [][3]float64
	err = f.model.Sample(ctx, y, v.t[s.lo:s.hi+1], toy.Options{Undriven: true, Tol: 1e-9}, func(i int, y []float64) {
		at = f.model.Positions(y, at)
		f.see(v, s, i, at[f.ball.Bob], res)
		if place != nil {
			place[i] = at[f.ball.Bob]
		}
		if s.lo+i == s.mid {
			energy = f.own(y)
		}
	})
	return energy, err
}

// see enters the residuals of sample i of a stretch, the bob being at b in the toy.
func (f *freeFit) see(v *view, s *stretch, i int, b [3]float64, res []float64) {
	k := 1 + f.longer/math.Abs(f.arm[2])
	for e := range 3 {
		b[e] = f.pivot[e] + (b[e]-f.pivot[e])*k + f.shift[e]
	}
	u, w := v.moved.BobToPixel(b[0], b[1], b[2], f.radius)
	du, dv := v.at[s.lo+i][0]-u, v.at[s.lo+i][1]-w
	q := &v.white[s.lo+i]
	res[2*i], res[2*i+1] = q[0]*du, q[1]*du+q[2]*dv
}

const (
	ownAngle  = 1e-6 // rad, steps of a stretch's own unknowns
	ownRate   = 1e-5 // rad/s
	usualSpin = 20.0 // rad/s: no toy of this kind spins much faster
)

// ownSlopes fills the derivatives of a stretch by its own unknowns.
func (f *freeFit) ownSlopes(ctx context.Context, v *view, s *stretch) error {
	n, q, p := len(s.res), len(f.dims), len(f.shared)
	if len(s.jy) != n*q || len(s.jt) != n*p {
		s.jy, s.jt = make([]float64, n*q), make([]float64, n*p)
		s.ey, s.et = make([]float64, q), make([]float64, p)
	}
	other := make([]float64, n)
	d := make([]float64, 2*f.model.Freedoms())
	y := make([]float64, len(s.y))
	for j, dim := range f.dims {
		h := ownAngle
		if dim >= f.model.Freedoms() {
			h = ownRate
		}
		for i := range d {
			d[i] = 0
		}
		d[dim] = h
		copy(y, s.y)
		f.model.Displace(y, d)
		e2, err := f.move(ctx, v, s, y, other, nil)
		if err != nil {
			return err
		}
		for i := range other {
			s.jy[i*q+j] = (other[i] - s.res[i]) / h
		}
		s.ey[j] = (e2 - s.energy) / h
	}
	return nil
}

// sharedSlopes fills the derivatives by the common numbers.
func (f *freeFit) sharedSlopes(ctx context.Context) error {
	at := make([]float64, len(f.shared))
	for i := range at {
		at[i] = f.shared[i].x
	}
	p := len(f.shared)
	for j := range f.shared {
		h := f.shared[j].step
		at[j] += h
		f.set(at)
		at[j] -= h
		for _, v := range f.views {
			for _, s := range v.free {
				other := make([]float64, len(s.res))
				e, err := s.energy, error(nil)
				if f.shared[j].seen {
					for i, b := range s.place {
						f.see(v, s, i, b, other)
					}
				} else if e, err = f.move(ctx, v, s, s.y, other, nil); err != nil {
					return err
				}
				for i := range other {
					s.jt[i*p+j] = (other[i] - s.res[i]) / h
				}
				s.et[j] = (e - s.energy) / h
			}
		}
	}
	f.set(nil)
	return nil
}

// cost is the sum of squares of residuals and of what was known before.
func (f *freeFit) cost() float64 {
	sum := 0.0
	for _, v := range f.views {
		for _, s := range v.free {
			for _, r := range s.res {
				sum += r * r
			}
			sum += sq(f.spinOf(s) / usualSpin)
		}
	}
	for i := range f.shared {
		if s := &f.shared[i]; s.prior > 0 {
			sum += sq(s.x / s.prior)
		}
	}
	return sum
}

// spinOf is a stretch's turning about the part's own axis as it begins, rad/s.
func (f *freeFit) spinOf(s *stretch) float64 {
	_, _, _, _, spin := f.model.Ball(s.y, f.part)
	return spin
}
