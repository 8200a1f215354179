// Package compare sets the findings of two measurements, or of two groups of
// them, against each other: two windings, two lots, before and after.
//
// What comes in: the findings of each result, with the budgets of their
// uncertainties. What goes out: for each quantity that both have, the difference
// B − A with its uncertainty, in the finding's SI unit. What both measurements
// have in common (the same rig's mass, ruler, gravity and clock) shifts both
// alike and cancels from the difference; what each has of its own does not.
package compare

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
)

// Side is one of the two: the findings of one result, or of several of one kind.
type Side struct {
	Name    string
	Results []Result
}

// Result is one measurement.
type Result struct {
	Name     string
	Findings []finding.Finding
	// TemperatureC and UTemperatureC are its temperature where it was noted; NaN where not.
	TemperatureC, UTemperatureC float64
	// PerKelvin gives the relative change of a magnet's remanence with temperature by
	// the subject of a finding; nil: sintered NdFeB.
	PerKelvin func(subject string) float64
}

// Options says what the two sides have in common.
type Options struct {
	// SameRig: both were measured by the same numbers of one rig (mass, lengths,
	// inertia), so that an error of these shifts both alike.
	SameRig bool
	// SameCamera: the camera stood where it stood, and scale and vertical are the same.
	SameCamera bool
}

// Difference is one quantity of both sides.
type Difference struct {
	Key, Subject, Name, Unit string
	A, UA, B, UB             float64
	D, U                     float64 // B − A
	Lo, Hi                   float64 // 95 % interval of D
	Ratio, URatio            float64 // B/A − 1; NaN where A is zero within its uncertainty
	// Apart: the interval does not hold zero.
	Apart bool
	// Alone: the two would be told apart without what cancels, too.
	Alone     bool
	Cancelled []finding.Share // what would have been in U, by source, had it not been common
	At20C     bool            // both were taken to 20 °C
	Cautions  []string
}

// sources of an uncertainty that both sides have in common, as budgets name them.
var (
	ofRig    = []string{"the rig's", "gravity", "clock", "inertia of", "weight moment of", "the weight of ", "the bobs' places", "the scale's length"}
	ofCamera = []string{"scale", "camera", "lens", "distance", "depth", "tilt", "pan", "vertical", "focal", "read-out", "shutter"}
)

func (o Options) common(source string) bool {
	holds := func(words []string) bool {
		return slices.ContainsFunc(words, func(w string) bool { return strings.Contains(source, w) })
	}
	return o.SameRig && holds(ofRig) || o.SameCamera && holds(ofCamera)
}

// Run sets b against a. An error is returned where the two have nothing in common
// that could be compared.
func Run(a, b Side, opt Options) ([]Difference, error) {
	if len(a.Results) == 0 || len(b.Results) == 0 {
		return nil, errors.New("compare: each side needs at least one result")
	}
	var out []Difference
	for _, f := range a.Results[0].Findings {
		if f.Kind != finding.Measured || !(f.U > 0) {
			continue
		}
		x, okA := a.quantity(&f, opt)
		y, okB := b.quantity(&f, opt)
		if !okA || !okB || x.unit != y.unit {
			continue
		}
		out = append(out, x.against(y, &f))
	}
	if len(out) == 0 {
		return nil, fmt.Errorf("compare: %s and %s have no measured number in common; compare results of the same toy, measured with rigs that name its parts alike", a.Name, b.Name)
	}
	return out, nil
}

// quantity is one quantity of one side: value, uncertainty of its own, and the
// signed effect of each common source.
type quantity struct {
	value, own, all float64
	unit            string
	n               int
	common          map[string]float64
	at20            bool
	name            string
}

// atAmplitude is what a name says of the amplitude at which it holds: values at
// different amplitudes are not the same quantity.
func atAmplitude(name string) string {
	if _, after, ok := strings.Cut(name, "amplitude of "); ok {
		return after
	}
	return ""
}

func (s *Side) quantity(like *finding.Finding, opt Options) (quantity, bool) {
	q := quantity{common: map[string]float64{}}
	var values, owns []float64
	for i := range s.Results {
		r := &s.Results[i]
		j := slices.IndexFunc(r.Findings, func(f finding.Finding) bool {
			return f.Key == like.Key && f.Subject == like.Subject && f.Kind == finding.Measured
		})
		if j < 0 {
			continue
		}
		f := r.Findings[j]
		v, u := f.Value, f.U
		scale := 1.0
		if magnetic(&f) && !math.IsNaN(r.TemperatureC) {
			per := ndfeb
			if r.PerKelvin != nil {
				per = r.PerKelvin(f.Subject)
			}
			if strings.HasSuffix(f.Key, "product") {
				per *= 2
			}
			scale = 1 / (1 + per*(r.TemperatureC-20))
			v, u = v*scale, math.Hypot(u*scale, v*per*r.UTemperatureC)
			q.at20 = true
		}
		own := u * u
		for _, sh := range f.Budget {
			if c := math.Abs(sh.U * scale); opt.common(sh.Source) && c*c <= own {
				q.common[sh.Source] += c
				own -= c * c
			}
		}
		values, owns = append(values, v), append(owns, own)
		q.unit, q.name = f.Unit, f.Name
		q.all += u * u
	}
	q.n = len(values)
	if q.n == 0 {
		return q, false
	}
	n := float64(q.n)
	within := 0.0
	for i := range values {
		q.value += values[i] / n
		within += owns[i]
	}
	for s := range q.common {
		q.common[s] /= n
	}
	q.all = math.Sqrt(q.all / n)
	q.own = within / n / n
	if q.n > 1 {
		// Units of one kind differ: the mean is as good as their scatter says, if that
		// is more than what each was measured with.
		ss := 0.0
		for _, v := range values {
			ss += (v - q.value) * (v - q.value)
		}
		q.own = math.Max(q.own, ss/(n-1)/n)
	}
	q.own = math.Sqrt(q.own)
	return q, true
}

// ndfeb is the relative change of remanence per kelvin of sintered NdFeB (common
// practice, no source).
const ndfeb = -0.0012

// magnetic tells whether a finding is a moment, or a product of two, as measured.
func magnetic(f *finding.Finding) bool {
	return !strings.Contains(f.Key, "20") && (f.Unit == "A·m²" || f.Unit == "A²·m⁴")
}

// against is the difference y − x.
func (x *quantity) against(y quantity, like *finding.Finding) Difference {
	d := Difference{
		Key: like.Key, Subject: like.Subject, Name: like.Name, Unit: x.unit, A: x.value, B: y.value,
		D: y.value - x.value, At20C: x.at20 && y.at20,
	}
	if x.at20 != y.at20 {
		d.Cautions = append(d.Cautions, "The temperature was noted on one side only: the difference holds what a change of temperature does to the magnets.")
	}
	if p, q := atAmplitude(x.name), atAmplitude(y.name); p != q {
		d.Cautions = append(d.Cautions, fmt.Sprintf("It is stated at an amplitude of %s for one and of %s for the other: part of the difference may be that.", p, q))
	}
	v := x.own*x.own + y.own*y.own
	var sources []string
	for s := range x.common {
		sources = append(sources, s)
	}
	for s := range y.common {
		if _, both := x.common[s]; !both {
			sources = append(sources, s)
		}
	}
	slices.Sort(sources)
	plainA, plainB := x.own*x.own, y.own*y.own
	ratio := v
	for _, s := range sources {
		a, b := x.common[s], y.common[s]
		v += (b - a) * (b - a)
		plainA, plainB = plainA+a*a, plainB+b*b
		if c := math.Sqrt(math.Max(0, a*a+b*b-(b-a)*(b-a))); c > 0 {
			d.Cancelled = append(d.Cancelled, finding.Share{Source: s, U: c})
		}
	}
	d.UA, d.UB, d.U = math.Sqrt(plainA), math.Sqrt(plainB), math.Sqrt(v)
	k := 1.959963984540054
	if m := min(x.n, y.n); m > 1 && m < 30 {
		k = student(float64(x.n + y.n - 2))
	}
	d.Lo, d.Hi = d.D-k*d.U, d.D+k*d.U
	d.Apart = d.Lo > 0 || d.Hi < 0
	d.Alone = math.Abs(d.D) > k*math.Hypot(d.UA, d.UB)
	d.Ratio, d.URatio = math.NaN(), math.NaN()
	if math.Abs(x.value) > 3*d.UA && d.UA >= 0 && x.value != 0 {
		// Relative errors that are the same on both sides cancel from the ratio.
		d.Ratio = y.value/x.value - 1
		r := y.value / x.value
		ratio = x.own*x.own*r*r + y.own*y.own
		for _, s := range sources {
			c := y.common[s] - r*x.common[s]
			ratio += c * c
		}
		d.URatio = math.Sqrt(ratio) / math.Abs(x.value)
	}
	return d
}

// student is the 97.5 % point of Student's distribution (Cornish–Fisher series,
// Abramowitz & Stegun 26.7.5), good to 0.01 from three degrees of freedom on.
func student(dof float64) float64 {
	const z = 1.959963984540054
	z3, z5 := z*z*z, z*z*z*z*z
	g1 := (z3 + z) / 4
	g2 := (5*z5 + 16*z3 + 3*z) / 96
	g3 := (3*z5*z*z + 19*z5 + 17*z3 - 15*z) / 384
	return z + g1/dof + g2/dof/dof + g3/dof/dof/dof
}
