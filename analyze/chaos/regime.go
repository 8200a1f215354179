package chaos

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
	"lodeswing/analyze/spectrum"
)

// Motion is what is known of a toy's motion: one or more columns (angles of its
// parts, positions of its bobs), all in one unit, at the same times.
type Motion struct {
	T       []float64   // s, as they are
	Columns [][]float64 // NaN where a sample is missing
	U       float64     // standard uncertainty of a sample, typical of all columns
	// Never says, in plain words, why this toy cannot be chaotic whatever it does
	// as Never has it ("… cannot be"); empty: it may be.
	Never string
	// Undriven: by its rig nothing drives the toy, so that in the end it rests.
	Undriven bool
	// BeatS is the beat period in s as the modes of all parts tell it; it is told in
	// place of that of two spectral lines of one column. 0: not known.
	BeatS Value
}

// Kind is a regime.
type Kind string

// The regimes.
const (
	AtRest            Kind = "at rest"
	Decaying          Kind = "decaying"
	Steady            Kind = "steady"
	Growing           Kind = "growing"
	Beating           Kind = "beating"
	QuasiPeriodic     Kind = "quasi-periodic"
	IrregularDecaying Kind = "irregular and decaying"
	Irregular         Kind = "irregular"
	Chaotic           Kind = "chaotic"
	IntoStep          Kind = "irregular, then steady"
	Unknown           Kind = "not known"
)

// Regime is how a toy behaves, with the evidence.
type Regime struct {
	Kind       Kind
	Text       string  // one line in plain words
	Confidence float64 // 0 … 1
	Evidence   []string
	Cautions   []string
	Passes     int     // trips through the middle
	PeriodS    float64 // s, of the strongest line
	Change     float64 // logarithm of the amplitude at the end over that at the start
	Ripple     float64 // scatter of the amplitude about its course, over the amplitude
	// Jump is how far turning points and passes lie from the course of their
	// neighbours, over the amplitude: three quarters of them lie nearer. Of several
	// columns the worst.
	Jump      float64
	Explained float64 // share of the motion that spectral lines explain; of several columns the least
	RepeatS   float64 // s, after which the motion comes again most nearly (up to 20 periods)
	Mismatch  float64 // the difference then, over that of unrelated moments
	RestsS    float64 // s, when it comes to rest within the clip; 0 when it does not
	SteadyS   float64 // s, from when on a swing that gathered, died or darted about at first stays the same; 0: from the start, or never
	BeatS     Value   // s, beat period; 0 when it does not beat
	NeedS     float64 // s, how long to film to know more; 0 when it is enough
	States    recurrence.Vectors
	// Delay and Dimension are the embedding of the column that moves most; nil when
	// the motion is too short for them.
	Delay      *Delay
	Dimension  *Dimension
	Divergence *Divergence
	ZeroOne    *ZeroOne
	Surrogates *Surrogates
	// Correlation is the correlation dimension of the column that lines explain least.
	Correlation *Correlation
	slows       bool    // its speed falls more than its amplitude
	dies        bool    // it beats, and dies down
	dying       bool    // its speed falls
	spanS       float64 // s, of the motion
	wild        int     // the column that lines explain least
	spectrum    *spectrum.Spectrum
}

const (
	// enough is how many passes an exponent needs, and sure how many decide when the
	// tests do not agree.
	enough = 100
	sure   = 300
)

// The limits between regimes, as shares of the amplitude. They were set on the
// toys of the demo workshop and on simulated motions; no source.
const (
	steadyRipple = 0.03  // an amplitude that scatters less is steady
	regularJump  = 0.1   // turning points nearer to their neighbours' course are regular
	decayed      = 0.15  // a fall of ln(amplitude) that counts as decay
	explained    = 0.985 // few lines that explain this much make a motion quasi-periodic
	regularLines = 0.9   // a motion of which its lines explain less is not regular, unless it merely slows
	repeated     = 0.05  // a course that comes again with less difference is periodic
	few          = 4     // lines; with many, anything short can be explained
	moves        = 0.3   // columns that move this much of what the main one does count
)

// Assess tells the regime of a motion. It errs only for input that makes no sense;
// a clip too short or too noisy is told so in the Regime.
func Assess(ctx context.Context, m Motion) (*Regime, error) {
	e, err := even(m)
	if err != nil {
		return nil, err
	}
	r := &Regime{Kind: Unknown}
	if from, to := m.T[0], m.T[len(m.T)-1]; e.step*float64(e.n) < 0.8*(to-from) {
		r.Cautions = append(r.Cautions, fmt.Sprintf("There are gaps: this was judged from the longest stretch without one, from %.1f s to %.1f s.", e.from, e.from+e.step*float64(e.n-1)))
	}
	size := e.size()
	if size < 5*m.U || size == 0 {
		r.Kind, r.Confidence = AtRest, 0.95
		r.Text = "At rest: it moves by no more than the measurement's own scatter."
		return r, nil
	}
	whole := e.n
	r.RestsS = e.moving(m.U)
	if e.n < 64 && whole >= 64 {
		r.Kind, r.Confidence = AtRest, 0.8
		r.Text = fmt.Sprintf("At rest but for %.2g s.", float64(e.n)*e.step)
		return r, nil
	}
	if e.n < 64 {
		r.Text, r.NeedS = "Too short to say how it behaves.", 64*e.step
		return r, nil
	}
	if err := e.choose(ctx); err != nil {
		return nil, err
	}
	main := e.columns[e.main]
	mean, _ := meanSD(main)
	cut, err := Cut(e.times(), [][]float64{main}, 0, mean, Both)
	if err != nil {
		return nil, err
	}
	if r.Passes = len(cut.T); r.Passes < 8 && r.RestsS > 0 {
		r.Kind, r.Confidence = Decaying, 0.7
		r.Text = fmt.Sprintf("Decaying: it rests from %.3g s on, after few swings.", r.RestsS)
		return r, nil
	}
	if r.Passes < 8 {
		r.Text = fmt.Sprintf("Too short to say how it behaves: it passes its middle only %d times.", r.Passes)
		r.NeedS = 10 / float64(max(r.Passes, 1)) * e.step * float64(e.n)
		return r, nil
	}
	// Where no line stands out the motion is broad noise or chaos, for the tests to tell.
	if r.spectrum, r.Explained, err = e.lines(e.main, few); err != nil {
		return nil, err
	}
	r.describe(e, m)
	if err := r.decide(ctx, e, m); err != nil {
		return nil, err
	}
	r.words(m)
	return r, nil
}

// describe sets the numbers that the decision rests on.
func (r *Regime) describe(e *evenly, m Motion) {
	r.spanS = e.step * float64(e.n)
	r.PeriodS = e.turn(e.main) * e.step
	if l := r.spectrum.Lines; len(l) > 0 && 1/l[0].Frequency < e.longest() {
		r.PeriodS = 1 / l[0].Frequency
	}
	mean, _ := meanSD(e.columns[e.main])
	amp, at := e.turning(e.main, mean)
	r.Change, r.Ripple = course(at, amp)
	r.wild = e.main
	if typical := median(slices.Clone(amp)); typical > 0 {
		// What the measurement's scatter alone makes of it.
		noise := 2 * m.U / typical
		r.Ripple = math.Sqrt(max(0, r.Ripple*r.Ripple-noise*noise))
	}
	for _, k := range e.busy() {
		r.Jump = max(r.Jump, e.unruly(k, m.U))
		if k == e.main {
			continue
		}
		if _, explains, err := e.lines(k, few); err == nil && explains < r.Explained {
			r.Explained, r.wild = explains, k
		}
	}
	least := 2 * decayed
	if m.Undriven {
		least = decayed / 3 // it can but lose speed; a swing that turns may seem to grow
		r.Change = min(r.Change, 0)
	}
	if pace, uPace := e.pace(r.PeriodS); pace < -least && pace < -4*uPace {
		r.slows = pace < r.Change-decayed // a part that goes round keeps its amplitude
		r.dying = true
		r.Change = min(r.Change, pace)
	}
	r.RepeatS, r.Mismatch = e.repeats(r.PeriodS, m.U)
	if math.Abs(r.Change) > decayed && r.RestsS == 0 && !m.Undriven {
		r.SteadyS = e.settled(at, amp, r.PeriodS, m.U)
	}
}

// settled is when an amplitude that changed at first stays the same, and all columns
// repeat without losing speed, if that is so for two fifths of the time or more; else
// 0. (The swing of a ball joint turns, which one column alone may show as steady.)
func (e *evenly) settled(at, amp []float64, periodS, u float64) float64 {
	for part := 2; part <= 6; part++ {
		from := len(at) * part / 10
		if len(at)-from < 16 {
			return 0
		}
		change, ripple := course(at[from:], amp[from:])
		// That it is the same, and not merely changing ever more slowly.
		if math.Abs(change) > decayed/3 || ripple > steadyRipple {
			continue
		}
		rest := e.after(int((at[from] - e.from) / e.step))
		if pace, _ := rest.pace(periodS); math.Abs(pace) > decayed/2 {
			continue
		}
		if _, mismatch := rest.repeats(periodS, u); mismatch < repeated {
			return at[from]
		}
	}
	return 0
}

// decide sets the kind, with the tests for chaos where they are called for.
func (r *Regime) decide(ctx context.Context, e *evenly, m Motion) error {
	decays := r.Change < -decayed && -r.Change > 1.5*r.Ripple || r.RestsS > 0 || r.dying
	grows := r.Change > decayed && r.Change > 1.5*r.Ripple
	smooth := r.Jump < regularJump && (r.Explained > regularLines || r.dying && r.Jump < regularJump/2)
	lines := r.lines()
	regular := smooth || r.Explained > explained
	switch {
	case regular && r.Ripple > 5*steadyRipple && m.Never == "" && len(lines) >= 2 && (m.BeatS.V > 0 || len(e.columns) == 1 || r.Ripple > 10*steadyRipple) && r.beats(lines, false):
		r.Kind, r.dies = Beating, decays
	case decays && r.SteadyS > 0 && smooth, grows && r.SteadyS > 0 && smooth:
		r.Kind = Steady
	case decays && regular:
		r.Kind = Decaying
	case decays:
		r.Kind = IrregularDecaying
	case grows && smooth:
		r.Kind = Growing
	case smooth && r.Ripple < steadyRipple:
		r.Kind = Steady
	case regular && m.Never == "" && len(lines) >= 2 && r.beats(lines, smooth):
		r.Kind = Beating
	case smooth || r.Mismatch < repeated/2:
		r.Kind = Steady // its amplitude may wander, but not from swing to swing
	case r.Explained > explained:
		r.Kind = QuasiPeriodic
	case r.Mismatch < repeated:
		r.Kind = Steady
	default:
		r.Kind = Irregular
	}
	r.Confidence = r.margin()
	if !m.Undriven && (r.Kind == Irregular || r.Kind == IrregularDecaying && r.RestsS == 0) {
		if from, every, ok := e.intoStep(r.PeriodS, m.U); ok {
			r.Kind, r.SteadyS, r.RepeatS, r.Confidence = IntoStep, from, every, 0.85
			return nil
		}
	}
	if r.Kind == Irregular {
		return r.chaos(ctx, e, m)
	}
	return nil
}

// margin is the confidence of a decision by limits: high far from them.
func (r *Regime) margin() float64 {
	away := func(x, limit float64) float64 {
		if x <= 0 {
			return 1
		}
		return min(1, math.Abs(math.Log(x/limit))/math.Ln2)
	}
	c := 1.0
	if r.Kind != Beating && r.Kind != QuasiPeriodic {
		c = away(math.Abs(r.Change), decayed)
	}
	switch r.Kind {
	case Steady:
		c = min(c, away(r.Ripple, steadyRipple))
	case IrregularDecaying, Irregular, QuasiPeriodic, Beating:
		c = min(c, away(max(1-r.Explained, 1e-6), 1-explained))
	}
	return 0.6 + 0.38*c
}

// lines are the sinusoids that hold more than a hundredth of the strongest's
// power, strongest first.
func (r *Regime) lines() []spectrum.Line {
	all := slices.Clone(r.spectrum.Sinusoids)
	slices.SortFunc(all, func(a, b spectrum.Line) int { return -cmp.Compare(a.LevelDB, b.LevelDB) })
	if len(all) == 0 {
		return nil
	}
	top := all[0].LevelDB
	return slices.DeleteFunc(all, func(l spectrum.Line) bool { return l.LevelDB < top-20 })
}

// beats tells whether the two strongest lines lie so near that the eye sees one
// motion wax and wane (or whether the turning points say so), and sets the beat
// period.
func (r *Regime) beats(lines []spectrum.Line, smooth bool) bool {
	a, b := lines[0], lines[1]
	d := math.Abs(a.Frequency - b.Frequency)
	if d > 0.35*a.Frequency && !smooth || d*r.spanS < 1.4 { // nor is a beat that the clip does not show once and a half
		return false
	}
	u := math.Hypot(a.UFrequency, b.UFrequency)
	r.BeatS = Value{1 / d, u / (d * d)}
	return true
}
