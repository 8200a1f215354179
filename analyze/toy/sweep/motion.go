package sweep

import (
	"context"
	"fmt"
	"math"
	"sort"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/toy"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// Angles is the motion of one part, by the frames of the track; NaN where an
// uncertainty was not sought.
type Angles struct {
	Part                     string
	T, Angle, U, Rate, URate []float64
}

// Pass is one pass of a kicked part, for the energy ledger.
type Pass struct {
	Part                  string
	T, Energy, Kick, Loss float64
}

// Result is one toy's simulated motion.
type Result struct {
	Answers  *Answers
	Members  int // of the ensemble that moved
	Track    *track.Track
	Angles   []Angles
	Passes   []Pass
	Findings []finding.Finding
	Curves   []finding.Curve
	Headline string
	Cautions []string
}

// Motion simulates the rig's toy. With an ensemble every answer gets an interval
// from the rig's own uncertainties; where the motion is irregular or the
// ensemble's spread is not normal the interval is the ensemble's. When ctx ends
// early the error is its own and there is no result.
func Motion(ctx context.Context, r *rig.Rig, opt Options) (*Result, error) {
	m, y, err := build(r)
	if err != nil {
		return nil, err
	}
	seconds := opt.seconds(r)
	var draws *drawer
	if opt.Ensemble > 0 {
		if draws, err = newDrawer(r); err != nil {
			return nil, err
		}
	}
	res := &Result{Cautions: Assumed(r)}
	frames := int(math.Round(seconds*rateOf(r))) + 1
	times := make([]float64, frames)
	for i := range times {
		times[i] = seconds * float64(i) / float64(frames-1)
	}
	members := make([]*member, opt.Ensemble+1)
	var motion *toy.Motion
	var failed error // of the rig's own toy
	each(ctx, opt.Ensemble+1, opt, func(i int) bool {
		model, start := m, y
		if i > 0 {
			drawn := draws.draw(opt.Seed, i)
			var err error
			if model, start, err = build(drawn); err != nil {
				return true // an impossible draw; counted below
			}
		}
		a, o, err := ask(ctx, model, start, seconds, opt)
		if err != nil && i == 0 {
			failed = err
		}
		if err != nil || a.Problem != "" && i > 0 {
			return true
		}
		members[i] = newMember(model, o, a, times)
		if i == 0 {
			motion = o
		}
		return true
	})
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if failed != nil {
		return nil, failed
	}
	first := members[0]
	if first.a.Problem != "" {
		return nil, fmt.Errorf("%s", first.a.Problem)
	}
	var others []*member
	for _, o := range members[1:] {
		if o != nil {
			others = append(others, o)
		}
	}
	res.Answers, res.Members = first.a, len(others)
	if opt.Ensemble > 0 && len(others) < opt.Ensemble {
		res.Cautions = append(res.Cautions, fmt.Sprintf("%d of %d toys drawn from the rig's uncertainties could not be built or moved; the intervals are of the rest.", opt.Ensemble-len(others), opt.Ensemble))
	}
	for _, b := range m.DipoleBias() {
		if b.Caution != "" {
			res.Cautions = append(res.Cautions, b.Caution+".")
		}
	}
	res.trackOf(r, m, first, others, times)
	res.findingsOf(r, m, others)
	res.curvesOf(m, first, others, times)
	res.Passes = ledger(m, motion)
	res.Headline = "Simulated, not measured. " + first.a.words(seconds)
	return res, nil
}

func rateOf(r *rig.Rig) float64 { return r.Film.FramesPerS.Or(60) }

// member is one toy of the ensemble, sampled at the frames.
type member struct {
	a     *Answers
	bobs  [][][3]float64 // by frame
	angle [][]float64    // by part
	rate  [][]float64
	total []float64 // J
}

func newMember(m *toy.Model, o *toy.Motion, a *Answers, times []float64) *member {
	e := &member{a: a, bobs: make([][][3]float64, len(times)), total: make([]float64, len(times))}
	parts := len(m.Parts())
	e.angle, e.rate = make([][]float64, parts), make([][]float64, parts)
	y := make([]float64, m.StateLen())
	for i, t := range times {
		o.At(t, y)
		e.bobs[i] = m.Positions(y, nil)
		e.total[i] = m.Energy(y).Total()
		for k := range parts {
			angle, rate := m.Angle(y, k)
			e.angle[k], e.rate[k] = append(e.angle[k], angle), append(e.rate[k], rate)
		}
	}
	return e
}

// spread is the standard deviation of the ensemble about the first member.
func spread(first float64, others []*member, of func(*member) float64) float64 {
	if len(others) == 0 {
		return math.NaN()
	}
	sum := 0.0
	for _, o := range others {
		d := of(o) - first
		sum += d * d
	}
	return math.Sqrt(sum / float64(len(others)))
}

func (res *Result) trackOf(r *rig.Rig, m *toy.Model, first *member, others []*member, times []float64) {
	t := &track.Track{BrokeAt: math.NaN()}
	t.Cal.RateFactor = 1
	t.Cal.ScaleFrom, t.Cal.VerticalFrom, t.Cal.VerticalKnown = "the rig's own lengths", "the model's own", true
	across := 2
	if r.Camera.FromAbove {
		across = 1
	}
	for b, name := range m.Bobs() {
		bob := track.Bob{Name: name, Part: r.Bobs[b].Part}
		for i, at := range times {
			p := first.bobs[i][b]
			s := track.Sample{Frame: i, T: at, X: p[0], Z: p[across], U: math.NaN(), V: math.NaN(), State: track.Seen}
			s.Pixel = track.Cov{AA: math.NaN(), AB: math.NaN(), BB: math.NaN()}
			s.Plane = s.Pixel
			if n := len(others); n > 0 {
				s.Plane = track.Cov{}
				for _, o := range others {
					dx, dz := o.bobs[i][b][0]-s.X, o.bobs[i][b][across]-s.Z
					s.Plane.AA += dx * dx / float64(n)
					s.Plane.AB += dx * dz / float64(n)
					s.Plane.BB += dz * dz / float64(n)
				}
			}
			bob.Samples = append(bob.Samples, s)
		}
		t.Bobs = append(t.Bobs, bob)
	}
	if len(t.Bobs) > 0 {
		res.Track = t
	}
	for k, name := range m.Parts() {
		a := Angles{Part: name, T: times, Angle: first.angle[k], Rate: first.rate[k]}
		for i := range times {
			a.U = append(a.U, spread(a.Angle[i], others, func(o *member) float64 { return o.angle[k][i] }))
			a.URate = append(a.URate, spread(a.Rate[i], others, func(o *member) float64 { return o.rate[k][i] }))
		}
		res.Angles = append(res.Angles, a)
	}
}

const byModel = "simulated from the rig"

// number makes a finding of a value with the ensemble's spread and interval.
func (res *Result) number(key, subject, name, unit string, others []*member, of func(*Answers) float64) {
	v := of(res.Answers)
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return
	}
	f := finding.Normal(key, subject, name, v, 0, unit, byModel)
	var all []float64
	for _, o := range others {
		if x := of(o.a); !math.IsNaN(x) {
			all = append(all, x)
		}
	}
	if len(all) >= 8 {
		sum := 0.0
		for _, x := range all {
			sum += (x - v) * (x - v)
		}
		if f.U = math.Sqrt(sum / float64(len(all))); f.U < 1e-12*math.Abs(v) {
			f.U = 0 // rounding
		}
		sort.Float64s(all)
		f.Lo, f.Hi = math.Min(v, quantile(all, 0.025)), math.Max(v, quantile(all, 0.975))
		f.Method = fmt.Sprintf("%s; interval of %d toys drawn from its uncertainties", byModel, len(all))
	} else {
		f.U, f.Lo, f.Hi = math.NaN(), math.NaN(), math.NaN()
		f.Cautions = []string{"No interval was sought: ask for an ensemble."}
	}
	res.Findings = append(res.Findings, f)
}

func quantile(sorted []float64, p float64) float64 {
	x := p * float64(len(sorted)-1)
	i := int(x)
	if i+1 >= len(sorted) {
		return sorted[len(sorted)-1]
	}
	return sorted[i] + (x-float64(i))*(sorted[i+1]-sorted[i])
}

func (res *Result) findingsOf(r *rig.Rig, m *toy.Model, others []*member) {
	a := res.Answers
	res.Findings = append(res.Findings, finding.Finding{
		Key: "simulate.regime", Name: "Regime", Kind: finding.Statement, Text: a.words(res.lastT()), Method: byModel + regimeShare(a, others),
	})
	for i := range a.Parts {
		p := a.Parts[i].Part
		res.number("simulate.period", p, "Period late in the motion", "s", others, func(a *Answers) float64 { return a.Parts[i].Period })
		res.number("simulate.amplitude_first", p, "Amplitude at the start", "rad", others, func(a *Answers) float64 { return a.Parts[i].First })
		res.number("simulate.amplitude", p, "Amplitude late in the motion", "rad", others, func(a *Answers) float64 { return a.Parts[i].Amplitude })
	}
	for i := range a.Rests {
		if !a.Rests[i].Stable {
			continue
		}
		name := fmt.Sprintf("place of rest %d", restNumber(a, i))
		same := func(of func(*Rest) float64) func(*Answers) float64 {
			return func(b *Answers) float64 {
				if q := b.like(&a.Rests[i]); q != nil {
					return of(q)
				}
				return math.NaN()
			}
		}
		for k := range m.Parts() {
			res.number("simulate.rest_angle", name+", "+m.Parts()[k], "Angle at rest", "rad", others, same(func(q *Rest) float64 { return q.Angles[k] }))
		}
		for j := range a.Rests[i].Modes {
			res.number("simulate.mode", fmt.Sprintf("%s, mode %d", name, j+1), "Frequency of small swings", "Hz", others, same(func(q *Rest) float64 {
				// Counted from the quickest: a drawn toy may lack a symmetry and so
				// have a slow mode more.
				if l := len(q.Modes) - len(a.Rests[i].Modes) + j; l >= 0 {
					return q.Modes[l]
				}
				return math.NaN()
			}))
		}
	}
	if a.Kicks > 0 {
		res.number("simulate.kick", "", "Energy of a kick, mean", "J", others, func(a *Answers) float64 { return a.KickJ })
	}
	for i := range a.Uses {
		c := a.Uses[i].Coil
		use := func(of func(toy.Use) float64) func(*Answers) float64 {
			return func(a *Answers) float64 {
				if i < len(a.Uses) && a.Uses[i].Kicks > 0 {
					return of(a.Uses[i])
				}
				return math.NaN()
			}
		}
		res.number("simulate.charge_per_kick", c, "Charge per kick", "A·s", others, use(func(u toy.Use) float64 { return u.ChargePerKick }))
		res.number("simulate.mean_current", c, "Average current", "A", others, use(func(u toy.Use) float64 { return u.MeanCurrent }))
		if a.Uses[i].Days > 0 {
			res.number("simulate.battery_life", c, "Battery life", "s", others, use(func(u toy.Use) float64 { return 86400 * u.Days }))
			res.Findings[len(res.Findings)-1].Cautions = append(res.Findings[len(res.Findings)-1].Cautions, a.Uses[i].Caution+".")
		}
	}
	if !math.IsNaN(a.Exponent) && a.Regime == Irregular {
		res.number("simulate.exponent", "", "Greatest Lyapunov exponent (nats)", "1/s", others, func(a *Answers) float64 { return a.Exponent })
	}
}

func (res *Result) lastT() float64 {
	if len(res.Angles) == 0 {
		return 0
	}
	t := res.Angles[0].T
	return t[len(t)-1]
}

// regimeShare says how many of the ensemble agree on the regime.
func regimeShare(a *Answers, others []*member) string {
	if len(others) == 0 {
		return ""
	}
	n := 0
	for _, o := range others {
		if o.a.Regime == a.Regime {
			n++
		}
	}
	return fmt.Sprintf("; %d of %d toys drawn from its uncertainties say the same", n, len(others))
}

// restNumber counts stable places from 1.
func restNumber(a *Answers, i int) int {
	n := 0
	for j := 0; j <= i; j++ {
		if a.Rests[j].Stable {
			n++
		}
	}
	return n
}

// like is the stable place of b nearest to q, within 0.2 rad in every part.
func (a *Answers) like(q *Rest) *Rest {
	best, off := (*Rest)(nil), 0.2
	for i := range a.Rests {
		p := &a.Rests[i]
		if !p.Stable {
			continue
		}
		most := 0.0
		for k := range p.Angles {
			most = math.Max(most, math.Abs(p.Angles[k]-q.Angles[k]))
		}
		if most < off {
			best, off = p, most
		}
	}
	return best
}

var (
	timeAxis  = finding.Axis{Label: "time", Unit: "s"}
	angleAxis = finding.Axis{Label: "angle", Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}
)

func (res *Result) curvesOf(m *toy.Model, first *member, others []*member, times []float64) {
	band := ""
	if len(others) >= 8 {
		band = fmt.Sprintf(" The band holds 95 %% of %d toys drawn from the rig's uncertainties.", len(others))
	}
	for k, name := range m.Parts() {
		l := finding.Line{Name: name, Role: finding.Model, X: times, Y: first.angle[k]}
		if len(others) >= 8 {
			l.Lo, l.Hi = bandOf(others, times, func(o *member, i int) float64 { return o.angle[k][i] }, first.angle[k])
		}
		what := "Angle"
		if !m.OneAxis(k) {
			what = "Tilt from hanging"
		}
		res.Curves = append(res.Curves, finding.Curve{
			Key: "simulate-angle", Subject: name, Title: what + " of " + name,
			Caption: "The motion that the rig's numbers give." + band, X: timeAxis, Y: angleAxis, Lines: []finding.Line{l},
		}, finding.Curve{
			Key: "simulate-phase", Subject: name, Title: "Angle and rate of " + name,
			Caption: "Angular speed against angle: a closed ring is a steady swing, a spiral one that dies away, a tangle an irregular one.",
			X:       angleAxis, Y: finding.Axis{Label: "rate", Unit: "rad/s"},
			Lines: []finding.Line{{Name: name, Role: finding.Model, X: first.angle[k], Y: first.rate[k]}},
		})
	}
	e := finding.Line{Name: "all parts and magnets", Role: finding.Model, X: times, Y: first.total}
	res.Curves = append(res.Curves, finding.Curve{
		Key: "simulate-energy", Title: "Energy of the toy", Caption: "Kinetic, gravitational, spring and magnetic energy together. Friction takes from it, kicks add steps.",
		X: timeAxis, Y: finding.Axis{Label: "energy", Unit: "J"}, Lines: []finding.Line{e},
	})
}

// bandOf is the ensemble's 95 % at each frame, opened to hold the first member.
func bandOf(others []*member, times []float64, of func(*member, int) float64, first []float64) (lo, hi []float64) {
	all := make([]float64, len(others))
	for i := range times {
		for j, o := range others {
			all[j] = of(o, i)
		}
		sort.Float64s(all)
		lo = append(lo, math.Min(first[i], quantile(all, 0.025)))
		hi = append(hi, math.Max(first[i], quantile(all, 0.975)))
	}
	return lo, hi
}

// ledger lists the passes of parts that a coil kicks: the energy at the turning
// point before, the kick, and what friction took until the one after.
func ledger(m *toy.Model, o *toy.Motion) []Pass {
	var out []Pass
	y := make([]float64, m.StateLen())
	names := m.Parts()
	energy := func(t float64) float64 {
		o.At(t, y)
		return m.Energy(y).Total()
	}
	for k, name := range names {
		kicked := false
		for _, e := range o.Events {
			kicked = kicked || e.Part == k && (e.Kind == toy.Kick || e.Kind == toy.Refuse)
		}
		if !kicked {
			continue
		}
		o.At(o.T0, y)
		rest := 0.0
		if e, ok := m.SettlesAt(y); ok {
			rest = e.Energy
		}
		before, pass, kick := o.T0, math.NaN(), 0.0
		for _, e := range o.Events {
			if e.Part != k {
				continue
			}
			switch e.Kind {
			case toy.Pass:
				pass = e.T
			case toy.Kick:
				kick += e.Energy
			case toy.Turn:
				if !math.IsNaN(pass) {
					e0, e1 := energy(before), energy(e.T)
					out = append(out, Pass{Part: name, T: pass, Energy: e0 - rest, Kick: kick, Loss: e0 + kick - e1})
				}
				before, pass, kick = e.T, math.NaN(), 0
			}
		}
	}
	return out
}
