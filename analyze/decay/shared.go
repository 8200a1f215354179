package decay

import (
	"math"

	"lodeswing/analyze/series"
)

// splitShared cuts the shared causes to the stretch. Those that change along the
// motion go into the fit; those that only shift all angles say nothing but on
// the rest angle and are added to it afterwards.
func (an *analysis) splitShared(f *fitted) {
	smooth := an.smoother(f)
	for _, s := range an.angle.Shared {
		var d []float64
		lo, hi := math.Inf(1), math.Inf(-1)
		for i := an.st.from; i < an.st.to; i++ {
			if !an.skip[i] {
				d = append(d, s.D[i])
				lo, hi = math.Min(lo, s.D[i]), math.Max(hi, s.D[i])
			}
		}
		if hi-lo > 1e-6*math.Max(math.Abs(lo), math.Abs(hi)) {
			an.data.common = append(an.data.common, smooth(d))
			an.sources = append(an.sources, s.Source)
		} else {
			an.shifts = append(an.shifts, series.Shared{Source: s.Source, D: d[:1]})
		}
	}
}

// smoother returns a function that replaces what a shared cause does to each
// sample by a smooth function of the fitted motion. As the series gives it, it was
// computed from the measured angles: it carries their noise, and a fit that
// weighs it against the same noise is drawn aside.
func (an *analysis) smoother(f *fitted) func(d []float64) []float64 {
	n := len(an.data.t)
	angle := make([]float64, n)
	mv := newMover(f.m, false)
	mv.rates = make([]float64, n)
	if err := mv.run(f.p, f.tRef, an.data.t, angle, nil, nil); err != nil {
		return func(d []float64) []float64 { return d }
	}
	w := math.Sqrt(f.p[atK])
	const size = 8
	basis := make([]float64, n*size)
	for i := range n {
		s, c := math.Sincos(angle[i])
		v := mv.rates[i] / w
		copy(basis[i*size:], []float64{1, s, c - 1, s * s, v, v * s, v * (c - 1), v * s * s})
	}
	inverse, ok := normalInverse(basis, n, size)
	return func(d []float64) []float64 {
		if !ok {
			return d
		}
		var right [size]float64
		for i, x := range d {
			for j := range size {
				right[j] += basis[i*size+j] * x
			}
		}
		out := make([]float64, n)
		var left, all float64
		for i := range n {
			for j := range size {
				for k := range size {
					out[i] += basis[i*size+j] * inverse[j*size+k] * right[k]
				}
			}
			left += sq(d[i] - out[i])
			all += sq(d[i])
		}
		if left > 0.1*all {
			return d // no function of the motion
		}
		return out
	}
}
