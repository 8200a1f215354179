package kick

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

// Seen is what the other analyses of a clip say of a unit: findings of the free
// decay, the matching and the ledger, and how the clip was filmed.
type Seen struct {
	Rig      *rig.Rig
	Findings []finding.Finding
	// Drift is the base's motion over the bob's, where marks showed it.
	Drift float64
	// FreeDecay is what each part's free decay says of friction.
	FreeDecay []Damping
}

// Damping is a free decay's damping ratio at three amplitudes: where it is stated,
// and at its ends.
type Damping struct {
	Part      string
	Omega     float64 // rad/s
	Amplitude [3]float64
	Zeta, U   [3]float64
}

// Usual scatters of good units, relative or in rad (common practice, no source).
const (
	usualMoment = 0.03
	usualRest   = 0.5 * degree
	usualZeta   = 0.02
)

// likelier weighs a fault against its absence: x is how far a quantity lies on the
// fault's side, u its standard uncertainty with good units' scatter, from what it is
// a fault, and mean the mean excess of faulty units.
func likelier(x, u, from, mean float64) float64 {
	good := (1 - rare) * math.Exp(-x*x/2/u/u) / u / math.Sqrt(2*math.Pi)
	bad := rare * tail(x-from, u, mean)
	if !(good+bad > 0) {
		if x > 0 {
			return 1
		}
		return 0
	}
	return bad / (good + bad)
}

// Causes weighs what the findings speak for. judged names what was looked at, so
// that a clean bill says what it covers.
func (s *Seen) Causes() (causes []Cause, judged []string) {
	judge := func(what string, c ...Cause) {
		if !slices.Contains(judged, what) {
			judged = append(judged, what)
		}
		causes = append(causes, c...)
	}
	for i := range s.Findings {
		f := &s.Findings[i]
		switch {
		case f.Kind == finding.Measured && (f.Key == "match.moment_deviation" || f.Key == "match.remanence_deviation"):
			judge("magnets", s.magnet(f)...)
		case f.Key == "match.cause":
			judge("magnets", matched(f))
		case f.Kind == finding.Measured && f.Key == "decay.rest_angle":
			if c, ok := s.rest(f); ok {
				judge("rest position", c)
			}
		case f.Kind == finding.Measured && (f.Key == "kick.weight_check" || f.Key == "decay.gravity"):
			judge("mass and length", s.weight(f))
		}
	}
	for i := range s.FreeDecay {
		if c, ok := s.friction(&s.FreeDecay[i]); ok {
			judge("friction", c...)
		}
	}
	if s.Drift > 0 {
		c := Cause{
			Name: "filming fault: stand or camera moves", Filming: true, Probability: 0.01,
			Evidence: fmt.Sprintf("the base moves by %.1f %% of the bob's motion", 100*s.Drift),
			Next:     "Put the toy on a firm table, weigh the stand down, lean the phone on something, and film again.",
		}
		if s.Drift > 0.02 {
			c.Probability = 0.9
		}
		judge("how it was filmed", c)
	}
	return causes, judged
}

// magnet weighs a moment that was matched against the rig's number.
func (s *Seen) magnet(f *finding.Finding) []Cause {
	off, own := f.Value, f.U
	if f.Unit == "%" {
		off, own = off/100, own/100
	}
	u := math.Hypot(own, usualMoment)
	said := fmt.Sprintf("its moment comes out at %s of the rig's number", percent(1+off, own))
	subject := strings.TrimSuffix(f.Subject, " (tied)")
	who := "“" + subject + "”"
	next := "Put in a reference magnet and film again; lodeswing compare OLD NEW --swapped magnet then says whether it was this one."
	// What acts on it sits elsewhere; a wrong number of that one would look the same.
	names := strings.Split(subject, ", ")
	var others []string
	var part string
	for i := range s.Rig.Magnets {
		if g := &s.Rig.Magnets[i]; g.Name == names[0] {
			part = g.Part
		}
	}
	for i := range s.Rig.Magnets {
		if g := &s.Rig.Magnets[i]; g.Part != part && !slices.Contains(names, g.Name) {
			others = append(others, "“"+g.Name+"”")
		}
	}
	switch {
	case len(names) > 1:
		who = "one or all of “" + strings.Join(names, "”, “") + "”, which act by their product"
		next = "Put a reference magnet in the place of one and film again; lodeswing compare OLD NEW --swapped magnet says whether it was that one, else it is another."
	case len(others) > 0:
		who += " or " + strings.Join(others, ", ") + ", which act by their product"
		next = "Put a reference magnet in the place of one and film again; lodeswing compare OLD NEW --swapped magnet says whether it was that one, else it is the other."
	}
	return []Cause{
		{Name: "magnet weak: " + who, Fault: true, Probability: likelier(-off, u, tolerated, wide), Evidence: said, Next: next},
		{Name: "magnet strong: " + who, Probability: likelier(off, u, tolerated, wide), Evidence: said},
	}
}

// matched passes on what the matching found to explain a motion that its model does
// not fit.
func matched(f *finding.Finding) Cause {
	c := Cause{Name: "something that the rig does not hold", Fault: true, Probability: 0.5, Evidence: strings.TrimSuffix(f.Text, "."), Next: "Look the unit over, mend the rig if it is that, and film again."}
	for _, w := range []struct{ word, name string }{{"reversed", "magnet reversed"}, {"missing", "magnet missing"}} {
		if strings.Contains(f.Text, w.word) && !strings.HasPrefix(f.Text, "Neither") {
			if c.Probability > 0.9 {
				c.Name = "magnet reversed or missing"
				continue
			}
			// The other way round fits twice as well: chance has no part in that.
			c.Name, c.Probability, c.Next = w.name, 0.97, "Turn the magnet over, or put one in, and film again."
		}
	}
	return c
}

func (s *Seen) rest(f *finding.Finding) (Cause, bool) {
	for _, g := range s.Rig.Magnets {
		if g.Part != f.Subject {
			return Cause{}, false // a magnet may hold it to one side
		}
	}
	for _, c := range f.Cautions {
		if strings.Contains(c, "no vertical was given") {
			return Cause{}, false
		}
	}
	return Cause{
		Name: "rest position off the vertical: a bent part, a leaning stand or something magnetic near by", Fault: true,
		Probability: likelier(math.Abs(f.Value), math.Hypot(f.U, usualRest), 1*degree, 2*degree),
		Evidence:    fmt.Sprintf("it rests %.2g° (± %.1g°) off the vertical", math.Abs(f.Value)/degree, f.U/degree),
		Next:        "Set the stand level, take tools and other magnets away, and film again; if it stays, look whether the part is bent.",
	}, true
}

// weight judges how mass, length and period go together.
func (s *Seen) weight(f *finding.Finding) Cause {
	v := f.Value
	if f.Key == "decay.gravity" {
		v /= s.Rig.Gravity.Or(9.81)
	}
	u := math.Hypot(f.U*v/f.Value, 2*UsualOmegaScatter)
	said := "by its period the pull of gravity comes out at " + percent(v, u) + " of what it is"
	if f.Key == "kick.weight_check" {
		said = "by its period the rig's weight moment comes out at " + percent(v, u) + " of the rig's"
	}
	for _, n := range []float64{2, 4, 8} {
		for _, r := range []float64{n, 1 / n} {
			if math.Abs(v*r*r-1) < 0.06+3*u*r*r {
				return Cause{
					Name: "filming fault: slow motion", Filming: true, Probability: 0.97, Evidence: said,
					Next: fmt.Sprintf("Set camera.rate_factor in the rig; the ratio suggests %.3g times what it is now.", r),
				}
			}
		}
	}
	return Cause{
		Name: "wrong mass or length", Fault: true, Probability: likelier(math.Abs(math.Log(v)), u, 2*rateTolerated, 0.06), Evidence: said,
		Next: "Weigh the part, measure where its weight and its bob sit, check the scale in the picture, and film again.",
	}
}

// friction weighs a free decay against the rig's frictions, where these are numbers.
// A friction's damping ratio is c/(2Iω) viscous, 4c₂A/(3πI) by air drag and
// 2τ/(πIω²A) dry: its work over a nearly harmonic swing over 4π times the energy.
func (s *Seen) friction(d *Damping) ([]Cause, bool) {
	var p *rig.Part
	for i := range s.Rig.Parts {
		if s.Rig.Parts[i].Name == d.Part {
			p = &s.Rig.Parts[i]
		}
	}
	if p == nil || !p.Inertia.Known() || !(p.Inertia.V > 0) || !p.Friction.Viscous.Known() || p.Friction.Drag.Fit || p.Friction.Dry.Fit {
		return nil, false
	}
	for _, g := range s.Rig.Magnets {
		if g.Part != d.Part {
			return nil, false // a swing over a magnet is not nearly harmonic
		}
	}
	i, w := p.Inertia.V, d.Omega
	of := func(a float64) (z, u float64) {
		parts := [3][2]float64{
			{p.Friction.Viscous.V, 1 / (2 * i * w)}, {p.Friction.Drag.V, 4 * a / (3 * math.Pi * i)}, {p.Friction.Dry.V, 2 / (math.Pi * i * w * w * a)},
		}
		us := [3]float64{p.Friction.Viscous.U, p.Friction.Drag.U, p.Friction.Dry.U}
		for j, x := range parts {
			z += x[0] * x[1]
			u = math.Hypot(u, us[j]*x[1])
		}
		return z, math.Hypot(u, z*p.Inertia.U/i)
	}
	want, uw := of(d.Amplitude[0])
	if !(want > 0) || !(d.Zeta[0] > 0) {
		return nil, false
	}
	ratio := d.Zeta[0] / want
	own := math.Hypot(d.U[0]/want, ratio*uw/want)
	u := math.Hypot(own, usualZeta)
	said := fmt.Sprintf("its damping at %.3g° is %s of the rig's", d.Amplitude[0]/degree, percent(ratio, own))
	name := "more loss: bearing drag or air drag"
	first, _ := of(d.Amplitude[1])
	last, _ := of(d.Amplitude[2])
	e1, e2 := d.Zeta[1]-first, d.Zeta[2]-last
	if fall := math.Sqrt(d.Amplitude[1] / d.Amplitude[2]); e1 > 2*d.U[1] && e2 > 2*d.U[2] && fall > 1.2 {
		// By dry friction the excess grows as the swing dies, by air drag it falls.
		switch r := e2 / e1; {
		case r > fall:
			name = "more loss: bearing drag (dry)"
		case r < 1/fall:
			name = "more loss: air drag"
		default:
			name = "more loss: viscous drag"
		}
	}
	return []Cause{
		{Name: name, Fault: true, Probability: likelier(ratio-1, u, tolerated, wide), Evidence: said, Next: "Clean and re-seat the bearing, look for what rubs, and film again."},
		{Name: "bearing unusually free", Probability: likelier(1-ratio, u, tolerated, wide), Evidence: said},
	}, true
}

// Join adds causes to a diagnosis and decides anew.
func (d *Diagnosis) Join(causes []Cause, judged []string) {
	for _, c := range causes {
		// What the ledger judged already is not judged twice.
		if !slices.ContainsFunc(d.Causes, func(x Cause) bool { return x.Name == c.Name }) {
			d.Causes = append(d.Causes, c)
		}
	}
	d.judged = append(d.judged, judged...)
	d.decide()
}

// Judge makes a diagnosis of a unit without a ledger.
func Judge(causes []Cause, judged []string) Diagnosis {
	d := Diagnosis{separated: true}
	d.Join(causes, judged)
	return d
}
