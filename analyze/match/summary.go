package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
)

// fitSummary is the fit for the record: what was free, held, and not separable.
func (r *reporter) fitSummary() {
	f := finding.Fit{Key: "match.fit", ChiSquare: r.j.chi2 * r.widened * r.widened, DegreesOf: r.j.dof, Converged: r.converged, Why: r.why}
	var order []int
	for i := range r.params {
		if r.params[i].asked && !r.poor[i] {
			order = append(order, i)
		}
	}
	for i := range r.params {
		if !r.params[i].asked && r.params[i].role == byModel {
			order = append(order, i)
		}
	}
	for i := range r.params {
		if !r.params[i].asked && r.params[i].role != byModel {
			order = append(order, i)
		}
	}
	for _, i := range order {
		q := &r.params[i]
		f.Free = append(f.Free, finding.Parameter{Name: q.address, Value: q.value, U: r.res.Estimates[i].U, Unit: q.unit})
	}
	for _, a := range order {
		row := make([]float64, 0, len(order))
		for _, b := range order {
			row = append(row, r.j.correlation(a, b))
		}
		f.Correlation = append(f.Correlation, row)
	}
	free := map[string]bool{}
	for i := range r.params {
		for _, a := range r.params[i].tied {
			free[a] = true
		}
	}
	for _, n := range r.rig.Numbers() {
		if n.Value.Known() && !free[n.Address] && r.modelIndex(n.Address) >= 0 {
			f.Held = append(f.Held, finding.Parameter{Name: n.Address, Value: n.Value.V, U: n.Value.U, Unit: n.Unit.SI})
		}
	}
	f.NotSeparable = r.notSeparable()
	if r.converged {
		f.Verdicts = r.verdicts()
	}
	r.res.Fits = append(r.res.Fits, f)
	r.res.Cautions = append(r.res.Cautions, r.cautions...)
	if !r.converged {
		r.res.Cautions = append(r.res.Cautions, "The matching did not settle: "+r.why+". Its numbers are not to be relied on.")
	}
}

// notSeparable tells in words what the clips leave open.
func (r *reporter) notSeparable() []string {
	var out []string
	var moments []string
	for i := range r.params {
		q := &r.params[i]
		if !r.poor[i] {
			continue
		}
		switch {
		case q.moment():
			moments = append(moments, strings.Join(q.tied, " = "))
		case r.twin(i) != "":
			out = append(out, fmt.Sprintf("%s and %s: only what they do together over the speeds of the clip is determined; %s", q.address, r.twin(i), r.remedy(i, "a second release from a smaller angle would separate them")))
		default:
			out = append(out, fmt.Sprintf("%s: the clip hardly feels it; %s", q.address, r.remedy(i, "a longer clip or a larger release would")))
		}
	}
	switch {
	case len(moments) > 1:
		out = append(out, strings.Join(moments, " and ")+": only products of pairs are determined; a magnet of known moment in place of one, or a tie in [fit] equal, would separate them")
	case len(moments) == 1:
		out = append(out, moments[0]+": not determined by this clip; a larger release that passes over the magnet would")
	}
	return out
}

// remedy is the further clip that would tell number i, else what is said otherwise.
func (r *reporter) remedy(i int, otherwise string) string {
	if a, ok := r.help[i]; ok {
		return a.words + " would"
	}
	return otherwise
}

// verdicts say of each number asked for whether the clips determine it, what limits
// it, and which further clip would tell more.
func (r *reporter) verdicts() []finding.Verdict {
	var out []finding.Verdict
	loose := r.poorMoments()
	for i := range r.params {
		q := &r.params[i]
		if !q.asked || q.role != byModel {
			continue
		}
		v := finding.Verdict{Name: called(q)}
		rel := r.res.Estimates[i].U / math.Abs(q.value)
		u, pictures, budget := r.j.of(r.fitter, r.j.unit(i))
		switch {
		case r.trapped() && q.moment():
			v.Told, v.Why = "not determined", "the part stayed beside the magnet all the time"
		case q.moment() && len(loose) > 1 && slices.Contains(loose, i):
			v.Told, v.Why = "not by itself", "only the product of each pair is determined; a tie in [fit] equal, or one known moment, would separate them"
		case r.poor[i] && r.twin(i) != "":
			v.Told, v.Why = "not by itself", r.together(i)
		case r.poor[i] && q.limited():
			v.Told, v.Why = "only what it may be at most", "the clip hardly feels it"
		case r.poor[i]:
			v.Told, v.Why = "not determined", "the clip hardly feels it"
		case rel < 0.1:
			v.Told = "determined to ±" + finding.DisplayU(196*rel, "1") + " %"
		default:
			v.Told = "roughly, to ±" + finding.DisplayU(196*rel, "1") + " %"
		}
		if most := largestOfRig(budget); !r.poor[i] && most != "" && u*u > 2*pictures*pictures {
			v.Why = fmt.Sprintf("limited by what the rig says, most by %s: the pictures alone would leave ±%s %%", most, finding.DisplayU(196*pictures/math.Abs(q.value), "1"))
		}
		if a, ok := r.help[i]; ok && !(r.poor[i] && q.moment() && len(loose) > 1) {
			to := finding.DisplayU(196*a.u/math.Abs(q.value), "1") + " %"
			if r.poor[i] { // of a number that is not known, no share can be told
				to = finding.DisplayU(1.96*a.u, q.unit)
			}
			v.Help = fmt.Sprintf("%s, fitted together with this, would bring it to about ±%s", a.words, to)
		} else if !r.poor[i] && u > wellKnown*math.Abs(q.value) && v.Why != "" {
			v.Help = "no further clip helps much: measure that better"
		}
		out = append(out, v)
	}
	return out
}

// largestOfRig is the largest source of an uncertainty other than the pictures.
func largestOfRig(budget []finding.Share) string {
	for _, s := range budget { // the largest first
		if s.Source != "the pictures" {
			return s.Source
		}
	}
	return ""
}

// poorMoments are the free moments that the clips do not determine singly.
func (r *reporter) poorMoments() []int {
	var out []int
	for i := range r.params {
		if r.params[i].asked && r.params[i].moment() && r.poor[i] {
			out = append(out, i)
		}
	}
	return out
}

// together tells the combination of friction i and its twin that is determined best: the
// one with which it is correlated most.
func (r *reporter) together(i int) string {
	owner, _ := split(r.params[i].address)
	best, k := 0.0, -1
	for o := range r.params {
		if w, what := split(r.params[o].address); o != i && w == owner && (what == "viscous" || what == "drag" || what == "dry") && r.params[o].asked {
			if c := math.Abs(r.j.correlation(i, o)); c > best {
				best, k = c, o
			}
		}
	}
	if k < 0 {
		return "the clip hardly feels it"
	}
	_, a := split(r.params[i].address)
	_, b := split(r.params[k].address)
	return fmt.Sprintf("only %s and %s together are determined (their correlation is %.4f)", strings.ToLower(named[a][1]), strings.ToLower(named[b][1]), r.j.correlation(i, k))
}

// called is what a number is called, and of what.
func called(q *param) string {
	owner, what := split(q.address)
	name := what
	if n, ok := named[what]; ok {
		name = n[1]
	} else if q.moment() {
		name = map[string]string{"moment": "Dipole moment", "remanence": "Remanence"}[what]
	}
	owners := []string{owner}
	for _, a := range q.tied {
		if o, _ := split(a); !slices.Contains(owners, o) {
			owners = append(owners, o)
		}
	}
	name += ", " + strings.Join(owners, ", ")
	if len(owners) > 1 {
		name += " (tied)"
	}
	return name
}

// limited tells whether of a number that is not determined an upper limit is told.
func (q *param) limited() bool {
	_, what := split(q.address)
	return slices.Contains([]string{"viscous", "drag", "dry", "kick", "eddy"}, what)
}
