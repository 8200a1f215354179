package toy

import "math"

// Energies are a toy's energies in J. Gravity is zero where every centre of mass
// is at the world's origin, Spring where the springs are relaxed, Magnetic where
// the magnets are far apart.
type Energies struct {
	Kinetic, Gravity, Spring, Magnetic float64
}

// Total is their sum.
func (e Energies) Total() float64 { return e.Kinetic + e.Gravity + e.Spring + e.Magnetic }

// Energy returns the energies at a state.
func (m *Model) Energy(y []float64) Energies {
	m.prepare()
	m.kinematics(y)
	var e Energies
	for k := range m.bodies {
		b := &m.bodies[k]
		e.Kinetic += b.kinetic()
		e.Gravity += b.mass * m.gravity * b.c.Z
		if b.joint != ball && (b.rate != 0 || b.cubic != 0) {
			e.Spring += b.springEnergy(y[b.q])
		}
	}
	e.Magnetic = m.magneticEnergy()
	return e
}

// sprung is how far the joint's spring is wound, in rad in the sense in which the
// part's angle is shown.
func (b *body) sprung(angle float64) float64 {
	if b.stands {
		angle = math.Pi - angle
	}
	return angle - b.restRad
}

func (b *body) springEnergy(angle float64) float64 {
	d := b.sprung(angle)
	return 0.5*b.rate*d*d + 0.25*b.cubic*d*d*d*d
}

// kinetic is the part's kinetic energy as kinematics set it.
func (b *body) kinetic() float64 {
	in := b.inWorld()
	l, p := in.momentum(b.w, b.vo)
	return 0.5 * (b.w.Dot(l) + b.vo.Dot(p))
}

// magneticEnergy is that of the magnets as kinematics placed them. It spoils the
// sums of outside forces, which derive begins anew.
func (m *Model) magneticEnergy() float64 {
	sum := 0.0
	for _, p := range m.pairs {
		sum += m.pairForces(&p)
	}
	return sum
}

// PartEnergies writes each part's own kinetic energy, weight and spring energy
// in J to dst; what magnets share between parts is not in it.
func (m *Model) PartEnergies(y, dst []float64) {
	m.prepare()
	m.kinematics(y)
	for k := range m.bodies {
		b := &m.bodies[k]
		dst[k] = b.kinetic() + b.mass*m.gravity*b.c.Z
		if b.joint != ball {
			dst[k] += b.springEnergy(y[b.q])
		}
	}
}
