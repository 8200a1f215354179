package toy

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/ode"
)

// Options sets how a motion is computed. The zero value is useful.
type Options struct {
	// Tol is the error allowed per step, relative and in rad and rad/s; default 1e-9.
	Tol float64
	// Passes also records each pass through the lowest (standing: highest) point
	// and each turning point of every part.
	Passes bool
	// Undriven leaves the coils' pushes out, as with the battery taken out.
	Undriven bool
	// MaxStep in s; default none.
	MaxStep float64

	general bool // tests: do not take a short way
}

func (o Options) tol() float64 {
	if o.Tol > 0 {
		return o.Tol
	}
	return 1e-9
}

// EventKind says what happened.
type EventKind uint8

// The kinds of event.
const (
	Pass   EventKind = iota // a part goes through the point where it would rest
	Turn                    // a part turns round
	Kick                    // a coil has pushed
	Refuse                  // a coil's magnet passed too slowly to be sensed
	Stick                   // dry friction stops a joint
	Slip                    // a joint comes loose again
)

func (k EventKind) String() string {
	return [...]string{"pass", "turn", "kick", "refuse", "stick", "slip"}[k]
}

// Event is one thing that happened in a motion.
type Event struct {
	T      float64
	Kind   EventKind
	Part   int     // index of the part
	Coil   int     // index of the coil for Kick and Refuse, else −1
	Energy float64 // J that a kick gave
	Charge float64 // A·s that it drew, of a coil given by its winding
	Rising bool    // Pass: the shown angle grows
}

// run holds what one motion needs.
type run struct {
	m        *Model
	opt      Options
	y        []float64
	onStep   func(s *ode.Solver) error
	onHit    func(e Event)
	kinds    []slot
	wasStuck []bool
}

// slot says what event function i of the solver is about.
type slot struct {
	kind eventSlot
	k    int
}

type eventSlot uint8

const (
	slotCoil eventSlot = iota
	slotArm
	slotDry
	slotPass
	slotTurn
)

// Run moves the toy from state y at time t0 until t1 and calls onStep after
// each step of the solver, which the callee may ask for dense output, and onHit
// for each event; either may be nil. y holds the end state afterwards. Steps
// allocate nothing.
func (m *Model) Run(ctx context.Context, t0 float64, y []float64, t1 float64, opt Options, onStep func(*ode.Solver) error, onHit func(Event)) error {
	if len(y) != m.StateLen() {
		return fmt.Errorf("a state of this toy has %d numbers, not %d", m.StateLen(), len(y))
	}
	if m.dirty {
		if err := m.refresh(); err != nil {
			return err
		}
	}
	tol := opt.tol()
	rhs := m.derive
	m.lamp, m.planar = nil, nil
	if !opt.general {
		if m.lamp = m.newLamp(); m.lamp != nil {
			rhs = m.deriveLamp
		} else if m.planar = m.newPlanar(); m.planar != nil {
			rhs = m.derivePlanar
		}
	}
	m.solver = ode.New(m.StateLen(), rhs, ode.Options{
		RelTol: tol, AbsTol: tol, MaxStep: opt.MaxStep, MaxSteps: 100_000 + int(10_000*math.Abs(t1-t0)),
	})
	r := run{m: m, opt: opt, y: y, onStep: onStep, onHit: onHit, wasStuck: make([]bool, len(m.bodies))}
	return r.move(ctx, t0, t1)
}

func (r *run) move(ctx context.Context, t0, t1 float64) error {
	m := r.m
	defer func() { m.free = true }()
	r.listen()
	for i := range m.coils {
		c := &m.coils[i]
		c.pushing, c.pulsing, c.armed = false, false, false
		if c.wound {
			m.kinematics(r.y)
			c.armed = m.approach(c) >= c.trigger
		}
	}
	m.nStuck = 0
	for k := range m.bodies {
		b := &m.bodies[k]
		m.stuck[k], m.sign[k] = false, 0
		if b.dry != 0 && b.joint != ball {
			m.sign[k] = sign(r.y[m.nq+b.v])
		}
	}
	m.free = false
	if err := r.settle(t0); err != nil {
		return err
	}
	s := m.solver
	s.Reset(t0, r.y)
	for n := 0; s.Time() != t1; n++ {
		if n%64 == 0 {
			if err := ctx.Err(); err != nil {
				copy(r.y, s.State())
				return err
			}
		}
		var hits []ode.Hit
		var err error
		end := r.pulseEnd(t1)
		if len(m.events) == 0 {
			err = s.Step(end)
		} else {
			hits, err = s.Advance(end, m.events)
		}
		if err != nil {
			copy(r.y, s.State())
			return fmt.Errorf("the motion of %q could not be computed further: %w", m.Name, err)
		}
		if err := r.meeting(s); err != nil {
			copy(r.y, s.State())
			return err
		}
		if r.onStep != nil {
			if err := r.onStep(s); err != nil {
				return err
			}
		}
		if len(hits) > 0 {
			if err := r.handle(hits); err != nil {
				return err
			}
		}
		if end != t1 && s.Time() == end {
			r.endPulses(end)
		}
	}
	copy(r.y, s.State())
	return nil
}

// touching in m is the distance at which two dipoles are taken to have met.
const touching = 1e-3

// meeting ends the motion where two magnets touch: the model knows no contact.
func (r *run) meeting(s *ode.Solver) error {
	m := r.m
	if len(m.pairs) == 0 || m.lamp != nil {
		return nil
	}
	if l := m.planar; l != nil {
		// The magnets are where the last step had them.
		near := false
		for _, p := range m.pairs {
			a, b := &l.magnets[p.a], &l.magnets[p.b]
			near = near || (a.x-b.x)*(a.x-b.x)+(a.z-b.z)*(a.z-b.z) < 2*touching*touching
		}
		if !near {
			return nil
		}
	}
	m.kinematics(s.State())
	for _, p := range m.pairs {
		a, b := &m.magnets[p.a], &m.magnets[p.b]
		d := b.r.Sub(a.r)
		if d.Dot(d) > touching*touching && !(a.exact || b.exact) {
			continue
		}
		if gap := m.faceGap(p); gap < touching && (gap < 0 || !a.exact || !b.exact) {
			return fmt.Errorf("the magnets %q and %q of %q meet at t = %.4g s, and the model knows no contact: set them farther apart, make them weaker, or let the toy go more gently", a.name, b.name, m.Name, s.Time())
		}
	}
	return nil
}

// pulseEnd is the end of the next pulse of a winding, or t1 when that is sooner.
func (r *run) pulseEnd(t1 float64) float64 {
	for i := range r.m.coils {
		if c := &r.m.coils[i]; c.pulsing && c.until < t1 {
			t1 = c.until
		}
	}
	return t1
}

// endPulses switches off the windings whose pulse ends at t.
func (r *run) endPulses(t float64) {
	m, s := r.m, r.m.solver
	copy(r.y, s.State())
	for i := range m.coils {
		c := &m.coils[i]
		if !c.pulsing || c.until > t {
			continue
		}
		c.pulsing = false
		r.tell(Event{
			T: t, Kind: Kick, Part: m.magnets[c.magnet].body, Coil: i,
			Energy: r.y[c.aux+1] - c.work0, Charge: r.y[c.aux] - c.charge0,
		})
	}
	s.Reset(t, r.y)
}

func sign(x float64) float64 {
	switch {
	case x > 0:
		return 1
	case x < 0:
		return -1
	}
	return 0
}

// listen sets up the event functions.
func (r *run) listen() {
	m := r.m
	m.events = m.events[:0]
	r.kinds = r.kinds[:0]
	add := func(s eventSlot, k int, e ode.Event) {
		m.events = append(m.events, e)
		r.kinds = append(r.kinds, slot{s, k})
	}
	for i := range m.coils {
		c := &m.coils[i]
		if r.opt.Undriven {
			continue
		}
		if c.wound {
			approach := func(_ float64, y []float64) float64 {
				m.kinematics(y)
				return m.approach(c)
			}
			add(slotCoil, i, ode.Event{G: approach, Direction: ode.Falling, Terminal: true})
			add(slotArm, i, ode.Event{G: func(t float64, y []float64) float64 {
				return approach(t, y) - c.trigger
			}, Direction: ode.Rising})
			continue
		}
		if c.kick == 0 {
			continue
		}
		add(slotCoil, i, ode.Event{Terminal: true, G: func(_ float64, y []float64) float64 {
			m.kinematics(y)
			if c.pushing {
				u := m.magnets[c.magnet].r.Sub(c.pushFrom).Dot(c.pushDir)
				return u * (c.width - u)
			}
			return m.coilPass(c)
		}})
	}
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.dry != 0 && b.joint != ball {
			dy := make([]float64, m.StateLen())
			add(slotDry, k, ode.Event{Terminal: true, G: func(t float64, y []float64) float64 {
				if !m.stuck[k] {
					return y[m.nq+b.v]
				}
				m.derive(t, y, dy)
				h := m.hold(k)
				return h*h - b.dry*b.dry
			}})
		}
		if !r.opt.Passes {
			continue
		}
		if b.joint == ball {
			rate := func(_ float64, y []float64) float64 { // of the polar angle's cosine
				_, _, polarRate, _, _ := m.Ball(y, k)
				return polarRate
			}
			add(slotPass, k, ode.Event{G: rate, Direction: ode.Rising})
			add(slotTurn, k, ode.Event{G: rate, Direction: ode.Falling})
			continue
		}
		add(slotPass, k, ode.Event{G: func(_ float64, y []float64) float64 { angle, _ := m.Angle(y, k); return angle }})
		add(slotTurn, k, ode.Event{G: func(_ float64, y []float64) float64 { _, rate := m.Angle(y, k); return rate }})
	}
}

// handle deals with the hits of one step, the last of which may have ended it.
func (r *run) handle(hits []ode.Hit) error {
	m, s := r.m, r.m.solver
	reset := false
	for _, h := range hits {
		w := r.kinds[h.Event]
		switch w.kind {
		case slotPass:
			r.tell(Event{T: h.T, Kind: Pass, Part: w.k, Coil: -1, Rising: h.Rising})
		case slotTurn:
			r.tell(Event{T: h.T, Kind: Turn, Part: w.k, Coil: -1})
		case slotCoil:
			if !reset {
				copy(r.y, s.State())
			}
			reset = true
			r.coilEvent(h, w.k)
		case slotArm:
			m.coils[w.k].armed = !m.coils[w.k].pulsing
		case slotDry:
			if !reset {
				copy(r.y, s.State())
			}
			reset = true
			r.dryEvent(h, w.k)
		}
	}
	if !reset {
		return nil
	}
	if err := r.settle(s.Time()); err != nil {
		return err
	}
	s.Reset(s.Time(), r.y)
	return nil
}

func (r *run) tell(e Event) {
	if r.onHit != nil {
		r.onHit(e)
	}
}

// coilEvent begins or ends a push.
func (r *run) coilEvent(h ode.Hit, i int) {
	m := r.m
	c := &m.coils[i]
	g := &m.magnets[c.magnet]
	m.kinematics(r.y)
	if c.wound {
		if c.armed && !c.pulsing {
			m.fire(c, h.T, r.y)
		} else if !c.pulsing {
			r.tell(Event{T: h.T, Kind: Refuse, Part: g.body, Coil: i})
		}
		return
	}
	if c.pushing {
		u := g.r.Sub(c.pushFrom).Dot(c.pushDir)
		c.pushing = false
		given := 0.0
		if u > c.width/2 {
			given = c.pushEnergy
		}
		r.tell(Event{T: h.T, Kind: Kick, Part: g.body, Coil: i, Energy: given})
		return
	}
	if !h.Rising {
		return // farthest from the coil
	}
	v := m.velocity(g.body, g.r)
	speed := v.Norm()
	if speed <= c.sensed*c.arm || speed < 1e-9*c.arm {
		r.tell(Event{T: h.T, Kind: Refuse, Part: g.body, Coil: i})
		return
	}
	e := c.kick * m.aside(c)
	if c.width > 0 {
		c.pushing, c.pushFrom, c.pushDir, c.pushEnergy = true, g.r, v.Scale(1/speed), e
		return
	}
	m.massMatrix()
	if m.impulse(c, e, r.y) {
		r.tell(Event{T: h.T, Kind: Kick, Part: g.body, Coil: i, Energy: e})
	}
}

// dryEvent stops a joint at its turning point, or lets go of one that is held
// with more than dry friction can; settle decides which way it goes.
func (r *run) dryEvent(h ode.Hit, k int) {
	m := r.m
	b := &m.bodies[k]
	if m.stuck[k] {
		m.stuck[k] = false
		m.nStuck--
		r.tell(Event{T: h.T, Kind: Slip, Part: k, Coil: -1})
	}
	r.y[m.nq+b.v] = 0
	m.sign[k] = 0
}

// settle decides for every joint with dry friction that does not move whether
// it is held, and else which way it starts: all that stand still are held
// first, then the one most overloaded is let go, until none is.
func (r *run) settle(t float64) error {
	m := r.m
	dy := m.scratch
	held := false
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.dry == 0 || b.joint == ball {
			continue
		}
		v := r.y[m.nq+b.v]
		switch {
		case v != 0:
			if m.stuck[k] { // a blow set it moving
				m.stuck[k] = false
				m.nStuck--
			}
			m.sign[k] = sign(v)
		case !m.stuck[k]:
			m.stuck[k], m.sign[k] = true, 0
			m.nStuck++
			held = true
		}
	}
	if !held {
		return nil
	}
	for {
		m.derive(t, r.y, dy)
		worst, by := -1, 0.0
		for k := range m.bodies {
			if !m.stuck[k] {
				continue
			}
			h := m.hold(k)
			if over := math.Abs(h) - m.bodies[k].dry*(1+1e-9); over > by {
				worst, by = k, over
				m.sign[k] = sign(h)
			}
		}
		if worst < 0 {
			break
		}
		m.stuck[worst] = false
		m.nStuck--
		// The sign was set above; those of others still held go back to zero.
		for k := range m.bodies {
			if m.stuck[k] {
				m.sign[k] = 0
			}
		}
	}
	for k := range m.bodies {
		if m.stuck[k] && !r.wasStuck[k] {
			r.tell(Event{T: t, Kind: Stick, Part: k, Coil: -1})
		}
		r.wasStuck[k] = m.stuck[k]
	}
	return nil
}
