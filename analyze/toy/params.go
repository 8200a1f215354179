package toy

import (
	"fmt"
	"math"
	"strings"

	"lodeswing/analyze/magnet"
)

// Param is one number of a model that can be changed without building it anew.
type Param struct {
	Name string // as rig addresses are written: "arm.inertia", "base magnet.moment"
	Unit string // SI
}

type param struct {
	Param
	at *float64
}

// listParams collects the numbers that may be changed. The names are those of
// rig.Numbers; places and axes, which are not single numbers there, add .x, .y
// and .z.
func (m *Model) listParams() {
	m.params = m.params[:0]
	add := func(owner, quantity, unit string, at *float64) {
		m.params = append(m.params, param{Param{owner + quantity, unit}, at})
	}
	place := func(owner, quantity string, v *vec) {
		add(owner, quantity+".x", "m", &v.X)
		add(owner, quantity+".y", "m", &v.Y)
		add(owner, quantity+".z", "m", &v.Z)
	}
	add("", "gravity", "m/s²", &m.gravity)
	for k := range m.bodies {
		b := &m.bodies[k]
		add(b.name, ".mass", "kg", &b.mass)
		add(b.name, ".inertia", "kg·m²", &b.inertia)
		if b.joint == ball {
			add(b.name, ".spin_inertia", "kg·m²", &b.spin)
		}
		add(b.name, ".friction.viscous", "N·m·s/rad", &b.viscous)
		add(b.name, ".friction.drag", "N·m·s²/rad²", &b.drag)
		add(b.name, ".friction.dry", "N·m", &b.dry)
		if b.joint != ball {
			add(b.name, ".spring.rate", "N·m/rad", &b.rate)
			add(b.name, ".spring.cubic", "N·m/rad³", &b.cubic)
			add(b.name, ".spring.rest", "rad", &b.restRad)
		}
		place(b.name, ".centre", &b.centre)
		place(b.name, ".pivot", &b.pivot)
	}
	for i := range m.magnets {
		g := &m.magnets[i]
		if g.cylinder {
			add(g.name, ".cylinder.remanence", "T", &g.cyl.Remanence)
			add(g.name, ".cylinder.recoil", "", &g.cyl.Recoil)
			add(g.name, ".cylinder.height", "m", &g.cyl.Height)
		} else {
			add(g.name, ".moment", "A·m²", &g.moment)
		}
		if g.body < 0 {
			add(g.name, ".gap", "m", &g.gap)
		}
		place(g.name, ".at", &g.at)
		add(g.name, ".axis.turn", "rad", &g.turn)
		add(g.name, ".axis.lean", "rad", &g.lean)
	}
	for i := range m.coils {
		c := &m.coils[i]
		for _, q := range []struct {
			name, unit string
			at         *float64
		}{
			{".kick", "J", &c.kick},
			{".sensed", "rad/s", &c.sensed},
			{".width", "m", &c.width},
			{".eddy", "N·m·s", &c.eddy},
			{".turns", "", &c.turns},
			{".radius", "m", &c.radius},
			{".resistance", "Ω", &c.ohm},
			{".supply", "V", &c.supply},
			{".pulse", "s", &c.pulse},
			{".trigger", "V", &c.trigger},
			{".capacity", "A·s", &c.capacity},
		} {
			add(c.name, q.name, q.unit, q.at)
		}
		place(c.name, ".at", &c.at)
	}
}

// Params lists the numbers that Set can change, in a fixed order.
func (m *Model) Params() []Param {
	out := make([]Param, len(m.params))
	for i, p := range m.params {
		out[i] = p.Param
	}
	return out
}

// Index finds a number by its name; the error names those of the same owner.
func (m *Model) Index(name string) (int, error) {
	owner, _, _ := strings.Cut(name, ".")
	var own []string
	for i, p := range m.params {
		if p.Name == name {
			return i, nil
		}
		if strings.HasPrefix(p.Name, owner+".") {
			own = append(own, p.Name)
		}
	}
	if len(own) == 0 {
		return 0, fmt.Errorf("the model has no number %q, and no part, magnet or coil %q", name, owner)
	}
	return 0, fmt.Errorf("the model has no number %q; those of %q are %s", name, owner, strings.Join(own, ", "))
}

// Get returns number i of Params, in SI.
func (m *Model) Get(i int) float64 { return *m.params[i].at }

// Set changes number i of Params, in SI. What follows from it is found anew
// before the model next moves. Changing a base magnet's place along with a gap
// above zero moves only its direction.
func (m *Model) Set(i int, x float64) {
	*m.params[i].at = x
	m.dirty = true
}

// refresh finds what follows from the numbers that Set may have changed.
func (m *Model) refresh() error {
	m.dirty = false
	for k := range m.bodies {
		b := &m.bodies[k]
		b.refreshInertia()
		if b.alone && b.joint != ball { // what swing leaves as it is
			b.arm = b.pivot.Cross(b.axis)
			b.p, b.rot = b.pivot, identity
			m.sA[b.v], m.sB[b.v] = b.axis, b.arm
		}
		if b.alone {
			i := b.pivotInertia
			if b.joint != ball {
				m.mass[b.v*m.nv+b.v] = b.inertia
			} else {
				for r, row := range [3][3]float64{{i.xx}, {i.xy, i.yy}, {i.xz, i.yz, i.zz}} {
					copy(m.mass[(b.v+r)*m.nv+b.v:], row[:r+1])
				}
			}
		}
		if b.inertia <= 0 || math.IsNaN(b.inertia) {
			return fmt.Errorf("the inertia of %q is %g kg·m²: it must be above zero", b.name, b.inertia)
		}
	}
	for i := range m.magnets {
		g := &m.magnets[i]
		if g.cylinder {
			g.moment = g.cyl.Moment()
		}
		g.axis = g.tilted()
		g.ownM = g.axis.Scale(g.moment)
		if g.exact && g.body >= 0 {
			g.cutFaces()
		}
	}
	m.restKinematics()
	for i := range m.magnets {
		g := &m.magnets[i]
		if g.body >= 0 {
			continue
		}
		g.r, g.m = m.standsAt(g), g.ownM
		if g.exact {
			g.cutFaces()
		}
	}
	for i := range m.coils {
		c := &m.coils[i]
		g := &m.magnets[c.magnet]
		c.arm = g.at.Norm()
		if c.arm == 0 {
			c.arm = g.r.Sub(m.bodies[g.body].p).Norm()
		}
		if c.wound {
			c.share(g)
		}
		if c.reach = c.radius; c.reach == 0 {
			c.reach = c.width
		}
		if c.eddyReach = c.reach; c.eddyReach == 0 {
			c.eddyReach = defaultEddyReach
		}
	}
	return nil
}

// tilted is the axis as it stands, off from the given one by turn and lean.
func (g *magnetPart) tilted() vec {
	if g.turn == 0 && g.lean == 0 {
		return g.given
	}
	s, c := math.Sincos(g.turn)
	a := vec{X: c*g.given.X + s*g.given.Z, Y: g.given.Y, Z: c*g.given.Z - s*g.given.X}
	if g.lean == 0 {
		return a
	}
	// Turned towards +y about the axis across it.
	s, c = math.Sincos(g.lean)
	flat := math.Hypot(a.X, a.Z)
	if flat == 0 {
		return a
	}
	return vec{X: a.X * (c*flat - s*a.Y) / flat, Y: c*a.Y + s*flat, Z: a.Z * (c*flat - s*a.Y) / flat}
}

// standsAt is where a base magnet stands: at its own place, or as far from the
// nearest moving magnet at rest, in that direction, as its gap says.
func (m *Model) standsAt(g *magnetPart) vec {
	if g.gap <= 0 {
		return g.at
	}
	best := math.Inf(1)
	var from vec
	for j := range m.magnets {
		if o := &m.magnets[j]; o.body >= 0 {
			if d := o.r.Sub(g.at).Norm(); d < best {
				best, from = d, o.r
			}
		}
	}
	if math.IsInf(best, 1) || best == 0 {
		return g.at
	}
	return from.Add(g.at.Sub(from).Scale(g.gap / best))
}

// Clone returns a model of the same toy with its own work space and numbers.
func (m *Model) Clone() *Model {
	c := *m
	c.bodies = append([]body(nil), m.bodies...)
	c.magnets = append([]magnetPart(nil), m.magnets...)
	for i := range c.magnets {
		g := &c.magnets[i]
		g.own, g.charges = append([]magnet.Charge(nil), g.own...), append([]magnet.Charge(nil), g.charges...)
	}
	c.coils = append([]coilPart(nil), m.coils...)
	for i := range c.coils {
		c.coils[i].points = append([]windingPoint(nil), c.coils[i].points...)
	}
	c.solver, c.events, c.params, c.tangentWork = nil, nil, nil, nil
	c.lamp, c.planar, c.planarWork = nil, nil, nil
	c.workSpace()
	copy(c.mass, m.mass)
	copy(c.sA, m.sA)
	copy(c.sB, m.sB)
	c.listParams()
	return &c
}
