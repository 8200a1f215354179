package match

import (
	"math"
	"slices"

	"lodeswing/track/rig"
)

// part adds what is never exactly known of a part.
func (b *builder) part(q *rig.Part, first bool) {
	if b.f.modelIndex(q.Name+".inertia") < 0 {
		return
	}
	// Inertia is always free: held 0.5 % wrong it would move a pair's product by
	// far more.
	address := q.Name + ".inertia"
	m := b.f.clips[b.f.holder(address)].model
	p := param{
		address: address, unit: "kg·m²", source: "the inertia of " + q.Name, clip: -1, targets: b.set([]string{address}, 0, 1),
		tied: []string{address}, asked: q.Inertia.Fit, positive: true, hi: math.Inf(1),
		value: q.Inertia.Or(m.Get(b.f.modelIndex(address))),
	}
	if q.Inertia.Set && !q.Inertia.Fit {
		u := q.Inertia.U
		if slices.Contains(b.r.Fitted.Of, address) || u == 0 {
			u = 0.01 * q.Inertia.V // the rig's default: what the clip told is not told twice
		}
		p.prior, p.mean, p.u = true, q.Inertia.V, u
	}
	b.add(p)

	centre := rig.XYZ(q.CentreM)
	uc := q.UCentreM.Or(uPlace)
	if uc == 0 {
		uc = uPlace
	}
	if g := q.MassKg; g.Set && g.V > 0 {
		if c := math.Hypot(centre[0], centre[2]); c > 10*uc {
			// Mass, lever and gravity act together, as the weight moment.
			grav := b.r.Gravity
			ug := 0.01 / 9.81
			if grav.Set && grav.V > 0 {
				ug = grav.U / grav.V
			}
			u := math.Sqrt(g.U*g.U/(g.V*g.V) + uc*uc/(c*c) + ug*ug)
			b.add(param{
				address: q.Name + ".weight moment", unit: "1", source: "the weight of " + q.Name + " and its lever", clip: -1, nuisance: true,
				targets: b.set([]string{q.Name + ".mass"}, 0, g.V), prior: true, mean: 1, u: u, value: 1,
			})
			// Across the lever: which way it hangs. A ball joint's part has no such way.
			if q.Joint != "ball" {
				b.place(q.Name+".centre.x", "the centre of mass of "+q.Name, centre[0], uc)
			}
		} else {
			b.place(q.Name+".centre.x", "the centre of mass of "+q.Name, centre[0], uc)
			b.place(q.Name+".centre.z", "the centre of mass of "+q.Name, centre[2], uc)
		}
	}
	if !first {
		pivot := rig.XYZ(q.PivotM)
		u := q.UPivotM.Or(uPlace)
		if u == 0 {
			u = uPlace
		}
		b.place(q.Name+".pivot.x", "the pivot of "+q.Name, pivot[0], u)
		b.place(q.Name+".pivot.z", "the pivot of "+q.Name, pivot[2], u)
	}
}

func (b *builder) place(name, source string, x, u float64) {
	if b.f.modelIndex(name) < 0 {
		return
	}
	b.add(param{
		address: name, unit: "m", source: source, clip: -1, nuisance: true, prior: true, mean: x, u: u, value: x,
		targets: b.set([]string{name}, 0, 1), scale: 1e-5,
	})
}

// magnetPlace adds where a magnet is.
func (b *builder) magnetPlace(g *rig.Magnet, ball bool) {
	u := g.UAtM.Or(uPlace)
	if u == 0 {
		u = uPlace
	}
	what := "the place of " + g.Name
	at := rig.XYZ(g.AtM)
	base := g.Part == "" || g.Part == rig.Base
	if !base {
		if b.meetsOnlyBase(g) {
			return // with the base's
		}
		if q := b.r.FindPart(g.Part); q == nil || q.Joint != "ball" {
			b.place(g.Name+".at.x", what, at[0], u)
		}
		b.place(g.Name+".at.z", what, at[2], u)
		return
	}
	// What counts is where it is from the moving magnet, both as read with a ruler.
	near, distance := b.nearest(g)
	if near != nil {
		v := near.UAtM.Or(uPlace)
		u = math.Hypot(u, v)
	}
	b.place(g.Name+".at.x", "the sideways place of "+g.Name, at[0], u)
	if ball {
		b.place(g.Name+".at.y", "the sideways place of "+g.Name, at[1], u)
	}
	if near == nil {
		return
	}
	address := g.Name + ".gap"
	gap := distance
	if g.GapM.Set {
		gap = g.GapM.V
	}
	p := param{
		address: address, unit: "m", source: "the gap to " + g.Name, clip: -1, tied: []string{address},
		value: gap, lo: 1e-3, hi: 1, scale: 1e-5, asked: g.GapM.Fit || g.GapFit, positive: true,
	}
	if !p.asked {
		p.prior, p.mean, p.u = true, gap, u
		if slices.Contains(b.r.Fitted.Of, address) {
			p.mean = distance // what the ruler said; the fitted gap is where to start
		}
		if g.GapM.Set && g.GapM.U > 0 && !slices.Contains(b.r.Fitted.Of, address) {
			p.u = g.GapM.U
		}
	}
	p.targets = make([][]target, len(b.f.clips))
	for c := range b.f.clips {
		k := &b.f.clips[c]
		if k.moved[g.Name] {
			if i, err := k.model.Index(g.Name + ".at.z"); err == nil {
				p.targets[c] = []target{{i, k.model.Get(i) + gap, -1}}
			}
			continue
		}
		if i, err := k.model.Index(address); err == nil {
			p.targets[c] = []target{{i, 0, 1}}
		}
	}
	b.add(p)
}

// magnetAxis adds where a magnet's axis points. That of a part on a ball joint is left
// alone: the part turns about its own axis, and what a slant does goes round with it.
func (b *builder) magnetAxis(g *rig.Magnet, ball bool) {
	u := g.UAxisRad.Or(uAxis)
	if q := b.r.FindPart(g.Part); q != nil && q.Joint == "ball" || len(b.r.Magnets) < 2 {
		return
	}
	add := func(way string) {
		name := g.Name + ".axis." + way
		if b.f.modelIndex(name) < 0 {
			return
		}
		b.add(param{
			address: name, unit: "rad", source: "the axis of " + g.Name, clip: -1, nuisance: true, prior: true, u: u,
			targets: b.set([]string{name}, 0, 1), scale: 1e-4,
		})
	}
	add("turn")
	if ball {
		add("lean")
	}
}

// meetsOnlyBase tells whether a moving magnet's place is only felt as its
// distance from one magnet of the base.
func (b *builder) meetsOnlyBase(g *rig.Magnet) bool {
	n := 0
	for i := range b.r.Magnets {
		o := &b.r.Magnets[i]
		if o.Part != g.Part && o.Part != "" && o.Part != rig.Base {
			return false
		}
		if o.Part == "" || o.Part == rig.Base {
			n++
		}
	}
	return n <= 1
}

// nearest is the moving magnet nearest to a base magnet at rest, and how far it is.
func (b *builder) nearest(g *rig.Magnet) (*rig.Magnet, float64) {
	m := b.f.clips[0].model
	rest := m.Rest()
	at := rig.XYZ(g.AtM)
	var near *rig.Magnet
	best := math.Inf(1)
	for i := range b.r.Magnets {
		o := &b.r.Magnets[i]
		k, err := m.Part(o.Part)
		if err != nil {
			continue
		}
		p, r := m.Pose(rest, k)
		x := rig.XYZ(o.AtM)
		d := 0.0
		for j := range 3 {
			e := p[j] + r[j][0]*x[0] + r[j][1]*x[1] + r[j][2]*x[2] - at[j]
			d += e * e
		}
		if d < best {
			best, near = d, o
		}
	}
	return near, math.Sqrt(best)
}
