package decay

import (
	"errors"
	"math"

	"lodeswing/analyze/ode"
)

// A law says which frictions act: bits of viscous, drag and dry.
type law uint8

const (
	viscous law = 1 << iota
	drag
	dry
	lawCount = 8
)

// laws are the seven that are weighed, the simplest first.
var laws = []law{viscous, drag, dry, viscous | drag, viscous | dry, drag | dry, viscous | drag | dry}

// String names a law in plain words.
func (l law) String() string {
	return [lawCount]string{
		"no friction", "viscous", "drag", "viscous + drag",
		"dry", "viscous + dry", "drag + dry", "viscous + drag + dry",
	}[l]
}

// model is δ̈ = −k·f(δ) − c₁δ̇ − c₂|δ̇|δ̇ − τ₀ sgn δ̇ with δ the angle from rest,
// all per unit inertia: k in s⁻², c₁ in s⁻¹, c₂ in rad⁻¹, τ₀ in rad s⁻².
// f(δ) = sin δ, or δ, plus β·δᵐ for each of powers, plus β·h(δ) for each of pulls.
//
// Its parameters are δ and δ̇ at the reference time, the rest angle, k, the β,
// and the law's frictions in the order viscous, drag, dry.
type model struct {
	sine   bool
	powers []int
	pulls  []*pull
	law    law
}

// places of the parameters that every model has.
const (
	atAngle = iota
	atRate
	atRest
	atK
	atShape // the first β, or the first friction
)

func (m model) size() int { return m.atFriction() + m.law.count() }

// atFriction is the place of the first friction.
func (m model) atFriction() int { return atShape + len(m.powers) + len(m.pulls) }

// even tells whether the potential is the same on both sides of rest.
func (m model) even() bool {
	for _, e := range m.powers {
		if e%2 == 0 {
			return false
		}
	}
	return true
}

func (l law) count() int { return int(l&1 + l>>1&1 + l>>2&1) }

// frictionAt is the place of a friction that the law has.
func (m model) frictionAt(which law) int {
	return m.atFriction() + (m.law & (which - 1)).count()
}

// friction reads one friction from p, 0 where the law lacks it.
func (m model) friction(p []float64, which law) float64 {
	if m.law&which == 0 {
		return 0
	}
	return p[m.frictionAt(which)]
}

// names of the parameters, for messages.
func (m model) names() []string {
	n := []string{"angle at start", "rate at start", "rest angle", "ω₀²"}
	for _, e := range m.powers {
		n = append(n, shapeName(e))
	}
	for _, h := range m.pulls {
		n = append(n, h.name)
	}
	for _, l := range []law{viscous, drag, dry} {
		if m.law&l != 0 {
			n = append(n, l.String()+" friction")
		}
	}
	return n
}

func (m model) units() []string {
	n := []string{"rad", "rad/s", "rad", "s⁻²"}
	for _, e := range m.powers {
		n = append(n, shapeUnit(e))
	}
	for range m.pulls {
		n = append(n, "1")
	}
	for i, l := range []law{viscous, drag, dry} {
		if m.law&l != 0 {
			n = append(n, []string{"s⁻¹", "rad⁻¹", "rad s⁻²"}[i])
		}
	}
	return n
}

func shapeName(e int) string { return "stiffness term of power " + string(rune('0'+e)) }
func shapeUnit(e int) string {
	return "rad⁻" + []string{"", "", "¹", "²", "³", "⁴", "⁵", "⁶"}[e]
}

// restoring is f and f' at d.
func (m model) restoring(p []float64, d float64) (f, slope float64) {
	if m.sine {
		f, slope = math.Sincos(d)
	} else {
		f, slope = d, 1
	}
	for i, e := range m.powers {
		b := p[atShape+i]
		low := ipow(d, e-1)
		f += b * low * d
		slope += b * float64(e) * low
	}
	for i, h := range m.pulls {
		b := p[atShape+len(m.powers)+i]
		hf, hs := h.at(d)
		f += b * hf
		slope += b * hs
	}
	return f, slope
}

func ipow(x float64, n int) float64 {
	y := 1.0
	for range n {
		y *= x
	}
	return y
}

// potential is k∫f from 0 to d, rad² s⁻².
func (m model) potential(p []float64, d float64) float64 {
	v := d * d / 2
	if m.sine {
		s := math.Sin(d / 2)
		v = 2 * s * s
	}
	for i, e := range m.powers {
		v += p[atShape+i] * ipow(d, e+1) / float64(e+1)
	}
	for i, h := range m.pulls {
		v += p[atShape+len(m.powers)+i] * h.potential(d)
	}
	return p[atK] * v
}

// mover integrates one model; it keeps the solver and its work space.
type mover struct {
	m      model
	p      []float64
	sign   float64 // of the rate, as friction sees it
	grad   bool
	solver *ode.Solver
	y      []float64
	event  []ode.Event
	at     []float64
	last   [2]float64 // angle from rest and rate at the last of the times
	rates  []float64  // when not nil, run writes the rates at the times here
}

// tolerance of the integration per step, relative; it leaves periods good to
// 1e-8, a thousandth of what the best clip can tell.
const tolerance = 1e-8

// pullTolerance is that of a magnet's law, in whose long narrow valley the search
// would otherwise be held up by the integration's own roughness.
const pullTolerance = 1e-11

// farthest is the angle from rest, rad, beyond which a trial of the fit is given
// up: a restoring law with a polynomial may let the part run away.
const farthest = 50

var errRunaway = errors.New("with these parameters the part runs away from its rest")

func newMover(m model, grad bool) *mover {
	mv := &mover{m: m, grad: grad}
	n := 2
	if grad {
		n += 2 * (m.size() - 1) // the rest angle only shifts
	}
	tol := tolerance
	if len(m.pulls) > 0 {
		tol = pullTolerance
	}
	tols := make([]float64, n)
	tols[0], tols[1] = tol, tol
	for i := 2; i < n; i++ {
		tols[i] = math.Inf(1) // derivatives follow the motion's own steps
	}
	mv.solver = ode.New(n, mv.rhs, ode.Options{RelTol: tol, AbsTols: tols})
	mv.y, mv.at = make([]float64, n), make([]float64, n)
	mv.event = []ode.Event{{G: func(_ float64, y []float64) float64 { return y[1] }, Terminal: true}}
	return mv
}

func (mv *mover) rhs(_ float64, y, dy []float64) {
	m, p := mv.m, mv.p
	d, v := y[0], y[1]
	f, slope := m.restoring(p, d)
	c1, c2, t0 := m.friction(p, viscous), m.friction(p, drag), m.friction(p, dry)
	dy[0] = v
	dy[1] = -p[atK]*f - c1*v - mv.sign*(c2*v*v+t0)
	if !mv.grad {
		return
	}
	ad, av := -p[atK]*slope, -c1-2*mv.sign*c2*v
	// Derivatives come in pairs (angle, rate) per parameter, the rest angle left out.
	s, ds := y[2:], dy[2:]
	for j := 0; j+1 < len(s); j += 2 {
		ds[j] = s[j+1]
		ds[j+1] = ad*s[j] + av*s[j+1]
	}
	ds[2*(atK-1)+1] -= f
	at := 2 * (atShape - 1)
	for _, e := range m.powers {
		ds[at+1] -= p[atK] * ipow(d, e)
		at += 2
	}
	for _, h := range m.pulls {
		hf, _ := h.at(d)
		ds[at+1] -= p[atK] * hf
		at += 2
	}
	if m.law&viscous != 0 {
		ds[at+1] -= v
		at += 2
	}
	if m.law&drag != 0 {
		ds[at+1] -= mv.sign * v * v
		at += 2
	}
	if m.law&dry != 0 {
		ds[at+1] -= mv.sign
	}
}

// run integrates from tRef, where p holds the state, through times (all at or
// after tRef and increasing, or all at or before it and decreasing). It writes
// the angle, rest included, to out, the rows of derivatives to jac when it was
// made for them (length len(times)·size), and gives each turning point to turn
// when that is not nil. It returns an error only when the integrator gives up.
func (mv *mover) run(p []float64, tRef float64, times, out, jac []float64, turn func(t, d float64)) error {
	m := mv.m
	mv.p = p
	for i := range mv.y {
		mv.y[i] = 0
	}
	mv.y[0], mv.y[1] = p[atAngle], p[atRate]
	if mv.grad {
		mv.y[2], mv.y[5] = 1, 1
	}
	t0 := m.friction(p, dry)
	f, _ := m.restoring(p, mv.y[0])
	pull := -p[atK] * f
	stuck := false
	mv.sign = math.Copysign(1, p[atRate])
	if p[atRate] == 0 {
		mv.sign = math.Copysign(1, pull)
		stuck = math.Abs(pull) <= t0
	}
	if len(times) == 0 {
		return nil
	}
	end := times[len(times)-1]
	forward := end >= tRef
	mv.solver.SetStep(math.Copysign(0.3/math.Sqrt(math.Abs(p[atK])+1e-12), end-tRef))
	mv.solver.Reset(tRef, mv.y)
	next := 0
	emit := func(at []float64) {
		out[next] = at[0] + p[atRest]
		mv.last = [2]float64{at[0], at[1]}
		if mv.rates != nil {
			mv.rates[next] = at[1]
		}
		if mv.grad {
			row := jac[next*m.size() : (next+1)*m.size()]
			row[atAngle], row[atRate], row[atRest] = at[2], at[4], 1
			for j := atK; j < m.size(); j++ {
				row[j] = at[2*j]
			}
		}
		next++
	}
	for next < len(times) && times[next] == tRef {
		emit(mv.y)
	}
	most := 2000 + 2*len(times)
	for steps := 0; next < len(times) && !stuck; steps++ {
		hits, err := mv.solver.Advance(end, mv.event)
		if err != nil {
			return err
		}
		if steps > most || math.Abs(mv.solver.State()[0]) > farthest {
			return errRunaway
		}
		now := mv.solver.Time()
		for next < len(times) && (forward && times[next] <= now || !forward && times[next] >= now) {
			mv.solver.At(times[next], mv.at)
			emit(mv.at)
		}
		if len(hits) == 0 {
			continue
		}
		copy(mv.y, mv.solver.State())
		if turn != nil {
			turn(now, mv.y[0])
		}
		f, _ := m.restoring(p, mv.y[0])
		pull := -p[atK] * f
		if forward && math.Abs(pull) <= t0 {
			// Dry friction holds it here. Its place still depends on the parameters,
			// its rate no more.
			mv.y[1] = 0
			for j := 3; j < len(mv.y); j += 2 {
				mv.y[j] = 0
			}
			stuck = true
			break
		}
		before := pull - mv.sign*t0
		mv.sign = -mv.sign
		// The rate's derivatives jump with the acceleration, the angle's do not,
		// since the rate is zero here (Müller, Acta Mech. 113, 1995: saltation).
		jump := (pull - mv.sign*t0) / before
		for j := 3; j < len(mv.y); j += 2 {
			mv.y[j] *= jump
		}
		mv.solver.Reset(now, mv.y)
	}
	for next < len(times) {
		emit(mv.y)
	}
	return nil
}
