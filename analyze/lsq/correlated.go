package lsq

import "math"

// CovarianceCorrelated returns the N×N covariance of the parameters, row-major,
// for residuals that are correlated in time or of uneven size, as those of a
// model that is nearly right are. moment[i] is the moment of residual i, in
// steps of time from 0 upwards (several residuals may share one, moments may be
// left out); nil takes one moment per residual in order. Lags is the reach of
// the correlation in steps; negative finds it from the residuals. The reach
// that was used is returned too.
//
// It is the sandwich H⁻¹·S·H⁻¹ with S the long-run covariance of the scores
// Jᵢ·ψᵢ: Bartlett's weights (W. K. Newey and K. D. West, Econometrica 55 (1987)
// 703) on scores prewhitened one by one by a first-order autoregression, and the
// reach by the plug-in rule (D. W. K. Andrews, Econometrica 59 (1991) 817;
// Andrews and J. C. Monahan, Econometrica 60 (1992) 953). Priors are taken as
// independent. Inseparable directions count nothing, as in Cov.
func (sum *Summary) CovarianceCorrelated(moment []int, lags int) (cov []float64, used int) {
	n := len(sum.P)
	h := sum.bread()
	score, steps := sum.scores(moment)
	phi := make([]float64, n)
	if lags != 0 {
		for j := range n {
			phi[j] = whiten(score, n, steps, j)
		}
	}
	if lags < 0 {
		lags = reach(score, n, steps)
	}
	lags = min(lags, steps-1)
	s := make([]float64, n*n)
	for lag := 0; lag <= lags; lag++ {
		w := 1 - float64(lag)/float64(lags+1)
		for t := lag; t < steps; t++ {
			now, then := score[t*n:(t+1)*n], score[(t-lag)*n:(t-lag+1)*n]
			for i, x := range now {
				if x == 0 {
					continue
				}
				for j, y := range then {
					s[i*n+j] += w * x * y
					if lag > 0 {
						s[j*n+i] += w * x * y
					}
				}
			}
		}
	}
	rows := float64(len(sum.Residuals))
	small := rows / max(1, rows-float64(sum.Rank))
	for i := range n {
		for j := range n {
			s[i*n+j] *= small / ((1 - phi[i]) * (1 - phi[j]))
		}
	}
	for _, p := range sum.prior {
		s[p.Parameter*n+p.Parameter] += 1 / sq(p.U)
	}
	return product(product(h, s, n), h, n), lags
}

// bread is H⁻¹: the covariance with the residuals' scatter taken out.
func (sum *Summary) bread() []float64 {
	n := len(sum.P)
	h := make([]float64, n*n)
	v := sum.unscale
	for i, c := range sum.Cov {
		if v > 0 && !math.IsInf(v, 0) {
			h[i] = c / v
		}
	}
	return h
}

// scores sums Jᵢ·wᵢ·rᵢ over the residuals of each moment: steps rows of N.
func (sum *Summary) scores(moment []int) (score []float64, steps int) {
	n := len(sum.P)
	for i := range sum.Residuals {
		at := i
		if moment != nil {
			at = moment[i]
		}
		steps = max(steps, at+1)
	}
	score = make([]float64, steps*n)
	for i, r := range sum.Residuals {
		at := i
		if moment != nil {
			at = moment[i]
		}
		if sum.Weights != nil {
			r *= sum.Weights[i]
		}
		row := score[at*n : (at+1)*n]
		for j := range n {
			row[j] += r * sum.Jacobian[i*n+j]
		}
	}
	return score, steps
}

// whiten replaces column j of the scores by what its own past does not foretell
// and returns the coefficient, kept within ±0.97.
func whiten(score []float64, n, steps, j int) float64 {
	var a, b float64
	for t := 1; t < steps; t++ {
		a += score[t*n+j] * score[(t-1)*n+j]
		b += sq(score[(t-1)*n+j])
	}
	if b == 0 {
		return 0
	}
	phi := min(max(a/b, -0.97), 0.97)
	for t := steps - 1; t > 0; t-- {
		score[t*n+j] -= phi * score[(t-1)*n+j]
	}
	return phi
}

// reach is Andrews's plug-in bandwidth for Bartlett's weights from first-order
// autoregressions of the columns.
func reach(score []float64, n, steps int) int {
	var top, bottom float64
	for j := range n {
		var a, b, last float64
		for t := range steps {
			x := score[t*n+j]
			a += x * last
			b += x * x
			last = x
		}
		if b == 0 {
			continue
		}
		rho := min(max(a/b, -0.97), 0.97)
		v := b / float64(steps) * (1 - rho*rho)
		top += 4 * rho * rho * v * v / (math.Pow(1-rho, 6) * sq(1+rho))
		bottom += v * v / math.Pow(1-rho, 4)
	}
	if bottom == 0 {
		return 0
	}
	return int(math.Ceil(1.1447 * math.Cbrt(top/bottom*float64(steps))))
}

// product is a·b for n×n row-major matrices.
func product(a, b []float64, n int) []float64 {
	out := make([]float64, n*n)
	for i := range n {
		for k := range n {
			if x := a[i*n+k]; x != 0 {
				for j := range n {
					out[i*n+j] += x * b[k*n+j]
				}
			}
		}
	}
	return out
}
