package follow

import (
	"math"

	"lodeswing/track"
)

// A codec moves whole blocks, and a bob with them, by parts of a pixel: that
// shows in no frame's residuals, only in the path. So the stated uncertainties
// are held against how far samples lie off a smooth curve through their
// neighbours, and raised where they are too small.
const (
	smoothHalf   = 4 // neighbours on either side
	smoothDegree = 4 // of the curve: what a swing does within nine frames is followed to 1e-3 px
	mostRaise    = 4 // of a standard uncertainty
)

// raiseToScatter raises the uncertainties of samples to what their path shows,
// and returns the factor (1: they were honest).
func raiseToScatter(s []track.Sample) float64 {
	var ratios []float64
	step := max(len(s)/2000, 1)
	for i := smoothHalf; i+smoothHalf < len(s); i += step {
		if q, ok := offCurve(s[i-smoothHalf : i+smoothHalf+1]); ok {
			ratios = append(ratios, q)
		}
	}
	if len(ratios) < 30 {
		return 1
	}
	// The median of chi-square over one degree of freedom is 0.4549; a median does
	// not mind kicks. Both axes together: two degrees, median ln 4 / 2 per axis.
	f := math.Sqrt(median(ratios) / (2 * math.Ln2))
	f = math.Min(math.Max(f, 1), mostRaise)
	for i := range s {
		c := &s[i].Pixel
		c.AA, c.AB, c.BB = c.AA*f*f, c.AB*f*f, c.BB*f*f
	}
	return f
}

// offCurve is the squared distance of the middle sample from the curve through
// all, over its expectation, both axes added.
func offCurve(s []track.Sample) (float64, bool) {
	const n = 2*smoothHalf + 1
	for i := range s {
		if s[i].State != track.Seen || s[i].Pixel.AA > 9*s[smoothHalf].Pixel.AA || s[i].Pixel.BB > 9*s[smoothHalf].Pixel.BB {
			return 0, false
		}
	}
	span := s[n-1].T - s[0].T
	if !(span > 0) {
		return 0, false
	}
	// Weights h of the samples in the curve's value at the middle one, from an
	// orthogonal basis of polynomials at the true times (Gram–Schmidt).
	var basis [smoothDegree + 1][n]float64
	var h [n]float64
	for d := range basis {
		b := &basis[d]
		for i := range b {
			b[i] = math.Pow(2*(s[i].T-s[smoothHalf].T)/span, float64(d))
		}
		for e := range d {
			p := 0.0
			for i := range b {
				p += b[i] * basis[e][i]
			}
			for i := range b {
				b[i] -= p * basis[e][i]
			}
		}
		q := 0.0
		for _, v := range b {
			q += v * v
		}
		if q < 1e-12 {
			return 0, false
		}
		q = 1 / math.Sqrt(q)
		for i := range b {
			b[i] *= q
		}
		for i := range h {
			h[i] += b[i] * b[smoothHalf]
		}
	}
	du, dv := s[smoothHalf].U, s[smoothHalf].V
	var cu, cv float64
	for i := range s {
		k := -h[i]
		du -= h[i] * s[i].U
		dv -= h[i] * s[i].V
		if i == smoothHalf {
			k++
		}
		cu += k * k * s[i].Pixel.AA
		cv += k * k * s[i].Pixel.BB
	}
	return du*du/cu + dv*dv/cv, true
}
