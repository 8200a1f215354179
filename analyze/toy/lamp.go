package toy

import (
	"math"

	"lodeswing/analyze/magnet"
)

// lamp is the short way for a toy of one hinged part whose magnets, all dipoles
// and those of the base, lie and point in the plane of its swing: the lantern
// over its magnet, written out by hand. It gives the same motion as the general
// way, several times faster.
type lamp struct {
	sinMoment, cosMoment float64 // torque of gravity: −(sinMoment·sin θ + cosMoment·cos θ)
	inverse              float64 // 1/inertia
	b                    *body
	pairs                []lampPair
}

// lampPair is a magnet on the part and one on the base, in the plane: x and z.
type lampPair struct {
	px, pz, mx, mz float64 // on the part, own axes, from the pivot
	bx, bz, nx, nz float64 // on the base, from the pivot
}

// newLamp returns the short way, or nil where the toy needs the general one.
func (m *Model) newLamp() *lamp {
	if len(m.bodies) != 1 || m.bodies[0].joint != hinge {
		return nil
	}
	b := &m.bodies[0]
	for i := range m.coils {
		if c := &m.coils[i]; c.eddy != 0 || c.width > 0 || c.wound {
			return nil
		}
	}
	l := &lamp{
		b:         b,
		inverse:   1 / b.inertia,
		sinMoment: -b.mass * m.gravity * b.centre.Z,
		cosMoment: b.mass * m.gravity * b.centre.X,
	}
	for _, p := range m.pairs {
		a, o := &m.magnets[p.a], &m.magnets[p.b]
		if a.body < 0 {
			a, o = o, a
		}
		if a.exact || o.exact {
			return nil
		}
		at := o.r.Sub(b.pivot)
		if at.Y != a.at.Y || a.axis.Y != 0 || o.m.Y != 0 {
			return nil
		}
		// The moments carry √(μ₀/4π) each.
		k := math.Sqrt(magnet.Mu0 / (4 * math.Pi))
		l.pairs = append(l.pairs, lampPair{
			px: a.at.X, pz: a.at.Z, mx: k * a.axis.X * a.moment, mz: k * a.axis.Z * a.moment,
			bx: at.X, bz: at.Z, nx: k * o.m.X, nz: k * o.m.Z,
		})
	}
	return l
}

// deriveLamp is the right-hand side. Turning the base against the part instead of
// the part keeps everything in the part's axes: with r from the base's magnet to
// the part's, ρ = |r|, A = n·r, B = m·r and C = m·n,
// U = C/ρ³ − 3AB/ρ⁵, and a turn changes A by n·p', B by −m'·b, C by m'·n and ρ²
// by −2 b·p', where a dash turns a vector of the part by a right angle.
func (m *Model) deriveLamp(_ float64, y, dy []float64) {
	l := m.lamp
	_ = y[1]
	_ = dy[1]
	speed := y[1]
	s, c := sincos(y[0])
	tau := -(l.sinMoment*s + l.cosMoment*c)
	for i := range l.pairs {
		p := &l.pairs[i]
		// The base's magnet as the part sees it.
		bx, bz := p.bx*c+p.bz*s, p.bz*c-p.bx*s
		nx, nz := p.nx*c+p.nz*s, p.nz*c-p.nx*s
		rx, rz := p.px-bx, p.pz-bz
		r2 := rx*rx + rz*rz
		i2 := 1 / r2
		r1 := math.Sqrt(r2) // alongside the division
		a, b := nx*rx+nz*rz, p.mx*rx+p.mz*rz
		da := nz*p.px - nx*p.pz
		db := p.mz*bx - p.mx*bz
		dc := p.mx*nz - p.mz*nx
		dr2 := -2 * (bz*p.px - bx*p.pz)
		cc := p.mx*nx + p.mz*nz
		i3 := r1 * i2 * i2
		ab3 := 3 * a * b * i2
		tau -= i3 * (dc - 3*(da*b+a*db)*i2 + i2*dr2*(2.5*ab3-1.5*cc))
	}
	q := l.b
	if q.viscous != 0 || q.drag != 0 || q.dry != 0 || q.rate != 0 || q.cubic != 0 {
		tau += m.jointTorque(0, y[0], speed)
	}
	if m.nStuck > 0 {
		m.rhs[0], m.acc[0] = tau, 0
		dy[0], dy[1] = speed, 0
		return
	}
	dy[0], dy[1] = speed, tau*l.inverse
}
