package chaos

import (
	"math"

	"lodeswing/analyze/recurrence"
)

// tree finds near states in the Euclidean norm: a k-d tree (J. L. Bentley,
// Communications of the ACM 18 (1975) 509) over the first usable states of v.
type tree struct {
	v     recurrence.Vectors
	order []int32 // states, leaf by leaf
	nodes []node
}

type node struct {
	axis     int32 // −1: a leaf
	split    float64
	from, to int32 // a leaf's states in order
	left     int32 // children are left and left + 1
}

const leafSize = 12

// newTree indexes the first n states of v; states with a NaN are left out.
func newTree(v recurrence.Vectors, n int) *tree {
	t := &tree{v: v}
	for i := range n {
		if whole(v.State(i)) {
			t.order = append(t.order, int32(i))
		}
	}
	t.nodes = append(t.nodes, node{})
	t.build(0, 0, int32(len(t.order)))
	return t
}

func whole(state []float64) bool {
	for _, x := range state {
		if math.IsNaN(x) {
			return false
		}
	}
	return true
}

func (t *tree) build(at, from, to int32) {
	axis, wide := int32(-1), 0.0
	if to-from > leafSize {
		for k := range t.v.Dim {
			lo, hi := math.Inf(1), math.Inf(-1)
			for _, i := range t.order[from:to] {
				x := t.v.X[int(i)*t.v.Dim+k]
				lo, hi = min(lo, x), max(hi, x)
			}
			if hi-lo > wide {
				axis, wide = int32(k), hi-lo
			}
		}
	}
	if axis < 0 {
		t.nodes[at] = node{axis: -1, from: from, to: to}
		return
	}
	mid := from + (to-from)/2
	t.halve(from, to, mid, int(axis))
	left := int32(len(t.nodes))
	t.nodes[at] = node{axis: axis, split: t.at(mid, int(axis)), left: left}
	t.nodes = append(t.nodes, node{}, node{})
	t.build(left, from, mid)
	t.build(left+1, mid, to)
}

func (t *tree) at(pos int32, axis int) float64 { return t.v.X[int(t.order[pos])*t.v.Dim+axis] }

// halve puts the smaller states along axis before mid (Hoare's "Find").
func (t *tree) halve(from, to, mid int32, axis int) {
	lo, hi := from, to-1
	for lo < hi {
		pivot := t.at(mid, axis)
		i, j := lo, hi
		for i <= j {
			for t.at(i, axis) < pivot {
				i++
			}
			for pivot < t.at(j, axis) {
				j--
			}
			if i <= j {
				t.order[i], t.order[j] = t.order[j], t.order[i]
				i++
				j--
			}
		}
		if j < mid {
			lo = i
		}
		if mid < i {
			hi = j
		}
	}
}

// nearest returns the state nearest to q (a state at index self) that is at least
// band away in time, and its distance; −1 when there is none.
func (t *tree) nearest(q []float64, self, band int) (best int, distance float64) {
	if n := t.some(q, 1, self, band); len(n) == 1 {
		return n[0].i, n[0].d
	}
	return -1, math.Inf(1)
}

// neighbour is a state and its distance.
type neighbour struct {
	i int
	d float64
}

// some returns the n states nearest to q (a state at index self), nearest first,
// that are at least band away from it in time.
func (t *tree) some(q []float64, n, self, band int) []neighbour {
	list := make([]neighbour, 0, n+1) // d holds squares until the end
	limit := math.Inf(1)
	var look func(at int32)
	look = func(at int32) {
		nd := &t.nodes[at]
		if nd.axis < 0 {
			for _, i := range t.order[nd.from:nd.to] {
				if gap := int(i) - self; gap < band && gap > -band {
					continue
				}
				s := square(q, t.v.State(int(i)))
				if s >= limit {
					continue
				}
				list = append(list, neighbour{int(i), s})
				for k := len(list) - 1; k > 0 && list[k].d < list[k-1].d; k-- {
					list[k], list[k-1] = list[k-1], list[k]
				}
				if len(list) > n {
					list = list[:n]
				}
				if len(list) == n {
					limit = list[n-1].d
				}
			}
			return
		}
		away := q[nd.axis] - nd.split
		first, second := nd.left, nd.left+1
		if away > 0 {
			first, second = second, first
		}
		look(first)
		if away*away < limit {
			look(second)
		}
	}
	look(0)
	for k := range list {
		list[k].d = math.Sqrt(list[k].d)
	}
	return list
}

func square(a, b []float64) float64 {
	s := 0.0
	for i, x := range a {
		s += (x - b[i]) * (x - b[i])
	}
	return s
}
