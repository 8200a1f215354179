package toy

import (
	"context"
	"math"
)

// Displace moves the state y by the small deviation d of length 2·Freedoms: first
// the degrees of freedom in rad (a ball joint: a turn about its part's own axes),
// then the speeds in rad/s. What the coils drew so far stays.
func (m *Model) Displace(y, d []float64) {
	m.move(y, d[:m.nv])
	for i := range m.nv {
		y[m.nq+i] += d[m.nv+i]
	}
}

// Deviation is the inverse of Displace: what leads from the state a to b, written
// to d.
func (m *Model) Deviation(a, b, d []float64) {
	for k := range m.bodies {
		c := &m.bodies[k]
		if c.joint != ball {
			d[c.v] = b[c.q] - a[c.q]
			continue
		}
		// The turn a⁻¹·b, by its rotation vector in the part's own axes.
		p, q := a[c.q:c.q+4], b[c.q:c.q+4]
		w := p[0]*q[0] + p[1]*q[1] + p[2]*q[2] + p[3]*q[3]
		x := p[0]*q[1] - p[1]*q[0] - p[2]*q[3] + p[3]*q[2]
		y := p[0]*q[2] + p[1]*q[3] - p[2]*q[0] - p[3]*q[1]
		z := p[0]*q[3] - p[1]*q[2] + p[2]*q[1] - p[3]*q[0]
		if w < 0 {
			w, x, y, z = -w, -x, -y, -z
		}
		s := math.Sqrt(x*x + y*y + z*z)
		k := 2.0
		if w > 0 {
			k = 2 / w
		}
		if s > 1e-8 {
			k = 2 * math.Atan2(s, w) / s
		}
		d[c.v], d[c.v+1], d[c.v+2] = k*x, k*y, k*z
	}
	for i := range m.nv {
		d[m.nv+i] = b[m.nq+i] - a[m.nq+i]
	}
}

// Aux is how many numbers at a state's end are quadratures: charge and work of
// the coils given by their winding.
func (m *Model) Aux() int { return m.naux }

// MagnetPlace is where a magnet's centre is in state y, m; ok is false for a name
// that the toy does not have.
func (m *Model) MagnetPlace(y []float64, name string) (at [3]float64, ok bool) {
	m.prepare()
	m.kinematics(y)
	for i := range m.magnets {
		if g := &m.magnets[i]; g.name == name {
			return [3]float64{g.r.X, g.r.Y, g.r.Z}, true
		}
	}
	return at, false
}

// TorqueWithoutMagnets is the torque in N·m that gravity and spring give the first
// part, on a hinge, at rest at the shown angle, in the sense of that angle.
func (m *Model) TorqueWithoutMagnets(angle float64) float64 {
	m.prepare()
	y := m.Rest()
	m.SetAngle(y, 0, angle, 0)
	m.kinematics(y)
	m.massMatrix()
	for k := range m.bodies {
		m.bodies[k].extN, m.bodies[k].extF = vec{}, vec{}
	}
	m.bias(y)
	if m.bodies[0].stands {
		return -m.rhs[0]
	}
	return m.rhs[0]
}

// Move moves the state y by a time in s, in place.
func (m *Model) Move(y []float64, by float64, undriven bool) error {
	return m.Run(context.Background(), 0, y, by, Options{Undriven: undriven}, nil, nil)
}

// OwnTurns lists the degrees of freedom that turn a part on a ball joint about
// its own long axis where nothing on it tells how far it is turned: its centre of
// mass and magnets lie, and its magnets point, along that axis, and it carries no
// other part. States that differ by such a turn move alike.
func (m *Model) OwnTurns() []int {
	var out []int
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint != ball || b.centre.X != 0 || b.centre.Y != 0 {
			continue
		}
		plain := true
		for i := range m.magnets {
			if g := &m.magnets[i]; g.body == k && (g.at.X != 0 || g.at.Y != 0 || g.axis.X != 0 || g.axis.Y != 0) {
				plain = false
			}
		}
		for i := range m.bodies {
			plain = plain && m.bodies[i].parent != k
		}
		if plain {
			out = append(out, b.v+2)
		}
	}
	return out
}

// TurnOwn turns the part of such a degree of freedom about its own axis by an angle
// in rad, without changing how it moves in space.
func (m *Model) TurnOwn(y []float64, v int, by float64) {
	b := &m.bodies[m.dofOf[v]]
	d := make([]float64, m.nv)
	d[v] = by
	m.move(y, d)
	w := y[m.nq+b.v : m.nq+b.v+3]
	s, c := math.Sincos(by)
	w[0], w[1] = c*w[0]+s*w[1], c*w[1]-s*w[0]
}

// OnBase tells whether part k is on the base, not on another part.
func (m *Model) OnBase(k int) bool { return m.bodies[k].parent < 0 }
