package kick

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

// Balance is what a unit's ledger says at one amplitude, in joules, whether or
// not its clip separates kick from loss: where it does not, both variances are
// large and their covariance with them. What turns angles into energies (mass,
// centre of mass, inertia) is not in them.
type Balance struct {
	Kick, Loss, VarKick, VarLoss, Cov float64
}

// At gives the balance at an amplitude in rad.
func (r *Result) At(amplitude float64) Balance {
	l := r.ledger
	work := l.workAt(amplitude)
	var b Balance
	mean := func(x, y func(s *solution) []float64) (vx, vy, cov float64) {
		for i, s := range l.laws {
			a, _ := s.of(x(s), x(s))
			c, _ := s.of(y(s), y(s))
			vx, vy = vx+l.weighs[i]*a, vy+l.weighs[i]*c
		}
		for i, s := range l.laws {
			a, cv := s.of(x(s), y(s))
			c, _ := s.of(y(s), y(s))
			cov += l.weighs[i] * (cv*s.widen() + (a-vx)*(c-vy))
		}
		return vx, vy, cov
	}
	kick := (*solution).kickVector
	loss := func(s *solution) []float64 { return s.lossVector(work) }
	b.Kick, b.Loss, b.Cov = mean(kick, loss)
	_, _, b.VarKick = mean(kick, kick)
	_, _, b.VarLoss = mean(loss, loss)
	return b
}

// with adds a relative uncertainty that kick and loss have in common.
func (b Balance) with(u float64) Balance {
	b.VarKick += sq(u * b.Kick)
	b.VarLoss += sq(u * b.Loss)
	b.Cov += sq(u) * b.Kick * b.Loss
	return b
}

// Quantity is a reference value: U is its own relative standard uncertainty,
// Scatter the relative standard deviation of good units about it.
type Quantity struct{ Value, U, Scatter float64 }

// Reference is what good units do.
type Reference struct {
	Amplitude float64  // rad, at which Loss is stated
	Kick      Quantity // J
	Loss      Quantity // J per pass at Amplitude
	LossHalf  Quantity // J per pass at half of it; 0: unknown
	Omega     Quantity // rad/s of small swings; 0: unknown
	// SameRig: these are ledgers by the same rig, so that an error of its weight moment
	// or inertia is the unit's as well and cancels.
	SameRig bool
	From    string // plain words
}

// Usual scatter of good units where nothing else is known (design section 6: 2 %
// from seat to seat; of a rate of swinging, common practice, no source).
const (
	UsualScatter      = 0.02
	UsualOmegaScatter = 0.002
)

// ReferenceOf takes the rig's own numbers as what a good unit does; ok is false
// where it leaves kick or friction to be fitted.
func ReferenceOf(r *rig.Rig, part string, res *Result) (ref Reference, ok bool) {
	var p *rig.Part
	for i := range r.Parts {
		if r.Parts[i].Name == part {
			p = &r.Parts[i]
		}
	}
	var c *rig.Coil
	for i := range r.Coils {
		if r.Coils[i].Part == part || r.Coils[i].Part == "" {
			c = &r.Coils[i]
		}
	}
	if p == nil || c == nil || !c.KickJ.Known() || !(c.KickJ.V > 0) || res.Unit != "J" {
		return ref, false
	}
	f := [3]rig.Value{p.Friction.Viscous, p.Friction.Drag, p.Friction.Dry}
	l := res.ledger
	total := func(amplitude float64) Quantity {
		q, v := Quantity{Scatter: UsualScatter}, 0.0
		for j, w := range l.workAt(amplitude) {
			q.Value += f[j].V * w
			v += sq(f[j].U * w)
		}
		if q.Value > 0 {
			q.U = math.Sqrt(v) / q.Value
		}
		return q
	}
	for _, x := range f {
		if x.Fit {
			return ref, false
		}
	}
	if l.free != nil {
		ref = Reference{
			Amplitude: res.Amplitude, From: "the rig's own numbers",
			Kick: Quantity{c.KickJ.V, c.KickJ.U / c.KickJ.V, UsualScatter}, Loss: total(0),
		}
		return ref, ref.Loss.Value > 0
	}
	// The reference amplitude is where a good unit is steady.
	lo, hi := 1e-3, 2.5
	for range 60 {
		if mid := (lo + hi) / 2; total(mid).Value < c.KickJ.V {
			lo = mid
		} else {
			hi = mid
		}
	}
	ref = Reference{
		Amplitude: lo, From: "the rig's own numbers",
		Kick: Quantity{c.KickJ.V, c.KickJ.U / c.KickJ.V, UsualScatter},
		Loss: total(lo), LossHalf: total(lo / 2),
	}
	if o := l.opt; l.pendulum && o.Weight > 0 && o.Inertia > 0 {
		ref.Omega = Quantity{math.Sqrt(o.Weight / o.Inertia), math.Hypot(rss(o.WeightShares), o.UInertia) / 2, UsualOmegaScatter}
	}
	return ref, ref.Loss.Value > 0
}

// ReferenceFrom makes a reference of the ledgers of units known to be good, whose
// clips separate kick and loss, two at least.
func ReferenceFrom(good []*Result) (Reference, error) {
	var amp []float64
	var use []*Result
	for _, r := range good {
		if r.Separated && !r.Idle {
			use, amp = append(use, r), append(amp, r.Amplitude)
		}
	}
	if len(use) < 2 {
		return Reference{}, fmt.Errorf("kick: a reference needs at least two good units whose clips separate kick and loss; %d of %d do", len(use), len(good))
	}
	slices.Sort(amp)
	ref := Reference{Amplitude: amp[len(amp)/2], SameRig: true, From: fmt.Sprintf("%d reference units", len(use))}
	of := func(usual float64, x func(r *Result) float64) Quantity {
		n, sum, sum2 := float64(len(use)), 0.0, 0.0
		for _, r := range use {
			v := x(r)
			sum, sum2 = sum+v, sum2+v*v
		}
		m := sum / n
		s := math.Sqrt(math.Max(0, sum2/n-m*m)*n/(n-1)) / math.Abs(m)
		// Few units tell their scatter badly: the usual one counts as ten more.
		s = math.Sqrt((10*usual*usual + (n-1)*s*s) / (10 + n - 1))
		return Quantity{m, s / math.Sqrt(n), s}
	}
	ref.Kick = of(UsualScatter, func(r *Result) float64 { return r.At(ref.Amplitude).Kick })
	ref.Loss = of(UsualScatter, func(r *Result) float64 { return r.At(ref.Amplitude).Loss })
	ref.LossHalf = of(UsualScatter, func(r *Result) float64 { return r.At(ref.Amplitude / 2).Loss })
	if use[0].Omega > 0 {
		ref.Omega = of(UsualOmegaScatter, func(r *Result) float64 { return r.Omega })
	}
	return ref, nil
}

// Cause is what may be the matter with a unit.
type Cause struct {
	Name        string // plain words
	Fault       bool   // a reason to reject
	Filming     bool   // no fault of the unit's, but a reason to film again
	Probability float64
	Evidence    string // the numbers behind it
	Next        string // what to do; names the swap that splits a group
}

// Diagnosis is what a ledger says about a unit set against a reference.
type Diagnosis struct {
	Causes  []Cause // the likeliest first
	Verdict string  // plain words: good, the fault, or that the clip cannot tell
	Told    bool    // false: cannot tell from this clip
	Good    bool    // told, and nothing is wrong
	// Probabilities that drive and loss are as they should be.
	DriveGood, LossGood float64

	separated bool
	judged    []string
}

// Finding puts a diagnosis in a record: the verdict, and each cause with its
// probability and evidence.
func (d *Diagnosis) Finding(key, part, method string) finding.Finding {
	f := finding.Finding{Key: key, Subject: part, Name: "Diagnosis", Kind: finding.Statement, Unit: "1", Text: d.Verdict, Method: method}
	for _, c := range d.Causes {
		if c.Probability >= 0.01 && c.Probability < certain { // the others are in the verdict
			f.Text += fmt.Sprintf(" [%s: %s]", c.Name, chance(c.Probability))
		}
	}
	return f
}

const (
	// tolerated is the relative change of kick or loss from which it is a fault:
	// half of the 15 % of design section 6, since a verdict is wanted for those.
	tolerated = 0.07
	// wide is the mean by which a fault exceeds it, relative, and rare the share of
	// units with a given fault before anything is measured (common practice, no source).
	wide, rare = 0.2, 0.15
	// certain is the probability from which a cause is called the cause.
	certain = 0.8
	// rateTolerated is the relative change of the rate of swinging that mass or length
	// must have changed for.
	rateTolerated = 0.01
)

// Diagnose sets a unit's ledger against a reference.
func Diagnose(r *Result, ref Reference) Diagnosis {
	var d Diagnosis
	b := r.At(ref.Amplitude)
	if !ref.SameRig {
		b = b.with(rss(r.ledger.shares))
	}
	joint := posterior(b, ref)
	d.DriveGood, d.LossGood = joint[1][0]+joint[1][1]+joint[1][2], joint[0][1]+joint[1][1]+joint[2][1]
	weak, strong := joint[0][0]+joint[0][1]+joint[0][2], joint[2][0]+joint[2][1]+joint[2][2]
	more, less := joint[0][2]+joint[1][2]+joint[2][2], joint[0][0]+joint[1][0]+joint[2][0]
	kick := "the clip alone does not separate the kick from the loss"
	loss := kick
	if r.Separated {
		kick = fmt.Sprintf("its kick is %s of the reference", percent(b.Kick/ref.Kick.Value, math.Hypot(math.Sqrt(b.VarKick)/ref.Kick.Value, ref.Kick.U)))
		at := fmt.Sprintf(" at %.3g°", ref.Amplitude/degree)
		if r.ledger.free != nil {
			at = "" // the mean of the passes that were filmed
		}
		loss = fmt.Sprintf("its loss per pass%s is %s of the reference", at, percent(b.Loss/ref.Loss.Value, math.Hypot(math.Sqrt(b.VarLoss)/ref.Loss.Value, ref.Loss.U)))
	}
	drive := Cause{
		Name: "drive weak: coil, cell or the magnet at the foot", Fault: true, Probability: weak, Evidence: kick,
		Next: "The three act jointly. Put in a reference cell and film again; if the kick stays weak, a reference magnet; if it still does, it is the coil.",
	}
	if r.Idle {
		drive.Name = "drive dead: coil, cell, or the magnet at the foot reversed or missing"
	}
	d.Causes = append(d.Causes,
		drive,
		Cause{Name: "drive strong", Probability: strong, Evidence: kick},
		Cause{Name: r.friction(ref, b), Fault: true, Probability: more, Evidence: loss, Next: "Clean and re-seat the bearing, look for what rubs, and film again."},
		Cause{Name: "bearing unusually free", Probability: less, Evidence: loss},
	)
	missed, kicked := 0, 0
	for _, p := range r.Passes {
		if p.Clip == 0 && p.State == Missed {
			missed++
		} else if p.Clip == 0 && (p.State == Kicked || p.State == Double) {
			kicked++
		}
	}
	if missed > 0 && r.Separated {
		// One may be a draught or a touch; three are the drive.
		p := 1 - math.Pow(0.3, float64(missed))
		d.Causes = append(d.Causes, Cause{
			Name: "drive intermittent", Fault: true, Probability: p, Evidence: fmt.Sprintf("%d of %d kicks were missing", missed, missed+kicked),
			Next: "Look at the cell's contacts and the coil's leads, and film again.",
		})
	}
	if ref.Omega.Value > 0 && r.Omega > 0 {
		d.Causes = append(d.Causes, r.rate(ref)...)
	}
	d.separated = r.Separated
	d.decide()
	return d
}

func percent(ratio, u float64) string {
	s := finding.DisplayValue(100*ratio, 100*u, "1")
	return fmt.Sprintf("%s %% (± %s %%)", s.Value, s.U)
}

// decide puts the verdict in words.
func (d *Diagnosis) decide() {
	slices.SortStableFunc(d.Causes, func(a, b Cause) int { return cmp.Compare(b.Probability, a.Probability) })
	d.Told, d.Good = false, false
	fine := 1.0 // probability that none of the faults is there
	var faults []string
	var most *Cause
	for i := range d.Causes {
		c := &d.Causes[i]
		if c.Filming && c.Probability >= certain {
			d.Verdict = fmt.Sprintf("Film again: %s (%s; probability %s). %s", c.Name, c.Evidence, chance(c.Probability), c.Next)
			return
		}
		if !c.Fault {
			continue
		}
		if most == nil {
			most = c
		}
		fine *= 1 - c.Probability
		if c.Probability >= certain {
			faults = append(faults, fmt.Sprintf("%s (%s; probability %s). %s", c.Name, c.Evidence, chance(c.Probability), c.Next))
		}
	}
	switch {
	case len(faults) > 0:
		d.Told, d.Verdict = true, "Reject: "+strings.Join(faults, " And: ")
	case fine >= certain && d.separated:
		d.Told, d.Good, d.Verdict = true, true, fmt.Sprintf("Nothing is wrong that this clip can show (probability %s).", chance(fine))
		if len(d.judged) > 0 {
			d.Verdict += " Judged beside the drive: " + strings.Join(d.judged, ", ") + "."
			if d.plain() {
				d.Verdict = strings.Replace(d.Verdict, "Judged beside the drive", "Judged", 1)
			}
		}
		for _, c := range d.Causes {
			if !c.Fault && c.Probability >= certain {
				d.Verdict += fmt.Sprintf(" But: %s (%s).", c.Name, c.Evidence)
			}
		}
	case most == nil:
		d.Verdict = "Nothing in this clip can be judged against the rig."
	case !d.separated:
		d.Verdict = "This clip cannot tell a weak drive from friction: it shows only their balance. " + toFilm + "."
	default:
		d.Verdict = fmt.Sprintf("This clip cannot tell: the likeliest fault is %s (%s), with a probability of %s. Measure again, longer or from nearer.", most.Name, most.Evidence, chance(most.Probability))
	}
}

// plain tells whether there is no ledger behind a diagnosis.
func (d *Diagnosis) plain() bool {
	return !slices.ContainsFunc(d.Causes, func(c Cause) bool { return strings.HasPrefix(c.Name, "drive ") })
}

func chance(p float64) string {
	switch {
	case p > 0.999:
		return "above 99.9 %"
	case p > 0.99:
		return fmt.Sprintf("%.1f %%", 100*p)
	}
	return fmt.Sprintf("%.0f %%", 100*p)
}

// posterior is the probability of (drive weak, good, strong) × (loss less, good,
// more). A good unit's true value scatters about the reference as good units do;
// a bad one's lies beyond what is tolerated by an exponentially distributed excess.
func posterior(b Balance, ref Reference) (p [3][3]float64) {
	const step = 0.005
	det := b.VarKick*b.VarLoss - b.Cov*b.Cov
	if !(det > 0) {
		b.Cov = 0
		b.VarKick, b.VarLoss = math.Max(b.VarKick, 1e-30), math.Max(b.VarLoss, 1e-30)
		det = b.VarKick * b.VarLoss
	}
	axis := func(q Quantity) (values []float64, prior [][3]float64) {
		s := math.Max(math.Hypot(q.Scatter, q.U), step)
		for x := -3.0; x <= 1.2; x += step {
			var w [3]float64
			w[1] = (1 - 2*rare) * math.Exp(-x*x/2/s/s) / s / math.Sqrt(2*math.Pi)
			// An exponential from the edge on, blurred by the scatter about it.
			w[0], w[2] = rare*tail(-x-tolerated, s, wide), rare*tail(x-tolerated, s, wide)
			values, prior = append(values, q.Value*math.Exp(x)), append(prior, w)
		}
		return values, prior
	}
	ks, kw := axis(ref.Kick)
	ls, lw := axis(ref.Loss)
	sum, most := 0.0, math.Inf(-1)
	quad := func(k, l float64) float64 {
		x, y := b.Kick-k, b.Loss-l
		return -(x*x*b.VarLoss - 2*x*y*b.Cov + y*y*b.VarKick) / det / 2
	}
	// The grid's step may be coarser than the measurement: blur by it.
	b.VarKick += sq(step * ref.Kick.Value / 2)
	b.VarLoss += sq(step * ref.Loss.Value / 2)
	det = b.VarKick*b.VarLoss - b.Cov*b.Cov
	for _, k := range ks {
		for _, l := range ls {
			most = math.Max(most, quad(k, l))
		}
	}
	for i, k := range ks {
		if sq(k-b.Kick) > 80*b.VarKick && b.Kick > ks[0] && b.Kick < ks[len(ks)-1] {
			continue
		}
		for j, l := range ls {
			e := quad(k, l) - most
			if e < -40 {
				continue
			}
			e = math.Exp(e)
			for a := range 3 {
				for c := range 3 {
					w := e * kw[i][a] * lw[j][c]
					p[a][c] += w
					sum += w
				}
			}
		}
	}
	for a := range 3 {
		for c := range 3 {
			p[a][c] /= sum
		}
	}
	return p
}

// tail is the density of an exponential of the given mean plus a normal of
// deviation s.
func tail(x, s, mean float64) float64 {
	r := 1 / mean
	return r / 2 * math.Exp(r/2*(r*s*s-2*x)) * math.Erfc((r*s*s-x)/(math.Sqrt2*s))
}

// friction names the friction by which a unit's loss exceeds the reference: the
// excess at half the amplitude is a half by dry friction, a quarter by viscous, an
// eighth by air drag.
func (r *Result) friction(ref Reference, b Balance) string {
	const plain = "more loss: bearing drag or air drag"
	if ref.LossHalf.Value == 0 || !r.Separated {
		return plain
	}
	h := r.At(ref.Amplitude / 2)
	excess := b.Loss - ref.Loss.Value
	half := h.Loss - ref.LossHalf.Value
	u := math.Sqrt(h.VarLoss + sq(ref.LossHalf.Value*math.Hypot(ref.LossHalf.U, ref.LossHalf.Scatter)) + b.VarLoss/9 + sq(ref.Loss.Value*math.Hypot(ref.Loss.U, ref.Loss.Scatter))/9)
	if excess <= 0 {
		return plain
	}
	p, sum := [3]float64{}, 0.0
	for i, share := range [3]float64{0.5, 0.25, 0.125} {
		p[i] = math.Exp(-sq((half-share*excess)/u) / 2)
		sum += p[i]
	}
	switch {
	case p[0] > certain*sum:
		return "more loss: bearing drag (dry)"
	case p[0] < (1-certain)*sum:
		return "more loss: air drag or viscous drag"
	}
	return plain
}

// rate judges the rate of swinging: slow motion left in, or mass or length wrong.
func (r *Result) rate(ref Reference) []Cause {
	ratio := r.Omega / ref.Omega.Value
	u := math.Sqrt(sq(r.UOmega/r.Omega) + sq(ref.Omega.U) + sq(ref.Omega.Scatter))
	said := "it swings at " + percent(ratio, u) + " of the reference's rate"
	for _, f := range []float64{1.0 / 8, 1.0 / 4, 1.0 / 2, 2, 4, 8} {
		if math.Abs(ratio/f-1) < 3*u+0.01 {
			return []Cause{{
				Name: "filming fault: slow motion", Filming: true, Probability: 0.99, Evidence: said,
				Next: fmt.Sprintf("Set camera.rate_factor in the rig; the ratio suggests a factor of %.3g from what it is now.", 1/f),
			}}
		}
	}
	x := math.Abs(math.Log(ratio))
	good := (1 - rare) * math.Exp(-x*x/2/u/u) / u / math.Sqrt(2*math.Pi)
	bad := rare * tail(x-rateTolerated, u, 0.03)
	return []Cause{{
		Name: "wrong mass or length", Fault: true, Probability: bad / (bad + good), Evidence: said,
		Next: "Weigh the part, and measure the distance of its magnet and its weight from the pivot.",
	}}
}
