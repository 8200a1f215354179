package analyze

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
)

// section is a Poincaré section on a natural event, a part's pass through its
// middle to the right: of another part its angle and rate then; of one part alone its
// rate at the pass against that at the pass before; of a ball joint how fast it moves
// and how high it is. ok is false for fewer than eight passes.
func (w *work) section() (c finding.Curve, ok bool) {
	deg := func(label, unit, show string) finding.Axis {
		return finding.Axis{Label: label, Unit: unit, ShowUnit: show, ShowFactor: 1 / degree}
	}
	const reading = " (a Poincaré section). One spot: the same over and over; a few spots: a course of several swings; a closed line: several steady swings at once; dots that move along a line: it dies down or gathers; dots scattered over a shape: irregular motion."
	at, other := w.eventPart()
	a := &w.angles[at]
	c = finding.Curve{Key: "section", Subject: w.onlyPart(), Title: "At each pass through the middle"}
	if a.Joint == "ball" {
		x, z, _, err := w.places(a)
		if err != nil {
			return c, false
		}
		s, err := chaos.Cut(a.T, [][]float64{x, z, slope(a.T, x)}, 0, mean(x), chaos.Up)
		if err != nil || len(s.T) < 8 {
			return c, false
		}
		c.X, c.Y = deg("height at a pass, over the length", "rad", "°"), deg("speed to the right at a pass", "rad/s", "°/s")
		c.X.ShowUnit, c.X.ShowFactor, c.X.Unit = "", 0, "1"
		c.Caption = fmt.Sprintf("One dot for each time that “%s” passes the middle of its picture to the right: how fast, and how high in the picture", a.Part) + reading
		c.Lines = []finding.Line{{Name: "passes", Role: finding.Mark, X: s.Column(1), Y: s.Column(2)}}
		return c, true
	}
	columns := [][]float64{a.Angle, a.Rate}
	level := mean(a.Angle)
	where := "its middle"
	if goesRound(a) {
		sin, cos := sinCos(a.Angle)
		columns, level, where = [][]float64{sin, a.Rate, cos}, 0, "its lowest place"
	}
	var b *series.Angle
	if other >= 0 {
		b = &w.angles[other]
		columns = append(columns, chaos.Resample(b.T, b.Angle, a.T), chaos.Resample(b.T, b.Rate, a.T))
	}
	s, err := chaos.Cut(a.T, columns, 0, level, chaos.Up)
	if err != nil {
		return c, false
	}
	if goesRound(a) { // not the top
		s.Values = slices.DeleteFunc(s.Values, func(row []float64) bool { return row[2] < 0 })
	}
	s.Values = slices.DeleteFunc(s.Values, func(row []float64) bool { return slices.ContainsFunc(row, math.IsNaN) })
	if len(s.Values) < 8 {
		return c, false
	}
	if b == nil {
		rate := s.Column(1)
		c.X, c.Y = deg("rate at the pass before", "rad/s", "°/s"), deg("rate at a pass", "rad/s", "°/s")
		c.Caption = fmt.Sprintf("One dot for each time that “%s” passes %s to the right: how fast, against how fast the time before", a.Part, where) + reading
		c.Lines = []finding.Line{{Name: "passes", Role: finding.Mark, X: rate[:len(rate)-1], Y: rate[1:]}}
		return c, true
	}
	angle := s.Column(len(columns) - 2)
	for i := range angle {
		angle[i] = math.Remainder(angle[i], 2*math.Pi)
	}
	c.X, c.Y = deg("angle of "+b.Part, "rad", "°"), deg("rate of "+b.Part, "rad/s", "°/s")
	c.Caption = fmt.Sprintf("One dot for each time that “%s” passes %s to the right: where “%s” is then, and how fast it turns", a.Part, where, b.Part) + reading
	c.Lines = []finding.Line{{Name: "passes", Role: finding.Mark, X: angle, Y: s.Column(len(columns) - 1)}}
	return c, true
}

// eventPart is the part whose passes are the events, one that does not go round if
// there is one, and of the others the one that moves most (−1: there is none).
func (w *work) eventPart() (at, other int) {
	size := func(i int) float64 {
		_, sd := meanAndScatter(w.angles[i].Angle)
		if goesRound(&w.angles[i]) {
			return -sd // last choice as an event
		}
		return sd
	}
	other = -1
	for i := range w.angles {
		if size(i) > size(at) {
			at = i
		}
	}
	for i := range w.angles {
		if i != at && w.angles[i].Joint != "ball" && (other < 0 || math.Abs(size(i)) > math.Abs(size(other))) {
			other = i
		}
	}
	return at, other
}

// slope is the rate of y over a twentieth of a second or more, NaN at gaps.
func slope(t, y []float64) []float64 {
	out := make([]float64, len(t))
	for i := range t {
		a, b := i, i
		for a > 0 && t[i]-t[a] < 0.025 {
			a--
		}
		for b < len(t)-1 && t[b]-t[i] < 0.025 {
			b++
		}
		if out[i] = (y[b] - y[a]) / (t[b] - t[a]); t[b]-t[a] > 0.2 {
			out[i] = math.NaN()
		}
	}
	return out
}

func mean(x []float64) float64 {
	m, _ := meanAndScatter(x)
	return m
}

func meanAndScatter(x []float64) (m, sd float64) {
	for _, v := range x {
		m += v / float64(len(x))
	}
	for _, v := range x {
		sd += (v - m) * (v - m) / float64(len(x))
	}
	return m, math.Sqrt(sd)
}
