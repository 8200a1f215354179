package analyze

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/decay"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/analyze/series"
	"lodeswing/analyze/spectrum"
	"lodeswing/track"
)

const degree = math.Pi / 180

const (
	// mostLines is how many spectral lines are looked for in one motion, and
	// freeLines in a free decay, whose lines drift apart as the amplitude falls;
	// modes of several bobs are told apart elsewhere.
	mostLines = 4
	freeLines = 2
	// mostSamples is how many samples a spectrum is made of, at most; neighbours
	// are averaged where there are more, since the search takes a minute for ten
	// thousand.
	mostSamples = 5000
)

// angles turns the track, or the tables, into angle series.
func angles(_ context.Context, w *work) error {
	var all []series.Angle
	var err error
	if w.track != nil {
		all, err = series.FromTrack(w.track, w.rig)
	} else {
		all, err = fromTables(w.tables)
	}
	have := map[string]bool{}
	for _, a := range all {
		if a.Problem != "" {
			subject := a.Part
			if subject == "" {
				subject = a.Bob
			}
			w.undecided("series.angle", subject, "Angle", a.Problem, "direction from the pivot to the bob")
			err = nil // said, in the words of the bob that it is about
			continue
		}
		if !have[a.Part] { // a second bob on the same part tells the same
			have[a.Part] = true
			w.angles = append(w.angles, a)
		}
	}
	if err != nil {
		return err
	}
	for i := range w.angles {
		a := &w.angles[i]
		w.rec.Angles = append(w.rec.Angles, record.Angles{
			Part: a.Part, T: a.T, Angle: a.Angle, U: a.UAngle, Rate: a.Rate, URate: a.URate,
		})
		w.caution(a.Part, a.Cautions...)
		if words := gaps(a); words != "" {
			w.rec.Cautions = append(w.rec.Cautions, words)
		}
		if a.Pivot.From != "" && a.Pivot.R > 0 && !a.Pivot.Moves {
			f := finding.Normal("series.radius", a.Part, fmt.Sprintf("Distance of “%s” from the pivot", a.Bob), a.Pivot.R, a.Pivot.UR, "m", a.Pivot.From)
			if w.track != nil {
				f.Budget = radiusBudget(a.Pivot, &w.track.Cal)
			}
			w.rec.Findings = append(w.rec.Findings, f)
		}
	}
	return nil
}

// radiusBudget splits a distance's uncertainty into the pictures' share and what
// each source of the scale's uncertainty does.
func radiusBudget(p series.Pivot, cal *track.Calibration) []finding.Share {
	scale := cal.UScale * p.R
	out := []finding.Share{{Source: "pictures and the rig's dimensions", U: math.Sqrt(math.Max(0, p.UR*p.UR-scale*scale))}}
	if len(cal.ScaleShares) == 0 {
		return append(out, finding.Share{Source: "scale", U: scale})
	}
	for _, s := range cal.ScaleShares {
		out = append(out, finding.Share{Source: "scale: " + s.Source, U: s.U * p.R})
	}
	return out
}

func fromTables(tables []record.Angles) ([]series.Angle, error) {
	var all []series.Angle
	var first error
	for _, t := range tables {
		u := t.U
		if slices.ContainsFunc(u, math.IsNaN) {
			u = nil
		}
		a, err := series.FromTable(t.Part, t.T, t.Angle, u)
		if err != nil {
			a.Problem = err.Error()
			if first == nil {
				first = err
			}
		}
		all = append(all, a)
	}
	return all, first
}

// gaps says in one sentence where a series has no samples; empty when it has none.
func gaps(a *series.Angle) string {
	if len(a.Gaps) == 0 {
		return ""
	}
	total, longest := 0.0, a.Gaps[0]
	for _, g := range a.Gaps {
		total += g.ToS - g.FromS
		if g.ToS-g.FromS > longest.ToS-longest.FromS {
			longest = g
		}
	}
	if len(a.Gaps) == 1 {
		return fmt.Sprintf("“%s” was not measured from %.2f s to %.2f s (%s); nothing was filled in.", a.Bob, longest.FromS, longest.ToS, longest.Why)
	}
	return fmt.Sprintf("“%s” was not measured in %d gaps, %.2f s in all, the longest from %.2f s to %.2f s (%s); nothing was filled in.",
		a.Bob, len(a.Gaps), total, longest.FromS, longest.ToS, longest.Why)
}

// decays looks for the free decay of each part.
func decays(ctx context.Context, w *work) error {
	for i := range w.angles {
		a := &w.angles[i]
		res, err := decay.Analyze(ctx, *a, decay.OptionsFor(w.rig, a.Part, a.Bob, w.clip))
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			w.undecided("decay.free_decay", a.Part, "Free decay", err.Error(), "fit of a damped swing")
			w.motion(a)
			continue
		}
		w.decays = append(w.decays, res)
		w.rec.Findings = append(w.rec.Findings, res.Findings...)
		w.rec.Fits = append(w.rec.Fits, res.Fits...)
		w.rec.Curves = append(w.rec.Curves, res.Curves...)
		w.caution(a.Part, res.Cautions...)
		if !res.Found {
			w.motion(a)
		}
	}
	return nil
}

// motion adds the plain curves of a part that no free decay explains: angle over
// time and the phase portrait.
func (w *work) motion(a *series.Angle) {
	angle := finding.Axis{Label: "angle", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / degree}
	t, y := a.Broken(a.Angle)
	u := a.UAngle[len(a.UAngle)/2]
	w.rec.Curves = append(w.rec.Curves, finding.Curve{
		Key: "angle", Subject: a.Part, Title: "Angle over time", X: finding.Axis{Label: "time", Unit: "s"}, Y: angle,
		Caption: fmt.Sprintf("The measured angle; one sample's standard uncertainty is %s.", finding.DisplayU(u, "rad")),
		Lines:   []finding.Line{{Name: "measured", Role: finding.Data, X: t, Y: y}},
	})
	_, rate := a.Broken(a.Rate)
	w.rec.Curves = append(w.rec.Curves, finding.Curve{
		Key: "phase", Subject: a.Part, Title: "Phase portrait", X: angle,
		Y:       finding.Axis{Label: "rate", Unit: "rad/s", ShowUnit: "°/s", ShowFactor: 1 / degree},
		Caption: "Rate against angle. A steady swing draws one closed loop.",
		Lines:   []finding.Line{{Name: "measured", Role: finding.Data, X: y, Y: rate}},
	})
}

// spectra finds the spectral lines of each part's angle, and of the sideways
// motion of each bob that gives no angle.
func spectra(ctx context.Context, w *work) error {
	told := map[string]bool{}
	for i := range w.angles {
		a := &w.angles[i]
		told[a.Bob] = true
		if goesRound(a) {
			sin, _ := sinCos(a.Angle)
			w.spectrum(a.Part, a.T, sin, a.UAngle, spectrum.Options{UClock: a.UClock, Unit: "1", Quantity: "sine of the angle"})
		} else {
			w.spectrum(a.Part, a.T, a.Angle, a.UAngle, spectrum.Options{
				UClock: a.UClock, Unit: "rad", Quantity: "angle", ShowUnit: "°", ShowFactor: 1 / degree,
			})
		}
		if ctx.Err() != nil {
			return ctx.Err()
		}
	}
	if w.track == nil {
		return nil
	}
	for i := range w.track.Bobs {
		b := &w.track.Bobs[i]
		if told[b.Name] || w.tellsPart(b) {
			continue
		}
		var t, x, u []float64
		for _, s := range b.Usable() {
			ux, _ := s.Plane.Sigmas()
			t, x, u = append(t, s.T), append(x, s.X), append(u, ux)
		}
		w.spectrum(b.Name, t, x, u, spectrum.Options{
			UClock: w.track.Cal.UClock, UScale: w.track.Cal.UScale, Unit: "m", Quantity: "sideways motion", ShowUnit: "mm", ShowFactor: 1e3,
		})
		if ctx.Err() != nil {
			return ctx.Err()
		}
	}
	return nil
}

// tellsPart tells whether a bob sits on a part whose angle is already known.
func (w *work) tellsPart(b *track.Bob) bool {
	return b.Part != "" && slices.ContainsFunc(w.angles, func(a series.Angle) bool { return a.Part == b.Part })
}

func (w *work) spectrum(subject string, t, y, u []float64, opt spectrum.Options) {
	opt.MaxLines = mostLines
	if w.decaysFreely(subject) {
		opt.MaxLines = freeLines
	}
	t, y, u, group := averaged(t, y, u)
	s, err := spectrum.Compute(t, y, u, opt)
	if err != nil {
		w.undecided("spectrum.lines", subject, "Spectral lines", err.Error(), "spectrum on the true sample times")
		return
	}
	for _, f := range s.Findings(subject) {
		if n := lineOf(f.Key); n > 0 && n <= len(s.Lines) && !known(&s.Lines[n-1]) {
			continue
		}
		// Of a free decay the fit tells all but the frequency better: its lines split
		// and drift as the amplitude falls.
		if w.decaysFreely(subject) && f.Key != "spectrum.line1.frequency" {
			continue
		}
		w.rec.Findings = append(w.rec.Findings, f)
	}
	c := s.Curve(subject)
	if group > 1 {
		c.Caption += fmt.Sprintf(" Neighbouring samples were averaged in groups of %d, so that nothing above %.3g Hz is shown.", group, 0.5/s.Step)
	}
	w.rec.Curves = append(w.rec.Curves, c)
}

// averaged makes at most mostSamples of a long series: means over groups of
// neighbours, never across a gap.
func averaged(t, y, u []float64) (at, ay, au []float64, group int) {
	group = 1 + (len(t)-1)/mostSamples
	if group == 1 {
		return t, y, u, 1
	}
	steps := make([]float64, 0, len(t)-1)
	for i := 1; i < len(t); i++ {
		steps = append(steps, t[i]-t[i-1])
	}
	slices.Sort(steps)
	longest := 2 * steps[len(steps)/2]
	for i := 0; i < len(t); {
		j := i + 1
		for j < len(t) && j < i+group && t[j]-t[j-1] < longest {
			j++
		}
		n := float64(j - i)
		st, sy, sv := 0.0, 0.0, 0.0
		for k := i; k < j; k++ {
			st += t[k]
			sy += y[k]
			sv += u[k] * u[k]
		}
		at, ay, au = append(at, st/n), append(ay, sy/n), append(au, math.Sqrt(sv)/n)
		i = j
	}
	return at, ay, au, group
}

// known tells whether a line's frequency is known to better than a third: what is
// not is a drift, or a rest that other lines left.
func known(l *spectrum.Line) bool { return l.UFrequency < l.Frequency/3 }

// lineOf is the number in a line's key, "spectrum.line2.frequency"; 0 for none.
func lineOf(key string) (n int) {
	_, _ = fmt.Sscanf(key, "spectrum.line%d.", &n) // no number, no line
	return n
}

func (w *work) decaysFreely(part string) bool {
	return slices.ContainsFunc(w.decays, func(d *decay.Result) bool { return d.Found && d.Part == part })
}
