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
	f.flagW = p.W
	if n := p.W * p.H; len(f.flag) < n {
		f.flag = make([]bool, n)
	}
	out := m.r*(1+math.Abs(m.e1)+math.Abs(m.e2)) + 3*m.s + 3 + m.l/2 + reach
	in := m.r*(1-math.Abs(m.e1)-math.Abs(m.e2)) - math.Min(3*m.s+2, 0.6*m.r) - m.l/2 - reach
	box := f.Active.Intersect(p.Rect)
	skip := 1
	if n := math.Pi * (out*out - math.Max(in, 0)*math.Max(in, 0)); n > mostPix {
		skip = int(n/mostPix) + 1
	}
	in2, out2 := 0.0, out*out
	if in > 0 {
		in2 = in * in
	}
	w0, w1, w2 := f.Weights[0], f.Weights[1], f.Weights[2]
	v0 := max(box.Min.Y, int(math.Ceil(m.cv-out)))
	v1 := min(box.Max.Y-1, int(math.Floor(m.cv+out)))
	if wall != nil && !wall.Useful() {
		wall = nil
	}
	known := 0
	for v := v0; v <= v1; v++ {
		y := float64(v) - m.cv
		half := math.Sqrt(math.Max(out2-y*y, 0))
		u0 := max(box.Min.X, int(math.Ceil(m.cu-half)))
		u1 := min(box.Max.X-1, int(math.Floor(m.cu+half)))
		hole0, hole1 := u1+1, u1
		if y*y < in2 {
			h := math.Sqrt(in2 - y*y)
			hole0, hole1 = int(math.Ceil(m.cu-h)), int(math.Floor(m.cu+h))
		}
		row := p.BGR[3*(v-p.Rect.Min.Y)*p.W:]
		// Every skip-th pixel, shifted from row to row by a step that is prime to
		// most skips, so that no direction is favoured.
		first := u0
		if skip > 1 {
			first += ((u0+v*((skip+1)/2|1))%skip + skip) % skip
		}
		for u := first; u <= u1; u += skip {
			if u >= hole0 && u <= hole1 {
				if skip == 1 {
					u = hole1
				}
				continue
			}
			if len(covers) > 0 && covered(float64(u), float64(v), covers) {
				continue
			}
			o := 3 * (u - p.Rect.Min.X)
			px := pixel{
				x: float32(float64(u) - m.cu), y: float32(y), at: int32((v-p.Rect.Min.Y)*p.W + u - p.Rect.Min.X),
				v: float32(w0*float64(row[o]) + w1*float64(row[o+1]) + w2*float64(row[o+2])),
			}
			if wall != nil {
				if b, g, r, ok := wall.at(u, v); ok {
					px.wall = float32(w0*b + w1*g + w2*r)
					known++
				} else {
					px.wall = notSeen
				}
			}
			px.sec = sector(px.x, px.y)
			f.px = append(f.px, px)
		}
	}
	f.back = 0
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
		f.ring = f.ring[:0]
		for i := range f.px {
			q := &f.px[i]
			if float64(q.x*q.x+q.y*q.y) > r1*r1 && q.wall != notSeen {
				f.ring = append(f.ring, float64(q.v))
			}
		}
		n := len(f.ring)
		plain := f.spread()
		f.ring = f.ring[:0]
		for i := range f.px {
			q := &f.px[i]
			if float64(q.x*q.x+q.y*q.y) > r1*r1 && q.wall != notSeen {
				f.ring = append(f.ring, float64(q.v-q.wall))
			}
		}
		use = n > 20 && f.spread() < 0.93*plain
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

// sector numbers the direction of (x, y) without trigonometry: the diamond
// angle runs evenly enough.
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
	k := int16(a * (sectors / 4))
	if k < 0 {
		return 0
	}
	if k >= sectors {
		return sectors - 1
	}
	return k
}

// oddReach is how far around a pixel that fits badly its neighbours are left out,
// px: as far as the lens smears the edge of what is there.
const oddReach = 2

// misfit is the square of the residual, over the contrast, that the model's own
// shortcomings may leave at an edge without its being odd.
const misfit = 0.12 * 0.12

// markNear marks the pixels around those that fitted badly, for the next pass.
// Where they lie all around the outline it is the model that is wrong, and
// nothing is marked. It tells whether anything is.
func (f *Fitter) markNear() bool {
	var hit [sectors]bool
	wide := 0
	for _, i := range f.odd {
		if k := f.px[i].sec; !hit[k] {
			hit[k] = true
			wide++
		}
	}
	mark := len(f.odd) > 2 && wide <= sectors*5/12
	set := func(v bool) {
		for _, i := range f.odd {
			at := int(f.px[i].at)
			for dy := -oddReach; dy <= oddReach; dy++ {
				for dx := -oddReach; dx <= oddReach; dx++ {
					if k := at + dy*f.flagW + dx; dx*dx+dy*dy <= oddReach*oddReach+1 && k >= 0 && k < len(f.flag) {
						f.flag[k] = v
					}
				}
			}
		}
	}
	if mark {
		set(true)
	}
	for i := range f.px {
		q := &f.px[i]
		q.near = mark && f.flag[q.at]
	}
	if mark {
		set(false)
	}
	return mark
}

// startLevels sets the levels of bob and wall from the medians well inside and
// well outside the outline, given the bob's shading so far, and returns a first
// robust noise.
func (f *Fitter) startLevels(m *model) scatter {
	mid := func(inside bool) (level, spread float64) {
		f.ring = f.ring[:0]
		lim := m.r - 1.5*m.s - m.l/2
		if !inside {
			lim = m.r + 1.5*m.s + m.l/2
		} else {
			lim = math.Max(lim, 0.5*m.r)
		}
		for i := range f.px {
			q := &f.px[i]
			d2 := float64(q.x*q.x + q.y*q.y)
			if inside && d2 < lim*lim {
				f.ring = append(f.ring, float64(q.v)-m.shade(float64(q.x), float64(q.y)))
			} else if !inside && d2 > lim*lim {
				f.ring = append(f.ring, float64(q.v-q.wall))
			}
		}
		level = median(f.ring)
		return level, f.spread()
	}
	inside, ui := mid(true)
	outside, uo := mid(false)
	m.level[0], m.level[4] = inside, outside
	m.level[5], m.level[6] = 0, 0
	rough := f.rough * (inside - outside)
	least := quantum(f.Weights) + rough*rough
	n := scatter{bob: ui*ui + least, wall: uo*uo + least}
	// Shading and texture swell these medians' spread; what the fit finds later
	// may be smaller, down to a third.
	n.leastBob, n.leastWall = math.Max(least, n.bob/9), math.Max(least, n.wall/9)
	return n
}

// quantum is the variance of rounding to whole bytes, in the projection.
func quantum(w [3]float64) float64 {
	return (w[0]*w[0] + w[1]*w[1] + w[2]*w[2]) / 12
}

// pass goes once over the pixels: residuals, weights, normal equations.
func (f *Fitter) pass(m *model, acc *sums, noise *scatter, loose float64, from [2]float64, on *[pCount]bool) {
	f.odd = f.odd[:0]
	n := pBlur
	if on[pBlur] || on[pE1] {
		n = pCount
	}
	du, dv := m.cu-from[0], m.cv-from[1]
	nodes := nodesFor(m.l, m.s)
	gx, gw := gauss[nodes].x, gauss[nodes].w
	is, ir := 1/m.s, 1/m.r
	// Rolling shutter: what is read later has moved on.
	k11, k12, k21, k22 := 1-m.skew[0][0], -m.skew[0][1], -m.skew[1][0], 1-m.skew[1][1]
	m11, m12, m22 := 1-m.e1, -m.e2, 1+m.e1
	edgeR := m.r - 0.5*m.s*m.s*ir
	far := m.r + edgeSpan*m.s
	soft := 2 * m.s * ir // nz is rounded off over the edge's blur
	soft *= soft
	var j vector
	for i := range f.px {
		q := &f.px[i]
		x, y := float64(q.x)-du, float64(q.y)-dv
		x, y = k11*x+k12*y, k21*x+k22*y
		var alpha, aU, aV, aR, aL, aS, aE1, aE2, px, py float64
		for k, t := range gx {
			xk, yk := x-t*m.l*m.mu, y-t*m.l*m.mv
			xp, yp := m11*xk+m12*yk, m12*xk+m22*yk
			r2 := xp*xp + yp*yp
			if r2 > far*far {
				continue
			}
			rho := math.Sqrt(r2)
			z := (edgeR - rho) * is
			cdf, pdf := edge(z)
			cdf *= gw[k]
			alpha += cdf
			px += cdf * xk
			py += cdf * yk
			if pdf == 0 {
				continue
			}
			d := gw[k] * pdf * is
			irho := 1 / (rho + 1e-9)
			nx, ny := (m11*xp+m12*yp)*irho, (m12*xp+m22*yp)*irho
			aR += d
			aU += d * nx
			aV += d * ny
			aL += d * (nx*m.mu + ny*m.mv) * t
			if n == pCount {
				aS -= d * z
				aE1 += d * (xp*xk - yp*yk) * irho
				aE2 += d * (xp*yk + yp*xk) * irho
			}
		}
		beta := 1 - alpha
		// px, py: where in the bob the covered part of the smear lies, times alpha.
		px *= ir
		py *= ir
		nz := 0.0
		if alpha > 1e-3 {
			mx, my := px/alpha, py/alpha
			c := 1 - mx*mx - my*my
			nz = alpha * math.Sqrt(0.5*(c+math.Sqrt(c*c+soft)))
		}
		xb, yb := x*ir, y*ir
		bob := m.level[0] * alpha
		lit := 1.0
		if alpha > 1e-3 {
			h := (m.level[1]*px + m.level[2]*py + m.level[3]*nz) / alpha
			h, lit = m.lamp.light(h)
			bob += alpha * h
		}
		back := float64(q.wall) + m.level[4] + m.level[5]*xb + m.level[6]*yb
		res := float64(q.v) - bob - beta*back
		front := bob
		if alpha > 0.05 {
			front /= alpha
		} else {
			front = m.level[0]
		}
		step := front - back

		variance := noise.bob*alpha + noise.wall*beta
		steep := step * aR * loose
		t := res * res / (variance + steep*steep)
		w := weigh(t)
		if t > 16 && res*res > misfit*step*step {
			f.odd = append(f.odd, int32(i))
		}
		if q.near {
			w = 0
		}
		info := step * step * aR * aR / variance
		acc.all[q.sec] += info
		if w == 0 {
			continue
		}
		acc.kept[q.sec] += w * info
		if alpha > 0.97 {
			acc.inSum += w * res * res
			acc.inN += w
		} else if alpha < 0.03 {
			acc.outSum += w * res * res
			acc.outN += w
		}
		w /= variance
		acc.chi += w * res * res
		acc.n += w * variance

		j[pU] = step*aU - m.level[1]*lit*alpha*ir
		j[pV] = step*aV - m.level[2]*lit*alpha*ir
		j[pR] = step * aR
		j[pSmear] = step * aL
		j[pF0] = alpha
		j[pFx] = px * lit
		j[pFy] = py * lit
		j[pFz] = nz * lit
		j[pB0] = beta
		j[pBx] = beta * xb
		j[pBy] = beta * yb
		if n == pCount {
			j[pBlur] = step * aS
			j[pE1] = step * aE1
			j[pE2] = step * aE2
		}
		wr := w * res
		score := &acc.score[q.sec]
		for a := 0; a < n; a++ {
			ja := j[a]
			if ja == 0 {
				continue
			}
			acc.g[a] += wr * ja
			score[a] += wr * ja
			ja *= w
			row := &acc.a[a]
			for b := a; b < n; b++ {
				row[b] += ja * j[b]
			}
		}
	}
}

// assess compares the scatter of the sectors' pulls on the centre with what
// white residuals would give, and remembers the ratio: the clustered sandwich
// of Liang & Zeger (Biometrika 73, 1986, 13–22), averaged over frames because
// one frame has too few clusters.
func (f *Fitter) assess(inv *matrix, acc *sums, on *[pCount]bool) {
	var pulls [sectors][2]float64
	var mean [2]float64
	used, free := 0.0, 0.0
	for _, yes := range on {
		if yes {
			free++
		}
	}
	for k := range sectors {
		if acc.all[k] == 0 {
			continue
		}
		used++
		for i := range pCount {
			pulls[k][0] += inv[pU][i] * acc.score[k][i]
			pulls[k][1] += inv[pV][i] * acc.score[k][i]
		}
		mean[0] += pulls[k][0]
		mean[1] += pulls[k][1]
	}
	if used < 10 {
		return
	}
	// The last step is still in these residuals; each sector has its share of it.
	mean[0] /= used
	mean[1] /= used
	meat := 0.0
	for k := range sectors {
		if acc.all[k] > 0 {
			a, b := pulls[k][0]-mean[0], pulls[k][1]-mean[1]
			meat += a*a + b*b
		}
	}
	scale := acc.chi / math.Max(acc.n-free, 1)
	white := (inv[pU][pU] + inv[pV][pV]) * scale
	// The fit itself zeroes the pulls' sum and their first and second harmonics,
	// which costs about four of the clusters' freedoms.
	ratio := meat / white * used / (used - 4)
	// One wild frame must not spoil the average.
	if f.agreeN >= 3 {
		ratio = math.Min(ratio, 4*f.agree)
	}
	f.agreeN = math.Min(f.agreeN+1, 40)
	f.agree += (ratio - f.agree) / f.agreeN
}
