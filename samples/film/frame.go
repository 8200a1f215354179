package film

import (
	"cmp"
	"math"
	"slices"
)

// Render draws the frame whose exposure has its middle, on the picture's middle row, at t (s) into
// dst: 3·Width bytes per row, blue, green, red, as a camera gives them, noise
// and rounding included. It panics if dst is too short. The same scene, t and
// Seed give the same bytes.
func (s *Scene) Render(t float64, dst []byte) {
	st := s.stage()
	d := st.pool.Get().(*desk)
	d.render(st, t)
	if s.Camera.Turned == 0 {
		st.grain.develop(d.frame, dst, st.cam.w, t)
	} else {
		d.bytes = resize(d.bytes, len(d.frame))
		st.grain.develop(d.frame, d.bytes, st.cam.w, t)
		turn(st.cam, d.bytes, dst)
	}
	st.pool.Put(d)
}

// renderStored is Render in the sensor's own orientation.
func (s *Scene) renderStored(t float64, dst []byte) {
	st := s.stage()
	d := st.pool.Get().(*desk)
	d.render(st, t)
	st.grain.develop(d.frame, dst, st.cam.w, t)
	st.pool.Put(d)
}

// turn copies the stored picture's pixels to their places in the upright one.
func turn[T any](w *view, from, to []T) {
	wide := w.w
	if w.turned%180 != 0 {
		wide = w.h
	}
	for y := range w.h {
		for x := range w.w {
			u, v := w.upright(float64(x), float64(y))
			copy(to[3*(int(v)*wide+int(u)):][:3], from[3*(y*w.w+x):][:3])
		}
	}
}

// Levels is Render without noise and with 1/128 grey level instead of whole
// ones: dst has Width·Height·3 numbers, blue, green, red.
func (s *Scene) Levels(t float64, dst []float32) {
	st := s.stage()
	d := st.pool.Get().(*desk)
	d.render(st, t)
	d.levels = resize(d.levels, len(d.frame))
	for i, x := range d.frame {
		d.levels[i] = float32(x) / level
	}
	turn(st.cam, d.levels, dst)
	st.pool.Put(d)
}

// render leaves the frame in d.frame.
func (d *desk) render(st *stage, t float64) {
	s := st.scene
	c := &s.Camera
	if d.frame == nil {
		d.frame = slices.Clone(st.calm)
		for i := range s.Bobs {
			if s.Bobs[i].Still {
				continue
			}
			b := &ball{b: &s.Bobs[i], r: s.Bobs[i].DiameterM / 2}
			d.balls = append(d.balls, b)
			d.shapes = append(d.shapes, b)
		}
		for i := range s.Rods {
			if !s.Rods[i].Still {
				d.shapes = append(d.shapes, &rod{r: &s.Rods[i]})
			}
		}
	}
	for _, b := range d.dirty {
		for v := b.y0; v < b.y1; v++ {
			i, j := 3*(v*st.cam.w+b.x0), 3*(v*st.cam.w+b.x1)
			copy(d.frame[i:j], st.calm[i:j])
		}
	}
	d.dirty = d.dirty[:0]
	d.aim(st, t)
	slices.SortStableFunc(d.shapes, func(a, b shape) int { return cmp.Compare(b.depth(), a.depth()) })
	shadowTimes := []float64{t - c.ExposureS/3, t, t + c.ExposureS/3}
	if c.ExposureS == 0 {
		shadowTimes = shadowTimes[1:2]
	}
	for y := 0; y < st.cam.h; y += tile {
		for x := 0; x < st.cam.w; x += tile {
			b := block{x, y, min(x+tile, st.cam.w), min(y+tile, st.cam.h)}
			any := d.expose(st, b, st.halo, d.shapes, d.times)
			d.shades = d.shades[:0]
			if st.lamp.shadow > 0 {
				for _, s := range d.balls {
					if !s.b.NoShadow && st.shades(s, b) {
						d.shades = append(d.shades, s)
					}
				}
			}
			if !any && len(d.shades) == 0 {
				continue
			}
			keep := b
			if len(d.shades) == 0 {
				keep = d.touch.reached(b, st.halo)
			}
			d.finish(st, b, keep, d.shades, shadowTimes, d.frame)
			d.dirty = append(d.dirty, keep)
		}
	}
}

// reached is the part of block b within halo px of t, whose origin is b's with a
// margin of halo.
func (t block) reached(b block, halo int) block {
	return block{
		max(b.x0, b.x0+t.x0-2*halo), max(b.y0, b.y0+t.y0-2*halo),
		min(b.x1, b.x0+t.x1), min(b.y1, b.y0+t.y1),
	}
}

// aim chooses the instants of the exposure and readies the shapes. The midpoint
// rule over a smear converges once its steps are near the blur's width (its
// error goes as exp(−2π²σ²/step²)); the instants are spread so that they have an
// even exposure's variance, which keeps the acceleration term aτ²/24 exact.
func (d *desk) aim(st *stage, t float64) {
	e := st.scene.Camera.ExposureS
	d.times = append(d.times[:0], t)
	if e > 0 {
		d.times = append(d.times[:0], t-e/2, t, t+e/2)
	}
	for _, s := range d.shapes {
		s.aim(st, d.times)
	}
	if e == 0 {
		return
	}
	smear := 0.0
	for _, s := range d.shapes {
		smear = max(smear, s.smear())
	}
	n := max(3, int(math.Ceil(smear/(1.5*math.Sqrt(st.sigma*st.sigma+1.0/12)))))
	d.times = d.times[:0]
	spread := e / math.Sqrt(float64(n)*float64(n)-1)
	for k := range n {
		d.times = append(d.times, t+spread*(float64(k)-float64(n-1)/2))
	}
	for _, s := range d.shapes {
		s.aim(st, d.times)
	}
}
