package decay

import "math"

// jackGroups is the number of stretches that are left out in turn.
const jackGroups = 6

// jackknife is a covariance of f's parameters from leaving out one stretch of
// time after the other (delete-a-group jackknife; Shao & Tu, "The Jackknife and
// Bootstrap", 1995, with stretches so long that their residuals are nearly
// independent), each to first order. Unlike residuals' spectrum it also sees
// that the model holds differently in different parts of the decay. Row-major;
// nil where a group determines a parameter alone.
func jackknife(f *fitted, groups int) []float64 {
	n, p := len(f.resid), f.m.size()
	size := p + 1
	gram := make([][]float64, groups)
	total := make([]float64, size*size)
	row := make([]float64, size)
	for g := range groups {
		gram[g] = make([]float64, size*size)
		for i := g * n / groups; i < (g+1)*n/groups; i++ {
			copy(row, f.jac[i*p:(i+1)*p])
			row[p] = f.resid[i]
			for a := range size {
				for b := range size {
					gram[g][a*size+b] += row[a] * row[b]
				}
			}
		}
		for k, v := range gram[g] {
			total[k] += v
		}
	}
	moves := make([][]float64, groups)
	centre := make([]float64, p)
	for g := range groups {
		a, b := make([]float64, p*p), make([]float64, p)
		for i := range p {
			for j := range p {
				a[i*p+j] = total[i*size+j] - gram[g][i*size+j]
			}
			b[i] = total[i*size+p] - gram[g][i*size+p]
		}
		x, ok := solveSPD(a, b)
		if !ok {
			return nil
		}
		moves[g] = x
		for i := range p {
			centre[i] += x[i] / float64(groups)
		}
	}
	c := make([]float64, p*p)
	w := float64(groups-1) / float64(groups)
	for _, x := range moves {
		for i := range p {
			for j := range p {
				c[i*p+j] += w * (x[i] - centre[i]) * (x[j] - centre[j])
			}
		}
	}
	return c
}

// solveSPD solves a·x = b for a symmetric positive matrix by Cholesky with unit
// scaling; a is destroyed.
func solveSPD(a, b []float64) ([]float64, bool) {
	n := len(b)
	d, x := make([]float64, n), make([]float64, n)
	for i := range n {
		d[i] = math.Sqrt(a[i*n+i])
		if !(d[i] > 0) {
			return nil, false
		}
	}
	for i := range n {
		for j := range i + 1 {
			s := a[i*n+j] / (d[i] * d[j])
			for k := range j {
				s -= a[i*n+k] * a[j*n+k]
			}
			if i == j {
				if s < 1e-13 {
					return nil, false
				}
				a[i*n+i] = math.Sqrt(s)
			} else {
				a[i*n+j] = s / a[j*n+j]
			}
		}
	}
	for i := range n {
		s := b[i] / d[i]
		for k := range i {
			s -= a[i*n+k] * x[k]
		}
		x[i] = s / a[i*n+i]
	}
	for i := n - 1; i >= 0; i-- {
		s := x[i]
		for k := i + 1; k < n; k++ {
			s -= a[k*n+i] * x[k]
		}
		x[i] = s / a[i*n+i]
	}
	for i := range n {
		x[i] /= d[i]
	}
	return x, true
}
