package sweep

import (
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

// row returns the values of the ranges at point i, in the rig's units.
func (t *Table) row(i int) []float64 {
	var out []float64
	for _, g := range t.Ranges {
		out = append(out, g.Shown[i%len(g.Shown)])
		i /= len(g.Shown)
	}
	return out
}

// WriteCSV writes the whole table: the varied numbers in the rig's units, then the
// answers in SI units.
func (t *Table) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	var head []string
	for _, g := range t.Ranges {
		name := g.Name()
		if g.Unit != "" {
			name += " (" + g.Unit + ")"
		}
		head = append(head, name)
	}
	for _, p := range t.Parts {
		head = append(head, p+" period_s", p+" amplitude_rad", p+" centre_rad", p+" turns")
	}
	head = append(head, "regime", "exponent_per_s", "stable_rests", "rest_angles_rad", "mode_Hz", "ends_at_rest", "kicks", "mean_kick_J", "problem")
	if err := out.Write(head); err != nil {
		return err
	}
	for i, a := range t.Answers {
		if a == nil {
			continue
		}
		var row []string
		for _, v := range t.row(i) {
			row = append(row, strconv.FormatFloat(v, 'g', -1, 64))
		}
		for k := range t.Parts {
			p := PartAnswer{Period: math.NaN(), Amplitude: math.NaN(), Centre: math.NaN(), Rounds: math.NaN()}
			if k < len(a.Parts) {
				p = a.Parts[k]
			}
			row = append(row, cell(p.Period), cell(p.Amplitude), cell(p.Centre), cell(p.Rounds))
		}
		var angles, modes []string
		for j := range a.Rests {
			if !a.Rests[j].Stable {
				continue
			}
			var each []string
			for _, x := range a.Rests[j].Angles {
				each = append(each, strconv.FormatFloat(x, 'f', 4, 64))
			}
			angles = append(angles, strings.Join(each, " "))
			if len(modes) == 0 {
				for _, f := range a.Rests[j].Modes {
					modes = append(modes, strconv.FormatFloat(f, 'f', 4, 64))
				}
			}
		}
		ends := ""
		if a.EndsAt >= 0 {
			ends = strconv.Itoa(restNumber(a, a.EndsAt))
		}
		row = append(row, a.Regime.String(), cell(a.Exponent), strconv.Itoa(a.StableRests()), strings.Join(angles, "; "), strings.Join(modes, " "), ends, strconv.Itoa(a.Kicks), cell(a.KickJ), a.Problem)
		if err := out.Write(row); err != nil {
			return err
		}
	}
	out.Flush()
	return out.Error()
}

// cell writes a number as the shortest text that reads back exactly; what is not
// known is empty.
func cell(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// Words is the range's numbers as people say them: "moment of base magnet".
func (g Range) Words() string {
	var out []string
	for _, a := range g.Addresses {
		owner, quantity, ok := strings.Cut(a, ".")
		if ok {
			a = strings.NewReplacer(".", " ", "_", " ").Replace(quantity) + " of " + owner
		}
		out = append(out, a)
	}
	return strings.Join(out, " and ")
}

func (g Range) axis() finding.Axis {
	a := finding.Axis{Label: g.Words(), Unit: g.SI, ShowUnit: g.Unit, ShowFactor: 1}
	for i, v := range g.Values {
		if v != 0 {
			a.ShowFactor = g.Shown[i] / v
		}
	}
	if a.Unit == "" {
		a.Unit = "1"
	}
	return a
}

// quantity is one answer that a sweep shows.
type quantity struct {
	key, title, caption string
	axis                finding.Axis
	of                  func(a *Answers, part int) float64
}

var (
	periodOf    = quantity{"period", "Period late in the motion", "Period of each part late in the motion; of a part that goes round, the time of one turn.", finding.Axis{Label: "period", Unit: "s"}, func(a *Answers, k int) float64 { return a.Parts[k].Period }}
	amplitudeOf = quantity{"amplitude", "Amplitude late in the motion", "Half of the swing's width late in the motion; of a part on a ball joint its greatest tilt.", finding.Axis{Label: "amplitude", Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}, func(a *Answers, k int) float64 { return a.Parts[k].Amplitude }}
)

// value is the quantity at point i, NaN where there is none.
func (t *Table) value(q quantity, i, part int) float64 {
	if a := t.Answers[i]; a != nil && a.Problem == "" && part < len(a.Parts) {
		return q.of(a, part)
	}
	return math.NaN()
}

// Curves draws the table: lines over one range, or maps over two.
func (t *Table) Curves() []finding.Curve {
	if len(t.Ranges) == 2 {
		return t.maps()
	}
	g := t.Ranges[0]
	var out []finding.Curve
	for _, q := range []quantity{periodOf, amplitudeOf} {
		c := finding.Curve{Key: "sweep-" + q.key, Title: q.title + " against " + g.Words(), Caption: q.caption, X: g.axis(), Y: q.axis}
		for k, p := range t.Parts {
			l := finding.Line{Name: p, Role: finding.Model, X: g.Values}
			known := false
			for i := range g.Values {
				v := t.value(q, i, k)
				known = known || !math.IsNaN(v)
				l.Y = append(l.Y, v)
			}
			if known {
				c.Lines = append(c.Lines, l)
			}
		}
		if len(c.Lines) > 0 {
			out = append(out, c)
		}
	}
	rests := finding.Curve{
		Key: "sweep-rest", Title: "Places of rest against " + g.Name(),
		Caption: "Each mark is the angle of a part at a stable place of rest; where marks part, the toy has more than one.",
		X:       g.axis(), Y: angleAxis,
	}
	for k, p := range t.Parts {
		l := finding.Line{Name: p, Role: finding.Mark}
		for i, a := range t.Answers {
			if a == nil {
				continue
			}
			for j := range a.Rests {
				if a.Rests[j].Stable {
					l.X, l.Y = append(l.X, g.Values[i]), append(l.Y, a.Rests[j].Angles[k])
				}
			}
		}
		if len(l.X) > 0 {
			rests.Lines = append(rests.Lines, l)
		}
	}
	if len(t.Parts) == 1 {
		l := finding.Line{Name: "where it balances but does not stay", Role: finding.Mark}
		for i, a := range t.Answers {
			if a == nil {
				continue
			}
			for j := range a.Rests {
				if !a.Rests[j].Stable {
					l.X, l.Y = append(l.X, g.Values[i]), append(l.Y, a.Rests[j].Angles[0])
				}
			}
		}
		if len(l.X) > 0 {
			rests.Lines = append(rests.Lines, l)
		}
	}
	if len(rests.Lines) > 0 {
		out = append(out, rests)
	}
	modes := finding.Curve{
		Key: "sweep-modes", Title: "Small swings against " + g.Name(),
		Caption: "Frequencies of small swings about the lowest stable place of rest.", X: g.axis(), Y: finding.Axis{Label: "frequency", Unit: "Hz"},
	}
	for n := 0; ; n++ {
		l := finding.Line{Name: fmt.Sprintf("mode %d", n+1), Role: finding.Model, X: g.Values}
		known := false
		for _, a := range t.Answers {
			v := math.NaN()
			if a != nil {
				for j := range a.Rests {
					if a.Rests[j].Stable {
						if n < len(a.Rests[j].Modes) {
							v = a.Rests[j].Modes[n]
						}
						break
					}
				}
			}
			known = known || !math.IsNaN(v)
			l.Y = append(l.Y, v)
		}
		if !known {
			break
		}
		modes.Lines = append(modes.Lines, l)
	}
	if len(modes.Lines) > 0 {
		out = append(out, modes)
	}
	return out
}

// maps are pictures over two ranges.
func (t *Table) maps() []finding.Curve {
	gx, gy := t.Ranges[0], t.Ranges[1]
	var out []finding.Curve
	add := func(key, subject, title, caption, label, unit string, of func(i int) float64) {
		z := make([]float64, len(t.Answers))
		known := false
		for i := range z {
			z[i] = of(i)
			known = known || !math.IsNaN(z[i])
		}
		if !known {
			return
		}
		out = append(out, finding.Curve{
			Key: "map-" + key, Subject: subject, Title: title, Caption: caption, X: gx.axis(), Y: gy.axis(),
			Grid: &finding.Grid{X: gx.Values, Y: gy.Values, Z: z, Label: label, Unit: unit},
		})
	}
	for k, p := range t.Parts {
		for _, q := range []quantity{periodOf, amplitudeOf} {
			add(q.key, p, q.title+": "+p, q.caption, q.axis.Label, q.axis.Unit, func(i int) float64 { return t.value(q, i, k) })
		}
	}
	ok := func(i int) *Answers {
		if a := t.Answers[i]; a != nil && a.Problem == "" {
			return a
		}
		return nil
	}
	add("rests", "", "Number of stable places of rest", "How many places the toy can rest in.", "stable places of rest", "1", func(i int) float64 {
		if a := ok(i); a != nil {
			return float64(a.StableRests())
		}
		return math.NaN()
	})
	add("regime", "", "Regime of the motion", "How the motion goes on: 1 at rest, 2 dying away, 3 steady, 4 changing regularly, 5 irregular, 6 growing.", "regime", "1", func(i int) float64 {
		if a := ok(i); a != nil && a.Regime != Unknown {
			return float64(a.Regime)
		}
		return math.NaN()
	})
	return out
}

// Findings says in numbers and words what a sweep over one range found: how the
// answers change about the rig's own value, and where the places of rest or the
// regime change. r is the rig that was swept.
func (t *Table) Findings(r *rig.Rig) []finding.Finding {
	var out []finding.Finding
	say := func(key, name, text string) {
		out = append(out, finding.Finding{Key: key, Name: name, Kind: finding.Statement, Text: text, Method: "simulated at each value"})
	}
	problems := 0
	why := ""
	for _, a := range t.Answers {
		if a != nil && a.Problem != "" {
			problems++
			why = a.Problem
		}
	}
	if problems > 0 {
		say("sweep.problems", "Values without an answer", fmt.Sprintf("%d of %d values gave no motion, such as: %s", problems, len(t.Answers), why))
	}
	if len(t.Ranges) != 1 {
		return out
	}
	g := t.Ranges[0]
	if len(g.Values) < 3 {
		return out
	}
	about := len(g.Values) / 2
	if v, err := r.Number(g.Addresses[0]); err == nil && v.Set {
		for i := range g.Values {
			if math.Abs(g.Values[i]-v.V) < math.Abs(g.Values[about]-v.V) {
				about = i
			}
		}
	}
	about = min(max(about, 1), len(g.Values)-2)
	for k, p := range t.Parts {
		for _, q := range []quantity{periodOf, amplitudeOf} {
			a, b, c := t.value(q, about-1, k), t.value(q, about, k), t.value(q, about+1, k)
			slope := (c - a) / (g.Values[about+1] - g.Values[about-1]) * g.Values[about] / b
			if math.IsNaN(slope) || math.IsInf(slope, 0) {
				continue
			}
			say("sweep."+q.key, q.title, fmt.Sprintf("%s: about %s %s, one percent more of it changes the %s by %+.2g %%.", p, short(g.Shown[about]), unitOf(g), q.axis.Label, slope))
		}
	}
	for i := 1; i < len(t.Answers); i++ {
		a, b := t.Answers[i-1], t.Answers[i]
		if a == nil || b == nil || a.Problem != "" || b.Problem != "" {
			continue
		}
		between := fmt.Sprintf("between %s and %s %s", short(g.Shown[i-1]), short(g.Shown[i]), unitOf(g))
		if m, n := a.StableRests(), b.StableRests(); m != n {
			say("sweep.rests", "Places of rest change", fmt.Sprintf("The number of stable places of rest goes from %d to %d %s.", m, n, between))
		}
		if a.Regime != b.Regime {
			say("sweep.regime", "Regime changes", fmt.Sprintf("The motion goes from %s to %s %s.", a.Regime, b.Regime, between))
		}
	}
	return out
}

func short(x float64) string { return strconv.FormatFloat(x, 'g', 4, 64) }

func unitOf(g Range) string { return g.Unit }
