package kick

import (
	"context"
	"errors"
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

// move moves a stretch from state y; res gets its residuals and place, where it is
// not nil, where the bob was.
func (f *freeFit) move(ctx context.Context, v *view, s *stretch, y []float64, res []float64, place [][3]float64) (energy float64, err error) {
	var at [][3]float64
	err = f.model.Sample(ctx, y, v.t[s.lo:s.hi+1], toy.Options{Undriven: true, Tol: 1e-9}, func(i int, y []float64) {
		at = f.model.Positions(y, at)
		f.see(v, s, i, at[f.ball.Bob], res)
		if place != nil {
			place[i] = at[f.ball.Bob]
		}
		if s.lo+i == s.mid {
			energy = f.own(y)
		}
	})
	return energy, err
}

// see enters the residuals of sample i of a stretch, the bob being at b in the toy.
func (f *freeFit) see(v *view, s *stretch, i int, b [3]float64, res []float64) {
	k := 1 + f.longer/math.Abs(f.arm[2])
	for e := range 3 {
		b[e] = f.pivot[e] + (b[e]-f.pivot[e])*k + f.shift[e]
	}
	u, w := v.moved.BobToPixel(b[0], b[1], b[2], f.radius)
	du, dv := v.at[s.lo+i][0]-u, v.at[s.lo+i][1]-w
	q := &v.white[s.lo+i]
	res[2*i], res[2*i+1] = q[0]*du, q[1]*du+q[2]*dv
}

const (
	ownAngle  = 1e-6 // rad, steps of a stretch's own unknowns
	ownRate   = 1e-5 // rad/s
	usualSpin = 20.0 // rad/s: no toy of this kind spins much faster
)

// ownSlopes fills the derivatives of a stretch by its own unknowns.
func (f *freeFit) ownSlopes(ctx context.Context, v *view, s *stretch) error {
	n, q, p := len(s.res), len(f.dims), len(f.shared)
	if len(s.jy) != n*q || len(s.jt) != n*p {
		s.jy, s.jt = make([]float64, n*q), make([]float64, n*p)
		s.ey, s.et = make([]float64, q), make([]float64, p)
	}
	other := make([]float64, n)
	d := make([]float64, 2*f.model.Freedoms())
	y := make([]float64, len(s.y))
	for j, dim := range f.dims {
		h := ownAngle
		if dim >= f.model.Freedoms() {
			h = ownRate
		}
		for i := range d {
			d[i] = 0
		}
		d[dim] = h
		copy(y, s.y)
		f.model.Displace(y, d)
		e2, err := f.move(ctx, v, s, y, other, nil)
		if err != nil {
			return err
		}
		for i := range other {
			s.jy[i*q+j] = (other[i] - s.res[i]) / h
		}
		s.ey[j] = (e2 - s.energy) / h
	}
	return nil
}

// sharedSlopes fills the derivatives by the common numbers.
func (f *freeFit) sharedSlopes(ctx context.Context) error {
	at := make([]float64, len(f.shared))
	for i := range at {
		at[i] = f.shared[i].x
	}
	p := len(f.shared)
	for j := range f.shared {
		h := f.shared[j].step
		at[j] += h
		f.set(at)
		at[j] -= h
		for _, v := range f.views {
			for _, s := range v.free {
				other := make([]float64, len(s.res))
				e, err := s.energy, error(nil)
				if f.shared[j].seen {
					for i, b := range s.place {
						f.see(v, s, i, b, other)
					}
				} else if e, err = f.move(ctx, v, s, s.y, other, nil); err != nil {
					return err
				}
				for i := range other {
					s.jt[i*p+j] = (other[i] - s.res[i]) / h
				}
				s.et[j] = (e - s.energy) / h
			}
		}
	}
	f.set(nil)
	return nil
}

// cost is the sum of squares of residuals and of what was known before.
func (f *freeFit) cost() float64 {
	sum := 0.0
	for _, v := range f.views {
		for _, s := range v.free {
			for _, r := range s.res {
				sum += r * r
			}
			sum += sq(f.spinOf(s) / usualSpin)
		}
	}
	for i := range f.shared {
		if s := &f.shared[i]; s.prior > 0 {
			sum += sq(s.x / s.prior)
		}
	}
	return sum
}

// spinOf is a stretch's turning about the part's own axis as it begins, rad/s.
func (f *freeFit) spinOf(s *stretch) float64 {
	_, _, _, _, spin := f.model.Ball(s.y, f.part)
	return spin
}

// solve lays the free motion through all stretches, by Levenberg's and Marquardt's
// method, in so many rounds at most.
func (f *freeFit) solve(ctx context.Context, rounds int) error {
	count := 0
	for _, v := range f.views {
		for _, s := range v.free {
			if s.y == nil {
				s.y = f.begin(v, s.lo)
			}
			count++
		}
	}
	if count < leastPasses+1 {
		return fmt.Errorf("kick: only %d stretches of free motion between the coil's pushes were seen; film for longer, or at more frames a second", count)
	}
	if err := f.residuals(ctx); err != nil {
		return err
	}
	damp, cost := 1e-3, f.cost()
	for range rounds {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := f.slopes(ctx); err != nil {
			return err
		}
		was := f.state()
		fell := false
		for range 6 {
			step, err := f.normal(damp)
			if err != nil {
				return err
			}
			f.take(step)
			if err := f.residuals(ctx); err == nil {
				if now := f.cost(); now < cost {
					fell = cost-now > 2e-4*now // beyond that nothing moves by a tenth of its uncertainty
					cost, damp = now, math.Max(1e-9, damp/10)
					break
				}
			}
			f.put(was)
			if err := f.residuals(ctx); err != nil {
				return err
			}
			damp *= 10
		}
		if !fell {
			break
		}
	}
	if err := f.residuals(ctx); err != nil {
		return err
	}
	if err := f.slopes(ctx); err != nil {
		return err
	}
	step, err := f.normal(0)
	if err != nil {
		return err
	}
	for i := range step.blocks {
		b := &step.blocks[i]
		b.s.judge(b.inv, b.ab, len(f.dims), len(f.shared))
	}
	return f.conclude(ctx, step.cov)
}

// approach solves roughly, from several strengths of the magnets where the rig gives
// not even a start.
func (f *freeFit) approach(ctx context.Context) error {
	tries := []float64{0}
	if len(f.guessed) > 0 {
		tries = []float64{-0.7, 0, 2} // of a start of 1 A·m²
	}
	first := f.state()
	best, least := first, math.Inf(1)
	var failed error
	for _, x := range tries {
		f.put(first)
		for _, g := range f.guessed {
			f.shared[g].x = x
		}
		f.set(nil)
		for _, v := range f.views {
			for _, s := range v.free {
				s.y = nil
			}
		}
		if err := f.solve(ctx, 5); err != nil {
			if ctx.Err() != nil {
				return ctx.Err()
			}
			failed = err
			continue
		}
		if c := f.cost(); c < least {
			least, best = c, f.state()
		}
	}
	if math.IsInf(least, 1) {
		return failed
	}
	f.put(best)
	return nil
}

// residuals moves all stretches.
func (f *freeFit) residuals(ctx context.Context) error {
	for _, v := range f.views {
		for _, s := range v.free {
			if n := s.hi - s.lo + 1; len(s.place) != n {
				s.res, s.place = make([]float64, 2*n), make([][3]float64, n)
			}
			var err error
			if s.energy, err = f.move(ctx, v, s, s.y, s.res, s.place); err != nil {
				return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
			}
		}
	}
	return nil
}

func (f *freeFit) slopes(ctx context.Context) error {
	for _, v := range f.views {
		for _, s := range v.free {
			if err := f.ownSlopes(ctx, v, s); err != nil {
				return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
			}
		}
	}
	if err := f.sharedSlopes(ctx); err != nil {
		return fmt.Errorf("kick: the free motion cannot be reckoned: %w", err)
	}
	return nil
}

// state keeps all unknowns, and put puts them back.
func (f *freeFit) state() (x [][]float64) {
	x = append(x, nil)
	for i := range f.shared {
		x[0] = append(x[0], f.shared[i].x)
	}
	for _, v := range f.views {
		for _, s := range v.free {
			x = append(x, append([]float64(nil), s.y...))
		}
	}
	return x
}

func (f *freeFit) put(x [][]float64) {
	for i := range f.shared {
		f.shared[i].x = x[0][i]
	}
	n := 1
	for _, v := range f.views {
		for _, s := range v.free {
			copy(s.y, x[n])
			n++
		}
	}
	f.set(nil)
}

// block is one stretch's part of the normal equations: the inverse of its own, own
// times common, and the right-hand side.
type block struct {
	s            *stretch
	inv, ab, rhs []float64
}

// newton is one step of all unknowns, and the covariance of the common ones.
type newton struct {
	blocks []block
	cov    []float64
	common []float64
}

// normal solves the normal equations with each stretch's own unknowns eliminated.
func (f *freeFit) normal(damp float64) (*newton, error) {
	p, q := len(f.shared), len(f.dims)
	step := &newton{common: make([]float64, p)}
	sum, rhs := make([]float64, p*p), make([]float64, p)
	for i := range f.shared {
		if s := &f.shared[i]; s.prior > 0 {
			sum[i*p+i] += 1 / sq(s.prior)
			rhs[i] -= s.x / sq(s.prior)
		} else {
			sum[i*p+i] += 1e-12 / sq(s.step)
		}
	}
	for _, v := range f.views {
		for _, s := range v.free {
			b := block{s: s, ab: make([]float64, q*p), rhs: make([]float64, q)}
			aa := make([]float64, q*q)
			for i := range s.res {
				own, all := s.jy[i*q:(i+1)*q], s.jt[i*p:(i+1)*p]
				for j, x := range own {
					b.rhs[j] -= x * s.res[i]
					for k, y := range own {
						aa[j*q+k] += x * y
					}
					for k, y := range all {
						b.ab[j*p+k] += x * y
					}
				}
				for j, x := range all {
					rhs[j] -= x * s.res[i]
					for k, y := range all {
						sum[j*p+k] += x * y
					}
				}
			}
			// The spin about its own axis hardly shows.
			aa[(q-1)*q+q-1] += 1 / sq(usualSpin)
			b.rhs[q-1] -= f.spinOf(s) / sq(usualSpin)
			for j := range q {
				aa[j*q+j] *= 1 + damp
			}
			var ok bool
			if b.inv, ok = inverse(aa, q); !ok {
				return nil, errors.New("kick: a stretch of free motion does not tell where it began; look at the track's figure for jumps")
			}
			step.blocks = append(step.blocks, b)
		}
	}
	for i := range p {
		sum[i*p+i] *= 1 + damp
	}
	for i := range step.blocks {
		b := &step.blocks[i]
		for j := range q {
			for k := range q {
				w := b.inv[j*q+k]
				for a := range p {
					x := w * b.ab[j*p+a]
					rhs[a] -= x * b.rhs[k]
					for c := range p {
						sum[a*p+c] -= x * b.ab[k*p+c]
					}
				}
			}
		}
	}
	var ok bool
	if step.cov, ok = inverse(sum, p); !ok {
		return nil, errors.New("kick: the free motion between the pushes does not determine what the rig leaves open; give more numbers in the rig")
	}
	for j := range p {
		for k := range p {
			step.common[j] += step.cov[j*p+k] * rhs[k]
		}
	}
	return step, nil
}

// take moves all unknowns by a step.
func (f *freeFit) take(step *newton) {
	p, q := len(f.shared), len(f.dims)
	for j := range f.shared {
		f.shared[j].x += step.common[j]
	}
	d := make([]float64, 2*f.model.Freedoms())
	for i := range step.blocks {
		b := &step.blocks[i]
		own := append([]float64(nil), b.rhs...)
		for j := range q {
			for k := range p {
				own[j] -= b.ab[j*p+k] * step.common[k]
			}
		}
		for j := range q {
			x := 0.0
			for k := range q {
				x += b.inv[j*q+k] * own[k]
			}
			d[f.dims[j]] = x
		}
		f.model.Displace(b.s.y, d)
	}
	f.set(nil)
}

// dropTouched leaves out the stretches whose residuals are far beyond those of the
// others, and tells whether there were any.
func (f *freeFit) dropTouched() bool {
	per := func(s *stretch) float64 {
		sum := 0.0
		for _, r := range s.res {
			sum += r * r
		}
		return sum / math.Max(1, float64(len(s.res)-len(f.dims)))
	}
	var all []float64
	for _, v := range f.views {
		for _, s := range v.free {
			all = append(all, per(s))
		}
	}
	slices.Sort(all)
	usual := all[len(all)/2]
	n := 0
	for _, v := range f.views {
		n += len(v.free)
		v.free = slices.DeleteFunc(v.free, func(s *stretch) bool {
			odd := per(s) > 10*usual
			if odd {
				v.hands = append(v.hands, v.t[s.mid])
			}
			return odd
		})
		n -= len(v.free)
	}
	return n > 0
}

// judge keeps what a stretch's own pictures leave open of its energy, and what the
// common unknowns do to it.
func (s *stretch) judge(inv, ab []float64, q, p int) {
	s.variance = 0
	lean := make([]float64, q) // energy by its own unknowns times their covariance
	for j := range q {
		for k := range q {
			lean[j] += inv[j*q+k] * s.ey[k]
		}
	}
	for j := range q {
		s.variance += s.ey[j] * lean[j]
	}
	s.common = make([]float64, p)
	for a := range p {
		s.common[a] = s.et[a]
		for j := range q {
			s.common[a] -= lean[j] * ab[j*p+a]
		}
	}
}

// conclude scales by the residuals, splits what is common into independent parts,
// and takes rates and frictions from the solution.
func (f *freeFit) conclude(ctx context.Context, cov []float64) error {
	p, q := len(f.shared), len(f.dims)
	chi, n := 0.0, -p
	for _, v := range f.views {
		for _, s := range v.free {
			for _, r := range s.res {
				chi += r * r
			}
			n += len(s.res) - q
		}
	}
	// Below one where the pictures were made to count for less.
	f.noise = math.Sqrt(math.Max(1, chi/float64(max(1, n))))
	for i := range cov {
		cov[i] *= sq(f.noise)
	}
	// Frictions, as the free motion tells them.
	var at []int
	var which []int
	for i := range f.shared {
		for j, q := range frictionNames {
			if f.shared[i].name == f.ball.Rig.Parts[0].Name+".friction."+q {
				at, which = append(at, i), append(which, j)
			}
		}
	}
	f.info = [9]float64{}
	if len(at) > 0 {
		c := make([]float64, len(at)*len(at))
		for i, a := range at {
			for k, b := range at {
				c[i*len(at)+k] = cov[a*p+b]
			}
			x, err := f.model.Index(f.shared[a].name)
			if err != nil {
				return err
			}
			f.friction[which[i]] = f.model.Get(x)
		}
		inv, ok := inverse(c, len(at))
		if !ok {
			return errors.New("kick: the frictions cannot be told apart")
		}
		for i := range at {
			for k := range at {
				f.info[3*which[i]+which[k]] = inv[i*len(at)+k]
			}
		}
	}
	// cov = L·Lᵀ: columns of L are independent.
	root, ok := cholesky(cov, p)
	if !ok {
		return errors.New("kick: what the rig leaves open is not determined")
	}
	f.root = root
	for _, v := range f.views {
		for _, s := range v.free {
			s.variance *= sq(f.noise)
			common := make([]float64, p)
			for e := range p {
				for a := range p {
					common[e] += s.common[a] * root[e][a]
				}
			}
			s.common = common
		}
	}
	return f.again(ctx)
}

// again takes directions, passes and rates once more, by the solution.
func (f *freeFit) again(ctx context.Context) error {
	for _, v := range f.views {
		if err := v.directions(f); err != nil {
			return fmt.Errorf("kick: %w", err)
		}
		v.meet(f)
		v.rate, v.polar = make([]float64, len(v.t)), make([]float64, len(v.t))
		for i := range v.t {
			v.rate[i], v.polar[i] = v.turning(i), math.Asin(math.Min(1, math.Hypot(v.local[i][0], v.local[i][1])))
			if math.IsNaN(v.rate[i]) && i > 0 {
				v.rate[i], v.polar[i] = v.rate[i-1], v.polar[i-1]
			}
		}
		for _, s := range v.free {
			err := f.model.Sample(ctx, s.y, v.t[s.lo:s.hi+1], toy.Options{Undriven: true, Tol: 1e-9}, func(i int, y []float64) {
				polar, _, polarRate, azimuthRate, _ := f.model.Ball(y, f.part)
				v.rate[s.lo+i], v.polar[s.lo+i] = math.Hypot(polarRate, azimuthRate*math.Sin(polar)), polar
			})
			if err != nil {
				return err
			}
		}
	}
	return nil
}

// lowest is the least potential energy along a view's path.
func (f *freeFit) lowest(v *view) float64 {
	low := math.Inf(1)
	for i := range v.t {
		if math.IsNaN(v.local[i][0]) {
			continue
		}
		y := f.begin(v, i)
		e := f.model.Energy(y)
		low = math.Min(low, e.Gravity+e.Spring+e.Magnetic)
	}
	return low
}

// cholesky returns the columns of L with a = L·Lᵀ.
func cholesky(a []float64, n int) ([][]float64, bool) {
	l := make([]float64, n*n)
	for i := range n {
		for j := 0; j <= i; j++ {
			s := a[i*n+j]
			for k := range j {
				s -= l[i*n+k] * l[j*n+k]
			}
			if i == j {
				if !(s > 0) {
					return nil, false
				}
				l[i*n+i] = math.Sqrt(s)
			} else {
				l[i*n+j] = s / l[j*n+j]
			}
		}
	}
	cols := make([][]float64, n)
	for e := range n {
		cols[e] = make([]float64, n)
		for i := e; i < n; i++ {
			cols[e][i] = l[i*n+e]
		}
	}
	return cols, true
}
