package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

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

// nominalMoment is a magnet's moment by the rig; 0 where it gives none.
func nominalMoment(g *rig.Magnet) float64 {
	switch {
	case g.Cylinder == nil:
		return g.Moment.Or(0)
	case g.Cylinder.RemanenceT.Set:
		return cylinderOf(g).Moment()
	}
	return 0
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
			if hard := r.whyHard(ga); ga == gb && hard != "" {
				r.undecided("match.product", subject, "Pair product m₁m₂", hard)
				continue
			}
			if u, _, _ := r.j.of(r.fitter, grad); !(u < undeterminedAt*math.Abs(ma*mb)) {
				if !r.wrong && r.absent(a, b, ma, mb, da, db) {
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
			u := f.U
			if na, nb := nominalMoment(a), nominalMoment(b); ga != gb && na*nb != 0 {
				r.deviation(f, ma*mb/(na*nb))
			}
			r.forceCurve(a, b, ma*mb, u)
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
			if hard := r.whyHard(i); hard != "" && !trapped {
				why = hard
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
	na, nb := nominalMoment(a), nominalMoment(b)
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

// nominal tells how far a number is from what the rig says it should be, in per cent.
func (r *reporter) nominal(f *finding.Finding, q *param) {
	v, err := r.rig.Number(q.address)
	if err != nil || !v.Set || v.V == 0 {
		return
	}
	r.deviation(f, q.value/v.V)
}

// deviation adds by how much a finding is off its nominal number, given their ratio.
func (r *reporter) deviation(f *finding.Finding, ratio float64) {
	d := finding.Normal(f.Key+"_deviation", f.Subject, f.Name+": deviation from the rig's number", 100*(ratio-1), 100*math.Abs(ratio)*f.U/math.Abs(f.Value), "%", f.Method)
	d.Lo, d.Hi = 100*(ratio*f.Lo/f.Value-1), 100*(ratio*f.Hi/f.Value-1)
	if d.Lo > d.Hi {
		d.Lo, d.Hi = d.Hi, d.Lo
	}
	r.add(d)
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
	h.Cautions = []string{fmt.Sprintf("A screening figure, never a certificate: the limit for a magnet that can be swallowed is 50 kG²mm² (0.5 T²mm²), this is about %.0f kG²mm². Conformity is for an accredited laboratory under local law.", x*1e8)}
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
