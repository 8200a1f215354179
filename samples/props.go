package samples

import (
	"math"

	"lodeswing/samples/film"
)

// onPlane gives the point of the upright plane at depth y (m, away from the
// camera) that appears at pixel px.
func onPlane(c *film.Camera, px [2]float64, y float64) film.Vec {
	// Newton with differences: the map is smooth and nearly linear.
	at := film.Vec{c.LookAt[0], y, c.LookAt[2]}
	const d = 1e-5
	for range 20 {
		u, v := c.Project(at)
		ux, vx := c.Project(film.Vec{at[0] + d, y, at[2]})
		uz, vz := c.Project(film.Vec{at[0], y, at[2] + d})
		a, b, e, g := (ux-u)/d, (uz-u)/d, (vx-v)/d, (vz-v)/d
		det := a*g - b*e
		if det == 0 {
			break
		}
		du, dv := px[0]-u, px[1]-v
		at[0] += (du*g - dv*b) / det
		at[2] += (a*dv - e*du) / det
	}
	return at
}

// ruler draws a stick with two round marks the rig's known length apart: where
// the rig says that they are in the picture, else to the left of the toy.
func (b *set) ruler() {
	sc := &b.r.Scale
	if !sc.LengthM.Set {
		return
	}
	y := -sc.DepthM.Or(0)
	p, dir := film.Vec{b.left - 0.09, y, b.bench + 0.06}, film.Vec{0, 0, 1}
	if len(sc.EndsPX) == 2 {
		p = onPlane(&b.s.Camera, sc.EndsPX[0], y)
		q := onPlane(&b.s.Camera, sc.EndsPX[1], y)
		n := math.Hypot(q[0]-p[0], q[2]-p[2])
		dir = film.Vec{(q[0] - p[0]) / n, 0, (q[2] - p[2]) / n}
	}
	length := sc.LengthM.V
	side := film.Vec{dir[2], 0, -dir[0]}
	mark, stick := markColour, stickColour
	if sc.MarkLook == "light" {
		mark, stick = stickColour, film.RGB{60, 62, 66}
	}
	const r = 0.004
	b.s.Decals = append(b.s.Decals, film.Decal{
		Centre: film.Vec{p[0] + dir[0]*length/2, y, p[2] + dir[2]*length/2},
		Right:  side, Up: dir, HalfW: 0.008, HalfH: length/2 + 0.009,
		Paint: func(a, h float64) (film.RGB, float64) {
			if math.Hypot(a, math.Abs(h)-length/2) < r {
				return mark, 1
			}
			return stick, 1
		},
	})
}

// plumb hangs a thread with a weight where the rig says that one is seen.
func (b *set) plumb() {
	px := b.r.Camera.PlumbPX
	if len(px) < 2 || b.tilted() {
		return
	}
	p, q := onPlane(&b.s.Camera, px[0], 0), onPlane(&b.s.Camera, px[len(px)-1], 0)
	x := (p[0] + q[0]) / 2
	low := min(p[2], q[2]) - 0.005
	b.rod(film.RGB{40, 40, 44}, 0.0012, film.Vec{x, 0, max(p[2], q[2]) + 0.3}, film.Vec{x, 0, low})
	b.rod(film.RGB{150, 128, 70}, 0.008, film.Vec{x, 0, low}, film.Vec{x, 0, low - 0.018})
}

// clutter puts things on the bench that look like a bob to a careless eye: a
// bead and a pen of the first bob's colour, a dark phone, a ruler.
func (b *set) clutter() {
	like := b.s.Bobs[0].Colour
	z, l, r := b.bench, b.left, b.right
	s := b.s
	s.Bobs = append(
		s.Bobs,
		film.Bob{Colour: like, DiameterM: 0.007, At: still(film.Vec{r + 0.05, 0.02, z + 0.0035}), Still: true},
		film.Bob{Colour: like, DiameterM: 0.006, At: still(film.Vec{l - 0.02, -0.03, z + 0.003}), Still: true},
	)
	b.rod(like, 0.008, film.Vec{r + 0.07, 0.06, z + 0.005}, film.Vec{r + 0.17, 0.08, z + 0.005})
	b.rod(film.RGB{60, 60, 64}, 0.008, film.Vec{r + 0.17, 0.08, z + 0.005}, film.Vec{r + 0.19, 0.084, z + 0.005})
	if b.tilted() {
		return
	}
	s.Plates = append(s.Plates, film.Plate{Colour: film.RGB{28, 30, 34}, Corners: []film.Vec{
		{l - 0.16, 0.09, z}, {l - 0.09, 0.09, z}, {l - 0.086, 0.1, z + 0.13}, {l - 0.156, 0.1, z + 0.13},
	}})
	s.Decals = append(s.Decals, film.Decal{ // a wooden rule leaning at the wall
		Centre: film.Vec{r + 0.1, 0.11, z + 0.012}, Right: film.Vec{1, 0, 0}, Up: film.Vec{0, 0, 1}, HalfW: 0.1, HalfH: 0.011,
		Paint: func(a, h float64) (film.RGB, float64) {
			mm := (a + 0.1) * 1000
			tick, long := math.Abs(mm-math.Round(mm)), 0.003
			if n := int(math.Round(mm)); n%10 == 0 {
				long = 0.009
			} else if n%5 == 0 {
				long = 0.006
			}
			if tick < 0.15 && h > 0.011-long {
				return markColour, 1
			}
			return film.RGB{206, 178, 120}, 1
		},
	})
}
