package board

import (
	"math"

	"lodeswing/track/clip"
)

// grey is a picture of brightness, row by row.
type grey struct {
	w, h int
	p    []float32
}

// meanGrey is the mean brightness of upright frames of one size (luma of ITU-R
// BT.601); frames of another size than the first are left out.
func meanGrey(frames []*clip.Frame) *grey {
	if len(frames) == 0 {
		return nil
	}
	g := &grey{}
	g.w, g.h = frames[0].Size()
	g.p = make([]float32, g.w*g.h)
	n := float32(0)
	var patch clip.Patch
	for _, f := range frames {
		if w, h := f.Size(); w != g.w || h != g.h {
			continue
		}
		f.Patch(&patch, f.Bounds())
		for i := range g.p {
			b := patch.BGR[3*i : 3*i+3 : 3*i+3]
			g.p[i] += 0.114*float32(b[0]) + 0.587*float32(b[1]) + 0.299*float32(b[2])
		}
		n++
	}
	for i := range g.p {
		g.p[i] /= n
	}
	return g
}

// half is the picture at half the size, each pixel the mean of four. Its pixel
// (i, j) lies at (2i + 0.5, 2j + 0.5) of the original.
func (g *grey) half() *grey {
	o := &grey{w: g.w / 2, h: g.h / 2}
	o.p = make([]float32, o.w*o.h)
	for y := range o.h {
		a, b := g.p[2*y*g.w:], g.p[(2*y+1)*g.w:]
		for x := range o.w {
			o.p[y*o.w+x] = (a[2*x] + a[2*x+1] + b[2*x] + b[2*x+1]) / 4
		}
	}
	return o
}

// at is the brightness between pixels, bilinear; coordinates are kept inside.
func (g *grey) at(u, v float64) float64 {
	u, v = math.Min(math.Max(u, 0), float64(g.w-1)), math.Min(math.Max(v, 0), float64(g.h-1))
	i, j := min(int(u), g.w-2), min(int(v), g.h-2)
	fu, fv := u-float64(i), v-float64(j)
	a, b := g.p[j*g.w+i:], g.p[(j+1)*g.w+i:]
	return (1-fv)*((1-fu)*float64(a[0])+fu*float64(a[1])) + fv*((1-fu)*float64(b[0])+fu*float64(b[1]))
}

// ring is the circle of 16 samples, radius 5, of the ChESS response, in order.
var ring = [16][2]int{
	{2, -5},
	{0, -5},
	{-2, -5},
	{-4, -4},
	{-5, -2},
	{-5, 0},
	{-5, 2},
	{-4, 4},
	{-2, 5},
	{0, 5},
	{2, 5},
	{4, 4},
	{5, 2},
	{5, 0},
	{5, -2},
	{4, -4},
}

const ringEdge = 6 // pixels at the border without a response

// crossings lists the pixels whose ring looks like a crossing of four squares,
// strongest first, at most most.
func (g *grey) crossings(most int) [][2]int {
	if g.w < 3*ringEdge || g.h < 3*ringEdge {
		return nil
	}
	resp := make([]float32, g.w*g.h)
	var off [16]int
	for i, o := range ring {
		off[i] = o[1]*g.w + o[0]
	}
	abs := func(x float32) float32 {
		if x < 0 {
			return -x
		}
		return x
	}
	var top float32
	for y := ringEdge; y < g.h-ringEdge; y++ {
		for x := ringEdge; x < g.w-ringEdge; x++ {
			c := y*g.w + x
			var s [16]float32
			var sum float32
			for i, o := range off {
				s[i] = g.p[c+o]
				sum += s[i]
			}
			var r float32
			for i := range 4 {
				r += abs(s[i] + s[i+8] - s[i+4] - s[i+12])
			}
			for i := range 8 {
				r -= abs(s[i] - s[i+8])
			}
			local := (g.p[c] + g.p[c-1] + g.p[c+1] + g.p[c-g.w] + g.p[c+g.w]) / 5
			r -= 16 * abs(sum/16-local)
			resp[c] = r
			top = max(top, r)
		}
	}
	type peak struct {
		r    float32
		x, y int
	}
	var peaks []peak
	least := max(0.1*top, 40) // 40: a contrast of some 5 grey levels
	for y := ringEdge; y < g.h-ringEdge; y++ {
	next:
		for x := ringEdge; x < g.w-ringEdge; x++ {
			r := resp[y*g.w+x]
			if r < least {
				continue
			}
			for dy := -3; dy <= 3; dy++ {
				for dx := -3; dx <= 3; dx++ {
					o := resp[(y+dy)*g.w+x+dx]
					if o > r || (o == r && (dy < 0 || (dy == 0 && dx < 0))) {
						continue next
					}
				}
			}
			peaks = append(peaks, peak{r, x, y})
		}
	}
	sortBy(peaks, func(a, b peak) bool { return a.r > b.r })
	out := make([][2]int, 0, min(most, len(peaks)))
	for _, p := range peaks[:min(most, len(peaks))] {
		out = append(out, [2]int{p.x, p.y})
	}
	return out
}
