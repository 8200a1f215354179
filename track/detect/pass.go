package detect

import "math"

// startLevels sets the levels of bob and wall from the medians well inside and
// well outside the outline, given the bob's shading so far, and returns a first
// robust noise.
func (f *Fitter) startLevels(m *model) scatter {
	every := len(f.px)/500 + 1
	mid := func(inside bool) (level, spread float64) {
		f.ring = f.ring[:0]
		lim := m.r - 1.5*m.s - m.l/2
		if !inside {
			lim = m.r + 1.5*m.s + m.l/2
		} else {
			lim = math.Max(lim, 0.5*m.r)
		}
		for i := 0; i < len(f.px); i += every {
			q := &f.px[i]
			if q.near {
				continue
			}
			d2 := float64(q.x*q.x + q.y*q.y)
			if inside && d2 < lim*lim {
				f.ring = append(f.ring, float64(q.v)-m.shade(float64(q.x), float64(q.y)))
			} else if !inside && d2 > lim*lim {
				f.ring = append(f.ring, float64(q.v-q.wall)-(m.at(pBx)*float64(q.x)+m.at(pBy)*float64(q.y))/m.r)
			}
		}
		level = median(f.ring)
		return level, f.spread()
	}
	inside, ui := mid(true)
	outside, uo := mid(false)
	if f.known > 2 {
		// What covers half of the bob must not pass for the bob itself: light changes
		// slowly.
		room := 4 + 0.05*math.Abs(f.bob-outside-f.back) + 1.5*float64(f.stale)
		inside = math.Min(math.Max(inside, f.bob-room), f.bob+room)
		ui = math.Min(ui, 2*f.bobNoise*(1+0.2*float64(f.stale)))
	}
	m.level[0], m.level[pB0-pF0] = inside, outside
	rough := f.rough * (inside - outside)
	least := quantum(f.Weights) + rough*rough
	n := scatter{bob: ui*ui + least, wall: uo*uo + least}
	// Shading and texture swell these medians' spread; what the fit finds later
	// may be smaller, down to a third.
	n.leastBob, n.leastWall = math.Max(least, n.bob/9), math.Max(least, n.wall/9)
	if f.known > 2 {
		most := 2 * f.bobNoise * (1 + 0.2*float64(f.stale))
		n.mostBob = math.Max(most*most, least)
	}
	return n
}

// quantum is the variance of rounding to whole bytes, in the projection.
func quantum(w [3]float64) float64 {
	return (w[0]*w[0] + w[1]*w[1] + w[2]*w[2]) / 12
}

// pass goes once over the pixels: residuals, weights, normal equations.
func (f *Fitter) pass(m *model, acc *sums, noise *scatter, loose float64, from [2]float64, on *[pCount]bool) {
	f.odd = f.odd[:0]
	f.around = [sectors]ringMean{}
	du, dv := m.cu-from[0], m.cv-from[1]
	o := m.outline()
	var c coverage
	var j vector
	for i := range f.px {
		q := &f.px[i]
		x, y := o.straight(float64(q.x)-du, float64(q.y)-dv)
		o.cover(x, y, &c)
		beta := 1 - c.alpha
		px, py := c.x*o.ir, c.y*o.ir
		nz := c.z
		h, lit := m.lamp.light(m.at(pFx)*px + m.at(pFy)*py + m.at(pFz)*nz + m.at(pLit))
		front := m.at(pF0) + h
		xb, yb := x*o.ir, y*o.ir
		back := float64(q.wall) + m.at(pB0) + m.at(pBx)*xb + m.at(pBy)*yb
		step := front - back
		res := float64(q.v) - back - c.alpha*step

		if c.alpha < 0.01 {
			f.around[q.sec].sum += res
			f.around[q.sec].n++
		}
		variance := noise.bob*c.alpha + noise.wall*beta
		steep := step * c.r * loose
		t := res * res / (variance + steep*steep)
		if !q.near {
			acc.cost += min(res*res, f.most)
		}
		w := weigh(t)
		if t > 16 && res*res > misfit*step*step {
			f.odd = append(f.odd, int32(i))
		}
		if q.near {
			w = 0
		}
		info := step * step * c.r * c.r / variance
		acc.all[q.sec] += info
		if w == 0 {
			continue
		}
		acc.kept[q.sec] += w * info
		if c.alpha > 0.97 {
			acc.inSum += w * res * res
			acc.inN += w
		} else if c.alpha < 0.03 {
			acc.outSum += w * res * res
			acc.outN += w
		} else {
			acc.edgeOver += w * (res*res - variance)
			acc.edgeSteep += w * step * step * c.r * c.r
		}
		acc.n += w
		w /= variance
		acc.chi += w * res * res

		lit *= c.alpha
		j[pU] = step*c.u - m.at(pFx)*lit*o.ir
		j[pV] = step*c.v - m.at(pFy)*lit*o.ir
		j[pR] = step * c.r
		j[pSmear] = step * c.l
		j[pF0] = c.alpha
		j[pFx] = px * lit
		j[pFy] = py * lit
		j[pFz] = nz * lit
		j[pLit] = lit
		j[pB0] = beta
		j[pBx] = beta * xb
		j[pBy] = beta * yb
		j[pBlur] = step * c.s
		j[pE1] = step * c.e1
		j[pE2] = step * c.e2
		wr := w * res
		score := &acc.score[q.sec]
		for a := range j {
			ja := j[a]
			if ja == 0 || !on[a] {
				continue
			}
			acc.g[a] += wr * ja
			score[a] += wr * ja
			ja *= w
			row := &acc.a[a]
			for b := a; b < pCount; b++ {
				row[b] += ja * j[b]
			}
		}
	}
}
