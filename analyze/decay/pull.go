package decay

import (
	"math"

	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

// pull is how magnets in the base bend a hinged part's restoring law: a shape
// that the rig's geometry gives, whose strength the motion tells. With G the
// magnets' torque against the angle, it is G(δ) − G′(0)·sin δ, scaled to a
// largest value of 1, so that the slope of the whole law at rest stays ω₀².
// It is odd in δ.
type pull struct {
	name string
	// Cubic Hermite pieces between pullNodes+1 even nodes from −π to π: values,
	// slopes, and the integral from 0.
	value, slope, sum [pullNodes + 1]float64
}

const (
	pullNodes = 4096
	pullStep  = 2 * math.Pi / pullNodes
)

// locate is the piece that holds d (wrapped to ±π) and the place in it, 0 to 1.
func locate(d float64) (i int, x float64) {
	d = math.Remainder(d, 2*math.Pi) + math.Pi
	x = d / pullStep
	i = min(int(x), pullNodes-1)
	return i, x - float64(i)
}

// at is the shape and its slope at d.
func (p *pull) at(d float64) (f, slope float64) {
	i, x := locate(d)
	a, b := p.value[i], p.value[i+1]
	s, e := p.slope[i]*pullStep, p.slope[i+1]*pullStep
	c2, c3 := 3*(b-a)-2*s-e, 2*(a-b)+s+e
	return a + x*(s+x*(c2+x*c3)), (s + x*(2*c2+3*x*c3)) / pullStep
}

// potential is the integral of the shape from 0 to d.
func (p *pull) potential(d float64) float64 {
	i, x := locate(d)
	return p.sum[i] + p.piece(i, x)
}

func (p *pull) piece(i int, x float64) float64 {
	a, b := p.value[i], p.value[i+1]
	s, e := p.slope[i]*pullStep, p.slope[i+1]*pullStep
	c2, c3 := 3*(b-a)-2*s-e, 2*(a-b)+s+e
	return pullStep * x * (a + x*(s/2+x*(c2/3+x*c3/4)))
}

// newPull tabulates an odd torque g(θ); nil where it is nothing but a sine.
func newPull(name string, g func(angle float64) float64) *pull {
	const h = 1e-4
	rate := func(d float64) float64 { // five-point formula, error h⁴
		return (8*(g(d+h)-g(d-h)) - (g(d+2*h) - g(d-2*h))) / (12 * h)
	}
	p := &pull{name: name}
	at0 := rate(0)
	most, own := 0.0, 0.0
	for i := range p.value {
		d := -math.Pi + float64(i)*pullStep
		p.value[i] = g(d) - at0*math.Sin(d)
		p.slope[i] = rate(d) - at0*math.Cos(d)
		most, own = math.Max(most, math.Abs(p.value[i])), math.Max(own, math.Abs(g(d)))
	}
	if !(most > 1e-9*own) {
		return nil
	}
	for i := range p.value {
		p.value[i] /= most
		p.slope[i] /= most
	}
	for i := range pullNodes {
		p.sum[i+1] = p.sum[i] + p.piece(i, 1)
	}
	mid := p.sum[pullNodes/2]
	for i := range p.sum {
		p.sum[i] -= mid
	}
	return p
}

// pullsOf are the shapes that the base's magnets give a hinged part: their
// torque, and how it changes when the gap is wider than the rig says, since the
// gap is never known well enough to be taken as given. nil where the part has no
// magnet, no base magnet acts, or the magnets lie so that the rest is not
// vertical.
func pullsOf(r *rig.Rig, part *rig.Part) []*pull {
	if part == nil || part.Joint != "hinge" && part.Joint != "" || part.Upright || part.On != "" && part.On != rig.Base {
		return nil
	}
	pivot := vec(part.PivotM)
	if part.PivotFromTrack {
		pivot = magnet.Vec{}
	}
	var own, fixed []dipole
	var base []rig.Magnet // of fixed, in order
	for _, m := range r.Magnets {
		d := dipole{at: vec(m.AtM), moment: direction(m.Axis).Scale(strength(&m))}
		switch m.Part {
		case part.Name:
			own = append(own, d)
		case rig.Base, "":
			d.at = d.at.Sub(pivot)
			fixed, base = append(fixed, d), append(base, m)
		default:
			return nil // it acts on a part that moves: no torque of the angle alone
		}
	}
	if len(own) == 0 || len(fixed) == 0 {
		return nil
	}
	for i, m := range base {
		if m.GapM.Set {
			// The rig gives the distance at rest instead of the place.
			near := nearest(own, fixed[i].at)
			fixed[i].at = near.Add(fixed[i].at.Sub(near).Unit().Scale(m.GapM.V))
		}
	}
	torque := func(wider float64) func(float64) float64 {
		return func(angle float64) float64 { return turning(own, fixed, angle, wider) }
	}
	g := torque(0)
	most := 0.0
	for i := range 720 {
		most = math.Max(most, math.Abs(g(float64(i)*math.Pi/720)))
	}
	for _, d := range []float64{0, 0.1, 0.4, 1} {
		if math.Abs(g(d)+g(-d)) > 1e-6*most {
			return nil // not alike on both sides
		}
	}
	const step = 1e-5 // m
	up, down := torque(step), torque(-step)
	var out []*pull
	for _, p := range []*pull{
		newPull("magnets' torque", g),
		newPull("magnets' torque, wider gap", func(d float64) float64 { return (up(d) - down(d)) / (2 * step) }),
	} {
		if p != nil {
			out = append(out, p)
		}
	}
	return out
}

// nearest is the place of the one of own that is nearest to a point, at rest.
func nearest(own []dipole, to magnet.Vec) magnet.Vec {
	best := own[0].at
	for _, o := range own {
		if o.at.Sub(to).Norm() < best.Sub(to).Norm() {
			best = o.at
		}
	}
	return best
}

type dipole struct{ at, moment magnet.Vec }

// turning is the restoring torque (towards −θ) of fixed dipoles on those of a
// part hanging from the origin, at the angle θ from hanging towards +x; the
// fixed ones are moved away from the pivot by wider.
func turning(own, fixed []dipole, angle, wider float64) float64 {
	s, c := math.Sincos(angle)
	turn := func(v magnet.Vec) magnet.Vec { return magnet.Vec{X: v.X*c - v.Z*s, Y: v.Y, Z: v.X*s + v.Z*c} }
	sum := 0.0
	for _, o := range own {
		at, m := turn(o.at), turn(o.moment)
		for _, f := range fixed {
			where := f.at
			if l := where.Norm(); l > 0 {
				where = where.Scale(1 + wider/l)
			}
			_, force, _, torque := magnet.DipolePair(f.moment, m, at.Sub(where))
			// θ grows by a turn about −y: its torque is −(r × F + τ)·ŷ.
			sum += at.Z*force.X - at.X*force.Z + torque.Y
		}
	}
	return sum
}

// strength is a magnet's moment as far as the rig knows it; 1 where it does not,
// since the overall strength is free.
func strength(m *rig.Magnet) float64 {
	if m.Moment.Set && m.Moment.V != 0 {
		return m.Moment.V
	}
	if c := m.Cylinder; c != nil && c.DiameterM.Set && c.HeightM.Set {
		b := c.RemanenceT.Or(1.2)
		return b / magnet.Mu0 * math.Pi / 4 * c.DiameterM.V * c.DiameterM.V * c.HeightM.V
	}
	return 1
}

func vec(v []float64) magnet.Vec {
	x := rig.XYZ(v)
	return magnet.Vec{X: x[0], Y: x[1], Z: x[2]}
}

// direction is a magnet's axis as a unit vector; up where the rig gives none.
func direction(axis []float64) magnet.Vec {
	v := vec(axis)
	if l := v.Norm(); l > 0 {
		return v.Scale(1 / l)
	}
	return magnet.Vec{Z: 1}
}
