package recurrence

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

const method = "Recurrence quantification (Marwan et al. 2007), all pairs of states; uncertainty by leaving out stretches of time"

// Findings returns the measures about the subject. A measure that has no value
// (a mean of no lines) is left out.
func (p *Plot) Findings(subject string) []finding.Finding {
	m := p.Measures
	list := []struct {
		key, name, unit string
		v               Value
		share           bool
	}{
		{"rate", "Recurrence rate", "1", m.RR, true},
		{"determinism", "Determinism (share of recurrences that run on)", "1", m.DET, true},
		{"mean_line", "Mean time that two passages stay alike", "s", m.L, false},
		{"longest_line", "Longest time that two passages stay alike", "s", m.LMax, false},
		{"divergence", "Divergence (inverse of the longest)", "1/s", m.DIV, false},
		{"entropy", "Entropy of the diagonal lines", "1", m.ENTR, false},
		{"laminarity", "Laminarity (share of recurrences at standstill)", "1", m.LAM, true},
		{"trapping_time", "Trapping time", "s", m.TT, false},
		{"longest_vertical", "Longest standstill", "s", m.VMax, false},
		{"return_1", "Recurrence time, first type", "s", m.T1, false},
		{"return_2", "Recurrence time, second type", "s", m.T2, false},
	}
	prefix := "recurrence."
	if p.Kind != "auto" {
		prefix += p.Kind + "_"
	}
	var out []finding.Finding
	for _, l := range list {
		if math.IsNaN(l.v.V) || math.IsInf(l.v.V, 0) {
			continue
		}
		f := finding.Normal(prefix+l.key, subject, l.name, l.v.V, l.v.U, l.unit, method)
		f.Lo = max(f.Lo, 0) // NaN where the uncertainty is not known
		if l.share {
			f.Hi = min(f.Hi, 1)
		}
		if math.IsNaN(l.v.U) {
			f.Cautions = []string{"Too few states to tell an uncertainty."}
		}
		out = append(out, f)
	}
	return out
}

// Curves returns the recurrence plot (if a map was asked for) and the recurrence
// rate against the lag.
func (p *Plot) Curves(subject string) []finding.Curve {
	var out []finding.Curve
	if p.Map != nil {
		title := map[string]string{"auto": "Recurrence plot of ", "cross": "Cross recurrence plot of ", "joint": "Joint recurrence plot of "}[p.Kind] + subject
		z := make([]float64, len(p.Map.Density))
		for i, d := range p.Map.Density {
			z[i] = math.Round(1000*float64(d)) / 1000
		}
		caption := fmt.Sprintf("Dark where the motion at one time is like the motion at the other (%.3g %% of all pairs). Long diagonals: it runs through the same course again; broken dots: it does not; squares: it stands still.", 100*p.Measures.RR.V)
		if p.Map.Rows < p.N || p.Map.Cols < p.M {
			caption += fmt.Sprintf(" Each cell holds %.0f × %.0f pairs.", math.Ceil(float64(p.N)/float64(p.Map.Rows)), math.Ceil(float64(p.M)/float64(p.Map.Cols)))
		}
		out = append(out, finding.Curve{
			Key: "recurrence", Subject: subject, Title: title, Caption: caption,
			X:    finding.Axis{Label: "time", Unit: "s"},
			Y:    finding.Axis{Label: "time", Unit: "s"},
			Grid: &finding.Grid{X: p.Map.Col, Y: p.Map.Row, Z: z, Label: "share of recurrences", Unit: "1"},
		})
	}
	if p.Lag != nil {
		x := make([]float64, 0, len(p.Lag))
		y := make([]float64, 0, len(p.Lag))
		for d := p.opt.Theiler; d < len(p.Lag)*9/10; d++ { // beyond, a few pairs only
			x, y = append(x, float64(d)*p.Step), append(y, p.Lag[d])
		}
		out = append(out, finding.Curve{
			Key: "recurrence_lag", Subject: subject, Title: "Chance to be back after a time: " + subject,
			Caption: "Share of states that are met again after each time. Peaks of full height: periodic motion; peaks that sink: it drifts or is irregular.",
			X:       finding.Axis{Label: "time between", Unit: "s"},
			Y:       finding.Axis{Label: "recurrence rate", Unit: "1"},
			Lines:   []finding.Line{{Name: "recurrence rate", Role: finding.Data, X: x, Y: y}},
		})
	}
	return out
}

// Curve is the course of determinism and laminarity over time with their 95 %
// bands.
func (c *Course) Curve(subject string) finding.Curve {
	line := func(name string, of func(m Measures) Value) finding.Line {
		l := finding.Line{Name: name, Role: finding.Data, X: c.Time}
		for _, m := range c.Measures {
			v := of(m)
			l.Y = append(l.Y, v.V)
			l.Lo, l.Hi = append(l.Lo, max(0, v.V-1.96*v.U)), append(l.Hi, min(1, v.V+1.96*v.U))
		}
		return l
	}
	return finding.Curve{
		Key: "recurrence_course", Subject: subject, Title: "Course of determinism and laminarity: " + subject,
		Caption: fmt.Sprintf("In windows of %.3g s, with 95 %% bands. Determinism near 1: ordered motion; falling: it becomes irregular. Laminarity: share of standstill.", c.WindowS),
		X:       finding.Axis{Label: "time", Unit: "s"},
		Y:       finding.Axis{Label: "share", Unit: "1"},
		Lines: []finding.Line{
			line("determinism", func(m Measures) Value { return m.DET }),
			line("laminarity", func(m Measures) Value { return m.LAM }),
		},
	}
}
