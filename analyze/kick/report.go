package kick

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

const (
	degree = math.Pi / 180
	// enough is the relative standard uncertainty above which a kick is not called
	// separate from the loss.
	enough = 0.12
	method = "balance of energy between turning points, generalised least squares over all passes"
	toFilm = "Film the unit once more with the battery out, from the same amplitude down to half of it, and give that result as the battery-out clip; or take the battery out while the phone runs and let it swing on for ten seconds; or, to rest on the assumption that the kick does not depend on speed, film its start-up"
)

// kickVector and lossVector pick the kick and the loss at an amplitude out of
// the parameters.
func (s *solution) kickVector() []float64 {
	g := make([]float64, s.size)
	if s.kicks == 1 {
		g[0] = 1
	}
	return g
}

func (s *solution) lossVector(work [3]float64) []float64 {
	g := make([]float64, s.size)
	for j := range 3 {
		if s.law.has(j) {
			g[s.frictionAt(j)] = work[j]
		}
	}
	return g
}

// workAt is the work of unit frictions over a pass at an amplitude.
func (l *ledger) workAt(amplitude float64) (w [3]float64) {
	if l.free != nil {
		return l.usualWork()
	}
	for _, end := range []float64{amplitude, -amplitude} {
		x := l.frictions(end, l.energy(end), 0, 0)
		for j := range w {
			w[j] += x[j]
		}
	}
	return w
}

// mean is a quantity over all mixtures, its variance from the pictures with what
// the choice of the mixture adds.
func (l *ledger) mean(g func(s *solution) []float64) (value, variance float64) {
	for i, s := range l.laws {
		v, _ := s.of(g(s), g(s))
		value += l.weighs[i] * v
	}
	for i, s := range l.laws {
		v, c := s.of(g(s), g(s))
		variance += l.weighs[i] * (c*s.widen() + sq(v-value))
	}
	return value, variance
}

// budget is what a quantity's uncertainty is made of beyond the pictures: what
// is common to all samples, and what turns angles into energies.
func (l *ledger) budget(g []float64, value float64) []finding.Share {
	var out []finding.Share
	add := func(source string, u float64) {
		for i := range out {
			if out[i].Source == source {
				out[i].U = math.Hypot(out[i].U, u)
				return
			}
		}
		out = append(out, finding.Share{Source: source, U: u})
	}
	for c := range l.clips {
		if l.free != nil {
			break // in the covariance already
		}
		for _, sh := range l.clips[c].Angle.Shared {
			if sh.Source == "vertical" || len(sh.D) == 0 {
				continue // free in the fit
			}
			dy := make([]float64, len(l.rows))
			for i := range l.rows {
				r := &l.rows[i]
				if r.clip != c {
					continue
				}
				a, b := &l.turns[c][r.from], &l.turns[c][r.to]
				dy[i] = l.torque(b.angle-l.rest[c])*sh.D[min(b.index, len(sh.D)-1)] - l.torque(a.angle-l.rest[c])*sh.D[min(a.index, len(sh.D)-1)]
			}
			d := l.best.response(dy)
			u := 0.0
			for j := range g {
				u += g[j] * d[j]
			}
			add(sh.Source, math.Abs(u))
		}
	}
	for _, s := range l.shares {
		add(s.Source, s.U*math.Abs(value))
	}
	return out
}

// measured makes a finding of a quantity in joules.
func (l *ledger) measured(key, name string, g func(s *solution) []float64) finding.Finding {
	v, variance := l.mean(g)
	budget := l.budget(g(l.best), v)
	u := math.Sqrt(variance + sq(rss(budget)))
	f := finding.Normal(key, l.part(), name, v, u, l.unit, method)
	f.Budget = append([]finding.Share{{Source: l.pictures(), U: math.Sqrt(variance)}}, budget...)
	return f
}

func (l *ledger) part() string { return l.clips[0].Angle.Part }

// middle is the amplitude at which kick and loss are stated: the median of the
// kicked passes, or of all where none was kicked.
func (l *ledger) middle() float64 {
	var a []float64
	for _, only := range []bool{true, false} {
		for i := range l.rows {
			if r := &l.rows[i]; !only || r.state == Kicked && r.clip == 0 {
				a = append(a, r.amp)
			}
		}
		if len(a) > 0 {
			break
		}
	}
	slices.Sort(a)
	return a[len(a)/2]
}

// how tells by what kick and loss may be told apart.
func (l *ledger) how() Separation {
	n, none, off := 0, 0, 0
	for i := range l.rows {
		switch l.rows[i].state {
		case Off:
			off++
			n++
		case Slow:
			n++
		case Missed:
			none++
		}
	}
	switch {
	case l.free != nil && off < leastOff:
		return Between
	case n >= leastOff:
		return CoilOff
	case none > 0:
		return Gaps
	}
	return Constant
}

func (l *ledger) report(res *Result) {
	res.Omega, res.UOmega = l.omega, l.uOmega
	res.Amplitude = l.middle()
	work := l.workAt(res.Amplitude)
	loss := func(s *solution) []float64 { return s.lossVector(work) }
	kick := (*solution).kickVector
	at := fmt.Sprintf(" at an amplitude of %.3g°", res.Amplitude/degree)
	if l.free != nil {
		at = ", on average of those filmed"
	}
	fLoss := l.measured("kick.loss", "Energy that friction takes per pass"+at, loss)
	var fKick finding.Finding
	if l.best.kicks == 1 {
		fKick = l.measured("kick.energy", "Energy of one kick", kick)
		if l.free != nil {
			fKick.Name = "Energy of one kick, right over the coil"
			u, budget := fKick.U, fKick.Budget
			for _, sh := range l.coilBudget(fKick.Value) {
				u, budget = math.Hypot(u, sh.U), append(budget, sh)
			}
			fKick = finding.Normal(fKick.Key, fKick.Subject, fKick.Name, fKick.Value, u, fKick.Unit, fKick.Method)
			fKick.Budget = budget
		}
		v, variance := l.mean(kick)
		switch u := math.Sqrt(variance); {
		case v > 0 && u < enough*v:
			res.Separated, res.How = true, l.how()
		case v < 3*u && u < enough*fLoss.Value:
			// What it may be is small beside the loss: the coil as good as gives nothing.
			res.Separated, res.Idle, res.How = true, true, l.how()
			fKick.Kind, fKick.Hi, fKick.Lo = finding.UpperLimit, math.Max(0, v)+1.645*u, 0
			fKick.Value, fKick.U = fKick.Hi, 0
			fKick.Budget = nil
		}
		res.Kick, res.UKick = v, fKick.U
		if res.Idle {
			res.UKick = math.Sqrt(variance)
		}
	} else {
		res.Separated, res.How = true, CoilOff
	}
	res.Loss, res.ULoss = fLoss.Value, fLoss.U
	_, c := l.best.of(kick(l.best), loss(l.best))
	res.CovKickLoss = c * l.best.widen()
	for _, s := range l.shares {
		res.CovKickLoss += sq(s.U) * res.Kick * res.Loss
	}
	l.fill(res)
	res.Findings = append(res.Findings, l.count(res))
	if !res.Separated {
		for _, f := range []*finding.Finding{&fKick, &fLoss} {
			res.Findings = append(res.Findings, finding.Finding{
				Key: f.Key, Subject: f.Subject, Name: f.Name, Kind: finding.Undecided, Unit: l.unit, Method: method,
				Text: "The clip cannot separate kick and loss: at one amplitude only their difference shows. " + toFilm + ".",
			})
		}
		res.Kick, res.UKick, res.Loss, res.ULoss, res.CovKickLoss = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
	} else {
		if words := res.How.caution(); words != "" && l.best.kicks == 1 {
			fKick.Cautions, fLoss.Cautions = append(fKick.Cautions, words), append(fLoss.Cautions, words)
		}
		if l.best.kicks == 1 {
			res.Findings = append(res.Findings, fKick)
		}
		res.Findings = append(res.Findings, fLoss)
	}
	if l.best.kicks == 1 {
		if !res.Idle {
			l.ways(res)
			if l.free == nil {
				l.steady(res)
				l.beginning(res)
			} else {
				l.usualKick(res)
			}
			l.perDay(res)
		} else {
			res.Cautions = append(res.Cautions, "No kick was seen: the coil, its cell or the magnet at the foot does nothing, or the swing is too slow to be sensed.")
		}
	}
	if f, ok := l.ratio(); ok {
		res.Findings = append(res.Findings, f)
	}
	res.Fits = append(res.Fits, l.summary(res))
	l.curves(res)
	if l.unit != "J" {
		res.Cautions = append(res.Cautions, fmt.Sprintf("The rig gives neither mass and centre nor inertia of “%s”: energies are per unit inertia, J/(kg·m²).", l.part()))
	}
}

func (h Separation) caution() string {
	switch h {
	case Constant:
		return "No pass without a kick was filmed: kick and loss were told apart by how the amplitude changes, on the assumption that the kick does not depend on speed. A real coil's kick weakens with speed, which then looks like friction."
	case Between:
		return "Kick and loss were told apart by the free motion between the pushes. The kick is that of a pass right over the coil; beside it, it is taken to fall off as the rig's radius says."
	case Gaps:
		return "Kick and loss were told apart by single passes that gained much less than the others, on the assumption that these had no kick at all."
	}
	return ""
}

// fill writes the ledger's rows.
func (l *ledger) fill(res *Result) {
	s := l.best
	for i := range l.rows {
		r := &l.rows[i]
		lean := r.lean * s.beta[s.size-len(l.clips)+r.clip]
		p := Pass{
			T: r.t, Clip: r.clip, Rightward: r.side > 0, Before: r.before, UBefore: math.Hypot(math.Sqrt(r.vFrom), r.before*rss(l.shares)),
			Net: r.net() - lean, Amplitude: r.amp, Speed: r.speed, State: r.state,
			Kick: math.NaN(), UKick: math.NaN(), Loss: math.NaN(), ULoss: math.NaN(),
		}
		tilt := s.cov[(s.size-len(l.clips)+r.clip)*(s.size+1)]
		p.UNet = math.Sqrt(r.vFrom + r.vTo + sq(r.lean)*tilt + sq(p.Net*rss(l.shares)))
		if res.Separated {
			g := s.lossVector(r.work)
			loss, v := s.of(g, g)
			v *= s.widen()
			p.Loss, p.ULoss = loss, math.Sqrt(v+sq(loss*rss(l.shares)))
			p.Kick = p.Net + loss
			p.UKick = math.Sqrt(r.vFrom + r.vTo + sq(r.lean)*tilt + v + sq(p.Kick*rss(l.shares)))
			if r.state == Off {
				p.Kick, p.UKick = 0, 0
				p.Loss, p.ULoss = -p.Net, p.UNet
			}
		}
		res.Passes = append(res.Passes, p)
	}
}

// count says in words what the coil did.
func (l *ledger) count(res *Result) finding.Finding {
	n := map[State]int{}
	total := 0
	for i := range l.rows {
		if l.rows[i].clip == 0 {
			n[l.rows[i].state]++
			total++
		}
	}
	text := fmt.Sprintf("%d passes were seen: %d with a kick", total, n[Kicked])
	for _, s := range []struct {
		state State
		words string
	}{
		{Missed, "%d without one though those around had one"},
		{Double, "%d with about two"},
		{Slow, "%d too slow to be sensed"},
		{Off, "%d with the coil off"},
		{Odd, "%d at which something else gave or took energy"},
	} {
		if n[s.state] > 0 {
			text += ", " + fmt.Sprintf(s.words, n[s.state])
		}
	}
	if n[Missed] > 0 {
		res.Cautions = append(res.Cautions, fmt.Sprintf("The coil missed %d of %d kicks.", n[Missed], n[Missed]+n[Kicked]+n[Double]))
	}
	if n[Odd] > 0 {
		res.Cautions = append(res.Cautions, "At some passes something other than coil and friction acted: a touch, a draught, or a jolt of the stand.")
	}
	return finding.Finding{Key: "kick.passes", Subject: l.part(), Name: "Passes", Kind: finding.Statement, Unit: "1", Text: text + ".", Method: "each pass's gain against that of the passes around it at the same amplitude"}
}

// ratio sets the inertia from the rate of swinging against the rig's.
func (l *ledger) ratio() (finding.Finding, bool) {
	o := &l.opt
	if !l.pendulum || o.Weight == 0 || o.Inertia == 0 {
		return finding.Finding{}, false
	}
	v := o.Inertia * sq(l.omega) / o.Weight
	shares := []finding.Share{{Source: "the rig's inertia", U: o.UInertia * v}, {Source: "the rate of swinging", U: 2 * l.uOmega / l.omega * v}}
	for _, s := range o.WeightShares {
		shares = append(shares, finding.Share{Source: s.Source, U: s.U * v})
	}
	f := finding.Normal("kick.weight_check", l.part(), "Weight moment by inertia and period, over the rig's", v, rss(shares), "1", "inertia × rate² over mass × gravity × centre of mass")
	f.Budget = shares
	if math.Abs(v-1) > 3*f.U {
		f.Cautions = append(f.Cautions, "The rig's mass, centre and inertia do not go together with the measured period: one of them is wrong, or the part is not the one that the rig describes.")
	}
	return f, true
}

func (l *ledger) summary(res *Result) finding.Fit {
	s := l.best
	fit := finding.Fit{
		Key: "kick.ledger", Subject: l.part(), ChiSquare: s.chi2, DegreesOf: s.dof, Converged: true,
		Why: "a linear fit, solved at once; the scatter of the kicks is the likeliest",
	}
	per := 1 / l.inertia // frictions are stated as the rig does, or per unit inertia
	units := [3]string{"s⁻¹", "rad⁻¹", "rad/s²"}
	if l.unit == "J" {
		per, units = 1, [3]string{"N·m·s/rad", "N·m·s²/rad²", "N·m"}
	}
	add := func(name string, at int, factor float64, unit string) {
		fit.Free = append(fit.Free, finding.Parameter{Name: name, Value: s.beta[at] * factor, U: math.Sqrt(s.cov[at*s.size+at]*s.widen()) * math.Abs(factor), Unit: unit})
	}
	if s.kicks == 1 {
		add("kick", 0, 1, l.unit)
	}
	for j, name := range [...]string{"viscous friction", "air drag", "dry friction"} {
		if s.law.has(j) {
			add(name, s.frictionAt(j), per, units[j])
		}
	}
	for c := range l.clips {
		if l.free != nil {
			break
		}
		name := "vertical"
		if c > 0 {
			name = fmt.Sprintf("vertical of clip %d", c+1)
		}
		at := s.size - len(l.clips) + c
		add(name, at, 1, "rad")
		fit.Free[len(fit.Free)-1].Value += l.rest[c]
	}
	told := len(fit.Free)
	for a := range told {
		row := make([]float64, told)
		for b := range told {
			row[b] = s.cov[a*s.size+b] / math.Sqrt(s.cov[a*s.size+a]*s.cov[b*s.size+b])
		}
		fit.Correlation = append(fit.Correlation, row)
	}
	for i, x := range l.laws {
		fit.Candidates = append(fit.Candidates, finding.Candidate{
			Name: x.law.String(), BIC: l.bic(x), Weight: l.weighs[i],
		})
	}
	if !res.Separated {
		fit.NotSeparable = append(fit.NotSeparable, "kick and loss at one amplitude")
	}
	return fit
}
