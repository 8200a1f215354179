package chaos

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

// Findings returns the largest exponent and the time over which a prediction
// holds, or that there is none to be found.
func (d *Divergence) Findings(subject string) []finding.Finding {
	const method = "Growth of the distance of near states along their paths (after Rosenstein et al. 1993), straight stretch found by itself"
	if !d.Found {
		return []finding.Finding{{
			Key: "chaos.exponent", Subject: subject, Name: "Largest exponent", Unit: "1/s", Kind: finding.Undecided,
			Text: "No exponent: " + d.Why + ".", Method: method,
		}}
	}
	f := finding.Normal("chaos.exponent", subject, "Largest exponent", d.Exponent.V, d.Exponent.U, "1/s", method)
	if d.Orbits < 100 {
		f.Cautions = []string{fmt.Sprintf("From %.0f turns only; 100 are wanted for an exponent that holds to 20 %%.", d.Orbits)}
	}
	// The time in which an error of prediction grows tenfold.
	h := math.Ln10 / d.Exponent.V
	t := finding.Normal("chaos.horizon", subject, "Time in which a prediction's error grows tenfold", h, h*d.Exponent.U/d.Exponent.V, "s", method)
	return []finding.Finding{f, t}
}

// Curve is the growth of the distance with its straight stretch.
func (d *Divergence) Curve(subject string) finding.Curve {
	grow := func(y []float64) []float64 {
		out := make([]float64, len(y))
		for i, v := range y {
			out[i] = math.Exp(v)
		}
		return out
	}
	c := finding.Curve{
		Key: "divergence", Subject: subject, Title: "How nearly equal moments part",
		Caption: "Distance of states that were near at first, over the size of the motion, against time. A straight rise on this scale is exponential growth, the mark of chaos: " + d.Why + ".",
		X:       finding.Axis{Label: "time", Unit: "s"},
		Y:       finding.Axis{Label: "distance over size of the motion", Unit: "1", Log: true},
		Lines: []finding.Line{
			{Name: "distance", Role: finding.Data, X: every(d.After, 120), Y: every(grow(d.LogDistance), 120)},
			{Name: "without the ripple of a turn", Role: finding.Model, X: d.After, Y: grow(d.Smooth)},
		},
	}
	if d.Found {
		// A little longer than the stretch itself, to be seen beside the curve.
		more := (d.To - d.From) / 3
		x := []float64{max(0, d.From-more), d.To + more}
		y := []float64{d.Level + d.Exponent.V*x[0], d.Level + d.Exponent.V*x[1]}
		c.Lines = append(c.Lines, finding.Line{Name: "straight stretch", Role: finding.Guide, X: x, Y: grow(y)})
	}
	return c
}

// every thins x to about n values.
func every(x []float64, n int) []float64 {
	var out []float64
	for i := 0; i < len(x); i += max(1, len(x)/n) {
		out = append(out, x[i])
	}
	return out
}

// Finding returns K.
func (z *ZeroOne) Finding(subject string) finding.Finding {
	return finding.Normal("chaos.zero_one", subject, "0–1 test (0 regular, 1 chaotic)", z.K.V, z.K.U, "1",
		"0–1 test (Gottwald & Melbourne 2009), median over 100 frequencies")
}

// Curve is the translation path: bounded for regular motion, a random walk for
// chaos.
func (z *ZeroOne) Curve(subject string) finding.Curve {
	return finding.Curve{
		Key: "zero_one", Subject: subject, Title: "0–1 test",
		Caption: fmt.Sprintf("The path that the 0–1 test draws from the motion. A bounded figure: regular; a random walk: chaotic. K = %.2f.", z.K.V),
		X:       finding.Axis{Label: "p", Unit: "1"}, Y: finding.Axis{Label: "q", Unit: "1"},
		Lines: []finding.Line{{Name: "path", Role: finding.Data, X: z.P, Y: z.Q}},
	}
}

// Finding returns the correlation dimension, or why there is none.
func (c *Correlation) Finding(subject string) finding.Finding {
	const method = "Correlation sum (Grassberger & Procaccia 1983), longest range of steady slope"
	if !c.Found {
		return finding.Finding{
			Key: "chaos.dimension", Subject: subject, Name: "Correlation dimension", Unit: "1", Kind: finding.Undecided,
			Text: "No dimension: " + c.Why + ".", Method: method,
		}
	}
	return finding.Normal("chaos.dimension", subject, "Correlation dimension", c.D.V, c.D.U, "1", method)
}

// Curve is the local slope of the correlation sum in each embedding dimension.
// unit is that of the series.
func (c *Correlation) Curve(subject, unit string) finding.Curve {
	out := finding.Curve{
		Key: "dimension", Subject: subject, Title: "Correlation dimension",
		Caption: "Local slope of the number of near states against their distance, one line per embedding dimension. Where lines of several dimensions lie level on each other, their height is the dimension: " + c.Why + ".",
		X:       finding.Axis{Label: "distance", Unit: unit, Log: true},
		Y:       finding.Axis{Label: "slope", Unit: "1"},
	}
	for m, s := range c.Slope {
		out.Lines = append(out.Lines, finding.Line{Name: fmt.Sprintf("%d dimensions", m+1), Role: finding.Data, X: c.R, Y: s})
	}
	if c.Found {
		out.Lines = append(out.Lines, finding.Line{Name: "scaling range", Role: finding.Guide, X: []float64{c.From, c.To}, Y: []float64{c.D.V, c.D.V}})
	}
	return out
}

// Finding says whether the series may be noise.
func (s *Surrogates) Finding(subject string) finding.Finding {
	text := "The motion cannot be told from filtered noise: " + s.Why + "."
	if s.Rejected {
		text = "The motion is not filtered noise: " + s.Why + "."
	}
	return finding.Finding{
		Key: "chaos.surrogates", Subject: subject, Name: "Test against surrogates", Unit: "1", Kind: finding.Statement, Text: text,
		Method: fmt.Sprintf("Forecast errors of %d surrogates of the same spectrum and values (Schreiber & Schmitz 1996)", len(s.Errors)),
	}
}

// Curve is the mutual information against the delay.
func (d *Delay) Curve(subject string, step float64) finding.Curve {
	x := make([]float64, len(d.Information))
	for i := range x {
		x[i] = float64(i) * step
	}
	return finding.Curve{
		Key: "delay", Subject: subject, Title: "Choice of the delay",
		Caption: fmt.Sprintf("How much a sample tells of one that comes later. The delay taken is %.3g s: %s.", d.S, d.Why),
		X:       finding.Axis{Label: "delay", Unit: "s"}, Y: finding.Axis{Label: "mutual information", Unit: "1"},
		Lines: []finding.Line{
			{Name: "mutual information", Role: finding.Data, X: x, Y: d.Information},
			{Name: "taken", Role: finding.Mark, X: []float64{d.S}, Y: []float64{d.Information[d.Samples]}},
		},
	}
}

// Curve is the share of false neighbours against the dimension.
func (d *Dimension) Curve(subject string) finding.Curve {
	x := make([]float64, len(d.False))
	for i := range x {
		x[i] = float64(i + 1)
	}
	return finding.Curve{
		Key: "false_neighbours", Subject: subject, Title: "Choice of the dimension",
		Caption: fmt.Sprintf("Share of neighbours that are near only because too few values were taken together. %d are taken: %s.", d.Dim, d.Why),
		X:       finding.Axis{Label: "values taken together", Unit: "1"}, Y: finding.Axis{Label: "share of false neighbours", Unit: "1"},
		Lines: []finding.Line{
			{Name: "false neighbours", Role: finding.Data, X: x, Y: d.False},
			{Name: "1 %", Role: finding.Guide, X: []float64{1, max(5, float64(len(x)))}, Y: []float64{0.01, 0.01}},
			{Name: "taken", Role: finding.Mark, X: []float64{float64(d.Dim)}, Y: []float64{d.False[d.Dim-1]}},
		},
	}
}
