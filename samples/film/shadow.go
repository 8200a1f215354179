package film

import "math"

// Shadows are soft, so they are computed at every fourth pixel and interpolated.
const shadowStep = 4

// onto gives the point at which the line of sight (x, y) meets the wall or table.
func (st *stage) onto(x, y float64) (q Vec, ok bool) {
	o, dir := st.cam.ray(x, y)
	from, to := st.cam.eye, Vec{}
	for i := range 3 {
		from[i] += o[0]*st.cam.right[i] + o[1]*st.cam.down[i] + o[2]*st.cam.ahead[i]
		to[i] = dir[0]*st.cam.right[i] + dir[1]*st.cam.down[i] + dir[2]*st.cam.ahead[i]
	}
	w := &st.scene.Wall
	axis, at := 1, w.Y
	if w.Table {
		axis, at = 2, w.Z
	}
	if to[axis] == 0 {
		return q, false
	}
	return add(from, scale(to, (at-from[axis])/to[axis])), true
}

// shadowOf gives where the middle of the shadow of a ball at p (world) falls.
func (st *stage) shadowOf(p Vec) (q Vec, ok bool) {
	w, l := &st.scene.Wall, st.lamp.world
	axis, at := 1, w.Y
	lit := l[1] < 0
	if w.Table {
		axis, at, lit = 2, w.Z, l[2] > 0
	}
	if !lit {
		return q, false // the lamp is behind it
	}
	return add(p, scale(l, (at-p[axis])/l[axis])), true
}

// castShadows fills d.shade for the block with its margin, w × h px.
func (d *desk) castShadows(st *stage, b block, w, h int, shades []*ball, times []float64) {
	gw, gh := w/shadowStep+2, h/shadowStep+2
	d.shade = resize(d.shade, gw*gh)
	d.cast = d.cast[:0]
	delay := st.rowTime(float64(b.y0+b.y1) / 2)
	for _, s := range shades {
		for _, t := range times {
			d.cast = append(d.cast, s.b.At(t+delay))
		}
	}
	for j := range gh {
		for i := range gw {
			u, v := float64(b.x0-d.margin+i*shadowStep), float64(b.y0-d.margin+j*shadowStep)
			x, y := st.cam.undistort(u, v)
			q, ok := st.onto(x, y)
			left := 1.0
			for k, s := range shades {
				if !ok {
					break
				}
				dark := 0.0
				for _, p := range d.cast[k*len(times) : (k+1)*len(times)] {
					dark += st.lamp.shade(p, q, s.r)
				}
				left *= 1 - st.lamp.shadow*dark/float64(len(times))
			}
			d.shade[j*gw+i] = float32(left)
		}
	}
}

// shadowAt interpolates d.shade at pixel (i, j) of a block with margin, w wide.
func (d *desk) shadowAt(w, i, j int) float32 {
	gw := w/shadowStep + 2
	k := j/shadowStep*gw + i/shadowStep
	x, y := float32(i%shadowStep)/shadowStep, float32(j%shadowStep)/shadowStep
	a, b, c, e := d.shade[k], d.shade[k+1], d.shade[k+gw], d.shade[k+gw+1]
	return (a*(1-x)+b*x)*(1-y) + (c*(1-x)+e*x)*y
}

// shades tells whether the ball's shadow may touch the block.
func (st *stage) shades(s *ball, b block) bool {
	w, l := &st.scene.Wall, st.lamp
	steep := -l.world[1]
	if w.Table {
		steep = l.world[2]
	}
	for _, k := range [...]int{0, len(s.p.c) - 1} {
		c := s.p.c[k][1]
		var p Vec
		for i := range 3 {
			p[i] = st.cam.eye[i] + c[0]*st.cam.right[i] + c[1]*st.cam.down[i] + c[2]*st.cam.ahead[i]
		}
		q, ok := st.shadowOf(p)
		if !ok {
			return false
		}
		qc := st.cam.toCamera(q)
		if !st.cam.ortho && qc[2] <= 0 {
			continue
		}
		u, v := st.cam.lens(st.cam.flatten(qc))
		// A shadow is longest where the light grazes the wall.
		r := (s.r + l.soft) / steep * 1.3 * st.cam.f
		if !st.cam.ortho {
			r /= qc[2]
		}
		r += s.moved + 2 + float64(st.halo)
		if math.Abs(u-float64(b.x0+b.x1)/2) < r+float64(b.x1-b.x0)/2 && math.Abs(v-float64(b.y0+b.y1)/2) < r+float64(b.y1-b.y0)/2 {
			return true
		}
	}
	return false
}
