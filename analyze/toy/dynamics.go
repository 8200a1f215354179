package toy

import (
	"errors"
	"math"
)

// kinematics puts every part, magnet and motion vector where the state y has it.
func (m *Model) kinematics(y []float64) {
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.alone && b.joint != ball {
			b.swing(y[b.q], y[m.nq+b.v])
			continue
		}
		up := &identity
		var w, vo, aw, ao vec
		b.p = b.pivot
		if b.parent >= 0 {
			u := &m.bodies[b.parent]
			up = &u.rot
			b.p = u.p.Add(u.rot.mul(b.pivot))
			w, vo, aw, ao = u.w, u.vo, u.aw, u.ao
		}
		speeds := y[m.nq+b.v : m.nq+b.v+b.nv]
		if b.joint == ball {
			q := y[b.q : b.q+4 : b.q+4]
			turn := fromQuaternion(q[0], q[1], q[2], q[3])
			if b.parent >= 0 {
				b.rot = up.times(&turn)
			} else {
				b.rot = turn
			}
			r := &b.rot
			m.setDof(b.v, b.p, vec{X: r.xx, Y: r.yx, Z: r.zx})
			m.setDof(b.v+1, b.p, vec{X: r.xy, Y: r.yy, Z: r.zy})
			m.setDof(b.v+2, b.p, vec{X: r.xz, Y: r.yz, Z: r.zz})
		} else {
			turn := b.turn(y[b.q])
			axis := b.axis
			if b.parent >= 0 {
				b.rot = up.times(&turn)
				axis = up.mul(axis)
			} else {
				b.rot = turn
			}
			m.setDof(b.v, b.p, axis)
		}
		// The motion of this joint, and how its vectors turn with the part.
		var jw, jv vec
		for i, speed := range speeds {
			jw = jw.Add(m.sA[b.v+i].Scale(speed))
			jv = jv.Add(m.sB[b.v+i].Scale(speed))
		}
		b.w, b.vo = w.Add(jw), vo.Add(jv)
		if !b.alone {
			b.aw = aw.Add(b.w.Cross(jw))
			b.ao = ao.Add(b.w.Cross(jv)).Add(b.vo.Cross(jw))
		}
		b.c = b.p.Add(b.rot.mul(b.centre))
	}
	for i := range m.magnets {
		g := &m.magnets[i]
		if g.body >= 0 {
			b := &m.bodies[g.body]
			g.r = b.p.Add(b.rot.mul(g.at))
			g.m = b.rot.mul(g.ownM)
			if g.exact {
				for j := range g.own {
					g.charges[j].At = b.p.Add(b.rot.mul(g.own[j].At))
				}
			}
		}
	}
}

// turn is the rotation of a one-axis joint by an angle.
func (b *body) turn(angle float64) rotation {
	if b.flat {
		return aboutZ(angle)
	}
	return aboutY(-angle)
}

// swing is kinematics for a part alone on the base on a hinge or pin. It writes
// the rotation in place: this is what most toys spend their time on.
func (b *body) swing(angle, speed float64) {
	r := &b.rot
	sin, cos := sincos(angle)
	if b.flat {
		r.xx, r.xy, r.yx, r.yy = cos, -sin, sin, cos
	} else {
		r.xx, r.xz, r.zx, r.zz = cos, -sin, sin, cos
	}
	b.w, b.vo = b.axis.Scale(speed), b.arm.Scale(speed)
	b.c = b.p.Add(r.mul(b.centre))
}

// setDof sets motion vector j: a turn about the axis a through p.
func (m *Model) setDof(j int, p, a vec) {
	m.sA[j] = a
	m.sB[j] = p.Cross(a)
}

// massMatrix fills m.mass (row-major, nv × nv, lower half, one block per tree)
// for the places that kinematics set. The blocks of parts that are alone on the
// base do not change: refresh fills them.
func (m *Model) massMatrix() {
	if m.allAlone {
		return
	}
	for k := range m.bodies {
		b := &m.bodies[k]
		if !b.alone {
			b.own = b.inWorld()
			b.comp = b.own
		}
	}
	for k := len(m.bodies) - 1; k >= 0; k-- {
		b := &m.bodies[k]
		if b.alone {
			continue
		}
		for i := b.v; i < b.v+b.nv; i++ {
			l, p := b.comp.momentum(m.sA[i], m.sB[i])
			row := m.mass[i*m.nv : (i+1)*m.nv]
			for j := b.v; j <= i; j++ {
				row[j] = m.sA[j].Dot(l) + m.sB[j].Dot(p)
			}
			for up := b.parent; up >= 0; up = m.bodies[up].parent {
				u := &m.bodies[up]
				for j := u.v; j < u.v+u.nv; j++ {
					row[j] = m.sA[j].Dot(l) + m.sB[j].Dot(p)
				}
			}
		}
		if b.parent >= 0 {
			m.bodies[b.parent].comp.add(&b.comp)
		}
	}
}

// inWorld is the part's inertia about the world's origin where it is now.
func (b *body) inWorld() composite {
	in := b.comInertia.turned(&b.rot)
	in.addPoint(b.mass, b.c)
	return composite{m: b.mass, h: b.c.Scale(b.mass), i: in}
}

// bias fills m.rhs with what drives each degree of freedom: joint torques and
// outside forces less the inertial forces at zero joint acceleration.
func (m *Model) bias(y []float64) {
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.alone {
			m.biasAlone(k, y)
			continue
		}
		l, p := b.own.momentum(b.w, b.vo)
		n, f := b.own.momentum(b.aw, b.ao)
		n = n.Add(b.w.Cross(l)).Add(b.vo.Cross(p))
		f = f.Add(b.w.Cross(p))
		// Gravity acts at the centre of mass: (0, 0, −m·g).
		g := b.mass * m.gravity
		b.fn = vec{X: n.X + g*b.c.Y - b.extN.X, Y: n.Y - g*b.c.X - b.extN.Y, Z: n.Z - b.extN.Z}
		b.ff = vec{X: f.X - b.extF.X, Y: f.Y - b.extF.Y, Z: f.Z + g - b.extF.Z}
	}
	if m.allAlone {
		return
	}
	for k := len(m.bodies) - 1; k >= 0; k-- {
		b := &m.bodies[k]
		if b.alone {
			continue
		}
		for i := b.v; i < b.v+b.nv; i++ {
			m.rhs[i] = -m.sA[i].Dot(b.fn) - m.sB[i].Dot(b.ff)
		}
		m.jointForces(k, y)
		if b.parent >= 0 {
			u := &m.bodies[b.parent]
			u.fn = u.fn.Add(b.fn)
			u.ff = u.ff.Add(b.ff)
		}
	}
}

// biasAlone is bias for a part on the base that carries no other: about its own
// pivot its inertia is constant in its own axes, and Euler's equations hold.
func (m *Model) biasAlone(k int, y []float64) {
	b := &m.bodies[k]
	n := b.extN
	f := b.extF
	g := b.mass * m.gravity
	// About the pivot: the outside torque, and gravity at the centre of mass.
	n.X -= b.p.Y*f.Z - b.p.Z*f.Y
	n.Y -= b.p.Z*f.X - b.p.X*f.Z
	n.Z -= b.p.X*f.Y - b.p.Y*f.X
	n.X -= g * (b.c.Y - b.p.Y)
	n.Y += g * (b.c.X - b.p.X)
	if b.joint != ball {
		m.rhs[b.v] = b.axis.Dot(n)
	} else {
		n = b.rot.mulT(n)
		w := vec{X: y[m.nq+b.v], Y: y[m.nq+b.v+1], Z: y[m.nq+b.v+2]}
		n = n.Sub(w.Cross(b.pivotInertia.mul(w)))
		m.rhs[b.v], m.rhs[b.v+1], m.rhs[b.v+2] = n.X, n.Y, n.Z
	}
	m.jointForces(k, y)
}

// jointForces adds what part k's joint does.
func (m *Model) jointForces(k int, y []float64) {
	b := &m.bodies[k]
	if b.joint == ball {
		m.ballFriction(b, y[m.nq+b.v:m.nq+b.v+3])
		return
	}
	m.rhs[b.v] += m.jointTorque(k, y[b.q], y[m.nq+b.v])
}

// jointTorque is the spring's and friction's torque about a one-axis joint.
func (m *Model) jointTorque(k int, angle, speed float64) float64 {
	b := &m.bodies[k]
	tau := -(b.viscous + b.drag*math.Abs(speed)) * speed
	if b.dry != 0 {
		if m.free {
			if speed != 0 {
				tau -= b.dry * math.Copysign(1, speed)
			}
		} else {
			tau -= b.dry * m.sign[k]
		}
	}
	if b.rate != 0 || b.cubic != 0 {
		d := b.sprung(angle)
		pull := (b.rate + b.cubic*d*d) * d
		if b.stands {
			pull = -pull
		}
		tau -= pull
	}
	return tau
}

// ballSmooth is the speed in rad/s below which a ball joint's dry friction
// fades out instead of sticking: a direction in space has no sign to stick by.
const ballSmooth = 1e-3

func (m *Model) ballFriction(b *body, w []float64) {
	if b.viscous == 0 && b.drag == 0 && b.dry == 0 {
		return
	}
	speed2 := w[0]*w[0] + w[1]*w[1] + w[2]*w[2]
	k := b.viscous + b.drag*math.Sqrt(speed2) + b.dry/math.Sqrt(speed2+ballSmooth*ballSmooth)
	for i := range w {
		m.rhs[b.v+i] -= k * w[i]
	}
}

var errSingular = errors.New("the toy's mass matrix is singular: a part has neither mass away from its pivot nor inertia")

// solve leaves the joint accelerations in m.acc. Joints that dry friction holds
// do not accelerate.
func (m *Model) solve() error {
	for _, tr := range m.trees {
		for i := tr.v; i < tr.v+tr.n; i++ {
			m.acc[i] = m.rhs[i]
		}
		if tr.n == 1 {
			i := tr.v
			d := m.mass[i*m.nv+i]
			if m.nStuck > 0 && m.stuck[m.dofOf[i]] {
				m.acc[i] = 0
				continue
			}
			if !(d > 0) {
				return errSingular
			}
			m.acc[i] /= d
			continue
		}
		if err := m.solveTree(tr); err != nil {
			return err
		}
	}
	return nil
}

// solveTree solves one tree's block by Cholesky's decomposition.
func (m *Model) solveTree(tr tree) error {
	nv := m.nv
	l, x := m.chol, m.acc
	for i := tr.v; i < tr.v+tr.n; i++ {
		held := m.nStuck > 0 && m.stuck[m.dofOf[i]]
		if held {
			x[i] = 0
		}
		for j := tr.v; j <= i; j++ {
			if held || (m.nStuck > 0 && m.stuck[m.dofOf[j]]) {
				l[i*nv+j] = 0
				if i == j {
					l[i*nv+j] = 1
				}
				continue
			}
			sum := m.mass[i*nv+j]
			for k := tr.v; k < j; k++ {
				sum -= l[i*nv+k] * l[j*nv+k]
			}
			if i == j {
				if !(sum > 0) {
					return errSingular
				}
				l[i*nv+i] = math.Sqrt(sum)
			} else {
				l[i*nv+j] = sum / l[j*nv+j]
			}
		}
	}
	for i := tr.v; i < tr.v+tr.n; i++ {
		sum := x[i]
		for k := tr.v; k < i; k++ {
			sum -= l[i*nv+k] * x[k]
		}
		x[i] = sum / l[i*nv+i]
	}
	for i := tr.v + tr.n - 1; i >= tr.v; i-- {
		sum := x[i]
		for k := i + 1; k < tr.v+tr.n; k++ {
			sum -= l[k*nv+i] * x[k]
		}
		x[i] = sum / l[i*nv+i]
	}
	return nil
}

// derive is the right-hand side of the equations of motion for the solver.
func (m *Model) derive(_ float64, y, dy []float64) {
	m.kinematics(y)
	m.massMatrix()
	m.forces(dy)
	m.bias(y)
	if m.solve() != nil {
		for i := range dy {
			dy[i] = math.NaN()
		}
		return
	}
	for i, a := range m.acc {
		dy[m.nq+i] = a
	}
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint != ball {
			dy[b.q] = y[m.nq+b.v]
			continue
		}
		q, w := y[b.q:b.q+4], y[m.nq+b.v:m.nq+b.v+3]
		d := dy[b.q : b.q+4]
		d[0] = 0.5 * (-q[1]*w[0] - q[2]*w[1] - q[3]*w[2])
		d[1] = 0.5 * (q[0]*w[0] + q[2]*w[2] - q[3]*w[1])
		d[2] = 0.5 * (q[0]*w[1] + q[3]*w[0] - q[1]*w[2])
		d[3] = 0.5 * (q[0]*w[2] + q[1]*w[1] - q[2]*w[0])
	}
}

// hold is the torque that keeps the joint of part k from moving, as of the last
// derive with that joint held.
func (m *Model) hold(k int) float64 {
	b := &m.bodies[k]
	i := b.v
	tr := m.trees[b.tree]
	sum := m.rhs[i]
	for j := tr.v; j < tr.v+tr.n; j++ {
		if j <= i {
			sum -= m.mass[i*m.nv+j] * m.acc[j]
		} else {
			sum -= m.mass[j*m.nv+i] * m.acc[j]
		}
	}
	return sum
}
