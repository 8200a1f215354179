package kick

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// stretch is one stretch of free motion of a view, from sample lo to hi.
type stretch struct {
	lo, hi, mid int
	y           []float64 // state of the toy at sample lo
	energy      float64   // J, at sample mid
	variance    float64   // J², from the pictures of the stretch itself
	common      []float64 // J, by each independent thing that all stretches have in common

	place [][3]float64 // of the bob in the toy, per sample
	res   []float64    // weighted residuals, px over their uncertainties
	jy    []float64    // by its own unknowns
	jt    []float64    // by the common ones
	ey    []float64    // energy by its own
	et    []float64    // and by the common ones
}

// shared is one number that all stretches have in common.
type shared struct {
	name  string
	prior float64 // standard uncertainty before the clip; 0: nothing is known
	step  float64
	x     float64 // its change from the rig's value
	apply func(x float64)
	seen  bool // it changes how the toy is seen, not how it moves
}

// freeFit lays the toy's own free motion through all stretches together: by
// Gauss-Newton, with each stretch's own unknowns eliminated.
type freeFit struct {
	ball   *Ball
	model  *toy.Model
	part   int
	views  []*view
	shared []shared
	pivot  [3]float64
	arm    [3]float64 // of the bob, in the part's axes
	magnet [3]float64 // of the sensed magnet
	radius float64    // of the ball that is seen

	shift  [3]float64 // of the pivot from where the rig and the track's origin put it
	longer float64    // m, of the bob's distance
	by     []float64  // of the camera
	spin   float64    // inertia about its own axis

	dims     []int // of Displace
	root     [][]float64
	common   [][]float64 // change of each row's net by each column of root
	friction [3]float64
	info     [9]float64 // of the frictions, by the free motion
	noise    float64
	guessed  []int // of shared: magnets of which the rig does not say how strong they are
}

func newFreeFit(b *Ball, part string) (*freeFit, error) {
	r := b.Rig.Clone()
	f := &freeFit{ball: b, noise: 1}
	p := &r.Parts[0]
	if !p.Friction.Viscous.Set {
		p.Friction.Viscous.V, p.Friction.Viscous.Set = 1e-4*p.Inertia.V/3e-3, true
	}
	guessed := map[string]bool{}
	for i := range r.Magnets {
		g := &r.Magnets[i]
		v, start := &g.Moment, 1.0
		if g.Cylinder != nil {
			v, start = &g.Cylinder.RemanenceT, 1.2
		}
		if !v.Set {
			v.V, v.Set, guessed[g.Name] = start, true, true
		}
	}
	m, err := toy.New(r)
	if err != nil {
		return nil, err
	}
	f.model = m
	if f.part, err = m.Part(part); err != nil {
		return nil, err
	}
	f.pivot = rig.XYZ(p.PivotM)
	bob := &r.Bobs[b.Bob]
	f.arm = rig.XYZ(bob.AtM)
	if bob.Ball && bob.DiameterM.Set {
		f.radius = bob.DiameterM.V / 2
	}
	f.magnet = rig.XYZ(r.FindMagnet(b.Name).AtM)
	if f.arm[0] != 0 || f.arm[1] != 0 || f.magnet[0] != 0 || f.magnet[1] != 0 {
		return nil, fmt.Errorf("the bob and the magnet of %q do not sit on its long axis, so that its direction alone does not tell where they are", part)
	}
	f.spin = p.SpinInertia.Or(0)
	own := map[int]bool{}
	for _, v := range m.OwnTurns() {
		own[v] = true
	}
	for i := range m.Freedoms() {
		if !own[i] {
			f.dims = append(f.dims, i)
		}
	}
	for i := range m.Freedoms() {
		f.dims = append(f.dims, m.Freedoms()+i)
	}
	number := func(name string, u, step float64) {
		i, err := m.Index(name)
		if err != nil {
			return
		}
		was := m.Get(i)
		f.shared = append(f.shared, shared{name: name, prior: u, step: step, apply: func(x float64) { m.Set(i, was+x) }})
	}
	const uPlace = 0.5e-3
	for i := range r.Magnets {
		g := &r.Magnets[i]
		v, name := g.Moment, g.Name+".moment"
		if g.Cylinder != nil {
			v, name = g.Cylinder.RemanenceT, g.Name+".cylinder.remanence"
		}
		u := v.U
		if v.Fit {
			u = 0.5 * math.Abs(v.V)
		}
		if guessed[g.Name] {
			u = 5 * math.Abs(v.V)
			f.guessed = append(f.guessed, len(f.shared))
		}
		number(name, u, 1e-3*math.Abs(v.V))
		u = g.UAtM.Or(uPlace)
		if g.Part == rig.Base || g.Part == "" {
			if g.GapM.Set {
				ug := g.GapM.U
				if g.GapM.Fit || g.GapFit {
					ug = 0.01
				}
				number(g.Name+".gap", ug, 1e-5)
			}
			number(g.Name+".at.x", u, 1e-5)
			number(g.Name+".at.y", u, 1e-5)
		}
		number(g.Name+".at.z", u, 1e-5)
	}
	number(part+".inertia", math.Max(p.Inertia.U, 0.002*p.Inertia.V), 1e-4*p.Inertia.V)
	for j, q := range frictionNames {
		v := [3]rig.Value{p.Friction.Viscous, p.Friction.Drag, p.Friction.Dry}[j]
		if !(v.Known() && v.V == 0) {
			size := [3]float64{1e-5, 1e-5, 1e-6}[j]
			number(part+".friction."+q, 0, size)
		}
	}
	f.shared = append(f.shared, shared{name: "bob's distance", seen: true, prior: uPlace, step: 1e-5, apply: func(x float64) { f.longer = x }})
	axes := [2]int{0, 2}
	if r.Camera.FromAbove {
		axes[1] = 1
	}
	for _, e := range axes {
		const wide = 0.03
		f.shared = append(f.shared, shared{name: "pivot in the picture", seen: true, prior: wide, step: 1e-5, apply: func(x float64) { f.shift[e] = x }})
	}
	return f, nil
}

var frictionNames = [3]string{"viscous", "drag", "dry"}

// look adds the cameras' own unknowns and takes the pivot from the track.
func (f *freeFit) look(clips []Clip) {
	most := 0
	for i := range clips {
		most = max(most, len(clips[i].Track.Cal.Lens.Unsure))
	}
	f.by = make([]float64, most)
	for e := range most {
		f.shared = append(f.shared, shared{name: "camera", seen: true, prior: 1, step: 0.02, apply: func(x float64) { f.by[e] = x }})
	}
	start := f.hung()
	n := 0
	for i := range f.shared {
		if s := &f.shared[i]; s.name == "pivot in the picture" {
			s.x = start[n]
			// The prior holds about where the path puts it.
			from, inner := start[n], s.apply
			s.x, s.apply = 0, func(x float64) { inner(from + x) }
			n++
		}
	}
	f.set(nil)
}

// hung guesses how far the pivot lies from where the rig and the track's origin put
// it: so that the bob, hanging, would be seen in the middle of its path.
func (f *freeFit) hung() (start [2]float64) {
	v := f.views[0]
	var u, w []float64
	for _, at := range v.at {
		u, w = append(u, at[0]), append(w, at[1])
	}
	slices.Sort(u)
	slices.Sort(w)
	lo, hi := len(u)/50, len(u)-1-len(u)/50
	middle := [2]float64{(u[lo] + u[hi]) / 2, (w[lo] + w[hi]) / 2}
	axis := 2
	if f.ball.Rig.Camera.FromAbove {
		axis = 1
	}
	see := func() (float64, float64) {
		f.shift = [3]float64{}
		f.shift[0], f.shift[axis] = start[0], start[1]
		return f.sphere(v, [2]float64{})
	}
	f.by = make([]float64, len(f.by))
	v.moved = v.cam
	for range 10 {
		const h = 1e-4
		x, y := see()
		start[0] += h
		xa, ya := see()
		start[0] -= h
		start[1] += h
		xb, yb := see()
		start[1] -= h
		a, b, c, d := (xa-x)/h, (xb-x)/h, (ya-y)/h, (yb-y)/h
		det := a*d - b*c
		ex, ey := middle[0]-x, middle[1]-y
		dx, dy := (d*ex-b*ey)/det, (a*ey-c*ex)/det
		if math.IsNaN(dx+dy) || math.Abs(dx)+math.Abs(dy) > 2 {
			return [2]float64{}
		}
		start[0], start[1] = start[0]+dx, start[1]+dy
	}
	return start
}

// set applies the common numbers; at is their changes, nil for those that stand.
func (f *freeFit) set(at []float64) {
	for i := range f.shared {
		x := f.shared[i].x
		if at != nil {
			x = at[i]
		}
		f.shared[i].apply(x)
	}
	for _, v := range f.views {
		v.moved = v.cam.Moved(f.by)
	}
}

// sphere is where the bob is seen when its direction has the horizontal
// components p.
func (f *freeFit) sphere(v *view, p [2]float64) (x, y float64) {
	d := [3]float64{p[0], p[1], -math.Sqrt(math.Max(0, 1-p[0]*p[0]-p[1]*p[1]))}
	r := math.Abs(f.arm[2]) + f.longer
	return v.moved.BobToPixel(f.pivot[0]+f.shift[0]+r*d[0], f.pivot[1]+f.shift[1]+r*d[1], f.pivot[2]+f.shift[2]+r*d[2], f.radius)
}

// magnetAt is the sensed magnet's place for a direction.
func (f *freeFit) magnetAt(p [2]float64) [3]float64 {
	r := math.Abs(f.magnet[2])
	return [3]float64{f.pivot[0] + r*p[0], f.pivot[1] + r*p[1], f.pivot[2] - r*math.Sqrt(math.Max(0, 1-p[0]*p[0]-p[1]*p[1]))}
}

// begin is the state of the toy by the smoothed directions at a sample.
func (f *freeFit) begin(v *view, i int) []float64 {
	y := f.model.Rest()
	p := v.local[i]
	x, z := p[0], p[1]
	across := math.Max(1e-7, math.Hypot(x, z))
	polar, azimuth := math.Asin(math.Min(1, across)), math.Atan2(z, x)
	polarRate := (x*p[2] + z*p[3]) / across / math.Sqrt(math.Max(1e-6, 1-across*across))
	azimuthRate := (x*p[3] - z*p[2]) / (across * across)
	f.model.SetBall(y, f.part, polar, azimuth, polarRate, azimuthRate, 0)
	return y
}

// own is the energy of a state without that of the spin, which no magnet on the
// axis and no coil changes.
func (f *freeFit) own(y []float64) float64 {
	_, _, _, _, spin := f.model.Ball(y, f.part)
	return f.model.Energy(y).Total() - 0.5*f.spin*spin*spin
}
