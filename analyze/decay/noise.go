package decay

import "math"

// noise is what the residuals of the richest model say about the noise.
type noise struct {
	sigma2 float64 // variance of the standardised residuals; 1 when UAngle is right
	// swing is the residuals' spectral density about the swing's frequency over
	// that of white noise of the same variance; the motion's parameters see only
	// that part of the noise. slow is the same at low frequency, for the rest
	// angle. Both are at least 1.
	swing, slow float64
	effective   float64 // samples that white noise would need for the same knowledge
	order       int     // of the autoregression
}

// measureNoise looks at the residuals of f at times t; freq is the swing's
// frequency in Hz.
//
// Two looks, the larger counts. An autoregression whose order is chosen by BIC
// (Burg's method; white noise stays order 0) sees smooth colour, such as a
// camera that sways or a codec that smears. The periodogram of the residuals in
// the band about the swing's frequency sees what the model fails to follow.
func measureNoise(t []float64, f *fitted, freq float64) noise {
	n := len(f.resid)
	ss := 0.0
	for _, r := range f.resid {
		ss += r * r
	}
	nz := noise{sigma2: ss / float64(max(1, n-f.m.size())), swing: 1, slow: 1}
	if n < 30 || ss == 0 {
		nz.effective = float64(n)
		return nz
	}
	step := (t[n-1] - t[0]) / float64(n-1)
	coef, left := burg(f.resid, min(12, n/20))
	nz.order = len(coef)
	density := func(hz float64) float64 {
		re, im := 1.0, 0.0
		for k, c := range coef {
			s, co := math.Sincos(2 * math.Pi * hz * step * float64(k+1))
			re -= c * co
			im += c * s
		}
		return left / (re*re + im*im)
	}
	if len(coef) > 0 {
		nz.swing = math.Max(1, density(freq))
		nz.slow = math.Max(1, density(0))
	}
	// The band: within 40 % of the swing's frequency, at least ten ordinates.
	span := t[n-1] - t[0]
	width := math.Max(0.4*freq, 5/span)
	sum, m := 0.0, 0
	for k := math.Ceil(math.Max(0.5, (freq-width)*span)); k <= (freq+width)*span; k++ {
		if m > 400 {
			break
		}
		var re, im float64
		w := 2 * math.Pi * k / span
		for i, r := range f.resid {
			s, c := math.Sincos(w * (t[i] - t[0]))
			re += r * c
			im += r * s
		}
		sum += (re*re + im*im) / float64(n)
		m++
	}
	if free := 2*m - f.m.size(); free > 4 {
		ratio := sum * 2 / float64(free) / nz.sigma2
		if ratio > 1+3*math.Sqrt(2/float64(free)) {
			nz.swing = math.Max(nz.swing, ratio)
		}
	}
	nz.effective = math.Max(float64(f.m.size()+2), float64(n)/nz.swing)
	return nz
}

// burg fits an autoregression x_i = Σ c_k x_{i−k} + e by Burg's method (J. P.
// Burg, PhD thesis, Stanford 1975), the order up to most that BIC likes best. It
// returns the coefficients and e's variance over x's.
func burg(x []float64, most int) (coef []float64, left float64) {
	n := len(x)
	fw, bw := make([]float64, n), make([]float64, n)
	copy(fw, x)
	copy(bw, x)
	e := 0.0
	for _, v := range x {
		e += v * v / float64(n)
	}
	e0 := e
	var c []float64
	best := float64(n) * math.Log(e)
	left = 1
	for k := 1; k <= most; k++ {
		num, den := 0.0, 0.0
		for i := k; i < n; i++ {
			num += fw[i] * bw[i-1]
			den += fw[i]*fw[i] + bw[i-1]*bw[i-1]
		}
		if den == 0 {
			break
		}
		r := 2 * num / den
		next := make([]float64, k)
		for j := range c {
			next[j] = c[j] - r*c[k-2-j]
		}
		next[k-1] = r
		c = next
		for i := n - 1; i >= k; i-- {
			f := fw[i]
			fw[i] = f - r*bw[i-1]
			bw[i] = bw[i-1] - r*f
		}
		e *= 1 - r*r
		if bic := float64(n)*math.Log(e) + float64(k)*math.Log(float64(n)); bic < best {
			best, coef, left = bic, c, e/e0
		}
	}
	return coef, left
}

// scale is the factor on the samples' uncertainties that makes white noise of
// what the motion's parameters see of it.
func (nz noise) scale() float64 { return math.Sqrt(nz.sigma2 * nz.swing) }

// widenRest is a covariance of samples so scaled, with the rest angle's own
// factor: it sees the noise at low frequency instead.
func (nz noise) widenRest(c []float64, size int) []float64 {
	out := append([]float64(nil), c...)
	w := math.Sqrt(nz.slow / nz.swing)
	for i := range size {
		out[i*size+atRest] *= w
		out[atRest*size+i] *= w
	}
	return out
}
