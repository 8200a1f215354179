package modes

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/spectrum"
)

const method = "joint fit of damped sinusoids that all bobs share, to the samples at their own times; the number of modes by BIC"

// Subject is what findings that are about all bobs together name.
const Subject = "all bobs"

// mostExchanges is how many exchanges are told in words.
const mostExchanges = 6

// Findings tells the modes in numbers and words.
func (res *Result) Findings() []finding.Finding {
	var out []finding.Finding
	clocked := func(key, subject, name string, v, u float64, unit string) finding.Finding {
		clock := math.Abs(v) * res.opt.UClock
		f := finding.Normal(key, subject, name, v, math.Hypot(u, clock), unit, method)
		f.Budget = []finding.Share{{Source: "pictures", U: u}, {Source: "clock", U: clock}}
		return f
	}
	for i, k := range res.own() {
		m := &res.Modes[k]
		key := fmt.Sprintf("modes.mode%d.", i+1)
		title := fmt.Sprintf("Mode %d", i+1)
		out = append(out,
			clocked(key+"frequency", Subject, title+": frequency", m.Frequency, m.UFrequency, "Hz"),
			finding.Normal(key+"damping", Subject, title+": damping ratio", m.Zeta, m.UZeta, "1", method))
		if len(res.Bobs) < 2 {
			continue
		}
		for b, name := range res.Bobs {
			if m.URatio[b] == 0 { // the bob that the others are told in
				continue
			}
			f := finding.Normal(key+"shape", name, fmt.Sprintf("%s: motion against “%s”", title, res.Bobs[largest(m.Shape)]), m.Ratio[b], m.URatio[b], "1", method)
			out = append(out, f)
		}
	}
	for i, b := range res.Beats {
		key, name := "modes.beat.period", "Beat period"
		if i > 0 {
			key, name = fmt.Sprintf("modes.beat%d.period", i+1), fmt.Sprintf("Beat period %d", i+1)
		}
		f := clocked(key, Subject, name, b.Period, b.U, "s")
		f.Method = fmt.Sprintf("one over the difference of modes %d and %d", res.number(b.First), res.number(b.Second))
		if res.To-res.From < 1.5*b.Period {
			f.Cautions = append(f.Cautions, fmt.Sprintf("The clip shows only %.1f of this beat; it stands on the fit telling two close frequencies apart.", (res.To-res.From)/b.Period))
		}
		out = append(out, f)
	}
	if len(res.Bobs) > 1 && len(res.own()) > 0 {
		f := finding.Normal("modes.energy.wanders", Subject, "Share of the energy that wanders", res.Wandering, res.UWandering, "1",
			"greatest change of one bob's share of the energy of all over the clip; the bobs are taken as equally heavy")
		f.Lo, f.Hi = math.Max(0, f.Lo), math.Min(1, f.Hi)
		out = append(out, f)
		if len(res.Exchanges) > 0 {
			out = append(out, finding.Finding{
				Key: "modes.energy.exchange", Subject: Subject, Name: "Who gives to whom", Kind: finding.Statement, Unit: "1",
				Text: res.exchangeText(), Method: "turning points of the share of the energy that changes most",
			})
		}
	}
	for _, c := range res.Couplings {
		f := clocked("modes.coupling", res.Bobs[c.First]+" and "+res.Bobs[c.Second], "Coupling, as the rate at which these two alone would exchange their energy", c.Hz, c.U, "Hz")
		f.Method = "equations of motion rebuilt from the modes' frequencies and shapes"
		if c.Hz < 2*c.U {
			f.Kind, f.Hi = finding.UpperLimit, c.Hz+1.644853626951*c.U // one-sided 95 % point of the normal distribution
		}
		out = append(out, f)
	}
	if caution := res.nonlinear(); caution != "" {
		for i := range out {
			switch {
			case out[i].Key == "modes.mode1.frequency":
				out[i].Cautions = append(out[i].Cautions, caution)
			case out[i].Kind == finding.Measured && (strings.HasSuffix(out[i].Key, ".frequency") || strings.HasSuffix(out[i].Key, ".period")):
				out[i].Cautions = append(out[i].Cautions, "At this clip's amplitudes: see mode 1.")
			}
		}
	}
	return out
}

// number is a mode's place among those that are told, from 1.
func (res *Result) number(k int) int { return 1 + slices.Index(res.own(), k) }

// nonlinear says that damped sinusoids do not describe the motion to within the
// samples' uncertainty.
func (res *Result) nonlinear() string {
	if res.bobs[0].U == nil || res.Scatter < 2 {
		return ""
	}
	return fmt.Sprintf("The motion departs from a sum of damped sinusoids by %.1f times what the pictures leave open, as swings do that are so large that their frequency changes with them. Frequencies and beats are those of this clip, at its amplitudes; uncertainties were widened for it. A smaller release tells the modes of small motion.", res.Scatter)
}

func (res *Result) exchangeText() string {
	var b strings.Builder
	for i, e := range res.Exchanges {
		if i == mostExchanges {
			fmt.Fprintf(&b, " And so on: %d exchanges in all.", len(res.Exchanges))
			break
		}
		if i > 0 {
			b.WriteByte(' ')
		}
		fmt.Fprintf(&b, "From %.1f s to %.1f s “%s” gives %.0f %% of the energy", math.Max(0, e.FromS), e.ToS, res.Bobs[e.Giver], 100*e.Lost)
		if e.Won > 0.8*e.Lost {
			fmt.Fprintf(&b, " to “%s”.", res.Bobs[e.Taker])
		} else {
			fmt.Fprintf(&b, ", %.0f %% of it to “%s”.", 100*e.Won/e.Lost, res.Bobs[e.Taker])
		}
	}
	return b.String()
}

// Curves are the figures: shares of the energy over time, and the modes on the
// periodogram of the bobs together.
func (res *Result) Curves() []finding.Curve {
	var out []finding.Curve
	if t, shares := res.Shares(res.moments()); t != nil {
		c := finding.Curve{
			Key: "modes-energy", Subject: Subject, Title: "Where the energy is",
			Caption: "Each bob's share of the energy of all, from the fitted modes. Where one line falls and another rises, the first bob gives to the second.",
			X:       finding.Axis{Label: "time", Unit: "s"},
			Y:       finding.Axis{Label: "share of the energy", Unit: "1", ShowUnit: "%", ShowFactor: 100},
		}
		for b, s := range shares {
			c.Lines = append(c.Lines, finding.Line{Name: res.Bobs[b], Role: finding.Model, X: t, Y: s})
		}
		out = append(out, c)
	}
	return append(out, res.spectrumCurve())
}

// spectrumCurve sets the modes as marks on the plain periodogram, which cannot
// part what is nearer than one over the clip's length.
func (res *Result) spectrumCurve() finding.Curve {
	unit := res.opt.Unit
	if unit == "" {
		unit = "1"
	}
	own := res.own()
	lo, hi := math.Inf(1), 0.0
	for _, k := range own {
		lo, hi = math.Min(lo, res.Modes[k].Frequency), math.Max(hi, res.Modes[k].Frequency)
	}
	span := res.To - res.From
	margin := math.Max(6/span, 0.3*(hi-lo))
	var hz, amp []float64
	const points = 300
	for i := range points + 1 {
		hz = append(hz, math.Max(0, lo-margin)+(hi+margin-math.Max(0, lo-margin))*float64(i)/points)
	}
	amp = make([]float64, len(hz))
	for _, b := range res.bobs {
		mean := 0.0
		for _, y := range b.Y {
			mean += y / float64(len(b.Y))
		}
		for i, f := range hz {
			var z complex128
			for k, t := range b.T {
				z += complex(b.Y[k]-mean, 0) * cmplx.Rect(1, -2*math.Pi*f*(t-res.Middle))
			}
			amp[i] = math.Hypot(amp[i], 2*cmplx.Abs(z)/float64(len(b.T)))
		}
	}
	marks := finding.Line{Name: "modes found", Role: finding.Mark}
	for _, k := range own {
		a := 0.0
		for _, s := range res.Modes[k].Shape {
			a = math.Hypot(a, cmplx.Abs(s))
		}
		marks.X, marks.Y = append(marks.X, res.Modes[k].Frequency), append(marks.Y, a)
	}
	quantity := res.opt.Quantity
	if quantity == "" {
		quantity = "motion"
	}
	return finding.Curve{
		Key: "modes-spectrum", Subject: Subject, Title: "Modes",
		Caption: fmt.Sprintf("Line: amplitude of all bobs at each frequency, which shows nothing finer than %.2g Hz on a clip of %.3g s. Marks: the modes that the joint fit found, with their amplitudes in the clip's middle.", 1/span, span),
		X:       finding.Axis{Label: "frequency", Unit: "Hz"},
		Y:       finding.Axis{Label: quantity, Unit: unit, ShowUnit: res.opt.ShowUnit, ShowFactor: res.opt.ShowFactor},
		Lines:   []finding.Line{{Name: "amplitude", Role: finding.Data, X: hz, Y: amp}, marks},
	}
}

// shownPower is the least power of a spectrogram's shades over the greatest.
const shownPower = 1e-4

// Spectrogram is the figure of one bob's spectrum as it changes over the clip, in
// stretches of ten swings or a fifth of the clip, whichever is shorter, up to 3 times
// the strongest frequency, or of motion so slow that this would be little, to the
// twelfth of what such a stretch can part.
func Spectrogram(b Bob, opt Options) (finding.Curve, error) {
	d, err := prepare([]Bob{b})
	if err != nil {
		return finding.Curve{}, err
	}
	hz := d.band()
	p := d.periodogram(nil, hz)
	strongest := hz[slices.Index(p, slices.Max(p))]
	stretch := math.Min(10/strongest, d.span/5)
	top := math.Min(math.Max(3*strongest, 12/stretch), 0.5/d.step)
	g, err := spectrum.Moving(b.T, b.Y, b.U, stretch, spectrum.Options{
		MaxFreq: top, UClock: opt.UClock, Unit: opt.Unit, Quantity: opt.Quantity, ShowUnit: opt.ShowUnit, ShowFactor: opt.ShowFactor,
	})
	if err != nil {
		return finding.Curve{}, err
	}
	c := g.Curve(b.Name)
	c.Key, c.Title = "spectrogram", "Spectrum over time"
	most := 0.0
	for _, row := range g.PSD {
		for _, v := range row[min(1, len(row)):] {
			if v > most {
				most = v
			}
		}
	}
	unit := opt.Unit + "²/Hz"
	if opt.Unit == "1" {
		unit = "1/Hz"
	}
	grid := &finding.Grid{X: g.Time, Label: "power", Unit: unit, Log: true}
	for k, f := range g.Freq {
		if k == 0 { // the mean was taken out
			continue
		}
		if f > top {
			break
		}
		grid.Y = append(grid.Y, f)
		for i := range g.Time {
			grid.Z = append(grid.Z, math.Max(g.PSD[i][k], shownPower*most))
		}
	}
	c.Grid = grid
	c.Caption += " Dark: much motion at that frequency and time; what is below a ten-thousandth of the greatest is shown as that."
	return c, nil
}
