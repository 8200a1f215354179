// Package toy is the model of a magnet toy: rigid parts on hinges, pins and
// ball joints, with gravity, torsion springs, friction, magnets and coils.
//
// What comes in: a rig (track/rig), a start, a time span. What goes out: the
// motion with dense output and events, energies, positions of the rig's bobs in
// world axes, places of rest with their stability and small-motion modes, and
// derivatives along a motion. Units are SI throughout: m, s, rad, kg, A·m², T,
// J, N·m. World axes: x right in the picture, y away from the camera, z up.
//
// A part is described in its own axes as it hangs, its pivot at their origin; a
// standing part too (its head at negative z), turned by π when it stands. Hinges
// and pins turn about −y, so that what hangs swings towards +x at a positive angle,
// or about +z where the rig says flat: counter-clockwise in the picture either way.
// Angles that people see are to the vertical, also of a part that rides on
// another, and zero where an unmagnetised part would rest: Angle returns θ of a
// hanging part and π − θ of a standing one.
//
// Equations of motion: the mass matrix by composite rigid bodies and the bias
// forces by the recursive Newton-Euler scheme, in spatial vectors about the
// world's origin (R. Featherstone, "Rigid Body Dynamics Algorithms", Springer
// 2008, chapters 5 and 6); ball joints carry a unit quaternion and the angular
// velocity in the part's own axes. Integration is by analyze/ode.
package toy

import (
	"lodeswing/analyze/magnet"
	"lodeswing/analyze/ode"
	"lodeswing/track/rig"
)

// vec is a vector in space.
type vec = magnet.Vec

// joint is the kind of a part's joint.
type joint uint8

const (
	hinge joint = iota
	pin
	ball
)

// body is one part.
type body struct {
	name   string
	parent int // index of the part that it is on; −1: the base
	tree   int // index in trees
	joint  joint
	flat   bool // a pin about z
	stands bool // shown angle is π − θ
	axis   vec  // of a hinge or pin, the same in its own and its parent's axes
	q, v   int  // where its coordinates and its speeds begin in the state
	nv     int  // 1, or 3 for a ball joint

	pivot, centre        vec // pivot in the parent's axes, centre of mass in its own
	mass, inertia, spin  float64
	viscous, drag, dry   float64
	rate, cubic, restRad float64

	// What follows from the above.
	comInertia   sym  // about the centre of mass, own axes
	pivotInertia sym  // about the pivot, own axes
	alone        bool // on the base, carrying nothing
	arm          vec  // pivot × axis, for a part alone on one axis

	// work space, refreshed by kinematics
	rot    rotation // own axes -> world
	p, c   vec      // pivot and centre of mass in the world
	w, vo  vec      // angular velocity, and velocity of the body's point at the world's origin
	aw, ao vec      // their rates when all joint accelerations are zero
	own    composite
	comp   composite // with all that it carries
	fn, ff vec       // torque about the origin and force that its motion needs
	extN   vec       // torque about the origin and force from outside
	extF   vec
}

// tree is a part on the base with all that it carries: n degrees of freedom
// from v on.
type tree struct{ v, n int }

// magnetPart is one magnet.
type magnetPart struct {
	name string
	body int // −1: the base
	at   vec // own axes
	axis vec // own axes, unit, south to north
	// The axis as the rig gives it, and by how much it is off: turn in the plane of x
	// and z (+z towards +x), lean across that plane (towards +y), rad.
	given      vec
	turn, lean float64
	// moment in A·m² along axis; for a cylinder it follows from remanence.
	moment       float64
	cylinder     bool
	cyl          magnet.Cylinder
	ownM         vec  // moment, own axes
	r, m         vec  // world: place and moment
	exact        bool // a cylinder whose charges are summed, not its dipole
	rule         magnet.Rule
	own, charges []magnet.Charge // in its own axes and in the world
	// gap, when above zero, sets a base magnet's distance from the moving magnet
	// gapTo, both at rest, in the direction of at.
	gap   float64
	gapTo int
}

// coilPart is one kicker.
type coilPart struct {
	name            string
	magnet          int // the magnet that it senses and pushes
	at, axis        vec
	kick, sensed    float64
	width, reach    float64 // the push lasts over width, and is felt to the side as far as reach
	eddy, eddyReach float64
	arm             float64 // distance of the sensed magnet from its part's pivot
	turns, radius   float64
	ohm, supply     float64
	pulse, trigger  float64
	capacity        float64
	wound           bool // the push follows from a current, not from kick
	winding
	pushing    bool // now
	pushFrom   vec  // where the push began
	pushDir    vec  // and where it points
	pushEnergy float64
}

type bobPart struct {
	name string
	body int
	at   vec
}

// Model is a toy ready to move. It holds its own work space: use Clone for
// another goroutine.
type Model struct {
	Name    string
	bodies  []body
	magnets []magnetPart
	pairs   []pair
	// Least distance of each pair's centres and faces in all that chooseRules
	// looked at, m.
	nearest, gaps []float64
	coils         []coilPart
	bobs          []bobPart
	gravity       float64
	starts        []rig.Start

	nq, nv, naux int
	params       []param
	dirty        bool
	trees        []tree
	allAlone     bool

	sA, sB               []vec // motion vectors of the degrees of freedom, world, about the origin
	dofOf                []int // body of each degree of freedom
	mass                 []float64
	chol                 []float64
	rhs                  []float64
	acc                  []float64
	sign                 []float64 // direction that dry friction resists, per body
	scratch, tangentWork []float64
	stuck                []bool // held by dry friction, per body
	free                 bool   // no event decides signs: take them from the speeds
	nStuck               int
	solver               *ode.Solver
	events               []ode.Event
	lamp                 *lamp // the short ways of the motion under way, or nil
	planar, planarWork   *planar
}

// pair is two magnets that act on each other and can move against each other.
type pair struct{ a, b int }
