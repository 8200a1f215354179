package lsq

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/floats"
)

// triangle factors the column-major m×n matrix a (destroyed) by Householder
// reflections and applies them to q (length m, changed): r, n×n row-major,
// becomes the upper triangle and q[:n] the first n entries of Qᵀq. When m < n
// the lower rows of r are 0 and only m entries of q count.
func triangle(a []float64, m, n int, q, r []float64) {
	k := min(m, n)
	for j := 0; j < k; j++ {
		col := a[j*m+j : (j+1)*m]
		norm := floats.Norm(col, 2)
		if norm == 0 {
			continue
		}
		if col[0] > 0 {
			norm = -norm
		}
		// v = col − norm·e1, H = 1 − v·vᵀ/(norm·(norm − col0)) maps col to norm·e1.
		pivot := col[0]
		col[0] = pivot - norm
		beta := 1 / (norm * (norm - pivot))
		for c := j + 1; c < n; c++ {
			other := a[c*m+j : (c+1)*m]
			floats.AddScaled(other, -beta*floats.Dot(col, other), col)
		}
		tail := q[j:m]
		floats.AddScaled(tail, -beta*floats.Dot(col, tail), col)
		a[j*m+j] = norm
	}
	for i := range n {
		for j := range n {
			switch {
			case i > j || i >= m:
				r[i*n+j] = 0
			default:
				r[i*n+j] = a[j*m+i]
			}
		}
	}
}

// svd is a one-sided Jacobi singular value decomposition of a small matrix
// (G. H. Golub and C. F. Van Loan, "Matrix Computations", 4th ed., §8.6.3):
// A·V = U·S with a column-major m×n.
type svd struct {
	m, n int
	us   []float64 // column-major m×n: U·S
	v    []float64 // column-major n×n
	s    []float64
	perm []int // columns by descending singular value
}

func newSVD(m, n int) *svd {
	return &svd{us: make([]float64, m*n), v: make([]float64, n*n), s: make([]float64, n), perm: make([]int, n)}
}

// factor decomposes the m×n matrix that is already in d.us[:m*n].
func (d *svd) factor(m, n int) {
	d.m, d.n = m, n
	v := d.v[:n*n]
	clear(v)
	for j := range n {
		v[j*n+j] = 1
	}
	const eps = 1e-16
	for range 60 {
		turned := false
		for p := 0; p < n-1; p++ {
			cp := d.us[p*m : (p+1)*m]
			for q := p + 1; q < n; q++ {
				cq := d.us[q*m : (q+1)*m]
				app, aqq, apq := floats.Dot(cp, cp), floats.Dot(cq, cq), floats.Dot(cp, cq)
				if math.Abs(apq) <= 4*eps*math.Sqrt(app)*math.Sqrt(aqq) || apq == 0 {
					continue
				}
				turned = true
				zeta := (aqq - app) / (2 * apq)
				t := 1 / (math.Abs(zeta) + math.Hypot(1, zeta))
				if zeta < 0 {
					t = -t
				}
				c := 1 / math.Hypot(1, t)
				s := c * t
				rotate(cp, cq, c, s)
				rotate(v[p*n:(p+1)*n], v[q*n:(q+1)*n], c, s)
			}
		}
		if !turned {
			break
		}
	}
	for j := range n {
		d.s[j] = floats.Norm(d.us[j*m:(j+1)*m], 2)
		d.perm[j] = j
	}
	sort.Sort(byDescending{d})
}

// byDescending orders svd.perm without allocating a closure.
type byDescending struct{ *svd }

func (b byDescending) Len() int           { return b.n }
func (b byDescending) Less(i, j int) bool { return b.s[b.perm[i]] > b.s[b.perm[j]] }
func (b byDescending) Swap(i, j int)      { b.perm[i], b.perm[j] = b.perm[j], b.perm[i] }

func rotate(a, b []float64, c, s float64) {
	for i, x := range a {
		y := b[i]
		a[i] = c*x - s*y
		b[i] = s*x + c*y
	}
}
