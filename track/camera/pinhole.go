package camera

import "math"

type vec [3]float64

func (a vec) dot(b vec) float64 { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }

func (a vec) cross(b vec) vec {
	return vec{a[1]*b[2] - a[2]*b[1], a[2]*b[0] - a[0]*b[2], a[0]*b[1] - a[1]*b[0]}
}

// plus returns a + s·b.
func (a vec) plus(s float64, b vec) vec { return vec{a[0] + s*b[0], a[1] + s*b[1], a[2] + s*b[2]} }

func (a vec) length() float64 { return math.Sqrt(a.dot(a)) }

func (a vec) unit() vec {
	n := a.length()
	return vec{a[0] / n, a[1] / n, a[2] / n}
}

// turn is a rotation: its rows are the camera's axes (right, down, ahead).
type turn [3]vec

func (t turn) times(p vec) vec { return vec{t[0].dot(p), t[1].dot(p), t[2].dot(p)} }

// back is the product with the transpose.
func (t turn) back(p vec) vec {
	var o vec
	for i := range 3 {
		o = o.plus(p[i], t[i])
	}
	return o
}

// after returns t·u.
func (t turn) after(u turn) turn {
	var o turn
	for i := range 3 {
		o[i] = u.back(t[i])
	}
	return o
}

// rotation is exp([w]×), Rodrigues' formula.
func rotation(w vec) turn {
	a := w.length()
	if a == 0 {
		return turn{{1, 0, 0}, {0, 1, 0}, {0, 0, 1}}
	}
	k := w.unit()
	s, c := math.Sincos(a)
	d := 1 - c
	return turn{
		{c + d*k[0]*k[0], d*k[0]*k[1] - s*k[2], d*k[0]*k[2] + s*k[1]},
		{d*k[1]*k[0] + s*k[2], c + d*k[1]*k[1], d*k[1]*k[2] - s*k[0]},
		{d*k[2]*k[0] - s*k[1], d*k[2]*k[1] + s*k[0], c + d*k[2]*k[2]},
	}
}

// rotationVector is the inverse of rotation, for turns below half a revolution.
func rotationVector(t turn) vec {
	w := vec{t[2][1] - t[1][2], t[0][2] - t[2][0], t[1][0] - t[0][1]}
	s, c := w.length()/2, (t[0][0]+t[1][1]+t[2][2]-1)/2
	if s < 1e-12 {
		return vec{w[0] / 2, w[1] / 2, w[2] / 2}
	}
	f := math.Atan2(s, c) / (2 * s)
	return vec{f * w[0], f * w[1], f * w[2]}
}

// upright is a camera that looks along +y with its picture's up along +z.
var upright = turn{{1, 0, 0}, {0, 0, -1}, {0, 1, 0}}

// pointed is the camera's turn after pan to the right, then tilt down, then roll:
// roll > 0 turns the camera anticlockwise as seen from behind it, so that the
// picture's content turns clockwise.
func pointed(pan, tilt, roll float64) turn {
	return rotation(vec{0, 0, roll}).after(rotation(vec{tilt, 0, 0})).after(rotation(vec{0, -pan, 0})).after(upright)
}

// plane is the plane of motion: a point, two axes in it, and its normal towards
// the camera.
type plane struct{ at, e1, e2, n vec }

// motionPlane is y = 0, or z = height for a toy seen from above.
func motionPlane(fromAbove bool, height float64) plane {
	if fromAbove {
		return plane{vec{0, 0, height}, vec{1, 0, 0}, vec{0, 1, 0}, vec{0, 0, 1}}
	}
	return plane{vec{}, vec{1, 0, 0}, vec{0, 0, 1}, vec{0, -1, 0}}
}

// pinhole is a camera with radial distortion (D. C. Brown, Photogrammetric
// Engineering 37 (1971) 855) about the picture's middle.
type pinhole struct {
	cu, cv float64
	f      float64 // px
	k1, k2 float64
	r      turn // world to camera
	eye    vec  // m
}

// project gives the pixel of a world point; NaN behind the camera. z is the
// point's distance along the line of sight.
func (p *pinhole) project(w vec) (u, v, z float64) {
	c := p.r.times(w.plus(-1, p.eye))
	if c[2] <= 0 {
		return math.NaN(), math.NaN(), c[2]
	}
	u, v = p.lens(c[0]/c[2], c[1]/c[2])
	return u, v, c[2]
}

// lens gives the pixel of a direction (x, y, 1) in camera axes.
func (p *pinhole) lens(x, y float64) (u, v float64) {
	r2 := x*x + y*y
	g := p.f * (1 + r2*(p.k1+r2*p.k2))
	return p.cu + g*x, p.cv + g*y
}

// unlens gives the direction (x, y, 1) of a pixel, by Newton's method on the
// radius, and ∂(x, y)/∂(u, v); NaN in a corner that no direction leads to.
func (p *pinhole) unlens(u, v float64) (x, y float64, j [2][2]float64) {
	x, y = (u-p.cu)/p.f, (v-p.cv)/p.f
	if p.k1 == 0 && p.k2 == 0 {
		return x, y, [2][2]float64{{1 / p.f, 0}, {0, 1 / p.f}}
	}
	if rd := math.Hypot(x, y); rd > 0 {
		r, off := rd, 0.0
		for range 50 {
			r2 := r * r
			slope := math.Max(1+r2*(3*p.k1+5*r2*p.k2), 0.05) // New refuses a lens that folds the picture but for its corners
			off = r*(1+r2*(p.k1+r2*p.k2)) - rd
			r -= off / slope
			if math.Abs(off) < 1e-15 {
				break
			}
		}
		if math.Abs(off) > 1e-9 || !(r > 0) { // a corner that the lens as modelled does not reach
			r = math.NaN()
		}
		x, y = x*r/rd, y*r/rd
	}
	r2 := x*x + y*y
	g, dg := 1+r2*(p.k1+r2*p.k2), 2*(p.k1+2*r2*p.k2)
	a, b, d := g+dg*x*x, dg*x*y, g+dg*y*y // ∂(distorted)/∂(x, y)
	det := (a*d - b*b) * p.f
	return x, y, [2][2]float64{{d / det, -b / det}, {-b / det, a / det}}
}

// folds tells whether the lens maps two directions to one pixel within radius
// rd of the picture's middle (distorted, in focal lengths).
func (p *pinhole) folds(rd float64) bool {
	for r := 0.0; r < 5; r += 0.005 {
		r2 := r * r
		if 1+r2*(3*p.k1+5*r2*p.k2) <= 0.1 {
			return true
		}
		if r*(1+r2*(p.k1+r2*p.k2)) > rd {
			return false
		}
	}
	return true
}

// meet gives where the ray (x, y, 1) in camera axes meets the plane moved by
// depth towards the camera: coordinates along e1 and e2, the distance t along
// the line of sight, and ∂(a, b)/∂(x, y). NaN where it does not.
func (p *pinhole) meet(x, y float64, pl plane, depth float64) (a, b, t float64, j [2][2]float64) {
	d := p.r.back(vec{x, y, 1})
	dn := d.dot(pl.n)
	h := pl.n.dot(pl.at.plus(-1, p.eye)) + depth
	t = h / dn
	if !(t > 0) || math.IsInf(t, 0) {
		nan := math.NaN()
		return nan, nan, nan, [2][2]float64{{nan, nan}, {nan, nan}}
	}
	rel := p.eye.plus(t, d).plus(-1, pl.at)
	a, b = rel.dot(pl.e1), rel.dot(pl.e2)
	for k := range 2 { // p.r[k] is ∂d/∂x, ∂d/∂y
		slide := p.r[k].plus(-p.r[k].dot(pl.n)/dn, d)
		j[0][k], j[1][k] = t*slide.dot(pl.e1), t*slide.dot(pl.e2)
	}
	return a, b, t, j
}

// moved changes the camera by the nine numbers of a track.Unsure.
func (p pinhole) moved(by [9]float64) pinhole {
	p.f *= math.Max(1+by[0], 0.05) // linear, as the eye: focal length and distance then keep their ratio
	p.k1 += by[1]
	p.k2 += by[2]
	p.r = rotation(vec{by[3], by[4], by[5]}).after(p.r)
	p.eye = p.eye.plus(1, vec{by[6], by[7], by[8]})
	return p
}

// from is the inverse of moved: the nine numbers that turn q into p.
func (p pinhole) from(q pinhole) (by [9]float64) {
	by[0], by[1], by[2] = p.f/q.f-1, p.k1-q.k1, p.k2-q.k2
	w := rotationVector(p.r.after(turn{
		{q.r[0][0], q.r[1][0], q.r[2][0]}, {q.r[0][1], q.r[1][1], q.r[2][1]}, {q.r[0][2], q.r[1][2], q.r[2][2]},
	}))
	for i := range 3 {
		by[3+i], by[6+i] = w[i], p.eye[i]-q.eye[i]
	}
	return by
}
