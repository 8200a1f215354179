package detect

import (
	"math"

	"lodeswing/track/clip"
)

// notSeen marks a pixel behind which the wall was never seen.
const notSeen = float32(math.MaxFloat32)

// gather collects the pixels of the band around the model's outline. reach is
// by how much the outline may still move, px.
func (f *Fitter) gather(p *clip.Patch, wall *Wall, m *model, covers []Disc, reach float64) {
	f.px = f.px[:0]
	f.flagW, f.flagU, f.flagV, f.marked = p.W, p.Rect.Min.X, p.Rect.Min.Y, false
	if n := p.W * p.H; len(f.flag) < n {
		f.flag = make([]bool, n)
	}
	out := m.r*(1+math.Abs(m.e1)+math.Abs(m.e2)) + 3*m.s + 3 + m.l/2 + reach
	in := m.r*(1-math.Abs(m.e1)-math.Abs(m.e2)) - math.Min(3*m.s+2, 0.6*m.r) - m.l/2 - reach
	box := f.Active.Intersect(p.Rect)
	// Pixels at the edge all count, up to a number that is enough for any purpose;
	// of those that show bob or wall alone some hundreds are enough for the levels.
	atEdge := 2 * math.Pi * m.r * (2*flat*m.s + 2 + 2*reach + 2/math.Pi*m.l)
	skip := int(atEdge/mostEdge) + 1
	area := math.Pi * (out*out - math.Max(in, 0)*math.Max(in, 0))
	sparse := min(max(int((area-atEdge)/enoughFlat), 2), 8)
	in2, out2 := 0.0, out*out
	if in > 0 {
		in2 = in * in
	}
	w0, w1, w2 := float32(f.Weights[0]), float32(f.Weights[1]), float32(f.Weights[2])
	v0 := max(box.Min.Y, int(math.Ceil(m.cv-out)))
	v1 := min(box.Max.Y-1, int(math.Floor(m.cv+out)))
	if wall != nil && !wall.Useful() {
		wall = nil
	}
	edgeIn := float32(m.r - flat*m.s - reach - 1)
	edgeOut := float32(m.r + flat*m.s + reach + 1)
	mu, mv := float32(m.mu*m.l/(2*m.r)), float32(m.mv*m.l/(2*m.r))
	known := 0
	offset := float32(0)
	if f.Blocks {
		skip, offset = 2, 0.5
	}
	cu := float32(m.cu - float64(p.Rect.Min.X))
	for v := v0; v <= v1; v++ {
		yd := float64(v) - m.cv
		half := math.Sqrt(math.Max(out2-yd*yd, 0))
		u0 := max(box.Min.X, int(math.Ceil(m.cu-half)))
		u1 := min(box.Max.X-1, int(math.Floor(m.cu+half)))
		hole0, hole1 := u1+1, u1
		if yd*yd < in2 {
			h := math.Sqrt(in2 - yd*yd)
			hole0, hole1 = int(math.Ceil(m.cu-h)), int(math.Floor(m.cu+h))
		}
		line := (v - p.Rect.Min.Y) * p.W
		row := p.BGR[3*line : 3*(line+p.W)]
		back, seen := wall.row(v, p.Rect.Min.X, p.W)
		y := float32(yd) + offset
		y2 := y * y
		sparseRow := v * ((sparse+1)/2 | 1) // a step prime to sparse: no stripes
		// Every skip-th pixel, shifted from row to row by a step that is prime to
		// most skips, so that no direction is favoured.
		first := u0
		if f.Blocks {
			if v&1 != 0 {
				continue
			}
			first += first & 1
		} else if skip > 1 {
			first += ((u0+v*((skip+1)/2|1))%skip + skip) % skip
		}
		for u := first; u <= u1; u += skip {
			if u >= hole0 && u <= hole1 {
				if skip == 1 {
					u = hole1
				}
				continue
			}
			k := u - p.Rect.Min.X
			x := float32(k) - cu + offset
			if skip == 1 && (u+sparseRow)%sparse != 0 {
				// The smear widens the edge along its direction only.
				e := x*mu + y*mv
				if e < 0 {
					e = -e
				}
				r2, lo, hi := x*x+y2, edgeIn-e, edgeOut+e
				if lo > 0 && r2 < lo*lo || r2 > hi*hi {
					continue
				}
			}
			if len(covers) > 0 && covered(float64(u), float64(v), covers) {
				continue
			}
			c := row[3*k : 3*k+3 : 3*k+3]
			px := pixel{
				x: x, y: y, at: int32(line + k), sec: sector(x, y),
				v: w0*float32(c[0]) + w1*float32(c[1]) + w2*float32(c[2]),
			}
			if wall != nil {
				if seen != nil && seen[k] > 0 {
					b := back[3*k : 3*k+3 : 3*k+3]
					px.wall = (w0*float32(b[0]) + w1*float32(b[1]) + w2*float32(b[2])) * (1.0 / wallUnit)
					known++
				} else {
					px.wall = notSeen
				}
			}
			f.px = append(f.px, px)
		}
	}
	f.back, f.wallWrong = 0, false
	if wall != nil {
		f.chooseWall(m, known)
	}
}

// chooseWall keeps the wall's picture where it explains the pixels outside the
// outline better than a plane does, and drops it otherwise (a camera that has
// moved, a wall not seen yet).
func (f *Fitter) chooseWall(m *model, known int) {
	use := known > len(f.px)*7/10
	if use {
		r1 := m.r + 2*m.s + m.l/2
		every := len(f.px)/500 + 1
		outer := func(less float32) int {
			f.ring = f.ring[:0]
			for i := 0; i < len(f.px); i += every {
				q := &f.px[i]
				if float64(q.x*q.x+q.y*q.y) > r1*r1 && q.wall != notSeen {
					f.ring = append(f.ring, float64(q.v-less*q.wall))
				}
			}
			return len(f.ring)
		}
		n := outer(0)
		plain := f.spread()
		outer(1)
		left := f.spread()
		use = n > 20 && left < 0.93*plain
		f.wallWrong = n > 20 && left > 1.6*plain && left > 4
	}
	if !use {
		for i := range f.px {
			f.px[i].wall = 0
		}
		return
	}
	kept := f.px[:0]
	for _, q := range f.px {
		if q.wall != notSeen {
			kept = append(kept, q)
			f.back += float64(q.wall)
		}
	}
	f.px = kept
	f.back /= math.Max(float64(len(kept)), 1)
}

// spread returns a robust standard deviation of ring, which it spoils.
func (f *Fitter) spread() float64 {
	mid := median(f.ring)
	for i := range f.ring {
		f.ring[i] = math.Abs(f.ring[i] - mid)
	}
	return 1.4826 * median(f.ring)
}

func covered(u, v float64, covers []Disc) bool {
	for i := range covers {
		c := &covers[i]
		if du, dv := u-c.U, v-c.V; du*du+dv*dv < c.R*c.R {
			return true
		}
	}
	return false
}

// sector numbers the direction of (x, y) without trigonometry: the diamond angle
// runs evenly enough for a small table to turn it into equal sectors.
func sector(x, y float32) int16 {
	ax, ay := x, y
	if ax < 0 {
		ax = -ax
	}
	if ay < 0 {
		ay = -ay
	}
	a := x / (ax + ay + 1e-12)
	if y < 0 {
		a = 3 + a
	} else {
		a = 1 - a
	}
	return sectorOf[int(a*sectorFine)&(4*sectorFine-1)]
}

const sectorFine = 256 // entries per quarter turn

var sectorOf = func() (t [4 * sectorFine]int16) {
	for i := range t {
		a := (float64(i) + 0.5) / sectorFine
		x := 1 - a
		y := 1 - math.Abs(x)
		if a >= 2 {
			x = a - 3
			y = math.Abs(x) - 1
		}
		turn := math.Atan2(y, x) / (2 * math.Pi)
		if turn < 0 {
			turn++
		}
		t[i] = int16(min(int(turn*sectors), sectors-1))
	}
	return t
}()
