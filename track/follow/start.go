package follow

import (
	"context"
	"errors"
	"fmt"
	"image"
	"io"
	"math"
	"slices"

	"lodeswing/track"
	"lodeswing/track/clip"
	"lodeswing/track/detect"
	"lodeswing/track/link"
	"lodeswing/track/shake"
)

// A clip may begin with a hand before the lens: the bobs are looked for in its
// first frames, up to this many and this long.
const (
	startFrames = 45
	startTime   = 1.0 // s
)

// start looks for the bobs in a frame, and remembers what it saw of the first
// frame for the error.
func (f *follower) start(ctx context.Context, frame *clip.Frame) error {
	if f.frames == 0 {
		if w, h := frame.Size(); w != f.picture.Dx() || h != f.picture.Dy() {
			return fmt.Errorf("the clip says that its pictures have %d × %d pixels, and the first one has %d × %d", f.picture.Dx(), f.picture.Dy(), w, h)
		}
		f.cam = f.cam.Rotated(frame.RotationDeg)
	}
	frame.Patch(&f.whole, f.picture)
	f.active = activeArea(&f.whole)
	before, err := f.scout(ctx)
	if err != nil {
		return err
	}
	problem := f.findAll(before)
	if problem != nil {
		if f.problem == nil {
			f.problem = problem
			f.problem.draw(&f.whole)
		}
		for _, b := range f.bobs {
			b.filter, b.fitter = nil, nil
			b.samples = append(b.samples, track.Sample{Frame: frame.Index, T: frame.T, U: math.NaN(), V: math.NaN(), X: math.NaN(), Z: math.NaN()})
		}
		if f.frames+1 >= startFrames || frame.T > startTime || problem.certain {
			return f.problem
		}
		return nil
	}
	var avoid []image.Rectangle
	f.discs = f.discs[:0]
	for _, b := range f.bobs {
		r := &b.result
		b.have = true
		b.t = frame.T + f.cam.RowTime(r.U, r.V)
		b.filter = link.NewFilter(b.t, r.U, r.V, r.Cov, b.reach())
		b.pred = b.filter.Predict(b.t)
		s := track.Sample{Frame: frame.Index, T: b.t, U: r.U, V: r.V, Pixel: r.Cov, X: math.NaN(), Z: math.NaN(), State: track.Seen}
		switch {
		case r.Cut:
			s.State = track.AtEdge
		case r.Visible < wholeSeen:
			s.State = track.PartlyHidden
		}
		b.samples = append(b.samples, s)
		b.good = 1
		f.discs = append(f.discs, detect.Disc{U: r.U, V: r.V, R: 1.15*b.radius + 4})
		m := int(3 * b.radius)
		avoid = append(avoid, image.Rect(int(r.U)-m, int(r.V)-m, int(r.U)+m, int(r.V)+m))
	}
	f.wall.Learn(&f.whole, f.discs, 1)
	for _, p := range f.scouted {
		f.wall.Learn(p, nil, 1) // what is behind the bobs now; what passes is forgotten again
	}
	f.scouted = nil
	f.watch = shake.New(f.facts, f.rig.Marks, avoid)
	if f.watch.Wants(frame.Index) {
		f.watch.Observe(frame)
	}
	return nil
}

// activeArea is the part of the picture that is not black bars: rows and columns
// at the edges that are black from end to end. A margin of one pixel is taken
// off where a bar was, since the encoder softens its border.
func activeArea(p *clip.Patch) image.Rectangle {
	black := func(u0, v0, du, dv, n int) bool {
		for i := range n {
			o := 3 * ((v0+i*dv)*p.W + u0 + i*du)
			if int(p.BGR[o])+int(p.BGR[o+1])+int(p.BGR[o+2]) > 3*28 {
				return false
			}
		}
		return true
	}
	r := image.Rect(0, 0, p.W, p.H)
	for r.Min.X < p.W/2 && black(r.Min.X, 0, 0, 1, p.H) {
		r.Min.X++
	}
	for r.Max.X > p.W/2 && black(r.Max.X-1, 0, 0, 1, p.H) {
		r.Max.X--
	}
	for r.Min.Y < p.H/2 && black(0, r.Min.Y, 1, 0, p.W) {
		r.Min.Y++
	}
	for r.Max.Y > p.H/2 && black(0, r.Max.Y-1, 1, 0, p.W) {
		r.Max.Y--
	}
	if r.Dx() < p.W/4 || r.Dy() < p.H/4 {
		return p.Rect // a black picture has no bars
	}
	const soft = 2
	if r.Min.X > 0 {
		r.Min.X += soft
	}
	if r.Max.X < p.W {
		r.Max.X -= soft
	}
	if r.Min.Y > 0 {
		r.Min.Y += soft
	}
	if r.Max.Y < p.H {
		r.Max.Y -= soft
	}
	return r.Add(p.Rect.Min)
}

// expected is the radius in px that the rig and the camera promise for a bob at
// a pixel; ok is false where the rig gives no diameter.
func (b *bob) expected(u, v float64) (r float64, ok bool) {
	if !b.rig.DiameterM.Set {
		return 0, false
	}
	r = b.f.cam.RadiusPX(u, v, b.rig.DiameterM.V/2, b.rig.DepthM.Or(0))
	return r, r > 0 && !math.IsNaN(r)
}

// findAll finds every bob in f.whole, or says what is wrong.
func (f *follower) findAll(before []*clip.Patch) *NotFound {
	var taken []detect.Disc
	done := make([]bool, len(f.bobs))
	// Those that the rig points at come first, so that the others cannot take them.
	for i, b := range f.bobs {
		if !b.hasStart {
			continue
		}
		if p := b.startAt(before); p != nil {
			return p
		}
		done[i] = true
		taken = append(taken, detect.Disc{U: b.result.U, V: b.result.V, R: b.result.R})
	}
	for i, b := range f.bobs {
		if done[i] {
			continue
		}
		group := []*bob{b}
		done[i] = true
		for j := i + 1; j < len(f.bobs); j++ {
			if !done[j] && f.bobs[j].look == b.look && sameSize(b, f.bobs[j]) {
				group = append(group, f.bobs[j])
				done[j] = true
			}
		}
		if p := f.startGroup(group, before, &taken); p != nil {
			return p
		}
	}
	return nil
}

func sameSize(a, b *bob) bool {
	da, db := a.rig.DiameterM, b.rig.DiameterM
	return !da.Set || !db.Set || math.Abs(da.V-db.V) < 0.2*da.V
}

// sizes sets the radii that a search is to accept.
func (b *bob) sizes() {
	b.search.Look = b.look
	b.search.RMin, b.search.RMax = 3, 0
	c := b.f.picture
	if r, ok := b.expected(float64(c.Dx())/2, float64(c.Dy())/2); ok {
		b.search.RMin, b.search.RMax = math.Max(0.65*r, 2.5), 1.5*r
	}
}

// startAt fits a bob at the rig's start_px.
func (b *bob) startAt(before []*clip.Patch) *NotFound {
	f := b.f
	b.sizes()
	reach := 60.0
	if b.search.RMax > 0 {
		reach = 3 * b.search.RMax
	} else {
		b.search.RMax = float64(min(f.picture.Dx(), f.picture.Dy())) / 6
		reach = b.search.RMax
	}
	area := image.Rect(int(b.startU-reach), int(b.startV-reach), int(b.startU+reach)+1, int(b.startV+reach)+1).Intersect(f.active)
	cands := b.search.Find(&f.whole, area, 0, nil, before)
	best, score := -1, 0.0
	for i := range cands {
		c := &cands[i]
		d := math.Hypot(c.U-b.startU, c.V-b.startV)
		if d > 1.5*c.R+4 {
			continue
		}
		if s := c.Score() * math.Exp(-d/c.R); s > score && c.Score() > 0.2 {
			best, score = i, s
		}
	}
	if best < 0 {
		p := b.nothing(cands)
		p.Reason = fmt.Sprintf("nothing that looks %s is at start_px = [%g, %g]", b.look, b.startU, b.startV)
		return p
	}
	if why := b.accept(cands[best]); why != "" {
		p := b.nothing(cands)
		p.Reason = fmt.Sprintf("what is at start_px = [%g, %g] cannot be fitted: %s", b.startU, b.startV, why)
		return p
	}
	return nil
}

// accept fits a candidate as this bob.
func (b *bob) accept(c detect.Candidate) (why string) {
	fitter, r := detect.Acquire(&b.f.whole, c, b.f.active, b.subsampled, b.rig.Ball)
	if !r.OK {
		return r.Why
	}
	if math.Hypot(r.U-c.U, r.V-c.V) > 0.6*c.R+2 {
		return "its outline is not round"
	}
	fitter.Shape.UBlur = math.Max(0.5*r.Blur, 0.3)
	b.fitter, b.result, b.radius, b.level = fitter, r, r.R, r.Level
	b.contrast = math.Abs(r.Contrast)
	b.fits, b.visible, b.rough = 1, r.Visible, r.Noise/math.Max(b.contrast, 1)
	return ""
}

// startGroup finds bobs that look the same. As many as there are bobs must stand
// out; they are named in the rig's order from left to right.
func (f *follower) startGroup(group []*bob, before []*clip.Patch, taken *[]detect.Disc) *NotFound {
	b := group[0]
	b.sizes()
	all := b.search.Find(&f.whole, f.active, 0, nil, before)
	all = slices.DeleteFunc(all, func(c detect.Candidate) bool {
		for _, t := range *taken {
			if math.Hypot(c.U-t.U, c.V-t.V) < 0.7*math.Max(c.R, t.R) {
				return true
			}
		}
		return c.Score() < 0.3
	})
	need := len(group)
	if len(all) < need {
		p := b.nothing(all)
		if need > 1 {
			p.Reason = fmt.Sprintf("%d bobs look %s, and %d of them are seen", need, b.look, len(all))
		}
		return p
	}
	// Prefer candidates of the expected size; without one, large ones.
	weight := func(c *detect.Candidate) float64 {
		w := c.Score()
		if r, ok := b.expected(c.U, c.V); ok {
			e := math.Log(c.R/r) / 0.25
			return w * math.Exp(-e*e/2)
		}
		return w
	}
	slices.SortStableFunc(all, func(x, y detect.Candidate) int {
		switch wx, wy := weight(&x), weight(&y); {
		case wx > wy:
			return -1
		case wx < wy:
			return 1
		}
		return 0
	})
	if len(all) > need {
		last, next := weight(&all[need-1]), weight(&all[need])
		// Without a size, what is a quarter as large or less is clutter.
		if _, ok := b.expected(all[need].U, all[need].V); !ok {
			all, last, next = bySize(all, need, last, next)
		}
		if next > 0.6*last {
			p := b.nothing(all)
			p.certain = true
			p.Ambiguous = true
			p.Reason = fmt.Sprintf("%d things look %s, and the rig names %d", countAbove(all, 0.6*last, weight), b.look, need)
			return p
		}
	}
	chosen := slices.Clone(all[:need])
	slices.SortStableFunc(chosen, func(x, y detect.Candidate) int {
		switch {
		case x.U < y.U:
			return -1
		case x.U > y.U:
			return 1
		}
		return 0
	})
	for i, g := range group {
		if why := g.accept(chosen[i]); why != "" {
			p := g.nothing(all)
			p.Reason = fmt.Sprintf("what looks %s near [%.0f, %.0f] cannot be fitted: %s", g.look, chosen[i].U, chosen[i].V, why)
			return p
		}
		*taken = append(*taken, detect.Disc{U: g.result.U, V: g.result.V, R: g.result.R})
	}
	return nil
}

// bySize drops candidates of less than half the radius of the best ones.
func bySize(all []detect.Candidate, need int, last, next float64) ([]detect.Candidate, float64, float64) {
	big := 0.0
	for i := range need {
		big = math.Max(big, all[i].R)
	}
	kept := slices.DeleteFunc(slices.Clone(all), func(c detect.Candidate) bool { return c.R < 0.5*big })
	if len(kept) < need {
		return all, last, next
	}
	if len(kept) == need {
		return kept, kept[need-1].Score(), 0
	}
	return kept, kept[need-1].Score(), kept[need].Score()
}

func countAbove(all []detect.Candidate, least float64, weight func(*detect.Candidate) float64) (n int) {
	for i := range all {
		if weight(&all[i]) > least {
			n++
		}
	}
	return n
}

// scout returns pictures from later in the clip, where a bob is known by its
// motion alone: what differs from all of them is where the bob is now.
func (f *follower) scout(ctx context.Context) ([]*clip.Patch, error) {
	moving := false
	for _, b := range f.bobs {
		moving = moving || b.look.Kind == detect.ByMotion
	}
	if !moving || f.scouted != nil {
		return f.scouted, nil
	}
	again := f.opt.Again
	if again == nil {
		again = func(ctx context.Context) (clip.Source, error) { return clip.Open(ctx, f.facts) }
	}
	src, err := again(ctx)
	if err != nil {
		return nil, fmt.Errorf("look = \"moving\" needs a second look at the clip: %w", err)
	}
	defer src.Close()
	// A bob that swings is back where it was after a period; pictures at times
	// that are no multiples of each other tell them apart all the same.
	wanted := []float64{0.21, 0.34, 0.55, 0.89, 1.44}
	f.scouted = []*clip.Patch{}
	for len(wanted) > 0 {
		frame, err := src.Next(ctx)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, err
		}
		if frame.T >= wanted[0] {
			p := new(clip.Patch)
			frame.Patch(p, f.picture)
			f.scouted = append(f.scouted, p)
			wanted = wanted[1:]
		}
	}
	return f.scouted, nil
}
