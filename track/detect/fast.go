package detect

import "math"

// The everyday pass. An outline that is little smeared is, seen from any one
// sector, a straight edge that can only move along its normal; so each pixel
// adds to a small set of local sums (the edge, its smear, the bob's level, its
// shading sideways and towards the camera, the wall's level), and the sums of a sector are
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
	lWall
	lCount
)

type sectorSums struct {
	a         [lCount][lCount]float64 // upper triangle
	g         [lCount]float64
	kept, all float64
}

// directions of the sectors' middles, by the diamond angle that sector uses.
var directions = func() (d [sectors][2]float64) {
	for k := range d {
		a := (float64(k) + 0.5) / (sectors / 4)
		var x, y float64
		if a < 2 {
			x = 1 - a
			y = 1 - math.Abs(x)
		} else {
			x = a - 3
			y = -(1 - math.Abs(x))
		}
		h := math.Hypot(x, y)
		d[k] = [2]float64{x / h, y / h}
	}
	return d
}()

const flat = 3.3 // blurs from the outline beyond which a pixel shows bob or wall alone

// quick tells whether the everyday pass is good for this model: a smear that is
// short against the radius, and the blur held.
func (m *model) quick(on *[pCount]bool) bool {
	return !on[pBlur] && m.l <= 0.4*m.r
}

// passQuick does what pass does, for models that are quick.
func (f *Fitter) passQuick(m *model, acc *sums, noise *scatter, loose float64, from [2]float64) {
	f.odd = f.odd[:0]
	sec := &f.sec
	*sec = [sectors]sectorSums{}
	du, dv := m.cu-from[0], m.cv-from[1]
	is, ir := 1/m.s, 1/m.r
	edgeR := m.r - m.s*m.s*0.5*ir
	m11, m12, m22 := 1-m.e1, -m.e2, 1+m.e1
	k11, k12, k21, k22 := 1-m.skew[0][0], -m.skew[0][1], -m.skew[1][0], 1-m.skew[1][1]
	soft := 2 * m.s * ir
	soft *= soft
	f0, fx, fy, fz := m.level[0], m.level[1]*ir, m.level[2]*ir, m.level[3]
	b0, bx, by := m.level[4], m.level[5]*ir, m.level[6]*ir
	ibob, iwall := 1/noise.bob, 1/noise.wall
	zin, zout := flat+0.5*m.l*is, -flat-0.5*m.l*is
	smeared := m.l > 0.02*m.s
	least := misfit * (f0 - b0 - f.back) * (f0 - b0 - f.back)
	var inSum, inN, outSum, outN, chi, n float64
	for i := range f.px {
		q := &f.px[i]
		x, y := float64(q.x)-du, float64(q.y)-dv
		x, y = k11*x+k12*y, k21*x+k22*y
		xp, yp := m11*x+m12*y, m12*x+m22*y
		r2 := xp*xp + yp*yp
		rho := math.Sqrt(r2)
		z := (edgeR - rho) * is
		s := &sec[q.sec]
		if z > zin {
			c := 1 - r2*ir*ir
			nz := math.Sqrt(0.5 * (c + math.Sqrt(c*c+soft)))
			h, lit := m.lamp.light(fx*x + fy*y + fz*nz)
			res := float64(q.v) - f0 - h
			t := res * res * ibob
			if t > 16 && res*res > least {
				f.odd = append(f.odd, int32(i))
			}
			w := weigh(t)
			if w == 0 || q.near {
				continue
			}
			inSum += w * res * res
			inN += w
			w *= ibob
			chi += w * res * res
			nz *= lit
			ws, wn := w*lit, w*nz
			s.a[lBob][lBob] += w
			s.a[lBob][lSide] += ws
			s.a[lBob][lFront] += wn
			s.a[lSide][lSide] += ws * lit
			s.a[lSide][lFront] += ws * nz
			s.a[lFront][lFront] += wn * nz
			s.g[lBob] += w * res
			s.g[lSide] += ws * res
			s.g[lFront] += wn * res
			continue
		}
		back := float64(q.wall) + b0 + bx*x + by*y
		if z < zout {
			res := float64(q.v) - back
			t := res * res * iwall
			if t > 16 && res*res > least {
				f.odd = append(f.odd, int32(i))
			}
			w := weigh(t)
			if w == 0 || q.near {
				continue
			}
			outSum += w * res * res
			outN += w
			w *= iwall
			chi += w * res * res
			s.a[lWall][lWall] += w
			s.g[lWall] += w * res
			continue
		}
		irho := 1 / rho
		nx, ny := (m11*xp+m12*yp)*irho, (m12*xp+m22*yp)*irho
		var alpha, aR, aL float64
		xm, ym := x, y // middle of the part of the smear that covers this pixel
		if smeared {
			nm := nx*m.mu + ny*m.mv
			a := m.l * nm * is
			// The way across the smear bends the edge away by its sagitta.
			zc := z - m.l*m.l*(1-nm*nm)*irho*is*(1.0/24)
			var aA float64
			alpha, aR, aA = edgeSmeared(zc, a)
			aR *= is
			aL = aA*nm*is - aR*m.l*(1-nm*nm)*irho*(1.0/12)
			k := -0.5 * m.l * (1 - alpha) * min(max(a*(1.0/3), -1), 1)
			xm += k * m.mu
			ym += k * m.mv
		} else {
			alpha, aR = edge(z)
			aR *= is
		}
		c := 1 - (xm*xm+ym*ym)*ir*ir
		nz := math.Sqrt(0.5 * (c + math.Sqrt(c*c+soft)))
		h, lit := m.lamp.light(fx*xm + fy*ym + fz*nz)
		front := f0 + h
		step := front - back
		res := float64(q.v) - back - alpha*step
		beta := 1 - alpha
		variance := noise.bob*alpha + noise.wall*beta
		edgeJ := step * aR
		steep := edgeJ * loose
		t := res * res / (variance + steep*steep)
		if t > 16 && res*res > misfit*step*step {
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
		w *= iv
		chi += w * res * res
		smearJ := step * aL
		as := alpha * lit
		az := as * nz
		we, wl, wa, ws, wz, wb := w*edgeJ, w*smearJ, w*alpha, w*as, w*az, w*beta
		r := &s.a[lEdge]
		r[lEdge] += we * edgeJ
		r[lSmear] += we * smearJ
		r[lBob] += we * alpha
		r[lSide] += we * as
		r[lFront] += we * az
		r[lWall] += we * beta
		r = &s.a[lSmear]
		r[lSmear] += wl * smearJ
		r[lBob] += wl * alpha
		r[lSide] += wl * as
		r[lFront] += wl * az
		r[lWall] += wl * beta
		r = &s.a[lBob]
		r[lBob] += wa * alpha
		r[lSide] += wa * as
		r[lFront] += wa * az
		r[lWall] += wa * beta
		r = &s.a[lSide]
		r[lSide] += ws * as
		r[lFront] += ws * az
		r[lWall] += ws * beta
		s.a[lFront][lFront] += wz * az
		s.a[lFront][lWall] += wz * beta
		s.a[lWall][lWall] += wb * beta
		s.g[lEdge] += we * res
		s.g[lSmear] += wl * res
		s.g[lBob] += wa * res
		s.g[lSide] += ws * res
		s.g[lFront] += wz * res
		s.g[lWall] += wb * res
	}
	acc.inSum, acc.inN, acc.outSum, acc.outN = inSum, inN, outSum, outN
	acc.chi, acc.n = chi, n+inN+outN
	f.spreadSectors(m, acc)
}

// spreadSectors turns the sectors' sums into those of the whole fit.
func (f *Fitter) spreadSectors(m *model, acc *sums) {
	kb, kw := 1-1.5*m.s/m.r, 1+1.5*m.s/m.r
	for k := range f.sec {
		s := &f.sec[k]
		acc.all[k], acc.kept[k] = s.all, s.kept
		c, d := directions[k][0], directions[k][1]
		mult := vector{
			pU: c, pV: d, pR: 1, pSmear: 1, pF0: 1, pFx: kb * c, pFy: kb * d, pFz: 1, pB0: 1, pBx: kw * c, pBy: kw * d,
			pE1: m.r * (c*c - d*d), pE2: m.r * 2 * c * d,
		}
		for i := range pCount {
			if i == pBlur {
				continue
			}
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

// local tells which of a sector's sums each parameter of the fit moves; the blur
// is held.
var local = [pCount]int{
	pU: lEdge, pV: lEdge, pR: lEdge, pSmear: lSmear, pF0: lBob, pFx: lSide, pFy: lSide, pFz: lFront,
	pB0: lWall, pBx: lWall, pBy: lWall, pE1: lEdge, pE2: lEdge,
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
