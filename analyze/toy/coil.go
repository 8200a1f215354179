package toy

import (
	"fmt"
	"math"

	"lodeswing/track/rig"
)

// defaultEddyReach in m is how far to the side the eddy drag near a coil is felt when
// the rig gives neither radius_mm nor width_mm (common practice, no source).
const defaultEddyReach = 0.01

func (m *Model) addCoil(r *rig.Rig, i int, index map[string]int) error {
	k := &r.Coils[i]
	c := coilPart{
		name: k.Name, at: vector(k.AtM), axis: vec{Z: 1}, magnet: -1,
		kick: k.KickJ.Or(0), sensed: k.SensedRadS.Or(0), width: k.WidthM.Or(0),
		eddy: k.Eddy.Or(0), turns: k.Turns.Or(0), radius: k.RadiusM.Or(0), ohm: k.Ohm.Or(0),
		supply: k.SupplyV.Or(0), pulse: k.PulseS.Or(0), trigger: k.TriggerV.Or(0), capacity: k.CapacityAs.Or(0),
	}
	if c.name == "" {
		c.name = "coil"
		if i > 0 {
			c.name = fmt.Sprintf("coil %d", i+1)
		}
	}
	where := fmt.Sprintf("[[coil]] %q", c.name)
	if len(k.Axis) > 0 {
		if c.axis = vector(k.Axis).Unit(); c.axis == (vec{}) {
			return fmt.Errorf("%s: axis must point somewhere", where)
		}
	}
	part := -1
	if k.Part != "" && k.Part != rig.Base {
		p, known := index[k.Part]
		if !known {
			return fmt.Errorf("%s senses part %q, which the rig does not have", where, k.Part)
		}
		part = p
	}
	m.restKinematics()
	nearest := math.Inf(1)
	for j := range m.magnets {
		g := &m.magnets[j]
		if g.body < 0 || (part >= 0 && g.body != part) {
			continue
		}
		if d := g.r.Sub(c.at).Norm(); d < nearest {
			nearest, c.magnet = d, j
		}
	}
	if c.magnet < 0 {
		return fmt.Errorf("%s has no moving magnet to sense and push: add a [[magnet]] to the part that it drives", where)
	}
	c.wound = !k.KickJ.Set && !k.KickJ.Fit
	if c.wound && (c.turns == 0 || c.radius == 0 || c.ohm == 0 || !k.SupplyV.Set) {
		return fmt.Errorf("%s says nothing of its kick: give kick_mJ, or turns, radius_mm, resistance_ohm and supply_V", where)
	}
	if c.wound && c.pulse == 0 {
		c.pulse = defaultPulse
	}
	m.coils = append(m.coils, c)
	return nil
}

// onePath tells whether part k moves along one path in space only, so that it
// passes a coil at the same distance each time.
func (m *Model) onePath(k int) bool {
	return k >= 0 && m.bodies[k].parent < 0 && m.bodies[k].nv == 1
}

// aside is how much of a coil's push is left when its magnet passes at a
// distance to the side of its axis: all for a part on a single hinge, else
// fading as a Gaussian of the coil's radius (common practice, no source).
func (m *Model) aside(c *coilPart) float64 {
	g := &m.magnets[c.magnet]
	if c.reach == 0 || m.onePath(g.body) {
		return 1
	}
	d := g.r.Sub(c.at)
	over := d.Sub(c.axis.Scale(d.Dot(c.axis)))
	return math.Exp(-over.Dot(over) / (c.reach * c.reach))
}

// coilPass is zero and rising when the coil's magnet is nearest to it.
func (m *Model) coilPass(c *coilPart) float64 {
	g := &m.magnets[c.magnet]
	return g.r.Sub(c.at).Dot(m.velocity(g.body, g.r))
}

// impulse gives the parts the energy e in J by a blow on magnet c.magnet along
// the velocity that it has, at the places and speeds of y, and returns false
// where it does not move. kinematics and massMatrix must be those of y.
func (m *Model) impulse(c *coilPart, e float64, y []float64) bool {
	g := &m.magnets[c.magnet]
	v := m.velocity(g.body, g.r)
	speed := v.Norm()
	if speed == 0 {
		return false
	}
	dir := v.Scale(1 / speed)
	moment := g.r.Cross(dir)
	for i := range m.rhs {
		m.rhs[i] = 0
	}
	for k := g.body; k >= 0; k = m.bodies[k].parent {
		b := &m.bodies[k]
		for i := b.v; i < b.v+b.nv; i++ {
			m.rhs[i] = m.sA[i].Dot(moment) + m.sB[i].Dot(dir)
		}
	}
	if m.solve() != nil {
		return false
	}
	// The blow P adds P·speed + P²·k/2 = e to the kinetic energy.
	k := 0.0
	for i := range m.rhs {
		k += m.rhs[i] * m.acc[i]
	}
	p := 2 * e / (speed + math.Sqrt(speed*speed+2*k*e))
	for i := range m.acc {
		y[m.nq+i] += p * m.acc[i]
	}
	return true
}
