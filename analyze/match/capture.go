package match

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// overMagnet is the angle at which the only part, on a hinge, is over the only magnet
// of the base, rad from hanging; ok is false where that is not the toy.
func (f *fitter) overMagnet() (angle float64, ok bool) {
	if len(f.rig.Parts) != 1 || f.nv != 1 {
		return 0, false
	}
	base := 0
	var at [3]float64
	for i := range f.rig.Magnets {
		if g := &f.rig.Magnets[i]; g.Part == "" || g.Part == rig.Base {
			base++
			at = rig.XYZ(g.AtM)
		}
	}
	pivot := rig.XYZ(f.rig.Parts[0].PivotM)
	return math.Atan2(at[0]-pivot[0], -(at[2] - pivot[2])), base == 1
}

// hanging are the matched angles of a clip's only part at its observations, rad from
// hanging, and their times.
func (k *clipData) hanging() (t, angle []float64) {
	for s := range k.segments {
		g := &k.segments[s]
		for i := range g.pose {
			o := &k.obs[g.from+i]
			if o.who != 0 {
				continue
			}
			a := g.pose[i].at[0]
			if k.watched[0].bob >= 0 {
				p := g.pose[i].turn
				a = math.Atan2(-p[0][2], p[2][2]) // of its own hanging direction
			}
			t, angle = append(t, o.t), append(angle, a)
		}
	}
	return t, angle
}

// trapped tells whether the only part, a hinge over one magnet of the base, stayed
// beside it all the time: such a clip determines no moment.
func (f *fitter) trapped() bool {
	over, ok := f.overMagnet()
	if !ok {
		return false
	}
	for c := range f.clips {
		left, right := false, false
		_, angles := f.clips[c].hanging()
		for _, a := range angles {
			left, right = left || a < over, right || a > over
		}
		if left && right {
			return false
		}
	}
	return true
}

// saddles finds, on free stretches, when a part on a hinge hardly got over the magnet
// of the base or turned back close before: there the least change decides what
// follows, so that the motion before and the motion after are matched with no bond
// between them. What little is known of the bond would be trusted far too much.
func (f *fitter) saddles() {
	over, ok := f.overMagnet()
	if !ok || f.driven() {
		return
	}
	for c := range f.clips {
		k := &f.clips[c]
		m := k.model
		f.apply(c, m, f.values())
		away := f.unstable(m, over)
		if away == 0 {
			continue
		}
		times, states := f.fine(c)
		near := make([]float64, len(times)) // distance from standing still over the magnet, rad/s
		most := 0.0
		for i, y := range states {
			a, w := hangingAngle(m, y)
			near[i] = math.Hypot(w, away*(a-over))
			most = math.Max(most, math.Abs(w))
		}
		for i := 1; i+1 < len(near); i++ {
			if near[i] > hardlyOver*most || near[i] > near[i-1] || near[i] >= near[i+1] {
				continue
			}
			k.slow = append(k.slow, slowPass{times[i], near[i] / most, states[i]})
		}
	}
}

// slowPass is a moment at which a part hardly got over a magnet: its speed there as a
// share of its greatest, and its state.
type slowPass struct {
	t, share float64
	y        []float64
}

// slowAt tells whether a clip is cut at t for such a pass.
func (k *clipData) slowAt(t float64) bool {
	return slices.ContainsFunc(k.slow, func(s slowPass) bool { return s.t == t })
}

// hardlyOver is the share of the greatest speed at or below which a pass is one of
// which nobody can say how it goes on.
const hardlyOver = 0.12

// unstable is the rate, 1/s, at which a hinged part leaves the angle over a magnet;
// 0 where it does not.
func (f *fitter) unstable(m *toy.Model, over float64) float64 {
	const h = 0.01
	y, dy := m.Rest(), m.Rest()
	zero, _ := hangingAngle(m, y)
	put := func(d float64) {
		copy(y, m.Rest())
		m.Displace(y, []float64{d, 0})
	}
	at := over - zero
	put(at)
	if a, _ := hangingAngle(m, y); math.Abs(math.Remainder(a-over, 2*math.Pi)) > 1e-6 {
		at = -at // the model counts the other way round
	}
	var turn [2]float64
	for i, d := range [2]float64{at - h, at + h} {
		put(d)
		m.Derive(y, dy)
		turn[i] = dy[1]
	}
	return math.Sqrt(math.Max((turn[1]-turn[0])/(2*h), 0))
}

// hangingAngle is the angle of the only part from hanging, and its speed.
func hangingAngle(m *toy.Model, y []float64) (angle, rate float64) {
	_, turn := m.Pose(y, 0)
	_, rate = m.Angle(y, 0)
	return math.Atan2(-turn[0][2], turn[2][2]), rate
}

// hardly says in words that the part hardly got over the magnet of the base at some
// pass; empty where it did easily.
func (f *fitter) hardly() string {
	for c := range f.clips {
		for _, s := range f.clips[c].slow {
			return fmt.Sprintf("At %.2f s the part hardly got over the magnet, or turned back close before it (%.0f %% of its greatest speed).", s.t, 100*s.share)
		}
	}
	return ""
}

// settle goes on downhill where the last steps, which trust derivatives, did not settle
// although the model fits: near capture they lead astray.
func (f *fitter) settle(ctx context.Context) error {
	if f.converged || f.rms() > clearMisfit || !f.oneMotion {
		return nil
	}
	tol := f.tol
	f.tol, f.exact = 1e-11, true
	err := f.descend(ctx, 40, 1e-7, true)
	f.tol, f.exact = tol, false
	if err != nil {
		return err
	}
	return f.polish(ctx)
}

// capture sees to it that near capture moments carry the intervals of their profiles,
// or none are told.
func (r *reporter) capture(ctx context.Context) {
	if !r.oneMotion || r.res.Scatter > plainMisfit || !r.converged {
		return
	}
	if r.hard = r.hardly(); r.hard == "" {
		return
	}
	for i := range r.params {
		q := &r.params[i]
		if !q.asked || r.poor[i] || !q.moment() {
			continue
		}
		if r.passes() < fewestPasses {
			r.poor[i] = true
			continue
		}
		u := r.res.Estimates[i].U
		s, bent, ok := r.profile(ctx, i, u, nil)
		switch {
		case !ok:
			r.poor[i] = true
		case bent:
			by := (s.hi - s.lo) / (2 * math.Sqrt(threshold) * u)
			for k := range r.j.np { // what depends on it widens with it
				for _, m := range [][]float64{r.j.cov, r.j.inverse} {
					m[i*r.j.np+k] *= by
					m[k*r.j.np+i] *= by
				}
			}
			r.res.Estimates[i].U, r.res.Estimates[i].UPicture = u*by, r.res.Estimates[i].UPicture*by
			r.spans[i] = s
		}
	}
}

// fewestPasses over the magnet must a clip hold in which the part was nearly captured:
// with fewer it says hardly more than one that is trapped.
const fewestPasses = 4

// passes counts how often the only part passed over the base's magnet, in all clips.
func (f *fitter) passes() int {
	over, _ := f.overMagnet()
	n := 0
	for c := range f.clips {
		_, a := f.clips[c].hanging()
		for i := 1; i < len(a); i++ {
			if (a[i]-over)*(a[i-1]-over) < 0 {
				n++
			}
		}
	}
	return n
}

// bound gives a finding the interval of its profile where its one parameter has one.
func (r *reporter) bound(f *finding.Finding, grad []float64) {
	one := -1
	for i, g := range grad {
		if g == 0 {
			continue
		}
		if one >= 0 {
			return
		}
		one = i
	}
	s, ok := r.spans[one]
	if one < 0 || !ok {
		return
	}
	x, g := r.params[one].value, grad[one]
	f.Lo, f.Hi = f.Value+g*(s.lo-x), f.Value+g*(s.hi-x)
	if g < 0 {
		f.Lo, f.Hi = f.Hi, f.Lo
	}
	f.Method += "; " + profileIs
	if r.hard != "" {
		f.Cautions = append(f.Cautions, r.hard+" So near to being captured the interval is not even on both sides; a release from farther out tells more.")
	}
}

// whyHard says why a number near capture is not told.
func (r *reporter) whyHard(i int) string {
	if r.hard == "" || !r.poor[i] {
		return ""
	}
	return r.hard + " So near to being captured this clip holds no interval for it. Let it go from farther out, so that it passes over the magnet with some speed."
}

// driven tells whether a coil pushes in any clip.
func (f *fitter) driven() bool {
	for c := range f.clips {
		if !f.clips[c].undriven {
			return true
		}
	}
	return false
}
