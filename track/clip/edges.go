package clip

import "math"

// edgeFinder measures how wide edges are and how far they move between frames,
// along rows and along columns of the stored picture. A thing that moves by d
// while the shutter is open for a share a of the frame time smears its edges
// over a·d, which adds (a·d)²/12 to the variance of an edge's profile. So from
// edges at many speeds follow both the blur of the lens and the exposure.
type edgeFinder struct {
	k     int         // frames seen
	gap   int         // frames from one burst of three to the next
	grey  [3][]uint16 // smoothed grey values, times 16
	raw   []uint16
	w, h  int
	perS  float64
	still []float64    // standard deviations of still edges, pixels
	moved [][2]float64 // (distance per frame)², variance; both across the edge, px²
	fast  []float64    // distances per frame
	lines [3][]edge
}

// edge is one edge on one line of the picture.
type edge struct {
	at, rise, variance float64 // place, height (signed grey levels), variance of its profile
	across             float64 // cosine between the line and the edge's normal
}

const (
	level     = 16         // one grey level in the smoothed picture
	edgeRise  = 30 * level // that an edge must rise or fall by
	edgeReach = 48         // pixels that an edge may be wide, and may move
)

func (e *edgeFinder) observe(f *Frame, perS float64) {
	if e.gap == 0 {
		e.w, e.h, e.perS = f.W, f.H, perS
		e.gap = 3 + int(perS/4)
	}
	phase := e.k % e.gap
	e.k++
	if phase > 2 || f.W < 16 || f.H < 16 {
		return
	}
	e.grey[phase] = e.smoothed(f, e.grey[phase])
	if phase == 2 {
		e.burst()
	}
}

// smoothed fills out with the frame's grey values under a 3 × 3 binomial mask,
// which takes two thirds of the noise away and widens every edge, whichever way
// it runs, by the same half square pixel.
func (e *edgeFinder) smoothed(f *Frame, out []uint16) []uint16 {
	w, h := f.W, f.H
	if out == nil {
		out = make([]uint16, w*h)
	}
	if e.raw == nil {
		e.raw = make([]uint16, w*h)
	}
	for y := 0; y < h; y++ {
		row, to := f.Pix[y*f.Stride:y*f.Stride+3*w], e.raw[y*w:(y+1)*w]
		grey := func(x int) uint16 { // times 4
			q := row[3*x : 3*x+3 : 3*x+3]
			return uint16(q[0]) + 2*uint16(q[1]) + uint16(q[2])
		}
		a, b := grey(0), grey(0)
		for x := range to {
			c := b
			if x+1 < w {
				c = grey(x + 1)
			}
			to[x] = a + 2*b + c
			a, b = b, c
		}
	}
	for y := 0; y < h; y++ {
		up, here, down := e.raw[max(y-1, 0)*w:], e.raw[y*w:], e.raw[min(y+1, h-1)*w:]
		to := out[y*w : (y+1)*w]
		for x := range to {
			to[x] = uint16((uint32(up[x]) + 2*uint32(here[x]) + uint32(down[x])) / 4)
		}
	}
	return out
}

// smoothing is what that mask adds to the variance of an edge's profile, px².
const smoothing = 0.5

// mostEdges is how many measurements of a kind are kept, so that memory stays flat.
const mostEdges = 40000

// burst measures the edges of three neighbouring frames.
func (e *edgeFinder) burst() {
	for y := 3; y < e.h-3; y += 4 {
		e.line(y*e.w, 1, e.w, e.w)
	}
	for x := 3; x < e.w-3; x += 4 {
		e.line(x, e.w, e.h, 1)
	}
}

// line measures along one row or column: it starts at first and takes n pixels
// that lie step apart; side is the step to the neighbouring line.
func (e *edgeFinder) line(first, step, n, side int) {
	for k := range e.lines {
		e.lines[k] = findEdges(e.lines[k][:0], e.grey[k], first, step, n, side)
	}
	for _, b := range e.lines[1] {
		a, ok := partner(e.lines[0], b)
		c, ok2 := partner(e.lines[2], b)
		if !ok || !ok2 {
			continue
		}
		d1, d2 := b.at-a.at, c.at-b.at
		if math.Abs(d1-d2) > 0.3+0.15*math.Abs(d1+d2) {
			continue
		}
		d := (d1 + d2) / 2 * b.across
		v := math.Max(b.variance*b.across*b.across-smoothing, 0.01)
		switch {
		case math.Abs(d) < 0.1:
			// Sharper than a pixel can be: drawn, not filmed (a bar, a caption).
			if v > 0.06 && len(e.still) < mostEdges {
				e.still = append(e.still, math.Sqrt(v))
			}
		case math.Abs(d) > 0.5 && len(e.moved) < mostEdges:
			e.moved = append(e.moved, [2]float64{d * d, v})
			e.fast = append(e.fast, math.Abs(d))
		}
	}
}

// partner finds the one edge of the list that is like b; ok is false where none
// or several are.
func partner(list []edge, b edge) (found edge, ok bool) {
	for _, a := range list {
		if math.Abs(a.at-b.at) > edgeReach || math.Abs(a.rise-b.rise) > 0.15*math.Abs(b.rise) ||
			math.Abs(a.variance-b.variance) > 0.4*b.variance+0.5 {
			continue
		}
		if ok {
			return edge{}, false
		}
		found, ok = a, true
	}
	return found, ok
}

// findEdges appends the edges of one line: stretches over which the grey value
// keeps rising, or falling, by enough, with flat ground on both sides.
func findEdges(out []edge, g []uint16, first, step, n, side int) []edge {
	at := func(i int) int { return int(g[first+i*step]) }
	const quiet = 3 * level // a change of so much over two pixels is flat ground
	for i := 4; i < n-4; {
		d := at(i+1) - at(i-1)
		if d > -8*level && d < 8*level {
			i++
			continue
		}
		up := 1
		if d < 0 {
			up = -1
		}
		lo, hi := i, i
		for lo > 3 && i-lo < edgeReach && up*(at(lo)-at(lo-2)) > quiet {
			lo--
		}
		for hi < n-4 && hi-i < edgeReach && up*(at(hi+2)-at(hi)) > quiet {
			hi++
		}
		next := hi + 1
		rise := at(hi+1) - at(lo-1)
		if rise*up >= edgeRise && i-lo < edgeReach && hi-i < edgeReach && flat(at, lo-3, lo-1, n) && flat(at, hi+1, hi+3, n) {
			// Moments of the steps between neighbours about their mean place.
			var s0, s1, s2 float64
			for x := lo - 1; x <= hi; x++ {
				m := float64(up * (at(x+1) - at(x)))
				p := float64(x-lo) + 0.5
				s0 += m
				s1 += m * p
				s2 += m * p * p
			}
			mean := s1 / s0
			variance := s2/s0 - mean*mean
			// The normal's direction from the gradient summed along the edge.
			var along, cross float64
			for x := lo; x <= hi; x++ {
				along += float64(at(x+1) - at(x-1))
				p := first + x*step
				if p-side >= 0 && p+side < len(g) {
					cross += float64(int(g[p+side]) - int(g[p-side]))
				}
			}
			if across := math.Abs(along) / math.Hypot(along, cross); variance > 0 && across > 0.7 {
				out = append(out, edge{at: mean + float64(lo), rise: float64(rise), variance: variance, across: across})
			}
		}
		i = next
	}
	return out
}

// flat tells whether the line changes by no more than noise from a to b.
func flat(at func(int) int, a, b, n int) bool {
	if a < 0 || b >= n {
		return false
	}
	lo, hi := 255*level, 0
	for i := a; i <= b; i++ {
		lo, hi = min(lo, at(i)), max(hi, at(i))
	}
	return hi-lo <= 5*level
}

// sharpness is the standard deviation of the blur of the sharper still edges,
// pixels; 0 where there were too few. A perfectly sharp edge sampled by pixels
// has √(1/12) = 0.29.
func (e *edgeFinder) sharpness() float64 {
	if len(e.still) < 20 {
		return 0
	}
	return quantile(append([]float64(nil), e.still...), 0.25)
}

// fastest is how far edges moved per frame, the 99th percentile, pixels.
func (e *edgeFinder) fastest() float64 {
	if len(e.fast) < 20 {
		return 0
	}
	return quantile(append([]float64(nil), e.fast...), 0.99)
}

// exposure fits variance = σ² + a²/12 · distance² by medians in bins of the
// distance and a line through them, and returns a over the frame rate. less
// tells that the smear was too small to be seen, and e is its upper limit.
func (e *edgeFinder) exposure() (s, u float64, less, ok bool) {
	if e.perS <= 0 || len(e.moved) < 60 {
		return 0, 0, false, false
	}
	const bins = 12
	top := e.fastest()
	if top < 3 {
		return 0, 0, false, false
	}
	type bin struct{ x, y []float64 }
	var in [bins]bin
	for _, m := range e.moved {
		if k := int(math.Sqrt(m[0]) / top * bins); k < bins {
			in[k].x = append(in[k].x, m[0])
			in[k].y = append(in[k].y, m[1])
		}
	}
	var sw, sx, sy, sxx, sxy, syy float64
	used := 0
	for _, b := range in {
		if len(b.x) < 8 {
			continue
		}
		x, y := median(b.x), median(b.y)
		for i, v := range b.y {
			b.y[i] = math.Abs(v - y)
		}
		// The median's standard uncertainty, with neighbours on one edge counted
		// as a quarter of a measurement each.
		w := 1 / (math.Pow(1.4826*1.2533*median(b.y), 2)/(float64(len(b.x))/4) + 0.01*0.01)
		sw += w
		sx += w * x
		sy += w * y
		sxx += w * x * x
		sxy += w * x * y
		syy += w * y * y
		used++
	}
	if used < 3 {
		return 0, 0, false, false
	}
	det := sw*sxx - sx*sx
	if det <= 1e-9*sw*sxx {
		return 0, 0, false, false
	}
	slope := (sw*sxy - sx*sy) / det
	ground := (sy - slope*sx) / sw
	us := math.Sqrt(sw / det)
	chi := (syy - ground*sy - slope*sxy) / float64(max(used-2, 1))
	us *= math.Sqrt(math.Max(chi, 1))
	if slope < 3*us {
		limit := 12 * (math.Max(slope, 0) + 2*us)
		if limit > 1 { // no frame is exposed for longer than the time to the next
			return 0, 0, false, false
		}
		return math.Sqrt(limit) / e.perS, 0, true, true
	}
	a := math.Sqrt(12 * slope)
	u = 6 * us / a
	if a > 1.15 {
		return 0, 0, false, false
	}
	return math.Min(a, 1) / e.perS, math.Hypot(u, 0.05*a) / e.perS, false, true
}
