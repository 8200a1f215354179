package match

import (
	"fmt"
	"math"
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
	uAxis     = math.Pi / 180 // rad, of a magnet's axis each way, where the rig says nothing (common practice, no source)
	uBobPlace = 0.5e-3        // m, of a bob's place on its part (common practice, no source)
	uPlace    = 0.5e-3        // m, of a coordinate in the rig, where it says nothing
	wideShift = 0.1           // m, of the toy's place in the picture: found from the clip
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
		b.magnetAxis(&b.r.Magnets[i], ball)
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
		address: n.Address, unit: n.Unit.SI, source: "the rig's number for " + n.Address, asked: asked, clip: -1,
		targets: b.set(addresses, 0, 1), tied: addresses, nuisance: !asked,
	}
	if p.moment() { // weaker where it was warmer
		for c := range p.targets {
			for t := range p.targets[c] {
				p.targets[c][t].coef = b.f.warmth(c)
			}
		}
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
