package decay

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

// envelope walks the fitted motion and keeps its turning points, the amplitudes
// at both ends and the number of swings.
func (an *analysis) envelope(f *fitted) {
	t := an.data.t
	an.turns = nil
	end := t[len(t)-1]
	// Turning points need an end beyond the last sample by nothing: one time suffices.
	mv := newMover(f.m, false)
	_ = mv.run(f.p, f.tRef, []float64{end}, make([]float64, 1), nil, func(at, d float64) {
		an.turns = append(an.turns, turn{at, d})
	})
	an.most = 3.1
	if !f.m.sine {
		an.most = 4 * math.Abs(an.st.swings[0].span)
	}
	an.ampStart = f.m.amplitudeOf(f.p, f.p[atAngle], f.p[atRate], an.most)
	an.ampEnd = f.m.amplitudeOf(f.p, mv.last[0], mv.last[1], an.most)
	if math.IsNaN(an.ampStart) {
		an.ampStart = an.st.swings[0].span / 2
	}
	if math.IsNaN(an.ampEnd) || an.ampEnd <= 0 {
		an.ampEnd = an.st.swings[len(an.st.swings)-1].span / 2
	}
	an.swings = 0
	if n := len(an.turns); n > 1 {
		first, last := an.turns[0].t, an.turns[n-1].t
		half := (last - first) / float64(n-1)
		an.swings = (float64(n-1) + (first-t[0])/half + math.Min(1, (end-last)/half)) / 2
	}
}

// turn is a turning point of the fitted motion, from rest.
type turn struct{ t, d float64 }

// most samples that a curve keeps; beyond, it is thinned evenly.
const mostPoints = 6000

var (
	timeAxis  = finding.Axis{Label: "time", Unit: "s"}
	angleAxis = finding.Axis{Label: "angle", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / deg}
	ampAxis   = finding.Axis{Label: "amplitude", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / deg}
)

// curves makes what the figures draw.
func (an *analysis) curves(res *Result) []finding.Curve {
	a := an.angle
	subject := a.Part
	top := an.fits[an.law]
	n := len(an.data.t)
	out := make([]float64, n)
	mv := newMover(top.m, false)
	mv.rates = make([]float64, n)
	_ = mv.run(top.p, top.tRef, an.data.t, out, nil, nil)
	res.ModelT, res.ModelAngle, res.ModelRate = an.data.t, out, mv.rates
	// The drawn model runs on through gaps, as a swing and not as a chord.
	full := unbroken(an.data.t)
	drawn := make([]float64, len(full))
	mv = newMover(top.m, false)
	mv.rates = make([]float64, len(full))
	_ = mv.run(top.p, top.tRef, full, drawn, nil, nil)

	stride := 1 + (len(a.T)-1)/mostPoints
	thin := func(name string, role finding.Role, t, y []float64) finding.Line {
		l := finding.Line{Name: name, Role: role}
		for i := 0; i < len(t); i += stride {
			l.X, l.Y = append(l.X, t[i]), append(l.Y, y[i])
		}
		return l
	}
	allT, allY := a.Broken(a.Angle)
	fit := finding.Curve{
		Key: "decay-fit", Subject: subject, Title: "Angle and fitted free decay", X: timeAxis, Y: angleAxis,
		Caption: fmt.Sprintf("Measured angle and the fitted swing with %s friction, from %.2f s to %.2f s.", res.Law, res.FromS, res.ToS),
		Lines:   []finding.Line{thin("measured", finding.Data, allT, allY), thin("fit", finding.Model, full, drawn)},
	}
	r := make([]float64, n)
	for i := range r {
		r[i] = an.data.y[i] - out[i]
	}
	rms := math.Sqrt(dot(r, r) / float64(n))
	resid := finding.Curve{
		Key: "decay-residuals", Subject: subject, Title: "What the fit leaves", X: timeAxis,
		Y:       finding.Axis{Label: "measured − fit", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / deg},
		Caption: fmt.Sprintf("Measured angle minus fit, %.2g° r.m.s. A pattern that repeats with the swing means that the model lacks something.", rms/deg),
		Lines:   []finding.Line{thin("residual", finding.Residual, an.data.t, r)},
	}
	phase := finding.Curve{
		Key: "decay-phase", Subject: subject, Title: "Phase portrait", X: angleAxis,
		Y:       finding.Axis{Label: "rate", Unit: "rad/s", ShowUnit: "°/s", ShowFactor: 1 / deg},
		Caption: "Rate against angle; a free decay spirals into its rest.",
	}
	var px, py []float64
	for i := an.st.from; i < an.st.to; i += stride {
		px, py = append(px, a.Angle[i]), append(py, a.Rate[i])
	}
	phase.Lines = append(phase.Lines, finding.Line{Name: "measured", Role: finding.Data, X: px, Y: py},
		thin("fit", finding.Model, drawn, mv.rates))
	return []finding.Curve{fit, resid, an.envelopeCurve(res, top), an.periodCurve(), an.zetaCurve(res), phase}
}

// unbroken is t with times of its median step put into its gaps.
func unbroken(t []float64) []float64 {
	steps := make([]float64, len(t)-1)
	for i := range steps {
		steps[i] = t[i+1] - t[i]
	}
	slices.Sort(steps)
	step := steps[len(steps)/2]
	out := make([]float64, 0, len(t))
	for i, at := range t {
		if i > 0 {
			for k, n := 1, int(math.Round((at-t[i-1])/step)); k < n; k++ {
				out = append(out, t[i-1]+(at-t[i-1])*float64(k)/float64(n))
			}
		}
		out = append(out, at)
	}
	return out
}

// envelopeCurve is the amplitude over time with the law of the largest weight
// and its 95 % band.
func (an *analysis) envelopeCurve(res *Result, top *fitted) finding.Curve {
	data := finding.Line{Name: "measured turning points", Role: finding.Data}
	rest := top.p[atRest]
	k := math.Max(1, math.Sqrt(an.noise.sigma2))
	add := func(t, d, u float64) {
		y := math.Abs(d - rest)
		data.X, data.Y = append(data.X, t), append(data.Y, y)
		data.Lo, data.Hi = append(data.Lo, y-1.96*u*k), append(data.Hi, y+1.96*u*k)
	}
	for i, s := range an.st.swings {
		if i == 0 {
			add(s.from.T, s.from.Angle, s.from.UAngle)
		}
		add(s.to.T, s.to.Angle, s.to.UAngle)
	}
	line := finding.Line{Name: res.Law + " friction", Role: finding.Model}
	n := top.m.size()
	times := make([]float64, len(an.turns))
	for i, w := range an.turns {
		times[i] = w.t
	}
	out, jac := make([]float64, len(times)), make([]float64, len(times)*n)
	_ = newMover(top.m, true).run(top.p, top.tRef, times, out, jac, nil)
	b := an.law
	for i, w := range an.turns {
		// At a turning point the time's own uncertainty does not move the angle.
		g := jac[i*n : (i+1)*n]
		g[atRest] = 0
		u := 1.96 * math.Sqrt(quadratic(g, an.cov[b]))
		y := math.Abs(w.d)
		line.X, line.Y = append(line.X, w.t), append(line.Y, y)
		line.Lo, line.Hi = append(line.Lo, y-u), append(line.Hi, y+u)
	}
	c := finding.Curve{
		Key: "decay-envelope", Subject: an.angle.Part, Title: "How the swing dies", X: timeAxis, Y: ampAxis,
		Caption: fmt.Sprintf("Turning points from rest with 95 %% bars, and the fitted envelope with %s friction and its 95 %% band.", res.Law),
		Lines:   []finding.Line{data, line},
	}
	if rival := an.rival(); rival >= 0 {
		f := an.fits[rival]
		l := finding.Line{Name: f.m.law.String() + " friction alone, for comparison", Role: finding.Guide}
		_ = newMover(f.m, false).run(f.p, f.tRef, []float64{an.data.t[len(an.data.t)-1]}, make([]float64, 1), nil, func(t, d float64) {
			l.X, l.Y = append(l.X, t), append(l.Y, math.Abs(d))
		})
		c.Lines = append(c.Lines, l)
	}
	return c
}

// rival is the pure law that comes nearest to the chosen law, −1 for none.
func (an *analysis) rival() int {
	b, r := an.law, -1
	for k, l := range laws {
		if k != b && l.count() == 1 && (r < 0 || an.bics[k] < an.bics[r]) {
			r = k
		}
	}
	return r
}

// periodCurve is the period against amplitude, from turning points on the same
// side and from the model.
func (an *analysis) periodCurve() finding.Curve {
	data := finding.Line{Name: "between turning points", Role: finding.Data}
	sw := an.st.swings
	for i := 1; i < len(sw); i++ {
		if sw[i].from.T != sw[i-1].to.T {
			continue
		}
		a, b := sw[i-1].from, sw[i].to
		u := 1.96 * math.Hypot(a.UT, b.UT)
		y := b.T - a.T
		data.X, data.Y = append(data.X, (sw[i-1].span+sw[i].span)/4), append(data.Y, y)
		data.Lo, data.Hi = append(data.Lo, y-u), append(data.Hi, y+u)
	}
	line := finding.Line{Name: "fit", Role: finding.Model}
	an.sweep(&line, periodAt)
	return finding.Curve{
		Key: "decay-period", Subject: an.angle.Part, Title: "Period against amplitude", X: ampAxis,
		Y:       finding.Axis{Label: "period", Unit: "s"},
		Caption: "Each point is one full swing between turning points with its 95 % bar; the line is the fit with its 95 % band.",
		Lines:   []finding.Line{data, line},
	}
}

// zetaCurve is the equivalent damping ratio against amplitude, over all laws.
func (an *analysis) zetaCurve(res *Result) finding.Curve {
	line := finding.Line{Name: "mean over the laws", Role: finding.Model}
	an.sweep(&line, zetaAt)
	mark := finding.Line{Name: "stated at", Role: finding.Mark, X: []float64{res.Amplitude}, Y: []float64{an.average(zetaAt(res.Amplitude)).value}}
	return finding.Curve{
		Key: "decay-zeta", Subject: an.angle.Part, Title: "Damping ratio against amplitude", X: ampAxis,
		Y:       finding.Axis{Label: "damping ratio ζ", Unit: "1"},
		Caption: "Equivalent damping ratio, mean over the friction laws by their weight, with its 95 % band; the mark is where it is stated.",
		Lines:   []finding.Line{line, mark},
	}
}

// sweep fills a line with a quantity over the amplitudes seen.
func (an *analysis) sweep(line *finding.Line, q func(a float64) quantity) {
	const steps = 32
	lo, hi := math.Max(an.ampEnd, 0.02*an.ampStart), an.ampStart
	for i := range steps + 1 {
		x := lo + (hi-lo)*float64(i)/steps
		v := an.average(q(x))
		if math.IsNaN(v.value) {
			continue
		}
		line.X, line.Y = append(line.X, x), append(line.Y, v.value)
		line.Lo, line.Hi = append(line.Lo, v.value-1.96*v.u), append(line.Hi, v.value+1.96*v.u)
	}
}
