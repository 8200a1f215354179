package decay

import (
	"fmt"
	"math"
	"strings"
	"unicode"
	"unicode/utf8"

	"lodeswing/analyze/finding"
)

// A law is called the law when its weight is at least decidedAt, and when no
// friction that it lacks could hide much: given the law, the 95 % upper limit of
// another friction must stay below hides of the loss at the first swing, one
// figure for laws of one friction and one for laws of two. BIC alone would call
// any decay simple that is short or noisy enough. The figures are set so that
// what design section 6 asks to be decided just is; TestConfusion prints what
// comes of it.
const decidedAt = 0.6

var hides = [4]float64{1: 0.95, 2: 0.3}

const deg = math.Pi / 180

// best is the index of the law of the largest weight.
func (an *analysis) best() int {
	b := 0
	for i, w := range an.weights {
		if w > an.weights[b] {
			b = i
		}
	}
	return b
}

// report fills the result from a finished analysis.
func (an *analysis) report(res *Result) {
	a := an.angle
	res.Found = true
	res.FromS, res.ToS, res.Samples = an.data.t[0], an.data.t[len(an.data.t)-1], len(an.data.t)
	b := an.best()
	an.envelope(an.fits[b])
	b = an.simplify(b)
	an.law = b
	top := an.fits[b]
	an.period = periodZero(top.m, top.p)
	res.AmplitudeStart, res.AmplitudeEnd = an.ampStart, an.ampEnd
	res.Swings = an.swings
	res.Amplitude = an.stateAmplitude()
	res.Law, res.Decided = top.m.law.String(), an.decide(b)

	an.lawFits(res)
	res.Cautions = append(res.Cautions, an.cautions...)
	an.noteCautions(res)
	res.Findings = append(res.Findings, an.motionFindings(res)...)
	res.Findings = append(res.Findings, an.lawFindings(res, b)...)
	res.Findings = append(res.Findings, an.gravityCheck())
	for i := range res.Findings {
		if res.Findings[i].Subject == "" {
			res.Findings[i].Subject = a.Part
		}
	}
	res.Fits = append(res.Fits, an.fitSummary(b))
	res.Curves = an.curves(res)
}

// stateAmplitude is the amplitude at which damping is stated: as told, or where
// it is known best, rounded to a figure that reads well.
func (an *analysis) stateAmplitude() float64 {
	if an.opt.AmplitudeRad > 0 {
		return an.opt.AmplitudeRad
	}
	lo, hi := math.Max(an.ampEnd, 0.02*an.ampStart), an.ampStart
	best, least := math.Sqrt(lo*hi), math.Inf(1)
	const steps = 24
	for i := range steps + 1 {
		x := lo * math.Pow(hi/lo, float64(i)/steps)
		z := an.average(zetaAt(x))
		if rel := z.u / math.Abs(z.value); rel < least {
			best, least = x, rel
		}
	}
	// Three figures in degrees.
	d := best / deg
	unit := math.Pow(10, math.Floor(math.Log10(d))-2)
	return math.Round(d/unit) * unit * deg
}

func (an *analysis) lawFits(res *Result) {
	for k, f := range an.fits {
		u := func(j int) float64 { return an.uncertainty(k, j) }
		l := LawFit{Law: f.m.law.String(), BIC: an.bics[k], Weight: an.weights[k], ChiSquare: f.chi2, Omega2: f.p[atK], UOmega2: u(atK)}
		for _, w := range []struct {
			l    law
			v, u *float64
		}{{viscous, &l.Viscous, &l.UViscous}, {drag, &l.Drag, &l.UDrag}, {dry, &l.Dry, &l.UDry}} {
			if f.m.law&w.l != 0 {
				j := f.m.frictionAt(w.l)
				*w.v, *w.u = f.p[j], u(j)
			}
		}
		q := zetaAt(res.Amplitude)
		l.ZetaAtAmplitude = q(f.m, f.p)
		l.U = math.Sqrt(an.variance(k, gradient(q, f)))
		res.Laws = append(res.Laws, l)
	}
}

// noteCautions says what was wrong with the data.
func (an *analysis) noteCautions(res *Result) {
	add := func(format string, args ...any) {
		res.Cautions = append(res.Cautions, fmt.Sprintf(format, args...))
	}
	if an.outliers > 0 {
		add("%d samples lay more than six standard deviations from the fit and were left out.", an.outliers)
	}
	lost, step := 0.0, (res.ToS-res.FromS)/float64(res.Samples)
	for _, g := range an.angle.Gaps {
		if g.FromS < res.ToS && g.ToS > res.FromS {
			lost += math.Max(0, g.ToS-g.FromS-step)
		}
	}
	if lost > 0.02*(res.ToS-res.FromS) {
		add("%.0f %% of the free decay's time has no samples; the model runs on through these gaps.", 100*lost/(res.ToS-res.FromS))
	}
	level := math.Sqrt(an.noise.sigma2)
	if level > 2 {
		add("The residuals are %.3g times as large as the samples' own noise lets expect; the uncertainties are widened by that.", level)
	}
	if an.noise.swing > 1.3 {
		add("The residuals are not white (the camera moves, the codec smears, or the model lacks something): uncertainties are widened by at least %.1f, as if %.0f of %d samples were independent.", math.Sqrt(an.noise.swing), an.noise.effective, res.Samples)
	}
	if len(an.shape.powers) > 0 && an.opt.Restoring == Gravity {
		add("The period changes with amplitude a little otherwise than a pendulum's: a cubic term is wanted. A pivot or a lens that is a little off does this.")
	}
	if res.Swings < 3 {
		add("Only %.1f swings were seen; a longer clip would say much more.", res.Swings)
	}
}

// misfit tells whether the residuals are far above the noise of the samples, as
// a local polynomial sees it, and not white: the model lacks something.
func (an *analysis) misfit() bool {
	return an.noise.swing > 2 && an.noise.sigma2 > 9*sq(math.Max(1, an.angle.NoiseRatio))
}

// unseenRest tells whether the small swing would be a guess: a magnet acts, the
// rig does not say where, and the swing did not become small.
func (an *analysis) unseenRest() bool {
	return an.opt.Restoring == Magnets && len(an.shape.pulls) == 0 && an.ampEnd > smallSwing*an.ampStart && an.ampEnd > 5*deg
}

// smallSwing is the part of the first amplitude down to which a swing must be
// seen before the smooth law is trusted to hold at rest (common practice, no source).
const smallSwing = 0.25

// motionFindings are period, damping and rest.
func (an *analysis) motionFindings(res *Result) []finding.Finding {
	subject := an.angle.Part
	clock := an.angle.UClock
	how := fmt.Sprintf("fit of the damped swing to %d samples from %.2f s to %.2f s (%.1f swings; stretch %s)", res.Samples, res.FromS, res.ToS, res.Swings, an.st.how)
	mean := how + ", mean over the friction laws by their weight"
	at := fmt.Sprintf("%.3g°", res.Amplitude/deg)

	timed := func(q quantity) averaged {
		x := an.withShape(q)
		return x.with("the camera's clock", clock*x.value)
	}
	var out []finding.Finding
	zero := timed(periodZero).finding("decay.period_zero", subject, "Period of small swings", "s",
		how+"; without damping, which would lengthen it by ζ²/2")
	if an.unseenRest() {
		zero = finding.Finding{
			Key: zero.Key, Subject: subject, Name: zero.Name, Unit: "s", Kind: finding.Undecided, Method: how,
			Text: fmt.Sprintf("A magnet acts, and the swing was seen only down to %.3g°: how it pulls nearer to rest this clip does not show. Film on until the swing is small, or give at_mm and axis of the magnets in the rig.", an.ampEnd/deg),
		}
	}
	out = append(out, zero)
	out = append(out, timed(periodAt(res.Amplitude)).finding("decay.period_at", subject, "Period at an amplitude of "+at, "s", how))
	if an.opt.Restoring != Gravity && an.ampEnd > 0.3*an.ampStart {
		out[0].Cautions = append(out[0].Cautions, fmt.Sprintf("Drawn out from amplitudes above %.2g° to none; a clip that runs on to smaller swings would be surer.", an.ampEnd/deg))
	}
	k := an.withShape(func(_ model, p []float64) float64 { return p[atK] })
	out = append(out, k.with("the camera's clock", 2*clock*k.value).finding("decay.omega_squared", subject, "Stiffness over inertia, ω₀²", "s⁻²", how))

	z := an.withShape(zetaAt(res.Amplitude))
	out = append(out, z.finding("decay.zeta", subject, "Damping ratio ζ at an amplitude of "+at, "1", mean))
	out = append(out, z.through(func(z float64) float64 { return 1 / (2 * z) }).finding("decay.q", subject, "Quality factor Q at an amplitude of "+at, "1", "1/(2ζ); "+mean))
	out = append(out, z.through(func(z float64) float64 { return 2 * math.Pi * z / math.Sqrt(1-z*z) }).
		finding("decay.log_decrement", subject, "Logarithmic decrement at an amplitude of "+at, "1", "per full swing, 2πζ/√(1−ζ²); "+mean))
	for _, e := range []struct {
		key, name string
		a         float64
	}{{"decay.zeta_start", "Damping ratio ζ at the first swing", an.ampStart}, {"decay.zeta_end", "Damping ratio ζ at the last swing", an.ampEnd}} {
		x := an.withShape(zetaAt(e.a))
		if !math.IsNaN(x.value) && e.a > 0 {
			out = append(out, x.finding(e.key, subject, fmt.Sprintf("%s (%.3g°)", e.name, e.a/deg), "1", mean))
		}
	}
	rest := an.average(func(_ model, p []float64) float64 { return p[atRest] })
	r := rest.finding("decay.rest_angle", subject, "Rest angle", "rad", how)
	if an.angle.VerticalFrom == "" {
		r.Cautions = append(r.Cautions, "Counted from the picture's own upright; no vertical was given.")
	}
	out = append(out, r)
	// Where the swing began is a matter of its first samples: leaving those out,
	// as the jackknife does, says nothing of it.
	amp := an.averageOver(func(m model, p []float64) float64 { return m.amplitudeOf(p, p[atAngle], p[atRate], an.most) },
		func(law) bool { return true }, func(k int, g []float64) float64 { return quadratic(g, an.cov[k]) })
	out = append(out, amp.finding("decay.amplitude_start", subject, "Amplitude at the start of the free decay", "rad", how))
	return out
}

// lawFindings are the friction law, its coefficients and the upper limits.
func (an *analysis) lawFindings(res *Result, b int) []finding.Finding {
	subject := an.angle.Part
	top := an.fits[b]
	var seen []string
	for i, l := range laws {
		if an.weights[i] >= 0.01 {
			seen = append(seen, fmt.Sprintf("%s %.0f %%", l, 100*an.weights[i]))
		}
	}
	text := "Friction is " + res.Law
	if !res.Decided {
		text = "The friction law is not decided; " + res.Law + " fits best"
	}
	if laws[b] != laws[an.best()] {
		text += fmt.Sprintf("; what the fit of %s friction adds takes less than 1 %% of the loss", laws[an.best()])
	}
	text += "; weights: " + strings.Join(seen, ", ") + "."
	if res.Decided {
		for i, l := range frictions {
			if top.m.law&l == 0 && an.limits[i].share > 0.05 {
				text += fmt.Sprintf(" Besides it, %s friction of up to %.2g %% of the loss at the first swing cannot be excluded.", l, 100*an.limits[i].share)
			}
		}
		for k, l := range laws {
			// 3.84: the 95 % point of χ² with one degree of freedom.
			if top.m.law&^l != 0 && l.count() > top.m.law.count() && an.fits[k].chi2 < top.chi2+3.84 {
				text += fmt.Sprintf(" A mixture of %s friction would fit as well, and is set aside only because it is less simple.", l)
			}
		}
	}
	if b != 0 {
		text += fmt.Sprintf(" Viscous friction alone is worse by %.4g in BIC.", an.bics[0]-an.bics[b])
	}
	method := fmt.Sprintf("Bayesian information criterion over seven laws, %.0f independent samples", an.noise.effective)
	stmt := finding.Finding{Key: "decay.law", Subject: subject, Name: "Friction law", Kind: finding.Statement, Unit: "1", Text: text, Method: method}
	if !res.Decided {
		stmt.Kind = finding.Undecided
		stmt.Text += " A longer clip, a larger release, or less noise would decide."
	}
	if an.misfit() {
		stmt.Cautions = append(stmt.Cautions, "None of the seven laws follows the motion to within its noise; this one comes nearest. Friction may change with amplitude or time in another way.")
	}
	out := []finding.Finding{stmt}
	keys := []string{"decay.viscous", "decay.drag", "decay.dry"}
	names := []string{"Viscous friction over inertia", "Drag over inertia", "Dry friction over inertia"}
	units := []string{"s⁻¹", "rad⁻¹", "rad s⁻²"}
	clock := []float64{1, 0, 2} // powers of time in the unit
	for i, l := range frictions {
		has := func(x law) bool { return x&l != 0 }
		inclusion := 0.0
		for k, x := range laws {
			if has(x) {
				inclusion += an.weights[k]
			}
		}
		if has(top.m.law) && (res.Decided || inclusion > 0.95) {
			x := an.averageOver(frictionOf(l), has, an.variance)
			x = x.with("the camera's clock", clock[i]*an.angle.UClock*x.value)
			f := x.finding(keys[i], subject, names[i], units[i], "fit; mean over the laws that have it, by their weight")
			if o, err := top.m.orbitAt(top.p, an.ampStart); err == nil {
				f.Method += fmt.Sprintf("; %.0f %% of the loss at the first swing", 100*top.m.share(top.p, o, l))
			}
			out = append(out, f)
			continue
		}
		lim := an.limits[i]
		if !res.Decided {
			lim = an.limitIn(top, viscous|drag|dry, i)
		}
		out = append(out, finding.Finding{
			Key: keys[i], Subject: subject, Name: names[i], Unit: units[i], Kind: finding.UpperLimit, Value: lim.value, U: lim.u, Hi: lim.hi,
			Method: fmt.Sprintf("95 %% upper limit from the fit of %s friction; at most %.2g %% of the loss at the first swing", lim.from, 100*lim.share),
		})
	}
	return out
}

// limit is how much of a friction the data allow, with 95 % confidence.
type limit struct {
	value, u, hi float64
	share        float64 // of the loss at the first swing
	from         law     // the fit that it comes from
}

// limitIn finds the upper limit of friction i from the fit of law l. The limit
// stays below what that friction would be if it took all the loss, since none of
// the others can be negative.
func (an *analysis) limitIn(top *fitted, l law, i int) limit {
	which := frictions[i]
	lim := limit{from: l, hi: math.Inf(1)}
	for k, f := range an.fits {
		if f.m.law != l && f.m.law != which {
			continue
		}
		j := f.m.frictionAt(which)
		v, u := f.p[j], an.uncertainty(k, j)
		hi := upper95(v, u)
		lim.hi = math.Min(lim.hi, hi)
		if f.m.law == l {
			lim.value, lim.u = v, u
		}
	}
	if o, err := top.m.orbitAt(top.p, an.ampStart); err == nil {
		if lost := 2 * math.Pi * o.amplitude * o.slope * top.m.zeta(top.p, o); lost > 0 {
			lim.share = math.Min(1, lim.hi*o.loss[i]/lost)
		}
	}
	return lim
}

// negligible is the share of the loss at the first swing below which a friction
// is not worth a law of its own.
const negligible = 0.01

// simplify takes out of law b the frictions that are surely negligible, and
// returns the simpler law.
func (an *analysis) simplify(b int) int {
	f := an.fits[b]
	o, err := f.m.orbitAt(f.p, an.ampStart)
	if err != nil {
		return b
	}
	lost := 2 * math.Pi * o.amplitude * o.slope * f.m.zeta(f.p, o)
	left := f.m.law
	for i, l := range frictions {
		if f.m.law&l == 0 {
			continue
		}
		j := f.m.frictionAt(l)
		if left != l && upper95(f.p[j], an.uncertainty(b, j))*o.loss[i] < negligible*lost {
			left &^= l
		}
	}
	for k, l := range laws {
		if l == left {
			return k
		}
	}
	return b
}

// weightOf is the weight of law b together with those that only add frictions
// that are surely negligible in them.
func (an *analysis) weightOf(b int) float64 {
	w := an.weights[b]
	for k, l := range laws {
		if k != b && l&laws[b] == laws[b] && an.weights[k] > 1e-3 && an.simplify(k) == b {
			w += an.weights[k]
		}
	}
	return w
}

// decide finds the limits of the frictions that law b lacks, and tells whether
// it may be called the law.
func (an *analysis) decide(b int) bool {
	top := an.fits[b]
	decided := an.weightOf(b) >= decidedAt
	for i, l := range frictions {
		if top.m.law&l != 0 {
			continue
		}
		an.limits[i] = an.limitIn(top, top.m.law|l, i)
		if an.limits[i].share > hides[top.m.law.count()] {
			decided = false
		}
	}
	return decided
}

// fitSummary tells of the fit of one law.
func (an *analysis) fitSummary(b int) finding.Fit {
	f := an.fits[b]
	n := f.m.size()
	s := finding.Fit{
		Key: "decay.fit", Subject: an.angle.Part, ChiSquare: f.chi2, DegreesOf: len(f.resid) - n,
		Converged: f.sum.Converged, Why: f.sum.Reason,
	}
	names, units := f.m.names(), f.m.units()
	s.Correlation = make([][]float64, n)
	for i := range n {
		s.Free = append(s.Free, finding.Parameter{Name: names[i], Value: f.p[i], U: an.uncertainty(b, i), Unit: units[i]})
		s.Correlation[i] = make([]float64, n)
		for j := range n {
			s.Correlation[i][j] = an.cov[b][i*n+j] / math.Sqrt(an.cov[b][i*n+i]*an.cov[b][j*n+j])
		}
	}
	for _, c := range f.sum.Inseparable {
		s.NotSeparable = append(s.NotSeparable, c.Text)
	}
	for k, l := range laws {
		s.Candidates = append(s.Candidates, finding.Candidate{Name: l.String(), BIC: an.bics[k], Weight: an.weights[k]})
	}
	return s
}

// sentence starts with a capital and ends with a full stop.
func sentence(s string) string {
	r, size := utf8.DecodeRuneInString(s)
	s = string(unicode.ToUpper(r)) + s[size:]
	if !strings.HasSuffix(s, ".") {
		s += "."
	}
	return s
}
