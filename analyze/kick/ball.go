package kick

import (
	"context"
	"errors"
	"fmt"
	"math"

	"lodeswing/analyze/finding"
	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/rig"
)

// A part on a ball joint has no turning points in common with its picture. Its
// energy is taken instead from the free motion between two pushes: the toy's own
// equations, with the coil off, are laid through the positions of each such stretch
// (free.go), and the energy in the middle of it is a point of the ledger. What the
// rig leaves open or unsure (magnets, their places, friction, camera, the pivot in
// the picture) is free in all stretches together.

// Ball is what the ledger of a part on a ball joint needs beside Options.
type Ball struct {
	Rig  *rig.Rig
	Coil *rig.Coil
	Name string // of the sensed magnet
	Bob  int    // index in the rig
}

// ball checks whether a rig allows the ledger of a part on a ball joint.
func (o *Options) ball(r *rig.Rig, p *rig.Part) {
	no := func(text string, args ...any) { o.NoLedger = fmt.Sprintf(text, args...) }
	switch {
	case len(r.Parts) > 1:
		no("%q swings on a ball joint and the toy has other moving parts, with which it trades energy", p.Name)
		return
	case !p.MassKg.Known() || len(p.CentreM) < 2 || !(p.Inertia.Set && p.Inertia.V > 0):
		no("%q swings on a ball joint: its ledger needs mass_g, centre_mm and inertia_g_mm2 as numbers in the rig", p.Name)
		return
	}
	b := &Ball{Rig: r, Bob: -1}
	n := 0
	for i := range r.Coils {
		if k := &r.Coils[i]; k.Part == p.Name || k.Part == "" {
			b.Coil = k
			n++
		}
	}
	if n != 1 {
		no("%d coils act on %q: their kicks cannot be told apart", n, p.Name)
		return
	}
	nearest := math.Inf(1)
	c := rig.XYZ(b.Coil.AtM)
	for i := range r.Magnets {
		g := &r.Magnets[i]
		if g.Part == p.Name {
			at := rig.XYZ(g.AtM)
			if d := math.Hypot(math.Hypot(at[0]-c[0], at[1]-c[1]), at[2]-c[2]); d < nearest {
				nearest, b.Name = d, g.Name
			}
		}
	}
	if b.Name == "" {
		no("no magnet sits on %q that the coil could push", p.Name)
		return
	}
	for i := range r.Bobs {
		if r.Bobs[i].Part == p.Name && len(r.Bobs[i].AtM) >= 2 && b.Bob < 0 {
			b.Bob = i
		}
	}
	if b.Bob < 0 {
		no("no bob with at_mm sits on %q, so that its direction cannot be had from the picture", p.Name)
		return
	}
	o.Ball = b
}

// pad is how long before and after a push a stretch of free motion ends and
// begins, s; longestStep is the gap between samples that ends one.
const (
	pad         = 0.008
	longestStep = 0.06
	fewestFree  = 9 // samples of a stretch
)

// view is one clip of a part on a ball joint: what was seen of its bob.
type view struct {
	clip   int
	cam    *camera.Camera
	moved  *camera.Camera // as the fit has it
	t      []float64
	at     [][2]float64 // px
	white  [][3]float64 // inverse Cholesky of the picture's covariance
	dir    [][2]float64 // horizontal components of the direction to the bob; NaN where it cannot be told
	local  [][4]float64 // the same and their rates, smoothed; rad/s
	meets  []meeting
	free   []*stretch
	rate   []float64 // rad/s, of the direction, per sample
	polar  []float64 // rad, from hanging
	pushed []bool    // a push may act at this sample
	hands  []float64 // s, where something else acted
}

// meeting is one pass of the magnet by the coil.
type meeting struct {
	t, until float64    // s; the push, if there is one, ends at until
	aside    float64    // m, from the coil's axis
	over     [3]float64 // m, the same as a vector
	gain     float64    // share of a kick right over the coil that it had
	speed    float64    // rad/s
	slow     bool       // surely too slow to be sensed
	doubtful bool       // perhaps too slow
	back     bool       // it turned back before the push was over
}

func newView(clip int, c *Clip, b *Ball) (*view, error) {
	cam, err := camera.Restore(c.Track.Cal)
	if err != nil {
		return nil, fmt.Errorf("the track does not say how the camera stood (%w); measure the clip again", err)
	}
	bob := c.Track.Find(b.Rig.Bobs[b.Bob].Name)
	if bob == nil {
		return nil, fmt.Errorf("the track holds no bob %q", b.Rig.Bobs[b.Bob].Name)
	}
	v := &view{clip: clip, cam: cam}
	for _, s := range bob.Usable() {
		c := s.Pixel
		if !(c.AA > 0) || !(c.BB > 0) {
			c = track.Cov{AA: 0.01, BB: 0.01}
		}
		d := c.BB - c.AB*c.AB/c.AA
		if !(d > 1e-6*c.BB) {
			d, c.AB = c.BB, 0
		}
		v.t, v.at = append(v.t, s.T), append(v.at, [2]float64{s.U, s.V})
		w2 := 1 / math.Sqrt(d)
		v.white = append(v.white, [3]float64{1 / math.Sqrt(c.AA), -c.AB / c.AA * w2, w2})
	}
	if len(v.t) < 60 {
		return nil, fmt.Errorf("only %d pictures show the bob; film for longer", len(v.t))
	}
	return v, nil
}

// directions finds where on its sphere the bob is, picture by picture, by Newton's
// method from where it was in the picture before. Seen from below its own tilt a
// camera cannot tell far from near; an error says so.
func (v *view) directions(f *freeFit) error {
	v.dir = make([][2]float64, len(v.t))
	last, unclear := [2]float64{}, 0
	for i := range v.t {
		p := last
		ok := false
		for range 12 {
			u0, v0 := f.sphere(v, p)
			const h = 1e-5
			ux, vx := f.sphere(v, [2]float64{p[0] + h, p[1]})
			uy, vy := f.sphere(v, [2]float64{p[0], p[1] + h})
			a, b, c, d := (ux-u0)/h, (uy-u0)/h, (vx-v0)/h, (vy-v0)/h
			det := a*d - b*c
			// Against the picture of a sphere seen square on: how blunt the view is.
			if blunt := math.Abs(det) / (a*a + c*c); !(blunt > 0.1) {
				break
			}
			e0, e1 := v.at[i][0]-u0, v.at[i][1]-v0
			dx, dy := (d*e0-b*e1)/det, (a*e1-c*e0)/det
			p[0], p[1] = p[0]+dx, p[1]+dy
			if p[0]*p[0]+p[1]*p[1] > 0.95 {
				break
			}
			if math.Abs(dx)+math.Abs(dy) < 1e-9 {
				ok = true
				break
			}
		}
		if !ok {
			v.dir[i] = [2]float64{math.NaN(), math.NaN()}
			unclear++
			last = [2]float64{}
			continue
		}
		v.dir[i], last = p, p
	}
	if unclear > len(v.t)/4 {
		return errors.New("from where the camera stood, near and far cannot be told apart for too much of the motion; film it from a raised camera, 30° or more, or from above, and give camera.tilt_deg")
	}
	v.smooth()
	return nil
}

// smooth lays a polynomial of fourth degree through the directions about each sample.
func (v *view) smooth() {
	const reach, size = 6, 5
	n := len(v.t)
	v.local = make([][4]float64, n)
	for i := range n {
		lo, hi := i, i
		for lo > 0 && i-lo < reach && v.t[lo]-v.t[lo-1] < longestStep && !math.IsNaN(v.dir[lo-1][0]) {
			lo--
		}
		for hi+1 < n && hi-i < reach && v.t[hi+1]-v.t[hi] < longestStep && !math.IsNaN(v.dir[hi+1][0]) {
			hi++
		}
		nan := math.NaN()
		v.local[i] = [4]float64{nan, nan, nan, nan}
		if hi-lo < size+2 || math.IsNaN(v.dir[i][0]) {
			continue
		}
		var m [size * size]float64
		var b [2][size]float64
		x := [size]float64{1}
		span := (v.t[hi] - v.t[lo]) / 2
		for k := lo; k <= hi; k++ {
			d := (v.t[k] - v.t[i]) / span
			for j := 1; j < size; j++ {
				x[j] = x[j-1] * d
			}
			for j := range size {
				b[0][j] += x[j] * v.dir[k][0]
				b[1][j] += x[j] * v.dir[k][1]
				for l := range size {
					m[j*size+l] += x[j] * x[l]
				}
			}
		}
		inv, ok := inverse(m[:], size)
		if !ok {
			continue
		}
		v.local[i] = [4]float64{}
		for e := range 2 {
			for l := range size {
				v.local[i][e] += inv[l] * b[e][l]
				v.local[i][2+e] += inv[size+l] * b[e][l] / span
			}
		}
	}
}

// turning is the rate of the direction at sample i, rad/s, by the polynomial.
func (v *view) turning(i int) float64 {
	x, y, vx, vy := v.local[i][0], v.local[i][1], v.local[i][2], v.local[i][3]
	vz := (x*vx + y*vy) / math.Sqrt(math.Max(1e-6, 1-x*x-y*y))
	return math.Sqrt(vx*vx + vy*vy + vz*vz)
}

// meet finds the passes of the magnet by the coil, and how long a push may last.
func (v *view) meet(f *freeFit) {
	c := f.ball.Coil
	coil := rig.XYZ(c.AtM)
	axis := [3]float64{0, 0, 1}
	if len(c.Axis) > 0 {
		axis = unitVec(rig.XYZ(c.Axis))
	}
	n := len(v.t)
	place := make([][3]float64, n)
	away := make([]float64, n)
	for i := range n {
		place[i] = f.magnetAt([2]float64{v.local[i][0], v.local[i][1]})
		away[i] = square(minus(place[i], coil))
	}
	v.meets = nil
	v.pushed = make([]bool, n)
	busy := math.Inf(-1)
	for i := 1; i+1 < n; i++ {
		if !(away[i] <= away[i-1] && away[i] < away[i+1]) || v.t[i] < busy || v.t[i+1]-v.t[i-1] > 2*longestStep {
			continue
		}
		// The least distance lies at a parabola's vertex.
		h := 0.5 * (away[i-1] - away[i+1]) / (away[i-1] - 2*away[i] + away[i+1])
		step := (v.t[i+1] - v.t[i-1]) / 2
		m := meeting{t: v.t[i] + h*step, speed: v.turning(i), gain: 1}
		g := place[i]
		d := minus(g, coil)
		over := minus(d, times(axis, dot(d, axis)))
		m.aside, m.over = math.Sqrt(square(over)), over
		if reach := c.RadiusM.Or(c.WidthM.Or(0)); reach > 0 && (c.KickJ.Set || c.KickJ.Fit) {
			m.gain = math.Exp(-m.aside * m.aside / reach / reach)
		}
		m.until = m.t + math.Max(0.03, c.PulseS.Or(0))
		if w := c.WidthM.Or(0); w > 0 {
			way := unitVec(minus(place[i+1], place[i-1]))
			m.until = v.t[n-1]
			for k := i + 1; k < n; k++ {
				u := dot(minus(place[k], g), way) - h*step*dot(minus(place[i+1], place[i-1]), way)/(2*step)
				if math.IsNaN(u) {
					continue
				}
				if u > w || u < 0 {
					m.until, m.back = v.t[k], u < 0
					break
				}
			}
		}
		if s := c.SensedRadS; s.Set {
			u := 2.5 * math.Max(s.U, 0.02*s.V)
			m.slow, m.doubtful = m.speed < s.V-u, m.speed < s.V+u && m.speed >= s.V-u
			if m.slow {
				m.until = m.t
			}
		}
		if m.slow || m.back {
			m.gain = 0
		}
		if k := len(v.meets); k > 0 && v.meets[k-1].doubtful && v.meets[k-1].until > m.t {
			v.meets[k-1].until = m.t
		}
		if !m.slow && !m.doubtful {
			busy = m.until
		}
		v.meets = append(v.meets, m)
	}
	for _, m := range v.meets {
		if m.slow {
			continue
		}
		const frame = 1.0 / 60 // the pass lies between two pictures
		for k := range v.t {
			if v.t[k] > m.t-pad-frame && v.t[k] < m.until+pad {
				v.pushed[k] = true
			}
		}
	}
}

// cut makes the stretches of free motion.
func (v *view) cut() {
	v.free = nil
	for lo := 0; lo < len(v.t); {
		bad := func(i int) bool { return v.pushed[i] || math.IsNaN(v.local[i][0]) }
		if bad(lo) {
			lo++
			continue
		}
		hi := lo
		for hi+1 < len(v.t) && !bad(hi+1) && v.t[hi+1]-v.t[hi] < longestStep && v.t[hi+1]-v.t[lo] < 1.5 {
			hi++
		}
		if hi-lo+1 >= fewestFree {
			v.free = append(v.free, &stretch{lo: lo, hi: hi, mid: (lo + hi) / 2})
		}
		lo = hi + 1
	}
}

func dot(a, b [3]float64) float64      { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func square(a [3]float64) float64      { return dot(a, a) }
func minus(a, b [3]float64) [3]float64 { return [3]float64{a[0] - b[0], a[1] - b[1], a[2] - b[2]} }
func times(a [3]float64, s float64) [3]float64 {
	return [3]float64{a[0] * s, a[1] * s, a[2] * s}
}

func unitVec(a [3]float64) [3]float64 { return times(a, 1/math.Sqrt(square(a))) }

// openBall is open for a part on a ball joint.
func openBall(ctx context.Context, clips []Clip, opt Options) (*ledger, error) {
	l := &ledger{opt: opt, clips: clips, unit: "J", plain: viscous, weight: opt.Weight, inertia: opt.Inertia, shares: opt.WeightShares}
	for i := range clips {
		if clips[i].Track == nil {
			return nil, fmt.Errorf("kick: %q swings on a ball joint: its ledger needs the track of its clip, not a table of angles", clips[i].Angle.Part)
		}
	}
	f, err := newFreeFit(opt.Ball, clips[0].Angle.Part)
	if err != nil {
		return nil, fmt.Errorf("kick: %w", err)
	}
	l.free = f
	for i := range clips {
		v, err := newView(i, &clips[i], opt.Ball)
		if err != nil {
			return nil, fmt.Errorf("kick: %w", err)
		}
		f.views = append(f.views, v)
		l.turns, l.rest, l.uRest, l.noise = append(l.turns, nil), append(l.rest, 0), append(l.uRest, 1e-9), append(l.noise, 1)
	}
	f.look(clips)
	cut := func() error {
		for _, v := range f.views {
			if err := v.directions(f); err != nil {
				return fmt.Errorf("kick: %w", err)
			}
			v.meet(f)
			v.cut()
		}
		return nil
	}
	if err := cut(); err != nil {
		return nil, err
	}
	// The first solution puts the pivot where it is; then the passes are right.
	if err := f.approach(ctx); err != nil {
		return nil, err
	}
	if err := cut(); err != nil {
		return nil, err
	}
	if err := f.solve(ctx, 30); err != nil {
		return nil, err
	}
	// A stretch in which a hand pushed is none of free motion.
	for range 3 {
		if !f.dropTouched() {
			break
		}
		if err := f.solve(ctx, 30); err != nil {
			return nil, err
		}
	}
	l.enterBall()
	if len(l.rows) < leastPasses {
		return nil, fmt.Errorf("kick: only %d passes of %q by the coil lie between stretches of free motion that were seen; film at least %d in one go", len(l.rows), clips[0].Angle.Part, leastPasses)
	}
	return l, nil
}

// enterBall makes the rows: one from each stretch of free motion to the next.
func (l *ledger) enterBall() {
	f := l.free
	old := l.rows
	l.rows = nil
	f.common = make([][]float64, len(f.root))
	lowest := math.Inf(1)
	for _, v := range f.views {
		lowest = math.Min(lowest, f.lowest(v))
	}
	for _, v := range f.views {
		c := &l.clips[v.clip]
		for k := 1; k < len(v.free); k++ {
			a, b := v.free[k-1], v.free[k]
			gap, meet, doubtful := 0.0, (*meeting)(nil), false
			for i := a.mid; i < b.mid; i++ {
				gap = math.Max(gap, v.t[i+1]-v.t[i])
			}
			if gap > 2*longestStep {
				continue
			}
			r := row{
				clip: v.clip, joined: len(l.rows) > 0 && l.rows[len(l.rows)-1].last == a, last: b,
				before: a.energy - lowest, after: b.energy - lowest, span: v.t[b.mid] - v.t[a.mid],
				side: 1, state: Slow, fixed: true, aside: math.NaN(),
			}
			for j := range v.meets {
				m := &v.meets[j]
				if m.t < v.t[a.mid] || m.t > v.t[b.mid] {
					continue
				}
				if meet == nil || m.gain > meet.gain {
					meet = m
				}
				r.gain += m.gain
				r.meets = append(r.meets, m)
				doubtful = doubtful || m.doubtful && m.gain > 0.05
				if !m.slow {
					r.state, r.fixed = Kicked, false
				}
			}
			for _, t := range v.hands {
				doubtful = doubtful || t > v.t[a.mid] && t < v.t[b.mid]
			}
			r.t = (v.t[a.mid] + v.t[b.mid]) / 2
			if meet != nil {
				r.t, r.speed, r.aside = meet.t, meet.speed, meet.aside
			}
			if r.gain < 1e-3 {
				r.state, r.fixed = Slow, true
			}
			if doubtful {
				r.state, r.fixed = Odd, true
			}
			if c.Off || c.OffToS > c.OffFromS && r.t > c.OffFromS && r.t < c.OffToS {
				r.state, r.fixed = Off, true
			}
			r.vFrom, r.vTo = a.variance*sq(l.noise[v.clip]), b.variance*sq(l.noise[v.clip])
			for i := a.mid; i < b.mid; i++ {
				// Trapezium rule over the samples.
				d := (v.t[i+1] - v.t[i]) / 2
				for _, w := range [2]float64{v.rate[i], v.rate[i+1]} {
					r.work[0] += d * w * w
					r.work[1] += d * w * w * w
					r.work[2] += d * w
				}
				r.amp += (v.polar[i] + v.polar[i+1]) / 2 / float64(b.mid-a.mid)
			}
			for e := range f.root {
				f.common[e] = append(f.common[e], b.common[e]-a.common[e])
			}
			l.rows = append(l.rows, r)
		}
	}
	if len(old) == len(l.rows) {
		for i := range old {
			l.rows[i].state, l.rows[i].fixed = old[i].state, old[i].fixed
		}
	}
}

// blunt takes errors of neighbouring pictures that are alike into account: they hide
// in each stretch's own unknowns, and show only in how its energies scatter. The
// pictures then count for less against what the rig says.
func (l *ledger) blunt(ctx context.Context) error {
	for range 2 {
		alike := false
		for _, v := range l.free.views {
			if n := l.noise[v.clip]; n > 1.2 {
				alike = true
				for i := range v.white {
					for e := range 3 {
						v.white[i][e] /= n
					}
				}
				l.noise[v.clip] = 1
			}
		}
		if !alike {
			return nil
		}
		if err := l.free.solve(ctx, 30); err != nil {
			return err
		}
		l.measureNoise()
	}
	return nil
}

// coilBudget is what the kick right over the coil owes to how well the rig knows where
// the coil stands and how far it is felt: the share of a kick that a pass had hangs
// on both. Errors of the directions act like an error of the coil's place, which is
// taken as 0.5 mm each way, as of the rig's magnets.
func (l *ledger) coilBudget(kick float64) []finding.Share {
	const uPlace = 0.5e-3
	k := l.opt.Ball.Coil
	reach := k.RadiusM.Or(k.WidthM.Or(0))
	if !(reach > 0) || !(k.KickJ.Set || k.KickJ.Fit) || l.best.kicks == 0 {
		return nil
	}
	effect := func(gain func(over [3]float64) float64) float64 {
		dy := make([]float64, len(l.rows))
		for i := range l.rows {
			r := &l.rows[i]
			for _, m := range r.meets {
				if m.gain > 0 {
					dy[i] -= r.state.share() * kick * (gain(m.over) - m.gain)
				}
			}
		}
		return l.best.response(dy)[0]
	}
	place := 0.0
	for e := range 2 {
		d := effect(func(over [3]float64) float64 {
			over[e] -= uPlace
			return math.Exp(-square(over) / reach / reach)
		})
		place = math.Hypot(place, d)
	}
	u := math.Max(k.RadiusM.U, 0.01*reach)
	size := effect(func(over [3]float64) float64 { return math.Exp(-square(over) / (reach + u) / (reach + u)) })
	return []finding.Share{{Source: "the coil's place, by the rig's", U: place}, {Source: "the rig's radius of the coil", U: math.Abs(size)}}
}

// pictures says what the energies hang on beside what turns angles into them.
func (l *ledger) pictures() string {
	if l.free != nil {
		return "pictures, camera, magnets, scatter of the kicks and choice of friction"
	}
	return "pictures, scatter of the kicks and choice of friction"
}

// ballCurves draws the ledger of a part on a ball joint: gain against how far
// beside the coil the magnet passed.
func (l *ledger) ballBalance(res *Result) finding.Curve {
	c := finding.Curve{
		Key: "kick-balance", Subject: l.part(), Title: "Gain of a pass against the distance from the coil's axis",
		X: finding.Axis{Label: "distance of the pass from the coil's axis", Unit: "m", ShowUnit: "mm", ShowFactor: 1e3}, Y: finding.Axis{Label: "kick of a pass", Unit: l.unit},
		Caption: "Each point is one pass of the magnet by the coil: what its energy grew by, with the loss to friction added back, and one standard uncertainty. The line is the fitted kick, which is taken to fall off beside the coil as the rig's radius says.",
	}
	if !res.Separated {
		c.Y.Label = "kick minus loss"
		c.Caption = "Each point is one pass of the magnet by the coil: what its energy grew by, kick minus loss, with one standard uncertainty."
	}
	far := 0.0
	for _, kind := range []struct {
		name string
		has  func(s State) bool
	}{
		{"kicked", func(s State) bool { return s == Kicked }},
		{"without a kick", func(s State) bool { return s == Off || s == Slow || s == Missed }},
		{"double or odd", func(s State) bool { return s == Double || s == Odd }},
	} {
		line := finding.Line{Name: kind.name, Role: finding.Mark}
		for i := range res.Passes {
			p, r := &res.Passes[i], &l.rows[i]
			if !kind.has(p.State) || math.IsNaN(r.aside) {
				continue
			}
			y := p.Net
			if res.Separated {
				y += p.Loss
				if p.State == Off {
					g := l.best.lossVector(r.work)
					loss, _ := l.best.of(g, g)
					y = p.Net + loss
				}
			}
			u := math.Sqrt(r.vFrom + r.vTo)
			line.X, line.Y = append(line.X, r.aside), append(line.Y, y)
			line.Lo, line.Hi = append(line.Lo, y-u), append(line.Hi, y+u)
			far = math.Max(far, r.aside)
		}
		if len(line.X) > 0 {
			c.Lines = append(c.Lines, line)
		}
	}
	if k := l.opt.Ball.Coil; res.Separated && l.best.kicks == 1 && (k.KickJ.Set || k.KickJ.Fit) {
		if reach := k.RadiusM.Or(k.WidthM.Or(0)); reach > 0 {
			model := finding.Line{Name: "kick, fitted", Role: finding.Model}
			for i := range 61 {
				x := far * float64(i) / 60
				model.X, model.Y = append(model.X, x), append(model.Y, res.Kick*math.Exp(-x*x/reach/reach))
			}
			c.Lines = append(c.Lines, model)
		}
	}
	c.Lines = append(c.Lines, finding.Line{Name: "nothing given", Role: finding.Guide, X: []float64{0, far}, Y: []float64{0, 0}})
	return c
}

// usualWork is the mean work of unit frictions over the kicked passes of the first
// clip, or over all where none was kicked.
func (l *ledger) usualWork() (w [3]float64) {
	n := 0.0
	for _, only := range []bool{true, false} {
		for i := range l.rows {
			if r := &l.rows[i]; !only || r.state == Kicked && r.clip == 0 {
				for j := range w {
					w[j] += r.work[j]
				}
				n++
			}
		}
		if n > 0 {
			break
		}
	}
	for j := range w {
		w[j] /= n
	}
	return w
}

// usualGain is the mean share of a kick right over the coil that kicked passes had.
func (l *ledger) usualGain() float64 {
	sum, n := 0.0, 0.0
	for i := range l.rows {
		if r := &l.rows[i]; r.state == Kicked && r.clip == 0 {
			sum, n = sum+r.gain, n+1
		}
	}
	return sum / math.Max(1, n)
}

// usualKick reports the mean of the kicks as filmed, which hangs little on how the
// kick falls off beside the coil.
func (l *ledger) usualKick(res *Result) {
	if !res.Separated {
		return
	}
	g := l.usualGain()
	f := l.measured("kick.mean", "Mean energy of the kicks, as the magnet passed", func(s *solution) []float64 {
		v := s.kickVector()
		v[0] *= g
		return v
	})
	res.Findings = append(res.Findings, f)
}
