package samples

import (
	"math"
	"strings"

	"lodeswing/samples/film"
	"lodeswing/track/rig"
)

// sheet is the plane of motion, moved by depth metres towards the camera: upright
// and square to y, or level where the toy is seen from above.
type sheet struct {
	origin, along, up film.Vec
}

func motionSheet(r *rig.Rig, o *motion, depth float64) sheet {
	if !r.Camera.FromAbove {
		return sheet{film.Vec{0, -depth, 0}, film.Vec{1, 0, 0}, film.Vec{0, 0, 1}}
	}
	// Level, at the height at which the first bob would rest.
	y := o.model.Rest()
	z := 0.0
	if p := o.model.Positions(y, nil); len(p) > 0 {
		z = p[0][2]
	}
	return sheet{film.Vec{0, 0, z + depth}, film.Vec{1, 0, 0}, film.Vec{0, 1, 0}}
}

func (p sheet) at(a, b float64) film.Vec {
	var v film.Vec
	for i := range v {
		v[i] = p.origin[i] + a*p.along[i] + b*p.up[i]
	}
	return v
}

func (p sheet) direction(a, b float64) film.Vec {
	var v film.Vec
	for i := range v {
		v[i] = a*p.along[i] + b*p.up[i]
	}
	return v
}

// seen gives where in the sheet the line of sight of pixel px meets it: metres
// along and up.
func (p sheet) seen(c *film.Camera, px [2]float64) (a, b float64) {
	// Newton with differences: the map is smooth and nearly linear.
	a, b = c.LookAt[0], c.LookAt[2]-p.origin[2]
	const d = 1e-5
	for range 20 {
		u, v := c.Project(p.at(a, b))
		ua, va := c.Project(p.at(a+d, b))
		ub, vb := c.Project(p.at(a, b+d))
		ua, va, ub, vb = (ua-u)/d, (va-v)/d, (ub-u)/d, (vb-v)/d
		det := ua*vb - va*ub
		if det == 0 {
			break
		}
		du, dv := px[0]-u, px[1]-v
		a += (du*vb - dv*ub) / det
		b += (ua*dv - va*du) / det
	}
	return a, b
}

// ruler draws a stick with two round marks the rig's known length apart: where
// the rig says that they are in the picture, else beside the toy.
func (b *set) ruler() {
	sc := &b.r.Scale
	if !sc.LengthM.Set {
		return
	}
	p := motionSheet(b.r, b.o, sc.DepthM.Or(0))
	from := [2]float64{b.left - 0.09, b.bench + 0.06}
	dir := [2]float64{0, 1}
	if b.r.Camera.FromAbove {
		from[1] = -0.05 - sc.LengthM.V // clear of the stand, which is behind
	}
	if len(sc.EndsPX) == 2 {
		from[0], from[1] = p.seen(&b.s.Camera, sc.EndsPX[0])
		a, h := p.seen(&b.s.Camera, sc.EndsPX[1])
		n := math.Hypot(a-from[0], h-from[1])
		dir = [2]float64{(a - from[0]) / n, (h - from[1]) / n}
	}
	length := sc.LengthM.V
	mark, stick := markColour, stickColour
	switch {
	case sc.MarkLook == "light":
		mark, stick = stickColour, film.RGB{60, 62, 66}
	case strings.HasPrefix(sc.MarkLook, "#"):
		mark = hex(sc.MarkLook)
	}
	const r = 0.004
	b.s.Decals = append(b.s.Decals, film.Decal{
		Centre: p.at(from[0]+dir[0]*length/2, from[1]+dir[1]*length/2),
		Right:  p.direction(dir[1], -dir[0]), Up: p.direction(dir[0], dir[1]), HalfW: 0.008, HalfH: length/2 + 0.009,
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
	p := motionSheet(b.r, b.o, 0)
	xa, za := p.seen(&b.s.Camera, px[0])
	xb, zb := p.seen(&b.s.Camera, px[len(px)-1])
	x, low := (xa+xb)/2, min(za, zb)-0.005
	b.rod(film.RGB{40, 40, 44}, 0.0012, film.Vec{x, 0, max(za, zb) + 0.3}, film.Vec{x, 0, low})
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
