package match

import (
	"context"
	"fmt"
	"math"
	"slices"
	"sync"
	"time"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// Which further clip would tell more: each of a few that a user can film at once is
// computed from the matched model, with this clip's camera and noise, and its share
// of information is added to that of the clips there are (optimal design: V. V.
// Fedorov, "Theory of Optimal Experiments", 1972).

// proposal is one further clip.
type proposal struct {
	words   string
	entry   *rig.Clip
	scale   float64 // of the release against this one's; 0: goes on where this one ends
	moments bool    // may be proposed for moments
}

const (
	furtherTime  = 20 * time.Second // for all proposals together
	furtherSpan  = 20.0             // s, the longest further clip that is computed
	worthTelling = 0.6              // of an uncertainty, that a further clip must leave at most
	wellKnown    = 0.01             // relative uncertainty below which nothing is proposed
)

// advice is what a further clip would bring.
type advice struct {
	words string
	u     float64 // the standard uncertainty that it would leave
}

// proposals are the further clips that suit the toy.
func (r *reporter) proposals() []proposal {
	k := &r.clips[0]
	lone := len(r.rig.Parts) == 1 && r.nv == 1
	out := []proposal{{words: "the same release filmed on for as long again", moments: true}}
	from := func(scale float64, words string) proposal {
		p := proposal{words: words, scale: scale, moments: true}
		if lone {
			a, _ := k.model.Angle(k.segments[0].y, 0)
			// The release: the greatest angle at first, not where the clip happens to begin.
			for i := range k.segments {
				if k.segments[i].t0 > k.segments[0].t0+2 {
					break
				}
				if b, _ := k.model.Angle(k.segments[i].y, 0); math.Abs(b) > math.Abs(a) {
					a = b
				}
			}
			p.words = fmt.Sprintf("a second release from about %.0f°", math.Abs(a)*scale*180/math.Pi)
		}
		return p
	}
	if r.reach() < 0.9 {
		out = append(out, from(1.5, "a second release half as large again"))
	}
	out = append(out, from(1.0/3, "a second release a third as large"))
	for i := range r.rig.Magnets {
		g := &r.rig.Magnets[i]
		if g.Part != "" && g.Part != rig.Base {
			continue
		}
		at := rig.XYZ(g.AtM)
		if p, ok := k.model.MagnetPlace(k.model.Rest(), g.Name); ok {
			at = p
		}
		away, gap := r.away(g, at)
		if !(gap > 0) {
			continue
		}
		by := 0.01
		if gap > 0.05 {
			by = -0.01
		}
		to := []float64{at[0] + by*away[0], at[1] + by*away[1], at[2] + by*away[2]}
		where := "farther from"
		if by < 0 {
			where = "nearer to"
		}
		out = append(
			out,
			proposal{words: fmt.Sprintf("the same release with “%s” moved 10 mm %s the moving one (moved_mm in a [[clip]] entry)", g.Name, where), entry: &rig.Clip{Battery: true, Moved: map[string][]float64{g.Name: to}}, scale: 1, moments: true},
			proposal{words: fmt.Sprintf("the same release with “%s” taken out (without in a [[clip]] entry)", g.Name), entry: &rig.Clip{Battery: true, Without: []string{g.Name}}, scale: 1, moments: true},
		)
	}
	if len(r.rig.Coils) > 0 && r.driven() {
		out = append(out, proposal{words: "a clip with the battery out (battery = false in a [[clip]] entry)", entry: &rig.Clip{}, scale: 1, moments: true})
	}
	return out
}

// reach is the greatest angle of a single hinged part at first, rad; 0 else.
func (r *reporter) reach() float64 {
	k := &r.clips[0]
	most := 0.0
	for i := range k.segments {
		for p := range k.model.Parts() {
			if k.model.OneAxis(p) {
				a, _ := k.model.Angle(k.segments[i].y, p)
				most = math.Max(most, math.Abs(a))
			}
		}
	}
	return most
}

// away is the direction from the nearest moving magnet at rest to a base magnet, and
// their distance.
func (r *reporter) away(g *rig.Magnet, at [3]float64) (d [3]float64, gap float64) {
	m := r.clips[0].model
	best := math.Inf(1)
	for i := range r.rig.Magnets {
		o := &r.rig.Magnets[i]
		if o.Part == "" || o.Part == rig.Base {
			continue
		}
		p, ok := m.MagnetPlace(m.Rest(), o.Name)
		if !ok {
			continue
		}
		e := [3]float64{at[0] - p[0], at[1] - p[1], at[2] - p[2]}
		if l := math.Sqrt(e[0]*e[0] + e[1]*e[1] + e[2]*e[2]); l < best && l > 0 {
			best, d = l, [3]float64{e[0] / l, e[1] / l, e[2] / l}
		}
	}
	if math.IsInf(best, 1) {
		return d, 0
	}
	return d, best
}

// further finds, for each number asked for that is not well known, the further clip
// that would tell most of it.
func (r *reporter) further(ctx context.Context) map[int]advice {
	out := map[int]advice{}
	var open []int
	for i := range r.params {
		q := &r.params[i]
		if q.asked && q.role == byModel && !(r.res.Estimates[i].U < wellKnown*math.Abs(q.value)) {
			open = append(open, i)
		}
	}
	if len(open) == 0 || r.opt.Quick || len(r.clips[0].segments) == 0 {
		return out
	}
	within := furtherTime
	if end, ok := ctx.Deadline(); ok { // the numbers themselves must not be late for it
		within = min(within, time.Until(end)/3)
	}
	limited, stop := context.WithTimeout(ctx, within)
	defer stop()
	all := r.proposals()
	found := make([]map[string]float64, len(all))
	var wait sync.WaitGroup
	next := make(chan int)
	for range min(r.opt.workers(), len(all)) {
		wait.Go(func() {
			for i := range next {
				found[i] = r.with(limited, &all[i])
			}
		})
	}
	for i := range all {
		next <- i
	}
	close(next)
	wait.Wait()
	for _, i := range open {
		q := &r.params[i]
		u := r.res.Estimates[i].U
		for n, p := range all {
			if v, ok := found[n][q.address]; ok && v < worthTelling*u && (!q.moment() || p.moments) {
				// A simple one is preferred to one that is hardly better.
				if a, ok := out[i]; !ok || v < 0.8*a.u {
					out[i] = advice{p.words, v}
				}
			}
		}
	}
	return out
}

// with gives the standard uncertainties of the numbers asked for, by address, that the
// clips would leave together with a further one; nil where that cannot be computed.
func (r *reporter) with(ctx context.Context, p *proposal) map[string]float64 {
	g, err := r.joined(ctx, p)
	if err != nil || ctx.Err() != nil {
		return nil
	}
	j, err := g.judge()
	if err != nil {
		return nil
	}
	out := map[string]float64{}
	for i := range g.params {
		q := &g.params[i]
		if !q.asked {
			continue
		}
		k := slices.IndexFunc(r.params, func(o param) bool { return o.address == q.address })
		if k < 0 {
			continue
		}
		// Residuals that hang together widen both alike.
		widen := r.j.cov[k*r.j.np+k] / r.j.inverse[k*r.j.np+k]
		if v := j.inverse[i*j.np+i] * widen; v > 0 && !math.IsNaN(v) {
			out[q.address] = math.Sqrt(v)
		}
	}
	return out
}

// joined is the fit as it would stand with a further clip as proposed, at the optimum.
func (r *reporter) joined(ctx context.Context, pr *proposal) (*fitter, error) {
	f := r.fitter
	first := &f.clips[0]
	v, err := variant(f.rig, pr.entry)
	if err != nil {
		return nil, err
	}
	k := clipData{
		name: "a further clip", entry: pr.entry, track: first.track, tables: first.tables, camera: first.camera, cameraOf: first.cameraOf,
		moved: map[string]bool{}, undriven: first.undriven, above: first.above, uClock: first.uClock, watched: first.watched, dims: first.dims,
	}
	if pr.entry != nil {
		k.undriven = !pr.entry.Battery || len(v.Coils) == 0
		for name := range pr.entry.Moved {
			k.moved[name] = true
		}
	}
	if k.model, err = toy.New(v); err != nil {
		return nil, err
	}
	g := &fitter{
		rig: f.rig, opt: f.opt, source: f.source, tol: 1e-10, scatter: 1, widened: 1, lax: meritBind, nv: f.nv,
		rate: f.rate, angle: f.angle, bind: finalBind, exact: true, oneMotion: f.oneMotion, growth: f.growth,
	}
	g.clips = append(slices.Clone(f.clips), k)
	for c := range f.clips { // several are computed at a time
		g.clips[c].model, g.clips[c].clones = f.clips[c].model.Clone(), nil
	}
	if err := g.buildParams(); err != nil {
		return nil, err
	}
	// The numbers as they were found; the toy stands in the picture as it did.
	same := make([]int, len(g.params)) // of f, −1 for what the further clip adds
	for i := range g.params {
		q := &g.params[i]
		same[i] = slices.IndexFunc(f.params, func(o param) bool { return o.address == q.address })
		from := same[i]
		for _, axis := range []string{"x", "z"} {
			if q.address == g.clips[len(g.clips)-1].place(axis) {
				from = slices.IndexFunc(f.params, func(o param) bool { return o.address == first.place(axis) })
			}
		}
		if from >= 0 {
			q.value, q.scale = f.params[from].value, f.params[from].scale
		}
	}
	for c := range f.clips {
		g.clips[c].segments = recolumned(f.clips[c].segments, same, 2*f.clips[c].model.Freedoms())
	}
	return g, g.film(ctx, len(g.clips)-1, pr, first)
}

// recolumned are segments whose derivatives stand in the order of new parameters.
func recolumned(old []segment, same []int, states int) []segment {
	out := slices.Clone(old)
	for s := range out {
		g := &out[s]
		pick := func(cols [][]float64) [][]float64 {
			if len(cols) == 0 {
				return cols
			}
			n := slices.Clone(cols[:states])
			for _, j := range same {
				if j >= 0 {
					n = append(n, cols[states+j])
				} else {
					n = append(n, make([]float64, len(cols[0])))
				}
			}
			return n
		}
		g.dpos, g.dend = pick(g.dpos), pick(g.dend)
	}
	return out
}

// film computes clip c of the fit as proposed, seen without noise, and the fit's last
// linear problem.
func (g *fitter) film(ctx context.Context, c int, pr *proposal, first *clipData) error {
	k := &g.clips[c]
	p := g.values()
	g.apply(c, k.model, p)
	m := k.model
	y := slices.Clone(first.segments[0].y)
	switch {
	case pr.scale == 0:
		y = slices.Clone(first.segments[len(first.segments)-1].end)
	case pr.scale != 1:
		d := make([]float64, 2*m.Freedoms())
		rest := m.Rest()
		m.Deviation(rest, y, d)
		for i := range d {
			d[i] *= pr.scale
		}
		copy(y, rest)
		m.Displace(y, d)
	}
	m.Normalise(y)
	step := first.step()
	length := math.Min(first.obs[len(first.obs)-1].t-first.obs[0].t, furtherSpan)
	var w [3][]float64
	var row float64
	for i := range first.obs {
		o := &first.obs[i]
		w[0], w[1], w[2] = append(w[0], o.w0), append(w[1], o.w1), append(w[2], o.w2)
		row += o.row / float64(len(first.obs))
	}
	typical := observation{w0: median(w[0]), w1: median(w[1]), w2: median(w[2]), row: row, weight: 1}
	var times []float64
	var states [][]float64
	for i := range int(length / step) {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		times, states = append(times, float64(i)*step), append(states, slices.Clone(y))
		for who := range k.watched {
			o := typical
			o.who, o.t = who, times[i]
			k.obs = append(k.obs, o)
		}
		if err := m.Move(y, step, k.undriven); err != nil {
			return err
		}
	}
	if len(k.obs) < fewest {
		return fmt.Errorf("the clip is too short")
	}
	var busy []bool
	if !k.undriven {
		busy = m.MayPush(times, states, pushMargin*step, maxHole*step)
	}
	span := longest
	if g.growth > 0 {
		span = math.Min(span, math.Log(mostGrowth)/g.growth)
	}
	var at []float64
	var ys [][]float64
	for i, t := range times {
		if len(at) == 0 || t-at[len(at)-1] >= span && (busy == nil || !busy[i]) {
			at, ys = append(at, t), append(ys, states[i])
		}
	}
	g.cut(c, at, ys)
	see := g.viewer(c, p)
	s := &shot{f: g, see: &see, m: m}
	for i := range k.segments {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		seg := &k.segments[i]
		if err := s.plain(ctx, seg); err != nil {
			return err
		}
		if err := g.slopes(ctx, s, c, seg, p, true); err != nil {
			return err
		}
		for n := range seg.to - seg.from {
			o := &k.obs[seg.from+n]
			o.a, o.b = see.project(o.who, seg.pos[n])
		}
	}
	g.final = g.solveChain(p, 0, true)
	return nil
}
