package recurrence

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

// Findings returns the measures about the subject. A measure that has no value
// (a mean of no lines) is left out.
func (p *Plot) Findings(subject string) []finding.Finding {
	m := p.Measures
	diagonal := finding.DisplayValue(float64(p.opt.LMin)*p.Step, 0.05*float64(p.opt.LMin)*p.Step, "s").Value + " s"
	vertical := finding.DisplayValue(float64(p.opt.VMin)*p.Step, 0.05*float64(p.opt.VMin)*p.Step, "s").Value + " s"
	chosen := "the threshold was chosen to make it so"
	if p.opt.Rate == 0 {
		chosen = "with the threshold that was given"
	}
	list := []struct {
		key, name, unit string
		v               Value
		share           bool
		what            string
	}{
		{"rate", "Recurrence rate RR", "1", m.RR, true, "share of all pairs of moments that are alike; " + chosen},
		{"determinism", "Determinism DET", "1", m.DET, true, "share of the like pairs that stay alike for " + diagonal + " or longer: near 1 for any motion that follows from itself, low for noise"},
		{"mean_line", "Mean diagonal L", "s", m.L, false, "for how long two passages that are alike stay alike, on average"},
		{"longest_line", "Longest diagonal L_max", "s", m.LMax, false, "for how long the two most alike passages stay alike: nearly the whole clip where the motion repeats"},
		{"divergence", "Divergence DIV", "1/s", m.DIV, false, "one over the longest diagonal: the faster like passages part, the larger"},
		{"entropy", "Entropy of the diagonals ENTR", "1", m.ENTR, false, "how mixed the diagonals' lengths are, in nats; 0 where all are of one length"},
		{"laminarity", "Laminarity LAM", "1", m.LAM, true, "share of the like pairs in which the motion lingers for " + vertical + " or longer"},
		{"trapping_time", "Trapping time TT", "s", m.TT, false, "for how long it lingers, on average"},
		{"longest_vertical", "Longest standstill V_max", "s", m.VMax, false, "for how long it lingers at most"},
		{"return_1", "Recurrence time, first type", "s", m.T1, false, "from one moment to the next like it, moments close by included"},
		{"return_2", "Recurrence time, second type", "s", m.T2, false, "from coming near a state to coming near it again"},
	}
	list[0].what += ". All measures: from all pairs (Marwan et al. 2007), uncertainty by leaving out stretches of time"
	prefix := "recurrence."
	if p.Kind != "auto" {
		prefix += p.Kind + "_"
	}
	var out []finding.Finding
	for _, l := range list {
		if math.IsNaN(l.v.V) || math.IsInf(l.v.V, 0) {
			continue
		}
		if !(l.v.U > 0) {
			out = append(out, finding.Finding{
				Key: prefix + l.key, Subject: subject, Name: l.name, Unit: l.unit, Method: l.what,
				Kind: finding.Undecided, Text: "Too few states come back to tell how sure it is; film for longer.",
			})
			continue
		}
		f := finding.Normal(prefix+l.key, subject, l.name, l.v.V, l.v.U, l.unit, l.what)
		f.Lo = max(f.Lo, 0)
		if l.share {
			f.Hi = min(f.Hi, 1)
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
		title := map[string]string{"auto": "Recurrence plot", "cross": "Cross recurrence plot", "joint": "Joint recurrence plot"}[p.Kind]
		top := p.Map.darkest()
		z := make([]float64, len(p.Map.Density))
		for i, d := range p.Map.Density {
			z[i] = math.Round(1000*min(float64(d), top)) / 1000
		}
		what := map[string]string{
			"auto":  "Each cell compares two moments of the clip, one along each axis: dark where the toy does the same at both. Long unbroken diagonals: regular; short pieces: irregular; dark blocks: it lingers.",
			"cross": "Dark where the second, at the time below, does what the first does at the time on the left. A dark main diagonal: they move alike at the same time; diagonals beside it: one does later what the other did.",
			"joint": "Dark where both are, at one time, where each was at the other.",
		}[p.Kind]
		caption := fmt.Sprintf("%s %.2g %% of all pairs are alike.", what, 100*p.Measures.RR.V)
		if p.Map.Rows < p.N || p.Map.Cols < p.M {
			alike := "all of them"
			if top < 0.995 {
				alike = fmt.Sprintf("%.2g %% of them or more", 100*top)
			}
			caption += fmt.Sprintf(" Each cell holds %.0f × %.0f pairs; it is darkest where %s are alike.", math.Ceil(float64(p.N)/float64(p.Map.Rows)), math.Ceil(float64(p.M)/float64(p.Map.Cols)), alike)
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
			Key: "recurrence_lag", Subject: subject, Title: "Chance to be back after a time",
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
		Key: "recurrence_course", Subject: subject, Title: "Course of determinism and laminarity",
		Caption: fmt.Sprintf("In windows of %.3g s, with 95 %% bands. Determinism near 1: ordered motion; falling: it becomes irregular. Laminarity: share of standstill.", c.WindowS),
		X:       finding.Axis{Label: "time", Unit: "s"},
		Y:       finding.Axis{Label: "share", Unit: "1"},
		Lines: []finding.Line{
			line("determinism", func(m Measures) Value { return m.DET }),
			line("laminarity", func(m Measures) Value { return m.LAM }),
		},
	}
}
