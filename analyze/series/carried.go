package series

import (
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// onPart measures a part that sits on another part, whose pivot therefore moves.
func (b *builder) onPart(a *Angle, part *rig.Part, bob *track.Bob, usable []track.Sample) {
	rb := b.rigBob(bob.Name)
	var parent *Angle
	var parentRig *rig.Part
	for i := range b.rig.Parts {
		if b.rig.Parts[i].Name == part.On {
			parentRig = &b.rig.Parts[i]
		}
	}
	if parentRig == nil {
		a.Problem = fmt.Sprintf("the part %q sits on %q, which the rig does not describe", part.Name, part.On)
		return
	}
	for _, pb := range b.bobsOn(part.On) {
		if pa := b.angle(pb); pa != nil && pa.Problem == "" && !pa.Pivot.Moves {
			parent = pa
			break
		}
	}
	if parent == nil || len(part.PivotM) < 2 {
		a.Problem = fmt.Sprintf("the pivot of %q moves with %q: that part needs a bob of its own that was followed, and %q its pivot_mm; or put a second bob on %q", part.Name, part.On, part.Name, part.Name)
		return
	}
	pf := newFrame(parentRig, b.rigBob(parent.Bob))
	px, pz := part.PivotM[0], part.PivotM[len(part.PivotM)-1]
	if pf.upright && pz < 0 {
		px, pz = -px, -pz
	}
	f := newFrame(part, rb)
	at := map[float64]int{}
	for i, t := range parent.T {
		at[t] = i
	}
	n := 0
	a.Pivot = Pivot{From: "the rig's pivot_mm on " + part.On, Moves: true}
	shared := make([][]float64, len(parent.Shared)+2)
	var lost int
	for _, s := range usable {
		k, ok := at[s.T]
		if !ok {
			// Rows are read at their own times when the shutter rolls: take the parent
			// at the nearest sample, moved on by its rate.
			if k, ok = nearest(parent.T, s.T); !ok {
				lost++
				continue
			}
		}
		q := parent.Angle[k] - pf.centre
		if dt := s.T - parent.T[k]; dt != 0 && !math.IsNaN(parent.Rate[k]) {
			q += parent.Rate[k] * dt
		}
		if pf.upright {
			q = -q
		}
		sin, cos := math.Sincos(q)
		ox, oz := px*cos-pz*sin, px*sin+pz*cos
		x, z := parent.Pivot.X+ox, parent.Pivot.Z+oz
		dx, dz := s.X-x, s.Z-z
		r := math.Hypot(dx, dz)
		if r == 0 {
			lost++
			continue
		}
		ang, tx, tz := f.turn(dx, dz)
		// The pivot moves by (−oz, ox)·dq.
		lever := -(tx*-oz + tz*ox) / r
		if pf.upright {
			lever = -lever
		}
		v := tx*tx*s.Plane.AA + 2*tx*tz*s.Plane.AB + tz*tz*s.Plane.BB
		a.add(s.T, ang, math.Hypot(math.Sqrt(v)/r, lever*parent.UAngle[k]))
		for j, sh := range parent.Shared {
			shared[j] = append(shared[j], lever*sh.D[k])
		}
		shared[len(parent.Shared)] = append(shared[len(parent.Shared)], -(tx*cos+tz*sin)/r*uPlaceM)
		shared[len(parent.Shared)+1] = append(shared[len(parent.Shared)+1], -(-tx*sin+tz*cos)/r*uPlaceM)
		a.Pivot.X += x
		a.Pivot.Z += z
		a.Pivot.R += r
		n++
	}
	if n < minSamples {
		a.Problem = fmt.Sprintf("the bobs %q and %q were seen together in %d frames only", bob.Name, parent.Bob, n)
		return
	}
	if lost > 0 {
		a.Gaps = append(a.Gaps, lostFrames(a.T, a.Gaps, "“"+parent.Bob+"”, which carries the pivot, not found")...)
		a.Cautions = append(a.Cautions, fmt.Sprintf("%d frames were left out because %q, which carries the pivot, was not seen in them.", lost, parent.Bob))
	}
	a.Pivot.X, a.Pivot.Z, a.Pivot.R = a.Pivot.X/float64(n), a.Pivot.Z/float64(n), a.Pivot.R/float64(n)
	a.Pivot.UR = math.Hypot(uPlaceM, a.Pivot.R*b.tr.Cal.UScale)
	for j, sh := range parent.Shared {
		a.Shared = append(a.Shared, Shared{sh.Source + " of " + part.On, shared[j]})
	}
	for j := len(parent.Shared); j < len(shared); j++ {
		a.Shared = append(a.Shared, Shared{"pivot", shared[j]})
	}
}

// nearest finds the sample of a sorted series within half a step of t.
func nearest(ts []float64, t float64) (int, bool) {
	best, d := -1, 0.6*medianStep(ts)
	for lo, hi := 0, len(ts); lo < hi; {
		mid := (lo + hi) / 2
		if e := math.Abs(ts[mid] - t); e < d {
			best, d = mid, e
		}
		if ts[mid] < t {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return best, best >= 0
}

// byLine measures a part by the line between two of its bobs, which needs no pivot.
func (b *builder) byLine(a *Angle, part *rig.Part, first, second *track.Bob) {
	r1, r2 := b.rigBob(first.Name), b.rigBob(second.Name)
	if r1 == nil || r2 == nil || len(r1.AtM) < 2 || len(r2.AtM) < 2 {
		a.Problem = fmt.Sprintf("the bobs %q and %q on %q need at_mm, so that the line between them tells its angle", first.Name, second.Name, part.Name)
		return
	}
	f := newFrame(part, nil)
	dx, dz := r2.AtM[0]-r1.AtM[0], r2.AtM[len(r2.AtM)-1]-r1.AtM[len(r1.AtM)-1]
	length := math.Hypot(dx, dz)
	if length == 0 {
		a.Problem = fmt.Sprintf("the bobs %q and %q are given the same place on %q", first.Name, second.Name, part.Name)
		return
	}
	if f.upright {
		f.zero = math.Atan2(dx, dz)
	} else {
		f.zero = math.Atan2(dx, -dz)
	}
	n := min(len(first.Samples), len(second.Samples))
	for i := range n {
		s1, s2 := first.Samples[i], second.Samples[i]
		if !s1.State.Usable() || !s2.State.Usable() {
			continue
		}
		ex, ez := s2.X-s1.X, s2.Z-s1.Z
		r := math.Hypot(ex, ez)
		if r == 0 {
			continue
		}
		ang, tx, tz := f.turn(ex, ez)
		c := track.Cov{AA: s1.Plane.AA + s2.Plane.AA, AB: s1.Plane.AB + s2.Plane.AB, BB: s1.Plane.BB + s2.Plane.BB}
		v := tx*tx*c.AA + 2*tx*tz*c.AB + tz*tz*c.BB
		a.add((s1.T+s2.T)/2, ang, math.Sqrt(v)/r)
		a.Pivot.R += r
	}
	if len(a.T) < minSamples {
		a.Problem = fmt.Sprintf("the bobs %q and %q were seen together in %d frames only", first.Name, second.Name, len(a.T))
		return
	}
	a.Gaps = bobGaps(first, second)
	a.Pivot = Pivot{R: a.Pivot.R / float64(len(a.T)), From: fmt.Sprintf("the line from %s to %s; no pivot was needed", first.Name, second.Name), Moves: true}
	a.Pivot.UR = a.Pivot.R * b.tr.Cal.UScale
	d := make([]float64, len(a.T))
	for i := range d {
		d[i] = uPlaceM * math.Sqrt2 / length
	}
	a.Shared = append(a.Shared, Shared{"the bobs' places on the part", d})
}
