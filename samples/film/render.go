package film

import (
	"cmp"
	"math"
	"slices"
	"sync"
)

const (
	tile  = 48 // px, side of the squares that are rendered apart
	rim   = 4  // px of backdrop kept outside the picture, for the halo
	level = 128.0
)

// stage is a Scene made ready: what never changes is drawn once.
type stage struct {
	scene *Scene
	cam   *view
	lamp  *lamp
	sigma float64 // px, optical blur
	fine  int     // samples per pixel and axis
	reach int     // px, half width of blur and aperture
	halo  int     // px, half width of the sharpening
	taps  []float32
	soft  []float32 // the sharpening's smoothing kernel, half+1 … half
	// back is the wall with all that is fixed on it, before vignetting and
	// sharpening; it extends rim px beyond the picture.
	back  [][4]float32 // and what share of the pixel is fixed things, not wall
	backW int
	// fade is the part of the light lost by vignetting, for columns and for rows from
	// −rim on; the two add.
	fade [2][]float32
	// calm is the finished picture with nothing moving, in 1/128 grey level.
	calm  []uint16
	grain *grain
	pool  sync.Pool // *desk
}

// place readies what the truth needs: camera and lamp.
func (s *Scene) place() *stage {
	s.placed.Do(func() { s.ready = newStage(s) })
	return s.ready
}

// stage readies all that a picture needs.
func (s *Scene) stage() *stage {
	st := s.place()
	s.drawn.Do(func() {
		st.drawBack()
		st.grain = newGrain(s)
	})
	return st
}

func newStage(s *Scene) *stage {
	st := &stage{scene: s, cam: newView(&s.Camera, true)}
	st.lamp = newLamp(s.Light, st.cam)
	st.sigma = s.Camera.BlurPX
	if st.sigma == 0 {
		st.sigma = 0.8
	}
	// With a blur of 0.7 px two samples per pixel and axis leave errors of 2e-4 px
	// in a 20 px bob's centroid (measured); a sharper lens needs more.
	switch {
	case st.sigma >= 0.7:
		st.fine = 2
	case st.sigma >= 0.35:
		st.fine = 4
	default:
		st.fine = 8
	}
	st.setTaps(st.fine)
	if s.Sharpening > 0 {
		st.halo = 3
		sum := 0.0
		var k []float64
		for i := -st.halo; i <= st.halo; i++ {
			w := math.Exp(-float64(i*i) / (2 * 1.2 * 1.2))
			k = append(k, w)
			sum += w
		}
		for _, w := range k {
			st.soft = append(st.soft, float32(w/sum))
		}
	}
	st.pool.New = func() any { return &desk{} }
	return st
}

// setTaps computes the share of a fine sample in a pixel: the Gaussian blur
// integrated over the pixel's aperture. The sample's own width is taken off the
// blur's variance, so that the sum is exact to the second moment.
func (st *stage) setTaps(fine int) {
	h := 1 / float64(fine)
	sd := math.Sqrt(max(st.sigma*st.sigma-h*h/12, 1e-6))
	st.reach = int(math.Ceil(0.5 + 3.8*st.sigma))
	n := (2*st.reach + 1) * fine
	st.taps = make([]float32, n)
	w := make([]float64, n)
	sum := 0.0
	cdf := func(x float64) float64 { return 0.5 * math.Erfc(-x/sd/math.Sqrt2) }
	for i := range w {
		d := (float64(i)+0.5)*h - 0.5 - float64(st.reach)
		w[i] = cdf(d+0.5) - cdf(d-0.5)
		sum += w[i]
	}
	for i := range w {
		st.taps[i] = float32(w[i] / sum)
	}
}

// setFade tabulates the vignetting: it grows with the square of the distance
// from the middle, to Wall.Vignette in the corners.
func (st *stage) setFade() {
	for axis, n := range [2]int{st.cam.w, st.cam.h} {
		st.fade[axis] = make([]float32, n+2*rim)
		for i := range st.fade[axis] {
			x := (float64(i-rim) - float64(n-1)/2) / float64(n)
			st.fade[axis][i] = float32(st.scene.Wall.Vignette * 2 * x * x)
		}
	}
}

// drawBack draws wall, plates, decals and fixed rods.
func (st *stage) drawBack() {
	s := st.scene
	st.setFade()
	w, h := st.cam.w, st.cam.h
	st.backW = w + 2*rim
	st.back = make([][4]float32, st.backW*(h+2*rim))
	tex := texture(s, st.backW, h+2*rim)
	for j := range h + 2*rim {
		for i := range st.backW {
			u, v := st.cam.upright(float64(i-rim), float64(j-rim))
			x := s.Wall.GradU*((u+0.5)/float64(s.Camera.Width)-0.5) + s.Wall.GradV*((v+0.5)/float64(s.Camera.Height)-0.5)
			k := j*st.backW + i
			if tex != nil {
				x += float64(tex[k])
			}
			for e := range 3 {
				st.back[k][e] = float32(s.Wall.Level[e] + x)
			}
		}
	}
	var fixed []shape
	for i := range s.Plates {
		fixed = append(fixed, &plate{p: &s.Plates[i]})
	}
	for i := range s.Decals {
		fixed = append(fixed, &picture{d: &s.Decals[i]})
	}
	for i := range s.Rods {
		if s.Rods[i].Still {
			fixed = append(fixed, &rod{r: &s.Rods[i]})
		}
	}
	for i := range s.Bobs {
		if s.Bobs[i].Still {
			fixed = append(fixed, &ball{b: &s.Bobs[i], r: s.Bobs[i].DiameterM / 2})
		}
	}
	for _, f := range fixed {
		f.aim(st, []float64{0})
	}
	slices.SortStableFunc(fixed, func(a, b shape) int { return cmp.Compare(b.depth(), a.depth()) })
	if len(fixed) > 0 {
		old, fine := st.taps, st.fine
		st.fine = max(4, st.fine)
		st.setTaps(st.fine)
		var wg sync.WaitGroup
		rows := make(chan int)
		for range 2 {
			wg.Go(func() {
				d := &desk{}
				for y := range rows {
					for x := -rim; x < w+rim; x += tile {
						b := block{x, y, min(x+tile, w+rim), min(y+tile, h+rim)}
						if !d.expose(st, b, 0, fixed, []float64{0}) {
							continue
						}
						d.eachPixel(b, func(u, v int, p *[4]float32) {
							q := &st.back[(v+rim)*st.backW+u+rim]
							for e := range q {
								q[e] = p[e] + (1-p[3])*q[e]
							}
						})
					}
				}
			})
		}
		for y := -rim; y < h+rim; y += tile {
			rows <- y
		}
		close(rows)
		wg.Wait()
		st.taps, st.fine = old, fine
	}
	st.calm = make([]uint16, 3*w*h)
	d := &desk{}
	for y := 0; y < h; y += tile {
		for x := 0; x < w; x += tile {
			b := block{x, y, min(x+tile, w), min(y+tile, h)}
			d.clear(st, b, st.halo)
			d.finish(st, b, b, nil, nil, st.calm)
		}
	}
}

// block is a rectangle of pixels [x0, x1) × [y0, y1).
type block struct{ x0, y0, x1, y1 int }

// desk is one goroutine's working memory.
type desk struct {
	shapes []shape
	balls  []*ball
	here   []shape
	times  []float64
	shades []*ball
	frame  []uint16
	bytes  []byte // the stored picture, where it is not the upright one
	levels []float32
	dirty  []block

	line             line
	sum              [][4]float32 // fine samples of a block, summed over sub-exposures
	spans            [][2]int
	touch            block        // of d.out's pixels, margin included: what is not empty
	side             [][4]float32 // blurred along the rows
	sides            [][2]int
	out              [][4]float32 // blurred both ways: pixels of the block and its margin
	lit              [][3]float32
	across, smoothed [][3]float32
	shade            []float32 // what shadows leave of the wall's light, every 4th pixel
	cast             []Vec     // the balls' centres, by ball, shadow time and one of three delays
	margin           int
}

func (d *desk) eachPixel(b block, f func(u, v int, p *[4]float32)) {
	w := b.x1 - b.x0 + 2*d.margin
	for v := b.y0; v < b.y1; v++ {
		for u := b.x0; u < b.x1; u++ {
			f(u, v, &d.out[(v-b.y0+d.margin)*w+u-b.x0+d.margin])
		}
	}
}

func (d *desk) clear(st *stage, b block, margin int) (w, h int) {
	d.margin = margin
	w, h = b.x1-b.x0+2*margin, b.y1-b.y0+2*margin
	d.out = resize(d.out, w*h)
	clear(d.out)
	return w, h
}

func resize[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// expose fills d.out with the block's pixels and a margin around them: colour
// times opacity, and opacity, of the shapes, averaged over the times and
// blurred. It reports whether anything was there.
func (d *desk) expose(st *stage, b block, margin int, shapes []shape, times []float64) bool {
	w, h := d.clear(st, b, margin)
	r := float64(st.reach + margin + 1)
	d.here = d.here[:0]
	cu, cv := float64(b.x0+b.x1-1)/2, float64(b.y0+b.y1-1)/2
	radius := math.Hypot(float64(b.x1-b.x0), float64(b.y1-b.y0))/2 + r*math.Sqrt2
	for _, s := range shapes {
		u0, v0, u1, v1 := s.box()
		if u1 < float64(b.x0)-r || u0 > float64(b.x1)+r || v1 < float64(b.y0)-r || v0 > float64(b.y1)+r {
			continue
		}
		if s.near(cu, cv, radius) {
			d.here = append(d.here, s)
		}
	}
	if len(d.here) == 0 {
		return false
	}
	fine := st.fine
	fw, fh := (w+2*st.reach)*fine, (h+2*st.reach)*fine
	step := 1 / float64(fine)
	u0 := float64(b.x0-margin-st.reach) - 0.5 + step/2
	v0 := float64(b.y0-margin-st.reach) - 0.5 + step/2
	d.sum = resize(d.sum, fw*fh)
	d.spans = resize(d.spans, fh)
	l := &d.line
	l.px = resize(l.px, fw)
	l.xs, l.ys = resize(l.xs, fw), resize(l.ys, fw)
	l.u0, l.du, l.cam = u0, step, st.cam
	share := float32(1 / float64(len(times)))
	any := false
	for j := range fh {
		l.begin(v0 + float64(j)*step)
		delay := st.rowTime(l.v)
		row := d.sum[j*fw : (j+1)*fw]
		lo, hi := fw, 0
		for k := range times {
			l.lo, l.hi = fw, 0
			for _, s := range d.here {
				s.draw(k, delay, l)
			}
			if l.lo >= l.hi {
				continue
			}
			// What earlier sub-exposures did not touch still holds old numbers.
			if lo >= hi {
				lo, hi = l.lo, l.lo
			}
			if l.lo < lo {
				clear(row[l.lo:lo])
				lo = l.lo
			}
			if l.hi > hi {
				clear(row[hi:l.hi])
				hi = l.hi
			}
			px := l.px[l.lo:l.hi]
			to := row[l.lo:l.hi]
			for i := range px {
				p, q := &px[i], &to[i]
				q[0] += p[0] * share
				q[1] += p[1] * share
				q[2] += p[2] * share
				q[3] += p[3] * share
			}
			clear(px)
		}
		d.spans[j] = [2]int{lo, hi}
		any = any || lo < hi
	}
	if any {
		d.blur(st, w, h, fw, fh)
	}
	return any
}

// blur convolves d.sum with the taps, along rows then columns, into d.out.
func (d *desk) blur(st *stage, w, h, fw, fh int) {
	fine, n := st.fine, len(st.taps)
	d.side = resize(d.side, w*fh)
	d.sides = resize(d.sides, fh)
	d.touch = block{w, h, 0, 0}
	for j := range fh {
		lo, hi := d.spans[j][0], d.spans[j][1]
		if lo >= hi {
			d.sides[j] = [2]int{w, 0}
			continue
		}
		// Pixel i takes samples i·fine … i·fine+n−1.
		i0, i1 := max(0, (lo-n)/fine), min(w, (hi-1)/fine+1)
		d.sides[j] = [2]int{i0, i1}
		t := &d.touch
		t.x0, t.x1 = min(t.x0, i0), max(t.x1, i1)
		t.y0, t.y1 = min(t.y0, max(0, (j-n)/fine)), max(t.y1, min(h, j/fine+1))
		row := d.sum[j*fw : (j+1)*fw]
		for i := i0; i < i1; i++ {
			a, b := max(lo, i*fine), min(hi, i*fine+n)
			var s [4]float32
			for k := a; k < b; k++ {
				t := st.taps[k-i*fine]
				p := &row[k]
				s[0] += t * p[0]
				s[1] += t * p[1]
				s[2] += t * p[2]
				s[3] += t * p[3]
			}
			d.side[j*w+i] = s
		}
	}
	for y := range h {
		out := d.out[y*w : (y+1)*w]
		for k, t := range st.taps {
			j := y*fine + k
			if j >= fh {
				break
			}
			i0, i1 := d.sides[j][0], d.sides[j][1]
			if i0 >= i1 {
				continue
			}
			row := d.side[j*w+i0 : j*w+i1]
			to := out[i0:i1]
			for i := range row {
				p, q := &row[i], &to[i]
				q[0] += t * p[0]
				q[1] += t * p[1]
				q[2] += t * p[2]
				q[3] += t * p[3]
			}
		}
	}
}

// finish lays d.out, which holds the block b and its margin, over the backdrop,
// darkened by the shadows of the given balls at the given times, vignettes,
// sharpens, and writes the part keep of the block into dst.
func (d *desk) finish(st *stage, b, keep block, shades []*ball, times []float64, dst []uint16) {
	m := d.margin
	w, h := b.x1-b.x0+2*m, b.y1-b.y0+2*m
	i0, i1 := keep.x0-b.x0, keep.x1-b.x0+2*m // with the margin that sharpening needs
	j0, j1 := keep.y0-b.y0, keep.y1-b.y0+2*m
	d.lit = resize(d.lit, w*h)
	if len(shades) > 0 {
		d.castShadows(st, b, w, h, shades, times)
	}
	for j := j0; j < j1; j++ {
		v := min(max(b.y0-m+j, -rim), st.cam.h+rim-1)
		for i := i0; i < i1; i++ {
			u := min(max(b.x0-m+i, -rim), st.cam.w+rim-1)
			p := &d.out[j*w+i]
			q := &st.back[(v+rim)*st.backW+u+rim]
			k := 1 - p[3]
			if len(shades) > 0 && k > 0 {
				k *= 1 - (1-q[3])*(1-d.shadowAt(w, i, j)) // shadows fall on the wall alone
			}
			g := 1 - st.fade[0][u+rim] - st.fade[1][v+rim]
			d.lit[j*w+i] = [3]float32{(p[0] + k*q[0]) * g, (p[1] + k*q[1]) * g, (p[2] + k*q[2]) * g}
		}
	}
	amount := float32(st.scene.Sharpening)
	if amount > 0 {
		d.smooth(st, w, h, i0, i1, j0, j1)
	}
	for v := keep.y0; v < keep.y1; v++ {
		i := (v-b.y0+m)*w + keep.x0 - b.x0 + m
		to := dst[3*(v*st.cam.w+keep.x0) : 3*(v*st.cam.w+keep.x1)]
		for u := range keep.x1 - keep.x0 {
			p := d.lit[i+u]
			if amount > 0 {
				q := &d.smoothed[i+u]
				p[0] += amount * (p[0] - q[0])
				p[1] += amount * (p[1] - q[1])
				p[2] += amount * (p[2] - q[2])
			}
			to[3*u] = fixed(p[2]) // blue, green, red
			to[3*u+1] = fixed(p[1])
			to[3*u+2] = fixed(p[0])
		}
	}
}

func fixed(x float32) uint16 { return uint16(min(max(x, 0), 255)*level + 0.5) }

// smooth convolves the part [i0, i1) × [j0, j1) of d.lit, w × h, with the
// sharpening's kernel into d.smoothed; the outermost st.halo pixels of the part
// are left undefined.
func (d *desk) smooth(st *stage, w, h, i0, i1, j0, j1 int) {
	m := st.halo
	d.across = resize(d.across, w*h)
	d.smoothed = resize(d.smoothed, w*h)
	for j := j0; j < j1; j++ {
		row := d.lit[j*w : (j+1)*w]
		for i := i0 + m; i < i1-m; i++ {
			var s [3]float32
			for k, t := range st.soft {
				q := &row[i+k-m]
				s[0] += t * q[0]
				s[1] += t * q[1]
				s[2] += t * q[2]
			}
			d.across[j*w+i] = s
		}
	}
	for j := j0 + m; j < j1-m; j++ {
		to := d.smoothed[j*w+i0+m : j*w+i1-m]
		clear(to)
		for k, t := range st.soft {
			row := d.across[(j+k-m)*w+i0+m : (j+k-m)*w+i1-m]
			for i := range row {
				to[i][0] += t * row[i][0]
				to[i][1] += t * row[i][1]
				to[i][2] += t * row[i][2]
			}
		}
	}
}
