package board

import (
	"fmt"
	"math"

	"lodeswing/track/camera"
	"lodeswing/track/clip"
)

// Find looks for the printed target of that name in frames of a clip (the first
// few, taken while camera and target stood still) and returns its crossings. The
// error says what was seen instead and what to do.
func Find(frames []*clip.Frame, name string) (*camera.Sighting, error) {
	spec, err := ParseName(name)
	if err != nil {
		return nil, err
	}
	if len(frames) == 0 {
		return nil, fmt.Errorf("there is no frame to look for the target %q in", name)
	}
	// The mean of the frames has the least noise; if something moved, the first
	// frame alone may still do.
	g := meanGrey(frames)
	s, most, err := findIn(g, spec)
	if err != nil && len(frames) > 1 {
		if s1, _, err1 := findIn(meanGrey(frames[:1]), spec); err1 == nil {
			return s1, nil
		}
	}
	if err != nil {
		return nil, fmt.Errorf("the printed target %q was not found (of its %d crossings, at most %d were seen together): it must be flat, whole, sharp and evenly lit, with squares at least 10 px wide, and the rig must name the target that is in the picture", name, (spec.Cols-1)*(spec.Rows-1), most)
	}
	return s, nil
}

// findIn looks in one picture. most is the number of crossings of the largest
// piece of a board that was seen.
func findIn(g *grey, spec Spec) (s *camera.Sighting, most int, err error) {
	// A ring of radius 5 suits squares of 8 to some 30 px; larger or blurred ones are
	// sought in a smaller picture.
	levels := []*grey{g}
	for len(levels) < 5 && levels[len(levels)-1].w > 80 && levels[len(levels)-1].h > 80 {
		levels = append(levels, levels[len(levels)-1].half())
	}
	order := []int{1, 0, 2, 3, 4}
	for _, l := range order {
		if l >= len(levels) {
			continue
		}
		var found []crossing
		for _, p := range levels[l].crossings(3000) {
			c, ok := startCrossing(levels[l], float64(p[0]), float64(p[1]), 4.5)
			if ok && c.fit(levels[l], 5.5) && nowhere(found, c) {
				found = append(found, c)
			}
		}
		grid, n := lattice(found, spec)
		most = max(most, n)
		if grid == nil {
			continue
		}
		if s := refine(g, grid, spec, 1<<l); s != nil {
			return s, most, nil
		}
	}
	return nil, most, fmt.Errorf("not found")
}

// nowhere tells whether no crossing in the list is at c's place.
func nowhere(found []crossing, c crossing) bool {
	for _, f := range found {
		if math.Hypot(f.u-c.u, f.v-c.v) < 2 {
			return false
		}
	}
	return true
}

// node is one place of a lattice.
type node struct{ i, j int }

// lattice joins crossings into a board of the spec's size. It returns the
// crossings by their (p, q) of Spec.Crossing, nil where no such board is there,
// and the size of the largest piece seen.
func lattice(found []crossing, spec Spec) (grid map[node]*crossing, most int) {
	used := make([]bool, len(found))
	for seed := range found {
		if used[seed] {
			continue
		}
		piece := grow(found, seed, used)
		if len(piece) < 6 {
			continue
		}
		most = max(most, len(piece))
		if grid := orient(piece, spec); grid != nil {
			return grid, most
		}
	}
	return nil, most
}

// placed is a crossing with the lattice directions that reach it.
type placed struct {
	c    *crossing
	a, b [2]float64 // steps along i and j, px: directions from the edges, lengths from neighbours
	sign bool       // the quarter between +a and +b is light
}

// grow joins all crossings that can be reached from a seed along the edges.
func grow(found []crossing, seed int, used []bool) map[node]placed {
	first := placed{c: &found[seed], a: found[seed].dir(0), b: found[seed].dir(1)}
	if first.a[0]*first.b[1]-first.a[1]*first.b[0] < 0 {
		first.b = [2]float64{-first.b[0], -first.b[1]}
	}
	first.sign = lightBetween(first.c, first.a, first.b)
	piece := map[node]placed{{0, 0}: first}
	used[seed] = true
	queue := []node{{0, 0}}
	for len(queue) > 0 {
		at := queue[0]
		queue = queue[1:]
		p := piece[at]
		for _, d := range []node{{1, 0}, {-1, 0}, {0, 1}, {0, -1}} {
			to := node{at.i + d.i, at.j + d.j}
			if _, taken := piece[to]; taken {
				continue
			}
			k, next, ok := neighbour(found, used, p, d)
			if !ok {
				continue
			}
			used[k] = true
			piece[to] = next
			queue = append(queue, to)
		}
	}
	return piece
}

// neighbour finds the next crossing from p in direction d: the nearest one near
// the line of p's edge whose own edges lie alike and whose light quarter is the
// other one.
func neighbour(found []crossing, used []bool, p placed, d node) (int, placed, bool) {
	way := [2]float64{float64(d.i)*p.a[0] + float64(d.j)*p.b[0], float64(d.i)*p.a[1] + float64(d.j)*p.b[1]}
	n := math.Hypot(way[0], way[1])
	known := n > 1.5 // a length from an earlier step, not a unit direction
	best, bestDist := -1, math.Inf(1)
	var bestPlaced placed
	for k := range found {
		c := &found[k]
		dx, dy := c.u-p.c.u, c.v-p.c.v
		dist := math.Hypot(dx, dy)
		if used[k] || dist < 4 || dist >= bestDist {
			continue
		}
		if along := (dx*way[0] + dy*way[1]) / n; along < 0.98*dist {
			continue
		}
		if known && (dist < 0.6*n || dist > 1.6*n) {
			continue
		}
		a, okA := alike(c, p.a)
		b, okB := alike(c, p.b)
		if !okA || !okB || a == b {
			continue
		}
		q := placed{c: c, a: signed(c.dir(a), p.a), b: signed(c.dir(b), p.b)}
		q.sign = lightBetween(c, q.a, q.b)
		if q.sign == p.sign || math.Abs(c.swing) < 0.3*math.Abs(p.c.swing) || math.Abs(p.c.swing) < 0.3*math.Abs(c.swing) {
			continue
		}
		la, lb := math.Hypot(p.a[0], p.a[1]), math.Hypot(p.b[0], p.b[1])
		if d.i != 0 {
			la = dist
		} else {
			lb = dist
		}
		q.a, q.b = [2]float64{la * q.a[0], la * q.a[1]}, [2]float64{lb * q.b[0], lb * q.b[1]}
		best, bestDist, bestPlaced = k, dist, q
	}
	return best, bestPlaced, best >= 0
}

// alike gives the edge of c that runs along way, within 25°.
func alike(c *crossing, way [2]float64) (int, bool) {
	n := math.Hypot(way[0], way[1])
	for k := range 2 {
		e := c.dir(k)
		if math.Abs(e[0]*way[0]+e[1]*way[1]) > 0.906*n {
			return k, true
		}
	}
	return 0, false
}

func signed(e, way [2]float64) [2]float64 {
	if e[0]*way[0]+e[1]*way[1] < 0 {
		return [2]float64{-e[0], -e[1]}
	}
	return e
}

// lightBetween tells whether the quarter between directions a and b is light.
func lightBetween(c *crossing, a, b [2]float64) bool {
	na, nb := math.Hypot(a[0], a[1]), math.Hypot(b[0], b[1])
	x, y := a[0]/na+b[0]/nb, a[1]/na+b[1]/nb
	s := c.swing
	for k := range 2 {
		e := c.dir(k)
		s *= e[0]*y - e[1]*x
	}
	return s > 0
}

// orient trims stray rows from a piece, and finds which way up it is a board of
// the spec. nil where it is none.
func orient(piece map[node]placed, spec Spec) map[node]*crossing {
	lo, hi := trim(piece)
	w, h := hi.i-lo.i+1, hi.j-lo.j+1
	m, n := spec.Cols-1, spec.Rows-1
	for k := range 4 {
		if (k%2 == 0 && (w != m || h != n)) || (k%2 == 1 && (w != n || h != m)) {
			continue
		}
		grid := map[node]*crossing{}
		wrong := 0
		for at, p := range piece {
			i, j := at.i-lo.i, at.j-lo.j
			if i < 0 || j < 0 || i >= w || j >= h {
				continue
			}
			var to node
			switch k { // the board's right and down are a, b turned by k quarters
			case 0:
				to = node{i + 1, j + 1}
			case 1:
				to = node{j + 1, w - i}
			case 2:
				to = node{w - i, h - j}
			case 3:
				to = node{h - j, i + 1}
			}
			light := p.sign != (k%2 == 1)
			if light == spec.Black(to.i, to.j) { // the square right of and below the crossing
				wrong++
			}
			grid[to] = p.c
		}
		if wrong == 0 && 5*len(grid) >= 4*m*n {
			return grid
		}
	}
	return nil
}

// trim gives the corners of a piece without border rows that are mostly empty.
func trim(piece map[node]placed) (lo, hi node) {
	lo, hi = node{math.MaxInt, math.MaxInt}, node{math.MinInt, math.MinInt}
	for at := range piece {
		lo, hi = node{min(lo.i, at.i), min(lo.j, at.j)}, node{max(hi.i, at.i), max(hi.j, at.j)}
	}
	for changed := true; changed && lo.i < hi.i && lo.j < hi.j; {
		changed = false
		count := func(i0, i1, j0, j1 int) (n int) {
			for at := range piece {
				if at.i >= i0 && at.i <= i1 && at.j >= j0 && at.j <= j1 {
					n++
				}
			}
			return n
		}
		w, h := hi.i-lo.i+1, hi.j-lo.j+1
		switch {
		case 2*count(lo.i, lo.i, lo.j, hi.j) < h:
			lo.i, changed = lo.i+1, true
		case 2*count(hi.i, hi.i, lo.j, hi.j) < h:
			hi.i, changed = hi.i-1, true
		case 2*count(lo.i, hi.i, lo.j, lo.j) < w:
			lo.j, changed = lo.j+1, true
		case 2*count(lo.i, hi.i, hi.j, hi.j) < w:
			hi.j, changed = hi.j-1, true
		}
	}
	return lo, hi
}

// refine fits every crossing in the full picture, with a window as large as its
// squares allow. Crossings at which that fails are left out; nil where more than
// a fifth are.
func refine(g *grey, grid map[node]*crossing, spec Spec, shrink int) *camera.Sighting {
	s := &camera.Sighting{Target: spec.Name(), BarM: BarM}
	f, shift := float64(shrink), float64(shrink-1)/2
	var swings, blurs []float64
	fitted := map[node]crossing{}
	for at, c := range grid {
		near := math.Inf(1)
		for _, d := range []node{{1, 0}, {-1, 0}, {0, 1}, {0, -1}} {
			if o := grid[node{at.i + d.i, at.j + d.j}]; o != nil {
				near = math.Min(near, math.Hypot(o.u-c.u, o.v-c.v)*f)
			}
		}
		if math.IsInf(near, 1) {
			continue
		}
		r := *c
		r.u, r.v, r.blur = f*c.u+shift, f*c.v+shift, math.Max(0.7, 0.7*f*c.blur)
		r.shade = [2]float64{c.shade[0] / f, c.shade[1] / f}
		radius := math.Min(math.Max(0.7*near, 4.5), 16)
		if !r.fit(g, radius) {
			continue
		}
		fitted[at] = r
		swings, blurs = append(swings, math.Abs(r.swing)), append(blurs, r.blur)
	}
	if len(fitted) == 0 {
		return nil
	}
	swing, blur := median(swings), median(blurs)
	for q := 1; q < spec.Rows; q++ {
		for p := 1; p < spec.Cols; p++ {
			c, ok := fitted[node{p, q}]
			if !ok || math.Abs(c.swing) < 0.4*swing || c.blur > 2.5*blur {
				continue
			}
			x, z := spec.Crossing(p, q)
			s.Points = append(s.Points, camera.Point{U: c.u, V: c.v, Pixel: c.cov, X: x, Z: z})
		}
	}
	if 5*len(s.Points) < 4*(spec.Cols-1)*(spec.Rows-1) {
		return nil
	}
	return s
}

func median(x []float64) float64 {
	s := append([]float64(nil), x...)
	sortBy(s, func(a, b float64) bool { return a < b })
	return s[len(s)/2]
}
