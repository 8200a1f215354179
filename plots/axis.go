package plots

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"

	"gonum.org/v1/plot"

	"lodeswing/analyze/finding"
)

// axisScale turns SI values into places along an axis, and marks its ticks. A
// place is the shown value, or the shown value's decimal logarithm.
type axisScale struct {
	label    string
	name     string
	unit     string  // shown
	power    int     // of ten, that the label names
	factor   float64 // shown = SI × factor
	min, max float64 // places
	log      bool
	count    int // ticks at most
}

// place is NaN where a value cannot be drawn.
func (a axisScale) place(si float64) float64 {
	v := si * a.factor
	if a.log {
		v = math.Log10(v)
	}
	if math.IsInf(v, 0) {
		return math.NaN()
	}
	return v
}

// as shows the axis in another's unit.
func (a *axisScale) as(other *axisScale) {
	k := other.factor / a.factor
	a.factor, a.min, a.max = other.factor, a.min*k, a.max*k
	a.label = axisLabel(a.name, other.unit, other.power)
}

// widen lets the axis span that much, about its middle.
func (a *axisScale) widen(span float64) {
	mid := (a.min + a.max) / 2
	a.min, a.max = mid-span/2, mid+span/2
}

func (a axisScale) most(n int) axisScale {
	a.count = max(n, 2)
	return a
}

// newScale chooses unit, range and label for one axis of a curve.
func newScale(c *finding.Curve, first bool) axisScale {
	axis := c.Y
	if first {
		axis = c.X
	}
	lo, hi, least := math.Inf(1), math.Inf(-1), math.Inf(1)
	take := func(values []float64) {
		for _, v := range values {
			if math.IsNaN(v) || math.IsInf(v, 0) || axis.Log && v <= 0 {
				continue
			}
			lo, hi = math.Min(lo, v), math.Max(hi, v)
			if v > 0 {
				least = math.Min(least, v)
			}
		}
	}
	if c.Grid != nil {
		middles := c.Grid.Y
		if first {
			middles = c.Grid.X
		}
		from, to := edges(middles)
		take([]float64{from, to})
	}
	residual := false
	for i := range c.Lines {
		l := &c.Lines[i]
		residual = residual || l.Role == finding.Residual && !first
		if first {
			take(l.X)
			continue
		}
		take(l.Y)
		if len(l.Lo) > 0 && l.Role != finding.Guide {
			take(l.Lo)
			take(l.Hi)
		}
	}
	if lo > hi { // nothing to draw
		lo, hi, least = 0, 1, 1
	}
	unit, factor := axis.Shown(math.Max(math.Abs(lo), math.Abs(hi)))
	a := axisScale{name: axis.Label, unit: unit, factor: factor, log: axis.Log && least < math.Inf(1), count: 6}
	power := 0
	if big := factor * math.Max(math.Abs(lo), math.Abs(hi)); !a.log && big > 0 && (big < 1e-3 || big >= 1e5) {
		power = 3 * int(math.Floor(math.Log10(big)/3))
		a.factor *= math.Pow10(-power)
	}
	a.power = power
	a.label = axisLabel(a.name, unit, power)
	lo, hi = lo*a.factor, hi*a.factor
	if lo > hi { // a factor below zero
		lo, hi = hi, lo
	}
	switch {
	case a.log:
		lo, hi = math.Log10(math.Max(lo, hi*1e-14)), math.Log10(hi)
		pad := math.Max(0.04*(hi-lo), 0.05)
		a.min, a.max = lo-pad, hi+pad
	case residual:
		m := math.Max(math.Abs(lo), math.Abs(hi))
		if m == 0 {
			m = 1
		}
		a.min, a.max = -1.08*m, 1.08*m
	case c.Grid != nil:
		a.min, a.max = lo, hi
	default:
		pad := 0.05 * (hi - lo)
		if first {
			pad = 0.01 * (hi - lo)
		}
		if pad == 0 {
			pad = math.Max(0.05*math.Abs(hi), 1e-300)
			if hi == 0 {
				pad = 1
			}
		}
		a.min, a.max = lo-pad, hi+pad
		if lo >= 0 && lo < 0.35*hi { // an axis that nearly reaches zero begins there
			a.min = math.Min(0, a.min)
			if lo >= 0 {
				a.min = 0
			}
		}
	}
	return a
}

func axisLabel(label, unit string, power int) string {
	if first, n := utf8.DecodeRuneInString(label); n > 0 && first < 0x80 { // symbols such as ω stay
		label = strings.ToUpper(label[:n]) + label[n:]
	}
	var in []string
	if power != 0 {
		in = append(in, "10"+finding.Superscript(power))
	}
	if unit != "" && unit != "1" {
		in = append(in, unit)
	}
	if len(in) == 0 {
		return label
	}
	return label + " (" + strings.Join(in, " ") + ")"
}

// Ticks implements plot.Ticker.
func (a axisScale) Ticks(lo, hi float64) []plot.Tick {
	if a.log {
		return logTicks(lo, hi, a.count)
	}
	return linearTicks(lo, hi, a.count)
}

// linearTicks are round numbers, at most n of them.
func linearTicks(lo, hi float64, n int) []plot.Tick {
	span := hi - lo
	if !(span > 0) || math.IsInf(span, 0) {
		return []plot.Tick{{Value: lo, Label: tickLabel(lo, 3)}}
	}
	step := 0.0
	for e := math.Floor(math.Log10(span/float64(n))) - 1; step == 0; e++ {
		for _, m := range []float64{1, 2, 5} {
			s := m * math.Pow(10, e)
			if math.Floor(hi/s+1e-9)-math.Ceil(lo/s-1e-9)+1 <= float64(n) {
				step = s
				break
			}
		}
	}
	decimals := max(0, int(math.Ceil(-math.Log10(step)-1e-9)))
	var ticks []plot.Tick
	for k := math.Ceil(lo/step - 1e-9); k*step <= hi+1e-9*step; k++ {
		ticks = append(ticks, plot.Tick{Value: k * step, Label: tickLabel(k*step, decimals)})
	}
	return ticks
}

func tickLabel(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		return strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "−", 1)
}

// logTicks are powers of ten between the logarithms lo and hi, thinned to n
// numbers; within two decades also 2 and 5.
func logTicks(lo, hi float64, n int) []plot.Tick {
	first, last := int(math.Ceil(lo-1e-9)), int(math.Floor(hi+1e-9))
	decades := last - first + 1
	every := max(1, (decades+n-1)/n)
	var ticks []plot.Tick
	for e := first - 1; e <= last; e++ {
		for _, m := range []float64{1, 2, 3, 4, 5, 6, 7, 8, 9} {
			v := m * math.Pow10(e)
			place := math.Log10(v)
			if place < lo-1e-9 || place > hi+1e-9 {
				continue
			}
			label := ""
			switch {
			case m == 1 && decades > 2 && (e-first)%every == 0:
				label = "10" + finding.Superscript(e)
			case decades <= 2 && (m == 1 || m == 2 || m == 5):
				label = plainNumber(v)
			}
			if label != "" || decades <= 8 {
				ticks = append(ticks, plot.Tick{Value: place, Label: label})
			}
		}
	}
	return ticks
}

func plainNumber(v float64) string {
	if v >= 1e-4 && v < 1e6 {
		return strconv.FormatFloat(v, 'f', -1, 64)
	}
	e := int(math.Floor(math.Log10(v) + 1e-9))
	return fmt.Sprintf("%.0f × 10%s", v/math.Pow10(e), finding.Superscript(e))
}

// unlabelled keeps a panel's ticks and leaves their numbers to the one below.
type unlabelled struct{ plot.Ticker }

// Ticks implements plot.Ticker.
func (u unlabelled) Ticks(lo, hi float64) []plot.Tick {
	ticks := u.Ticker.Ticks(lo, hi)
	for i := range ticks {
		ticks[i].Label = ""
	}
	return ticks
}
