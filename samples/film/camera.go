package film

import "math"

// view is a Camera made ready: world to camera axes (x right, y down, z along
// the line of sight), camera axes to flat coordinates, those to pixels. Flat
// coordinates are (X/Z, Y/Z) for a pinhole and (X, Y) in metres for an
// orthographic camera; straight things are straight in them.
type view struct {
	right, down, ahead Vec // unit vectors, world
	eye                Vec // world
	ortho              bool
	f                  float64 // px per unit of flat coordinate
	cu, cv             float64
	k1, k2             float64
	w, h               int // of the stored picture
	turned             int
	fold               [2]float64 // radius beyond which the lens's polynomial would turn back, and its value there
	// undo holds the flat coordinates of whole pixels from −pad to size−1+pad,
	// row by row, for a lens with distortion; between them they are interpolated
	// (error below 1e-4 px for any lens of a phone).
	undo  [][2]float64
	undoW int
}

// Project gives the pixel at which the world point p appears, in the upright
// picture and without rolling shutter.
func (c *Camera) Project(p Vec) (u, v float64) {
	w := newView(c, false)
	return w.upright(w.project(p))
}

const pad = 16 // px around the picture that samples may reach

// newView readies c; grid: to give the coordinates of many pixels.
func newView(c *Camera, grid bool) *view {
	w := &view{w: c.Width, h: c.Height, k1: c.K1, k2: c.K2, turned: ((c.Turned % 360) + 360) % 360}
	w.cu, w.cv = float64(c.Width-1)/2, float64(c.Height-1)/2
	if c.CentrePX != nil {
		w.cu, w.cv = c.CentrePX[0], c.CentrePX[1]
	}
	switch right, bottom := float64(c.Width-1), float64(c.Height-1); w.turned {
	case 90:
		w.w, w.h, w.cu, w.cv = c.Height, c.Width, w.cv, right-w.cu
	case 180:
		w.cu, w.cv = right-w.cu, bottom-w.cv
	case 270:
		w.w, w.h, w.cu, w.cv = c.Height, c.Width, bottom-w.cv, w.cu
	}
	st, ct := math.Sincos(c.Tilt)
	sp, cp := math.Sincos(c.Pan)
	w.ahead = Vec{sp * ct, cp * ct, -st}
	right := Vec{cp, -sp, 0}
	down := cross(w.ahead, right)
	sr, cr := math.Sincos(c.Roll)
	// Content turns clockwise when the camera turns anticlockwise.
	for i := range 3 {
		w.right[i] = cr*right[i] - sr*down[i]
		w.down[i] = sr*right[i] + cr*down[i]
	}
	minus := func(v Vec) Vec { return scale(v, -1) }
	switch w.turned { // the sensor lies the other way
	case 90:
		w.right, w.down = w.down, minus(w.right)
	case 180:
		w.right, w.down = minus(w.right), minus(w.down)
	case 270:
		w.right, w.down = minus(w.down), w.right
	}
	w.ortho = c.DistanceM == 0
	if w.ortho {
		w.k1, w.k2 = 0, 0
	}
	w.findFold()
	if w.ortho {
		w.f = c.PixelsPerM
		w.eye = c.LookAt
		return w
	}
	w.f = c.FocalPX
	if w.f == 0 {
		w.f = c.PixelsPerM * c.DistanceM
	}
	for i := range 3 {
		w.eye[i] = c.LookAt[i] - c.DistanceM*w.ahead[i]
	}
	if grid && (w.k1 != 0 || w.k2 != 0) {
		w.undoW = w.w + 2*pad
		w.undo = make([][2]float64, w.undoW*(w.h+2*pad))
		for j := range w.h + 2*pad {
			for i := range w.undoW {
				x, y := w.undistort(float64(i-pad), float64(j-pad))
				w.undo[j*w.undoW+i] = [2]float64{x, y}
			}
		}
	}
	return w
}

// toCamera gives a world point in camera axes, measured from the eye (pinhole)
// or from LookAt (orthographic).
func (w *view) toCamera(p Vec) Vec {
	d := sub(p, w.eye)
	return Vec{dot(d, w.right), dot(d, w.down), dot(d, w.ahead)}
}

// turn gives a world direction in camera axes.
func (w *view) turn(d Vec) Vec { return Vec{dot(d, w.right), dot(d, w.down), dot(d, w.ahead)} }

// flatten gives a camera-axes point's flat coordinates.
func (w *view) flatten(c Vec) (x, y float64) {
	if w.ortho {
		return c[0], c[1]
	}
	return c[0] / c[2], c[1] / c[2]
}

// findFold looks for the radius at which r(1 + k1 r² + k2 r⁴) stops growing.
func (w *view) findFold() {
	w.fold[0] = math.Inf(1)
	for r := 0.01; r < 5; r += 0.01 {
		if r2 := r * r; 1+r2*(3*w.k1+5*r2*w.k2) <= 0 {
			w.fold = [2]float64{r, r * (1 + r2*(w.k1+r2*w.k2))}
			return
		}
	}
}

// upright gives the upright picture's pixel of the stored picture's.
func (w *view) upright(u, v float64) (float64, float64) {
	switch w.turned {
	case 90:
		return float64(w.h-1) - v, u
	case 180:
		return float64(w.w-1) - u, float64(w.h-1) - v
	case 270:
		return v, float64(w.w-1) - u
	}
	return u, v
}

// lens gives the stored pixel of flat coordinates. Far outside of any picture,
// where the lens's polynomial would lead back into it, it goes on outwards.
func (w *view) lens(x, y float64) (u, v float64) {
	r2 := x*x + y*y
	g := w.f * (1 + r2*(w.k1+r2*w.k2))
	if r2 > w.fold[0]*w.fold[0] {
		r := math.Sqrt(r2)
		g = w.f * (w.fold[1] + (r-w.fold[0])*0.1) / r
	}
	return w.cu + g*x, w.cv + g*y
}

// project gives the stored pixel of a world point.
func (w *view) project(p Vec) (u, v float64) { return w.lens(w.flatten(w.toCamera(p))) }

// undistort gives the flat coordinates of a pixel, by Newton on the radius.
func (w *view) undistort(u, v float64) (x, y float64) {
	x, y = (u-w.cu)/w.f, (v-w.cv)/w.f
	if w.k1 == 0 && w.k2 == 0 {
		return x, y
	}
	rd := math.Hypot(x, y)
	if rd == 0 {
		return x, y
	}
	r := rd
	for range 30 {
		r2 := r * r
		step := (r*(1+r2*(w.k1+r2*w.k2)) - rd) / (1 + r2*(3*w.k1+5*r2*w.k2))
		r -= step
		if math.Abs(step) < 1e-14 {
			break
		}
	}
	return x * r / rd, y * r / rd
}

// row fills xs, ys with the flat coordinates of the points (u0 + i·du, v).
func (w *view) row(u0, du, v float64, xs, ys []float64) {
	if w.undo == nil {
		y := (v - w.cv) / w.f
		for i := range xs {
			xs[i] = (u0 + float64(i)*du - w.cu) / w.f
			ys[i] = y
		}
		return
	}
	j := min(max(int(math.Floor(v))+pad, 0), w.h+2*pad-2)
	fv := v + pad - float64(j)
	up, lo := w.undo[j*w.undoW:(j+1)*w.undoW], w.undo[(j+1)*w.undoW:(j+2)*w.undoW]
	for i := range xs {
		u := u0 + float64(i)*du + pad
		k := min(max(int(u), 0), w.undoW-2)
		fu := u - float64(k)
		a, b := (1-fu)*(1-fv), fu*(1-fv)
		c, d := (1-fu)*fv, fu*fv
		xs[i] = a*up[k][0] + b*up[k+1][0] + c*lo[k][0] + d*lo[k+1][0]
		ys[i] = a*up[k][1] + b*up[k+1][1] + c*lo[k][1] + d*lo[k+1][1]
	}
}

// ray gives origin and direction, camera axes, of the line of sight at (x, y).
func (w *view) ray(x, y float64) (o, d Vec) {
	if w.ortho {
		return Vec{x, y, 0}, Vec{0, 0, 1}
	}
	return Vec{}, Vec{x, y, 1}
}

// offRay is the distance of the camera-axes point c from the line of sight (x, y).
func (w *view) offRay(c Vec, x, y float64) float64 {
	if w.ortho {
		return math.Hypot(c[0]-x, c[1]-y)
	}
	s := c[0]*x + c[1]*y + c[2]
	d := x*x + y*y + 1
	return math.Sqrt(max(0, dot(c, c)-s*s/d))
}

func dot(a, b Vec) float64 { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func sub(a, b Vec) Vec     { return Vec{a[0] - b[0], a[1] - b[1], a[2] - b[2]} }
func scale(a Vec, k float64) Vec {
	return Vec{a[0] * k, a[1] * k, a[2] * k}
}
func add(a, b Vec) Vec { return Vec{a[0] + b[0], a[1] + b[1], a[2] + b[2]} }
func cross(a, b Vec) Vec {
	return Vec{a[1]*b[2] - a[2]*b[1], a[2]*b[0] - a[0]*b[2], a[0]*b[1] - a[1]*b[0]}
}

func unit(a Vec) Vec {
	n := math.Sqrt(dot(a, a))
	if n == 0 {
		return a
	}
	return scale(a, 1/n)
}
