package kick

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
)

// ledger is one call of Analyze.
type ledger struct {
	opt   Options
	unit  string
	clips []Clip
	turns [][]turn // per clip
	rows  []row
	rest  []float64 // per clip: how far the true vertical lies from the series' zero, rad
	uRest []float64 // what is known of that beforehand
	noise []float64 // per clip: scatter of the turning points over what the series' noise lets expect

	weight, inertia float64         // as used: J and kg·m², or per unit inertia
	shares          []finding.Share // relative, of every energy
	omega, uOmega   float64
	pendulum        bool
	free            *freeFit // of a part on a ball joint
	plain           law      // the friction with which states are found out
	inertiaFrom     string

	best   *solution
	laws   []*solution // all mixtures of frictions, best with weights
	weighs []float64
}

// turn is one turning point.
type turn struct {
	t, angle, u float64
	index       int     // of the sample before it
	lean        float64 // rad per rad: change of angle by an error of the vertical
}

// row is one pass between two turning points of a clip.
type row struct {
	clip, from, to int  // turns
	joined         bool // shares its first turning point with the row before it
	t              float64
	before, after  float64    // J
	vFrom, vTo     float64    // variances of these
	work           [3]float64 // J per unit of each friction: viscous, drag, dry
	lean           float64    // J/rad: change of the net by an error of the vertical
	amp, speed     float64
	side           float64 // +1 rightward
	gain           float64 // kicks right over the coil that a kicked pass counts for
	span           float64 // s
	aside          float64 // m, from the coil's axis; a ball joint's only
	last           *stretch
	meets          []*meeting // of a ball joint
	state          State
	fixed          bool // the state is known beforehand
}

func (r *row) net() float64 { return r.after - r.before }

// leastPasses is how many passes make a ledger.
const leastPasses = 6

func open(_ context.Context, clips []Clip, opt Options) (*ledger, error) {
	l := &ledger{opt: opt, clips: clips, unit: "J", pendulum: opt.Well == nil, plain: viscous | dry}
	for i := range clips {
		a := &clips[i].Angle
		if a.Problem != "" {
			return nil, fmt.Errorf("kick: %s", a.Problem)
		}
		tp := turns(a)
		l.turns = append(l.turns, tp)
		u := 0.02 // rad: nothing gave the vertical, common practice of holding a phone
		for _, s := range a.Shared {
			if s.Source == "vertical" && a.VerticalFrom != "" && len(s.D) > 0 {
				u = math.Abs(s.D[0])
			}
		}
		l.rest, l.uRest, l.noise = append(l.rest, 0), append(l.uRest, math.Max(u, 1e-5)), append(l.noise, 1)
	}
	n := 0
	for _, tp := range l.turns {
		n += len(tp)
	}
	if n < leastPasses+1 {
		return nil, fmt.Errorf("kick: only %d turning points of %q could be seen; film at least %d passes in one go", n, clips[0].Angle.Part, leastPasses)
	}
	if l.pendulum {
		l.measureOmega(0)
	}
	if err := l.balance(); err != nil {
		return nil, err
	}
	l.enter()
	if len(l.rows) < leastPasses {
		return nil, fmt.Errorf("kick: only %d passes of %q lie between two turning points that were seen; film at least %d in one go", len(l.rows), clips[0].Angle.Part, leastPasses)
	}
	return l, nil
}

// turns finds the turning points by a local polynomial of fourth degree, over an
// eighth of a period on each side: over so much a swing differs from it by 1e-5 of
// its amplitude.
func turns(a *series.Angle) []turn {
	rough := a.TurningPoints()
	if len(rough) < 3 {
		return nil
	}
	var gaps []float64
	for i := 1; i < len(rough); i++ {
		gaps = append(gaps, rough[i].T-rough[i-1].T)
	}
	slices.Sort(gaps)
	half := gaps[len(gaps)/2] // half a period
	var out []turn
	for _, r := range rough {
		if t, ok := vertex(a, r, half/4); ok {
			out = append(out, t)
		}
	}
	return out
}

func vertex(a *series.Angle, r series.Turning, reach float64) (turn, bool) {
	const size = 5
	at := r.T
	for try := 0; try < 3; try++ {
		lo, _ := slices.BinarySearch(a.T, at-reach)
		hi, _ := slices.BinarySearch(a.T, at+reach)
		for hi-lo < size+2 {
			if lo == 0 || hi == len(a.T) {
				return turn{}, false
			}
			lo, hi = lo-1, hi+1
		}
		if at-a.T[lo] > 3*reach || a.T[hi-1]-at > 3*reach {
			return turn{}, false // a gap
		}
		var m [size * size]float64
		var b [size]float64
		x := [size]float64{1}
		for i := lo; i < hi; i++ {
			w := 1 / (a.UAngle[i] * a.UAngle[i])
			d := (a.T[i] - at) / reach
			for k := 1; k < size; k++ {
				x[k] = x[k-1] * d
			}
			for j := range size {
				b[j] += w * x[j] * a.Angle[i]
				for k := range size {
					m[j*size+k] += w * x[j] * x[k]
				}
			}
		}
		inv, ok := inverse(m[:], size)
		if !ok {
			return turn{}, false
		}
		c := [size]float64{}
		for j := range size {
			for k := range size {
				c[j] += inv[j*size+k] * b[k]
			}
		}
		d := 0.0
		for range 8 {
			slope := c[1] + d*(2*c[2]+d*(3*c[3]+d*4*c[4]))
			curve := 2*c[2] + d*(6*c[3]+d*12*c[4])
			if curve == 0 {
				return turn{}, false
			}
			d -= slope / curve
		}
		if !(math.Abs(d) < 1) {
			return turn{}, false
		}
		if math.Abs(d) < 0.1 || try == 2 {
			v := 0.0
			for j := range size {
				x[j] = math.Pow(d, float64(j))
			}
			for j := range size {
				for k := range size {
					v += x[j] * x[k] * inv[j*size+k]
				}
			}
			angle := c[0] + d*(c[1]+d*(c[2]+d*(c[3]+d*c[4])))
			return turn{t: at + d*reach, angle: angle, lean: 1, u: math.Sqrt(v) * math.Max(1, a.NoiseRatio), index: min(r.Index, len(a.T)-1)}, true
		}
		at += d * reach
	}
	return turn{}, false
}

// measureOmega finds the rate of small swings from the time between turning
// points and the amplitudes beside them, by the complete elliptic integral of the
// first kind (as π/2 over the arithmetic-geometric mean; Abramowitz & Stegun 17.6).
// While the coil pushes, the part is slower than it will be: over the push, which
// grows smoothly, it lacks half of the kick on average, and takes
// (kick/2)/(2·energy) of the time of that stretch longer.
func (l *ledger) measureOmega(kick float64) {
	kicked := map[[2]int]float64{}
	for i := range l.rows {
		r := &l.rows[i]
		if e := (r.before + r.after) / 2; e > 0 && r.speed > 0 {
			kicked[[2]int{r.clip, r.to}] = r.state.share() * kick / (4 * e) * l.opt.PushOver / r.speed
		}
	}
	var w []float64
	for c, tp := range l.turns {
		if l.clips[c].Off != l.clips[0].Off && len(w) >= leastPasses {
			break
		}
		for i := 1; i < len(tp); i++ {
			if tp[i].angle*tp[i-1].angle < 0 {
				k := quarter(math.Abs(tp[i].angle)) + quarter(math.Abs(tp[i-1].angle))
				w = append(w, k/(tp[i].t-tp[i-1].t-kicked[[2]int{c, i}]))
			}
		}
	}
	if len(w) == 0 {
		return
	}
	slices.Sort(w)
	mid := w[len(w)/2]
	sum, sq, n := 0.0, 0.0, 0.0
	for _, x := range w {
		if math.Abs(x/mid-1) < 0.1 {
			sum, sq, n = sum+x, sq+x*x, n+1
		}
	}
	l.omega = sum / n
	l.uOmega = math.Hypot(math.Sqrt(math.Max(0, sq/n-l.omega*l.omega)/n), l.omega*l.clips[0].Angle.UClock)
}

// quarter is the time of a quarter swing of a pendulum of unit rate.
func quarter(amplitude float64) float64 {
	a, b := 1.0, math.Cos(amplitude/2)
	for math.Abs(a-b) > 1e-15*a {
		a, b = (a+b)/2, math.Sqrt(a*b)
	}
	return math.Pi / 2 / a
}

// balance chooses what turns angles into energies.
func (l *ledger) balance() error {
	o := &l.opt
	if !l.pendulum {
		l.weight, l.inertia, l.shares = o.Weight, o.Inertia, o.WeightShares
		return nil
	}
	if !(l.omega > 0) {
		return fmt.Errorf("kick: %q does not swing to both sides of the vertical, so its passes have no amplitude; check the vertical of the picture", l.clips[0].Angle.Part)
	}
	w2 := l.omega * l.omega
	byInertia := []finding.Share{{Source: "the rig's inertia", U: o.UInertia}, {Source: "the rate of swinging", U: 2 * l.uOmega / l.omega}}
	switch {
	case o.Weight > 0 && (o.Inertia == 0 || rss(o.WeightShares) <= rss(byInertia)):
		l.weight, l.inertia, l.shares, l.inertiaFrom = o.Weight, o.Weight/w2, o.WeightShares, "the rig's mass and centre of mass"
	case o.Inertia > 0:
		l.weight, l.inertia, l.shares, l.inertiaFrom = o.Inertia*w2, o.Inertia, byInertia, "the rig's inertia and the rate of swinging"
	default:
		l.unit, l.weight, l.inertia, l.inertiaFrom = "J/(kg·m²)", w2, 1, "the rate of swinging, per unit inertia"
		l.shares = byInertia[1:]
	}
	return nil
}

func rss(s []finding.Share) float64 {
	sum := 0.0
	for _, x := range s {
		sum += x.U * x.U
	}
	return math.Sqrt(sum)
}

// energy is the potential energy at an angle of clip c, above that of the lowest point.
func (l *ledger) energy(angle float64) float64 {
	if l.pendulum {
		s := math.Sin(angle / 2)
		return 2 * l.weight * s * s
	}
	return l.opt.Well(angle) - l.opt.Well(0)
}

func (l *ledger) torque(angle float64) float64 {
	if l.pendulum {
		return l.weight * math.Sin(angle)
	}
	const h = 1e-4
	return (l.opt.Well(angle+h) - l.opt.Well(angle-h)) / (2 * h)
}

// enter makes the rows from the turning points and the rest angles as they are
// known now; states are kept.
func (l *ledger) enter() {
	if l.free != nil {
		l.enterBall()
		return
	}
	old := l.rows
	l.rows = nil
	for c, tp := range l.turns {
		if len(tp) < 2 {
			continue
		}
		var gaps []float64
		for i := 1; i < len(tp); i++ {
			gaps = append(gaps, tp[i].t-tp[i-1].t)
		}
		slices.Sort(gaps)
		half := gaps[len(gaps)/2]
		last := -1
		for i := 1; i < len(tp); i++ {
			a, b := tp[i-1].angle-l.rest[c], tp[i].angle-l.rest[c]
			if tp[i].t-tp[i-1].t > 1.6*half || a*b >= 0 {
				continue
			}
			r := row{
				clip: c, from: i - 1, to: i, joined: last == i-1, t: (tp[i].t + tp[i-1].t) / 2,
				before: l.energy(a), after: l.energy(b), amp: (math.Abs(a) + math.Abs(b)) / 2, side: math.Copysign(1, b),
				gain: 1, span: tp[i].t - tp[i-1].t,
			}
			ga, gb := l.torque(a), l.torque(b)
			r.vFrom, r.vTo = sq(ga*tp[i-1].u*l.noise[c]), sq(gb*tp[i].u*l.noise[c])
			r.lean = ga*tp[i-1].lean - gb*tp[i].lean
			r.speed = math.Sqrt(math.Max(0, (r.before+r.after)/l.inertia))
			in := l.frictions(a, r.before, r.before, 0)
			out := l.frictions(b, r.after, r.before, l.opt.PushOver)
			for j := range r.work {
				r.work[j] = in[j] + out[j]
			}
			last = i
			l.rows = append(l.rows, r)
		}
	}
	if len(old) == len(l.rows) {
		for i := range old {
			l.rows[i].state, l.rows[i].fixed = old[i].state, old[i].fixed
		}
		return
	}
	for i := range l.rows {
		r := &l.rows[i]
		c := &l.clips[r.clip]
		switch {
		case c.Off || c.OffToS > c.OffFromS && r.t > c.OffFromS && r.t < c.OffToS:
			r.state, r.fixed = Off, true
		case l.opt.Sensed > 0 && r.speed < l.opt.Sensed:
			r.state, r.fixed = Slow, true
		}
	}
}

// frictions is the work of unit frictions (viscous 1 N·m·s, drag 1 N·m·s², dry
// 1 N·m) between the lowest point and a turning point of energy e. Over the first
// push rad from the lowest point the energy rises from e0 to e.
func (l *ledger) frictions(end, e, e0, push float64) (w [3]float64) {
	const n = 24 // midpoint rule in the eccentric angle, exact for a small swing
	for i := range n {
		phi := (float64(i) + 0.5) * math.Pi / 2 / n
		s, c := math.Sincos(phi)
		here := e
		if x := math.Abs(end * s); x < push {
			here = e0 + (e-e0)*x/push
		}
		v2 := 2 * math.Max(0, here-l.energy(end*s)) / l.inertia
		d := math.Abs(end) * c * math.Pi / 2 / n
		w[0] += math.Sqrt(v2) * d
		w[1] += v2 * d
		w[2] += d
	}
	return w
}

func sq(x float64) float64 { return x * x }
