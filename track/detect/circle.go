package detect

import (
	"image"
	"math"
	"slices"

	"lodeswing/track/clip"
)

// circle fits a circle to where rays from a cell leave what is inside; all in
// cells. Rays that run on into something attached are left out.
func (s *Search) circle(x, y, r0 float64) (cx, cy, r, round float64, ok bool) {
	cx, cy, r = x, y, r0
	var ends [rays][2]float64
	var lens [rays]float64
	var sorted [rays]float64
	for range 3 {
		lim := 1.6*r + 3
		for k, d := range rayDirections {
			t := 0.0
			for t = 0.25; t < lim; t += 0.5 {
				px, py := int(math.Round(cx+t*d[0])), int(math.Round(cy+t*d[1]))
				if px < 0 || py < 0 || px >= s.w || py >= s.h {
					t = math.Inf(1) // cut by the picture's edge
					break
				}
				if !s.in[py*s.w+px] {
					break
				}
			}
			lens[k] = t
			ends[k] = [2]float64{cx + t*d[0], cy + t*d[1]}
		}
		sorted = lens
		slices.Sort(sorted[:])
		mid := sorted[rays/3] // attachments only lengthen
		if math.IsInf(mid, 1) || mid < 1 {
			return 0, 0, 0, 0, false
		}
		// Algebraic circle fit (Kåsa 1976) to the ends that agree.
		var a [3][4]float64
		agree, edge := 0.0, 0.0
		for k := range ends {
			if math.IsInf(lens[k], 1) {
				edge++
				continue
			}
			if math.Abs(lens[k]-mid) > 0.2*mid+0.8 {
				continue
			}
			agree++
			ex, ey := ends[k][0]-cx, ends[k][1]-cy
			q := ex*ex + ey*ey
			row := [3]float64{ex, ey, 1}
			for i := range 3 {
				for j := range 3 {
					a[i][j] += row[i] * row[j]
				}
				a[i][3] += row[i] * q
			}
		}
		round = agree / rays
		if agree < 12 {
			return 0, 0, 0, 0, false
		}
		sol, good := solve3(a)
		if !good {
			return 0, 0, 0, 0, false
		}
		dx, dy := sol[0]/2, sol[1]/2
		rr := math.Sqrt(math.Max(sol[2]+dx*dx+dy*dy, 0))
		if math.Hypot(dx, dy) > r+2 || !(rr > 0.3*r0) || rr > 3*r0+3 {
			return 0, 0, 0, 0, false
		}
		cx, cy, r = cx+dx, cy+dy, rr
	}
	return cx, cy, r, round, true
}

func solve3(a [3][4]float64) (x [3]float64, ok bool) {
	for i := range 3 {
		p := i
		for k := i + 1; k < 3; k++ {
			if math.Abs(a[k][i]) > math.Abs(a[p][i]) {
				p = k
			}
		}
		a[i], a[p] = a[p], a[i]
		if math.Abs(a[i][i]) < 1e-9 {
			return x, false
		}
		for k := i + 1; k < 3; k++ {
			m := a[k][i] / a[i][i]
			for j := i; j < 4; j++ {
				a[k][j] -= m * a[i][j]
			}
		}
	}
	for i := 2; i >= 0; i-- {
		x[i] = a[i][3]
		for j := i + 1; j < 3; j++ {
			x[i] -= a[i][j] * x[j]
		}
		x[i] /= a[i][i]
	}
	return x, true
}

// describe fills in a candidate's mean colour and likeness.
func (s *Search) describe(p *clip.Patch, area image.Rectangle, c *Candidate, cx, cy, r float64) {
	n, inside := 0.0, 0.0
	lim := 0.8 * r
	for y := max(int(cy-lim), 0); y <= min(int(cy+lim)+1, s.h-1); y++ {
		for x := max(int(cx-lim), 0); x <= min(int(cx+lim)+1, s.w-1); x++ {
			if dx, dy := float64(x)-cx, float64(y)-cy; dx*dx+dy*dy > lim*lim {
				continue
			}
			n++
			inside += float64(s.mask[y*s.w+x])
			o := 3 * ((area.Min.Y+y*s.step-p.Rect.Min.Y)*p.W + area.Min.X + x*s.step - p.Rect.Min.X)
			c.Blue += float64(p.BGR[o])
			c.Green += float64(p.BGR[o+1])
			c.Red += float64(p.BGR[o+2])
		}
	}
	if n > 0 {
		c.Alike = inside / n
		c.Blue, c.Green, c.Red = c.Blue/n, c.Green/n, c.Red/n
	}
}
