package decay

import "math"

// A push or a touch during the decay makes the state jump. To first order the
// motion after a jump at time s differs by a combination of the derivatives by
// the angle and the rate at the start, since these two span all small changes
// of state. So a jump is looked for by adding these two columns, from s on, to
// the fit's linear model, for each turning point s.

// pushAt looks for a jump in the residuals of f. It returns the index of the
// first sample after it, and whether there is one beyond doubt: with it the sum
// of squares falls at least to half, by far more than chance, and at no time
// farther than three half swings away does it fall nearly as much. A misfit that
// is spread over the whole decay has no such sharp place.
func pushAt(t []float64, f *fitted, half float64) (int, bool) {
	n, p := len(f.resid), f.m.size()
	w := p + 2 // columns, then the residual in place w
	cols := func(i int, row []float64) {
		copy(row, f.jac[i*p:(i+1)*p])
		row[p], row[p+1], row[p+2] = row[atAngle], row[atRate], f.resid[i]
	}
	// Gram matrices of all samples, and of those from each candidate on.
	size := w + 1
	gram := make([]float64, size*size)
	row := make([]float64, size)
	type place struct {
		index int
		cost  float64
	}
	var places []place
	total := 0.0
	for _, r := range f.resid {
		total += r * r
	}
	full := make([]float64, size*size)
	for i := range n {
		cols(i, row)
		for a := range size {
			for b := range a + 1 {
				full[a*size+b] += row[a] * row[b]
			}
		}
	}
	next := t[n-1] - 2*half
	for i := n - 1; i >= 0; i-- {
		cols(i, row)
		for a := range size {
			for b := range a + 1 {
				gram[a*size+b] += row[a] * row[b]
			}
		}
		if t[i] > next || t[i] < t[0]+2*half {
			continue
		}
		next -= half / 4
		// Old columns meet all samples; the two new ones only those from i on.
		m := make([]float64, size*size)
		for a := range size {
			for b := range a + 1 {
				late := a == p || a == p+1 || b == p || b == p+1
				if late {
					m[a*size+b] = gram[a*size+b]
				} else {
					m[a*size+b] = full[a*size+b]
				}
			}
		}
		if c, ok := leftover(m, size); ok {
			places = append(places, place{i, c})
		}
	}
	if len(places) == 0 || total == 0 {
		return 0, false
	}
	best := places[0]
	for _, q := range places {
		if q.cost < best.cost {
			best = q
		}
	}
	away := total
	for _, q := range places {
		if math.Abs(t[q.index]-t[best.index]) > 3*half {
			away = math.Min(away, q.cost)
		}
	}
	dof := float64(n - w)
	if best.cost > 0.5*total || best.cost > 0.6*away || (total-best.cost)/(best.cost/dof) < 60 {
		return 0, false
	}
	return best.index, true
}

// leftover is the sum of squares of the last variable that the others cannot
// explain, from the lower triangle of their Gram matrix, by Cholesky; ok is
// false where the others are not independent.
func leftover(g []float64, n int) (float64, bool) {
	d := make([]float64, n)
	for i := range n {
		d[i] = math.Sqrt(g[i*n+i])
		if !(d[i] > 0) {
			return 0, false
		}
	}
	for i := range n {
		for j := range i + 1 {
			s := g[i*n+j] / (d[i] * d[j])
			for k := range j {
				s -= g[i*n+k] * g[j*n+k]
			}
			if i != j {
				g[i*n+j] = s / g[j*n+j]
				continue
			}
			if i == n-1 {
				return math.Max(0, s) * d[i] * d[i], true
			}
			if s < 1e-13 {
				return 0, false
			}
			g[i*n+i] = math.Sqrt(s)
		}
	}
	return 0, false
}
