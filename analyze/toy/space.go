package toy

import (
	"math"

	"lodeswing/analyze/magnet"
)

// rotation is a rotation, row by row.
type rotation struct{ xx, xy, xz, yx, yy, yz, zx, zy, zz float64 }

var identity = rotation{xx: 1, yy: 1, zz: 1}

func (a *rotation) mul(v vec) vec {
	return vec{
		X: a.xx*v.X + a.xy*v.Y + a.xz*v.Z,
		Y: a.yx*v.X + a.yy*v.Y + a.yz*v.Z,
		Z: a.zx*v.X + a.zy*v.Y + a.zz*v.Z,
	}
}

// mulT applies the inverse rotation.
func (a *rotation) mulT(v vec) vec {
	return vec{
		X: a.xx*v.X + a.yx*v.Y + a.zx*v.Z,
		Y: a.xy*v.X + a.yy*v.Y + a.zy*v.Z,
		Z: a.xz*v.X + a.yz*v.Y + a.zz*v.Z,
	}
}

func (a *rotation) times(b *rotation) rotation {
	return rotation{
		xx: a.xx*b.xx + a.xy*b.yx + a.xz*b.zx, xy: a.xx*b.xy + a.xy*b.yy + a.xz*b.zy, xz: a.xx*b.xz + a.xy*b.yz + a.xz*b.zz,
		yx: a.yx*b.xx + a.yy*b.yx + a.yz*b.zx, yy: a.yx*b.xy + a.yy*b.yy + a.yz*b.zy, yz: a.yx*b.xz + a.yy*b.yz + a.yz*b.zz,
		zx: a.zx*b.xx + a.zy*b.yx + a.zz*b.zx, zy: a.zx*b.xy + a.zy*b.yy + a.zz*b.zy, zz: a.zx*b.xz + a.zy*b.yz + a.zz*b.zz,
	}
}

// sincos is math.Sincos for angles of a few thousand turns at most, in half its
// time: reduction by π/2 in three parts (Cody and Waite) and the polynomials of
// the Cephes library (S. L. Moshier), good to the last place or two.
func sincos(x float64) (sin, cos float64) {
	if !(x > -1e4 && x < 1e4) {
		return math.Sincos(x)
	}
	const (
		p1 = 1.57079625129699707031     // π/2 in three parts, whose products with
		p2 = 7.54978941586159635335e-8  // a small whole number are exact but for
		p3 = 5.39030285815811905290e-15 // the last
	)
	j := int(x*(2/math.Pi) + math.Copysign(0.5, x))
	q := float64(j)
	y := ((x - q*p1) - q*p2) - q*p3
	z := y * y
	s := y + y*z*((((((1.58962301576546568060e-10*z-2.50507477628578072866e-8)*z+2.75573136213857245213e-6)*z-1.98412698295895385996e-4)*z+8.33333333332211858878e-3)*z)-1.66666666666666307295e-1)
	c := 1 - 0.5*z + z*z*((((((-1.13585365213876817300e-11*z+2.08757008419747316778e-9)*z-2.75573141792967388112e-7)*z+2.48015872888517045348e-5)*z-1.38888888888730564116e-3)*z)+4.16666666666665929218e-2)
	switch j & 3 {
	case 1:
		return c, -s
	case 2:
		return -s, -c
	case 3:
		return -c, s
	}
	return s, c
}

// aboutY is the turn by φ about +y, aboutZ that about +z.
func aboutY(phi float64) rotation {
	s, c := sincos(phi)
	return rotation{xx: c, xz: s, yy: 1, zx: -s, zz: c}
}

func aboutZ(phi float64) rotation {
	s, c := sincos(phi)
	return rotation{xx: c, xy: -s, yx: s, yy: c, zz: 1}
}

// fromQuaternion is the rotation of w + xi + yj + zk, which need not be a unit.
func fromQuaternion(w, x, y, z float64) rotation {
	k := 2 / (w*w + x*x + y*y + z*z)
	return rotation{
		xx: 1 - k*(y*y+z*z), xy: k * (x*y - w*z), xz: k * (x*z + w*y),
		yx: k * (x*y + w*z), yy: 1 - k*(x*x+z*z), yz: k * (y*z - w*x),
		zx: k * (x*z - w*y), zy: k * (y*z + w*x), zz: 1 - k*(x*x+y*y),
	}
}

// sym is a symmetric matrix.
type sym struct{ xx, yy, zz, xy, xz, yz float64 }

func (a *sym) mul(v vec) vec {
	return vec{
		X: a.xx*v.X + a.xy*v.Y + a.xz*v.Z,
		Y: a.xy*v.X + a.yy*v.Y + a.yz*v.Z,
		Z: a.xz*v.X + a.yz*v.Y + a.zz*v.Z,
	}
}

func (a *sym) add(b *sym) {
	a.xx += b.xx
	a.yy += b.yy
	a.zz += b.zz
	a.xy += b.xy
	a.xz += b.xz
	a.yz += b.yz
}

// addPoint adds the inertia about the origin of a point of mass m at r.
func (a *sym) addPoint(m float64, r vec) {
	a.xx += m * (r.Y*r.Y + r.Z*r.Z)
	a.yy += m * (r.X*r.X + r.Z*r.Z)
	a.zz += m * (r.X*r.X + r.Y*r.Y)
	a.xy -= m * r.X * r.Y
	a.xz -= m * r.X * r.Z
	a.yz -= m * r.Y * r.Z
}

// turned is R a Rᵀ.
func (a *sym) turned(r *rotation) sym {
	x := a.mul(vec{X: r.xx, Y: r.xy, Z: r.xz})
	y := a.mul(vec{X: r.yx, Y: r.yy, Z: r.yz})
	z := a.mul(vec{X: r.zx, Y: r.zy, Z: r.zz})
	return sym{
		xx: r.xx*x.X + r.xy*x.Y + r.xz*x.Z,
		yy: r.yx*y.X + r.yy*y.Y + r.yz*y.Z,
		zz: r.zx*z.X + r.zy*z.Y + r.zz*z.Z,
		xy: r.yx*x.X + r.yy*x.Y + r.yz*x.Z,
		xz: r.zx*x.X + r.zy*x.Y + r.zz*x.Z,
		yz: r.zx*y.X + r.zy*y.Y + r.zz*y.Z,
	}
}

// axisymmetric is across·(1 − aaᵀ) + along·aaᵀ for the unit vector a.
func axisymmetric(a vec, along, across float64) sym {
	d := along - across
	return sym{
		xx: across + d*a.X*a.X, yy: across + d*a.Y*a.Y, zz: across + d*a.Z*a.Z,
		xy: d * a.X * a.Y, xz: d * a.X * a.Z, yz: d * a.Y * a.Z,
	}
}

// composite is the inertia of one or several bodies about the world's origin.
type composite struct {
	m float64
	h vec // mass times centre of mass
	i sym
}

func (c *composite) add(o *composite) {
	c.m += o.m
	c.h = c.h.Add(o.h)
	c.i.add(&o.i)
}

// momentum of the motion (w, v): angular about the origin, and linear.
func (c *composite) momentum(w, v vec) (l, p vec) {
	l = c.i.mul(w)
	l = l.Add(c.h.Cross(v))
	p = w.Cross(c.h)
	p = vec{X: p.X + c.m*v.X, Y: p.Y + c.m*v.Y, Z: p.Z + c.m*v.Z}
	return l, p
}

// vector reads [x, z] or [x, y, z] of a rig.
func vector(a []float64) vec {
	switch len(a) {
	case 2:
		return magnet.Vec{X: a[0], Z: a[1]}
	case 3:
		return magnet.Vec{X: a[0], Y: a[1], Z: a[2]}
	}
	return magnet.Vec{}
}
