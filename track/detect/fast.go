package detect

import "math"

// The everyday pass. An outline that is little smeared is, seen from any one
// sector, a straight edge that can only move along its normal; so each pixel
// adds to a small set of local sums (the edge, its smear, the bob's level, its
// shading sideways, towards the camera and beyond the lamp's horizon, the wall's level and slope, the blur), and the sums of a sector are
// turned into those of the whole fit with the sector's direction. Residuals are
// those of the full model; only their derivatives are taken at the sector's
// middle, which costs under 1 % in efficiency and no bias.

// local parameters of a sector
const (
	lEdge = iota
	lSmear
	lBob
	lSide
	lFront
	lLit
	lWall
	lSlope
	lBlur
	lCount
)

type sectorSums struct {
	a         [lCount][lCount]float64 // upper triangle
	g         [lCount]float64
	kept, all float64
}

// add adds one pixel of weight w and residual res. e, l, b, d, f, i, k, p, c are how
// its value changes with the local parameters, in their order. Written out,
// because this is where most of the time goes.
func (s *sectorSums) add(w, res, e, l, b, d, f, i, k, p, c float64) {
	r := &s.a[lEdge]
	q := w * e
	r[lEdge] += q * e
	r[lSmear] += q * l
	r[lBob] += q * b
	r[lSide] += q * d
	r[lFront] += q * f
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lEdge] += q * res
	r = &s.a[lSmear]
	q = w * l
	r[lSmear] += q * l
	r[lBob] += q * b
	r[lSide] += q * d
	r[lFront] += q * f
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lSmear] += q * res
	r = &s.a[lBob]
	q = w * b
	r[lBob] += q * b
	r[lSide] += q * d
	r[lFront] += q * f
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lBob] += q * res
	r = &s.a[lSide]
	q = w * d
	r[lSide] += q * d
	r[lFront] += q * f
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lSide] += q * res
	r = &s.a[lFront]
	q = w * f
	r[lFront] += q * f
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lFront] += q * res
	r = &s.a[lLit]
	q = w * i
	r[lLit] += q * i
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lLit] += q * res
	r = &s.a[lWall]
	q = w * k
	r[lWall] += q * k
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lWall] += q * res
	r = &s.a[lSlope]
	q = w * p
	r[lSlope] += q * p
	r[lBlur] += q * c
	s.g[lSlope] += q * res
	r = &s.a[lBlur]
	q = w * c
	r[lBlur] += q * c
	s.g[lBlur] += q * res
}

// directions of the sectors' middles.
var directions = func() (d [sectors][2]float64) {
	for k := range d {
		y, x := math.Sincos(2 * math.Pi * (float64(k) + 0.5) / sectors)
		d[k] = [2]float64{x, y}
	}
	return d
}()

const flat = 3.3 // blurs from the outline beyond which a pixel shows bob or wall alone

// quick tells whether the everyday pass is good for this model: a smear that is
// short against the radius.
func (m *model) quick() bool { return m.l <= 2*longestPiece*m.r }

// passQuick does what pass does, for models that are quick.
func (f *Fitter) passQuick(m *model, acc *sums, noise *scatter, loose float64, from [2]float64) {
	f.odd = f.odd[:0]
	f.around = [sectors]ringMean{}
	sec := &f.sec
	*sec = [sectors]sectorSums{}
	du, dv := m.cu-from[0], m.cv-from[1]
	o := m.outline()
	ir := o.ir
	f0, fx, fy, fz, fl := m.at(pF0), m.at(pFx)*ir, m.at(pFy)*ir, m.at(pFz), m.at(pLit)
	b0, bx, by := m.at(pB0), m.at(pBx)*ir, m.at(pBy)*ir
	ibob, iwall := 1/noise.bob, 1/noise.wall
	least := misfit * (f0 - b0 - f.back) * (f0 - b0 - f.back)
	most := f.most
	halfSmear := 0.5 * o.smear * ir
	var inSum, inN, outSum, outN, chi, n, cost, edgeOver, edgeSteep float64
	var c coverage
	for i := range f.px {
		q := &f.px[i]
		x, y := o.straight(float64(q.x)-du, float64(q.y)-dv)
		xp, yp := o.m11*x+o.m12*y, o.m12*x+o.m22*y
		r2 := xp*xp + yp*yp
		rho := math.Sqrt(r2)
		far := rho * ir
		s := &sec[q.sec]
		d := o.edge - rho // inside is positive
		reach := o.flat
		if o.smear > 0 {
			reach += halfSmear*math.Abs(x*o.mu+y*o.mv) + o.piece*halfSmear
		}
		if d > reach {
			nz := 0.0 // far enough inside for the rounding off not to matter
			if c := 1 - far*far; c > 0 {
				nz = math.Sqrt(c)
			}
			h, lit := m.lamp.light(fx*x + fy*y + fz*nz + fl)
			res := float64(q.v) - f0 - h
			r2 := res * res
			if !q.near {
				if r2 < most {
					cost += r2
				} else {
					cost += most
				}
			}
			t := r2 * ibob
			if t > 16 && r2 > least {
				f.odd = append(f.odd, int32(i))
			}
			w := weigh(t)
			if w == 0 || q.near {
				continue
			}
			inSum += w * r2
			inN += w
			w *= ibob
			chi += w * r2
			side, front := lit*far, lit*nz
			ws, wf, wl := w*side, w*front, w*lit
			r := &s.a[lBob]
			r[lBob] += w
			r[lSide] += ws
			r[lFront] += wf
			r[lLit] += wl
			r = &s.a[lSide]
			r[lSide] += ws * side
			r[lFront] += ws * front
			r[lLit] += ws * lit
			r = &s.a[lFront]
			r[lFront] += wf * front
			r[lLit] += wf * lit
			s.a[lLit][lLit] += wl * lit
			s.g[lBob] += w * res
			s.g[lSide] += ws * res
			s.g[lFront] += wf * res
			s.g[lLit] += wl * res
			continue
		}
		back := float64(q.wall) + b0 + bx*x + by*y
		if d < -reach {
			res := float64(q.v) - back
			f.around[q.sec].sum += res
			f.around[q.sec].n++
			r2 := res * res
			if !q.near {
				if r2 < most {
					cost += r2
				} else {
					cost += most
				}
			}
			t := r2 * iwall
			if t > 16 && r2 > least {
				f.odd = append(f.odd, int32(i))
			}
			w := weigh(t)
			if w == 0 || q.near {
				continue
			}
			outSum += w * r2
			outN += w
			w *= iwall
			chi += w * r2
			wf := w * far
			s.a[lWall][lWall] += w
			s.a[lWall][lSlope] += wf
			s.a[lSlope][lSlope] += wf * far
			s.g[lWall] += w * res
			s.g[lSlope] += wf * res
			continue
		}
		switch {
		case o.smear == 0:
			c.alpha, c.r = edge(d * o.is)
			c.r *= o.is
			c.l, c.x, c.y, c.z = 0, x, y, o.facing(x, y)
			c.s = -c.r * d * o.is
		case o.pieces == 1:
			c.alpha, c.r, c.l, c.s, c.x, c.y, c.z = o.coverOnce(x, y, xp, yp, rho, d)
		default:
			o.cover(x, y, &c)
		}
		nz := c.z
		h, lit := m.lamp.light(fx*c.x + fy*c.y + fz*nz + fl)
		step := f0 + h - back
		res := float64(q.v) - back - c.alpha*step
		beta := 1 - c.alpha
		variance := noise.bob*c.alpha + noise.wall*beta
		edgeJ := step * c.r
		steep := edgeJ * loose
		q2 := res * res
		if !q.near {
			if q2 < most {
				cost += q2
			} else {
				cost += most
			}
		}
		t := q2 / (variance + steep*steep)
		if t > 16 && q2 > misfit*step*step {
			f.odd = append(f.odd, int32(i))
		}
		w := weigh(t)
		if q.near {
			w = 0
		}
		iv := 1 / variance
		info := edgeJ * edgeJ * iv
		s.all += info
		if w == 0 {
			continue
		}
		s.kept += w * info
		n += w
		edgeOver += w * (q2 - variance)
		edgeSteep += w * edgeJ * edgeJ
		w *= iv
		chi += w * q2
		lit *= c.alpha
		s.add(w, res, edgeJ, step*c.l, c.alpha, lit*far, lit*nz, lit, beta, beta*far, step*c.s)
	}
	acc.inSum, acc.inN, acc.outSum, acc.outN = inSum, inN, outSum, outN
	acc.cost, acc.edgeOver, acc.edgeSteep = cost, edgeOver, edgeSteep
	acc.chi, acc.n = chi, n+inN+outN
	f.spreadSectors(m, acc)
}

// spreadSectors turns the sectors' sums into those of the whole fit.
func (f *Fitter) spreadSectors(m *model, acc *sums) {
	for k := range f.sec {
		s := &f.sec[k]
		acc.all[k], acc.kept[k] = s.all, s.kept
		mult := m.multipliers(k)
		for i := range pCount {
			li := local[i]
			gi := mult[i] * s.g[li]
			acc.g[i] += gi
			acc.score[k][i] = gi
			for j := i; j < pCount; j++ {
				// The local sums fill the upper triangle only.
				a, b := li, local[j]
				if a > b {
					a, b = b, a
				}
				acc.a[i][j] += mult[i] * mult[j] * s.a[a][b]
			}
		}
	}
}

// multipliers are by how much each parameter of the fit moves its local
// parameter in sector k.
func (m *model) multipliers(k int) vector {
	c, d := directions[k][0], directions[k][1]
	return vector{
		pU: c, pV: d, pR: 1, pSmear: 1, pF0: 1, pFx: c, pFy: d, pFz: 1, pLit: 1, pB0: 1, pBx: c, pBy: d,
		pBlur: 1, pE1: m.r * (c*c - d*d), pE2: m.r * 2 * c * d,
	}
}

// afterStep takes out of the sectors' scores what a step d has since put right,
// to first order.
func (f *Fitter) afterStep(m *model, acc *sums, d *vector) {
	for k := range f.sec {
		s := &f.sec[k]
		mult := m.multipliers(k)
		var move, g [lCount]float64
		for i := range pCount {
			move[local[i]] += mult[i] * d[i]
		}
		for a := range lCount {
			g[a] = s.g[a]
			for b := range lCount {
				if a <= b {
					g[a] -= s.a[a][b] * move[b]
				} else {
					g[a] -= s.a[b][a] * move[b]
				}
			}
		}
		for i := range pCount {
			acc.score[k][i] = mult[i] * g[local[i]]
		}
	}
}

// local tells which of a sector's sums each parameter of the fit moves.
var local = [pCount]int{
	pU: lEdge, pV: lEdge, pR: lEdge, pSmear: lSmear, pF0: lBob, pFx: lSide, pFy: lSide, pFz: lFront, pLit: lLit,
	pB0: lWall, pBx: lSlope, pBy: lSlope, pBlur: lBlur, pE1: lEdge, pE2: lEdge,
}

// weigh is the weight of a residual whose square over its variance is t: full
// to three standard deviations, none beyond six (Hampel's three-part idea with
// a smooth descent).
func weigh(t float64) float64 {
	if t <= 9 {
		return 1
	}
	if !(t < 36) {
		return 0
	}
	w := (36 - t) * (1.0 / 27)
	return w * w
}
