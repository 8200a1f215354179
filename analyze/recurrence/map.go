package recurrence

import (
	"math/bits"
	"slices"
)

// Map is the picture of a recurrence plot: Density[a·Cols + b] is the share of
// recurrences among the pairs of cell (a, b), rows first. A cell holds one pair
// where the plot is no larger than was asked for. Row and Col hold the cells'
// middles in s. The excluded band is empty but for the line of identity.
type Map struct {
	Rows, Cols int
	Row, Col   []float64
	Density    []float32
}

// darkest is the share from which on a picture shows cells as dark as can be: so that
// the plot of a long series, whose cells hold a few recurrences among many pairs, is
// not pale. One cell in a hundred of those with any, the middle diagonal not counted,
// has more.
func (m *Map) darkest() float64 {
	var some []float64
	for a := range m.Rows {
		for b := range m.Cols {
			if d := m.Density[a*m.Cols+b]; d > 0 && (a != b || m.Rows != m.Cols) {
				some = append(some, float64(d))
			}
		}
	}
	if len(some) == 0 {
		return 1
	}
	slices.Sort(some)
	return max(0.01, some[len(some)*99/100])
}

// grid counts points by cell.
type grid struct {
	rows, cols int
	row, col   []int32 // cell of each row and column
	count      []int32
}

func newGrid(e *engine) *grid {
	if e.opt.Map <= 0 {
		return nil
	}
	g := &grid{rows: min(e.opt.Map, e.n), cols: min(e.opt.Map, e.m)}
	cells := func(n, k int) []int32 {
		c := make([]int32, n)
		for i := range c {
			c[i] = int32(i * k / n)
		}
		return c
	}
	g.row, g.col = cells(e.n, g.rows), cells(e.m, g.cols)
	g.count = make([]int32, g.rows*g.cols)
	return g
}

func (g *grid) take(i, w0 int, row []uint64) {
	at := g.count[int(g.row[i])*g.cols:]
	for w := w0; w < len(row); w++ {
		x := row[w]
		if x == 0 {
			continue
		}
		if last := 64*w + 63; last < len(g.col) && g.col[64*w] == g.col[last] {
			at[g.col[last]] += int32(bits.OnesCount64(x))
			continue
		}
		for ; x != 0; x &= x - 1 {
			at[g.col[64*w+bits.TrailingZeros64(x)]]++
		}
	}
}

// picture turns the workers' counts into a map.
func (e *engine) picture(workers []*rowTally) *Map {
	g := workers[0].grid
	if g == nil {
		return nil
	}
	for _, t := range workers[1:] {
		for i, c := range t.grid.count {
			g.count[i] += c
		}
	}
	v := e.planes[0]
	middles := func(n, k int, v Vectors) (mid []float64, size []int) {
		mid, size = make([]float64, k), make([]int, k)
		for c := range k {
			from, to := (c*n+k-1)/k, ((c+1)*n+k-1)/k
			size[c] = to - from
			mid[c] = v.Start + v.Step*(float64(from+to-1)/2)
		}
		return mid, size
	}
	m := &Map{Rows: g.rows, Cols: g.cols, Density: make([]float32, g.rows*g.cols)}
	var rs, cs []int
	m.Row, rs = middles(e.n, g.rows, v.rows)
	m.Col, cs = middles(e.m, g.cols, v.cols)
	for a := range g.rows {
		for b := range g.cols {
			c := g.count[a*g.cols+b]
			if e.band >= 0 && a >= b {
				c = g.count[b*g.cols+a]
				if a == b {
					c = 2*c + int32(rs[a])
				}
			}
			m.Density[a*g.cols+b] = float32(c) / float32(rs[a]*cs[b])
		}
	}
	return m
}
