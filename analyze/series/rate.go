package series

import (
	"math"
	"slices"
)

// The rate is the slope of a local cubic, fitted by weighted least squares to
// the samples within ±w of each sample (Savitzky & Golay 1964 for unequal
// steps; Fan & Gijbels, "Local Polynomial Modelling", 1996). Its bias is seen by
// fitting a quintic to the same samples; w is the width at which noise and bias
// together are least, and the bias that remains is part of URate.

const (
	cubic   = 4 // coefficients
	quintic = 6
	least   = quintic + 1 // samples in a window
)

// widths are the half widths tried, in median steps.
var widths = []float64{3, 4, 5, 7, 10, 14, 20, 28, 40, 56, 80}

// point is what the two fits give at one sample.
type point struct {
	rate, varRate float64 // cubic, variance per unit σ
	diff, varDiff float64 // quintic − cubic rate
	resid         float64 // standardised residual of the quintic over its own expected σ
	ok            bool
}

// rates fills Rate, URate, WindowS and NoiseRatio.
func (a *Angle) rates() {
	n := len(a.T)
	a.Rate, a.URate = make([]float64, n), make([]float64, n)
	segs := a.segmentOf()
	noise := a.noiseRatio(segs)
	a.NoiseRatio = noise
	inflate := math.Max(1, noise)
	step := medianStep(a.T)
	best, bestCost := -1, math.Inf(1)
	every := 1 + n/500 // the width is chosen on so many samples, for speed
	for k, w := range widths {
		if w > float64(n)/4 {
			break
		}
		cost, good := 0.0, 0
		for _, p := range localFits(a.T, a.Angle, a.UAngle, segs, w*step, every) {
			if p.ok {
				good++
				cost += p.varRate*inflate*inflate + p.diff*p.diff - p.varDiff*inflate*inflate
			}
		}
		if good == 0 {
			continue
		}
		cost /= float64(good)
		if cost < bestCost || best < 0 {
			best, bestCost = k, cost
		} else if cost > 4*bestCost {
			break
		}
	}
	if best < 0 {
		for i := range a.Rate {
			a.Rate[i], a.URate[i] = math.NaN(), math.NaN()
		}
		return
	}
	bestPts := localFits(a.T, a.Angle, a.UAngle, segs, widths[best]*step, 1)
	a.WindowS = widths[best] * step
	reach := 2 * int(widths[best])
	for i, p := range bestPts {
		if !p.ok {
			a.Rate[i], a.URate[i] = math.NaN(), math.NaN()
			continue
		}
		// The bias squared, averaged over the neighbourhood, its own noise taken out.
		sum, m := 0.0, 0
		for j := max(0, i-reach); j <= min(n-1, i+reach); j++ {
			if q := bestPts[j]; q.ok && segs[j] == segs[i] {
				sum += q.diff*q.diff - q.varDiff*inflate*inflate
				m++
			}
		}
		bias2 := math.Max(0, sum/float64(m))
		a.Rate[i] = p.rate
		a.URate[i] = math.Sqrt(p.varRate*inflate*inflate + bias2)
	}
}

// segmentOf numbers the stretches between gaps that are too long to fit a local
// polynomial across: more than three steps.
func (a *Angle) segmentOf() []int {
	seg := make([]int, len(a.T))
	for k, s := range a.Segments(3.5 * medianStep(a.T)) {
		for i := s[0]; i < s[1]; i++ {
			seg[i] = k
		}
	}
	return seg
}

// noiseRatio is the robust scatter about a narrow local quintic over what UAngle
// lets expect.
func (a *Angle) noiseRatio(segs []int) float64 {
	pts := localFits(a.T, a.Angle, a.UAngle, segs, 5*medianStep(a.T), 1+len(a.T)/2000)
	var r []float64
	for _, p := range pts {
		if p.ok {
			r = append(r, math.Abs(p.resid))
		}
	}
	if len(r) == 0 {
		return 1
	}
	slices.Sort(r)
	return r[len(r)/2] / 0.6744897501960817 // median of |N(0,1)|
}

// scatter estimates the white noise of y from a narrow local quintic.
func scatter(t, y []float64) float64 {
	u := make([]float64, len(t))
	for i := range u {
		u[i] = 1
	}
	a := Angle{T: t, Angle: y, UAngle: u}
	a.Gaps = lostFrames(t, nil, noFrames)
	s := a.noiseRatio(a.segmentOf())
	if s <= 0 {
		// Quantised so coarsely that neighbours agree, or made up: a floor keeps
		// weights finite.
		lo, hi := slices.Min(y), slices.Max(y)
		s = math.Max(1e-9*(hi-lo), 1e-12)
	}
	return s
}

// localFits fits cubic and quintic about every so many samples. Points in
// between, and those with too few samples in reach, are not ok.
func localFits(t, y, u []float64, seg []int, w float64, every int) []point {
	n := len(t)
	pts := make([]point, n)
	const crumb = 1e-9 // of w: times that are equal but for rounding
	w *= 1 + crumb
	for first := 0; first < n; {
		last := first
		for last+1 < n && seg[last+1] == seg[first] {
			last++
		}
		lo, hi := first, first
		for i := first; i <= last; i++ {
			for t[lo] < t[i]-w {
				lo++
			}
			for hi < last && t[hi+1] <= t[i]+w {
				hi++
			}
			if i%every != 0 {
				continue
			}
			l, h := lo, hi
			// At a segment's ends the window is shifted inwards, so that it keeps its
			// width, and the variance tells what the one-sidedness costs.
			if l == first {
				for h < last && t[h+1] <= t[l]+2*w {
					h++
				}
			}
			if h == last {
				for l > first && t[l-1] >= t[h]-2*w {
					l--
				}
			}
			// Rows are read one after another, so that a moving bob's times are not
			// even and the narrowest window may just miss a sample: it takes the nearer one.
			for h-l+1 < least && (l > first || h < last) {
				if h == last || l > first && t[i]-t[l-1] <= t[h+1]-t[i] {
					l--
				} else {
					h++
				}
			}
			if h-l+1 >= least {
				pts[i] = fitAt(t[l:h+1], y[l:h+1], u[l:h+1], i-l, w)
			}
		}
		first = last + 1
	}
	return pts
}

// fitAt fits both polynomials to a window and evaluates them at sample at.
func fitAt(t, y, u []float64, at int, w float64) point {
	// An orthonormal basis on the samples (weighted Gram–Schmidt on powers) gives
	// both fits at once.
	m := len(t)
	var q [quintic][]float64
	buf := make([]float64, quintic*m)
	var d [quintic]float64 // slope of basis function k at sample at
	var v [quintic]float64 // its value there, over weight
	t0 := t[at]
	// Powers and their slopes at t0 are carried through the same operations.
	pow := make([]float64, m)
	for k := range quintic {
		q[k] = buf[k*m : (k+1)*m]
		for j := range m {
			x := (t[j] - t0) / w
			if k == 0 {
				pow[j] = 1 / u[j]
			} else {
				pow[j] *= x
			}
			q[k][j] = pow[j]
		}
		slope, value := 0.0, 0.0
		if k == 1 {
			slope = 1 / w
		}
		if k == 0 {
			value = 1
		}
		before := 0.0
		for j := range m {
			before += q[k][j] * q[k][j]
		}
		qk := q[k]
		for l := range k {
			ql := q[l][:len(qk)]
			dot := 0.0
			for j, x := range qk {
				dot += ql[j] * x
			}
			for j := range qk {
				qk[j] -= dot * ql[j]
			}
			slope -= dot * d[l]
			value -= dot * v[l]
		}
		norm := 0.0
		for j := range m {
			norm += q[k][j] * q[k][j]
		}
		if !(norm > 1e-18*before) {
			return point{}
		}
		norm = math.Sqrt(norm)
		for j := range m {
			q[k][j] /= norm
		}
		d[k], v[k] = slope/norm, value/norm
	}
	var p point
	fit := 0.0
	lever := 0.0
	for k := range quintic {
		c := 0.0
		for j := range m {
			c += q[k][j] * y[j] / u[j]
		}
		fit += c * v[k]
		lever += v[k] * v[k]
		if k < cubic {
			p.rate += c * d[k]
			p.varRate += d[k] * d[k]
		} else {
			p.diff += c * d[k]
			p.varDiff += d[k] * d[k]
		}
	}
	left := 1 - lever/(u[at]*u[at])
	if left > 0.05 {
		p.resid = (y[at] - fit) / (u[at] * math.Sqrt(left))
	}
	p.ok = true
	return p
}

// medianStep is the median time between samples.
func medianStep(t []float64) float64 {
	if len(t) < 2 {
		return 1
	}
	d := make([]float64, len(t)-1)
	for i := range d {
		d[i] = t[i+1] - t[i]
	}
	slices.Sort(d)
	return d[len(d)/2]
}
