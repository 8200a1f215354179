package film

import "math"

// line is one row of fine samples being composed: red, green, blue already
// multiplied by opacity, and opacity. Only [lo, hi) has been touched.
type line struct {
	px     [][4]float32
	u0, du float64 // px of the first sample and the step
	v      float64 // px
	lo, hi int
	cam    *view
	// xs and ys are the samples' flat coordinates, computed for [from, to) only.
	xs, ys   []float64
	from, to int
}

// begin readies l for the row at v px.
func (l *line) begin(v float64) { l.v, l.from, l.to = v, 0, 0 }

// cells gives the samples within [ua, ub] px and sees to their coordinates.
func (l *line) cells(ua, ub float64) (i, j int) {
	i = max(0, int(math.Ceil((ua-l.u0)/l.du)))
	j = min(len(l.px), int(math.Floor((ub-l.u0)/l.du))+1)
	if i >= j {
		return i, i
	}
	l.lo, l.hi = min(l.lo, i), max(l.hi, j)
	if l.from >= l.to {
		l.from, l.to = i, i
	}
	if i < l.from {
		l.cam.row(l.u0+float64(i)*l.du, l.du, l.v, l.xs[i:l.from], l.ys[i:l.from])
		l.from = i
	}
	if j > l.to {
		l.cam.row(l.u0+float64(l.to)*l.du, l.du, l.v, l.xs[l.to:j], l.ys[l.to:j])
		l.to = j
	}
	return i, j
}

// cell is a sample's side in flat coordinates, near sample i.
func (l *line) cell(i, j int) float64 {
	if j-i > 1 {
		return l.xs[i+1] - l.xs[i]
	}
	return l.du / l.cam.f
}

func (l *line) over(i int, c float32, r, g, b float32) {
	k := 1 - c
	p := &l.px[i]
	p[0] = p[0]*k + r*c
	p[1] = p[1]*k + g*c
	p[2] = p[2]*k + b*c
	p[3] = p[3]*k + c
}

// shape is a thing that can be drawn. aim computes what it needs for sub-exposures
// at the given times; draw lays sub-exposure k of it over one row of samples that
// is exposed later by delay.
type shape interface {
	aim(st *stage, times []float64)
	box() (u0, v0, u1, v1 float64) // px, of all sub-exposures
	near(u, v, reach float64) bool // may anything of it be within reach px of (u, v)
	depth() float64                // m along the line of sight, to sort by
	smear() float64                // px moved between the first and last sub-exposure
	draw(k int, delay float64, l *line)
}

// path3 is a point's course over the rows' delays: a parabola through three of
// them, in camera axes, one per sub-exposure.
type path3 struct {
	d [3]float64
	c [][3]Vec
}

func (p *path3) at(k int, delay float64) Vec {
	c := &p.c[k]
	if p.d[2] == p.d[0] {
		return c[1]
	}
	x := (delay - p.d[0]) / (p.d[2] - p.d[0]) // 0, ½, 1 at the three
	a, b, e := (1-x)*(1-2*x), 4*x*(1-x), x*(2*x-1)
	return Vec{
		a*c[0][0] + b*c[1][0] + e*c[2][0],
		a*c[0][1] + b*c[1][1] + e*c[2][1],
		a*c[0][2] + b*c[1][2] + e*c[2][2],
	}
}

// trace fills p for the delays from lo to hi.
func (p *path3) trace(st *stage, at func(float64) Vec, times []float64, lo, hi float64) {
	p.d = [3]float64{lo, (lo + hi) / 2, hi}
	p.c = p.c[:0]
	for _, t := range times {
		var c [3]Vec
		if lo == hi {
			q := st.cam.toCamera(at(t + lo))
			c = [3]Vec{q, q, q}
		} else {
			for i, d := range p.d {
				c[i] = st.cam.toCamera(at(t + d))
			}
		}
		p.c = append(p.c, c)
	}
}

// ball is a sphere or, with flat, a disc.
type ball struct {
	b              *Bob
	r              float64
	cam            *view
	light          *lamp
	p              path3
	uv             [2]float64 // image of the centre, middle of the exposure
	rpx            float64    // no part of it is farther from its centre's image, px
	u0, v0, u1, v1 float64
	moved          float64
	normal         Vec
	diff           RGB // of a flat bob
}

func (s *ball) aim(st *stage, times []float64) {
	s.cam, s.light = st.cam, st.lamp
	mid := times[len(times)/2]
	_, at, u, v := st.centre(s.b, mid)
	c := st.cam.toCamera(at)
	s.uv = [2]float64{u, v}
	s.rpx = s.reach(st, c)
	span := s.rpx + 2
	if n := len(times); n > 1 {
		_, _, ua, va := st.centre(s.b, times[0])
		_, _, ub, vb := st.centre(s.b, times[n-1])
		s.moved = max(math.Hypot(u-ua, v-va)+math.Hypot(ub-u, vb-v), 0)
		span += s.moved
	}
	s.p.trace(st, s.b.At, times, st.rowTime(v-span), st.rowTime(v+span))
	s.u0, s.v0, s.u1, s.v1 = u-span, v-span, u+span, v+span
	if s.b.Flat {
		n := s.b.Normal
		if n == (Vec{}) {
			n = Vec{0, -1, 0}
		}
		s.normal = unit(st.cam.turn(n))
		s.diff = s.light.matt(s.b.Colour, s.normal)
		if s.b.Plain {
			s.diff = s.b.Colour
		}
	}
}

// reach bounds the outline's distance from the centre's image in pixels, with
// room for perspective and lens.
func (s *ball) reach(st *stage, c Vec) float64 {
	if st.cam.ortho {
		return s.r*st.cam.f + 1
	}
	x, y := st.cam.flatten(c)
	near := max(c[2]-s.r, 1e-3)
	lengthening := math.Sqrt(1 + x*x + y*y)
	r2 := x*x + y*y
	lens := max(1, 1+r2*(3*math.Abs(st.cam.k1)+5*r2*math.Abs(st.cam.k2)))
	return s.r/near*lengthening*lengthening*st.cam.f*lens*1.03 + 1.5
}

func (s *ball) box() (u0, v0, u1, v1 float64) { return s.u0, s.v0, s.u1, s.v1 }
func (s *ball) near(u, v, reach float64) bool { return true }
func (s *ball) depth() float64                { return s.p.c[len(s.p.c)/2][1][2] }
func (s *ball) smear() float64                { return s.moved }

func (s *ball) draw(k int, delay float64, l *line) {
	c := s.p.at(k, delay)
	if c[2] <= s.r && !s.cam.ortho {
		return // behind the lens
	}
	uc, vc := s.cam.lens(s.cam.flatten(c))
	dv := l.v - vc
	if math.Abs(dv) > s.rpx {
		return
	}
	half := math.Sqrt(s.rpx*s.rpx - dv*dv)
	i, j := l.cells(uc-half, uc+half)
	if i >= j {
		return
	}
	if s.b.Flat {
		s.drawDisc(c, l, i, j)
		return
	}
	cell := l.cell(i, j)
	cc := dot(c, c)
	step := cell * 1.5 // widest edge zone in metres, off axis included
	if !s.cam.ortho {
		step *= math.Sqrt(cc) * 1.2
	}
	in, out := s.r-step, s.r+step
	in2, out2 := in*in, out*out
	if in < 0 {
		in2 = -1
	}
	rr := s.r * s.r
	sh := s.light.ball(s.b, c)
	for ; i < j; i++ {
		x, y := l.xs[i], l.ys[i]
		var rho2, S, D float64
		if s.cam.ortho {
			dx, dy := x-c[0], y-c[1]
			rho2, D = dx*dx+dy*dy, 1
		} else {
			S = c[0]*x + c[1]*y + c[2]
			D = x*x + y*y + 1
			rho2 = cc - S*S/D
		}
		if rho2 >= out2 {
			continue
		}
		cover := 1.0
		if rho2 > in2 {
			rho := math.Sqrt(max(rho2, 1e-30))
			var gx, gy float64 // the distance's gradient
			if s.cam.ortho {
				gx, gy = (x-c[0])/rho, (y-c[1])/rho
			} else {
				k := -S / (D * D * rho)
				gx, gy = k*(c[0]*D-S*x), k*(c[1]*D-S*y)
			}
			g := math.Sqrt(gx*gx + gy*gy)
			cover = covered((rho-s.r)/(g*cell), gx/g, gy/g)
			if cover <= 0 {
				continue
			}
		}
		h := math.Sqrt(max(rr-rho2, 0) * D)
		var n Vec
		if s.cam.ortho {
			n = Vec{x - c[0], y - c[1], -h}
		} else {
			t := (S - h) / D
			n = Vec{t*x - c[0], t*y - c[1], t - c[2]}
		}
		r, g, b := sh.at(n)
		l.over(i, float32(cover), r, g, b)
	}
}

func (s *ball) drawDisc(c Vec, l *line, i, j int) {
	n := s.normal
	cn := dot(c, n)
	r, g, b := float32(s.diff[0]), float32(s.diff[1]), float32(s.diff[2])
	cell := l.cell(i, j)
	for ; i < j; i++ {
		x, y := l.xs[i], l.ys[i]
		var p, px, py Vec // the point of the disc's plane and its change with x, y
		if s.cam.ortho {
			if n[2] == 0 {
				return
			}
			p = Vec{x, y, (cn - n[0]*x - n[1]*y) / n[2]}
			px, py = Vec{1, 0, -n[0] / n[2]}, Vec{0, 1, -n[1] / n[2]}
		} else {
			dn := n[0]*x + n[1]*y + n[2]
			if dn == 0 {
				return
			}
			t := cn / dn
			p = Vec{t * x, t * y, t}
			a, e := -t*n[0]/dn, -t*n[1]/dn
			px, py = Vec{t + a*x, a * y, a}, Vec{e * x, t + e*y, e}
		}
		d := sub(p, c)
		rho := math.Sqrt(dot(d, d))
		if rho == 0 {
			l.over(i, 1, r, g, b)
			continue
		}
		gx, gy := dot(d, px)/rho, dot(d, py)/rho
		grad := math.Sqrt(gx*gx + gy*gy)
		if cover := covered((rho-s.r)/(grad*cell), gx/grad, gy/grad); cover > 0 {
			l.over(i, float32(cover), r, g, b)
		}
	}
}

// rod is a round bar.
type rod struct {
	r              *Rod
	cam            *view
	p, q           path3
	shade          [65]RGB // across the bar, from one side to the other
	ends           [][2][2]float64
	half           float64 // px, widest half width and the bow of a curved lens
	u0, v0, u1, v1 float64
	moved          float64
}

func (s *rod) aim(st *stage, times []float64) {
	s.cam = st.cam
	first, last := st.rowTime(0), st.rowTime(float64(st.cam.h-1))
	if s.r.Still {
		first, last = 0, 0
	}
	s.p.trace(st, s.r.From, times, first, last)
	s.q.trace(st, s.r.To, times, first, last)
	s.ends = s.ends[:0]
	s.u0, s.v0, s.u1, s.v1 = math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	s.half = 0
	for k := range times {
		for i := range 3 {
			a, b := s.p.c[k][i], s.q.c[k][i]
			m := scale(add(a, b), 0.5)
			ua, va := s.cam.lens(s.cam.flatten(a))
			ub, vb := s.cam.lens(s.cam.flatten(b))
			xa, ya := s.cam.flatten(a)
			xb, yb := s.cam.flatten(b)
			um, vm := s.cam.lens((xa+xb)/2, (ya+yb)/2)
			bow := math.Hypot(um-(ua+ub)/2, vm-(va+vb)/2)
			w := s.r.DiameterM / 2 * s.cam.f
			if !s.cam.ortho {
				w /= max(min(a[2], b[2], m[2]), 1e-3)
			}
			s.half = max(s.half, w*1.1+bow+0.8)
			s.u0, s.u1 = min(s.u0, ua, ub), max(s.u1, ua, ub)
			s.v0, s.v1 = min(s.v0, va, vb), max(s.v1, va, vb)
			s.ends = append(s.ends, [2][2]float64{{ua, va}, {ub, vb}})
		}
	}
	s.u0, s.v0, s.u1, s.v1 = s.u0-s.half, s.v0-s.half, s.u1+s.half, s.v1+s.half
	begin, end := s.ends[1], s.ends[len(s.ends)-2]
	s.moved = 0
	for e := range 2 {
		s.moved = max(s.moved, math.Hypot(begin[e][0]-end[e][0], begin[e][1]-end[e][1]))
	}
	a, b := s.p.c[0][1], s.q.c[0][1]
	xa, ya := s.cam.flatten(a)
	xb, yb := s.cam.flatten(b)
	side := unit(Vec{-(yb - ya), xb - xa, 0})
	for i := range s.shade {
		q := float64(i)/32 - 1
		n := add(scale(side, q), Vec{0, 0, -math.Sqrt(max(0, 1-q*q))})
		s.shade[i] = st.lamp.matt(s.r.Colour, n)
		if s.r.Plain {
			s.shade[i] = s.r.Colour
		}
	}
}

func (s *rod) box() (u0, v0, u1, v1 float64) { return s.u0, s.v0, s.u1, s.v1 }
func (s *rod) smear() float64                { return s.moved }
func (s *rod) depth() float64 {
	k := len(s.p.c) / 2
	if s.r.Front {
		return math.Inf(-1)
	}
	if !s.r.Still {
		return s.q.c[k][1][2] // what hangs on its end covers it, or not
	}
	return (s.p.c[k][1][2] + s.q.c[k][1][2]) / 2
}

func (s *rod) near(u, v, reach float64) bool {
	n := len(s.ends)
	for _, e := range [][2][2]float64{s.ends[0], s.ends[n/2], s.ends[n-1]} {
		if segment(u, v, e[0], e[1]) < reach+s.half+s.moved+1 {
			return true
		}
	}
	return false
}

// segment is the distance of (u, v) from the stretch between a and b.
func segment(u, v float64, a, b [2]float64) float64 {
	dx, dy := b[0]-a[0], b[1]-a[1]
	t := 0.0
	if q := dx*dx + dy*dy; q > 0 {
		t = min(max(((u-a[0])*dx+(v-a[1])*dy)/q, 0), 1)
	}
	return math.Hypot(u-a[0]-t*dx, v-a[1]-t*dy)
}

func (s *rod) draw(k int, delay float64, l *line) {
	a, b := s.p.at(k, delay), s.q.at(k, delay)
	if !s.cam.ortho && (a[2] <= 0 || b[2] <= 0) {
		return
	}
	xa, ya := s.cam.flatten(a)
	xb, yb := s.cam.flatten(b)
	ua, va := s.cam.lens(xa, ya)
	ub, vb := s.cam.lens(xb, yb)
	// The bar's stretch of this row, in pixels.
	if l.v < min(va, vb)-s.half || l.v > max(va, vb)+s.half {
		return
	}
	lo, hi := min(ua, ub), max(ua, ub)
	if steep := math.Abs(vb-va) / math.Hypot(ub-ua, vb-va); steep > 1e-3 {
		at := ua + (l.v-va)*(ub-ua)/(vb-va)
		lo, hi = max(lo, at-s.half/steep+s.half), min(hi, at+s.half/steep-s.half)
	}
	i, j := l.cells(lo-s.half, hi+s.half)
	wa, wb := s.r.DiameterM/2, s.r.DiameterM/2
	if !s.cam.ortho {
		wa, wb = wa/a[2], wb/b[2]
	}
	cell := l.cell(i, j)
	dx, dy := xb-xa, yb-ya
	q := dx*dx + dy*dy
	if q == 0 {
		return
	}
	inv := 1 / math.Sqrt(q)
	for ; i < j; i++ {
		x, y := l.xs[i]-xa, l.ys[i]-ya
		t := min(max((x*dx+y*dy)/q, 0), 1)
		w := wa + t*(wb-wa)
		x, y = x-t*dx, y-t*dy
		d := math.Sqrt(x*x + y*y)
		// The part of the sample's width that lies within [−w, w].
		cover := (min(d+cell/2, w) - max(d-cell/2, -w)) / cell
		if cover <= 0 {
			continue
		}
		across := (dx*y - dy*x) * inv / w // what lies along the bar drops out
		c := &s.shade[min(max(int(across*32+32.5), 0), 64)]
		l.over(i, float32(min(cover, 1)), float32(c[0]), float32(c[1]), float32(c[2]))
	}
}
