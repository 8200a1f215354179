package modes

import (
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// subspace is the joint Hankel matrix's leading directions on an even grid, from
// which starts of any number of modes follow.
type subspace struct {
	step    float64
	vectors *mat.Dense // columns, strongest first
	size    int
}

// mostGrid and mostRows bound the work of the start, which is refined on the true
// times anyway.
const (
	mostGrid = 600
	mostRows = 200
)

// space builds the subspace. The grid is no finer than the motion's highest
// strong frequency needs.
func (d *data) space() *subspace {
	top := d.highest()
	step := math.Max(d.step, 1/(5*top))
	step = math.Max(step, d.span/mostGrid)
	n := int(d.span/step) + 1
	if n < 12 {
		return nil
	}
	rows := min(n/2, mostRows)
	r := mat.NewSymDense(rows, nil)
	for _, b := range d.bobs {
		g := b.grid(-d.span/2, step, n)
		norm := 0.0
		for _, w := range b.w {
			norm += w * w / float64(len(b.w))
		}
		for k := 0; k+rows <= n; k++ {
			r.SymRankOne(r, norm, mat.NewVecDense(rows, g[k:k+rows]))
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(r, true) {
		return nil
	}
	var v mat.Dense
	eig.VectorsTo(&v)
	most := min(rows/2, 40)
	out := mat.NewDense(rows, most, nil)
	for j := range most {
		for i := range rows {
			out.Set(i, j, v.At(i, rows-1-j)) // eigenvalues come rising
		}
	}
	return &subspace{step: step, vectors: out, size: rows}
}

// grid is the mean of the samples about each point of an even grid, or a line
// between neighbours where it holds none; the mean is taken out.
func (b *one) grid(from, step float64, n int) []float64 {
	g := make([]float64, n)
	lo := 0
	for k := range g {
		at := from + float64(k)*step
		for lo < len(b.x) && b.x[lo] < at-step/2 {
			lo++
		}
		sum, m := 0.0, 0
		for i := lo; i < len(b.x) && b.x[i] < at+step/2; i++ {
			sum += b.y[i] - b.mean
			m++
		}
		switch {
		case m > 0:
			g[k] = sum / float64(m)
		case lo > 0 && lo < len(b.x):
			f := (at - b.x[lo-1]) / (b.x[lo] - b.x[lo-1])
			g[k] = b.y[lo-1] + f*(b.y[lo]-b.y[lo-1]) - b.mean
		}
	}
	return g
}

// start gives angular frequency and decay rate of up to k modes, by ESPRIT on 2k
// directions.
func (s *subspace) start(k int) []float64 {
	_, most := s.vectors.Dims()
	if 2*k > most {
		return nil
	}
	up := s.vectors.Slice(0, s.size-1, 0, 2*k)
	down := s.vectors.Slice(1, s.size, 0, 2*k)
	var turn mat.Dense
	if err := turn.Solve(up, down); err != nil {
		return nil
	}
	var eig mat.Eigen
	if !eig.Factorize(&turn, mat.EigenNone) {
		return nil
	}
	var p []float64
	for _, z := range eig.Values(nil) {
		if a := cmplx.Phase(z); a > 0 && a < math.Pi {
			p = append(p, a/s.step, -math.Log(cmplx.Abs(z))/s.step)
		}
	}
	return p
}

// periodogram is the power of the bobs together, after taking out r if not nil
// (residuals, one slice per bob, already weighted), at the frequencies hz.
func (d *data) periodogram(r [][]float64, hz []float64) []float64 {
	out := make([]float64, len(hz))
	for k, b := range d.bobs {
		for j, f := range hz {
			w := 2 * math.Pi * f
			var re, im float64
			for i, x := range b.x {
				v := b.w[i] * (b.y[i] - b.mean)
				if r != nil {
					v = r[k][i]
				}
				s, c := math.Sincos(w * x)
				re += v * c
				im += v * s
			}
			out[j] += (re*re + im*im) / float64(len(b.x))
		}
	}
	return out
}

// band is a grid of frequencies from one over the clip's length to half the
// sampling rate, at most mostGrid·2 of them.
func (d *data) band() []float64 {
	top := 0.5 / d.step
	df := math.Max(0.5/d.span, top/(2*mostGrid))
	var hz []float64
	for f := 1 / d.span; f < top; f += df {
		hz = append(hz, f)
	}
	return hz
}

// highest is the highest frequency that holds more than a thousandth of the
// strongest one's power.
func (d *data) highest() float64 {
	hz := d.band()
	p := d.periodogram(nil, hz)
	most := slices.Max(p)
	for i := len(p) - 1; i > 0; i-- {
		if p[i] > 1e-3*most {
			return hz[i]
		}
	}
	return hz[0]
}
