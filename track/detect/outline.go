package detect

import "math"

// outline is a model's outline made ready for the pixels: what it needs of the
// model, computed once per pass.
type outline struct {
	is, ir             float64 // 1/blur, 1/radius
	edge               float64 // radius at which a blurred disc is half covered
	m11, m12, m22      float64 // ellipse to circle
	k11, k12, k21, k22 float64 // rolling shutter taken out
	mu, mv             float64 // direction of the smear
	smear, ismear      float64 // its length, px, and one over it
	pieces             int     // it is averaged in so many pieces ...
	piece              float64 // ... of this length, px ...
	share              float64 // ... which is this part of it
	soft               float64 // nz² is rounded off by this over the edge's blur
	flat               float64 // px from the outline beyond which bob or wall show alone, without the smear
	sagitta            float64 // of a piece, over the edge's curvature and the sine² of their angle, in blurs
}

// A piece of a smear moves the edge, seen from a pixel, along a parabola whose
// bend must stay small against the blur: pieces are at most this long, in radii.
const longestPiece = 0.35

func (m *model) outline() (o outline) {
	o.is, o.ir = 1/m.s, 1/m.r
	// The curvature pulls the half-covered contour inwards by s²/2R.
	o.edge = m.r - 0.5*m.s*m.s*o.ir
	o.m11, o.m12, o.m22 = 1-m.e1, -m.e2, 1+m.e1
	o.k11, o.k12, o.k21, o.k22 = 1-m.skew[0][0], -m.skew[0][1], -m.skew[1][0], 1-m.skew[1][1]
	o.mu, o.mv, o.smear = m.mu, m.mv, m.l
	if o.smear < 0.02*m.s {
		o.smear = 0
	}
	if o.smear > 0 {
		o.ismear = 1 / o.smear
	}
	o.pieces = max(int(math.Ceil(o.smear/(longestPiece*m.r))), 1)
	o.share = 1 / float64(o.pieces)
	o.piece = o.smear * o.share
	o.soft = 4 * m.s * m.s * o.ir * o.ir
	o.flat = flat * m.s
	o.sagitta = o.piece * o.piece * o.is / 24
	return o
}

// straight takes the rolling shutter out of a place relative to the centre.
func (o *outline) straight(x, y float64) (float64, float64) {
	return o.k11*x + o.k12*y, o.k21*x + o.k22*y
}

// coverage is what a pixel sees of a bob, and how that changes.
type coverage struct {
	alpha      float64 // share of the exposure and of the blur that the bob fills
	r, u, v, l float64 // derivatives of alpha by radius, centre, smear
	s, e1, e2  float64 // ... by blur and ellipse
	x, y       float64 // the middle of what it sees of the bob, px from the bob's centre
	z          float64 // the mean of a ball's normal towards the camera there
}

// cover computes the coverage at a place relative to the centre, rolling shutter
// taken out.
func (o *outline) cover(x, y float64, c *coverage) {
	*c = coverage{}
	t := 0.5*o.share - 0.5
	var wx, wy, wz float64
	for range o.pieces {
		xk, yk := x-t*o.smear*o.mu, y-t*o.smear*o.mv
		xp, yp := o.m11*xk+o.m12*yk, o.m12*xk+o.m22*yk
		rho := math.Sqrt(xp*xp + yp*yp)
		z := (o.edge - rho) * o.is
		if z < -flat-0.5*o.piece*o.is {
			t += o.share
			continue
		}
		ir := 1 / (rho + 1e-9)
		nx, ny := (o.m11*xp+o.m12*yp)*ir, (o.m12*xp+o.m22*yp)*ir
		var alpha, dz float64
		if o.piece == 0 {
			alpha, dz = edge(z)
			wz += alpha * o.facing(xk, yk)
		} else {
			nm := nx*o.mu + ny*o.mv
			a := o.piece * nm * o.is
			across := (1 - nm*nm) * ir
			var da float64
			alpha, dz, da = edgeSmeared(z-o.sagitta*across, a)
			c.l += dz*(t*nm*o.is-2*o.sagitta*across*o.ismear) + da*a*o.ismear
			c.s -= da * a * o.is
			// The later (or earlier) part of the piece is what covers the pixel.
			lean := min(max(a*(1.0/3), -1), 1)
			k := -0.5 * o.piece * (1 - alpha) * lean
			xk += k * o.mu
			yk += k * o.mv
			// Its normal varies too much over the part for the middle to do: Gauss's
			// two points.
			span := o.piece * (1 - (1-alpha)*math.Abs(lean)) * 0.28867513459481287
			su, sv := span*o.mu, span*o.mv
			wz += alpha * 0.5 * (o.facing(xk+su, yk+sv) + o.facing(xk-su, yk-sv))
		}
		c.alpha += alpha
		wx += alpha * xk
		wy += alpha * yk
		c.s -= dz * z * o.is
		dz *= o.is
		c.r += dz
		c.u += dz * nx
		c.v += dz * ny
		dz *= ir
		c.e1 += dz * (xp*xk - yp*yk)
		c.e2 += dz * (xp*yk + yp*xk)
		t += o.share
	}
	if c.alpha > 1e-6 {
		c.x, c.y, c.z = wx/c.alpha, wy/c.alpha, wz/c.alpha
	} else {
		c.x, c.y = x, y
	}
	if o.pieces > 1 {
		k := o.share
		c.alpha *= k
		c.r *= k
		c.u *= k
		c.v *= k
		c.l *= k
		c.s *= k
		c.e1 *= k
		c.e2 *= k
	}
}

// coverOnce is cover for a smear of one piece, as far as the everyday pass needs
// it: rho is the place's distance from the centre after the ellipse is taken out
// (xp, yp), d its depth inside the outline.
func (o *outline) coverOnce(x, y, xp, yp, rho, d float64) (alpha, dr, dl, ds, xm, ym, nz float64) {
	ir := 1 / (rho + 1e-9)
	nm := ((o.m11*xp+o.m12*yp)*o.mu + (o.m12*xp+o.m22*yp)*o.mv) * ir
	a := o.smear * nm * o.is
	bend := o.sagitta * (1 - nm*nm) * ir
	z := d*o.is - bend
	alpha, dz, da := edgeSmeared(z, a)
	dl = (da*a - 2*dz*bend) * o.ismear
	ds = -(dz*z + da*a) * o.is
	lean := a * (1.0 / 3)
	if lean > 1 {
		lean = 1
	} else if lean < -1 {
		lean = -1
	}
	k := -0.5 * o.smear * (1 - alpha) * lean
	xm, ym = x+k*o.mu, y+k*o.mv
	// The part that it sees of the bob is short enough for one point to stand for
	// it, or it is not.
	if span := o.smear * (1 - (1-alpha)*math.Abs(lean)); span < 0.12*rho {
		nz = o.facing(xm, ym)
	} else {
		su, sv := 0.28867513459481287*span*o.mu, 0.28867513459481287*span*o.mv
		nz = 0.5 * (o.facing(xm+su, ym+sv) + o.facing(xm-su, ym-sv))
	}
	return alpha, dz * o.is, dl, ds, xm, ym, nz
}

// facing is the camera's share of a ball's outward normal at a place within its
// outline, rounded off over the edge's blur.
func (o *outline) facing(x, y float64) float64 {
	c := 1 - (x*x+y*y)*o.ir*o.ir
	return math.Sqrt(0.5 * (c + math.Sqrt(c*c+o.soft)))
}
