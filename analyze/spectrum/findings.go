package spectrum

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

const method = "Generalised Lomb–Scargle search on the true sample times, lines fitted together by least squares"

// Findings returns the lines' frequencies and amplitudes about the subject (a
// bob or a part), with the clock's and the scale's share in the uncertainty, and
// a statement when no line stands out.
func (s *Spectrum) Findings(subject string) []finding.Finding {
	if len(s.Lines) == 0 {
		return []finding.Finding{{
			Key: "spectrum.lines", Subject: subject, Name: "Spectral lines", Unit: "1", Kind: finding.Statement,
			Text: "No spectral line stands out of the noise.", Method: method, Cautions: s.Cautions,
		}}
	}
	var out []finding.Finding
	for i, l := range s.Lines {
		name, key := fmt.Sprintf("line %d", i+1), fmt.Sprintf("spectrum.line%d.", i+1)
		clock := l.Frequency * s.opt.UClock
		f := finding.Normal(key+"frequency", subject, "Frequency of "+name, l.Frequency, math.Hypot(l.UFrequency, clock), "Hz", method)
		f.Budget = []finding.Share{{Source: "noise of the samples", U: l.UFrequency}, {Source: "the camera's clock", U: clock}}
		f.Cautions = s.lineCautions(i)
		scale := l.Amplitude * s.opt.UScale
		a := finding.Normal(key+"amplitude", subject, "Amplitude of "+name, l.Amplitude, math.Hypot(l.UAmplitude, scale), s.opt.Unit, method)
		a.Budget = []finding.Share{{Source: "noise of the samples", U: l.UAmplitude}, {Source: "scale", U: scale}}
		out = append(out, f)
		if !l.Unsteady {
			if l.Decay != 0 {
				a.Name += " at the start"
			}
			out = append(out, a)
		}
		if l.Decay != 0 && !l.Unsteady {
			d := finding.Normal(key+"decay", subject, "Decay rate of "+name, l.Decay, l.UDecay, "1/s", method)
			d.Cautions = []string{"A plain exponential decay is taken; which friction acts is said under decay."}
			out = append(out, d)
		}
	}
	return out
}

// lineCautions are the plain sentences about line i.
func (s *Spectrum) lineCautions(i int) []string {
	l := s.Lines[i]
	var out []string
	if l.Unsteady {
		out = append(out, "Not one steady line: a group of peaks stands here, from motion that changes during the clip or from modes too close to part. The uncertainty is the group's half width.")
	}
	if l.Decay > 0 && !l.Unsteady {
		out = append(out, fmt.Sprintf("The motion decays, which broadens this line by %.2g Hz.", l.Decay/math.Pi))
	}
	if l.Drift != 0 && !l.Unsteady {
		out = append(out, fmt.Sprintf("The frequency drifts by %.2g Hz over the clip; the value is that in its middle.", l.Drift*(s.To-s.From)))
	}
	if l.Harmonic > 0 {
		out = append(out, fmt.Sprintf("This is %d times line %d: an overtone of the same motion, not a mode of its own.", l.Harmonic, l.Of+1))
	}
	if l.Frequency*(s.To-s.From) < 3 {
		out = append(out, "Fewer than three periods in the clip: a slow drift looks alike.")
	}
	return out
}

// Curve is the amplitude spectrum with the lines marked and the level that noise
// would show.
func (s *Spectrum) Curve(subject string) finding.Curve {
	unit, shown, factor := s.opt.Unit, s.opt.ShowUnit, s.opt.ShowFactor
	quantity := s.opt.Quantity
	if quantity == "" {
		quantity = "value"
	}
	var lx, ly []float64
	for _, l := range s.Lines {
		k := min(int(math.Round(l.Frequency/s.Freq[1])), len(s.Freq)-1)
		lx, ly = append(lx, l.Frequency), append(ly, s.Amplitude[k])
	}
	noise := make([]float64, len(s.Freq))
	for k, b := range s.Background {
		// r.m.s. of the noise in a bin, as an amplitude.
		noise[k] = math.Sqrt(2 * b * s.Bandwidth)
	}
	caption := fmt.Sprintf("Amplitude against frequency of %s, %d samples over %.3g s. A steady sinusoid shows its amplitude; lines nearer than %.2g Hz merge. The dashed line is the noise.",
		subject, s.Samples, s.To-s.From, s.Resolution)
	if len(s.Lines) > 0 {
		l := s.Lines[0]
		caption += " The strongest line stands at " + finding.DisplayValue(l.Frequency, l.UFrequency, "Hz").String() + " (standard uncertainty)."
	}
	return finding.Curve{
		Key: "spectrum", Subject: subject, Title: "Spectrum of " + subject, Caption: caption,
		X: finding.Axis{Label: "frequency", Unit: "Hz"},
		Y: finding.Axis{Label: "amplitude of the " + quantity, Unit: unit, ShowUnit: shown, ShowFactor: factor, Log: true},
		Lines: []finding.Line{
			{Name: "amplitude", Role: finding.Data, X: s.Freq[1:], Y: s.Amplitude[1:]},
			{Name: "noise", Role: finding.Guide, X: s.Freq[1:], Y: noise[1:]},
			{Name: "lines", Role: finding.Mark, X: lx, Y: ly},
		},
	}
}

// Curve is the ridge of a spectrogram: the strongest frequency over time with its
// 95 % band.
func (g *Spectrogram) Curve(subject string) finding.Curve {
	lo, hi := make([]float64, len(g.Time)), make([]float64, len(g.Time))
	for i, f := range g.Ridge {
		lo[i], hi[i] = f-1.96*g.URidge[i], f+1.96*g.URidge[i]
	}
	return finding.Curve{
		Key: "ridge", Subject: subject, Title: "Strongest frequency of " + subject + " over time",
		Caption: fmt.Sprintf("The strongest frequency in stretches of %.3g s, with its 95 %% band. A level line means steady motion.", g.WindowS),
		X:       finding.Axis{Label: "time", Unit: "s"},
		Y:       finding.Axis{Label: "frequency", Unit: "Hz"},
		Lines:   []finding.Line{{Name: "strongest frequency", Role: finding.Data, X: g.Time, Y: g.Ridge, Lo: lo, Hi: hi}},
	}
}
