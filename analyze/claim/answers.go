package claim

import (
	"fmt"
	"math"

	"lodeswing/analyze/decay"
	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

// runs answers "runs for so long".
func (a *Answer) runs(want float64, parts []swing, in *Input) {
	s := largest(parts)
	length := s.to - s.from
	// What the clip itself shows.
	for i := len(s.t) - 1; i >= 0; i-- {
		if s.amp[i]-2*s.u[i] > still {
			if s.t[i]-s.from >= want {
				a.Verdict, a.Why = True, fmt.Sprintf("It still swung by %s after %s.", angle(s.amp[i], s.u[i]), minutes(s.t[i]-s.from))
				return
			}
			if i < len(s.t)-3 && s.t[i+3]-s.from < want && s.amp[len(s.amp)-1]+2*s.u[len(s.u)-1] < still {
				a.Verdict, a.Why = NoLonger, fmt.Sprintf("It swung by less than 1° to each side after %s.", minutes(s.t[i]-s.from))
				return
			}
			break
		}
	}
	if d := in.decay(s.part); d != nil {
		lo, hi := stops(d)
		lo, hi = lo+d.FromS-s.from, hi+d.FromS-s.from
		switch {
		case lo > want:
			a.Verdict, a.Why = True, fmt.Sprintf("By the way in which it dies it swings on for %s at least.", minutes(lo))
		case hi < want:
			a.Verdict, a.Why = NoLonger, fmt.Sprintf("By the way in which it dies it stands still after %s at most.", minutes(hi))
			a.Next = "Look whether the bearing is clean, and whether it was pushed as usual."
		default:
			a.Verdict, a.Why = Undecided, fmt.Sprintf("By the way in which it dies it stands still after %s to %s.", minutes(lo), minutes(hi))
			a.Next = "Film for longer."
		}
		return
	}
	if in.driven(s.part) {
		if f := in.find("kick.battery_time", s.part); f != nil {
			switch {
			case f.Lo > want:
				a.Verdict, a.Why = True, fmt.Sprintf("A fresh battery keeps it going for about %s.", minutes(f.Value))
				return
			case f.Hi < want:
				a.Verdict, a.Why = NoLonger, fmt.Sprintf("A fresh battery keeps it going for only %s.", minutes(f.Value))
				return
			}
		}
		t, u := s.trend()
		a.Verdict = Undecided
		if t > -3*u-0.01 {
			a.Why = fmt.Sprintf("It did not grow weaker while it was filmed, for %s; how long its battery lasts this does not show.", minutes(length))
		} else {
			a.Why = fmt.Sprintf("It grew weaker while it was filmed, for %s.", minutes(length))
		}
		a.Next = "Film once more after that time, or give the coil's data and the battery's capacity in the rig."
		return
	}
	a.Verdict, a.Why = Undecided, fmt.Sprintf("The clip is %s long and shows no free decay to reckon with.", minutes(length))
	a.Next = "Let it swing freely from the usual push and film it for longer."
}

// stops is the shortest and the longest time, s after the decay's beginning, at
// which the amplitude falls below what a visitor sees, over the friction laws that
// the data allow, each a 95 % interval. The envelope is that of a nearly harmonic
// swing, Ȧ = −c₁A/2 − 4c₂ωA²/(3π) − 2τ/(πω), its losses averaged over a swing.
func stops(d *decay.Result) (lo, hi float64) {
	lo, hi = math.Inf(1), 0
	for _, l := range d.Laws {
		if l.Weight < 0.02 {
			continue
		}
		w := math.Sqrt(l.Omega2)
		c := [3]float64{l.Viscous, l.Drag, l.Dry}
		u := [3]float64{l.UViscous, l.UDrag, l.UDry}
		// What each friction of unit size takes from the amplitude, 1/s times rad.
		per := func(amp float64) [3]float64 {
			return [3]float64{amp / 2, 4 * w * amp * amp / (3 * math.Pi), 2 / (math.Pi * w)}
		}
		run := func(c [3]float64) float64 {
			amp, t := d.AmplitudeStart, 0.0
			for amp > still {
				fall := 0.0
				for j, p := range per(amp) {
					fall += math.Max(0, c[j]) * p
				}
				if !(fall > 0) || t > 1e8 {
					return math.Inf(1)
				}
				h := 0.002 * amp / fall
				t, amp = t+h, amp-h*fall
			}
			return t
		}
		try := func(c [3]float64) {
			t := run(c)
			lo, hi = math.Min(lo, t), math.Max(hi, t)
		}
		var has []int
		for j := range c {
			if c[j] != 0 || u[j] != 0 {
				has = append(has, j)
			}
		}
		middle := per(d.Amplitude)
		for _, j := range has {
			for _, k := range [2]float64{-2, 2} {
				moved := c
				moved[j] = math.Max(0, c[j]+k*u[j])
				if len(has) == 1 {
					try(moved)
				}
				// The frictions of one law are strongly bound to each other: where one
				// is more, another is less, so that the loss that was seen stays.
				for _, m := range has {
					if m == j {
						continue
					}
					bound := moved
					bound[m] = c[m] - (moved[j]-c[j])*middle[j]/middle[m]
					if bound[m] < 0 {
						bound[j] += bound[m] * middle[m] / middle[j]
						bound[m] = 0
					}
					try(bound)
				}
			}
		}
	}
	// The averaged envelope is that of small losses and small swings: within 2 % up to
	// 40° and Q of 10.
	lo, hi = lo*0.98, hi*1.02
	return lo, hi
}

// handsOver answers "hands its energy over within so long".
func (a *Answer) handsOver(want float64, parts []swing) {
	if len(parts) < 2 {
		a.Verdict, a.Why = Undecided, "Only one part was followed, so nothing shows that it hands over."
		a.Next = "Put each part's bob into the rig."
		return
	}
	first := &parts[0]
	for i := range parts {
		x, _ := parts[i].early()
		if y, _ := first.early(); x > y {
			first = &parts[i]
		}
	}
	// at is a part's amplitude about a time.
	at := func(s *swing, t float64) float64 {
		best, near := 0.0, math.Inf(1)
		for i := range s.t {
			if d := math.Abs(s.t[i] - t); d < near {
				best, near = s.amp[i], d
			}
		}
		return best
	}
	for i, t := range first.t {
		for k := range parts {
			if s := &parts[k]; s != first && at(s, t) > first.amp[i] {
				after := t - first.from
				slack := first.half[i]
				said := fmt.Sprintf("“%s” had handed over to “%s” after %.3g seconds.", first.part, s.part, after)
				switch {
				case after+slack < want:
					a.Verdict, a.Why = True, said
				case after-slack > want:
					a.Verdict, a.Why = NoLonger, said
					a.Next = "Look at the distance between the two: nearer hands over sooner."
				default:
					a.Verdict, a.Why, a.Next = Undecided, said+" That is within half a swing of what the label says.", "Film it several times."
				}
				return
			}
		}
	}
	if length := first.to - first.from; length > want+first.half[0] {
		a.Verdict, a.Why = NoLonger, fmt.Sprintf("In %.3g seconds “%s” did not hand over.", length, first.part)
		a.Next = "Look whether the magnets are all there, and at the distance between the parts."
		return
	}
	a.Verdict, a.Why, a.Next = Undecided, fmt.Sprintf("The clip ends after %.3g seconds, before it handed over.", first.to-first.from), "Film for longer."
}

// neverSettles answers "never settles".
func (a *Answer) neverSettles(parts []swing, in *Input) {
	s := largest(parts)
	late, u := s.late()
	if in.decay(s.part) != nil || late+2*u < still {
		a.Verdict, a.Why = NoLonger, fmt.Sprintf("It dies: at the end it swung by %s.", angle(late, u))
		a.Next = "If a battery drives it, put in a fresh one."
		return
	}
	t, ut := s.trend()
	switch {
	case t < -3*ut-0.02:
		a.Verdict, a.Why = Undecided, fmt.Sprintf("It swung by %s at the end, less than before.", angle(late, u))
		a.Next = "Film for longer, until it holds its swing or stops."
	case !in.driven(s.part):
		a.Verdict, a.Why = Undecided, fmt.Sprintf("It still swung by %s at the end of %s, but nothing is known to drive it.", angle(late, u), minutes(s.to-s.from))
		a.Next = "Film for longer, or add the coil to the rig."
	default:
		a.Verdict, a.Why = True, fmt.Sprintf("It held its swing of %s for the %s that were filmed.", angle(late, u), minutes(s.to-s.from))
	}
}

// amplitude answers "swings at least so far".
func (a *Answer) amplitude(want float64, parts []swing, in *Input) {
	s := largest(parts)
	late, u := s.late()
	said := fmt.Sprintf("At the end it swung by %s to each side.", angle(late, u))
	if f := in.find("kick.steady_amplitude", s.part); f != nil && in.driven(s.part) {
		t, ut := s.trend()
		if t > 3*ut+0.005 || t < -3*ut-0.005 {
			late, u = f.Value, math.Max(f.U, u)
			said = fmt.Sprintf("It was not steady yet; kick and friction lead it to %s.", angle(late, u))
		}
	}
	// What all swings of a clip have in common (lens, camera, shading of the bob)
	// does not show in their scatter; nor does a label speak of hundredths.
	const common = 0.003
	u = math.Hypot(u, common*late)
	switch {
	case late-2*u > want:
		a.Verdict, a.Why = True, said
	case late+2*u < want:
		a.Verdict, a.Why = NoLonger, said
		a.Next = "Put in a fresh battery and film again; if it stays so, the coil or the bearing is to be looked at."
	default:
		a.Verdict, a.Why, a.Next = Undecided, said+" That is too near to what the label says.", "Film for longer."
	}
}

// period answers "swings once every so many seconds". The label's number counts
// as good to u_period_s, or to 2 % where the rig does not say.
func (a *Answer) period(want rig.Value, parts []swing) {
	s := largest(parts)
	n := len(s.half)
	if n < 4 {
		a.Verdict, a.Why, a.Next = Undecided, "The clip holds fewer than two whole swings.", "Film for longer."
		return
	}
	var full []float64
	for i := 1; i < n; i++ {
		if d := s.t[i] - s.t[i-1]; d < 1.5*s.half[i] { // no gap between
			full = append(full, s.half[i-1]+s.half[i])
		}
	}
	if len(full) == 0 {
		a.Verdict, a.Why, a.Next = Undecided, "The clip holds no whole swing without a gap.", "Film for longer."
		return
	}
	p, u := meanOf(full, []float64{0})
	tolerance := 0.02 * want.V
	if want.UGiven {
		tolerance = want.U
	}
	said := fmt.Sprintf("It swings once every %.3g seconds.", p)
	switch off := math.Abs(p - want.V); {
	case off+2*u < tolerance:
		a.Verdict, a.Why = True, said
	case off-2*u > tolerance:
		a.Verdict, a.Why, a.Next = NoLonger, said, "Look whether a part was moved, lost or replaced."
	default:
		a.Verdict, a.Why, a.Next = Undecided, said, "Film for longer."
	}
}

// curve draws the swing of each part with what the claim asks for.
func curve(a Answer, parts []swing, limit float64) finding.Curve {
	c := finding.Curve{
		Key: a.Curve, Title: "Behind the claim “" + a.Label + "”", X: finding.Axis{Label: "time", Unit: "s"},
		Y:       finding.Axis{Label: "swing to each side", Unit: "rad", ShowUnit: "°", ShowFactor: 1 / degree},
		Caption: string(a.Verdict) + ". " + a.Why + " Each point is one half swing.",
	}
	first, last := math.Inf(1), math.Inf(-1)
	for i := range parts {
		s := &parts[i]
		first, last = math.Min(first, s.from), math.Max(last, s.to)
		c.Lines = append(c.Lines, finding.Line{Name: s.part, Role: finding.Mark, X: s.t, Y: s.amp})
	}
	if !math.IsNaN(limit) {
		c.Lines = append(c.Lines, finding.Line{Name: "asked for", Role: finding.Guide, X: []float64{first, last}, Y: []float64{limit, limit}})
	}
	return c
}
