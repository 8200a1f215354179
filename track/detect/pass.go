package detect

import (
	"math"
	"math/bits"

	"lodeswing/track/clip"
)

// notSeen marks a pixel behind which the wall was never seen.
const notSeen = float32(math.MaxFloat32)

// gather collects the pixels of the band around the model's outline. reach is
// by how much the outline may still move, px.
func (f *Fitter) gather(p *clip.Patch, wall *Wall, m *model, covers []Disc, reach float64) {
	f.px = f.px[:0]
	f.flagW, f.flagU, f.flagV, f.marked = p.W, p.Rect.Min.X, p.Rect.Min.Y, false
	if n := p.W * p.H; len(f.flag) < n {
		f.flag = make([]bool, n)
	}
	out := m.r*(1+math.Abs(m.e1)+math.Abs(m.e2)) + 3*m.s + 3 + m.l/2 + reach
	in := m.r*(1-math.Abs(m.e1)-math.Abs(m.e2)) - math.Min(3*m.s+2, 0.6*m.r) - m.l/2 - reach
	box := f.Active.Intersect(p.Rect)
	// Pixels at the edge all count, up to a number that is enough for any purpose;
	// of those that show bob or wall alone some hundreds are enough for the levels.
	atEdge := 2 * math.Pi * m.r * (2*flat*m.s + 2 + 2*reach + 2/math.Pi*m.l)
	skip := int(atEdge/mostEdge) + 1
	area := math.Pi * (out*out - math.Max(in, 0)*math.Max(in, 0))
	sparse := min(max(int((area-atEdge)/enoughFlat), 2), 8)
	in2, out2 := 0.0, out*out
	if in > 0 {
		in2 = in * in
	}
	w0, w1, w2 := float32(f.Weights[0]), float32(f.Weights[1]), float32(f.Weights[2])
	v0 := max(box.Min.Y, int(math.Ceil(m.cv-out)))
	v1 := min(box.Max.Y-1, int(math.Floor(m.cv+out)))
	if wall != nil && !wall.Useful() {
		wall = nil
	}
	edgeIn := float32(m.r - flat*m.s - reach - 1)
	edgeOut := float32(m.r + flat*m.s + reach + 1)
	mu, mv := float32(m.mu*m.l/(2*m.r)), float32(m.mv*m.l/(2*m.r))
	known := 0
	offset := float32(0)
	if f.Blocks {
		skip, offset = 2, 0.5
	}
	cu := float32(m.cu - float64(p.Rect.Min.X))
	for v := v0; v <= v1; v++ {
		yd := float64(v) - m.cv
		half := math.Sqrt(math.Max(out2-yd*yd, 0))
		u0 := max(box.Min.X, int(math.Ceil(m.cu-half)))
		u1 := min(box.Max.X-1, int(math.Floor(m.cu+half)))
		hole0, hole1 := u1+1, u1
		if yd*yd < in2 {
			h := math.Sqrt(in2 - yd*yd)
			hole0, hole1 = int(math.Ceil(m.cu-h)), int(math.Floor(m.cu+h))
		}
		line := (v - p.Rect.Min.Y) * p.W
		row := p.BGR[3*line : 3*(line+p.W)]
		back, seen := wall.row(v, p.Rect.Min.X, p.W)
		y := float32(yd) + offset
		y2 := y * y
		sparseRow := v * ((sparse+1)/2 | 1) // a step prime to sparse: no stripes
		// Every skip-th pixel, shifted from row to row by a step that is prime to
		// most skips, so that no direction is favoured.
		first := u0
		if f.Blocks {
			if v&1 != 0 {
				continue
			}
			first += first & 1
		} else if skip > 1 {
			first += ((u0+v*((skip+1)/2|1))%skip + skip) % skip
		}
		for u := first; u <= u1; u += skip {
			if u >= hole0 && u <= hole1 {
				if skip == 1 {
					u = hole1
				}
				continue
			}
			k := u - p.Rect.Min.X
			x := float32(k) - cu + offset
			if skip == 1 && (u+sparseRow)%sparse != 0 {
				// The smear widens the edge along its direction only.
				e := x*mu + y*mv
				if e < 0 {
					e = -e
				}
				r2, lo, hi := x*x+y2, edgeIn-e, edgeOut+e
				if lo > 0 && r2 < lo*lo || r2 > hi*hi {
					continue
				}
			}
			if len(covers) > 0 && covered(float64(u), float64(v), covers) {
				continue
			}
			c := row[3*k : 3*k+3 : 3*k+3]
			px := pixel{
				x: x, y: y, at: int32(line + k), sec: sector(x, y),
				v: w0*float32(c[0]) + w1*float32(c[1]) + w2*float32(c[2]),
			}
			if wall != nil {
				if seen != nil && seen[k] > 0 {
					b := back[3*k : 3*k+3 : 3*k+3]
					px.wall = (w0*float32(b[0]) + w1*float32(b[1]) + w2*float32(b[2])) * (1.0 / wallUnit)
					known++
				} else {
					px.wall = notSeen
				}
			}
			f.px = append(f.px, px)
		}
	}
	f.back, f.wallWrong = 0, false
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
		every := len(f.px)/500 + 1
		outer := func(less float32) int {
			f.ring = f.ring[:0]
			for i := 0; i < len(f.px); i += every {
				q := &f.px[i]
				if float64(q.x*q.x+q.y*q.y) > r1*r1 && q.wall != notSeen {
					f.ring = append(f.ring, float64(q.v-less*q.wall))
				}
			}
			return len(f.ring)
		}
		n := outer(0)
		plain := f.spread()
		outer(1)
		left := f.spread()
		use = n > 20 && left < 0.93*plain
		f.wallWrong = n > 20 && left > 1.6*plain && left > 4
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

// sector numbers the direction of (x, y) without trigonometry: the diamond angle
// runs evenly enough for a small table to turn it into equal sectors.
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
	return sectorOf[int(a*sectorFine)&(4*sectorFine-1)]
}

const sectorFine = 256 // entries per quarter turn

var sectorOf = func() (t [4 * sectorFine]int16) {
	for i := range t {
		a := (float64(i) + 0.5) / sectorFine
		x := 1 - a
		y := 1 - math.Abs(x)
		if a >= 2 {
			x = a - 3
			y = math.Abs(x) - 1
		}
		turn := math.Atan2(y, x) / (2 * math.Pi)
		if turn < 0 {
			turn++
		}
		t[i] = int16(min(int(turn*sectors), sectors-1))
	}
	return t
}()

// oddReach is how far around a pixel that fits badly its neighbours are left out,
// px: as far as the lens smears the edge of what is there.
const oddReach = 2

// misfit is the square of the residual, over the contrast, that the model's own
// shortcomings may leave at an edge without its being odd.
const misfit = 0.12 * 0.12

// markNear marks the pixels around those that fitted badly, for the next pass.
// Where they lie all around the outline it is the model that is wrong, and
// nothing is marked. It tells whether the marks have changed much.
func (f *Fitter) markNear(contrast float64) bool {
	dim := f.dimSectors(contrast)
	if len(f.odd) == 0 && !f.marked && dim == 0 {
		return false
	}
	var hit [sectors]bool
	wide := 0
	for _, i := range f.odd {
		q := &f.px[i]
		if !hit[q.sec] {
			hit[q.sec] = true
			wide++
		}
	}
	odd := f.odd
	if len(odd) <= 2 || wide > sectors*2/3 {
		odd = nil
	}
	for _, i := range odd {
		f.flagAround(int(f.px[i].at), true)
	}
	changed := f.readFlags(dim)
	for _, i := range odd {
		f.flagAround(int(f.px[i].at), false)
	}
	f.marked = len(odd) > 0 || dim != 0
	return changed > 8
}

// ringMean sums up residuals outside the outline in one sector.
type ringMean struct{ sum, n float64 }

// dimSectors returns, as bits, the sectors outside of which the wall is darker or
// lighter than the model has it over a stretch of the outline: a shadow that the
// bob casts close by. The outline cannot be trusted there.
func (f *Fitter) dimSectors(contrast float64) (dim uint32) {
	const run = 4
	var sign [sectors]int
	outside := 0
	for k := range f.around {
		if f.around[k].n == 0 {
			outside++
		}
		limit := 0.05 * math.Abs(contrast)
		if f.dimBefore>>k&1 != 0 {
			limit *= 0.5 // it does not go from one frame to the next
		}
		if a := &f.around[k]; a.n > 3 {
			switch m := a.sum / a.n; {
			case m > limit:
				sign[k] = 1
			case m < -limit:
				sign[k] = -1
			}
		}
	}
	for k := range sectors {
		same := sign[k] != 0
		for l := 1; l < run && same; l++ {
			same = sign[(k+l)%sectors] == sign[k]
		}
		if same {
			for l := -1; l <= run; l++ {
				dim |= 1 << ((k + l + sectors) % sectors)
			}
		}
	}
	f.dimNow = 0
	if outside > sectors/6 {
		return 0 // cut by the picture's edge: what is left of the outline is needed
	}
	// A shadow goes with its bob: what was not there a frame ago is something that
	// the bob passes.
	f.dimNow = dim
	b := f.dimBefore
	dim &= b | b<<1 | b>>1 | b>>(sectors-1) | b<<(sectors-1)
	if bits.OnesCount32(dim) > sectors*7/12 {
		return 0 // that is no shadow but a wrong level
	}
	return dim
}

// flagAround sets the flag of the patch's pixels within oddReach of one.
func (f *Fitter) flagAround(at int, v bool) {
	for dy := -oddReach; dy <= oddReach; dy++ {
		for dx := -oddReach; dx <= oddReach; dx++ {
			if k := at + dy*f.flagW + dx; dx*dx+dy*dy <= oddReach*oddReach+1 && k >= 0 && k < len(f.flag) {
				f.flag[k] = v
			}
		}
	}
}

// readFlags marks the band's pixels whose flag is set or whose sector is dim, and
// returns how many marks came or went.
func (f *Fitter) readFlags(dim uint32) (changed int) {
	f.marked = true
	for i := range f.px {
		q := &f.px[i]
		if now := f.flag[q.at] || dim>>q.sec&1 != 0; now != q.near {
			q.near = now
			changed++
		}
	}
	return changed
}

// keepOdd remembers where the outline did not agree: a rod that holds the bob
// will be there in the next frame too.
func (f *Fitter) keepOdd(m *model, from [2]float64) {
	f.oddAt = f.oddAt[:0]
	if !f.marked {
		return
	}
	for _, i := range f.odd {
		q := &f.px[i]
		x, y := float64(q.x)+from[0]-m.cu, float64(q.y)+from[1]-m.cv
		f.oddAt = append(f.oddAt, [2]int16{int16(math.Round(x)), int16(math.Round(y))})
	}
}

// recallOdd marks the places of keepOdd around the model's centre.
func (f *Fitter) recallOdd(m *model) {
	f.marked = false
	if len(f.oddAt) == 0 {
		return
	}
	u, v := int(math.Round(m.cu))-f.flagU, int(math.Round(m.cv))-f.flagV
	mark := func(on bool) {
		for _, o := range f.oddAt {
			if x, y := u+int(o[0]), v+int(o[1]); x >= 0 && x < f.flagW && y >= 0 {
				f.flagAround(y*f.flagW+x, on)
			}
		}
	}
	mark(true)
	f.readFlags(0)
	mark(false)
}

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

// agreeReach is over how many px residuals are taken to agree, at most: a codec's
// block.
const agreeReach = 6.0

// assess compares the scatter of the sectors' pulls on the centre with what
// white residuals would give, and remembers the ratio: the clustered sandwich
// of Liang & Zeger (Biometrika 73, 1986, 13–22), averaged over frames because
// one frame has too few clusters.
func (f *Fitter) assess(m *model, inv *matrix, acc *sums, on *[pCount]bool) {
	var pulls [sectors][2]float64
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
	}
	if used < sectors*2/3 {
		return
	}
	// Residuals agree over some pixels (a codec's blocks, a wall's grain): nearby
	// sectors' pulls are multiplied as well, with Bartlett's weights (Newey & West,
	// Econometrica 55, 1987, 703–708).
	lags := min(int(agreeReach*sectors/(2*math.Pi*m.r)+0.5), sectors/6)
	meat, expected := 0.0, 0.0
	for l := 0; l <= lags; l++ {
		w := 1 - float64(l)/float64(lags+1)
		if l > 0 {
			w *= 2
		}
		sum := 0.0
		for k := range sectors {
			o := (k + l) % sectors
			sum += pulls[k][0]*pulls[o][0] + pulls[k][1]*pulls[o][1]
		}
		meat += w * sum
		// The fit zeroes the residuals' sum around the outline and their first and
		// second harmonics; so much is left of white ones.
		c := math.Cos(2 * math.Pi * float64(l) / sectors)
		left := -(1 + 2*c + 2*(2*c*c-1)) / sectors
		if l == 0 {
			left++
		}
		expected += w * c * left
	}
	scale := acc.chi / math.Max(acc.n-free, 1)
	white := (inv[pU][pU] + inv[pV][pV]) * scale
	ratio := math.Max(meat/white/expected, 0) * sectors / used
	// One wild frame must not spoil the average.
	if f.agreeN >= 5 {
		ratio = math.Min(ratio, 5*f.agree+0.5)
	}
	f.agreeN = math.Min(f.agreeN+1, 40)
	f.agree += (ratio - f.agree) / f.agreeN
}
