package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
)

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
			r.undecided(name[0], subject, name[1], fmt.Sprintf("The clip does not tell it from %s: only what the two do together is determined (see the loss curve). %s separate them.", with, r.sentence(i, "A second release from a smaller angle, fitted together with this one, would")))
			continue
		}
		switch {
		case q.limited():
			f := finding.Normal(name[0], subject, name[1], q.value, u, q.unit, r.say)
			f.Kind, f.Lo = finding.UpperLimit, 0
			f.Hi = math.Max(q.value, 0) + 1.645*u
			f.Cautions = []string{"Not seen for certain in this clip: the limit is what it may be at most (95 %)."}
			r.add(f)
		default:
			r.undecided(name[0], subject, name[1], "The clip does not determine it. "+r.sentence(i, "A longer clip or a larger release would")+" tell.")
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
			if !k.model.OneAxis(part) {
				a, _, fall, round, _ := k.model.Ball(y, part)
				w = math.Hypot(fall, round*math.Sin(a))
			}
			top = math.Max(top, math.Abs(w))
		}
	}
	return top
}

// sentence begins a sentence with the further clip that would tell number i, else with
// what is said otherwise.
func (r *reporter) sentence(i int, otherwise string) string {
	a, ok := r.help[i]
	if !ok {
		return otherwise
	}
	return strings.ToUpper(a.words[:1]) + a.words[1:] + ", fitted together with this clip, would"
}
