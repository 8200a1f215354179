package kick

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

// drawnKinds are the kinds of passes that figures tell apart.
var drawnKinds = []struct {
	name string
	has  func(s State) bool
}{
	{"kicked", func(s State) bool { return s == Kicked }},
	{"without a kick", func(s State) bool { return s == Off || s == Slow || s == Missed }},
	{"double or odd", func(s State) bool { return s == Double || s == Odd }},
}

// curves draws the ledger: gain per pass against amplitude, and over time.
func (l *ledger) curves(res *Result) {
	if l.free != nil {
		res.Curves = append(res.Curves, l.ballBalance(res))
		l.overTime(res)
		return
	}
	joule := finding.Axis{Label: "energy per pass", Unit: l.unit}
	amplitude := finding.Axis{Label: "amplitude", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / degree}
	balance := finding.Curve{
		Key: "kick-balance", Subject: l.part(), Title: "Gain of a pass against amplitude", X: amplitude, Y: joule,
		Caption: "Each point is one pass: what its energy grew by, kick minus loss, with one standard uncertainty of the pictures. Above zero the swing grows, below it dies; where the line crosses zero it is steady.",
	}
	lo, hi := math.Inf(1), 0.0
	for _, kind := range drawnKinds {
		line := finding.Line{Name: kind.name, Role: finding.Data}
		for i := range res.Passes {
			p := &res.Passes[i]
			lo, hi = math.Min(lo, p.Amplitude), math.Max(hi, p.Amplitude)
			if kind.has(p.State) {
				u := math.Sqrt(l.rows[i].vFrom + l.rows[i].vTo)
				line.X, line.Y = append(line.X, p.Amplitude), append(line.Y, p.Net)
				line.Lo, line.Hi = append(line.Lo, p.Net-u), append(line.Hi, p.Net+u)
			}
		}
		if len(line.X) > 0 {
			if kind.name != "kicked" || len(line.X) > 0 {
				line.Role = finding.Mark
			}
			balance.Lines = append(balance.Lines, line)
		}
	}
	s := l.best
	var x, net, loss, lossLo, lossHi []float64
	for i := range 61 {
		a := lo + (hi-lo)*float64(i)/60
		if hi-lo < 0.02*hi { // one amplitude: the line needs some width to be seen
			a = hi * (0.98 + 0.04*float64(i)/60)
		}
		g := s.lossVector(l.workAt(a))
		v, c := s.of(g, g)
		u := math.Sqrt(c * s.widen())
		k, _ := s.of(s.kickVector(), s.kickVector())
		x, net, loss = append(x, a), append(net, k-v), append(loss, -v)
		lossLo, lossHi = append(lossLo, -v-u), append(lossHi, -v+u)
	}
	if s.kicks == 1 {
		balance.Lines = append(balance.Lines, finding.Line{Name: "kick minus loss, fitted", Role: finding.Model, X: x, Y: net})
	}
	if res.Separated {
		balance.Lines = append(balance.Lines, finding.Line{Name: "loss alone, fitted", Role: finding.Model, X: x, Y: loss, Lo: lossLo, Hi: lossHi})
	}
	balance.Lines = append(balance.Lines, finding.Line{Name: "neither grows nor dies", Role: finding.Guide, X: []float64{x[0], x[len(x)-1]}, Y: []float64{0, 0}})
	res.Curves = append(res.Curves, balance)

	l.overTime(res)
}

// overTime draws the energy and the kicks over time.
func (l *ledger) overTime(res *Result) {
	s := l.best
	time := finding.Axis{Label: "time", Unit: "s"}
	energy := finding.Curve{
		Key: "kick-energy", Subject: l.part(), Title: "Energy at the turning points", X: time, Y: finding.Axis{Label: "energy", Unit: l.unit},
		Caption: "The swing's energy before each pass. A level row means that kick and loss are equal.",
	}
	if l.free != nil {
		energy.Title = "Energy between the passes"
		energy.Caption = "The energy of the free motion before each pass of the coil, above the lowest on its path: motion, height and the magnets' field. A level row means that kick and loss are equal."
	}
	line := finding.Line{Name: "measured", Role: finding.Mark}
	for _, p := range res.Passes {
		if p.Clip == 0 {
			line.X, line.Y = append(line.X, p.T), append(line.Y, p.Before)
		}
	}
	energy.Lines = append(energy.Lines, line)
	res.Curves = append(res.Curves, energy)
	if !res.Separated || s.kicks == 0 {
		return
	}
	kicks := finding.Curve{
		Key: "kick-passes", Subject: l.part(), Title: "Kick of each pass", X: time, Y: finding.Axis{Label: "kick", Unit: l.unit},
		Caption: fmt.Sprintf("What the coil gave at each pass; the line is the mean kick with its standard uncertainty, %s.", finding.DisplayU(res.UKick, l.unit)),
	}
	lines := map[bool]*finding.Line{true: {Name: "to the right", Role: finding.Mark}, false: {Name: "to the left", Role: finding.Mark}}
	first, last := math.Inf(1), math.Inf(-1)
	for _, p := range res.Passes {
		if p.Clip == 0 && p.State != Off && p.State != Slow {
			g := lines[p.Rightward]
			g.X, g.Y = append(g.X, p.T), append(g.Y, p.Kick)
			first, last = math.Min(first, p.T), math.Max(last, p.T)
		}
	}
	mean, u := res.Kick, res.UKick
	if l.free != nil {
		// All in one heap: a ball joint has no right and left.
		g := lines[true]
		g.Name = "measured"
		mean, u = l.usualGain()*res.Kick, l.usualGain()*res.UKick
		kicks.Caption = "What the coil gave at each pass: less where the magnet passed beside it. The line is the mean of the passes with a kick, with its standard uncertainty."
	}
	for _, right := range []bool{true, false} {
		if len(lines[right].X) > 0 {
			kicks.Lines = append(kicks.Lines, *lines[right])
		}
	}
	kicks.Lines = append(kicks.Lines, finding.Line{
		Name: "mean", Role: finding.Model, X: []float64{first, last}, Y: []float64{mean, mean},
		Lo: []float64{mean - u, mean - u}, Hi: []float64{mean + u, mean + u},
	})
	res.Curves = append(res.Curves, kicks)
	if res.How == CoilOff {
		l.againstSpeed(res)
	}
}

// againstSpeed draws each kick against the speed at the coil: a winding's pulse
// weakens as the magnet comes faster.
func (l *ledger) againstSpeed(res *Result) {
	c := finding.Curve{
		Key: "kick-speed", Subject: l.part(), Title: "Kick against the speed at the coil",
		X: finding.Axis{Label: "speed at the coil", Unit: "rad/s", ShowUnit: "°/s", ShowFactor: 1 / degree}, Y: finding.Axis{Label: "kick", Unit: l.unit},
		Caption: "Each point is one pass with a kick, and one standard uncertainty of the pictures. A coil whose pulse weakens with speed falls to the right.",
	}
	line := finding.Line{Name: "kicked", Role: finding.Mark}
	for i := range res.Passes {
		p := &res.Passes[i]
		if p.State != Kicked || p.Clip != 0 || math.IsNaN(p.Kick) {
			continue
		}
		u := math.Sqrt(l.rows[i].vFrom + l.rows[i].vTo)
		line.X, line.Y = append(line.X, p.Speed), append(line.Y, p.Kick)
		line.Lo, line.Hi = append(line.Lo, p.Kick-u), append(line.Hi, p.Kick+u)
	}
	// At one speed there is nothing to see.
	if len(line.X) > 0 && slices.Max(line.X) > 1.02*slices.Min(line.X) {
		c.Lines = []finding.Line{line}
		res.Curves = append(res.Curves, c)
	}
}
