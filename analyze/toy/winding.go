package toy

import (
	"fmt"
	"math"

	"lodeswing/analyze/magnet"
)

// A coil that the rig gives by its winding and supply pushes with a current. The
// approaching magnet induces a voltage in it; once that has reached trigger_V the
// coil is armed, and when the flux through it is greatest (the magnet is nearest)
// the supply is switched on for pulse_ms in the sense that drives the magnet away.
// The current is what supply and resistance leave against the voltage that the
// departing magnet induces, and never flows backwards. All turns sit at radius_mm;
// the winding's inductance is left out (a toy's coil follows in well under 1 ms).

// defaultPulse in s stands where the rig gives no pulse_ms (common practice, no
// source).
const defaultPulse = 0.01

// winding is the state of such a coil.
type winding struct {
	aux      int // where its charge (A·s) and work (J) stand in the state
	points   []windingPoint
	pulsing  bool
	armed    bool
	polarity float64
	until    float64 // end of the pulse
	charge0  float64 // at its start
	work0    float64
}

// windingPoint is a share of the sensed magnet's moment, own axes of its part.
type windingPoint struct{ at, m vec }

// share splits the sensed magnet into dipoles: a cylinder into eight, which
// integrate cubics over it exactly, so that its size counts beside a small coil.
func (c *coilPart) share(g *magnetPart) {
	c.points = c.points[:0]
	if !g.exact {
		c.points = append(c.points, windingPoint{g.at, g.ownM})
		return
	}
	u := vec{X: 1}
	if math.Abs(g.axis.X) > 0.8 {
		u = vec{Y: 1}
	}
	u = u.Sub(g.axis.Scale(u.Dot(g.axis))).Unit()
	v := g.axis.Cross(u)
	along, across := g.cyl.Height/2/math.Sqrt(3), g.cyl.Radius*math.Sqrt(0.5)
	for _, z := range [2]float64{along, -along} {
		for _, d := range [4]vec{u, v, u.Scale(-1), v.Scale(-1)} {
			at := g.at.Add(g.axis.Scale(z)).Add(d.Scale(across))
			c.points = append(c.points, windingPoint{at, g.ownM.Scale(1.0 / 8)})
		}
	}
}

// linkage returns, for the places and speeds that kinematics set, the flux
// through the winding (V·s), its rate (V), and force (N) and torque about the
// world's origin (N·m) on the magnet's part per ampere, which are its gradient.
func (m *Model) linkage(c *coilPart) (flux, rate float64, force, torque vec) {
	g := &m.magnets[c.magnet]
	b := &m.bodies[g.body]
	h := 1e-5 * c.radius
	for _, p := range c.points {
		r, mo := b.p.Add(b.rot.mul(p.at)), b.rot.mul(p.m)
		at := func(x, y, z float64) vec {
			return magnet.LoopField(c.radius, c.axis, vec{X: r.X + x - c.at.X, Y: r.Y + y - c.at.Y, Z: r.Z + z - c.at.Z})
		}
		field := at(0, 0, 0)
		flux += c.turns * field.Dot(mo)
		f := vec{
			X: at(h, 0, 0).Sub(at(-h, 0, 0)).Dot(mo),
			Y: at(0, h, 0).Sub(at(0, -h, 0)).Dot(mo),
			Z: at(0, 0, h).Sub(at(0, 0, -h)).Dot(mo),
		}.Scale(c.turns / (2 * h))
		force = force.Add(f)
		torque = torque.Add(r.Cross(f)).Add(mo.Cross(field).Scale(c.turns))
	}
	rate = force.Dot(b.vo) + torque.Dot(b.w)
	return flux, rate, force, torque
}

// windingForce adds the push of a pulse, and writes the rates of charge and work.
func (m *Model) windingForce(c *coilPart, dy []float64) {
	dy[c.aux], dy[c.aux+1] = 0, 0
	if !c.pulsing {
		return
	}
	_, rate, force, torque := m.linkage(c)
	current := math.Max(0, (c.supply-c.polarity*rate)/c.ohm)
	b := &m.bodies[m.magnets[c.magnet].body]
	k := c.polarity * current
	b.extF, b.extN = b.extF.Add(force.Scale(k)), b.extN.Add(torque.Scale(k))
	dy[c.aux], dy[c.aux+1] = current, k*rate
}

// approach is the rate at which the size of a winding's flux grows, in V: the
// induced voltage while the magnet comes nearer, negative while it leaves.
func (m *Model) approach(c *coilPart) float64 {
	flux, rate, _, _ := m.linkage(c)
	return math.Copysign(rate, rate*flux)
}

// fire switches an armed winding's supply on. The push sets in after the greatest
// flux, where the flux falls: its sense is against the flux.
func (m *Model) fire(c *coilPart, t float64, y []float64) {
	flux, _, _, _ := m.linkage(c)
	c.armed, c.pulsing = false, true
	c.polarity = -math.Copysign(1, flux)
	c.until = t + c.pulse
	c.charge0, c.work0 = y[c.aux], y[c.aux+1]
}

// Use is what a coil draws from its battery.
type Use struct {
	Coil          string
	Kicks         int
	ChargePerKick float64 // A·s
	MeanCurrent   float64 // A
	Days          float64 // on a fresh battery of the rig's capacity; 0 where that is not given
	Caution       string
}

// Battery sums up what each coil given by its winding drew over the motion. Days
// reckon with the rig's capacity alone: self-discharge, falling voltage and the
// circuit's own current at rest are not in it.
func (m *Model) Battery(o *Motion) []Use {
	var out []Use
	span := o.T1 - o.T0
	for i := range m.coils {
		c := &m.coils[i]
		if !c.wound || span <= 0 {
			continue
		}
		u := Use{Coil: c.name}
		charge := 0.0
		for _, e := range o.Events {
			if e.Kind == Kick && e.Coil == i {
				u.Kicks++
				charge += e.Charge
			}
		}
		if u.Kicks > 0 {
			u.ChargePerKick = charge / float64(u.Kicks)
			u.MeanCurrent = charge / span
		}
		if c.capacity > 0 && u.MeanCurrent > 0 {
			u.Days = c.capacity / u.MeanCurrent / 86400
		}
		u.Caution = fmt.Sprintf("from %d kicks in %.3g s; the battery's self-discharge, its falling voltage and the circuit's current at rest are left out", u.Kicks, span)
		out = append(out, u)
	}
	return out
}
