package toy

import (
	"fmt"
	"math"
	"sort"

	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

// MaxFreedoms is how many degrees of freedom a toy may have.
const MaxFreedoms = 12

// standardGravity in m/s² stands where the rig gives none (CGPM 1901).
const standardGravity = 9.80665

// New builds the model of a rig. A number that the rig leaves to the matching
// ("fit") starts from the rig's own start, or else from a plain default: a
// point's inertia, no friction, a moment of 1 A·m². The error names the table
// and key.
func New(r *rig.Rig) (*Model, error) {
	m := &Model{Name: r.Name, gravity: r.Gravity.Or(standardGravity), starts: r.Start}
	if len(r.Parts) == 0 {
		return nil, fmt.Errorf("the rig %q has no [[part]]: a toy needs at least one part with mass_g, centre_mm and a joint", r.Name)
	}
	order, err := inOrder(r.Parts)
	if err != nil {
		return nil, err
	}
	index := map[string]int{"": -1, rig.Base: -1}
	for k, i := range order {
		p := &r.Parts[i]
		if _, twice := index[p.Name]; twice {
			return nil, fmt.Errorf("[[part]] name %q is used twice, or is \"base\"", p.Name)
		}
		index[p.Name] = k
		if err := m.addBody(r, p, index[p.On]); err != nil {
			return nil, err
		}
	}
	if m.nv > MaxFreedoms {
		return nil, fmt.Errorf("the rig %q has %d degrees of freedom, more than the %d that the model takes: leave out parts that hardly move", r.Name, m.nv, MaxFreedoms)
	}
	for k := range m.bodies {
		m.bodies[k].q, m.bodies[k].v = 0, 0
	}
	for k := range m.bodies {
		b := &m.bodies[k]
		b.q, b.v = m.nq, m.dofs()
		m.nq += b.nv
		if b.joint == ball {
			m.nq++
		}
		for range b.nv {
			m.dofOf = append(m.dofOf, k)
		}
		if b.parent < 0 {
			m.trees = append(m.trees, tree{v: b.v})
		}
		b.tree = len(m.trees) - 1
		m.trees[b.tree].n += b.nv
	}
	for _, b := range r.Bobs {
		k, known := index[b.Part]
		if !known {
			return nil, fmt.Errorf("[[bob]] %q sits on part %q, which the rig does not have", b.Name, b.Part)
		}
		m.bobs = append(m.bobs, bobPart{name: b.Name, body: k, at: vector(b.AtM)})
	}
	for i := range r.Magnets {
		if err := m.addMagnet(&r.Magnets[i], index); err != nil {
			return nil, err
		}
	}
	for i := range r.Coils {
		if err := m.addCoil(r, i, index); err != nil {
			return nil, err
		}
	}
	for i := range m.coils {
		if c := &m.coils[i]; c.wound {
			c.aux = m.nq + m.nv + m.naux
			m.naux += 2
		}
	}
	m.allAlone = true
	for k := range m.bodies {
		b := &m.bodies[k]
		b.alone = b.parent < 0 && m.trees[b.tree].n == b.nv
		m.allAlone = m.allAlone && b.alone
	}
	m.workSpace()
	m.findPairs()
	m.listParams()
	if err := m.refresh(); err != nil {
		return nil, err
	}
	m.chooseRules()
	if err := m.refresh(); err != nil { // with the faces cut by those rules
		return nil, err
	}
	if err := m.check(); err != nil {
		return nil, err
	}
	return m, nil
}

func (m *Model) dofs() int { return len(m.dofOf) }

func (m *Model) workSpace() {
	m.sA, m.sB = make([]vec, m.nv), make([]vec, m.nv)
	m.mass, m.chol = make([]float64, m.nv*m.nv), make([]float64, m.nv*m.nv)
	m.rhs, m.acc = make([]float64, m.nv), make([]float64, m.nv)
	m.sign, m.stuck = make([]float64, len(m.bodies)), make([]bool, len(m.bodies))
	m.scratch = make([]float64, m.StateLen())
	m.free = true
}

// inOrder sorts parts so that each comes after what it is on and each tree is
// in one piece.
func inOrder(parts []rig.Part) ([]int, error) {
	byName := map[string]int{}
	for i, p := range parts {
		byName[p.Name] = i
	}
	carried := map[string][]int{}
	for i, p := range parts {
		on := p.On
		if on == rig.Base {
			on = ""
		}
		if on == p.Name {
			return nil, fmt.Errorf("[[part]] %q is on itself", p.Name)
		}
		if _, ok := byName[on]; on != "" && !ok {
			return nil, fmt.Errorf("[[part]] %q is on %q, which the rig does not have", p.Name, p.On)
		}
		carried[on] = append(carried[on], i)
	}
	var out []int
	var walk func(name string)
	walk = func(name string) {
		for _, i := range carried[name] {
			out = append(out, i)
			if parts[i].Name != "" {
				walk(parts[i].Name)
			}
		}
	}
	walk("")
	if len(out) != len(parts) {
		var ring []string
		for _, p := range parts {
			found := false
			for _, i := range out {
				found = found || parts[i].Name == p.Name
			}
			if !found {
				ring = append(ring, p.Name)
			}
		}
		sort.Strings(ring)
		return nil, fmt.Errorf("the parts %q carry each other in a ring: one of them must be on the base", ring)
	}
	return out, nil
}

func (m *Model) addBody(r *rig.Rig, p *rig.Part, parent int) error {
	where := fmt.Sprintf("[[part]] %q", p.Name)
	b := body{
		name: p.Name, parent: parent, stands: p.Upright, flat: p.Flat, nv: 1,
		pivot: vector(p.PivotM), centre: vector(p.CentreM),
		mass: p.MassKg.Or(0), inertia: p.Inertia.Or(0), spin: p.SpinInertia.Or(0),
		viscous: p.Friction.Viscous.Or(0), drag: p.Friction.Drag.Or(0), dry: p.Friction.Dry.Or(0),
		rate: p.Spring.Rate.Or(0), cubic: p.Spring.Cubic.Or(0), restRad: p.Spring.RestRad.Or(0),
	}
	switch p.Joint {
	case "hinge", "":
		b.joint, b.axis = hinge, vec{Y: -1}
	case "pin":
		b.joint, b.axis = pin, vec{Y: -1}
		if p.Flat {
			b.axis = vec{Z: 1}
		}
	case "ball":
		b.joint, b.nv = ball, 3
		if b.rate != 0 || b.cubic != 0 || p.Spring.Rate.Fit || p.Spring.Cubic.Fit {
			return fmt.Errorf("%s has a spring on a ball joint, where a torsion spring has no meaning: take spring out or make the joint a hinge", where)
		}
		if p.Upright {
			return fmt.Errorf("%s stands upright on a ball joint and would fall over: make the joint a hinge with a spring", where)
		}
	default:
		return fmt.Errorf("%s: joint must be \"hinge\", \"pin\" or \"ball\", not %q", where, p.Joint)
	}
	for _, f := range []struct {
		key string
		x   float64
	}{
		{"mass_g", b.mass},
		{"inertia_g_mm2", b.inertia},
		{"spin_inertia_g_mm2", b.spin},
		{"viscous", b.viscous},
		{"drag", b.drag},
		{"dry", b.dry},
		{"rate_mN_m", b.rate},
	} {
		if f.x < 0 || math.IsNaN(f.x) || math.IsInf(f.x, 0) {
			return fmt.Errorf("%s: %s is %g, but it cannot be below zero", where, f.key, f.x)
		}
	}
	if !p.MassKg.Set && b.inertia == 0 {
		return fmt.Errorf("%s has neither mass_g nor inertia_g_mm2: nothing says how heavily it moves", where)
	}
	if p.Upright && b.centre.Z > 0 {
		return fmt.Errorf("%s: centre_mm lies above the pivot; a standing part is described as if it hung, its head at negative z", where)
	}
	lever2 := b.centre.Dot(b.centre)
	if b.joint != ball {
		along := b.centre.Dot(b.axis)
		lever2 -= along * along
	}
	if b.inertia == 0 {
		b.inertia = b.mass * lever2 // a point at the centre of mass
		if b.inertia == 0 {
			return fmt.Errorf("%s has its centre of mass on its axis and no inertia_g_mm2: give the inertia", where)
		}
		for _, bob := range r.Bobs {
			if bob.Part == p.Name && bob.DiameterM.Set && b.spin == 0 {
				b.inertia += 0.1 * b.mass * bob.DiameterM.V * bob.DiameterM.V // a ball about its centre: 2/5 m r²
				break
			}
		}
	} else if least := b.mass * lever2; p.Inertia.Known() && b.inertia < least*(1-1e-6)-4*p.Inertia.U {
		return fmt.Errorf("%s: inertia_g_mm2 is %.4g, less than mass × distance² = %.4g: it must be about the pivot, not about the centre of mass", where, b.inertia*1e9, least*1e9)
	}
	if b.joint == ball && b.spin == 0 {
		b.spin = b.inertia / 100 // a slender part, where the rig does not say
		for _, bob := range r.Bobs {
			if bob.Part == p.Name && bob.DiameterM.Set {
				b.spin = 0.1 * b.mass * bob.DiameterM.V * bob.DiameterM.V
				break
			}
		}
	}
	m.nv += b.nv
	m.bodies = append(m.bodies, b)
	return nil
}

// refreshInertia finds the tensor about the centre of mass from what the rig gives
// about the pivot. A hinged or hung part is taken as axisymmetric about the
// line from its pivot to its centre of mass, a pinned one about its pin.
func (b *body) refreshInertia() {
	lever2 := b.centre.Dot(b.centre)
	long := b.centre.Unit()
	if b.joint == pin {
		// About the pin, and half of it about any line across, as for a flat plate.
		along := b.centre.Dot(b.axis)
		about := b.inertia - b.mass*(lever2-along*along)
		b.comInertia = axisymmetric(b.axis, about, about/2)
	} else {
		b.comInertia = b.comInertiaOfHanging(long, lever2)
	}
	b.pivotInertia = b.comInertia
	b.pivotInertia.addPoint(b.mass, b.centre)
}

func (b *body) comInertiaOfHanging(long vec, lever2 float64) sym {
	if lever2 == 0 {
		long = vec{Z: 1}
	}
	across := b.inertia - b.mass*lever2
	if b.joint == hinge {
		if along := b.centre.Dot(b.axis); along != 0 {
			// The given inertia is about the hinge's axis, which passes beside
			// the pivot's own distance: keep it exact there.
			across = b.inertia - b.mass*(lever2-along*along)
			long = vec{X: b.centre.X, Z: b.centre.Z}.Unit()
			if long == (vec{}) {
				long = vec{Z: 1}
			}
		}
	}
	return axisymmetric(long, b.spin, across)
}

func (m *Model) addMagnet(g *rig.Magnet, index map[string]int) error {
	where := fmt.Sprintf("[[magnet]] %q", g.Name)
	k, known := index[g.Part]
	if !known {
		return fmt.Errorf("%s is on part %q, which the rig does not have", where, g.Part)
	}
	axis := vector(g.Axis).Unit()
	if axis == (vec{}) {
		return fmt.Errorf("%s: axis must point somewhere, from its south to its north", where)
	}
	p := magnetPart{name: g.Name, body: k, at: vector(g.AtM), axis: axis, given: axis, moment: g.Moment.Or(1), gapTo: -1}
	if c := g.Cylinder; c != nil {
		p.cylinder, p.exact = true, true
		p.cyl = magnet.Cylinder{
			Radius: c.DiameterM.V / 2, Height: c.HeightM.V,
			Remanence: c.RemanenceT.Or(1.2), Recoil: c.Recoil.Or(magnet.DefaultRecoil),
		}
		if err := p.cyl.Check(); err != nil {
			return fmt.Errorf("%s: %w", where, err)
		}
	}
	if k < 0 {
		p.gap = g.GapM.Or(0)
	}
	for i, o := range m.magnets {
		if o.body == k && o.at == p.at {
			return fmt.Errorf("%s is in the same place as %q: two magnets cannot be", where, m.magnets[i].name)
		}
	}
	m.magnets = append(m.magnets, p)
	return nil
}

func (m *Model) findPairs() {
	for a := range m.magnets {
		for b := range m.magnets[:a] {
			if m.magnets[a].body != m.magnets[b].body {
				m.pairs = append(m.pairs, pair{b, a})
			}
		}
	}
}
