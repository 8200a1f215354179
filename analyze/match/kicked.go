package match

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"lodeswing/analyze/finding"
)

// switched is when a coil's battery was taken out or put in within a clip.
type switched struct {
	at  float64 // s; a stretch begins there
	off bool    // it is off from there on, else up to there
}

// off tells whether the coils of a clip do not push at time t.
func (k *clipData) off(t float64) bool {
	return k.undriven || k.battery != nil && (t >= k.battery.at) == k.battery.off
}

const (
	tellingKick = 0.25 // of the usual kick: the uncertainty up to which a stretch tells one from none
	fewestKicks = 3    // stretches with, and without, that a switch takes
)

// findSwitch looks, on free stretches, whether a clip of a kicked toy holds a part
// without kicks: each stretch with a pass over the coil says by itself how much it was
// kicked. found tells that a switch was found that was not known before.
func (f *fitter) findSwitch(c int) (found bool) {
	k := &f.clips[c]
	if k.undriven || k.battery != nil || len(f.rig.Coils) != 1 {
		return false
	}
	kick := slices.IndexFunc(f.params, func(q param) bool {
		_, what := split(q.address)
		return what == "kick" && q.role == byModel && len(q.targets[c]) > 0
	})
	if kick < 0 || f.params[kick].held {
		return false
	}
	type told struct {
		at   int // stretch
		e, u float64
	}
	var all []told
	rows := f.rower(c, f.values())
	for s := range k.segments {
		if e, u, ok := f.ownKick(rows, &k.segments[s], kick); ok {
			all = append(all, told{s, e, u})
		}
	}
	if len(all) < 2*fewestKicks {
		return false
	}
	values := make([]float64, len(all))
	for i := range all {
		values[i] = all[i].e
	}
	slices.Sort(values)
	usual := values[len(values)*9/10]
	all = slices.DeleteFunc(all, func(t told) bool { return !(t.u < tellingKick*usual) })
	n := len(all)
	if !(usual > 0) || n < 2*fewestKicks {
		return false
	}
	// The switch that explains most of them.
	on := make([]int, n+1) // with a kick among the first i
	for i, t := range all {
		on[i+1] = on[i]
		if t.e > usual/2 {
			on[i+1]++
		}
	}
	best, at, off := n-on[n], -1, false // wrongly told by "always on"
	for i := fewestKicks; i <= n-fewestKicks; i++ {
		if w := i - on[i] + on[n] - on[i]; w < best {
			best, at, off = w, i, true
		}
		if w := on[i] + n - i - (on[n] - on[i]); w < best {
			best, at, off = w, i, false
		}
	}
	if at < 0 || best > n/10 {
		return false
	}
	k.battery = &switched{at: k.segments[all[at].at].t0, off: off}
	f.opt.log("the coil goes %v at %.2f s: %d of %d stretches say otherwise", map[bool]string{true: "off", false: "on"}[off], k.battery.at, best, n)
	return true
}

// ownKick is the kick that a stretch tells by itself, its state being free.
func (f *fitter) ownKick(rows *rower, g *segment, kick int) (e, u float64, ok bool) {
	n := 2 * rows.k.model.Freedoms()
	if g.to-g.from < 4 || len(g.dpos) <= n+kick {
		return 0, 0, false
	}
	b := rows.block(g)
	np := len(f.params)
	a := mat.NewDense(b.rows, n+1, nil)
	y := mat.NewVecDense(b.rows, nil)
	size := 0.0
	for r := range b.rows {
		for v := range n {
			a.Set(r, v, b.js[r*n+v])
		}
		x := b.jp[r*np+kick]
		size += x * x
		a.Set(r, n, x)
		y.SetVec(r, b.r[r])
	}
	if size == 0 {
		return 0, 0, false
	}
	var normal mat.Dense
	normal.Mul(a.T(), a)
	var inverse mat.Dense
	if inverse.Inverse(&normal) != nil {
		return 0, 0, false
	}
	var right, x mat.VecDense
	right.MulVec(a.T(), y)
	x.MulVec(&inverse, &right)
	if v := inverse.At(n, n); v > 0 {
		return f.params[kick].value + x.AtVec(n), math.Sqrt(v), true
	}
	return 0, 0, false
}

// tellSwitches says where a battery was taken out or put in.
func (r *reporter) tellSwitches() {
	for c := range r.clips {
		k := &r.clips[c]
		if k.battery == nil {
			continue
		}
		text := fmt.Sprintf("No kick is seen after %.1f s: from there on the coil was taken to be off.", k.battery.at)
		if !k.battery.off {
			text = fmt.Sprintf("No kick is seen before %.1f s: up to there the coil was taken to be off.", k.battery.at)
		}
		r.add(finding.Finding{Key: "match.coil_off", Subject: k.name, Name: "Stretch without kicks", Kind: finding.Statement, Unit: "1", Text: text, Method: r.say})
	}
}
