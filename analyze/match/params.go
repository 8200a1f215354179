package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// role is how a parameter acts.
type role uint8

const (
	byModel   role = iota // changes the motion: the model is integrated anew
	byBobX                // a bob's place on its part
	byBobZ                //
	byShiftX              // the toy's place in a clip's plane
	byShiftZ              //
	byCamera              // a source of the camera's uncertainty, in its standard uncertainties
	byScale               // of a track without a camera, relative
	byTurn                // of a track without a camera: the vertical; of an angle table: its zero
	byRowTime             // read-out, s
	byClock               // relative
)

// param is one parameter of the fit, in SI.
type param struct {
	address  string // a rig's address, or what it is
	unit     string
	source   string // for the budget, plain words
	role     role
	asked    bool // the rig says "fit"
	prior    bool
	mean, u  float64 // of the prior
	lo, hi   float64
	value    float64
	scale    float64 // a typical small change
	nuisance bool    // not asked for: its derivatives need not be the freshest
	positive bool    // moves by no more than a factor of four per step

	targets [][]target // by clip, for byModel
	clip    int        // −1: all
	bob     string
	which   int      // source of the camera
	tied    []string // addresses that take this value
	held    bool
	gauge   bool // the prior only keeps what nothing determines from drifting
}

// target is a number of a clip's model that a parameter sets: base + coef·value.
type target struct {
	index      int
	base, coef float64
}

const (
	uBobPlace = 0.5e-3 // m, of a bob's place on its part (common practice, no source)
	uPlace    = 0.5e-3 // m, of a coordinate in the rig, where it says nothing
	wideShift = 0.1    // m, of the toy's place in the picture: found from the clip
)

// builder collects the parameters.
type builder struct {
	f    *fitter
	r    *rig.Rig
	tie  map[string]int // address -> group in [fit] equal
	done map[string]bool
	out  []param
}

func (f *fitter) buildParams() error {
	b := &builder{f: f, r: f.rig, tie: map[string]int{}, done: map[string]bool{}}
	for g, group := range b.r.Fit.Equal {
		for _, a := range group {
			n, err := b.r.Find(a)
			if err != nil {
				return fmt.Errorf("[fit] equal: %w", err)
			}
			b.tie[n.Address] = g + 1
		}
	}
	refit := map[string]bool{}
	for _, a := range b.r.Fitted.Of {
		refit[a] = true
	}
	for _, n := range b.r.Numbers() {
		if !n.MayFit || b.done[n.Address] {
			continue
		}
		v := *n.Value
		ruled := strings.HasSuffix(n.Address, ".inertia") || strings.HasSuffix(n.Address, ".gap")
		asked := v.Fit || refit[n.Address] && !ruled
		if ruled || !asked && !(v.Set && v.U > 0) {
			continue
		}
		if f.modelIndex(n.Address) < 0 {
			continue // of something that no clip has
		}
		b.number(n, asked)
	}
	ball := false
	for i := range b.r.Parts {
		b.part(&b.r.Parts[i], i == 0)
		ball = ball || b.r.Parts[i].Joint == "ball"
	}
	for i := range b.r.Magnets {
		b.magnetPlace(&b.r.Magnets[i], ball)
	}
	b.seen()
	b.gauge()
	f.params = b.out
	for i := range f.params {
		p := &f.params[i]
		if bounds, ok := b.r.Fit.Bounds[p.address]; ok {
			p.lo, p.hi = bounds[0], bounds[1]
		}
		p.value = math.Min(math.Max(p.value, p.lo), p.hi)
	}
	return nil
}

// gauge keeps near its start what may be determined only together with others: one
// of several free moments that act by their products alone, and an inertia that
// nobody knows.
func (b *builder) gauge() {
	scale := b.scaleFree()
	for i := range b.out {
		p := &b.out[i]
		if !p.asked || p.prior || p.value == 0 {
			continue
		}
		switch {
		case i == scale:
			p.prior, p.gauge, p.mean, p.u = true, true, p.value, tightGauge*math.Abs(p.value)
		case strings.HasSuffix(p.address, ".inertia"):
			p.prior, p.gauge, p.mean, p.u = true, true, p.value, math.Abs(p.value)
		}
	}
}

// tightGauge is the relative width of a gauge's prior while the optimum is sought;
// for the uncertainties it is 1.
const tightGauge = 1e-3

// scaleFree is a free moment that may be multiplied by any number while others are
// divided by it, with no effect: all pairs that act are of two free groups of
// magnets, and the groups fall into two camps. −1 where there is none.
func (b *builder) scaleFree() int {
	of := map[string]int{}
	for i := range b.out {
		if b.out[i].moment() && b.out[i].asked {
			for _, a := range b.out[i].tied {
				owner, _ := split(a)
				of[owner] = i
			}
		}
	}
	camp := map[int]int{}
	first := -1
	type edge struct{ a, b int }
	var edges []edge
	for i := range b.r.Magnets {
		for k := range b.r.Magnets[:i] {
			p, q := &b.r.Magnets[i], &b.r.Magnets[k]
			if p.Part == q.Part {
				continue
			}
			x, okX := of[p.Name]
			y, okY := of[q.Name]
			if !okX && !okY {
				continue
			}
			if !okX || !okY || x == y {
				return -1 // one is known, or both are the same
			}
			edges = append(edges, edge{x, y})
			if first < 0 {
				first = min(x, y)
			}
		}
	}
	if first < 0 {
		return -1
	}
	camp[first] = 1
	for range edges {
		for _, e := range edges {
			for _, f := range []edge{e, {e.b, e.a}} {
				if camp[f.a] == 0 {
					continue
				}
				if camp[f.b] == camp[f.a] {
					return -1
				}
				camp[f.b] = -camp[f.a]
			}
		}
	}
	return first
}

// moment tells whether the parameter is the strength of magnets.
func (p *param) moment() bool {
	return p.role == byModel && (strings.HasSuffix(p.address, ".moment") && !strings.Contains(p.address, "weight") || strings.HasSuffix(p.address, ".remanence"))
}

func (b *builder) add(p param) *param {
	if p.lo == 0 && p.hi == 0 {
		p.lo, p.hi = math.Inf(-1), math.Inf(1)
	}
	b.out = append(b.out, p)
	return &b.out[len(b.out)-1]
}

// set makes the targets of a model's number with value base + coef·v in every clip.
func (b *builder) set(names []string, base, coef float64) [][]target {
	out := make([][]target, len(b.f.clips))
	for c := range b.f.clips {
		for _, name := range names {
			if i, err := b.f.clips[c].model.Index(name); err == nil {
				out[c] = append(out[c], target{i, base, coef})
			}
		}
	}
	return out
}

// number adds a number that the rig may leave to the matching, with those tied to it.
func (b *builder) number(n rig.Number, asked bool) {
	v := *n.Value
	addresses := []string{n.Address}
	b.done[n.Address] = true
	if g := b.tie[n.Address]; g > 0 {
		for _, o := range b.r.Numbers() {
			if b.tie[o.Address] == g && !b.done[o.Address] {
				b.done[o.Address] = true
				addresses = append(addresses, o.Address)
			}
		}
	}
	p := param{
		address: n.Address, unit: n.Unit.SI, source: "the rig's " + n.Address, asked: asked, clip: -1,
		targets: b.set(addresses, 0, 1), tied: addresses, nuisance: !asked,
	}
	p.value = v.V
	if !v.Set {
		p.value = b.f.clips[b.f.holder(n.Address)].model.Get(b.f.modelIndex(n.Address))
	}
	if !asked {
		p.prior, p.mean, p.u = true, v.V, v.U
	}
	p.lo, p.hi = math.Inf(-1), math.Inf(1)
	switch last := n.Address[strings.LastIndexByte(n.Address, '.')+1:]; last {
	case "viscous", "drag", "dry", "kick", "eddy":
		p.lo = 0
	case "rate", "spin_inertia", "remanence":
		p.lo, p.positive = 0, p.value > 0
	case "moment":
		p.positive = true
	}
	b.add(p)
}

// part adds what is never exactly known of a part.
func (b *builder) part(q *rig.Part, first bool) {
	if b.f.modelIndex(q.Name+".inertia") < 0 {
		return
	}
	// Inertia is always free: held 0.5 % wrong it would move a pair's product by
	// far more.
	address := q.Name + ".inertia"
	m := b.f.clips[b.f.holder(address)].model
	p := param{
		address: address, unit: "kg·m²", source: "the inertia of " + q.Name, clip: -1, targets: b.set([]string{address}, 0, 1),
		tied: []string{address}, asked: q.Inertia.Fit, positive: true, hi: math.Inf(1),
		value: q.Inertia.Or(m.Get(b.f.modelIndex(address))),
	}
	if q.Inertia.Set && !q.Inertia.Fit {
		u := q.Inertia.U
		if slices.Contains(b.r.Fitted.Of, address) || u == 0 {
			u = 0.01 * q.Inertia.V // the rig's default: what the clip told is not told twice
		}
		p.prior, p.mean, p.u = true, q.Inertia.V, u
	}
	b.add(p)

	centre := rig.XYZ(q.CentreM)
	uc := q.UCentreM.Or(uPlace)
	if uc == 0 {
		uc = uPlace
	}
	if g := q.MassKg; g.Set && g.V > 0 {
		if c := math.Hypot(centre[0], centre[2]); c > 10*uc {
			// Mass, lever and gravity act together, as the weight moment.
			grav := b.r.Gravity
			ug := 0.01 / 9.81
			if grav.Set && grav.V > 0 {
				ug = grav.U / grav.V
			}
			u := math.Sqrt(g.U*g.U/(g.V*g.V) + uc*uc/(c*c) + ug*ug)
			b.add(param{
				address: q.Name + ".weight moment", unit: "1", source: "the weight moment of " + q.Name, clip: -1, nuisance: true,
				targets: b.set([]string{q.Name + ".mass"}, 0, g.V), prior: true, mean: 1, u: u, value: 1,
			})
			// Across the lever: which way it hangs. A ball joint's part has no such way.
			if q.Joint != "ball" {
				b.place(q.Name+".centre.x", "the centre of mass of "+q.Name, centre[0], uc)
			}
		} else {
			b.place(q.Name+".centre.x", "the centre of mass of "+q.Name, centre[0], uc)
			b.place(q.Name+".centre.z", "the centre of mass of "+q.Name, centre[2], uc)
		}
	}
	if !first {
		pivot := rig.XYZ(q.PivotM)
		u := q.UPivotM.Or(uPlace)
		if u == 0 {
			u = uPlace
		}
		b.place(q.Name+".pivot.x", "the pivot of "+q.Name, pivot[0], u)
		b.place(q.Name+".pivot.z", "the pivot of "+q.Name, pivot[2], u)
	}
}

func (b *builder) place(name, source string, x, u float64) {
	if b.f.modelIndex(name) < 0 {
		return
	}
	b.add(param{
		address: name, unit: "m", source: source, clip: -1, nuisance: true, prior: true, mean: x, u: u, value: x,
		targets: b.set([]string{name}, 0, 1), scale: 1e-5,
	})
}

// magnetPlace adds where a magnet is.
func (b *builder) magnetPlace(g *rig.Magnet, ball bool) {
	u := g.UAtM.Or(uPlace)
	if u == 0 {
		u = uPlace
	}
	what := "the place of " + g.Name
	at := rig.XYZ(g.AtM)
	base := g.Part == "" || g.Part == rig.Base
	if !base {
		if b.meetsOnlyBase(g) {
			return // with the base's
		}
		if q := b.r.FindPart(g.Part); q == nil || q.Joint != "ball" {
			b.place(g.Name+".at.x", what, at[0], u)
		}
		b.place(g.Name+".at.z", what, at[2], u)
		return
	}
	// What counts is where it is from the moving magnet, both as read with a ruler.
	near, distance := b.nearest(g)
	if near != nil {
		v := near.UAtM.Or(uPlace)
		u = math.Hypot(u, v)
	}
	b.place(g.Name+".at.x", "the sideways place of "+g.Name, at[0], u)
	if ball {
		b.place(g.Name+".at.y", "the sideways place of "+g.Name, at[1], u)
	}
	if near == nil {
		return
	}
	address := g.Name + ".gap"
	gap := distance
	if g.GapM.Set {
		gap = g.GapM.V
	}
	p := param{
		address: address, unit: "m", source: "the gap to " + g.Name, clip: -1, tied: []string{address},
		value: gap, lo: 1e-3, hi: 1, scale: 1e-5, asked: g.GapM.Fit || g.GapFit, positive: true,
	}
	if !p.asked {
		p.prior, p.mean, p.u = true, gap, u
		if slices.Contains(b.r.Fitted.Of, address) {
			p.mean = distance // what the ruler said; the fitted gap is where to start
		}
		if g.GapM.Set && g.GapM.U > 0 && !slices.Contains(b.r.Fitted.Of, address) {
			p.u = g.GapM.U
		}
	}
	p.targets = make([][]target, len(b.f.clips))
	for c := range b.f.clips {
		k := &b.f.clips[c]
		if k.moved[g.Name] {
			if i, err := k.model.Index(g.Name + ".at.z"); err == nil {
				p.targets[c] = []target{{i, k.model.Get(i) + gap, -1}}
			}
			continue
		}
		if i, err := k.model.Index(address); err == nil {
			p.targets[c] = []target{{i, 0, 1}}
		}
	}
	b.add(p)
}

// meetsOnlyBase tells whether a moving magnet's place is only felt as its
// distance from one magnet of the base.
func (b *builder) meetsOnlyBase(g *rig.Magnet) bool {
	n := 0
	for i := range b.r.Magnets {
		o := &b.r.Magnets[i]
		if o.Part != g.Part && o.Part != "" && o.Part != rig.Base {
			return false
		}
		if o.Part == "" || o.Part == rig.Base {
			n++
		}
	}
	return n <= 1
}

// nearest is the moving magnet nearest to a base magnet at rest, and how far it is.
func (b *builder) nearest(g *rig.Magnet) (*rig.Magnet, float64) {
	m := b.f.clips[0].model
	rest := m.Rest()
	at := rig.XYZ(g.AtM)
	var near *rig.Magnet
	best := math.Inf(1)
	for i := range b.r.Magnets {
		o := &b.r.Magnets[i]
		k, err := m.Part(o.Part)
		if err != nil {
			continue
		}
		p, r := m.Pose(rest, k)
		x := rig.XYZ(o.AtM)
		d := 0.0
		for j := range 3 {
			e := p[j] + r[j][0]*x[0] + r[j][1]*x[1] + r[j][2]*x[2] - at[j]
			d += e * e
		}
		if d < best {
			best, near = d, o
		}
	}
	return near, math.Sqrt(best)
}

// seen adds what the camera, the clock and the bobs' places leave open.
func (b *builder) seen() {
	byBob := map[string]bool{}
	for c := range b.f.clips {
		k := &b.f.clips[c]
		same := false
		for o := range c {
			same = same || sameCamera(&b.f.clips[o], k)
		}
		if len(k.tables) > 0 {
			for i, o := range k.watched {
				if o.bob < 0 {
					b.add(param{
						address: o.name + ".zero", unit: "rad", source: "the zero of the angles", role: byTurn, clip: c, which: i, nuisance: true,
						prior: true, u: 0.02, scale: 1e-5,
					})
				}
			}
			b.clock(c, k.uClock, same)
			continue
		}
		b.add(param{address: k.place("x"), unit: "m", source: "the pivot in the picture", role: byShiftX, clip: c, prior: true, u: wideShift, scale: 1e-5, nuisance: true})
		b.add(param{address: k.place("z"), unit: "m", source: "the pivot in the picture", role: byShiftZ, clip: c, prior: true, u: wideShift, scale: 1e-5, nuisance: true})
		for _, o := range k.watched {
			if byBob[o.name] {
				continue
			}
			byBob[o.name] = true
			if !k.model.OneAxis(o.part) {
				b.add(param{address: o.name + ".at.z", unit: "m", source: "the bobs' places on their parts", role: byBobZ, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
				continue
			}
			b.add(param{address: o.name + ".at.x", unit: "m", source: "the bobs' places on their parts", role: byBobX, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
			b.add(param{address: o.name + ".at.z", unit: "m", source: "the bobs' places on their parts", role: byBobZ, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
		}
		b.clock(c, k.uClock, same)
		if same {
			continue
		}
		cal := &k.track.Cal
		if k.camera != nil {
			for i, s := range cal.Lens.Unsure {
				b.add(param{address: k.its(s.Source), unit: "1", source: s.Source, role: byCamera, clip: c, which: i, prior: true, u: 1, scale: 0.1, nuisance: true})
			}
		} else {
			u := cal.UScale
			if u == 0 {
				u = 1e-3
			}
			b.add(param{address: k.its("the scale"), unit: "1", source: "the scale", role: byScale, clip: c, prior: true, u: u, scale: 1e-5, nuisance: true})
			u = cal.UVertical
			if u == 0 {
				u = math.Pi / 180
			}
			b.add(param{address: k.its("the vertical"), unit: "rad", source: "the vertical", role: byTurn, clip: c, prior: true, u: u, scale: 1e-5, nuisance: true})
		}
		if u := cal.UReadoutS; u > 0 {
			b.add(param{address: k.its("the read-out"), unit: "s", source: "the shutter's read-out", role: byRowTime, clip: c, prior: true, u: u, scale: 1e-4, nuisance: true})
		}
	}
	// A second clip by the same camera shares its numbers.
	for i := range b.out {
		p := &b.out[i]
		if p.role < byCamera || p.clip < 0 || len(b.f.clips[p.clip].tables) > 0 {
			continue
		}
		p.clip = b.f.clips[p.clip].cameraOf
	}
}

func (b *builder) clock(c int, u float64, same bool) {
	if same || !(u > 0) {
		return
	}
	b.add(param{address: b.f.clips[c].its("the clock"), unit: "1", source: "the camera's clock", role: byClock, clip: c, prior: true, u: u, scale: 1e-6, nuisance: true})
}

// modelIndex is where a number stands in the models, −1 where none has it.
func (f *fitter) modelIndex(name string) int {
	for c := range f.clips {
		if i, err := f.clips[c].model.Index(name); err == nil {
			return i
		}
	}
	return -1
}

// holder is the first clip whose model has a number.
func (f *fitter) holder(name string) int {
	for c := range f.clips {
		if _, err := f.clips[c].model.Index(name); err == nil {
			return c
		}
	}
	return 0
}

// apply sets a clip's model to the parameters.
func (f *fitter) apply(c int, m *toy.Model, p []float64) {
	for j := range f.params {
		if f.params[j].role != byModel {
			continue
		}
		for _, t := range f.params[j].targets[c] {
			m.Set(t.index, t.base+t.coef*p[j])
		}
	}
}
