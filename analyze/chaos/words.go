package chaos

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

// words writes the line and the evidence.
func (r *Regime) words(m Motion) {
	if m.BeatS.V > 0 && r.BeatS.V > 0 {
		r.BeatS = m.BeatS
	}
	r.evidence()
	switch r.Kind {
	case Decaying:
		r.Text = "Decaying: a regular swing that dies down."
		if r.RestsS > 0 {
			r.Text = fmt.Sprintf("Decaying: a regular swing that dies down and rests from %.3g s on.", r.RestsS)
		}
	case Growing:
		r.Text = "Growing: a regular swing that is still gathering."
	case Steady:
		switch {
		case r.SteadyS > 0 && r.Change > 0:
			r.Text = fmt.Sprintf("Steady from about %.2g s on, after it has gathered.", r.SteadyS)
		case r.SteadyS > 0:
			r.Text = fmt.Sprintf("Steady from about %.2g s on, after a larger swing has died down to it.", r.SteadyS)
		case r.Mismatch < repeated && r.RepeatS > 1.5*r.PeriodS && r.Ripple > steadyRipple:
			r.Text = fmt.Sprintf("Steady: the same course over and over, every %.3g s.", r.RepeatS)
		default:
			r.Text = "Steady: the same swing over and over."
		}
	case Beating:
		dies := ""
		if r.dies {
			dies = ", and dies down slowly"
		}
		r.Text = fmt.Sprintf("Beating: the swing waxes and wanes every %.3g s as energy goes to and fro%s.", r.BeatS.V, dies)
	case QuasiPeriodic:
		r.Text = "Quasi-periodic: several steady swings at once, ordered though it never quite repeats."
	case IrregularDecaying:
		r.Text = "Irregular and decaying: it darts about while it dies down."
		if r.RestsS > 0 {
			r.Text = fmt.Sprintf("Irregular and decaying: it darts about and rests from %.3g s on.", r.RestsS)
		}
	case IntoStep:
		r.Text = fmt.Sprintf("Irregular at first; from about %.2g s on it is regular and goes on.", r.SteadyS)
		if r.RepeatS > 0 {
			r.Text = fmt.Sprintf("Irregular at first; from about %.2g s on it is steady, the same course over and over, every %.3g s.", r.SteadyS, r.RepeatS)
		}
	case Chaotic:
		d := r.Divergence
		r.Text = fmt.Sprintf("Chaotic: an error of prediction grows tenfold in %.2g s.", math.Ln10/d.Exponent.V)
	case Irregular:
		switch {
		case m.Never != "":
			r.Text = "Irregular, but not chaotic: " + m.Never + " chaotic."
		case r.NeedS > 0 && r.Passes < enough:
			r.Text = fmt.Sprintf("Irregular. Whether it is chaotic cannot be told from %d passes: it needs %d; film for about %s.", r.Passes, enough, filmFor(r.NeedS))
		case r.NeedS > 0:
			r.Text = fmt.Sprintf("Irregular. The tests for chaos do not agree, so it is not called chaotic; %d passes would decide it better: film for about %s.", sure, filmFor(r.NeedS))
		default:
			r.Text = "Irregular. The tests for chaos do not agree, so it is not called chaotic."
		}
	}
}

// filmFor rounds a time to film up to something that one can say.
func filmFor(s float64) string {
	if s < 100 {
		return fmt.Sprintf("%.0f s", 5*math.Ceil(s/5))
	}
	return fmt.Sprintf("%.3g min", math.Ceil(s/30)/2)
}

// evidence says in sentences what the regime was judged by.
func (r *Regime) evidence() {
	say := func(format string, a ...any) { r.Evidence = append(r.Evidence, fmt.Sprintf(format, a...)) }
	say("It passed its middle %d times; one swing takes about %.3g s", r.Passes, r.PeriodS)
	switch change := math.Exp(r.Change); {
	case r.slows:
		say("From start to end its speed falls to %.0f %%", 100*change)
	case change < 0.97:
		say("From start to end its amplitude falls to %.0f %%", 100*change)
	case change > 1.03:
		say("From start to end its amplitude grows to %.0f %%", 100*change)
	default:
		say("From start to end its amplitude stays within %.0f %%", max(1, 100*math.Abs(change-1)))
	}
	if r.Ripple > steadyRipple {
		say("Apart from that the amplitude goes up and down by %.0f %%", 100*r.Ripple)
	}
	switch {
	case r.Jump < regularJump:
		say("Each swing follows from those before it: turning points come where and when their neighbours let expect, within %s of a swing", share(r.Jump))
	case r.Explained < explained: // several oscillations at once make turning points uneven, too
		say("Swings do not follow from those before them: one turning point in four lies %s or more from where and when its neighbours let expect", ofASwing(r.Jump))
	}
	if r.RepeatS > 0 {
		switch {
		case r.Kind == IntoStep:
			say("From about %.2g s to the end it runs through the same course again every %.3g s; before that it does not", r.SteadyS, r.RepeatS)
		case r.Mismatch < repeated:
			say("After %.3g s it runs through the same course again, to within %s", r.RepeatS, share(r.Mismatch))
		default:
			say("It never quite repeats: at best, after %.3g s, it is %.0f %% as different as two moments picked at random", r.RepeatS, 100*r.Mismatch)
		}
	}
	say("A few pure oscillations together explain %s of the motion", share(r.Explained))
	if d := r.Divergence; d != nil {
		if d.Found {
			say("Nearly equal moments part: their difference grows at a rate of (%.2g ± %.1g) per s", d.Exponent.V, d.Exponent.U)
		} else {
			say("No steady parting of nearly equal moments was found: %s", d.Why)
		}
	}
	if z := r.ZeroOne; z != nil {
		verdict := "undecided"
		switch {
		case z.K.V > clearK:
			verdict = "chaos"
		case z.K.V < leastK:
			verdict = "regular motion"
		}
		say("The 0–1 test, which gives 0 for regular and 1 for chaotic motion, gives %.2f: %s", z.K.V, verdict)
	}
	if s := r.Surrogates; s != nil {
		if s.Rejected {
			say("It is not mere noise: its past foretells its future better than that of any of %d noises with the same spectrum", len(s.Errors))
		} else {
			say("It cannot be told from noise: its past foretells its future no better than that of noises with the same spectrum")
		}
	}
}

// ofASwing writes a share of a swing in words.
func ofASwing(x float64) string {
	if x >= 0.95 {
		return "a whole swing"
	}
	return share(x) + " of a swing"
}

// share writes a share of one in per cent; what is under a tenth of one so.
func share(x float64) string {
	switch {
	case x < 0.001:
		return "0.1 %"
	case x < 0.1 || x > 0.9 && x < 0.9995:
		return fmt.Sprintf("%.1f %%", 100*x)
	}
	return fmt.Sprintf("%.0f %%", 100*x)
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
	if r.Kind == Unknown {
		f.Kind, f.Text = finding.Undecided, r.Text
		if r.NeedS > 0 {
			f.Text += fmt.Sprintf(" Film for about %s.", filmFor(r.NeedS))
		}
	}
	for _, e := range r.Evidence {
		f.Evidence = append(f.Evidence, e+".")
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
	if r.Correlation != nil {
		out = append(out, r.Correlation.Finding(subject))
	}
	return out
}

// Curves returns the curves of the tests that were made; those of the embedding are
// Delay's and Dimension's own.
func (r *Regime) Curves(subject string) []finding.Curve {
	var out []finding.Curve
	if r.Divergence != nil && len(r.Divergence.After) > 0 {
		out = append(out, r.Divergence.Curve(subject))
	}
	if r.ZeroOne != nil {
		out = append(out, r.ZeroOne.Curve(subject))
	}
	if r.Correlation != nil && r.Correlation.Found {
		out = append(out, r.Correlation.Curve(subject, "rad"))
	}
	return out
}
