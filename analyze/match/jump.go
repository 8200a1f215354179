package match

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// jumps are, for each stretch that another follows without a break, by how much the
// state at its end and that at the beginning of the next differ, over what both are
// unsure by: the r.m.s. over all components. A tap shorter than a frame shows in nothing
// else where it falls between two stretches. NaN where it cannot be told.
func (f *fitter) jumps(c int) []float64 {
	k := &f.clips[c]
	out := make([]float64, len(k.segments))
	rows := f.rower(c, f.values())
	n := 2 * k.model.Freedoms()
	var before *mat.Dense // covariance of the stretch's state
	state := func(g *segment) *mat.Dense {
		if len(g.dpos) < n || g.to-g.from < 6 {
			return nil
		}
		b := rows.block(g)
		js := mat.NewDense(b.rows, n, b.js)
		var normal, inverse mat.Dense
		normal.Mul(js.T(), js)
		if inverse.Inverse(&normal) != nil {
			return nil
		}
		return &inverse
	}
	for s := range k.segments {
		g := &k.segments[s]
		out[s] = math.NaN()
		if s == 0 {
			before = state(g)
		}
		if s+1 >= len(k.segments) {
			break
		}
		after := state(&k.segments[s+1])
		if before != nil && after != nil && !g.broken && len(g.dend) >= n {
			along := mat.NewDense(n, n, nil)
			for v := range n {
				for u := range n {
					along.Set(u, v, g.dend[v][u])
				}
			}
			var half, cov mat.Dense
			half.Mul(along, before)
			cov.Mul(&half, along.T())
			cov.Add(&cov, after)
			d := make([]float64, n)
			k.model.Deviation(k.segments[s+1].y, g.end, d)
			x := mat.NewVecDense(n, d)
			var y mat.VecDense
			if y.SolveVec(&cov, x) == nil {
				out[s] = math.Sqrt(math.Max(mat.Dot(x, &y), 0) / float64(n))
			}
		}
		before = after
	}
	return out
}
