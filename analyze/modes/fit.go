package modes

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/lsq"
)

// one is a bob's series about the clip's middle, with weights 1/u.
type one struct {
	x, y, w []float64
	mean    float64
}

// data is what the fits share.
type data struct {
	bobs             []one
	from, to, middle float64
	span, step       float64
	rows             int
	power            float64 // weighted sum of squares about the means
}

// trial is a set of modes: angular frequency (rad/s) and decay rate (1/s) of each.
type trial struct {
	p   []float64
	rss float64
}

// project fits the amplitudes of the modes p to one bob by Gram–Schmidt, run
// twice for accuracy. It returns the weighted residuals and the amplitudes: rest,
// then cosine and sine of each mode.
func (b *one) project(p []float64) (resid, amp []float64) {
	n, m := len(b.x), 1+len(p)
	q := make([][]float64, m)
	for j := range q {
		q[j] = make([]float64, n)
	}
	copy(q[0], b.w)
	for k := 0; k < len(p); k += 2 {
		for i, x := range b.x {
			s, c := math.Sincos(p[k] * x)
			e := b.w[i] * math.Exp(-p[k+1]*x)
			q[k+1][i], q[k+2][i] = e*c, e*s
		}
	}
	r := make([]float64, m*m)
	for j := range q {
		for range 2 {
			for i := range j {
				h := dot(q[i], q[j])
				r[i*m+j] += h
				axpy(-h, q[i], q[j])
			}
		}
		norm := math.Sqrt(dot(q[j], q[j]))
		r[j*m+j] = norm
		if norm > 0 {
			for i := range q[j] {
				q[j][i] /= norm
			}
		}
	}
	resid, amp = make([]float64, n), make([]float64, m)
	for i := range resid {
		resid[i] = b.w[i] * b.y[i]
	}
	for j := range q {
		amp[j] = dot(q[j], resid)
		axpy(-amp[j], q[j], resid)
	}
	for j := m - 1; j >= 0; j-- {
		for i := j + 1; i < m; i++ {
			amp[j] -= r[j*m+i] * amp[i]
		}
		if r[j*m+j] == 0 {
			amp[j] = 0
			continue
		}
		amp[j] /= r[j*m+j]
	}
	return resid, amp
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

func axpy(f float64, x, y []float64) {
	for i := range x {
		y[i] += f * x[i]
	}
}

// fit refines frequencies and decay rates from a start on the true times.
func (d *data) fit(ctx context.Context, start []float64) (*trial, error) {
	n := len(start)
	lo, hi, scale := make([]float64, n), make([]float64, n), make([]float64, n)
	p := slices.Clone(start)
	for k := 0; k < n; k += 2 {
		lo[k], hi[k] = math.Pi/d.span, math.Pi/d.step
		lo[k+1], hi[k+1] = -6/d.span, 60/d.span
		scale[k], scale[k+1] = 1/d.span, 1/d.span
	}
	for j := range p {
		p[j] = math.Min(math.Max(p[j], lo[j]), hi[j])
	}
	sum, err := lsq.Solve(ctx, lsq.Problem{
		N: n, M: d.rows, Lo: lo, Hi: hi, Scale: scale,
		Residuals: func(p, r []float64) error {
			at := 0
			for i := range d.bobs {
				res, _ := d.bobs[i].project(p)
				at += copy(r[at:], res)
			}
			return nil
		},
	}, p, lsq.Options{TolF: 1e-7, MaxIterations: 30, Once: true})
	if ctx.Err() != nil {
		return nil, ctx.Err()
	}
	if err != nil {
		return nil, fmt.Errorf("modes: the fit failed: %w", err)
	}
	return &trial{p: sum.P, rss: sum.ChiSquare}, nil
}

// search fits one mode, two, … from several starts each and returns the number
// that BIC prefers.
func (d *data) search(ctx context.Context, most int, res *Result) (*trial, error) {
	space := d.space()
	hz := d.band()
	var best, last *trial
	bestBIC := math.Inf(1)
	n := float64(d.rows)
	for k := 1; k <= most; k++ {
		var starts [][]float64
		if space != nil {
			if s := space.start(k); len(s) == 2*k {
				starts = append(starts, s)
			}
		}
		at, resid := []float64(nil), [][]float64(nil)
		if last != nil {
			at = last.p
			for i := range d.bobs {
				r, _ := d.bobs[i].project(last.p)
				resid = append(resid, r)
			}
		}
		// One more at the strongest frequency of what is left.
		power := d.periodogram(resid, hz)
		peak := hz[slices.Index(power, slices.Max(power))]
		starts = append(starts, append(slices.Clone(at), 2*math.Pi*peak, 1/d.span))
		// The mode nearest to that, split in two.
		if last != nil {
			near := 0
			for j := 0; j < len(at); j += 2 {
				if math.Abs(at[j]/(2*math.Pi)-peak) < math.Abs(at[near]/(2*math.Pi)-peak) {
					near = j
				}
			}
			s := append(slices.Clone(at), at[near]+1.2/d.span, at[near+1])
			s[near] -= 1.2 / d.span
			starts = append(starts, s)
		}
		var now *trial
		for _, s := range starts {
			t, err := d.fit(ctx, s)
			if ctx.Err() != nil {
				return nil, ctx.Err()
			}
			if err == nil && (now == nil || t.rss < now.rss) {
				now = t
			}
		}
		if now == nil {
			break
		}
		size := float64(2*k + len(d.bobs)*(2*k+1))
		if n < 2*size {
			break
		}
		bic := n*math.Log(math.Max(now.rss, 1e-20*d.power)/n) + size*math.Log(n)
		res.Orders = append(res.Orders, Order{k, bic})
		if bic < bestBIC {
			best, bestBIC = now, bic
		} else if len(res.Orders) > 2 && res.Orders[len(res.Orders)-2].BIC > bestBIC {
			break // worse twice running
		}
		last = now
	}
	if best == nil {
		return nil, fmt.Errorf("modes: no fit came to an end; check the series for jumps")
	}
	return best, nil
}

// joint is the full fit: parameters [ω, decay] per mode, then per bob its rest
// and cosine and sine of each mode.
type joint struct {
	modes, bobs int
	p           []float64
	cov         []float64
}

// at is the index of the cosine of mode k in bob b.
func (j *joint) at(b, k int) int { return 2*j.modes + b*(2*j.modes+1) + 1 + 2*k }

// complete fits everything together from the projected solution, for the joint
// covariance, and fills the result.
func (d *data) complete(ctx context.Context, t *trial, res *Result) error {
	order := make([]int, len(t.p)/2)
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int {
		if t.p[2*a] < t.p[2*b] {
			return -1
		}
		return 1
	})
	j := &joint{modes: len(order), bobs: len(d.bobs)}
	var start []float64
	for _, k := range order {
		start = append(start, t.p[2*k], t.p[2*k+1])
	}
	modes := slices.Clone(start)
	for i := range d.bobs {
		_, amp := d.bobs[i].project(modes)
		start = append(start, amp...)
	}
	n := len(start)
	evaluate := func(p, r, jac []float64) {
		row := 0
		for b := range d.bobs {
			s := &d.bobs[b]
			base := j.at(b, 0) - 1
			for i, x := range s.x {
				y := p[base]
				var line []float64
				if jac != nil {
					line = jac[row*n : (row+1)*n]
					clear(line)
					line[base] = s.w[i]
				}
				for k := range j.modes {
					sn, c := math.Sincos(p[2*k] * x)
					e := math.Exp(-p[2*k+1] * x)
					a := j.at(b, k)
					v := e * (p[a]*c + p[a+1]*sn)
					y += v
					if line != nil {
						line[a], line[a+1] = s.w[i]*e*c, s.w[i]*e*sn
						line[2*k] = s.w[i] * x * e * (p[a+1]*c - p[a]*sn)
						line[2*k+1] = -s.w[i] * x * v
					}
				}
				if r != nil {
					r[row] = s.w[i] * (y - s.y[i])
				}
				row++
			}
		}
	}
	sum, err := lsq.Solve(ctx, lsq.Problem{
		N: n, M: d.rows,
		Residuals: func(p, r []float64) error { evaluate(p, r, nil); return nil },
		Jacobian:  func(p, jac []float64) error { evaluate(p, nil, jac); return nil },
	}, start, lsq.Options{Once: true, MaxIterations: 50, TolF: 1e-12})
	if err != nil {
		return fmt.Errorf("modes: the joint fit failed: %w", err)
	}
	j.p, j.cov = sum.P, slices.Clone(sum.Cov)
	res.Converged, res.Scatter = sum.Converged, sum.Scatter
	res.Correlation = math.Sqrt(d.colour(sum.Residuals, j, sum.Scatter))
	for i := range j.cov {
		j.cov[i] *= res.Correlation * res.Correlation
	}
	res.fit = j
	res.tell()
	return nil
}

// colour is the residuals' power near the modes over that of white noise of the
// same variance, at least 1: only that part of the noise reaches the modes. The
// band goes five resolutions beyond the outer modes; what may be chance does not
// count.
func (d *data) colour(flat []float64, j *joint, scatter float64) float64 {
	var resid [][]float64
	for i := range d.bobs {
		n := len(d.bobs[i].x)
		resid, flat = append(resid, flat[:n]), flat[n:]
	}
	lo, hi := math.Inf(1), 0.0
	for k := range j.modes {
		f := j.p[2*k] / (2 * math.Pi)
		lo, hi = math.Min(lo, f), math.Max(hi, f)
	}
	var hz []float64
	step := math.Max(1/d.span, (hi-lo+10/d.span)/400)
	for f := math.Max(1/d.span, lo-5/d.span); f <= hi+5/d.span; f += step {
		hz = append(hz, f)
	}
	sum := 0.0
	for _, p := range d.periodogram(resid, hz) {
		sum += p
	}
	free := 2*len(hz)*len(d.bobs) - 2*j.modes*(1+len(d.bobs))
	if free < 4 || scatter == 0 {
		return 1
	}
	ratio := 2 * sum / float64(free) / (scatter * scatter)
	if ratio < 1+3*math.Sqrt(2/float64(free)) {
		return 1
	}
	return ratio
}

// of is value and standard uncertainty of a function of the joint parameters, by
// central differences of a thousandth of a standard uncertainty.
func (j *joint) of(f func(p []float64) float64) (value, u float64) {
	n := len(j.p)
	grad := make([]float64, n)
	p := slices.Clone(j.p)
	for i := range p {
		h := 1e-3 * math.Sqrt(j.cov[i*n+i])
		if h == 0 {
			continue
		}
		p[i] = j.p[i] + h
		up := f(p)
		p[i] = j.p[i] - h
		grad[i] = (up - f(p)) / (2 * h)
		p[i] = j.p[i]
	}
	v := 0.0
	for i := range n {
		for k := range n {
			v += grad[i] * j.cov[i*n+k] * grad[k]
		}
	}
	return f(j.p), math.Sqrt(math.Max(0, v))
}
