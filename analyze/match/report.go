package match

import (
	"context"
	"math"
)

func (f *fitter) report(ctx context.Context) (*Result, error) {
	_ = ctx
	r := &Result{Scatter: f.scatter, Converged: f.converged}
	s := f.solveChain(f.values(), 0, false)
	np := len(f.params)
	inv := invert(s.top, np)
	for j := range f.params {
		q := &f.params[j]
		u := 0.0
		for i := j; i < np; i++ {
			u += inv[j*np+i] * inv[j*np+i]
		}
		r.Estimates = append(r.Estimates, Estimate{Address: q.address, Unit: q.unit, Value: q.value, U: math.Sqrt(u), Asked: q.asked, Prior: q.prior})
	}
	return r, nil
}

// invert gives R⁻¹ (np × np) of the upper triangle in rows of np + 1.
func invert(top []float64, np int) []float64 {
	out := make([]float64, np*np)
	b := make([]float64, np)
	for j := range np {
		for i := range b {
			b[i] = 0
		}
		b[j] = 1
		back(top, np+1, np, b)
		for i := range np {
			out[i*np+j] = b[i]
		}
	}
	return out
}
