package recurrence

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// slow is the definition of Marwan et al. 2007 followed to the letter on a whole
// matrix.
type slow struct {
	n, m           int
	r              [][]bool
	points, pairs  int
	diag, vert     map[int]int
	gap1, gap2     []int
	lagPts, lagAll []int
}

func slowPlot(kind string, opt Options, eps []float64, a []Vectors, b []Vectors) *slow {
	s := &slow{n: a[0].N, m: b[0].N, diag: map[int]int{}, vert: map[int]int{}}
	s.lagPts, s.lagAll = make([]int, s.n), make([]int, s.n)
	s.r = make([][]bool, s.n)
	for i := range s.r {
		s.r[i] = make([]bool, s.m)
		for j := range s.r[i] {
			if kind != "cross" && max(i-j, j-i) < opt.Theiler {
				continue
			}
			near, both := true, true
			for k := range a {
				d := opt.Norm.Distance(a[k].State(i), b[k].State(j))
				for _, x := range append(append([]float64{}, a[k].State(i)...), b[k].State(j)...) {
					if math.IsNaN(x) {
						both = false
					}
				}
				near = near && both && d <= eps[k]
			}
			s.r[i][j] = near && both
			if both {
				s.pairs++
				if j >= i && kind != "cross" {
					s.lagAll[j-i]++
				}
			}
			if s.r[i][j] {
				s.points++
				if j >= i && kind != "cross" {
					s.lagPts[j-i]++
				}
			}
		}
	}
	at := func(i, j int) bool { return i >= 0 && j >= 0 && i < s.n && j < s.m && s.r[i][j] }
	for i := range s.n {
		for j := range s.m {
			if at(i, j) && !at(i-1, j-1) {
				l := 0
				for at(i+l, j+l) {
					l++
				}
				s.diag[l]++
			}
		}
	}
	for j := range s.m {
		last, begin := -1, -1
		for i := 0; i < s.n; i++ {
			// The band parts a column: what lies before and after it is not joined.
			if kind != "cross" && i == j {
				last, begin = -1, -1
			}
			if !at(i, j) {
				continue
			}
			if last >= 0 {
				s.gap1 = append(s.gap1, i-last)
			}
			if !at(i-1, j) {
				if begin >= 0 {
					s.gap2 = append(s.gap2, i-begin)
				}
				begin = i
				l := 0
				for at(i+l, j) {
					l++
				}
				s.vert[l]++
			}
			last = i
		}
	}
	return s
}

func (s *slow) numbers(lmin, vmin int) numbers {
	var out numbers
	mean := func(x []int) float64 {
		t := 0
		for _, v := range x {
			t += v
		}
		return float64(t) / float64(len(x))
	}
	lines := func(p map[int]int, least int) (share, length, entropy float64) {
		long, all, n := 0, 0, 0
		for l, c := range p {
			all += l * c
			if l >= least {
				long += l * c
				n += c
			}
		}
		for l, c := range p {
			if l >= least {
				q := float64(c) / float64(n)
				entropy -= q * math.Log(q)
			}
		}
		if all > 0 {
			share = float64(long) / float64(all)
		}
		return share, float64(long) / float64(n), entropy
	}
	out[rr] = float64(s.points) / float64(s.pairs)
	out[det], out[meanLine], out[entropy] = lines(s.diag, lmin)
	out[lam], out[trapping], _ = lines(s.vert, vmin)
	out[return1], out[return2] = mean(s.gap1), mean(s.gap2)
	return out
}

func longestOf(p map[int]int) int {
	top := 0
	for l := range p {
		top = max(top, l)
	}
	return top
}

// wander is a noisy oscillation, so that lines of all kinds and lengths occur.
func wander(rng *rand.Rand, n, dim int, missing float64) Vectors {
	v := Vectors{N: n, Dim: dim, Step: 0.5, Start: 3, X: make([]float64, n*dim)}
	w, drift := 0.1+0.3*rng.Float64(), 0.0
	for i := range n {
		drift = 0.9*drift + 0.1*rng.NormFloat64()
		for k := range dim {
			v.X[i*dim+k] = math.Sin(w*float64(i)+float64(k)) + drift
			if i%7 == 3 {
				v.X[i*dim+k] = math.Round(4*v.X[i*dim+k]) / 4 // ties
			}
			if rng.Float64() < missing {
				v.X[i*dim+k] = math.NaN()
			}
		}
	}
	return v
}

// Everything against the slow computation, over norms, sizes, bands, missing
// states and kinds.
func TestAgainstSlow(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for trial := range 120 {
		n, m, dim := 20+rng.IntN(330), 20+rng.IntN(330), 1+rng.IntN(3)
		if trial%10 == 0 {
			n = 64 * (1 + rng.IntN(4)) // the edges of words and strips
			m = 64
		}
		opt := Options{
			Norm: Norm(rng.IntN(3)), Threshold: 0.1 + rng.Float64(), Theiler: 1 + rng.IntN(5),
			LMin: 2 + rng.IntN(3), VMin: 2 + rng.IntN(3), Workers: 1 + rng.IntN(3), Map: 16,
		}
		gone := 0.0
		if trial%3 == 0 {
			gone = 0.02
		}
		a, b := wander(rng, n, dim, gone), wander(rng, m, dim, gone)
		same := wander(rng, n, dim, gone)
		eps := []float64{opt.Threshold, opt.Threshold}
		for _, kind := range []string{"auto", "cross", "joint"} {
			var p *Plot
			var err error
			var want *slow
			switch kind {
			case "auto":
				p, err = Auto(a, opt)
				want = slowPlot(kind, opt, eps, []Vectors{a}, []Vectors{a})
			case "cross":
				p, err = Cross(a, b, opt)
				want = slowPlot(kind, opt, eps, []Vectors{a}, []Vectors{b})
			case "joint":
				p, err = Joint(opt, a, same)
				want = slowPlot(kind, opt, eps, []Vectors{a, same}, []Vectors{a, same})
			}
			if err != nil {
				t.Fatal(err)
			}
			where := fmt.Sprintf("trial %d %s n=%d m=%d dim=%d norm=%d eps=%.3f band=%d", trial, kind, n, m, dim, opt.Norm, opt.Threshold, opt.Theiler)
			w := want.numbers(opt.LMin, opt.VMin)
			g := p.Measures
			got := numbers{g.RR.V, g.DET.V, g.L.V / 0.5, g.ENTR.V, g.LAM.V, g.TT.V / 0.5, g.T1.V / 0.5, g.T2.V / 0.5}
			if int(p.Points) != want.points {
				t.Fatalf("%s: %d points, want %d", where, p.Points, want.points)
			}
			for q := range got {
				if !(math.Abs(got[q]-w[q]) < 1e-9*(1+math.Abs(w[q])) || math.IsNaN(got[q]) && math.IsNaN(w[q])) {
					t.Fatalf("%s: measure %d is %v, want %v", where, q, got[q], w[q])
				}
			}
			if l, v := longestOf(want.diag), longestOf(want.vert); g.LMax.V != 0.5*float64(l) || g.VMax.V != 0.5*float64(v) {
				t.Fatalf("%s: longest lines %v and %v s, want %d and %d samples", where, g.LMax.V, g.VMax.V, l, v)
			}
			for d, share := range p.Lag {
				if d < opt.Theiler || want.lagAll[d] == 0 {
					continue
				}
				if e := float64(want.lagPts[d]) / float64(want.lagAll[d]); math.Abs(share-e) > 1e-12 {
					t.Fatalf("%s: recurrence rate at lag %d is %v, want %v", where, d, share, e)
				}
			}
			checkMap(t, where, p, want)
		}
	}
}

// checkMap holds the picture to the matrix, cell by cell.
func checkMap(t *testing.T, where string, p *Plot, want *slow) {
	t.Helper()
	count, size := make([]int, p.Map.Rows*p.Map.Cols), make([]int, p.Map.Rows*p.Map.Cols)
	for i := range want.n {
		for j := range want.m {
			c := i*p.Map.Rows/want.n*p.Map.Cols + j*p.Map.Cols/want.m
			size[c]++
			if want.r[i][j] || p.Kind != "cross" && i == j {
				count[c]++
			}
		}
	}
	for c, n := range count {
		if e := float32(n) / float32(size[c]); math.Abs(float64(e-p.Map.Density[c])) > 1e-6 {
			t.Fatalf("%s: cell %d of the picture is %v, want %v", where, c, p.Map.Density[c], e)
		}
	}
}
