package match

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
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
	poor  map[int]bool
	spans map[int]span // 95 % intervals of parameters by profile, where derivatives do not do
	help  map[int]advice
	wrong bool   // the model plainly does not fit
	hard  string // says that the part hardly got over the magnet
}

// undeterminedAt is the relative standard uncertainty from which a number is not
// told: its 95 % interval then reaches over more than ±60 % of it.
const undeterminedAt = 0.3

func (f *fitter) report(ctx context.Context) (*Result, error) {
	if err := f.settle(ctx); err != nil {
		return nil, err
	}
	j, err := f.judge()
	if err != nil {
		return nil, err
	}
	if f.nearly(j) {
		f.converged, f.unsettled = true, true
		f.cautions = append(f.cautions, "The last steps of the matching did not settle in every place and angle that was free, but would move none of the numbers asked for by half a standard uncertainty; that is in their uncertainties.")
		if j, err = f.judge(); err != nil {
			return nil, err
		}
	}
	r := &reporter{fitter: f, j: j, p: f.values(), res: &Result{Scatter: f.widened * math.Sqrt(j.chi2/float64(j.dof)), Converged: f.converged}, poor: map[int]bool{}, spans: map[int]span{}}
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
	r.wrong = misfit != ""
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	for c := range f.clips {
		f.apply(c, f.clips[c].model, r.p)
	}
	r.leftOut()
	r.tellSwitches()
	r.separability()
	r.capture(ctx)
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if r.converged && misfit == "" {
		r.help = r.further(ctx)
	}
	r.magnets()
	r.rest()
	r.loss()
	r.fitSummary()
	r.curves()
	r.fittedRig()
	if !r.converged && misfit == "" {
		misfit = "The matching did not settle: " + r.why + "."
		if hard := r.hardly(); hard != "" {
			misfit = hard + " So near to being captured the matching did not settle; let it go from farther out, so that it passes over the magnet with some speed."
		}
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

// nearly tells of a fit that did not settle whether the step that is left would move
// none of the numbers asked for by half of its standard uncertainty: it is what is free
// beside them that was not brought to rest, as where parts stick and slip.
func (f *fitter) nearly(j *judgement) bool {
	if f.converged || f.rms() > clearMisfit || f.hardly() != "" {
		return false
	}
	for i := range f.params {
		if q := &f.params[i]; q.asked && !(math.Abs(f.final.step[i]) < 0.5*math.Sqrt(j.cov[i*j.np+i])) {
			return false
		}
	}
	return true
}

func (r *reporter) add(f finding.Finding) { r.res.Findings = append(r.res.Findings, f) }

// number tells a function of the parameters with its gradient.
func (r *reporter) number(key, subject, name string, value float64, grad []float64, unit string) *finding.Finding {
	u, _, budget := r.j.of(r.fitter, grad)
	f := finding.Normal(key, subject, name, value, u, unit, r.say)
	f.Budget = budget
	r.bound(&f, grad)
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

const whyTrapped = "The part stayed on one side of the magnet all through the clip: such a motion determines no magnet. Let it go from farther out, so that it passes over the magnet."
