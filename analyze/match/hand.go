package match

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

// interval is a stretch of a clip's own time, s.
type interval struct {
	from, to float64
	why      string
	gone     []observation // what was measured there
	worst    float64       // residual of a stretch in it
}

const (
	stillFor    = 0.3  // s that a toy must be still at first to be called held
	stillShare  = 0.02 // of the motion's size, that a hand trembles by
	pushedFor   = 0.3  // s about a marked push that are left out on either side
	handFrom    = 2.5  // times the usual residual, from which a stretch is not the toy's own motion
	handSpread  = 8.0  // times the usual residuals' own scatter about that
	tapFrom     = 6.0  // times the usual jump from one stretch to the next
	tapFor      = 0.1  // s about a tap that are left out on either side
	aboutSwitch = 0.5  // s
	mostHands   = 3    // more of such in a clip are the model's fault and not a hand's
)

// leaveHeld leaves out what comes before the first motion: a toy that is held, or
// stands, until something moves it. A toy that never moves afterwards keeps all.
func (k *clipData) leaveHeld() {
	if len(k.obs) == 0 {
		return
	}
	type extent struct{ lo, hi [2]float64 }
	all := make([]extent, len(k.watched))
	for w := range all {
		for i := range 2 {
			all[w].lo[i], all[w].hi[i] = math.Inf(1), math.Inf(-1)
		}
	}
	put := func(e *extent, o *observation) {
		for i, x := range [2]float64{o.a, o.b} {
			e.lo[i], e.hi[i] = math.Min(e.lo[i], x), math.Max(e.hi[i], x)
		}
	}
	so := slices.Clone(all)
	for i := range k.obs {
		put(&all[k.obs[i].who], &k.obs[i])
	}
	first := k.obs[0].t
	for i := range k.obs {
		o := &k.obs[i]
		e := so[o.who]
		put(&e, o)
		size := math.Hypot(all[o.who].hi[0]-all[o.who].lo[0], all[o.who].hi[1]-all[o.who].lo[1])
		noise := 10 / o.w0
		if math.Hypot(e.hi[0]-e.lo[0], e.hi[1]-e.lo[1]) > math.Max(stillShare*size, noise) {
			if o.t-first > stillFor {
				k.leaveOut(first, o.t, "held still, or standing, until something moved it")
			}
			return
		}
		so[o.who] = e
	}
}

// leaveMarked leaves out what lies about the pushes that the rig marks.
func (k *clipData) leaveMarked(pushes []float64) {
	for _, t := range pushes {
		k.leaveOut(t-pushedFor, t+pushedFor, "pushed, as the rig marks it")
	}
}

// leaveOut takes the observations between two moments out of the fit.
func (k *clipData) leaveOut(from, to float64, why string) {
	h := interval{from: from, to: to, why: why}
	k.obs = slices.DeleteFunc(k.obs, func(o observation) bool {
		if o.t < from || o.t >= to {
			return false
		}
		h.gone = append(h.gone, o)
		return true
	})
	if len(h.gone) == 0 {
		return
	}
	// What touches one that is left out already is one with it.
	for i := 0; i < len(k.left); i++ {
		if o := &k.left[i]; o.from <= h.to+pushedFor && h.from <= o.to+pushedFor {
			if h.why != o.why {
				h.why = o.why
			}
			h.from, h.to, h.gone = math.Min(h.from, o.from), math.Max(h.to, o.to), append(o.gone, h.gone...)
			k.left = slices.Delete(k.left, i, i+1)
			i--
		}
	}
	slices.SortStableFunc(h.gone, func(a, b observation) int {
		switch {
		case a.t < b.t:
			return -1
		case a.t > b.t:
			return 1
		}
		return 0
	})
	k.left = append(k.left, h)
	slices.SortFunc(k.left, func(a, b interval) int {
		if a.from < b.from {
			return -1
		}
		return 1
	})
}

// parted tells whether a stretch from t0 to t1 reaches over a time left out.
func (k *clipData) parted(t0, t1 float64) bool {
	for i := range k.left {
		if h := &k.left[i]; h.from >= t0 && h.from < t1 {
			return true
		}
	}
	return false
}

// resume is the next moment after t, before end, at which a new stretch must begin.
func (k *clipData) resume(t, end float64) float64 {
	for i := range k.left {
		if h := &k.left[i]; h.to > t && h.to < end {
			end = h.to
		}
	}
	if b := k.battery; b != nil && b.at > t && b.at < end {
		end = b.at
	}
	return end
}

// misfits are the r.m.s. residuals of each stretch.
func (f *fitter) misfits(c int) []float64 {
	k := &f.clips[c]
	w := &rower{f: f, c: c, k: k, see: f.viewer(c, f.values())}
	out := make([]float64, len(k.segments))
	for s := range k.segments {
		g := &k.segments[s]
		sum := 0.0
		for i := range g.to - g.from {
			r0, r1 := w.residual(g, i)
			sum += r0 * r0
			if k.dims == 2 {
				sum += r1 * r1
			}
		}
		out[s] = math.Sqrt(sum / float64(max(1, (g.to-g.from)*k.dims)))
	}
	return out
}

// findHands looks, on free stretches, for those few that no numbers of the model
// explain while it explains all others: something else acted there, mostly a hand.
// They are left out; what was found is told. Stretches that fit worse wherever the
// toy comes to the same place are the model's fault, and stay.
func (f *fitter) findHands(ctx context.Context) (found bool, err error) {
	worst := 0.0
	for c := range f.clips {
		worst = math.Max(worst, slices.Max(f.misfits(c)))
	}
	if worst < f.outstanding() {
		return f.findTaps(), nil
	}
	// Those that stand out lead less and less.
	before := f.values()
	for range 4 {
		limit := f.outstanding()
		for c := range f.clips {
			k := &f.clips[c]
			for s, r := range f.misfits(c) {
				q := 1.0
				if r > limit {
					q = limit / r * limit / r
				}
				for i := k.segments[s].from; i < k.segments[s].to; i++ {
					k.obs[i].weight = q
				}
			}
		}
		if err := f.descend(ctx, 12, 1e-2, false); err != nil {
			return false, err
		}
	}
	limit := f.outstanding()
	for c := range f.clips {
		k := &f.clips[c]
		for _, h := range f.runs(c, limit) {
			f.opt.log("from %.2f s to %.2f s: residuals of up to %.1f, elsewhere up to %.1f", h.from, h.to, h.worst, limit)
			k.leaveOut(h.from, h.to, h.why)
			found = true
		}
	}
	for c := range f.clips {
		k := &f.clips[c]
		for i := range k.obs {
			k.obs[i].weight = 1
		}
		if len(k.obs) < fewest {
			return false, fmt.Errorf("something other than the toy's parts acts nearly all through the clip%s: a hand, or a part that is not in the rig", k.its(""))
		}
	}
	if !found {
		f.setValues(before)
	}
	return found, nil
}

// findTaps looks for a tap between two stretches, which shows only in that the state
// jumps from the one to the next, as it does nowhere else.
func (f *fitter) findTaps() (found bool) {
	for c := range f.clips {
		k := &f.clips[c]
		var all []float64
		jumps := f.jumps(c)
		for _, x := range jumps {
			if !math.IsNaN(x) {
				all = append(all, x)
			}
		}
		if len(all) < 10 {
			continue
		}
		usual := math.Max(median(all), 1)
		limit := math.Max(tapFrom*usual, usual+2*handSpread*1.4826*spread(all, usual))
		var at []int
		for s, x := range jumps {
			if x > limit {
				at = append(at, s)
			}
		}
		if len(at) == 0 || len(at) > mostHands {
			continue
		}
		for i := len(at) - 1; i >= 0; i-- {
			t := k.segments[at[i]].t1
			f.opt.log("at %.2f s the state jumps by %.1f times its uncertainty, elsewhere by up to %.1f", t, jumps[at[i]], limit)
			k.leaveOut(t-tapFor, t+tapFor, "a jump of the speed: a tap by hand, mostly")
			found = true
		}
	}
	return found
}

// spread is the median distance from the usual value.
func spread(all []float64, usual float64) float64 {
	d := make([]float64, len(all))
	for i, x := range all {
		d[i] = math.Abs(x - usual)
	}
	return median(d)
}

// outstanding is the r.m.s. residual from which a stretch stands out of the others.
func (f *fitter) outstanding() float64 {
	var all []float64
	for c := range f.clips {
		all = append(all, f.misfits(c)...)
	}
	usual := math.Max(median(all), 1)
	return math.Max(handFrom*usual, usual+handSpread*1.4826*spread(all, usual))
}

// runs are the times of a clip in which stretches leave more than limit, with what
// lies next to them; none where that is the model's fault.
func (f *fitter) runs(c int, limit float64) []interval {
	k := &f.clips[c]
	rms := f.misfits(c)
	n := len(rms)
	var out []interval
	bad := 0
	for s := 0; s < n; s++ {
		if rms[s] <= limit {
			continue
		}
		e := s
		for e+1 < n && (rms[e+1] > limit || e+2 < n && rms[e+2] > limit) {
			e++
		}
		bad += e - s + 1
		h := interval{from: k.segments[max(s-1, 0)].t0, to: k.segments[min(e+1, n-1)].t1, worst: slices.Max(rms[s : e+1])}
		switch {
		case s <= 1:
			h.from, h.why = k.segments[0].t0, "not yet as the model moves: a hand, or a bob that was not seen well"
		case e >= n-2:
			h.to, h.why = k.obs[len(k.obs)-1].t+1, "no longer as the model moves: a hand, or a bob that was not seen well"
		default:
			h.why = "not as the model moves there at other times: a push by hand, or a bob that was not seen well"
			if !f.passedElsewhere(c, s, e, rms, limit) {
				return nil
			}
		}
		if b := k.battery; b != nil && h.from < b.at+aboutSwitch && h.to > b.at-aboutSwitch {
			h.why = "about the time at which the coil went on or off"
		}
		out = append(out, h)
		s = e
	}
	if len(out) > mostHands || bad > n/2 {
		return nil
	}
	return out
}

// passedElsewhere tells whether the toy came past where it was in stretches from s
// to e at other times too, and the model explains it then.
func (f *fitter) passedElsewhere(c, s, e int, rms []float64, limit float64) bool {
	k := &f.clips[c]
	known, all := 0, 0
	for w := range k.watched {
		lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
		for i := range k.obs {
			if o := &k.obs[i]; o.who == w {
				lo[0], hi[0] = math.Min(lo[0], o.a), math.Max(hi[0], o.a)
				lo[1], hi[1] = math.Min(lo[1], o.b), math.Max(hi[1], o.b)
			}
		}
		near := 0.1 * math.Hypot(hi[0]-lo[0], hi[1]-lo[1])
		for g := s; g <= e; g++ {
			if rms[g] <= limit {
				continue
			}
			for i := k.segments[g].from; i < k.segments[g].to; i++ {
				o := &k.obs[i]
				if o.who != w {
					continue
				}
				seen := false
				for other := range k.segments {
					if other >= s-1 && other <= e+1 || rms[other] > limit {
						continue
					}
					for j := k.segments[other].from; j < k.segments[other].to && !seen; j++ {
						p := &k.obs[j]
						seen = p.who == w && math.Hypot(p.a-o.a, p.b-o.b) < near
					}
					if seen {
						break
					}
				}
				all++
				if seen {
					known++
				}
			}
		}
	}
	return known >= all*4/5
}

// leftOut tells what of the clips took no part in the fit.
func (r *reporter) leftOut() {
	for c := range r.clips {
		k := &r.clips[c]
		for i := range k.left {
			h := &k.left[i]
			text := fmt.Sprintf("From %.2f s to %.2f s: %s.", h.gone[0].t, h.gone[len(h.gone)-1].t, h.why)
			r.add(finding.Finding{Key: "match.left_out", Subject: k.name, Name: "Left out of the matching", Kind: finding.Statement, Unit: "1", Text: text, Method: r.say})
		}
	}
}
