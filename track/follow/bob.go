package follow

import (
	"cmp"
	"image"
	"math"
	"slices"

	"lodeswing/track"
	"lodeswing/track/clip"
	"lodeswing/track/detect"
	"lodeswing/track/link"
	"lodeswing/track/rig"
)

// bob is one bob while it is followed.
type bob struct {
	f          *follower
	rig        *rig.Bob
	look       detect.Look
	subsampled bool
	hasStart   bool
	startU     float64
	startV     float64

	fitter       *detect.Fitter
	filter       *link.Filter
	search       detect.Search
	samples      []track.Sample
	lastU, lastV float64 // where it was last seen, px
	good         int     // frames in which it was seen whole
	fits         int     // frames in which its outline was fitted
	lost         int     // frames since it was last seen
	stall        bool    // the last frame looked like a repeated one
	radius       float64 // usual, px
	level        float64 // usual level of the bob, in the fitter's projection
	contrast     float64 // usual size of its difference from the wall
	rough        float64 // usual noise of its fits over the contrast: print, holes and shine are noise too
	visible      float64 // usual share of its outline that is seen

	// of the present frame
	patch  clip.Patch
	pred   link.Prediction
	guess  detect.Guess
	t      float64 // middle of its exposure, s
	covers []detect.Disc
	result detect.Fit
	have   bool
}

const (
	gate      = 25.0 // squared standard deviations that a sighting may lie from its prediction
	wholeSeen = 0.85 // share of the outline that makes a bob seen whole
)

// expect predicts the bob for this frame.
func (b *bob) expect(frame *clip.Frame) {
	f := b.f
	b.have = false
	b.result = detect.Fit{}
	p := b.filter.Predict(frame.T)
	b.t = frame.T + f.cam.RowTime(p.U, p.V)
	p = b.filter.Predict(b.t)
	b.pred = p
	b.guess = detect.Guess{U: p.U, V: p.V, UPos: math.Max(p.Sigma(), 0.02)}
	if b.filter.Sightings() >= 2 {
		tau, u := f.expo.tau, f.expo.u
		b.guess.SmearU, b.guess.SmearV = p.DU*tau, p.DV*tau
		b.guess.USmear = math.Hypot(p.Speed()*u, math.Min(p.USpeed, p.Speed())*tau)
		r0 := f.cam.RowTime(p.U, p.V)
		tu, tv := f.cam.RowTime(p.U+1, p.V)-r0, f.cam.RowTime(p.U, p.V+1)-r0
		b.guess.Skew = [2][2]float64{{p.DU * tu, p.DU * tv}, {p.DV * tu, p.DV * tv}}
	}
}

// shadow is the disc that the bob covers or may cover, with a margin.
func (b *bob) shadow() detect.Disc {
	u, v := b.pred.U, b.pred.V
	r := b.radius + 4 + math.Hypot(b.guess.SmearU, b.guess.SmearV)/2
	if b.have {
		u, v = b.result.U, b.result.V
	} else {
		r += math.Min(3*b.pred.Sigma(), 3*b.radius)
	}
	return detect.Disc{U: u, V: v, R: r}
}

// look1 fits the bob where it is expected.
func (b *bob) look1(frame *clip.Frame) {
	f := b.f
	b.patch.W, b.patch.H = 0, 0
	if b.lost > 0 && b.pred.Sigma() > b.radius {
		return // seekLost goes looking
	}
	b.covers = b.covers[:0]
	for _, o := range f.bobs {
		if o == b || o.lost > 3 {
			continue
		}
		reach := b.radius + o.radius + 6 + (math.Hypot(b.guess.SmearU, b.guess.SmearV)+math.Hypot(o.guess.SmearU, o.guess.SmearV))/2
		if math.Hypot(b.pred.U-o.pred.U, b.pred.V-o.pred.V) < reach {
			b.covers = append(b.covers, detect.Disc{U: o.pred.U, V: o.pred.V, R: o.radius + 2.5 + math.Hypot(o.guess.SmearU, o.guess.SmearV)/2})
		}
	}
	frame.Patch(&b.patch, detect.Window(b.guess, b.radius).Intersect(f.active))
	if b.patch.W < 3 || b.patch.H < 3 {
		return
	}
	if b.guess.UPos < 0.15*b.radius+1 {
		if b.try(b.guess) {
			return
		}
	}
	// The prediction is vague, or was wrong: look for the bob in the window.
	b.search.Look, b.search.RMin, b.search.RMax = b.look, 0.75*b.radius, 1.3*b.radius
	var wall *detect.Wall
	if b.look.Kind == detect.ByMotion {
		wall = f.wall
	}
	cost := func(c detect.Candidate) float64 {
		return b.pred.Cost(c.U, c.V, track.Cov{}, 1+b.leeway()) + 4*(1-c.Score())
	}
	near := slices.DeleteFunc(b.search.Find(&b.patch, b.patch.Rect, 0, wall, nil), func(c detect.Candidate) bool {
		return c.Score() < 0.35 || covered(c.U, c.V, b.covers) || cost(c) >= gate
	})
	slices.SortStableFunc(near, func(x, y detect.Candidate) int { return cmp.Compare(cost(x), cost(y)) })
	for _, c := range near[:min(len(near), 2)] {
		g := b.guess
		g.U, g.V, g.UPos = c.U, c.V, 0.7+0.04*b.radius
		b.fitter.Widen(c.R)
		if b.try(g) {
			return
		}
	}
	if len(near) > 0 {
		b.roughly(near[0])
	}
}

// roughly takes a candidate for the bob, as it was found, where its outline cannot
// be fitted: a camera that is jolted, or a thing as bright as the bob behind half of
// it, spoils some frames, and a rough place keeps hold of the bob. Only what is
// plainly as large and as round as the bob, and stands clear of the others, will do.
// A fit that agrees with the candidate but sees too little of the outline is still
// the better place of the two.
func (b *bob) roughly(c detect.Candidate) {
	if b.fits < 5 || len(b.covers) > 0 || c.Score() < 0.5 || math.Abs(c.R-b.radius) > 0.15*b.radius {
		return
	}
	at, u := detect.Disc{U: c.U, V: c.V}, 0.7+0.05*b.radius
	if r := &b.result; math.Abs(r.R-b.radius) < 0.1*b.radius && math.Hypot(r.U-c.U, r.V-c.V) < 0.1*b.radius {
		at, u = detect.Disc{U: r.U, V: r.V}, 0.3+0.01*b.radius
	}
	b.result = detect.Fit{
		U: at.U, V: at.V, Cov: track.Cov{AA: u * u, BB: u * u}, R: b.radius,
		Level: b.level, Contrast: b.contrast, Visible: 0.5,
	}
	b.have = true
}

func covered(u, v float64, covers []detect.Disc) bool {
	for _, c := range covers {
		if math.Hypot(u-c.U, v-c.V) < 0.7*c.R {
			return true
		}
	}
	return false
}

// try fits at a guess and keeps the result when it can be this bob.
func (b *bob) try(g detect.Guess) bool {
	free := b.free()
	r := b.fitter.Fit(&b.patch, b.f.wall, g, b.covers, free)
	b.result = r
	if !r.OK || !b.plausible(&r) {
		return false
	}
	// A plain sighting may lie farther from where it was expected than a poor one:
	// clips hold repeated frames, and hands push bobs.
	floor := 1e-3 * b.radius * b.radius
	if r.Visible > 0.65 && math.Abs(r.R-b.radius) < 0.1*b.radius {
		floor = b.leeway()
	}
	if b.pred.Cost(r.U, r.V, r.Cov, floor) > gate {
		return false
	}
	b.result, b.have = r, true
	b.fitter.Learn(&r)
	return true
}

// leeway is the variance, px², that is granted to a plain sighting on top of the
// prediction's.
func (b *bob) leeway() float64 { return 0.04 * b.radius * b.radius }

// free tells whether this frame's fit shall also fit the blur: at first,
// and now and then while the bob is slow enough to show it.
func (b *bob) free() bool {
	if len(b.covers) > 0 || b.filter.Sightings() < 2 {
		return false
	}
	slow := math.Hypot(b.guess.SmearU, b.guess.SmearV) < 0.6*b.fitter.Shape.Blur
	return b.good < 8 || slow && b.good%16 == 0
}

// plausible tells whether a fit can be this bob: as large, as bright and about as
// plain as it was.
func (b *bob) plausible(r *detect.Fit) bool {
	return math.Abs(r.R-b.radius) <= 0.3*b.radius+0.5 &&
		math.Abs(r.Level-b.level) <= 25+0.35*b.contrast &&
		r.Noise <= math.Max(0.5, 2*b.rough)*b.contrast
}

// untangle makes sure that no two bobs claim the same thing: the one whose
// prediction it fits worse goes without.
func (f *follower) untangle() {
	for i, a := range f.bobs {
		for _, b := range f.bobs[i+1:] {
			if !a.have || !b.have {
				continue
			}
			d := math.Hypot(a.result.U-b.result.U, a.result.V-b.result.V)
			if d > 0.35*math.Min(a.radius, b.radius) {
				continue
			}
			if math.Hypot(a.pred.U-b.pred.U, a.pred.V-b.pred.V) < d {
				continue // they do meet there
			}
			ca := a.pred.Cost(a.result.U, a.result.V, a.result.Cov, 0.01)
			cb := b.pred.Cost(b.result.U, b.result.V, b.result.Cov, 0.01)
			if ca < cb {
				b.have = false
			} else {
				a.have = false
			}
		}
	}
}

// seekLost looks farther afield for bobs without a fit, and pairs what it finds
// with them at the least total cost.
func (f *follower) seekLost(frame *clip.Frame) {
	var lost []*bob
	for _, b := range f.bobs {
		if !b.have && b.lost > 0 {
			lost = append(lost, b)
		}
	}
	if len(lost) == 0 {
		return
	}
	type sighting struct {
		detect.Candidate
		of *bob
	}
	var seen []sighting
	for _, b := range lost {
		// Looking over a whole picture takes a while: after some time, not in every frame.
		if b.lost > 12 && b.lost%3 != 0 {
			continue
		}
		area := f.active
		if s := b.pred.Sigma(); s < 0.25*float64(max(area.Dx(), area.Dy())) {
			m := 3*s + 2*b.radius + 8
			area = area.Intersect(image.Rect(int(b.pred.U-m), int(b.pred.V-m), int(b.pred.U+m)+1, int(b.pred.V+m)+1))
		}
		if area.Empty() {
			// It is expected outside: it will come back over the edge.
			area = f.active
		}
		frame.Patch(&f.whole, area)
		b.search.Look, b.search.RMin, b.search.RMax = b.look, 0.75*b.radius, 1.3*b.radius
		found := b.search.Find(&f.whole, area, 0, f.wall, nil)
		// One that rests may meanwhile pass for wall: where it was last it is looked
		// for all the same.
		m := int(2 * b.radius)
		rest := image.Rect(int(b.lastU)-m, int(b.lastV)-m, int(b.lastU)+m, int(b.lastV)+m).Intersect(area)
		if !rest.Empty() && b.look.Kind != detect.ByMotion {
			found = append(found, b.search.Find(&f.whole, rest, 0, nil, nil)...)
		}
		for _, c := range found {
			if c.Score() < 0.4 || f.claimed(c.U, c.V) {
				continue
			}
			double := false
			for _, o := range seen {
				double = double || math.Hypot(o.U-c.U, o.V-c.V) < 0.5*b.radius
			}
			if !double {
				seen = append(seen, sighting{c, b})
			}
		}
	}
	if len(seen) == 0 {
		return
	}
	cost := make([][]float64, len(lost))
	for i, b := range lost {
		cost[i] = make([]float64, len(seen))
		for j, s := range seen {
			cost[i][j] = math.Inf(1)
			if s.of != b && s.of.look != b.look {
				continue
			}
			if math.Abs(s.R-b.radius) > 0.35*b.radius+1 {
				continue
			}
			k := b.pred.Cost(s.U, s.V, track.Cov{}, 4)
			if b.lost <= 12 && k > 2*gate {
				continue // not gone for long enough to be anywhere
			}
			cost[i][j] = math.Min(k, gate) + 20*(1-s.Score())
		}
	}
	for i, j := range link.Assign(cost, gate+20) {
		if j < 0 {
			continue
		}
		lost[i].regain(frame, seen[j].Candidate)
	}
}

func (f *follower) claimed(u, v float64) bool {
	for _, b := range f.bobs {
		if b.have && math.Hypot(u-b.result.U, v-b.result.V) < 0.5*b.radius {
			return true
		}
	}
	return false
}

// regain fits a lost bob where a candidate was seen.
func (b *bob) regain(frame *clip.Frame, c detect.Candidate) {
	g := detect.Guess{U: c.U, V: c.V, UPos: 0.08*b.radius + 1}
	frame.Patch(&b.patch, detect.Window(g, 1.2*b.radius).Intersect(b.f.active))
	b.covers = b.covers[:0]
	b.fitter.Widen(c.R)
	r := b.fitter.Fit(&b.patch, b.f.wall, g, nil, false)
	if !r.OK || !b.plausible(&r) || !b.convincing(&r, c) {
		return // clutter
	}
	b.result, b.have = r, true
	b.fitter.Learn(&r)
}

// convincing tells whether a fit of something found afar is the bob: most of its
// outline is seen, as much as usual, or what is seen of it agrees with the place and
// the size at which it was found.
func (b *bob) convincing(r *detect.Fit, c detect.Candidate) bool {
	least := math.Min(0.6, 0.8*b.visible)
	if math.Hypot(r.U-c.U, r.V-c.V) < 0.05*b.radius+0.3 && math.Abs(r.R-b.radius) < 0.1*b.radius {
		least = 0.35
	}
	return r.Visible >= least && r.Noise <= math.Max(0.2, 1.5*b.rough)*math.Abs(r.Contrast)
}

// settle writes the frame's sample and updates what is known.
func (b *bob) settle(frame *clip.Frame) {
	f := b.f
	s := track.Sample{Frame: frame.Index, T: b.t, U: math.NaN(), V: math.NaN(), X: math.NaN(), Z: math.NaN()}
	if !b.have {
		b.lost++
		b.samples = append(b.samples, s)
		return
	}
	r := &b.result
	s.U, s.V, s.Pixel = r.U, r.V, r.Cov
	s.T = frame.T + f.cam.RowTime(r.U, r.V)
	s.State = track.Seen
	switch {
	case r.Cut:
		s.State = track.AtEdge
	case r.Visible < wholeSeen:
		s.State = track.PartlyHidden
	}
	b.samples = append(b.samples, s)
	c := r.Cov
	if s.State != track.Seen {
		c.AA, c.BB = 4*c.AA+0.01, 4*c.BB+0.01
	}
	if b.stalled(s.T) {
		// The position may be that of the frame before.
		du, dv := b.pred.DU*f.dt, b.pred.DV*f.dt
		wide := track.Cov{AA: c.AA + du*du, AB: c.AB + du*dv, BB: c.BB + dv*dv}
		b.samples[len(b.samples)-1].Pixel = wide
		f.repeated++
	} else if b.lost > 6 {
		b.filter = link.NewFilter(s.T, r.U, r.V, c, b.reach())
	} else {
		b.filter.Update(s.T, r.U, r.V, c)
	}
	b.lost = 0
	if r.Pixels > 0 {
		b.fits++
		k := 1 / math.Min(float64(b.fits), 30)
		b.visible += k * (r.Visible - b.visible)
		b.rough += k * (r.Noise/math.Max(math.Abs(r.Contrast), 1) - b.rough)
	}
	b.lastU, b.lastV = r.U, r.V
	if b.filter.Sightings() == 3 {
		b.fitter.Relearn() // from now on the smear is known
	}
	if s.State == track.Seen {
		b.good++
		k := 1 / math.Min(float64(b.good), 30)
		b.radius += k * (r.R - b.radius)
		b.level += k * (r.Level - b.level)
		b.contrast += k * (math.Abs(r.Contrast) - b.contrast)
		if r.USmear > 0 {
			f.expo.learn(b.pred.Speed(), r.Smear, r.USmear)
		}
	}
}

// stalled tells whether the bob stands where it was a frame ago although it was
// going fast: a clip that was encoded again holds repeated frames. It tells so
// once; a bob that stays is believed to have stopped.
func (b *bob) stalled(t float64) bool {
	was := b.stall
	b.stall = false
	n := len(b.samples)
	if was || n < 2 || b.filter.Sightings() < 5 {
		return false
	}
	last := &b.samples[n-2]
	step := math.Hypot(b.pred.U-last.U, b.pred.V-last.V)
	moved := math.Hypot(b.result.U-last.U, b.result.V-last.V)
	b.stall = last.State != track.Missing && step > 2 && moved < 0.15*step && step > 4*b.pred.Sigma()
	return b.stall
}

// reach is the greatest speed to be expected: two diameters per frame at first.
func (b *bob) reach() float64 {
	return math.Min(4*b.radius, 0.25*float64(b.f.picture.Dx())) / b.f.dt
}

// exposure is what is known of the time during which a row collects light.
type exposure struct {
	tau, u float64 // s
	given  bool
	n      int
}

func newExposure(r *rig.Rig, dt float64) exposure {
	if e := r.Camera.ExposureS; e.Set {
		return exposure{tau: e.V, u: math.Max(e.U, 1e-5), given: true}
	}
	return exposure{tau: 0.4 * dt, u: 0.3 * dt}
}

// learn takes in the length of a smear, px, of a bob of known speed, px/s. A
// camera changes its exposure as it goes, so old sightings fade.
func (e *exposure) learn(speed, smear, u float64) {
	if !(speed > 0) || u > 0.5*smear {
		return
	}
	z, v := smear/speed, u*u/(speed*speed)
	p := e.u*e.u + 1e-4*e.tau*e.tau
	k := p / (p + v + 1e-4*z*z)
	e.tau = math.Max(e.tau+k*(z-e.tau), 0)
	e.u = math.Max(math.Sqrt((1-k)*p), 0.02*e.tau)
	e.n++
}
