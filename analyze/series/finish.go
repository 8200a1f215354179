package series

import (
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// finish unwraps, adds what all joints share and computes the rates.
func (b *builder) finish(a *Angle, part *rig.Part, bob *track.Bob) {
	for i, u := range a.UAngle {
		if !(u > 0) {
			a.UAngle[i] = 0
		}
	}
	a.unwrap()
	a.despike()
	if hasZero(a.UAngle) {
		s := scatter(a.T, a.Angle)
		for i := range a.UAngle {
			a.UAngle[i] = s
		}
		a.Cautions = append(a.Cautions, "The track gives no uncertainty for some samples; the angle's was taken from its scatter.")
	}
	a.rates()
	if a.NoiseRatio > 2 {
		a.Cautions = append(a.Cautions, fmt.Sprintf("The angle scatters %.1f times as much as the picture's noise lets expect.", a.NoiseRatio))
	}
	cal := &b.tr.Cal
	n := len(a.T)
	constant := func(source string, u float64) {
		d := make([]float64, n)
		for i := range d {
			d[i] = u
		}
		a.Shared = append(a.Shared, Shared{source, d})
	}
	a.VerticalFrom = cal.VerticalFrom
	switch {
	case cal.VerticalKnown:
		if cal.UVertical > 0 {
			constant("vertical", cal.UVertical)
		}
	case b.rig.Camera.Vertical == "rest" && b.restIsVertical(a, part):
	default:
		u := cal.UVertical
		if u == 0 {
			u = uUpright
		}
		constant("vertical", u)
		a.VerticalFrom = ""
	}
	if rb := b.rigBob(bob.Name); rb != nil && len(rb.AtM) >= 2 && rb.AtM[0] != 0 && a.Pivot.R > 0 && !a.Pivot.Moves {
		constant("the bob's place on the part", uPlaceM/a.Pivot.R)
	}
	if cal.UReadoutS > 0 && cal.PictureH > 0 {
		rows := map[float64]float64{}
		for _, s := range bob.Samples {
			rows[s.T] = s.V
		}
		d := make([]float64, n)
		any := false
		for i, t := range a.T {
			if v, ok := rows[t]; ok && !math.IsNaN(a.Rate[i]) && !math.IsNaN(v) {
				d[i] = a.Rate[i] * cal.UReadoutS * (v/float64(cal.PictureH) - 0.5)
				any = true
			}
		}
		if any {
			a.Shared = append(a.Shared, Shared{"rolling shutter", d})
		}
	}
}

func hasZero(x []float64) bool {
	for _, v := range x {
		if v == 0 {
			return true
		}
	}
	return false
}

// unwrap takes out the jumps of 2π, from a first angle within ±π. Across a gap the rate before it foretells
// the turns; where the gap is too long for that, a caution says so.
func (a *Angle) unwrap() {
	const turn = 2 * math.Pi
	first := turn * math.Round(a.Angle[0]/turn)
	for i := range a.Angle {
		a.Angle[i] -= first
	}
	step := medianStep(a.T)
	rate := 0.0
	for i := 1; i < len(a.Angle); i++ {
		dt := a.T[i] - a.T[i-1]
		want := a.Angle[i-1]
		if dt > 1.5*step {
			want += rate * dt
			if math.Abs(rate)*dt > math.Pi/2 {
				a.Cautions = append(a.Cautions, fmt.Sprintf("The full turns made in the gap at %.2f s are a guess from the rate before it.", a.T[i-1]))
			}
		}
		shift := turn * math.Round((want-a.Angle[i])/turn)
		if shift != 0 {
			for j := i; j < len(a.Angle); j++ {
				a.Angle[j] += shift
			}
		}
		// The rate over the last few samples, for the next gap.
		if j := max(0, i-3); a.T[i] > a.T[j] && dt <= 1.5*step {
			rate = (a.Angle[i] - a.Angle[j]) / (a.T[i] - a.T[j])
		}
	}
}

// bobGaps lists the stretches in which one of the bobs that a series needs has no
// usable sample.
func bobGaps(bobs ...*track.Bob) []Gap {
	var gaps []Gap
	var times []float64
	s := bobs[0].Samples
	usable := func(i int) bool {
		for _, b := range bobs {
			if i >= len(b.Samples) || !b.Samples[i].State.Usable() {
				return false
			}
		}
		return true
	}
	for i := 0; i < len(s); {
		if usable(i) {
			times = append(times, s[i].T)
			i++
			continue
		}
		j := i
		for j < len(s) && !usable(j) {
			j++
		}
		g := Gap{Frames: j - i, FromS: s[i].T, ToS: s[j-1].T, Why: whyGap(bobs, i, j)}
		if i > 0 {
			g.FromS = s[i-1].T
		}
		if j < len(s) {
			g.ToS = s[j].T
		}
		gaps = append(gaps, g)
		i = j
	}
	gaps = append(gaps, lostFrames(times, gaps, noFrames)...)
	sortGaps(gaps)
	return gaps
}

// whyGap says why frames [from, to) are a gap: of the bob that lacks most of them.
func whyGap(bobs []*track.Bob, from, to int) (why string) {
	most := -1
	for _, b := range bobs {
		lacking, edge := 0, 0
		for i := from; i < min(to, len(b.Samples)); i++ {
			if st := b.Samples[i].State; !st.Usable() {
				lacking++
				if st == track.AtEdge {
					edge++
				}
			}
		}
		if lacking <= most {
			continue
		}
		most, why = lacking, "not found"
		if edge > lacking/2 {
			why = "at the picture's edge"
		}
		if len(bobs) > 1 {
			why = "“" + b.Name + "” " + why
		}
	}
	return why
}
