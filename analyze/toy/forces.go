package toy

import "math"

// forces sums what magnets and coils do to the parts, and the rates of the
// coils' quadratures in dy.
func (m *Model) forces(dy []float64) {
	m.magnetForces()
	for i := range m.coils {
		m.coilForce(&m.coils[i], dy)
	}
}

// magnetForces begins the sums with what the magnets do.
func (m *Model) magnetForces() {
	for k := range m.bodies {
		m.bodies[k].extN, m.bodies[k].extF = vec{}, vec{}
	}
	for i := range m.pairs {
		m.pairForces(&m.pairs[i])
	}
}

// push adds the force f at r and the couple n to part k.
func (m *Model) push(k int, r, f, n vec) {
	b := &m.bodies[k]
	b.extF = b.extF.Add(f)
	b.extN = b.extN.Add(n).Add(r.Cross(f))
}

// velocity of a point r (world) of part k.
func (m *Model) velocity(k int, r vec) vec {
	b := &m.bodies[k]
	return b.vo.Add(b.w.Cross(r))
}

func (m *Model) coilForce(c *coilPart, dy []float64) {
	g := &m.magnets[c.magnet]
	if c.eddy != 0 {
		// Drag right over the coil, fading with the distance from its place there.
		d := g.r.Sub(c.at)
		over := d.Sub(c.axis.Scale(d.Dot(c.axis)))
		k := c.eddy / (c.arm * c.arm) * math.Exp(-over.Dot(over)/(c.eddyReach*c.eddyReach))
		m.push(g.body, g.r, m.velocity(g.body, g.r).Scale(-k), vec{})
	}
	if c.wound {
		m.windingForce(c, dy)
		return
	}
	if c.pushing {
		u := g.r.Sub(c.pushFrom).Dot(c.pushDir) / c.width
		if u > 0 && u < 1 {
			m.push(g.body, g.r, c.pushDir.Scale(c.pushEnergy*30/c.width*u*u*(1-u)*(1-u)), vec{})
		}
	}
}
