package toy

import (
	"fmt"
	"math"

	"lodeswing/track/rig"
)

// A state is a []float64 of length StateLen: the coordinates of all parts (an
// angle in rad; four numbers of a unit quaternion, w x y z, for a ball joint),
// then their speeds (rad/s; three components in the part's own axes for a ball
// joint), then for each coil given by its winding the charge that it drew (A·s)
// and the work that it did (J) so far.

// StateLen is the length of a state.
func (m *Model) StateLen() int { return m.nq + m.nv + m.naux }

// Freedoms is the number of degrees of freedom.
func (m *Model) Freedoms() int { return m.nv }

// Rest is the state in which every part rests as it would without magnets.
func (m *Model) Rest() []float64 {
	y := make([]float64, m.StateLen())
	m.restInto(y)
	return y
}

func (m *Model) restInto(y []float64) {
	for k := range m.bodies {
		if b := &m.bodies[k]; b.joint == ball {
			y[b.q] = 1
		} else {
			m.SetAngle(y, k, 0, 0)
		}
	}
}

func (m *Model) restKinematics() {
	y := m.Rest()
	if len(m.sA) != m.nv {
		m.sA, m.sB = make([]vec, m.nv), make([]vec, m.nv)
	}
	m.kinematics(y)
}

// Start is the state that the rig's [[start]] tables describe; a part without
// one starts at rest.
func (m *Model) Start() ([]float64, error) { return m.StartFrom(m.starts) }

// StartFrom is the state that the given starts describe.
func (m *Model) StartFrom(starts []rig.Start) ([]float64, error) {
	y := m.Rest()
	of := make([]*rig.Start, len(m.bodies))
	for i := range starts {
		k, err := m.Part(starts[i].Part)
		if err != nil {
			return nil, fmt.Errorf("[[start]]: %w", err)
		}
		of[k] = &starts[i]
	}
	for k, s := range of { // carriers come before what they carry
		switch {
		case m.bodies[k].joint != ball && s == nil:
			m.SetAngle(y, k, 0, 0)
		case m.bodies[k].joint != ball:
			m.SetAngle(y, k, s.AngleRad.V, s.RateRadS.V)
		case s != nil:
			m.SetBall(y, k, s.AngleRad.V, s.AzimuthRad.V, s.RateRadS.V, s.AzimuthRateRadS.V, s.SpinRadS.V)
		}
	}
	return y, nil
}

// Parts lists the parts' names in the model's order.
func (m *Model) Parts() []string {
	out := make([]string, len(m.bodies))
	for k := range m.bodies {
		out[k] = m.bodies[k].name
	}
	return out
}

// Part is the index of a part.
func (m *Model) Part(name string) (int, error) {
	for k := range m.bodies {
		if m.bodies[k].name == name {
			return k, nil
		}
	}
	return 0, fmt.Errorf("the toy has no part %q; its parts are %q", name, m.Parts())
}

// OneAxis tells whether part k is on a hinge or pin and so has one angle.
func (m *Model) OneAxis(k int) bool { return m.bodies[k].joint != ball }

// carried is how far the carriers of part k have turned about its own axis, and
// how fast: what an angle to the vertical holds beside the joint's own.
func (m *Model) carried(y []float64, k int) (angle, rate float64) {
	axis := m.bodies[k].axis
	for up := m.bodies[k].parent; up >= 0; up = m.bodies[up].parent {
		u := &m.bodies[up]
		if u.joint == ball || u.axis != axis {
			break
		}
		angle += y[u.q]
		rate += y[m.nq+u.v]
	}
	return angle, rate
}

// SetAngle gives part k, on a hinge or pin, its shown angle in rad and rate in
// rad/s. They count from where the part would rest, also when it rides on
// another: what carries it must be set before. (On a ball joint's part, or on one
// that turns about another axis, they are relative to that.)
func (m *Model) SetAngle(y []float64, k int, angle, rate float64) {
	b := &m.bodies[k]
	if b.stands {
		angle, rate = math.Pi-angle, -rate
	}
	by, at := m.carried(y, k)
	y[b.q], y[m.nq+b.v] = angle-by, rate-at
}

// Angle returns the shown angle in rad of part k and its rate in rad/s, counted as
// SetAngle does. For a ball joint it is the angle between its long axis and
// hanging, never negative.
func (m *Model) Angle(y []float64, k int) (angle, rate float64) {
	b := &m.bodies[k]
	if b.joint == ball {
		angle, _, rate, _, _ = m.Ball(y, k)
		return angle, rate
	}
	by, at := m.carried(y, k)
	angle, rate = y[b.q]+by, y[m.nq+b.v]+at
	if b.stands {
		return math.Pi - angle, -rate
	}
	return angle, rate
}

// SetBall gives part k, on a ball joint, its polar angle from hanging, the
// azimuth of its tilt from +x towards +y, their rates, and its spin about its
// own long axis, counter-clockwise seen from its pivot; rad and rad/s. Its own
// x axis is turned the shortest way from the hanging one.
func (m *Model) SetBall(y []float64, k int, polar, azimuth, polarRate, azimuthRate, spin float64) {
	b := &m.bodies[k]
	sa, ca := math.Sincos(azimuth)
	sh, ch := math.Sincos(polar / 2)
	q := y[b.q : b.q+4]
	q[0], q[1], q[2], q[3] = ch, sh*sa, -sh*ca, 0
	sp, cp := math.Sincos(polar)
	// d is the way down the part; its rate gives the part of ω across it.
	d := vec{X: sp * ca, Y: sp * sa, Z: -cp}
	rate := vec{X: cp * ca, Y: cp * sa, Z: sp}.Scale(polarRate).Add(vec{X: -sp * sa, Y: sp * ca}.Scale(azimuthRate))
	w := d.Cross(rate).Sub(d.Scale(spin))
	turn := fromQuaternion(q[0], q[1], q[2], q[3])
	w = turn.mulT(w)
	v := y[m.nq+b.v : m.nq+b.v+3]
	v[0], v[1], v[2] = w.X, w.Y, w.Z
}

// Ball is the inverse of SetBall, in the axes of what part k is on. Where the
// part hangs straight the azimuth is 0.
func (m *Model) Ball(y []float64, k int) (polar, azimuth, polarRate, azimuthRate, spin float64) {
	b := &m.bodies[k]
	q, v := y[b.q:b.q+4], y[m.nq+b.v:m.nq+b.v+3]
	turn := fromQuaternion(q[0], q[1], q[2], q[3])
	d := turn.mul(vec{Z: -1})
	w := turn.mul(vec{X: v[0], Y: v[1], Z: v[2]})
	rate := w.Cross(d)
	spin = -w.Dot(d)
	across := math.Hypot(d.X, d.Y)
	polar = math.Atan2(across, -d.Z)
	if across == 0 {
		return polar, 0, math.Hypot(rate.X, rate.Y), 0, spin
	}
	azimuth = math.Atan2(d.Y, d.X)
	polarRate = (d.X*rate.X + d.Y*rate.Y) / across * -d.Z
	polarRate += rate.Z * across
	azimuthRate = (d.X*rate.Y - d.Y*rate.X) / (across * across)
	return polar, azimuth, polarRate, azimuthRate, spin
}

// Bobs lists the rig's bobs in the rig's order.
func (m *Model) Bobs() []string {
	out := make([]string, len(m.bobs))
	for i, b := range m.bobs {
		out[i] = b.name
	}
	return out
}

// Positions writes the places of all bobs in world axes, x y z in m, to dst,
// which is grown to their number, and returns it.
func (m *Model) Positions(y []float64, dst [][3]float64) [][3]float64 {
	m.prepare()
	m.kinematics(y)
	dst = dst[:0]
	for _, b := range m.bobs {
		r := b.at
		if b.body >= 0 {
			r = m.bodies[b.body].p.Add(m.bodies[b.body].rot.mul(b.at))
		}
		dst = append(dst, [3]float64{r.X, r.Y, r.Z})
	}
	return dst
}

// Pose returns where part k is: its pivot in the world (m), and the rotation
// from its own axes to the world's, row by row.
func (m *Model) Pose(y []float64, k int) (pivot [3]float64, rotation [3][3]float64) {
	m.prepare()
	m.kinematics(y)
	b := &m.bodies[k]
	r := b.rot
	return [3]float64{b.p.X, b.p.Y, b.p.Z}, [3][3]float64{{r.xx, r.xy, r.xz}, {r.yx, r.yy, r.yz}, {r.zx, r.zy, r.zz}}
}

// prepare brings the model up to date after Set.
func (m *Model) prepare() {
	if m.dirty {
		// An impossible number is reported by Simulate and its like.
		_ = m.refresh()
	}
}
