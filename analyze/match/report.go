package match

import (
	"context"
)

// report turns the optimum into what people read.
func (f *fitter) report(ctx context.Context) (*Result, error) {
	_ = ctx
	j, err := f.judge()
	if err != nil {
		return nil, err
	}
	r := &Result{Scatter: f.scatter, Converged: f.converged}
	for i := range f.params {
		q := &f.params[i]
		u, pictures, _ := j.of(f, j.unit(i))
		r.Estimates = append(r.Estimates, Estimate{
			Address: q.address, Unit: q.unit, Value: q.value, U: u, UPicture: pictures, Asked: q.asked, Prior: q.prior && !q.gauge,
		})
	}
	return r, nil
}
