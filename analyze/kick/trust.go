package kick

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/toy"
)

// dropTouched leaves out the stretches whose residuals are far beyond those of the
// others, and tells whether there were any.
func (f *freeFit) dropTouched() bool {
	per := func(s *stretch) float64 {
		sum := 0.0
		for _, r := range s.res {
			sum += r * r
		}
		return sum / math.Max(1, float64(len(s.res)-len(f.dims)))
	}
	var all []float64
	for _, v := range f.views {
		for _, s := range v.free {
			all = append(all, per(s))
		}
	}
	slices.Sort(all)
	usual := all[len(all)/2]
	n := 0
	for _, v := range f.views {
		n += len(v.free)
		v.free = slices.DeleteFunc(v.free, func(s *stretch) bool {
			odd := per(s) > 10*usual
			if odd {
				v.hands = append(v.hands, v.t[s.mid])
			}
			return odd
		})
		n -= len(v.free)
	}
	return n > 0
}

// judge keeps what a stretch's own pictures leave open of its energy, and what the
// common unknowns do to it.
func (s *stretch) judge(inv, ab []float64, q, p int) {
	s.variance = 0
	lean := make([]float64, q) // energy by its own unknowns times their covariance
	for j := range q {
		for k := range q {
			lean[j] += inv[j*q+k] * s.ey[k]
		}
	}
	for j := range q {
		s.variance += s.ey[j] * lean[j]
	}
	s.common = make([]float64, p)
	for a := range p {
		s.common[a] = s.et[a]
		for j := range q {
			s.common[a] -= lean[j] * ab[j*p+a]
		}
	}
}

// conclude scales by the residuals, splits what is common into independent parts,
// and takes rates and frictions from the solution.
func (f *freeFit) conclude(ctx context.Context, cov []float64) error {
	p, q := len(f.shared), len(f.dims)
	chi, n := 0.0, -p
	for _, v := range f.views {
		for _, s := range v.free {
			for _, r := range s.res {
				chi += r * r
			}
			n += len(s.res) - q
		}
	}
	// Below one where the pictures were made to count for less.
	f.noise = math.Sqrt(math.Max(1, chi/float64(max(1, n))))
	for i := range cov {
		cov[i] *= sq(f.noise)
	}
	// Frictions, as the free motion tells them.
	var at []int
	var which []int
	for i := range f.shared {
		for j, q := range frictionNames {
			if f.shared[i].name == f.ball.Rig.Parts[0].Name+".friction."+q {
				at, which = append(at, i), append(which, j)
			}
		}
	}
	f.info = [9]float64{}
	if len(at) > 0 {
		c := make([]float64, len(at)*len(at))
		for i, a := range at {
			for k, b := range at {
				c[i*len(at)+k] = cov[a*p+b]
			}
			x, err := f.model.Index(f.shared[a].name)
			if err != nil {
				return err
			}
			f.friction[which[i]] = f.model.Get(x)
		}
		inv, ok := inverse(c, len(at))
		if !ok {
			return errors.New("kick: the frictions cannot be told apart")
		}
		for i := range at {
			for k := range at {
				f.info[3*which[i]+which[k]] = inv[i*len(at)+k]
			}
		}
	}
	// cov = L·Lᵀ: columns of L are independent.
	root, ok := cholesky(cov, p)
	if !ok {
		return errors.New("kick: what the rig leaves open is not determined")
	}
	f.root = root
	for _, v := range f.views {
		for _, s := range v.free {
			s.variance *= sq(f.noise)
			common := make([]float64, p)
			for e := range p {
				for a := range p {
					common[e] += s.common[a] * root[e][a]
				}
			}
			s.common = common
		}
	}
	return f.again(ctx)
}

// again takes directions, passes and rates once more, by the solution.
func (f *freeFit) again(ctx context.Context) error {
	for _, v := range f.views {
		if err := v.directions(f); err != nil {
			return fmt.Errorf("kick: %w", err)
		}
		v.meet(f)
		v.rate, v.polar = make([]float64, len(v.t)), make([]float64, len(v.t))
		for i := range v.t {
			v.rate[i], v.polar[i] = v.turning(i), math.Asin(math.Min(1, math.Hypot(v.local[i][0], v.local[i][1])))
			if math.IsNaN(v.rate[i]) && i > 0 {
				v.rate[i], v.polar[i] = v.rate[i-1], v.polar[i-1]
			}
		}
		for _, s := range v.free {
			err := f.model.Sample(ctx, s.y, v.t[s.lo:s.hi+1], toy.Options{Undriven: true, Tol: 1e-9}, func(i int, y []float64) {
				polar, _, polarRate, azimuthRate, _ := f.model.Ball(y, f.part)
				v.rate[s.lo+i], v.polar[s.lo+i] = math.Hypot(polarRate, azimuthRate*math.Sin(polar)), polar
			})
			if err != nil {
				return err
			}
		}
	}
	return nil
}

// lowest is the least potential energy along a view's path.
func (f *freeFit) lowest(v *view) float64 {
	low := math.Inf(1)
	for i := range v.t {
		if math.IsNaN(v.local[i][0]) {
			continue
		}
		y := f.begin(v, i)
		e := f.model.Energy(y)
		low = math.Min(low, e.Gravity+e.Spring+e.Magnetic)
	}
	return low
}
