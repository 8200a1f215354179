package match

import (
	"errors"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"lodeswing/analyze/finding"
)

// judgement is what the linear problem at the optimum says: uncertainties and what
// they are made of.
type judgement struct {
	np      int
	cov     []float64 // of the parameters, residuals taken as they are (correlated)
	inverse []float64 // of the information, residuals and priors
	chi2    float64   // of the residuals alone
	rows    int
	dof     int
	// lag1 is the residuals' correlation from one frame to the next.
	lag1 float64
}

// judge finds the covariance. The states' part is projected out of the residuals'
// derivatives by the chain's own elimination.
func (f *fitter) judge() (*judgement, error) {
	np := len(f.params)
	j := &judgement{np: np}
	for q := range f.params {
		if p := &f.params[q]; p.gauge {
			p.u = math.Abs(p.value)
		}
	}
	var jac, res []float64
	var moment []int
	base := 0
	states := 0
	var num, den float64
	for c := range f.clips {
		k := &f.clips[c]
		n := 2 * k.model.Freedoms()
		states += n
		unit := make([]float64, np)
		// response[segment][v*np+q]
		response := make([][]float64, len(k.segments))
		for i := range response {
			response[i] = make([]float64, n*np)
		}
		for q := range np {
			if f.params[q].held {
				continue
			}
			unit[q] = 1
			for i, s := range f.final.states(c, unit, false) {
				for v := range n {
					response[i][v*np+q] = s[v]
				}
			}
			unit[q] = 0
		}
		step := k.step()
		t0 := k.obs[0].t
		last := 0
		lasts := map[[2]int]float64{}
		for i := range k.segments {
			g := &k.segments[i]
			b := &f.final.jac[c][i]
			for r := range b.rows {
				row := make([]float64, np)
				copy(row, b.jp[r*np:(r+1)*np])
				for v := range n {
					x := b.js[r*n+v]
					if x == 0 {
						continue
					}
					for q, s := range response[i][v*np : (v+1)*np] {
						row[q] += x * s
					}
				}
				jac = append(jac, row...)
				res = append(res, -b.r[r])
				o := &k.obs[g.from+r/k.dims]
				last = int(math.Round((o.t - t0) / step))
				moment = append(moment, base+last)
				key := [2]int{o.who, r % k.dims}
				if x, ok := lasts[key]; ok {
					num += x * b.r[r]
					den += x * x
				}
				lasts[key] = b.r[r]
			}
		}
		base += last + 1000
	}
	for _, r := range res {
		j.chi2 += r * r
	}
	j.rows = len(res)
	if den > 0 {
		j.lag1 = num / den
	}
	free := 0
	for q := range f.params {
		if !f.params[q].prior && !f.params[q].held {
			free++
		}
	}
	j.dof = max(len(res)-states-free, 1)
	return j, j.covariance(f, jac, res, moment)
}

// covariance finds the parameters' covariance from the residuals' derivatives jac
// (row-major), the residuals and the moments at which they were taken. In the basis
// in which what the residuals and what the priors know are both diagonal, with sum
// 1, each direction's share from the residuals is stretched by the long-run
// variance of its scores over what independent residuals of unit size would give.
func (j *judgement) covariance(f *fitter, jac, res []float64, moment []int) error {
	np := j.np
	// Columns to unit size first, for the sake of accuracy.
	size := make([]float64, np)
	for i := range res {
		for q, x := range jac[i*np : (i+1)*np] {
			size[q] += x * x
		}
	}
	for q := range f.params {
		if p := &f.params[q]; p.prior {
			size[q] += 1 / (p.u * p.u)
		}
		size[q] = math.Sqrt(size[q])
		if size[q] == 0 {
			size[q] = 1
		}
	}
	data := mat.NewSymDense(np, nil)
	for i := range res {
		row := jac[i*np : (i+1)*np]
		for a, x := range row {
			if x == 0 {
				continue
			}
			x /= size[a]
			for b := a; b < np; b++ {
				data.SetSym(a, b, data.At(a, b)+x*row[b]/size[b])
			}
		}
	}
	full := mat.NewSymDense(np, nil)
	full.CopySym(data)
	for q := range f.params {
		p := &f.params[q]
		switch {
		case p.held:
			full.SetSym(q, q, 1)
		case p.prior:
			full.SetSym(q, q, full.At(q, q)+1/(p.u*p.u*size[q]*size[q]))
		}
		full.SetSym(q, q, full.At(q, q)+1e-14)
	}
	// full = V diag(l) Vᵀ; z = diag(√l) Vᵀ δ has information 1.
	var eigen mat.EigenSym
	if !eigen.Factorize(full, true) {
		return errors.New("the fit's information matrix could not be decomposed")
	}
	var v mat.Dense
	eigen.VectorsTo(&v)
	root := eigen.Values(nil)
	t := mat.NewDense(np, np, nil) // δ = t z
	for c := range np {
		l := math.Sqrt(math.Max(root[c], 1e-14))
		for r := range np {
			t.Set(r, c, v.At(r, c)/l)
		}
	}
	var half, known mat.Dense
	half.Mul(data, t)
	known.Mul(t.T(), &half)
	ds := mat.NewSymDense(np, nil)
	for a := range np {
		for b := a; b < np; b++ {
			ds.SetSym(a, b, (known.At(a, b)+known.At(b, a))/2)
		}
	}
	if !eigen.Factorize(ds, true) {
		return errors.New("the fit's information matrix could not be decomposed")
	}
	var q mat.Dense
	eigen.VectorsTo(&q)
	share := eigen.Values(nil)
	var basis mat.Dense // δ = basis · z', with the residuals' information share and the priors' 1 − share
	basis.Mul(t, &q)
	// Scores by moment.
	n := moment[len(moment)-1] + 1
	for _, m := range moment {
		n = max(n, m+1)
	}
	score := make([]float64, n)
	stretch := make([]float64, np)
	for c := range np {
		stretch[c] = 1
		if share[c] < 1e-6 {
			continue
		}
		for i := range score {
			score[i] = 0
		}
		for i, r := range res {
			x := 0.0
			for a, y := range jac[i*np : (i+1)*np] {
				x += y / size[a] * basis.At(a, c)
			}
			score[moment[i]] += x * r
		}
		stretch[c] = longRun(score) / share[c]
	}
	j.inverse, j.cov = make([]float64, np*np), make([]float64, np*np)
	for a := range np {
		for b := range np {
			x, y := 0.0, 0.0
			for c := range np {
				w := basis.At(a, c) * basis.At(b, c)
				x += w
				y += w * (math.Max(0, share[c])*stretch[c] + math.Max(0, 1-share[c]))
			}
			x, y = x/(size[a]*size[b]), y/(size[a]*size[b])
			if f.params[a].held || f.params[b].held {
				x, y = 0, 0
			}
			if f.unsettled {
				y += f.final.step[a] * f.final.step[b]
			}
			j.inverse[a*np+b], j.cov[a*np+b] = x, y
		}
	}
	return nil
}

// longRun is the long-run sum of squares of a series: prewhitened by a first-order
// autoregression, with Bartlett's weights (W. K. Newey and K. D. West, Econometrica
// 55 (1987) 703) to the lag of D. W. K. Andrews' rule (Econometrica 59 (1991) 817).
func longRun(x []float64) float64 {
	n := len(x)
	auto := func(y []float64) float64 {
		var a, b float64
		for i := 1; i < len(y); i++ {
			a += y[i] * y[i-1]
			b += y[i-1] * y[i-1]
		}
		if b == 0 {
			return 0
		}
		return math.Max(-0.97, math.Min(0.97, a/b))
	}
	rho := auto(x)
	e := make([]float64, n)
	e[0] = x[0] * math.Sqrt(1-rho*rho)
	for i := 1; i < n; i++ {
		e[i] = x[i] - rho*x[i-1]
	}
	r := auto(e)
	alpha := 4 * r * r / math.Pow(1-r*r, 2)
	lags := int(1.1447 * math.Cbrt(alpha*float64(n)))
	lags = min(max(lags, 1), n/10)
	sum := 0.0
	for _, y := range e {
		sum += y * y
	}
	for k := 1; k <= lags; k++ {
		c := 0.0
		for i := k; i < n; i++ {
			c += e[i] * e[i-k]
		}
		sum += 2 * (1 - float64(k)/float64(lags+1)) * c
	}
	return math.Max(sum, 0) / ((1 - rho) * (1 - rho))
}

// share is what prior i gives to the covariance of the combinations a and b.
func (j *judgement) share(f *fitter, a []float64, i int) float64 {
	q := &f.params[i]
	if !q.prior || q.held || q.gauge {
		return 0
	}
	x := 0.0
	for k, v := range a {
		x += v * j.inverse[k*j.np+i]
	}
	return x * x / (q.u * q.u)
}

// of gives the standard uncertainty of a combination of the parameters with the
// gradient a, the pictures' part of it, and its budget.
func (j *judgement) of(f *fitter, a []float64) (u, pictures float64, budget []finding.Share) {
	total := 0.0
	for i, x := range a {
		for k, y := range a {
			total += x * y * j.cov[i*j.np+k]
		}
	}
	rest := total
	sums := map[string]float64{}
	var order []string
	for i := range f.params {
		v := j.share(f, a, i)
		if v == 0 {
			continue
		}
		rest -= v
		s := f.params[i].source
		if _, ok := sums[s]; !ok {
			order = append(order, s)
		}
		sums[s] += v
	}
	u = math.Sqrt(math.Max(total, 0))
	pictures = math.Sqrt(math.Max(rest, 0))
	budget = append(budget, finding.Share{Source: "the pictures", U: pictures})
	for _, s := range order {
		if x := math.Sqrt(sums[s]); x > 0.02*u {
			budget = append(budget, finding.Share{Source: s, U: x})
		}
	}
	slices.SortStableFunc(budget, func(a, b finding.Share) int {
		switch {
		case a.U > b.U:
			return -1
		case a.U < b.U:
			return 1
		}
		return 0
	})
	return u, pictures, budget
}

// unit is the gradient of parameter i itself.
func (j *judgement) unit(i int) []float64 {
	a := make([]float64, j.np)
	a[i] = 1
	return a
}

func (j *judgement) correlation(a, b int) float64 {
	d := j.cov[a*j.np+a] * j.cov[b*j.np+b]
	if !(d > 0) {
		return 0
	}
	return j.cov[a*j.np+b] / math.Sqrt(d)
}
