// Package series turns a track into angle and rate series of the toy's parts.
//
// What comes in: a track.Track and the rig that says which bob sits on which
// part; or an angle table from an encoder. What goes out: for each bob on a
// hinge, ball joint or pin, its part's angle and rate with standard
// uncertainties, the pivot that was used and how it was found, and the gaps.
// Units: seconds, metres, radians, radians per second.
//
// Angles are those of design section 4: zero where an unmagnetised part would
// rest (hanging, or standing upright), positive towards +x in both; a pin turns
// positive from hanging towards +x and is unwrapped over full turns. They are
// angles to the vertical, also for a part that is hinged to another part. A ball
// joint gives the angle of its picture in the plane of motion, or, filmed from
// above, its tilt to the right; each says so in a caution.
//
// What is random from sample to sample (the picture's noise) is in UAngle and
// URate. What is common to all samples (pivot, vertical, rolling shutter) is in
// Shared, one vector per independent cause, since it must not be averaged away.
package series

import (
	"errors"
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// Gap is a stretch of time without usable samples.
type Gap struct {
	FromS, ToS float64 // last usable sample before it and first after it
	Frames     int     // frames that had no usable position; 0 when the clip itself lacks frames
	Why        string  // plain words
}

// Pivot is the point that a part turns about, in the plane of motion.
type Pivot struct {
	X, Z, UX, UZ float64 // m
	CovXZ        float64 // m², covariance of X and Z
	R, UR        float64 // m, distance of the bob, from the track's own positions; UR holds the scale's share too
	From         string  // plain words; empty for an encoder table
	// ScatterR is the r.m.s. scatter of the bob's distance from the pivot, m.
	ScatterR float64
	// Moves: the part sits on another part, and X, Z are its pivot's mean place.
	Moves bool
}

// Shared is what one standard uncertainty of something common to all samples
// does to each angle. Different Shared of one Angle are independent. D is computed
// from the measured angles and carries a trace of their noise: a fit that frees a
// cause must smooth D along the motion first, as decay does, or it is biased.
type Shared struct {
	Source string    // plain words
	D      []float64 // rad, length of T
}

// Angle is the angle and rate series of one part, as one bob shows it.
// T, Angle, UAngle, Rate and URate have one entry per usable sample; times
// without one are in Gaps.
type Angle struct {
	Part, Bob    string
	Joint        string // "hinge", "ball" or "pin"
	T            []float64
	Angle        []float64 // rad
	UAngle       []float64 // rad, random part
	Rate         []float64 // rad/s
	URate        []float64 // rad/s, random part and the smoothing's bias
	WindowS      float64   // half width of the local polynomial that gave Rate
	NoiseRatio   float64   // scatter about the local polynomial over UAngle: 1 when UAngle is right
	Gaps         []Gap
	Pivot        Pivot
	Shared       []Shared
	UClock       float64 // relative, of every duration
	VerticalFrom string  // plain words; empty: the picture's own upright
	// Problem is set, and T empty, when this bob gives no angle: plain words
	// on why and what to do.
	Problem  string
	Cautions []string
}

// FromTrack gives one Angle per bob that turns with a part, in the order of the
// track's bobs. A rig without parts makes each bob a hinge of its own. A part
// with two or more bobs that sits on another part is measured by the line
// between its first two bobs. An error is returned only when no bob gives an
// angle.
func FromTrack(tr *track.Track, r *rig.Rig) ([]Angle, error) {
	if tr == nil || len(tr.Bobs) == 0 {
		return nil, errors.New("series: the track holds no bob; follow at least one bob first")
	}
	if r == nil {
		r = &rig.Rig{}
	}
	b := builder{tr: tr, rig: r, done: map[string]*Angle{}}
	out := make([]Angle, 0, len(tr.Bobs))
	var firstProblem string
	good := 0
	for _, bob := range b.order() {
		a := b.angle(bob)
		if a == nil {
			continue
		}
		if a.Problem != "" {
			if firstProblem == "" {
				firstProblem = a.Problem
			}
		} else {
			good++
		}
		out = append(out, *a)
	}
	if good == 0 {
		if firstProblem == "" {
			firstProblem = "no bob sits on a part that turns"
		}
		return out, fmt.Errorf("series: no angle can be had from this track: %s", firstProblem)
	}
	return out, nil
}

// FromTable makes an Angle of an encoder's table: times in seconds, increasing,
// and angles in radians. u holds standard uncertainties in radians; nil, or an
// entry that is not positive, lets them be found from the scatter about a local
// polynomial. Rows whose angle is not a number are gaps. The table's name goes
// into Part and Bob.
func FromTable(name string, t, angle, u []float64) (Angle, error) {
	a := Angle{Part: name, Bob: name, Joint: "hinge", UClock: 50e-6, VerticalFrom: "the encoder's own zero"}
	if len(t) != len(angle) || (u != nil && len(u) != len(t)) {
		return a, fmt.Errorf("series: the table's columns differ in length: %d times, %d angles, %d uncertainties", len(t), len(angle), len(u))
	}
	known := u != nil
	var tt, yy, uu []float64
	var skipped []int
	for i := range t {
		if math.IsNaN(t[i]) || math.IsInf(t[i], 0) {
			return a, fmt.Errorf("series: time %d of the table is %v; every row needs a time", i+1, t[i])
		}
		if i > 0 && t[i] <= t[i-1] {
			return a, fmt.Errorf("series: times must increase, but row %d has %g s after %g s", i+1, t[i], t[i-1])
		}
		if math.IsNaN(angle[i]) || math.IsInf(angle[i], 0) {
			skipped = append(skipped, i)
			continue
		}
		tt, yy = append(tt, t[i]), append(yy, angle[i])
		ui := 0.0
		if known {
			ui = u[i]
		}
		if !(ui > 0) || math.IsInf(ui, 0) {
			known = false
			ui = 1
		}
		uu = append(uu, ui)
	}
	if len(tt) < minSamples {
		return a, fmt.Errorf("series: the table has %d usable rows; at least %d are needed", len(tt), minSamples)
	}
	a.T, a.Angle, a.UAngle = tt, yy, uu
	a.Gaps = tableGaps(t, skipped)
	a.despike()
	tt, yy, uu = a.T, a.Angle, a.UAngle
	a.Gaps = append(a.Gaps, lostFrames(tt, a.Gaps, noFrames)...)
	if !known {
		s := scatter(tt, yy)
		for i := range uu {
			uu[i] = s
		}
	}
	a.rates()
	return a, nil
}

// minSamples is the least number of samples that make a series.
const minSamples = 8

func tableGaps(t []float64, skipped []int) []Gap {
	var gaps []Gap
	for i := 0; i < len(skipped); {
		j := i
		for j+1 < len(skipped) && skipped[j+1] == skipped[j]+1 {
			j++
		}
		from, to := t[max(skipped[i]-1, 0)], t[min(skipped[j]+1, len(t)-1)]
		gaps = append(gaps, Gap{FromS: from, ToS: to, Frames: j - i + 1, Why: "no number in the table"})
		i = j + 1
	}
	return gaps
}

const noFrames = "the recording lacks frames here"

// lostFrames finds the places where times jump although no sample is known to
// be missing, as when the recording itself lacks frames; why is what the caller
// knows of the cause.
func lostFrames(t []float64, known []Gap, why string) []Gap {
	if len(t) < 3 {
		return nil
	}
	step := medianStep(t)
	var gaps []Gap
	for i := 1; i < len(t); i++ {
		if t[i]-t[i-1] < 1.8*step {
			continue
		}
		covered := false
		for _, g := range known {
			if g.FromS <= t[i-1]+0.1*step && g.ToS >= t[i]-0.1*step {
				covered = true
			}
		}
		if !covered {
			gaps = append(gaps, Gap{FromS: t[i-1], ToS: t[i], Why: why})
		}
	}
	return gaps
}

// Broken returns the series with NaN between samples that a gap parts, for
// drawing lines that do not bridge it. y must have the length of a.T.
func (a *Angle) Broken(y []float64) (t, out []float64) {
	next := 0
	for i := range a.T {
		for next < len(a.Gaps) && a.Gaps[next].FromS < a.T[i] {
			if i > 0 {
				t = append(t, (a.T[i-1]+a.T[i])/2)
				out = append(out, math.NaN())
			}
			next++
		}
		t, out = append(t, a.T[i]), append(out, y[i])
	}
	return t, out
}

// Segments returns the index ranges [from, to) of T that hold no gap longer
// than longest seconds; longest 0 splits at every gap.
func (a *Angle) Segments(longest float64) [][2]int {
	var out [][2]int
	from := 0
	for i := 1; i < len(a.T); i++ {
		for _, g := range a.Gaps {
			if g.FromS >= a.T[i-1] && g.ToS <= a.T[i] && g.ToS-g.FromS > longest {
				out = append(out, [2]int{from, i})
				from = i
				break
			}
		}
	}
	if len(a.T) > from {
		out = append(out, [2]int{from, len(a.T)})
	}
	return out
}
