package shake

import (
	"image"
	"math"
	"sort"

	"lodeswing/track/clip"
)

const (
	columns, rowsOf = 8, 5 // cells of the picture, at most one patch in each
	mostPatches     = 28
)

// choose picks still-looking patches of the frame: in each cell of the picture
// the place whose shift can be measured best in both directions (largest least
// eigenvalue of the gradients' normal matrix; Shi & Tomasi, CVPR 1994), outside
// the avoided rectangles.
func choose(f *clip.Frame, avoid []image.Rectangle, noise float64, buf *buffers) []*template {
	w, h := f.Size()
	const step = 2 // gradients are taken at every second pixel
	gw, gh := w/step, h/step
	if gw < side || gh < side {
		return nil
	}
	// Sums over rectangles of gu², gu·gv and gv².
	sums := make([][3]float64, (gw+1)*(gh+1))
	above, here, below := make([]int, w), make([]int, w), make([]int, w)
	for y := 0; y < gh; y++ {
		v := y * step
		greyRow(f, max(v-1, 0), above, buf)
		greyRow(f, v, here, buf)
		greyRow(f, min(v+1, h-1), below, buf)
		var run [3]float64
		for x := 0; x < gw; x++ {
			u := x * step
			gu := float64(here[min(u+1, w-1)]-here[max(u-1, 0)]) / 8
			gv := float64(below[u]-above[u]) / 8
			run[0] += gu * gu
			run[1] += gu * gv
			run[2] += gv * gv
			up := sums[y*(gw+1)+x+1]
			sums[(y+1)*(gw+1)+x+1] = [3]float64{up[0] + run[0], up[1] + run[1], up[2] + run[2]}
		}
	}
	const r = half / step
	const margin = half + 9
	type candidate struct {
		u, v  int
		eigen float64
	}
	best := make([]candidate, columns*rowsOf)
	for v := margin; v < h-margin; v += 4 {
		for u := margin; u < w-margin; u += 4 {
			x0, y0, x1, y1 := u/step-r, v/step-r, u/step+r+1, v/step+r+1
			if x0 < 0 || y0 < 0 || x1 > gw || y1 > gh {
				continue
			}
			a, b := sums[y1*(gw+1)+x1], sums[y0*(gw+1)+x0]
			c, d := sums[y1*(gw+1)+x0], sums[y0*(gw+1)+x1]
			uu, uv, vv := a[0]+b[0]-c[0]-d[0], a[1]+b[1]-c[1]-d[1], a[2]+b[2]-c[2]-d[2]
			eigen := (uu+vv)/2 - math.Hypot((uu-vv)/2, uv)
			cell := &best[v*rowsOf/h*columns+u*columns/w]
			if eigen > cell.eigen && !covered(u, v, avoid) {
				*cell = candidate{u, v, eigen}
			}
		}
	}
	sort.SliceStable(best, func(i, j int) bool { return best[i].eigen > best[j].eigen })
	var out []*template
	var taken []image.Rectangle // one dot between cells must not pass for several
	for _, c := range best {
		if len(out) == mostPatches {
			break
		}
		if c.eigen == 0 || covered(c.u, c.v, taken) {
			continue
		}
		t, ok := newTemplate(f, c.u, c.v, 1, buf)
		// A patch counts when noise moves it by a tenth of a pixel at most; noise
		// in the gradients themselves must not pass for texture.
		if ok && t.minEigen-side*side*noise*noise/2 > noise*noise/0.01 {
			out = append(out, t)
			taken = append(taken, image.Rect(c.u-half, c.v-half, c.u+half+1, c.v+half+1))
		}
	}
	return out
}

// bars returns the black bars about a picture that a program framed anew: they
// stand still whatever the camera does. Stretches of rows or columns count that
// are black from end to end.
func bars(f *clip.Frame, buf *buffers) []image.Rectangle {
	w, h := f.Size()
	dark := func(r image.Rectangle) bool {
		f.Patch(&buf.patch, r)
		for i := 0; i < len(buf.patch.BGR); i += 3 * 5 { // every fifth pixel
			if buf.patch.BGR[i+1] > 26 {
				return false
			}
		}
		return true
	}
	l, r, t, b := 0, w, 0, h
	for l < w/2 && dark(image.Rect(l, 0, l+1, h)) {
		l++
	}
	for r > w/2 && dark(image.Rect(r-1, 0, r, h)) {
		r--
	}
	for t < h/2 && dark(image.Rect(0, t, w, t+1)) {
		t++
	}
	for b > h/2 && dark(image.Rect(0, b-1, w, b)) {
		b--
	}
	var out []image.Rectangle
	add := func(r image.Rectangle) {
		if !r.Empty() {
			out = append(out, r.Inset(-3)) // the codec softens a bar's edge
		}
	}
	add(image.Rect(0, 0, l, h))
	add(image.Rect(r, 0, w, h))
	add(image.Rect(0, 0, w, t))
	add(image.Rect(0, b, w, h))
	return out
}

// covered tells whether a patch about (u, v) touches an avoided rectangle.
func covered(u, v int, avoid []image.Rectangle) bool {
	patch := image.Rect(u-half-1, v-half-1, u+half+2, v+half+2)
	for _, a := range avoid {
		if patch.Overlaps(a) {
			return true
		}
	}
	return false
}

// greyRow fills out with four times the grey values of row v.
func greyRow(f *clip.Frame, v int, out []int, buf *buffers) {
	f.Patch(&buf.patch, image.Rect(0, v, len(out), v+1))
	for u := range out {
		q := buf.patch.BGR[3*u : 3*u+3 : 3*u+3]
		out[u] = int(q[0]) + 2*int(q[1]) + int(q[2])
	}
}

// leastNoise is taken, in grey levels, where a codec has smoothed a picture's
// noise away: what it leaves is not to be trusted to less.
const leastNoise = 0.8

// noiseOf estimates a frame's noise, grey levels r.m.s., from the second
// differences that a smooth picture lacks (Immerkær, CVIU 64, 1996), with the
// median in place of the mean so that edges do not count.
func noiseOf(f *clip.Frame, buf *buffers) float64 {
	w, h := f.Size()
	if w < 3 || h < 3 {
		return 1
	}
	a, b, c := make([]int, w), make([]int, w), make([]int, w)
	var count [4096]int
	n := 0
	for v := 1; v < h-1; v += max(1, h/64) {
		greyRow(f, v-1, a, buf)
		greyRow(f, v, b, buf)
		greyRow(f, v+1, c, buf)
		for u := 1; u < w-1; u += 2 {
			d := a[u-1] - 2*a[u] + a[u+1] - 2*(b[u-1]-2*b[u]+b[u+1]) + c[u-1] - 2*c[u] + c[u+1]
			if d < 0 {
				d = -d
			}
			count[min(d, len(count)-1)]++
			n++
		}
	}
	seen := 0
	for d, k := range count {
		seen += k
		if 2*seen >= n {
			// The mask's weights have the length 6; greys are four times too large.
			return math.Max(1.4826*(float64(d)+0.5)/6/4, leastNoise)
		}
	}
	return 1
}
