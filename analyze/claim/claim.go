// Package claim answers the statements of an exhibit's label from one clip: still
// true, no longer, or cannot tell, each with the number and the curve behind it.
//
// What comes in: the rig's claims, the angle series of the toy's parts, and the
// free decays and ledgers that were found. What goes out: one answer per claim,
// and curves. Units: seconds, radians.
package claim

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/decay"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// Verdict is an answer.
type Verdict string

// The answers.
const (
	True      Verdict = "Still true"
	NoLonger  Verdict = "No longer true"
	Undecided Verdict = "Cannot tell from this clip"
)

// Answer is one claim's answer.
type Answer struct {
	Label   string
	Verdict Verdict
	Why     string // one plain sentence with the number
	Next    string // what to film or do; empty when there is nothing
	Curve   string // key of the curve behind it; empty for none
}

// Input is what a clip told.
type Input struct {
	Angles []series.Angle
	Decays []*decay.Result
	// Driven names the parts that a coil keeps going in this clip.
	Driven []string
	// Findings are those of the record so far; steady amplitude and battery time are
	// read from them.
	Findings []finding.Finding
}

const (
	degree = math.Pi / 180
	// still is the amplitude below which a visitor says that it stands still.
	still = 1 * degree
)

// Answers answers all claims of a rig, and draws what is behind them.
func Answers(claims []rig.Claim, in Input) ([]Answer, []finding.Curve) {
	var out []Answer
	var curves []finding.Curve
	if len(claims) == 0 {
		return nil, nil
	}
	parts := make([]swing, 0, len(in.Angles))
	for i := range in.Angles {
		if s := swings(&in.Angles[i]); len(s.t) > 0 {
			parts = append(parts, s)
		}
	}
	for i := range claims {
		c := &claims[i]
		a := Answer{Label: c.Label}
		limit := math.NaN()
		switch {
		case len(parts) == 0:
			a.Verdict, a.Why = Undecided, "The clip shows no two swings of any part."
			a.Next = "Film the toy while it moves."
		case c.RunsForS.Set:
			a.runs(c.RunsForS.V, parts, &in)
			limit = still
		case c.HandsOverWithinS.Set:
			a.handsOver(c.HandsOverWithinS.V, parts)
		case c.NeverSettles:
			a.neverSettles(parts, &in)
		case c.AmplitudeAtLeastRad.Set:
			a.amplitude(c.AmplitudeAtLeastRad.V, parts, &in)
			limit = c.AmplitudeAtLeastRad.V
		case c.PeriodS.Set:
			a.period(c.PeriodS, parts)
		}
		if a.Label == "" {
			a.Label = words(c)
		}
		if len(parts) > 0 && !c.PeriodS.Set {
			a.Curve = fmt.Sprintf("claim-%d", i+1)
			curves = append(curves, curve(a, parts, limit))
		}
		out = append(out, a)
	}
	return out, curves
}

// words puts a claim that has no label in words.
func words(c *rig.Claim) string {
	switch {
	case c.RunsForS.Set:
		return "It runs for " + minutes(c.RunsForS.V) + "."
	case c.HandsOverWithinS.Set:
		return fmt.Sprintf("It hands over within %.3g seconds.", c.HandsOverWithinS.V)
	case c.NeverSettles:
		return "It never settles."
	case c.AmplitudeAtLeastRad.Set:
		return fmt.Sprintf("It swings at least %.3g° to each side.", c.AmplitudeAtLeastRad.V/degree)
	}
	return fmt.Sprintf("It swings once every %.3g seconds.", c.PeriodS.V)
}

// swing is one part's amplitude over time: half of the way between neighbouring
// turning points, at the time between them.
type swing struct {
	part      string
	t, amp, u []float64
	half      []float64 // duration of that half swing, s
	from, to  float64   // s, of the series
}

func swings(a *series.Angle) swing {
	s := swing{part: a.Part, from: a.T[0], to: a.T[len(a.T)-1]}
	tp := a.TurningPoints()
	for i := 1; i < len(tp); i++ {
		p, q := &tp[i-1], &tp[i]
		s.t = append(s.t, (p.T+q.T)/2)
		s.amp = append(s.amp, math.Abs(q.Angle-p.Angle)/2)
		s.u = append(s.u, math.Hypot(p.UAngle, q.UAngle)/2)
		s.half = append(s.half, q.T-p.T)
	}
	return s
}

// late is the mean amplitude of the last few swings and how well it is known: by
// their scatter, since a toy never swings quite alike.
func (s *swing) late() (amp, u float64) { return meanOf(s.amp[max(0, len(s.amp)-6):], s.u) }

func (s *swing) early() (amp, u float64) { return meanOf(s.amp[:min(6, len(s.amp))], s.u) }

func meanOf(x, ux []float64) (m, u float64) {
	for _, v := range x {
		m += v / float64(len(x))
	}
	ss := 0.0
	for _, v := range x {
		ss += (v - m) * (v - m)
	}
	n := float64(len(x))
	return m, math.Sqrt(ss/math.Max(1, n-1)/n + ux[0]*ux[0]/n)
}

// largest is the part that swings most at the end.
func largest(parts []swing) *swing {
	best := &parts[0]
	for i := range parts {
		a, _ := parts[i].late()
		if b, _ := best.late(); a > b {
			best = &parts[i]
		}
	}
	return best
}

func (in *Input) find(key, part string) *finding.Finding {
	for i := range in.Findings {
		if f := &in.Findings[i]; f.Key == key && f.Subject == part && f.Kind == finding.Measured {
			return f
		}
	}
	return nil
}

func (in *Input) decay(part string) *decay.Result {
	for _, d := range in.Decays {
		if d.Found && d.Part == part {
			return d
		}
	}
	return nil
}

// angle writes an angle with its uncertainty, as far as a label's reader cares.
func angle(x, u float64) string {
	if u < 0.05*degree {
		return fmt.Sprintf("%.1f°", x/degree)
	}
	return fmt.Sprintf("%.1f° (± %.1f°)", x/degree, u/degree)
}

func minutes(s float64) string {
	switch {
	case s >= 2*86400:
		return fmt.Sprintf("%.3g days", s/86400)
	case s >= 2*3600:
		return fmt.Sprintf("%.3g hours", s/3600)
	case s < 90:
		return fmt.Sprintf("%.3g seconds", s)
	}
	return fmt.Sprintf("%.3g minutes", s/60)
}

// steady compares the last third with the third before: −1 falling, +1 growing.
func (s *swing) trend() (relative, u float64) {
	n := len(s.amp) / 3
	if n < 3 {
		return 0, math.Inf(1)
	}
	a, ua := meanOf(s.amp[len(s.amp)-2*n:len(s.amp)-n], s.u)
	b, ub := meanOf(s.amp[len(s.amp)-n:], s.u)
	return b/a - 1, math.Hypot(ua, ub) / a
}

func (in *Input) driven(part string) bool { return slices.Contains(in.Driven, part) }
