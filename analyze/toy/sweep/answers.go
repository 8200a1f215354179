package sweep

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// Regime says how a motion goes on.
type Regime uint8

// The regimes.
const (
	Unknown   Regime = iota
	Rests            // it has come to rest
	Dying            // it dies away
	Steady           // it keeps one amplitude
	Beating          // its amplitude changes in a regular way
	Irregular        // small differences grow: its future cannot be told for long
	Growing          // it still gains energy
)

var regimeWords = [...]string{"not known", "at rest", "dying away", "steady", "changing regularly", "irregular", "growing"}

func (r Regime) String() string { return regimeWords[r] }

// PartAnswer is what one part does. NaN where it does not arise.
type PartAnswer struct {
	Part      string
	Period    float64 // s, between like turning points late in the motion; of a part that goes round, one turn
	Amplitude float64 // rad, half of the swing's width late in the motion; of a ball joint the greatest tilt
	Centre    float64 // rad, the middle of that swing
	First     float64 // rad, half of its width at the start
	Rounds    float64 // whole turns in all, signed, of a part on a hinge or pin
}

// Rest is a place of rest.
type Rest struct {
	Angles []float64 // shown angle of each part; of a ball joint its tilt
	Stable bool
	Energy float64   // J
	Modes  []float64 // Hz, of small motions about it, slowest first
	Zetas  []float64
	state  []float64
}

// Answers is what one toy's motion tells.
type Answers struct {
	Parts    []PartAnswer
	Rests    []Rest
	EndsAt   int // index in Rests of the stable place where it ends, or about which it moves; −1 where that is not one
	Regime   Regime
	Exponent float64 // 1/s, greatest Lyapunov exponent over the motion's time; NaN where it was not sought
	Energy   float64 // J, mean over the last quarter, above the lowest place of rest
	Kicks    int
	KickJ    float64 // mean energy of a kick, J
	Uses     []toy.Use
	Problem  string // why there is no answer
}

// StableRests counts the stable places of rest.
func (a *Answers) StableRests() int {
	n := 0
	for i := range a.Rests {
		if a.Rests[i].Stable {
			n++
		}
	}
	return n
}

// Ask moves the toy of a rig and reads the answers off its motion. The error is
// ctx's alone; a toy that cannot be built or moved has its Problem said.
func Ask(ctx context.Context, r *rig.Rig, opt Options) (*Answers, error) {
	m, y, err := build(r)
	if err != nil {
		return &Answers{Problem: err.Error(), EndsAt: -1}, nil
	}
	a, _, err := ask(ctx, m, y, opt.seconds(r), opt)
	return a, err
}

func ask(ctx context.Context, m *toy.Model, y []float64, seconds float64, opt Options) (*Answers, *toy.Motion, error) {
	a := &Answers{EndsAt: -1, Exponent: math.NaN()}
	if err := a.findRests(ctx, m, opt.reach()); err != nil {
		return a, nil, err
	}
	o, err := m.Simulate(ctx, y, seconds, toy.Options{Tol: opt.tol(), Passes: true, Undriven: opt.Undriven})
	if err != nil {
		if ctx.Err() != nil {
			return a, o, ctx.Err()
		}
		a.Problem = err.Error()
		return a, o, nil
	}
	a.Uses = m.Battery(o)
	a.readParts(m, o)
	a.readKicks(o)
	a.readRegime(m, o)
	if a.Regime == Beating && m.Freedoms() > 1 {
		if err := a.seekExponent(ctx, m, y, seconds, opt); err != nil {
			return a, o, err
		}
	}
	a.readEnd(m, o)
	return a, o, nil
}

func (a *Answers) findRests(ctx context.Context, m *toy.Model, reach float64) error {
	found, err := m.Equilibria(ctx, reach)
	if err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		a.Problem = err.Error()
		return nil
	}
	for _, e := range found {
		rest := Rest{Stable: e.Stable, Energy: e.Energy, state: e.State}
		for k := range m.Parts() {
			angle, _ := m.Angle(e.State, k)
			rest.Angles = append(rest.Angles, math.Round(angle*1e8)/1e8+0) // found to about that; +0 makes −0 plain
		}
		if e.Stable {
			for _, mode := range m.Modes(e.State) {
				if mode.Frequency > 0 {
					rest.Modes = append(rest.Modes, mode.Frequency)
					rest.Zetas = append(rest.Zetas, mode.Zeta)
				}
			}
		}
		a.Rests = append(a.Rests, rest)
	}
	return nil
}

// readParts reads period and amplitude off the turning points.
func (a *Answers) readParts(m *toy.Model, o *toy.Motion) {
	y := make([]float64, m.StateLen())
	nan := math.NaN()
	for k, name := range m.Parts() {
		p := PartAnswer{Part: name, Period: nan, Amplitude: nan, Centre: nan, First: nan, Rounds: nan}
		var times, angles []float64
		for _, e := range o.Events {
			if e.Kind == toy.Turn && e.Part == k {
				o.At(e.T, y)
				angle, _ := m.Angle(y, k)
				times, angles = append(times, e.T), append(angles, angle)
			}
		}
		if m.OneAxis(k) {
			o.At(o.T0, y)
			from, _ := m.Angle(y, k)
			o.At(o.T1, y)
			to, _ := m.Angle(y, k)
			p.Rounds = math.Trunc((to - from) / (2 * math.Pi))
			p.swing(times, angles, o.T1)
			if math.IsNaN(p.Period) && p.Rounds != 0 {
				// It goes round: time of its last few turns.
				half := (o.T0 + o.T1) / 2
				o.At(half, y)
				middle, _ := m.Angle(y, k)
				if turned := math.Abs(to-middle) / (2 * math.Pi); turned > 1 {
					p.Period = (o.T1 - half) / turned
				}
			}
		} else {
			p.tilt(times, angles, o.T1)
		}
		a.Parts = append(a.Parts, p)
	}
}

// swing reads a one-axis part's turning points, which alternate.
func (p *PartAnswer) swing(t, angle []float64, end float64) {
	n := len(t)
	goesRound := func(i int) bool { return math.Abs(angle[i]-angle[i-1]) > 2*math.Pi }
	if n >= 2 && !goesRound(1) {
		p.First = math.Abs(angle[1]-angle[0]) / 2
	}
	late := 0
	for late < n && t[late] < 0.75*end {
		late++
	}
	if n-late < 5 { // a slow one: take what there is
		late = max(0, n-5)
	}
	if n-late < 3 {
		return
	}
	if (n-late)%2 == 0 {
		late++ // whole swings
	}
	for i := late + 1; i < n; i++ {
		if goesRound(i) {
			return // not a swing
		}
	}
	p.Period = 2 * (t[n-1] - t[late]) / float64(n-1-late)
	width, centre := 0.0, 0.0
	for i := late; i+1 < n; i++ {
		width += math.Abs(angle[i+1] - angle[i])
		centre += angle[i+1] + angle[i]
	}
	p.Amplitude, p.Centre = width/float64(2*(n-1-late)), centre/float64(2*(n-1-late))
}

// tilt reads a ball joint's greatest tilts; there are two in each swing.
func (p *PartAnswer) tilt(t, angle []float64, end float64) {
	n := len(t)
	if n == 0 {
		return
	}
	p.First = angle[0]
	late := 0
	for late < n && t[late] < 0.75*end {
		late++
	}
	late = min(late, max(0, n-3))
	sum := 0.0
	for _, x := range angle[late:] {
		sum += x
	}
	p.Amplitude = sum / float64(n-late)
	if n-late >= 3 {
		p.Period = 2 * (t[n-1] - t[late]) / float64(n-1-late)
	}
}

func (a *Answers) readKicks(o *toy.Motion) {
	sum := 0.0
	for _, e := range o.Events {
		if e.Kind == toy.Kick && e.Energy > 0 {
			a.Kicks++
			sum += e.Energy
		}
	}
	if a.Kicks > 0 {
		a.KickJ = sum / float64(a.Kicks)
	}
}

// readRegime compares the energy over the quarters of the motion.
func (a *Answers) readRegime(m *toy.Model, o *toy.Motion) {
	lowest := math.Inf(1)
	for i := range a.Rests {
		if a.Rests[i].Stable {
			lowest = math.Min(lowest, a.Rests[i].Energy)
		}
	}
	const samples = 2000
	y := make([]float64, m.StateLen())
	energy := make([]float64, samples)
	for i := range energy {
		o.At(o.T0+(o.T1-o.T0)*(float64(i)+0.5)/samples, y)
		energy[i] = m.Energy(y).Total()
		if math.IsInf(lowest, 1) {
			continue
		}
		energy[i] -= lowest
	}
	mean := func(from, to int) float64 {
		sum := 0.0
		for _, e := range energy[from:to] {
			sum += e
		}
		return sum / float64(to-from)
	}
	third, last := mean(samples/2, samples*3/4), mean(samples*3/4, samples)
	a.Energy = last
	// About the place where it ends: a deep well elsewhere is no motion here.
	o.At(o.T1, y)
	if e, ok := m.SettlesAt(y); ok {
		floor := e.Energy
		if !math.IsInf(lowest, 1) {
			floor -= lowest
		}
		third, last = third-floor, last-floor
		first := mean(0, samples/20) - floor
		if last < 1e-3*first {
			a.Regime = Rests
			return
		}
	}
	second := mean(samples/4, samples/2) - (mean(samples/2, samples*3/4) - third)
	driven := false
	for _, e := range o.Events {
		driven = driven || e.Kind == toy.Kick && e.T > o.T0+0.75*(o.T1-o.T0)
	}
	// A driven toy with several freedoms wanders in energy: only what goes one way
	// for long is a trend. All others lose or gain steadily.
	wanders := driven && m.Freedoms() > 1
	trend := last/third - 1
	if wanders && (third-second)*(last-third) < 0 {
		trend = 0
	}
	slight := 0.02
	if wanders {
		slight = 0.1
	}
	switch {
	case trend < -slight:
		a.Regime = Dying
	case trend > slight && driven:
		a.Regime = Growing
	default:
		a.Regime = Steady
		if a.amplitudesVary(m, o) {
			a.Regime = Beating
		}
	}
}

// amplitudesVary tells whether successive swings late in the motion differ by
// more than 2 %.
func (a *Answers) amplitudesVary(m *toy.Model, o *toy.Motion) bool {
	y := make([]float64, m.StateLen())
	for k := range m.Parts() {
		var swings []float64
		before := math.NaN()
		for _, e := range o.Events {
			if e.Kind != toy.Turn || e.Part != k || e.T < 0.6*o.T1 {
				continue
			}
			o.At(e.T, y)
			angle, _ := m.Angle(y, k)
			if !m.OneAxis(k) {
				swings = append(swings, angle)
			} else if !math.IsNaN(before) {
				swings = append(swings, math.Abs(angle-before))
			}
			before = angle
		}
		lo, hi := math.Inf(1), 0.0
		for _, s := range swings {
			lo, hi = math.Min(lo, s), math.Max(hi, s)
		}
		if len(swings) > 2 && hi-lo > 0.02*hi {
			return true
		}
	}
	return false
}

// seekExponent finds the greatest Lyapunov exponent over the motion by a second
// toy that starts beside the first and is brought back beside it again and again:
// G. Benettin, L. Galgani, J.-M. Strelcyn, Phys. Rev. A 14 (1976) 2338. It holds
// for kicked toys too.
func (a *Answers) seekExponent(ctx context.Context, m *toy.Model, start []float64, seconds float64, opt Options) error {
	const apart = 1e-7
	y := append([]float64(nil), start...)
	z := append([]float64(nil), start...)
	n := m.StateLen()
	for i := range z {
		z[i] += apart / math.Sqrt(float64(n)) * float64(1-2*(i%2))
	}
	step := math.Max(seconds/400, 0.05)
	rng := toy.Options{Tol: math.Min(opt.tol(), 1e-10), Undriven: opt.Undriven}
	sum, counted := 0.0, 0.0
	for t := 0.0; t < seconds-step/2; t += step {
		for _, x := range [2][]float64{y, z} {
			if err := m.Run(ctx, t, x, t+step, rng, nil, nil); err != nil {
				return ctx.Err() // a toy that cannot be moved on has no exponent
			}
			m.Normalise(x)
		}
		d := 0.0
		for i := range y {
			d += (z[i] - y[i]) * (z[i] - y[i])
		}
		d = math.Sqrt(d)
		if d == 0 {
			return nil
		}
		if t > 0.1*seconds { // the deviation has turned into the growing direction
			sum += math.Log(d / apart)
			counted += step
		}
		for i := range z {
			z[i] = y[i] + (z[i]-y[i])*apart/d
		}
	}
	if counted == 0 {
		return nil
	}
	a.Exponent = sum / counted
	// A regular motion's neighbours part in proportion to time: ln t over t.
	if a.Exponent*counted > 3*math.Log(1+seconds/step) {
		a.Regime = Irregular
	}
	return nil
}

// readEnd finds the stable place about which the motion ends.
func (a *Answers) readEnd(m *toy.Model, o *toy.Motion) {
	y := make([]float64, m.StateLen())
	o.At(o.T1, y)
	energy := m.Energy(y).Total()
	barrier := math.Inf(1)
	for i := range a.Rests {
		if !a.Rests[i].Stable {
			barrier = math.Min(barrier, a.Rests[i].Energy)
		}
	}
	if energy > barrier && a.StableRests() > 1 {
		return
	}
	a.EndsAt = a.settles(m, y)
}

// settles is the index of the stable place below y, −1 for none.
func (a *Answers) settles(m *toy.Model, y []float64) int {
	e, ok := m.SettlesAt(y)
	if !ok {
		return -1
	}
	best, at := 1e-4, -1
	for i := range a.Rests {
		if !a.Rests[i].Stable {
			continue
		}
		if d := m.Apart(e.State, a.Rests[i].state); d < best {
			best, at = d, i
		}
	}
	return at
}

// words sums the answers up in a sentence or two.
func (a *Answers) words(seconds float64) string {
	if a.Problem != "" {
		return a.Problem
	}
	var s string
	switch a.Regime {
	case Rests:
		s = fmt.Sprintf("The toy has come to rest within %.3g s.", seconds)
	case Dying:
		s = fmt.Sprintf("After %.3g s the motion is still dying away.", seconds)
	case Steady:
		s = "The motion keeps a steady amplitude."
	case Beating:
		s = "The motion goes on with an amplitude that changes."
		if !math.IsNaN(a.Exponent) {
			s += " Over this time a small difference does not clearly grow, so it is regular or only slowly irregular; a longer motion would tell."
		}
	case Irregular:
		s = fmt.Sprintf("The motion goes on irregularly: a small difference grows e-fold in %.2g s, so single positions cannot be told for long; averages and ranges can.", 1/a.Exponent)
	case Growing:
		s = fmt.Sprintf("After %.3g s the motion still gains energy.", seconds)
	default:
		s = "The regime of the motion is not known."
	}
	switch n := a.StableRests(); {
	case n == 1:
		s += " It has one stable place of rest."
	case n > 1:
		s += fmt.Sprintf(" It has %d stable places of rest.", n)
	}
	return s
}
