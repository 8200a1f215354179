package chaos

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
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
	Jump       float64 // how far turning points and passes lie from the course of their neighbours, over the amplitude
	Explained  float64 // share of the motion that spectral lines explain
	RepeatS    float64 // s, after which the motion comes again most nearly (up to 20 periods)
	Mismatch   float64 // the difference then, over that of unrelated moments
	RestsS     float64 // s, when it comes to rest within the clip; 0 when it does not
	BeatS      Value   // s, beat period; 0 when it does not beat
	NeedS      float64 // s, how long to film to know more; 0 when it is enough
	States     recurrence.Vectors
	Delay      *Delay
	Dimension  *Dimension
	Divergence *Divergence
	ZeroOne    *ZeroOne
	Surrogates *Surrogates
	slows      bool // its speed falls, whatever its amplitude does
	spectrum   *spectrum.Spectrum
}

// enough is how many passes an exponent needs.
const enough = 100

// The limits between regimes, as shares of the amplitude. They were set on the
// toys of the demo workshop and on simulated motions; no source.
const (
	steadyRipple = 0.03  // an amplitude that scatters less is steady
	regularJump  = 0.08  // turning points nearer to their neighbours' course are regular
	decayed      = 0.15  // a fall of ln(amplitude) that counts as decay
	explained    = 0.985 // few lines that explain this much make a motion quasi-periodic
	repeated     = 0.05  // a course that comes again with less difference is periodic
	few          = 4     // lines; with many, anything short can be explained
)

// Assess tells the regime of a motion. It errs only for input that makes no sense;
// a clip too short or too noisy is told so in the Regime.
func Assess(ctx context.Context, m Motion) (*Regime, error) {
	e, err := even(m)
	if err != nil {
		return nil, err
	}
	r := &Regime{Kind: Unknown}
	size := e.size()
	if size < 5*m.U || size == 0 {
		r.Kind, r.Confidence = AtRest, 0.95
		r.Text = fmt.Sprintf("At rest: it moves by no more than the measurement's own scatter (%.2g).", max(m.U, size))
		return r, nil
	}
	whole := e.n
	r.RestsS = e.moving(m.U)
	main := e.columns[e.main]
	if e.n < 64 && whole >= 64 {
		r.Kind, r.Confidence = AtRest, 0.8
		r.Text = fmt.Sprintf("At rest but for %.2g s.", float64(e.n)*e.step)
		return r, nil
	}
	if e.n < 64 {
		r.Text, r.NeedS = "Too short to say how it behaves.", 64*e.step
		return r, nil
	}
	r.spectrum, err = spectrum.Compute(e.times(), main, nil, spectrum.Options{
		MaxLines: few, Spare: -1, MinFreq: 4 / (e.step * float64(e.n)),
	})
	mean, _ := meanSD(main)
	cut, cutErr := Cut(e.times(), [][]float64{main}, 0, mean, Both)
	if cutErr != nil {
		return nil, cutErr
	}
	if r.Passes = len(cut.T); r.Passes < 8 {
		r.Text = fmt.Sprintf("Too short to say how it behaves: only %d passes.", r.Passes)
		r.NeedS = 10 / float64(max(r.Passes, 1)) * e.step * float64(e.n)
		return r, nil
	}
	if err != nil || len(r.spectrum.Lines) == 0 {
		r.Text = "No frequency stands out of the scatter; nothing can be said of how it behaves."
		return r, nil
	}
	r.describe(e, mean, cut.T, m.U)
	if err := r.decide(ctx, e, m); err != nil {
		return nil, err
	}
	r.words(m)
	return r, nil
}

// describe sets the numbers that the decision rests on.
func (r *Regime) describe(e *evenly, mean float64, passes []float64, u float64) {
	r.PeriodS = 1 / r.spectrum.Lines[0].Frequency
	sd := e.size()
	r.Explained = 1 - r.spectrum.Noise*r.spectrum.Noise/(sd*sd)
	amp, at := e.turning(mean)
	r.Change, r.Ripple = course(at, amp)
	if typical := median(slices.Clone(amp)); typical > 0 {
		// In height over the amplitude, and in time as the angle of a turn: a part that
		// goes round shows its whims in time alone.
		r.Jump = math.Hypot(jump(amp)/typical, 2*math.Pi*jump(passes)/r.PeriodS)
		// What the measurement's scatter alone makes of it.
		noise := 2 * u / typical
		r.Ripple = math.Sqrt(max(0, r.Ripple*r.Ripple-noise*noise))
		r.Jump = math.Sqrt(max(0, r.Jump*r.Jump-noise*noise))
	}
	if pace, uPace := e.pace(r.PeriodS); pace < -2*decayed && pace < -4*uPace {
		r.Change = min(r.Change, pace)
		r.slows = true
	}
	r.RepeatS, r.Mismatch = e.repeats(r.PeriodS, u)
}

// decide sets the kind, with the tests for chaos where they are called for.
func (r *Regime) decide(ctx context.Context, e *evenly, m Motion) error {
	decays := r.Change < -decayed && -r.Change > 1.5*r.Ripple || r.RestsS > 0 || r.slows
	grows := r.Change > decayed && r.Change > 1.5*r.Ripple
	smooth := r.Jump < regularJump && r.Explained > 0.5
	lines := r.lines()
	switch {
	case decays && (smooth || r.Explained > explained):
		r.Kind = Decaying
	case decays:
		r.Kind = IrregularDecaying
	case grows && smooth:
		r.Kind = Growing
	case smooth && r.Ripple < steadyRipple:
		r.Kind = Steady
	case (smooth || r.Explained > explained) && len(lines) >= 2 && r.beats(lines, smooth):
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
	c := away(math.Abs(r.Change), decayed)
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
	if d > 0.35*a.Frequency && !smooth {
		return false
	}
	u := math.Hypot(a.UFrequency, b.UFrequency)
	r.BeatS = Value{1 / d, u / (d * d)}
	return true
}

// chaos applies the tests to an irregular motion that does not decay. All three
// must agree: an exponent beyond three of its uncertainties, K above 0.7, and no
// surrogate that does as well.
func (r *Regime) chaos(ctx context.Context, e *evenly, m Motion) error {
	if m.Never != "" {
		return nil
	}
	if r.Passes < enough {
		r.NeedS = 1.2 * enough / float64(r.Passes) * e.step * float64(e.n)
		r.Confidence = 0.7
		return nil
	}
	period := r.PeriodS / e.step
	main := e.columns[e.main]
	var err error
	if r.Delay, err = MutualInformation(main, e.step, int(2*period)); err != nil {
		return err
	}
	band := int(math.Ceil(period))
	if r.Dimension, err = FalseNeighbours(main, r.Delay.Samples, 8, band); err != nil {
		return err
	}
	// Positions and, by a short delay, their rates; of one column alone the delays
	// that its own embedding asks for.
	if len(e.columns) > 1 {
		r.States, err = recurrence.Embed(e.from, e.step, 2, max(1, int(math.Round(period/8))), e.columns...)
	} else {
		r.States, err = recurrence.Embed(e.from, e.step, max(2, r.Dimension.Dim), r.Delay.Samples, e.columns...)
	}
	if err != nil {
		return err
	}
	if r.Divergence, err = Diverge(r.States, DivergenceOptions{Period: max(1, period)}); err != nil {
		return err
	}
	var quarter []float64
	for i := 0.0; int(i) < len(main); i += max(1, period/4*1.13) { // not in step with the period
		quarter = append(quarter, main[int(i)])
	}
	if len(quarter) >= 200 {
		if r.ZeroOne, err = ZeroOneTest(quarter); err != nil {
			return err
		}
	}
	dim := min(max(2, r.Dimension.Dim), 5)
	if r.Surrogates, err = SurrogateTest(ctx, thin(main, period), SurrogateOptions{
		Dim: dim, Delay: max(1, r.Delay.Samples/stride(period)), Band: max(1, band/stride(period)), Count: 19,
	}); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		r.Cautions = append(r.Cautions, err.Error())
	}
	d := r.Divergence
	votes := 0
	if d.Found && d.Exponent.V > 3*d.Exponent.U {
		votes++
	}
	if r.ZeroOne != nil && r.ZeroOne.K.V > 0.7 {
		votes++
	}
	if r.Surrogates != nil && r.Surrogates.Rejected {
		votes++
	}
	if votes == 3 {
		r.Kind = Chaotic
		z := d.Exponent.V / d.Exponent.U
		r.Confidence = min(0.98, 0.8+0.04*(z-3))
	} else {
		r.Confidence = 0.6
	}
	return nil
}

// stride thins a series to some twelve samples a period.
func stride(period float64) int { return max(1, int(period/12)) }

func thin(x []float64, period float64) []float64 {
	var out []float64
	for i := 0; i < len(x); i += stride(period) {
		out = append(out, x[i])
	}
	return out
}

// words writes the line and the evidence.
func (r *Regime) words(m Motion) {
	if m.BeatS.V > 0 && r.BeatS.V > 0 {
		r.BeatS = m.BeatS
	}
	say := func(format string, a ...any) { r.Evidence = append(r.Evidence, fmt.Sprintf(format, a...)) }
	say("%d passes, a period of %.3g s", r.Passes, r.PeriodS)
	say("from start to end the amplitude changes by a factor of %.2f, and scatters by %.1f %% about its course", math.Exp(r.Change), 100*r.Ripple)
	say("turning points and passes lie %.1f %% of the amplitude from the course of their neighbours", 100*r.Jump)
	say("after %.3g s it comes again with %.0f %% of the difference of unrelated moments", r.RepeatS, 100*r.Mismatch)
	say("spectral lines explain %.1f %% of the motion", 100*r.Explained)
	if d := r.Divergence; d != nil {
		if d.Found {
			say("near states part at a rate of (%.2g ± %.1g) per s", d.Exponent.V, d.Exponent.U)
		} else {
			say("%s", d.Why)
		}
	}
	if r.ZeroOne != nil {
		say("the 0–1 test gives K = %.2f (1 is chaos)", r.ZeroOne.K.V)
	}
	if s := r.Surrogates; s != nil {
		if s.Rejected {
			say("it foretells itself better than any of its surrogates")
		} else {
			say("it foretells itself no better than noise of its spectrum would")
		}
	}
	switch r.Kind {
	case Decaying:
		r.Text = "Decaying: a regular swing that dies down."
		if r.RestsS > 0 {
			r.Text = fmt.Sprintf("Decaying: a regular swing that dies down and rests from %.3g s on.", r.RestsS)
		}
	case Growing:
		r.Text = "Growing: a regular swing that is still gathering."
	case Steady:
		r.Text = "Steady: the same swing over and over."
		if r.Mismatch < repeated && r.RepeatS > 1.5*r.PeriodS && r.Ripple > steadyRipple {
			r.Text = fmt.Sprintf("Steady: the same course over and over, every %.3g s.", r.RepeatS)
		}
	case Beating:
		r.Text = fmt.Sprintf("Beating: the swing waxes and wanes every %.3g s as energy goes to and fro.", r.BeatS.V)
	case QuasiPeriodic:
		r.Text = "Quasi-periodic: several steady swings at once, ordered though it never quite repeats."
	case IrregularDecaying:
		r.Text = "Irregular and decaying: it darts about while it dies down."
		if r.RestsS > 0 {
			r.Text = fmt.Sprintf("Irregular and decaying: it darts about and rests from %.3g s on.", r.RestsS)
		}
	case Chaotic:
		d := r.Divergence
		r.Text = fmt.Sprintf("Chaotic: what will happen is lost within a few times %.2g s.", 1/d.Exponent.V)
	case Irregular:
		switch {
		case m.Never != "":
			r.Text = "Irregular, but not chaotic: " + m.Never + " chaotic."
		case r.NeedS > 0:
			r.Text = fmt.Sprintf("Irregular. Whether it is chaotic needs %d passes; film for about %.0f s.", enough, r.NeedS)
		default:
			r.Text = "Irregular; the tests for chaos do not agree, so it is not called chaotic."
		}
	}
}

// Findings returns the regime as a statement, and the findings of the tests that
// were made.
func (r *Regime) Findings(subject string) []finding.Finding {
	f := finding.Finding{
		Key: "regime", Subject: subject, Name: "Regime", Unit: "1", Kind: finding.Statement,
		Text:     fmt.Sprintf("%s Confidence %.0f %%.", r.Text, 100*r.Confidence),
		Method:   "Course and scatter of the turning points, spectral lines; for irregular motion exponent, 0–1 test and surrogates together",
		Cautions: slices.Clone(r.Cautions),
	}
	for _, e := range r.Evidence {
		f.Cautions = append(f.Cautions, "Evidence: "+e+".")
	}
	out := []finding.Finding{f}
	if r.BeatS.V > 0 && r.Kind == Beating {
		out = append(out, finding.Normal("regime.beat_period", subject, "Beat period", r.BeatS.V, r.BeatS.U, "s", "Difference of the two strongest spectral lines"))
	}
	if r.Divergence != nil {
		out = append(out, r.Divergence.Findings(subject)...)
	}
	if r.ZeroOne != nil {
		out = append(out, r.ZeroOne.Finding(subject))
	}
	if r.Surrogates != nil {
		out = append(out, r.Surrogates.Finding(subject))
	}
	return out
}

// Curves returns the curves of the tests that were made.
func (r *Regime) Curves(subject string) []finding.Curve {
	var out []finding.Curve
	if r.Delay != nil {
		out = append(out, r.Delay.Curve(subject, r.Delay.S/float64(max(1, r.Delay.Samples))))
	}
	if r.Dimension != nil {
		out = append(out, r.Dimension.Curve(subject))
	}
	if r.Divergence != nil && len(r.Divergence.After) > 0 {
		out = append(out, r.Divergence.Curve(subject))
	}
	if r.ZeroOne != nil {
		out = append(out, r.ZeroOne.Curve(subject))
	}
	return out
}
