package toy

import (
	"math"

	"lodeswing/analyze/magnet"
)

// planar is the short way for a toy whose parts all turn about the same direction,
// across the picture, with all magnets, all of them dipoles, and coils in one plane
// of it: most of the workshop. It is the general way in two dimensions (x to the
// right, z up, turns from x to z positive) and gives the same motion several times
// faster.
type planar struct {
	bodies  []planarBody
	magnets []planarMagnet
	gravity float64
}

// planarBody is one part: what is fixed, then where it is now.
type planarBody struct {
	parent, q, v          int
	alone                 bool
	px, pz, cx, cz        float64 // pivot in the carrier's axes, centre of mass in its own
	mass, com             float64 // kg, and inertia about the centre of mass
	x, z, s, c, w         float64 // pivot, sine and cosine of its turn, angular velocity
	vx, vz, ax, az        float64 // the pivot's velocity, and acceleration where no joint accelerates
	lx, lz, dx, dz        float64 // from the carrier's pivot to its own, and on to the centre of mass
	fx, fz, n             float64 // what acts: force, and torque about the pivot
	total, hx, hz, moment float64 // mass, first and second moment about the pivot of all that it carries
}

// planarMagnet is one magnet: in its part's axes, and now. The moments carry
// √(μ₀/4π) each.
type planarMagnet struct {
	body           int
	ox, oz, mx, mz float64
	ex, ez         float64 // from the part's pivot
	x, z, nx, nz   float64
}

// newPlanar brings the short way up to date, or returns nil where the toy needs the
// general one.
func (m *Model) newPlanar() *planar {
	depth := make([]float64, len(m.bodies))
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint == ball || b.axis != (vec{Y: -1}) {
			return nil
		}
		depth[k] = b.pivot.Y
		if b.parent >= 0 {
			depth[k] += depth[b.parent]
		}
	}
	plane := math.NaN()
	same := func(y float64) bool {
		if math.IsNaN(plane) {
			plane = y
		}
		return y == plane
	}
	for i := range m.magnets {
		g := &m.magnets[i]
		y := g.r.Y
		if g.body >= 0 {
			y = depth[g.body] + g.at.Y
		}
		if g.exact || g.axis.Y != 0 || !same(y) {
			return nil
		}
	}
	for i := range m.coils {
		if c := &m.coils[i]; c.wound || c.axis.Y != 0 || !same(c.at.Y) {
			return nil
		}
	}
	l := m.planarWork
	if l == nil {
		l = &planar{bodies: make([]planarBody, len(m.bodies)), magnets: make([]planarMagnet, len(m.magnets))}
		m.planarWork = l
	}
	l.gravity = m.gravity
	for k := range m.bodies {
		b := &m.bodies[k]
		o := &l.bodies[k]
		*o = planarBody{
			parent: b.parent, q: b.q, v: b.v, alone: b.alone,
			px: b.pivot.X, pz: b.pivot.Z, cx: b.centre.X, cz: b.centre.Z,
			mass: b.mass, com: b.comInertia.yy,
		}
		if b.parent < 0 {
			o.x, o.z = b.pivot.X, b.pivot.Z
		}
	}
	k := math.Sqrt(magnet.Mu0 / (4 * math.Pi))
	for i := range m.magnets {
		g := &m.magnets[i]
		o := &l.magnets[i]
		*o = planarMagnet{body: g.body, ox: g.at.X, oz: g.at.Z, mx: k * g.ownM.X, mz: k * g.ownM.Z}
		if g.body < 0 {
			o.x, o.z, o.nx, o.nz = g.r.X, g.r.Z, o.mx, o.mz
		}
	}
	return l
}

// cross is a × b: positive where b lies on from a in the sense from x to z.
func cross(ax, az, bx, bz float64) float64 { return ax*bz - az*bx }

// place finds where everything is, and how it moves.
func (l *planar) place(y []float64, nq int) {
	for k := range l.bodies {
		b := &l.bodies[k]
		b.s, b.c = sincos(y[b.q])
		b.w = y[nq+b.v]
		b.fx, b.fz, b.n = 0, 0, 0
		if b.parent >= 0 {
			u := &l.bodies[b.parent]
			b.s, b.c = u.s*b.c+u.c*b.s, u.c*b.c-u.s*b.s
			b.lx, b.lz = u.c*b.px-u.s*b.pz, u.s*b.px+u.c*b.pz
			b.x, b.z = u.x+b.lx, u.z+b.lz
			b.vx, b.vz = u.vx-u.w*b.lz, u.vz+u.w*b.lx
			b.ax, b.az = u.ax-u.w*u.w*b.lx, u.az-u.w*u.w*b.lz
			b.w += u.w
		}
		b.dx, b.dz = b.c*b.cx-b.s*b.cz, b.s*b.cx+b.c*b.cz
	}
	for i := range l.magnets {
		g := &l.magnets[i]
		if g.body < 0 {
			continue
		}
		b := &l.bodies[g.body]
		g.ex, g.ez = b.c*g.ox-b.s*g.oz, b.s*g.ox+b.c*g.oz
		g.x, g.z = b.x+g.ex, b.z+g.ez
		g.nx, g.nz = b.c*g.mx-b.s*g.mz, b.s*g.mx+b.c*g.mz
	}
}

// attract adds what two magnets do to each other, as magnet.DipolePair has it.
func (l *planar) attract(p pair) {
	a, b := &l.magnets[p.a], &l.magnets[p.b]
	rx, rz := b.x-a.x, b.z-a.z
	r2 := rx*rx + rz*rz
	i2 := 1 / r2
	i3 := math.Sqrt(r2) * i2 * i2
	ar, br := a.nx*rx+a.nz*rz, b.nx*rx+b.nz*rz
	ab := a.nx*b.nx + a.nz*b.nz
	f := 3 * i3 * i2
	t := ab - 5*ar*br*i2
	fx, fz := f*(t*rx+br*a.nx+ar*b.nx), f*(t*rz+br*a.nz+ar*b.nz)
	x := i3 * cross(a.nx, a.nz, b.nx, b.nz)
	if b.body >= 0 {
		o := &l.bodies[b.body]
		o.fx, o.fz = o.fx+fx, o.fz+fz
		o.n += cross(b.ex, b.ez, fx, fz) + f*ar*cross(b.nx, b.nz, rx, rz) + x
	}
	if a.body >= 0 {
		o := &l.bodies[a.body]
		o.fx, o.fz = o.fx-fx, o.fz-fz
		o.n += f*br*cross(a.nx, a.nz, rx, rz) - x - cross(a.ex, a.ez, fx, fz)
	}
}

// kick adds what a coil does, as coilForce has it.
func (l *planar) kick(c *coilPart) {
	g := &l.magnets[c.magnet]
	b := &l.bodies[g.body]
	if c.eddy != 0 {
		dx, dz := g.x-c.at.X, g.z-c.at.Z
		along := dx*c.axis.X + dz*c.axis.Z
		k := c.eddy / (c.arm * c.arm) * math.Exp(-(dx*dx+dz*dz-along*along)/(c.eddyReach*c.eddyReach))
		fx, fz := -k*(b.vx-b.w*g.ez), -k*(b.vz+b.w*g.ex)
		b.fx, b.fz, b.n = b.fx+fx, b.fz+fz, b.n+cross(g.ex, g.ez, fx, fz)
	}
	if c.pushing {
		u := ((g.x-c.pushFrom.X)*c.pushDir.X + (g.z-c.pushFrom.Z)*c.pushDir.Z) / c.width
		if u > 0 && u < 1 {
			f := c.pushEnergy * 30 / c.width * u * u * (1 - u) * (1 - u)
			fx, fz := f*c.pushDir.X, f*c.pushDir.Z
			b.fx, b.fz, b.n = b.fx+fx, b.fz+fz, b.n+cross(g.ex, g.ez, fx, fz)
		}
	}
}

// derivePlanar is derive by the short way.
func (m *Model) derivePlanar(_ float64, y, dy []float64) {
	l := m.planar
	l.place(y, m.nq)
	for _, p := range m.pairs {
		l.attract(p)
	}
	for i := range m.coils {
		l.kick(&m.coils[i])
	}
	for k := range l.bodies {
		b := &l.bodies[k]
		b.n -= b.mass * l.gravity * b.dx
		if b.alone {
			continue
		}
		// The inertial forces where no joint accelerates.
		ax, az := b.ax-b.w*b.w*b.dx, b.az-b.w*b.w*b.dz
		b.n -= b.mass * cross(b.dx, b.dz, ax, az)
		b.fx -= b.mass * ax
		b.fz -= b.mass * (az + l.gravity)
		b.total, b.hx, b.hz = b.mass, b.mass*b.dx, b.mass*b.dz
		b.moment = b.com + b.mass*(b.dx*b.dx+b.dz*b.dz)
	}
	for k := len(l.bodies) - 1; k >= 0; k-- {
		b := &l.bodies[k]
		i := b.v
		m.rhs[i] = b.n + m.jointTorque(k, y[b.q], y[m.nq+i])
		if b.alone {
			continue
		}
		row := m.mass[i*m.nv : (i+1)*m.nv]
		row[i] = b.moment
		for up := b.parent; up >= 0; up = l.bodies[up].parent {
			u := &l.bodies[up]
			row[u.v] = b.moment + b.hx*(b.x-u.x) + b.hz*(b.z-u.z)
		}
		if b.parent >= 0 {
			u := &l.bodies[b.parent]
			u.fx, u.fz = u.fx+b.fx, u.fz+b.fz
			u.n += b.n + cross(b.lx, b.lz, b.fx, b.fz)
			u.moment += b.moment + 2*(b.hx*b.lx+b.hz*b.lz) + b.total*(b.lx*b.lx+b.lz*b.lz)
			u.hx, u.hz = u.hx+b.hx+b.total*b.lx, u.hz+b.hz+b.total*b.lz
			u.total += b.total
		}
	}
	if m.solve() != nil {
		for i := range dy {
			dy[i] = math.NaN()
		}
		return
	}
	for i, a := range m.acc {
		dy[i], dy[m.nq+i] = y[m.nq+i], a
	}
}
