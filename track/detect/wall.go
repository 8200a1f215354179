package detect

import (
	"image"
	"math"

	"lodeswing/track/clip"
)

// Wall is what a clip shows where no bob is: a running mean of each pixel, kept
// from frames in which the bobs are elsewhere. It holds one picture's worth of
// memory however long the clip is.
type Wall struct {
	rect  image.Rectangle
	mean  []uint16 // blue, green, red, in 1/256 level
	n     []uint8  // how many frames the mean stands on; 0: not seen yet
	seen  int
	strip int
	near  []Disc // of those that Learn is given
}

const (
	wallUnit = 256
	wallMost = 60 // frames in the mean; later ones replace it slowly, as light drifts
	wallStep = 24 // levels: a pixel that differs by more is taken for something passing
)

// NewWall returns a wall for pictures of the given bounds.
func NewWall(r image.Rectangle) *Wall {
	n := r.Dx() * r.Dy()
	return &Wall{rect: r, mean: make([]uint16, 3*n), n: make([]uint8, n)}
}

// Useful tells whether anything of the wall has been seen.
func (w *Wall) Useful() bool { return w != nil && w.seen > 0 }

// Forget empties the wall: the camera has moved.
func (w *Wall) Forget() {
	clear(w.n)
	w.seen = 0
}

// at returns the wall's blue, green and red at a pixel, and whether it was ever
// seen.
func (w *Wall) at(u, v int) (b, g, r float64, ok bool) {
	i := (v-w.rect.Min.Y)*w.rect.Dx() + u - w.rect.Min.X
	if i < 0 || i >= len(w.n) || w.n[i] == 0 {
		return 0, 0, 0, false
	}
	m := w.mean[3*i : 3*i+3]
	return float64(m[0]) * (1.0 / wallUnit), float64(m[1]) * (1.0 / wallUnit), float64(m[2]) * (1.0 / wallUnit), true
}

// row returns the wall's means and counts behind n pixels of row v from u on,
// nil where these are not all within its picture or w is nil.
func (w *Wall) row(v, u, n int) (mean []uint16, seen []uint8) {
	if w == nil || v < w.rect.Min.Y || v >= w.rect.Max.Y || u < w.rect.Min.X || u+n > w.rect.Max.X {
		return nil, nil
	}
	i := (v-w.rect.Min.Y)*w.rect.Dx() + u - w.rect.Min.X
	return w.mean[3*i : 3*(i+n)], w.n[i : i+n]
}

// Learn takes in the pixels of a patch that lie outside all bobs (each given
// with a margin). every takes only one row in so many, a different one each
// time; 1 takes all.
func (w *Wall) Learn(p *clip.Patch, bobs []Disc, every int) {
	w.seen++
	w.strip++
	box := p.Rect.Intersect(w.rect)
	w.near = w.near[:0]
	for _, d := range bobs {
		m := int(d.R) + 2
		if image.Rect(int(d.U)-m, int(d.V)-m, int(d.U)+m, int(d.V)+m).Overlaps(box) {
			w.near = append(w.near, d)
		}
	}
	bobs = w.near
	width := w.rect.Dx()
	for v := box.Min.Y; v < box.Max.Y; v++ {
		if every > 1 && (v+w.strip)%every != 0 {
			continue
		}
		u := box.Min.X
		for u < box.Max.X {
			// The run up to the next bob in this row.
			end, next := box.Max.X, box.Max.X
			for i := range bobs {
				lo, hi, hit := bobs[i].chord(v)
				if !hit || hi < u {
					continue
				}
				if lo <= u {
					end, next = u, hi+1
					break
				}
				if lo < end {
					end, next = lo, hi+1
				}
			}
			if end > u {
				src := p.BGR[3*((v-p.Rect.Min.Y)*p.W+u-p.Rect.Min.X):]
				at := (v-w.rect.Min.Y)*width + u - w.rect.Min.X
				w.run(src[:3*(end-u)], at)
			}
			u = max(next, end)
			if next <= end && end >= box.Max.X {
				break
			}
		}
	}
}

// chord returns the pixels of row v that the disc covers.
func (d *Disc) chord(v int) (lo, hi int, ok bool) {
	y := float64(v) - d.V
	h2 := d.R*d.R - y*y
	if h2 < 0 {
		return 0, 0, false
	}
	h := math.Sqrt(h2)
	return int(d.U - h), int(d.U+h) + 1, true
}

func (w *Wall) run(src []byte, at int) {
	for ; len(src) >= 3; src, at = src[3:], at+1 {
		m := w.mean[3*at : 3*at+3 : 3*at+3]
		n := int32(w.n[at])
		b, g, r := int32(src[0])*wallUnit, int32(src[1])*wallUnit, int32(src[2])*wallUnit
		if n == 0 {
			m[0], m[1], m[2] = uint16(b), uint16(g), uint16(r)
			w.n[at] = 1
			continue
		}
		db, dg, dr := b-int32(m[0]), g-int32(m[1]), r-int32(m[2])
		if abs32(db)+abs32(dg)+abs32(dr) > 3*wallStep*wallUnit/2 {
			// Something passes, or what was learnt was something that had passed:
			// trust the old value less, and forget it when this goes on.
			w.n[at] = uint8(n - (n+3)/4)
			continue
		}
		n = min(n+1, wallMost)
		w.n[at] = uint8(n)
		k := share[n]
		m[0] = uint16(int32(m[0]) + (db*k+1<<15)>>16)
		m[1] = uint16(int32(m[1]) + (dg*k+1<<15)>>16)
		m[2] = uint16(int32(m[2]) + (dr*k+1<<15)>>16)
	}
}

// share holds 65536/n, rounded: a multiplication is quicker than a division.
var share = func() (s [wallMost + 1]int32) {
	for n := 1; n <= wallMost; n++ {
		s[n] = int32((65536 + n/2) / n)
	}
	return s
}()

func abs32(x int32) int32 {
	if x < 0 {
		return -x
	}
	return x
}
