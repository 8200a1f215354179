package spectrum

import (
	"math"
	"slices"
)

// pgram is a windowed periodogram.
type pgram struct {
	psd, amplitude []float64
	bandwidth      float64 // Hz
}

// periodogram is the windowed periodogram of y at the data's times, at
// frequencies k·df: amplitude 2|Σwy·e|/Σw, and its power over the window's
// equivalent noise bandwidth as one-sided density. At even steps it is the
// textbook periodogram.
func (d *data) periodogram(y []float64, win Window, df float64, n int) pgram {
	at, c := make([]float64, len(y)), make([]float64, len(y))
	var w1, w2 float64
	// A window over n even steps of which the last is the next one's first, as is
	// usual for spectra ("periodic" window).
	reach := d.span + d.step
	for i, v := range y {
		at[i] = d.t[i] - d.t[0]
		w := win.at((at[i] + d.phase) / reach)
		c[i] = w * v
		w1 += w
		w2 += w * w
	}
	p := pgram{psd: make([]float64, n), amplitude: make([]float64, n), bandwidth: w2 / (w1 * w1) / d.step}
	for k, x := range sums(at, c, df, n) {
		a := math.Hypot(real(x), imag(x)) / w1
		f := 2.0
		if k == 0 {
			f = 1
		}
		p.amplitude[k] = f * a
		p.psd[k] = f * a * a / p.bandwidth
	}
	return p
}

// lombScargle is the generalised Lomb–Scargle power of y at k·df: the share of
// the weighted variance that a sinusoid and a constant explain (Zechmeister and
// Kürster 2009, eqs 4–15). It is 0 where the sinusoid is not determined.
func (d *data) lombScargle(y []float64, df float64, n int) []float64 {
	at, c := make([]float64, len(y)), make([]float64, len(y))
	mean, yy := 0.0, 0.0
	for i, v := range y {
		mean += d.w[i] * v
		at[i] = d.t[i] - d.t[0]
	}
	for i, v := range y {
		c[i] = d.w[i] * (v - mean)
		yy += c[i] * (v - mean)
	}
	sy, sw := sums(at, c, df, n), sums(at, d.w, df, n)
	double := make([]float64, len(at))
	for i, x := range at {
		double[i] = 2 * x
	}
	sw2 := sums(double, d.w, df, n)
	out := make([]float64, n)
	for k := 1; k < n; k++ {
		yc, ys := real(sy[k]), -imag(sy[k])
		c1, s1 := real(sw[k]), -imag(sw[k])
		cc := 0.5*(1+real(sw2[k])) - c1*c1
		ss := 0.5*(1-real(sw2[k])) - s1*s1
		cs := -0.5*imag(sw2[k]) - c1*s1
		det := cc*ss - cs*cs
		if det < 1e-6 {
			continue
		}
		out[k] = min(max((ss*yc*yc+cc*ys*ys-2*cs*yc*ys)/(yy*det), 0), 1)
	}
	return out
}

// falseAlarm is the chance that white noise of n samples makes a peak of
// generalised Lomb–Scargle power p somewhere below maxFreq (Baluev 2008, eqs
// 5–6 for one constant and a sinusoid; an upper bound that is close where the
// chance is small).
func (d *data) falseAlarm(p, maxFreq float64) float64 {
	if p >= 1 {
		return 0
	}
	n := float64(len(d.t))
	var m1, m2 float64
	for i, t := range d.t {
		m1 += d.w[i] * (t - d.t[0])
		m2 += d.w[i] * (t - d.t[0]) * (t - d.t[0])
	}
	band := maxFreq * math.Sqrt(4*math.Pi*(m2-m1*m1))
	nh, nk := n-1, n-3
	lg1, _ := math.Lgamma(nh / 2)
	lg2, _ := math.Lgamma((nh - 1) / 2)
	gamma := math.Sqrt(2/nh) * math.Exp(lg1-lg2)
	rest := math.Log1p(-p)
	tau := gamma * band * math.Exp(0.5*(nk-1)*rest) * math.Sqrt(0.5*nh*p)
	single := math.Exp(0.5 * nk * rest)
	// 1 − (1 − single)·exp(−tau), without loss for small chances.
	return -math.Expm1(-tau) + single*math.Exp(-tau)
}

// smoothFloor is a running median of psd over width points, turned into the mean
// of exponentially distributed noise power (median = mean·ln 2).
func smoothFloor(psd []float64, width int) []float64 {
	n := len(psd)
	width = min(width, n)
	out := make([]float64, n)
	buf := make([]float64, 0, width+1)
	stride := max(1, width/16)
	last := 0
	for k := 0; ; k += stride {
		k = min(k, n-1)
		lo := min(max(0, k-width/2), n-width)
		buf = append(buf[:0], psd[lo:lo+width]...)
		slices.Sort(buf)
		out[k] = buf[len(buf)/2] / math.Ln2
		for i := last + 1; i < k; i++ {
			out[i] = out[last] + (out[k]-out[last])*float64(i-last)/float64(k-last)
		}
		last = k
		if k == n-1 {
			return out
		}
	}
}
