package match

import (
	"fmt"
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
			out = append(out, fmt.Sprintf("%s and %s: only their sum over the speeds of the clip is determined; a second release from a smaller angle would separate them", q.address, r.twin(i)))
		default:
			out = append(out, fmt.Sprintf("%s: the clip hardly feels it; a longer clip or a larger release would", q.address))
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
