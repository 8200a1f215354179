package film

import "math"

// outline gives the box, px, around a polygon of flat coordinates, whose sides a
// lens with distortion bows.
func outline(w *view, xy [][2]float64) (u0, v0, u1, v1 float64) {
	u0, v0, u1, v1 = math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	steps := 1
	if w.k1 != 0 || w.k2 != 0 {
		steps = 64
	}
	for i, a := range xy {
		b := xy[(i+1)%len(xy)]
		for k := range steps {
			t := float64(k) / float64(steps)
			u, v := w.lens(a[0]+t*(b[0]-a[0]), a[1]+t*(b[1]-a[1]))
			u0, u1, v0, v1 = min(u0, u), max(u1, u), min(v0, v), max(v1, v)
		}
	}
	return u0 - 2, v0 - 2, u1 + 2, v1 + 2
}

// plate is a fixed convex polygon.
type plate struct {
	p              *Plate
	cam            *view
	sides          [][3]float64 // outward unit normal and offset of each side
	u0, v0, u1, v1 float64
	z              float64
	c              RGB
}

func (s *plate) aim(st *stage, _ []float64) {
	s.cam = st.cam
	area := 0.0
	var xy [][2]float64
	for _, p := range s.p.Corners {
		c := st.cam.toCamera(p)
		s.z += c[2] / float64(len(s.p.Corners))
		x, y := s.cam.flatten(c)
		xy = append(xy, [2]float64{x, y})
	}
	for i, a := range xy {
		b := xy[(i+1)%len(xy)]
		area += a[0]*b[1] - a[1]*b[0]
	}
	for i, a := range xy {
		b := xy[(i+1)%len(xy)]
		dx, dy := b[0]-a[0], b[1]-a[1]
		n := math.Copysign(math.Hypot(dx, dy), area)
		if n != 0 {
			s.sides = append(s.sides, [3]float64{dy / n, -dx / n, (dx*a[1] - dy*a[0]) / n})
		}
	}
	s.c = s.p.Colour
	s.u0, s.v0, s.u1, s.v1 = outline(st.cam, xy)
}

func (s *plate) box() (u0, v0, u1, v1 float64) { return s.u0, s.v0, s.u1, s.v1 }
func (s *plate) near(u, v, reach float64) bool { return true }
func (s *plate) depth() float64 {
	if s.p.Ground {
		return math.Inf(1)
	}
	return s.z
}

func (s *plate) smear() float64 { return 0 }

func (s *plate) draw(_ int, _ float64, l *line) {
	if l.v < s.v0 || l.v > s.v1 {
		return
	}
	i, j := l.cells(s.u0, s.u1)
	cell := l.cell(i, j)
	r, g, b := float32(s.c[0]), float32(s.c[1]), float32(s.c[2])
	for ; i < j; i++ {
		x, y := l.xs[i], l.ys[i]
		cover := 1.0
		for k := range s.sides {
			e := &s.sides[k]
			d := (e[0]*x + e[1]*y + e[2]) / cell
			if d < -1 {
				continue
			}
			if d > 1 {
				cover = 0
				break
			}
			cover = min(cover, covered(d, e[0], e[1]))
		}
		if cover > 0 {
			l.over(i, float32(cover), r, g, b)
		}
	}
}

// picture is a decal made ready.
type picture struct {
	d              *Decal
	cam            *view
	centre, ex, ey Vec // camera axes
	n              Vec
	u0, v0, u1, v1 float64
}

func (s *picture) aim(st *stage, _ []float64) {
	s.cam = st.cam
	s.centre = st.cam.toCamera(s.d.Centre)
	s.ex, s.ey = st.cam.turn(s.d.Right), st.cam.turn(s.d.Up)
	s.n = cross(s.ex, s.ey)
	var xy [][2]float64
	for _, k := range [][2]float64{{-1, -1}, {1, -1}, {1, 1}, {-1, 1}} {
		c := add(s.centre, add(scale(s.ex, k[0]*s.d.HalfW), scale(s.ey, k[1]*s.d.HalfH)))
		x, y := s.cam.flatten(c)
		xy = append(xy, [2]float64{x, y})
	}
	s.u0, s.v0, s.u1, s.v1 = outline(st.cam, xy)
}

func (s *picture) box() (u0, v0, u1, v1 float64) { return s.u0, s.v0, s.u1, s.v1 }
func (s *picture) near(u, v, reach float64) bool { return true }
func (s *picture) depth() float64                { return s.centre[2] }
func (s *picture) smear() float64                { return 0 }

// look gives the decal's colour along the line of sight (x, y).
func (s *picture) look(x, y float64) (RGB, float64) {
	o, d := s.cam.ray(x, y)
	dn := dot(d, s.n)
	if dn == 0 {
		return RGB{}, 0
	}
	p := sub(add(o, scale(d, dot(sub(s.centre, o), s.n)/dn)), s.centre)
	a, b := dot(p, s.ex), dot(p, s.ey)
	if math.Abs(a) > s.d.HalfW || math.Abs(b) > s.d.HalfH {
		return RGB{}, 0
	}
	return s.d.Paint(a, b)
}

// draw samples 3 × 3 points of a cell, and 16 × 16 where those differ.
func (s *picture) draw(_ int, _ float64, l *line) {
	if l.v < s.v0 || l.v > s.v1 {
		return
	}
	i, j := l.cells(s.u0, s.u1)
	cell := l.cell(i, j)
	for ; i < j; i++ {
		var sum RGB
		var full float64
		c0, o0 := s.look(l.xs[i], l.ys[i])
		same := true
		for k := 0; k < 9 && same; k++ {
			c, o := s.look(l.xs[i]+float64(k%3-1)*cell/2, l.ys[i]+float64(k/3-1)*cell/2)
			same = c == c0 && o == o0
		}
		if same {
			if o0 > 0 {
				l.over(i, float32(o0), float32(c0[0]), float32(c0[1]), float32(c0[2]))
			}
			continue
		}
		const n = 16
		for k := range n * n {
			fx, fy := (float64(k%n)+0.5)/n-0.5, (float64(k/n)+0.5)/n-0.5
			c, o := s.look(l.xs[i]+fx*cell, l.ys[i]+fy*cell)
			for e := range sum {
				sum[e] += c[e] * o
			}
			full += o
		}
		if full > 0 {
			l.over(i, float32(full/(n*n)), float32(sum[0]/full), float32(sum[1]/full), float32(sum[2]/full))
		}
	}
}
