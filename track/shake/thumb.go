package shake

import (
	"image"
	"math"

	"lodeswing/track/clip"
)

// thumb is a small picture of the details of a frame, to find a camera that
// jumped farther than a template's search reaches.
type thumb struct {
	w, h int
	g    []int16 // details: grey values less their neighbourhood's mean
	use  []bool  // false where black bars or avoided rectangles lie
}

const (
	thumbScale = 8  // pixels of the picture to one of the thumb
	thumbReach = 14 // thumb pixels that are searched each way
)

func newThumb(f *clip.Frame, buf *buffers) *thumb {
	fw, fh := f.Size()
	t := &thumb{w: fw / thumbScale, h: fh / thumbScale}
	small := make([]int, t.w*t.h)
	row := make([]int, fw)
	for y := 0; y < t.h; y++ {
		for _, dy := range []int{1, 4, 6} {
			greyRow(f, y*thumbScale+dy, row, buf)
			for x := 0; x < t.w; x++ {
				p := row[x*thumbScale : (x+1)*thumbScale]
				small[y*t.w+x] += p[0] + p[2] + p[4] + p[6]
			}
		}
	}
	t.g = make([]int16, t.w*t.h)
	const r = 2
	for y := r; y < t.h-r; y++ {
		for x := r; x < t.w-r; x++ {
			sum := 0
			for dy := -r; dy <= r; dy++ {
				o := (y+dy)*t.w + x
				for dx := -r; dx <= r; dx++ {
					sum += small[o+dx]
				}
			}
			t.g[y*t.w+x] = int16((small[y*t.w+x] - sum/25) / 12) // of 4 × grey, from 12 samples
		}
	}
	return t
}

// mask leaves rectangles of the picture out.
func (t *thumb) mask(avoid []image.Rectangle) {
	t.use = make([]bool, t.w*t.h)
	for y := 2; y < t.h-2; y++ {
		for x := 2; x < t.w-2; x++ {
			p := image.Rect((x-2)*thumbScale, (y-2)*thumbScale, (x+3)*thumbScale, (y+3)*thumbScale)
			t.use[y*t.w+x] = true
			for _, a := range avoid {
				if p.Overlaps(a) {
					t.use[y*t.w+x] = false
					break
				}
			}
		}
	}
}

// shift finds how far the picture of now moved against t, in pixels of the
// picture: on every second place first, then about the best.
func (t *thumb) shift(now *thumb) (du, dv float64) {
	best, bx, by := math.Inf(1), 0, 0
	try := func(dx, dy int) {
		if m := t.miss(now, dx, dy, best); m < best {
			best, bx, by = m, dx, dy
		}
	}
	for dy := -thumbReach; dy <= thumbReach; dy += 2 {
		for dx := -thumbReach; dx <= thumbReach; dx += 2 {
			try(dx, dy)
		}
	}
	cx, cy := bx, by
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			try(cx+dx, cy+dy)
		}
	}
	return float64(bx * thumbScale), float64(by * thumbScale)
}

// miss is the mean of absolute differences at a shift, each cut off so that
// things that move by themselves count little. It gives up, with more than
// enough, once it cannot be less than enough.
func (t *thumb) miss(now *thumb, dx, dy int, enough float64) float64 {
	sum, n, most := 0, 0, (t.w/2)*(t.h/2)
	for y := max(2, 2-dy); y < min(t.h-2, t.h-2-dy); y += 2 {
		here, there := y*t.w, (y+dy)*t.w+dx
		for x := max(2, 2-dx); x < min(t.w-2, t.w-2-dx); x += 2 {
			if !t.use[here+x] {
				continue
			}
			d := int(t.g[here+x]) - int(now.g[there+x])
			if d < 0 {
				d = -d
			}
			sum += min(d, 60)
			n++
		}
		if float64(sum) > enough*float64(most) {
			return math.Inf(1)
		}
	}
	if n < 50 {
		return math.Inf(1)
	}
	return float64(sum) / float64(n)
}
