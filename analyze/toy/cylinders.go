package toy

import (
	"fmt"
	"math"

	"lodeswing/analyze/magnet"
)

// chooseRules decides how finely each cylinder's faces are cut, from the nearest
// that it comes to another magnet anywhere that the toy can swing to.
func (m *Model) chooseRules() {
	m.nearest, m.gaps = make([]float64, len(m.pairs)), make([]float64, len(m.pairs))
	for i := range m.nearest {
		m.nearest[i], m.gaps[i] = math.Inf(1), math.Inf(1)
	}
	any := false
	for i := range m.magnets {
		any = any || m.magnets[i].exact
	}
	if !any {
		return
	}
	look := func(y []float64) {
		m.kinematics(y)
		for i, p := range m.pairs {
			m.nearest[i] = math.Min(m.nearest[i], m.magnets[p.a].r.Sub(m.magnets[p.b].r).Norm())
			m.gaps[i] = math.Min(m.gaps[i], m.faceGap(p))
		}
	}
	look(m.Rest())
	for i := range m.seeds() {
		look(m.seed(i, 1.5))
	}
	for i := range m.magnets {
		g := &m.magnets[i]
		if !g.exact {
			continue
		}
		gap := math.Inf(1)
		distance := math.Inf(1)
		for j, p := range m.pairs {
			if p.a != i && p.b != i {
				continue
			}
			other := &m.magnets[p.a+p.b-i]
			reach, radius := g.cyl.Reach()/2, g.cyl.Radius
			if other.exact {
				reach, radius = reach+other.cyl.Reach()/2, math.Max(radius, other.cyl.Radius)
			}
			gap = math.Min(gap, m.gaps[j]/radius)
			distance = math.Min(distance, m.nearest[j]/reach)
		}
		// A grid of places may pass the very nearest by. The finest rule would be too
		// slow for what it is worth: two magnets that all but touch do not swing.
		g.rule = min(magnet.RuleFor(0.95*distance, 0.9*gap), magnet.Degree11)
	}
}

// faceGap is about how far apart the surfaces of two magnets are, as kinematics
// placed them: from centre to centre less what each reaches along that line.
func (m *Model) faceGap(p pair) float64 {
	a, b := &m.magnets[p.a], &m.magnets[p.b]
	d := b.r.Sub(a.r)
	n := d.Unit()
	gap := d.Norm()
	for _, g := range [2]*magnetPart{a, b} {
		if !g.exact {
			continue
		}
		along := math.Abs(g.m.Unit().Dot(n))
		gap -= g.cyl.Height/2*along + g.cyl.Radius*math.Sqrt(math.Max(0, 1-along*along))
	}
	return gap
}

// cutFaces fills a cylinder's charges for its present numbers.
func (g *magnetPart) cutFaces() {
	g.own = g.cyl.Charges(g.axis, g.rule)
	for i := range g.own {
		g.own[i].At = g.own[i].At.Add(g.at)
	}
	g.charges = append(g.charges[:0], g.own...)
	if g.body < 0 { // where the gap puts it
		for i := range g.charges {
			g.charges[i].At = g.own[i].At.Add(g.r.Sub(g.at))
		}
	}
}

// pairForces adds what one pair of magnets does to their parts and returns its
// energy in J.
func (m *Model) pairForces(p *pair) float64 {
	a, b := &m.magnets[p.a], &m.magnets[p.b]
	if !a.exact && !b.exact {
		u, f, ta, tb := magnet.DipolePair(a.m, b.m, b.r.Sub(a.r))
		if b.body >= 0 {
			m.push(b.body, b.r, f, tb)
		}
		if a.body >= 0 {
			m.push(a.body, a.r, f.Scale(-1), ta)
		}
		return u
	}
	var u float64
	var f, n vec // on b, about the origin
	switch {
	case a.exact && b.exact:
		u, f, n = magnet.ChargesPair(a.charges, b.charges)
	case a.exact:
		u, f, n = magnet.ChargesDipole(a.charges, b.m, b.r)
	default:
		u, f, n = magnet.ChargesDipole(b.charges, a.m, a.r)
		f, n = f.Scale(-1), n.Scale(-1)
	}
	if b.body >= 0 {
		k := &m.bodies[b.body]
		k.extF, k.extN = k.extF.Add(f), k.extN.Add(n)
	}
	if a.body >= 0 {
		k := &m.bodies[a.body]
		k.extF, k.extN = k.extF.Sub(f), k.extN.Sub(n)
	}
	return u
}

// Bias says how far a pair of magnets is from what dipoles would do.
type Bias struct {
	First, Second string
	Distance      float64 // m, between centres with the toy at rest
	Force         float64 // the pair's force over that of dipoles of the same moments, less 1
	// Exact tells that both are given as cylinders, which the model reckons with:
	// Force is then of the toy at rest. Else it is what two coaxial NdFeB discs of
	// these moments, half as high as wide, would do: the bias of the model itself.
	Exact   bool
	Caution string // plain words, empty where the dipoles are good to 1 %
}

// usualRemanence in T is that of the discs that stand for magnets of which only
// the moment is given (common practice, no source).
const usualRemanence = 1.25

// disc is an NdFeB disc of the moment m, half as high as wide.
func disc(m float64) magnet.Cylinder {
	radius := math.Cbrt(math.Abs(m) * magnet.Mu0 / usualRemanence / math.Pi)
	return magnet.Cylinder{Radius: radius, Height: radius, Remanence: usualRemanence}
}

// DipoleBias compares every near pair of magnets with dipoles in their centres.
func (m *Model) DipoleBias() []Bias {
	m.prepare()
	m.kinematics(m.Rest())
	var out []Bias
	for _, p := range m.pairs {
		a, b := &m.magnets[p.a], &m.magnets[p.b]
		d := b.r.Sub(a.r)
		o := Bias{First: a.name, Second: b.name, Distance: d.Norm(), Exact: a.exact && b.exact}
		if o.Exact {
			_, f, _ := magnet.ChargesPair(a.charges, b.charges)
			_, fd, _, _ := magnet.DipolePair(a.m, b.m, d)
			size := fd.Norm()
			if size == 0 {
				continue
			}
			o.Force = f.Dot(fd)/(size*size) - 1
		} else {
			c, e := disc(a.moment), disc(b.moment)
			if a.exact {
				c = a.cyl
			}
			if b.exact {
				e = b.cyl
			}
			if a.moment == 0 || b.moment == 0 || o.Distance < (c.Height+e.Height)/2*1.05 {
				continue
			}
			o.Force = magnet.DipoleBias(c, e, o.Distance)
		}
		o.say()
		out = append(out, o)
	}
	return out
}

// say puts a bias of more than 1 % into words.
func (o *Bias) say() {
	if math.Abs(o.Force) <= 0.01 {
		return
	}
	more := "more"
	if o.Force < 0 {
		more = "less"
	}
	percent := fmt.Sprintf("%.2g %% %s", 100*math.Abs(o.Force), more)
	if o.Exact {
		o.Caution = fmt.Sprintf("%q and %q, %.3g mm apart at rest, push %s than dipoles of their moments. The model reckons with that; a fit of dipoles would come out wrong by about half of it in each moment",
			o.First, o.Second, 1e3*o.Distance, percent)
		return
	}
	o.Caution = fmt.Sprintf("%q and %q, %.3g mm apart at rest, are taken as dipoles; NdFeB discs of their moments would push about %s. Give cylinder = { diameter_mm, height_mm, remanence_T } for small gaps",
		o.First, o.Second, 1e3*o.Distance, percent)
}
