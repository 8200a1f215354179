package match

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

const byMatching = "model matched to the track by multiple shooting"

// reporter turns the optimum into what people read.
type reporter struct {
	*fitter
	j   *judgement
	res *Result
	p   []float64
	say string // method
	// poor holds the parameters that the clips do not determine.
	poor map[int]bool
}

// undeterminedAt is the relative standard uncertainty from which a number is not
// told: its 95 % interval then reaches over more than ±60 % of it.
const undeterminedAt = 0.3

func (f *fitter) report(ctx context.Context) (*Result, error) {
	j, err := f.judge()
	if err != nil {
		return nil, err
	}
	r := &reporter{fitter: f, j: j, p: f.values(), res: &Result{Scatter: f.widened * math.Sqrt(j.chi2/float64(j.dof)), Converged: f.converged}, poor: map[int]bool{}}
	r.say = byMatching
	if n := len(f.clips); n > 1 {
		r.say += fmt.Sprintf(", %d clips together", n)
	}
	for i := range f.params {
		q := &f.params[i]
		u, pictures, _ := j.of(f, j.unit(i))
		r.res.Estimates = append(r.res.Estimates, Estimate{
			Address: q.address, Unit: q.unit, Value: q.value, U: u, UPicture: pictures, Asked: q.asked, Prior: q.prior && !q.gauge,
		})
	}
	misfit := r.misfit(ctx)
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	for c := range f.clips {
		f.apply(c, f.clips[c].model, r.p)
	}
	r.separability()
	r.magnets()
	r.rest()
	r.loss()
	r.fitSummary()
	r.curves()
	r.fittedRig()
	if !r.converged && misfit == "" {
		misfit = "The matching did not settle: " + r.why + "."
	}
	if misfit != "" { // numbers of a wrong model are not told as if they were the toy's
		for i := range r.res.Findings {
			if x := &r.res.Findings[i]; x.Kind == finding.Measured || x.Kind == finding.UpperLimit {
				*x = finding.Finding{
					Key: x.Key, Subject: x.Subject, Name: x.Name, Kind: finding.Undecided, Unit: "1", Method: x.Method,
					Text: misfit + " No number is given.",
				}
			}
		}
		r.res.Findings = slices.DeleteFunc(r.res.Findings, func(x finding.Finding) bool { return strings.HasSuffix(x.Key, "_deviation") || x.Key == "match.grade" })
		r.res.Fitted = nil
	}
	return r.res, nil
}

func (r *reporter) add(f finding.Finding) { r.res.Findings = append(r.res.Findings, f) }

// number tells a function of the parameters with its gradient.
func (r *reporter) number(key, subject, name string, value float64, grad []float64, unit string) *finding.Finding {
	u, _, budget := r.j.of(r.fitter, grad)
	f := finding.Normal(key, subject, name, value, u, unit, r.say)
	f.Budget = budget
	r.add(f)
	return &r.res.Findings[len(r.res.Findings)-1]
}

func (r *reporter) undecided(key, subject, name, text string) {
	r.add(finding.Finding{Key: key, Subject: subject, Name: name, Kind: finding.Undecided, Unit: "1", Text: text, Method: r.say})
}

// separability finds which of the numbers asked for the clips do not determine.
func (r *reporter) separability() {
	for i := range r.params {
		q := &r.params[i]
		if !q.asked || q.role != byModel {
			continue
		}
		u := r.res.Estimates[i].U
		size := math.Abs(q.value)
		if strings.HasSuffix(q.address, ".rest") {
			size = 1 // an angle about zero
		}
		if !(u < undeterminedAt*size) || math.IsNaN(u) {
			r.poor[i] = true
		}
	}
	if r.trapped() {
		for i := range r.params {
			if r.params[i].asked && r.params[i].moment() {
				r.poor[i] = true
			}
		}
	}
}

// trapped tells whether the only part, a hinge over magnets of the base, stayed
// beside them all the time: such a clip determines no moment.
func (f *fitter) trapped() bool {
	if len(f.rig.Parts) != 1 || f.nv != 1 {
		return false
	}
	base := 0
	var at [3]float64
	for i := range f.rig.Magnets {
		if g := &f.rig.Magnets[i]; g.Part == "" || g.Part == rig.Base {
			base++
			at = rig.XYZ(g.AtM)
		}
	}
	if base != 1 {
		return false
	}
	pivot := rig.XYZ(f.rig.Parts[0].PivotM)
	over := math.Atan2(at[0]-pivot[0], -(at[2] - pivot[2]))
	for c := range f.clips {
		k := &f.clips[c]
		left, right := false, false
		for s := range k.segments {
			g := &k.segments[s]
			for i := range g.pose {
				w := &k.watched[k.obs[g.from+i].who]
				a := g.pose[i].at[0]
				if w.bob >= 0 {
					p := g.pose[i].turn
					a = math.Atan2(-p[0][2], p[2][2]) // of its own hanging direction
				}
				left, right = left || a < over, right || a > over
			}
		}
		if left && right {
			return false
		}
	}
	return true
}

const whyTrapped = "The part stayed on one side of the magnet all through the clip: such a motion determines no magnet. Let it go from farther out, so that it passes over the magnet."

// magnetTerm is a magnet's moment and its gradient by the parameters.
func (r *reporter) magnetTerm(name string) (moment float64, grad []float64, asked, poor bool) {
	grad = make([]float64, r.j.np)
	g := r.rig.FindMagnet(name)
	var cyl *magnet.Cylinder
	if g.Cylinder != nil {
		c := cylinderOf(g)
		cyl = &c
		moment = c.Moment()
	} else {
		moment = g.Moment.Or(1)
	}
	for i := range r.params {
		q := &r.params[i]
		if !q.moment() {
			continue
		}
		for _, a := range q.tied {
			if owner, _ := split(a); owner != name {
				continue
			}
			asked, poor = q.asked, r.poor[i]
			if cyl != nil {
				per := cyl.Moment() / cyl.Remanence
				moment, grad[i] = per*q.value, per
			} else {
				moment, grad[i] = q.value, 1
			}
		}
	}
	return moment, grad, asked, poor
}

func cylinderOf(g *rig.Magnet) magnet.Cylinder {
	c := g.Cylinder
	return magnet.Cylinder{Radius: c.DiameterM.V / 2, Height: c.HeightM.V, Remanence: c.RemanenceT.Or(1.2), Recoil: c.Recoil.Or(magnet.DefaultRecoil)}
}

// group is the parameter that holds a magnet's strength, −1 for none.
func (r *reporter) group(name string) int {
	for i := range r.params {
		if r.params[i].moment() {
			for _, a := range r.params[i].tied {
				if owner, _ := split(a); owner == name {
					return i
				}
			}
		}
	}
	return -1
}

// magnets tells pair products, single moments, remanence and grade.
func (r *reporter) magnets() {
	trapped := r.trapped()
	seen := map[[2]int]bool{}
	for i := range r.rig.Magnets {
		for k := range r.rig.Magnets[:i] {
			a, b := &r.rig.Magnets[k], &r.rig.Magnets[i]
			if a.Part == b.Part {
				continue
			}
			ga, gb := r.group(a.Name), r.group(b.Name)
			pair := [2]int{min(ga, gb), max(ga, gb)}
			ma, da, askedA, _ := r.magnetTerm(a.Name)
			mb, db, askedB, _ := r.magnetTerm(b.Name)
			if seen[pair] || !askedA && !askedB {
				continue
			}
			seen[pair] = true
			grad := make([]float64, r.j.np)
			for q := range grad {
				grad[q] = da[q]*mb + db[q]*ma
			}
			subject := a.Name + " and " + b.Name
			if trapped {
				r.undecided("match.product", subject, "Pair product m₁m₂", whyTrapped)
				continue
			}
			if u, _, _ := r.j.of(r.fitter, grad); !(u < undeterminedAt*math.Abs(ma*mb)) {
				if r.absent(a, b, ma, mb, da, db) {
					continue
				}
				r.undecided("match.product", subject, "Pair product m₁m₂", "The clip does not determine how strongly these two act on each other: they came too little near each other. Film a larger release, or set them nearer.")
				continue
			}
			f := r.number("match.product", subject, "Pair product m₁m₂", ma*mb, grad, "A²·m⁴")
			if ga == gb {
				f.Name = "Pair product m₁m₂ (any two of these tied magnets)"
			}
			r.bias(f, a, b)
			r.forceCurve(a, b, ma*mb, f.U)
		}
	}
	for i := range r.params {
		q := &r.params[i]
		if !q.moment() || !q.asked {
			continue
		}
		owners := make([]string, len(q.tied))
		for k, a := range q.tied {
			owners[k], _ = split(a)
		}
		subject := strings.Join(owners, ", ")
		if len(owners) > 1 {
			subject += " (tied)"
		}
		name := "Dipole moment"
		if r.poor[i] {
			why := whyTrapped
			if !trapped {
				why = "The clip determines this moment only together with others, by their product. Tie the magnets in [fit] equal if they are of one kind, give one moment that is known, or swap one for a reference magnet."
				if len(q.tied) > 1 {
					why = "The clip holds too little of these magnets' action to tell their moment: film a larger release or set them nearer."
				}
			}
			r.undecided("match.moment", subject, name, why)
			continue
		}
		g := r.rig.FindMagnet(owners[0])
		m, grad, _, _ := r.magnetTerm(owners[0])
		f := r.number("match.moment", subject, name, m, grad, "A·m²")
		r.nominal(f, q)
		if g.Cylinder != nil {
			r.cylinder(g, i, subject)
		}
		if t, ut, ok := r.temperature(); ok {
			at := magnet.At20(m, t, "")
			per := at / m
			h := finding.Normal("match.moment_20C", subject, "Dipole moment at 20 °C", at, math.Hypot(f.U*per, m*0.0012*ut), "A·m²", r.say+", −0.12 %/K for sintered NdFeB (common practice)")
			h.Budget = []finding.Share{{Source: "the moment", U: f.U * per}, {Source: "the temperature", U: m * 0.0012 * ut}}
			r.add(h)
		}
	}
}

// absent tells, for a pair whose product is not determined, whether so little of it
// is seen that a magnet must be missing, and says so.
func (r *reporter) absent(a, b *rig.Magnet, ma, mb float64, da, db []float64) bool {
	na, nb := a.Moment.Or(0), b.Moment.Or(0)
	if a.Cylinder != nil {
		na = cylinderOf(a).Moment()
	}
	if b.Cylinder != nil {
		nb = cylinderOf(b).Moment()
	}
	grad := make([]float64, r.j.np)
	for q := range grad {
		grad[q] = da[q]*mb + db[q]*ma
	}
	u, _, _ := r.j.of(r.fitter, grad)
	most := math.Abs(ma*mb) + 1.645*u
	if !(most < 0.1*na*nb) {
		return false
	}
	f := finding.Normal("match.product", a.Name+" and "+b.Name, "Pair product m₁m₂", math.Abs(ma*mb), most/1.645, "A²·m⁴", r.say)
	f.Kind, f.Lo, f.Hi = finding.UpperLimit, 0, most
	r.add(f)
	text := fmt.Sprintf("No action of “%s” and “%s” on each other is seen: their product is at most %.2g %% of the rig's. One of them is missing, or has lost its magnetism; this clip cannot say which.", a.Name, b.Name, 100*most/(na*nb))
	r.add(finding.Finding{Key: "match.cause", Name: "Likely cause", Kind: finding.Statement, Unit: "1", Text: text, Method: r.say})
	r.res.Cautions = append(r.res.Cautions, text)
	return true
}

// nominal tells how far a number is from what the rig says it should be.
func (r *reporter) nominal(f *finding.Finding, q *param) {
	v, err := r.rig.Number(q.address)
	if err != nil || !v.Set || v.V == 0 {
		return
	}
	d := finding.Normal(f.Key+"_deviation", f.Subject, f.Name+": deviation from the rig's number", f.Value/v.V-1, f.U/math.Abs(v.V), "1", r.say)
	r.add(d)
}

func (r *reporter) temperature() (t, u float64, ok bool) {
	n := 0.0
	for c := range r.clips {
		if e := r.clips[c].entry; e != nil && e.TemperatureC.Set {
			t += e.TemperatureC.V
			u = math.Max(u, e.TemperatureC.U)
			n++
		}
	}
	return t / n, u, n > 0
}

// cylinder tells remanence, grade and the flux index of a cylinder.
func (r *reporter) cylinder(g *rig.Magnet, i int, subject string) {
	c := cylinderOf(g)
	q := &r.params[i]
	if strings.HasSuffix(q.address, ".remanence") {
		c.Remanence = q.value
	} else {
		c.Remanence = c.RemanenceOf(q.value)
	}
	per := 1.0
	if !strings.HasSuffix(q.address, ".remanence") {
		per = c.Remanence / q.value
	}
	grad := r.j.unit(i)
	grad[i] = per
	f := r.number("match.remanence", subject, "Remanence", c.Remanence, grad, "T")
	grade, inside := magnet.NearestGrade(c.Remanence, "")
	words := fmt.Sprintf("The nearest usual grade is %s %s (%.2f to %.2f T).", grade.Material, grade.Name, grade.From, grade.To)
	if !inside {
		words = "No usual grade holds this remanence. " + words
	}
	if t, _, ok := r.temperature(); ok {
		words += fmt.Sprintf(" At 20 °C it is %.3g T.", magnet.At20(c.Remanence, t, grade.Material))
	}
	r.add(finding.Finding{Key: "match.grade", Subject: subject, Name: "Magnet grade", Kind: finding.Statement, Unit: "1", Text: words, Method: "remanence from the moment and the cylinder's dimensions, corrected for self-demagnetisation"})
	x := c.FluxIndex()
	h := finding.Normal("match.flux_index", subject, "Flux index (screening)", x, 2*x*f.U/c.Remanence, "T²·m²", "from the fitted remanence and the dimensions, 0.38 mm above a face")
	h.Cautions = []string{fmt.Sprintf("A screening figure, never a certificate: the limit is 50 kG²mm², this is %.3g kG²mm². Conformity is for an accredited laboratory under local law.", x*1e8)}
	r.add(h)
}

// bias warns of dipoles too near each other.
func (r *reporter) bias(f *finding.Finding, a, b *rig.Magnet) {
	for _, x := range r.clips[0].model.DipoleBias() {
		if (x.First == a.Name && x.Second == b.Name || x.First == b.Name && x.Second == a.Name) && x.Caution != "" && !x.Exact {
			f.Cautions = append(f.Cautions, x.Caution+".")
		}
	}
	if a.Cylinder == nil || b.Cylinder == nil {
		if !slices.ContainsFunc(f.Cautions, func(s string) bool { return strings.Contains(s, "dipoles") }) {
			f.Cautions = append(f.Cautions, "The magnets are taken as dipoles: nearer than five diameters the product comes out low (two 12 × 6 mm discs 30 mm apart: by 5 %). Give their dimensions as cylinder = { … } to be rid of that.")
		}
	}
}

// named says what a number is called.
var named = map[string][2]string{ // what -> key, name
	"viscous": {"match.viscous", "Viscous friction"}, "drag": {"match.drag", "Air drag"}, "dry": {"match.dry", "Dry friction"},
	"rate": {"match.spring_rate", "Spring rate"}, "cubic": {"match.spring_cubic", "Cubic spring rate"}, "rest": {"match.spring_rest", "Spring's rest"},
	"kick": {"match.kick", "Kick energy"}, "eddy": {"match.eddy", "Eddy-current drag"}, "inertia": {"match.inertia", "Inertia"},
	"spin_inertia": {"match.spin_inertia", "Inertia about its own axis"}, "gap": {"match.gap", "Gap between the magnets"},
}

// rest tells the other numbers asked for.
func (r *reporter) rest() {
	for i := range r.params {
		q := &r.params[i]
		if !q.asked || q.moment() {
			continue
		}
		owner, what := split(q.address)
		name, ok := named[what]
		if !ok {
			name = [2]string{"match." + what, what}
		}
		owners := []string{owner}
		for _, a := range q.tied {
			if o, _ := split(a); !slices.Contains(owners, o) {
				owners = append(owners, o)
			}
		}
		subject := strings.Join(owners, ", ")
		if len(owners) > 1 {
			subject += " (tied)"
		}
		if !r.poor[i] {
			f := r.number(name[0], subject, name[1], q.value, r.j.unit(i), q.unit)
			if what == "rate" || what == "kick" {
				r.nominal(f, q)
			}
			continue
		}
		u := r.res.Estimates[i].U
		if with := r.twin(i); with != "" {
			r.undecided(name[0], subject, name[1], fmt.Sprintf("The clip does not tell it from %s: only what the two do together is determined (see the loss curve). A second release from a smaller angle, fitted together with this one, separates them.", with))
			continue
		}
		switch what {
		case "viscous", "drag", "dry", "kick", "eddy":
			f := finding.Normal(name[0], subject, name[1], q.value, u, q.unit, r.say)
			f.Kind, f.Lo = finding.UpperLimit, 0
			f.Hi = math.Max(q.value, 0) + 1.645*u
			f.Cautions = []string{"Not seen for certain in this clip: the limit is what it may be at most (95 %)."}
			r.add(f)
		default:
			r.undecided(name[0], subject, name[1], "The clip does not determine it: film longer, or a larger release.")
		}
	}
}

// twin is the friction that number i cannot be told from, in words; empty for none.
func (r *reporter) twin(i int) string {
	owner, what := split(r.params[i].address)
	if what != "viscous" && what != "drag" && what != "dry" {
		return ""
	}
	best, name := 0.95, ""
	for k := range r.params {
		o, w := split(r.params[k].address)
		if k == i || o != owner || w != "viscous" && w != "drag" && w != "dry" {
			continue
		}
		if c := math.Abs(r.j.correlation(i, k)); c > best {
			best, name = c, strings.ToLower(named[w][1])
		}
	}
	return name
}

// loss tells what friction takes altogether, as torque against speed: this holds
// where its parts do not separate.
func (r *reporter) loss() {
	for _, part := range r.rig.Parts {
		grad := make([]float64, r.j.np)
		var index [3]int
		var value [3]float64
		asked := false
		for w, what := range []string{"viscous", "drag", "dry"} {
			index[w] = -1
			if v, err := r.rig.Number(part.Name + ".friction." + what); err == nil {
				value[w] = v.Or(0)
			}
			for i := range r.params {
				if slices.Contains(r.params[i].tied, part.Name+".friction."+what) {
					index[w], value[w] = i, r.params[i].value
					asked = asked || r.params[i].asked
				}
			}
		}
		if !asked {
			continue
		}
		top := r.topRate(part.Name)
		if !(top > 0) {
			continue
		}
		at := func(w float64) (float64, float64) {
			by := [3]float64{w, w * w, 1}
			x := 0.0
			for i := range grad {
				grad[i] = 0
			}
			for k := range by {
				x += by[k] * value[k]
				if index[k] >= 0 {
					grad[index[k]] += by[k]
				}
			}
			u, _, _ := r.j.of(r.fitter, grad)
			return x, u
		}
		l := finding.Line{Name: "friction of " + part.Name, Role: finding.Model}
		for k := range 41 {
			w := top * (0.05 + 0.95*float64(k)/40)
			x, u := at(w)
			l.X, l.Y, l.Lo, l.Hi = append(l.X, w), append(l.Y, x), append(l.Lo, x-1.96*u), append(l.Hi, x+1.96*u)
		}
		r.res.Curves = append(r.res.Curves, finding.Curve{
			Key: "match-loss", Subject: part.Name, Title: "What friction takes: " + part.Name,
			Caption: "The torque of all friction together against the speed, as matched, with its 95 % band. It holds even where the clip cannot tell its parts from each other.",
			X:       finding.Axis{Label: "speed", Unit: "rad/s"}, Y: finding.Axis{Label: "torque", Unit: "N·m"}, Lines: []finding.Line{l},
		})
		x, _ := at(top / 2)
		f := r.number("match.loss", part.Name, fmt.Sprintf("Torque of all friction at %.3g rad/s", top/2), x, slices.Clone(grad), "N·m")
		f.Method += "; at half the greatest speed of the clip"
	}
}

// topRate is the greatest speed of a part in the clips.
func (r *reporter) topRate(name string) float64 {
	top := 0.0
	for c := range r.clips {
		k := &r.clips[c]
		part, err := k.model.Part(name)
		if err != nil {
			continue
		}
		r.apply(c, k.model, r.p)
		_, states := r.fine(c)
		for _, y := range states {
			_, w := k.model.Angle(y, part)
			top = math.Max(top, math.Abs(w))
		}
	}
	return top
}
