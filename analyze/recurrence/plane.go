package recurrence

import (
	"cmp"
	"math"
	"math/bits"
	"slices"
)

// A plane compares the states of two series (or of one with itself). The
// columns stand in tiles. In a tile every component is replaced by its rank, so
// that "|x − a| ≤ ε" becomes "lo ≤ rank ≤ hi", exactly; ranks have 15 bits, four
// lie in a machine word, and four comparisons are two subtractions.
type plane struct {
	dim   int
	rows  Vectors
	cols  Vectors
	eps   float64
	norm  Norm
	valid []bool // of the columns
	okRow []bool
	tiles []tile
}

const (
	tileColumns = 1 << 14
	missing     = 0x7FFF // rank of a missing component: above every hi
	high        = 0x8000800080008000
	ones        = 0x0001000100010001
)

type tile struct {
	from   int
	ranks  [][][16]uint64 // per component: blocks of 64 columns, see pack
	sorted [][]float64    // per component
}

func newPlane(rows, cols Vectors, eps float64, norm Norm) *plane {
	p := &plane{dim: rows.Dim, rows: rows, cols: cols, eps: eps, norm: norm, valid: whole(cols), okRow: whole(rows)}
	for from := 0; from < cols.N; from += tileColumns {
		n := min(tileColumns, cols.N-from)
		t := tile{from: from}
		order := make([]int, 0, n)
		for k := range p.dim {
			at := func(j int) float64 { return cols.X[(from+j)*p.dim+k] }
			order = order[:0]
			for j := range n {
				if p.valid[from+j] {
					order = append(order, j)
				}
			}
			slices.SortFunc(order, func(a, b int) int { return cmp.Compare(at(a), at(b)) })
			rank := make([]uint64, (n+63)/64*64)
			for i := range rank {
				rank[i] = missing
			}
			sorted := make([]float64, len(order))
			for r, j := range order {
				rank[j], sorted[r] = uint64(r), at(j)
			}
			t.ranks = append(t.ranks, pack(rank))
			t.sorted = append(t.sorted, sorted)
		}
		p.tiles = append(p.tiles, t)
	}
	return p
}

// whole tells which states miss no component.
func whole(v Vectors) []bool {
	ok := make([]bool, v.N)
	for i := range ok {
		ok[i] = !slices.ContainsFunc(v.State(i), math.IsNaN)
	}
	return ok
}

// pack puts blocks of 64 ranks into 16 words so that column 16·l + k of a block
// is lane l of word k: bit k of lane l of the answer is then that column's.
func pack(rank []uint64) [][16]uint64 {
	out := make([][16]uint64, len(rank)/64)
	for b := range out {
		for l := range 4 {
			for k := range 16 {
				out[b][k] |= rank[64*b+16*l+k] << (16 * l)
			}
		}
	}
	return out
}

// between returns one bit per column of a block: lo ≤ rank ≤ hi. lo has its
// value in all four lanes, hi too with the lanes' highest bits set.
func between(r *[16]uint64, lo, hi uint64) uint64 {
	// 0x8000 + rank − lo has its highest bit set when rank ≥ lo, and no lane
	// borrows from the next.
	acc := (((r[0] | high) - lo) & (hi - r[0]) & high) >> 15
	acc |= (((r[1] | high) - lo) & (hi - r[1]) & high) >> 14
	acc |= (((r[2] | high) - lo) & (hi - r[2]) & high) >> 13
	acc |= (((r[3] | high) - lo) & (hi - r[3]) & high) >> 12
	acc |= (((r[4] | high) - lo) & (hi - r[4]) & high) >> 11
	acc |= (((r[5] | high) - lo) & (hi - r[5]) & high) >> 10
	acc |= (((r[6] | high) - lo) & (hi - r[6]) & high) >> 9
	acc |= (((r[7] | high) - lo) & (hi - r[7]) & high) >> 8
	acc |= (((r[8] | high) - lo) & (hi - r[8]) & high) >> 7
	acc |= (((r[9] | high) - lo) & (hi - r[9]) & high) >> 6
	acc |= (((r[10] | high) - lo) & (hi - r[10]) & high) >> 5
	acc |= (((r[11] | high) - lo) & (hi - r[11]) & high) >> 4
	acc |= (((r[12] | high) - lo) & (hi - r[12]) & high) >> 3
	acc |= (((r[13] | high) - lo) & (hi - r[13]) & high) >> 2
	acc |= (((r[14] | high) - lo) & (hi - r[14]) & high) >> 1
	acc |= ((r[15] | high) - lo) & (hi - r[15]) & high
	return acc
}

// limits are the ranks that lie within ε of a, by the very comparison
// |x − a| ≤ ε of the definition.
func limits(sorted []float64, a, eps float64) (lo, hi int) {
	lo, end := 0, len(sorted)
	for lo < end {
		if mid := (lo + end) / 2; a-sorted[mid] > eps {
			lo = mid + 1
		} else {
			end = mid
		}
	}
	hi, end = lo, len(sorted)
	for hi < end {
		if mid := (hi + end) / 2; sorted[mid]-a <= eps {
			hi = mid + 1
		} else {
			end = mid
		}
	}
	return lo, hi - 1
}

// and clears the bits of the columns from first on that are not near row i.
func (p *plane) and(i, first int, row []uint64, lohi []uint64) {
	if !p.okRow[i] {
		clear(row[first/64:])
		return
	}
	state := p.rows.State(i)
	for _, t := range p.tiles[first/tileColumns:] {
		words := row[t.from/64:]
		blocks := len(t.ranks[0])
		empty := false
		for k, a := range state {
			lo, hi := limits(t.sorted[k], a, p.eps)
			empty = empty || hi < lo
			lohi[2*k], lohi[2*k+1] = uint64(lo)*ones, uint64(max(hi, 0))*ones|high
		}
		b := 0
		if first > t.from {
			b = (first - t.from) / 64
		}
		if empty {
			clear(words[b:blocks])
			continue
		}
		for ; b < blocks; b++ {
			w := words[b]
			for k := 0; k < p.dim && w != 0; k++ {
				w &= between(&t.ranks[k][b], lohi[2*k], lohi[2*k+1])
			}
			if w != 0 && p.norm != Maximum && p.dim > 1 {
				w = p.confirm(state, t.from+64*b, w)
			}
			words[b] = w
		}
	}
}

// confirm keeps those of a word's columns that are near in the norm itself.
func (p *plane) confirm(state []float64, from int, w uint64) uint64 {
	out := w
	for rest := w; rest != 0; rest &= rest - 1 {
		b := bits.TrailingZeros64(rest)
		if !(p.norm.Distance(state, p.cols.State(from+b)) <= p.eps) {
			out &^= 1 << b
		}
	}
	return out
}
