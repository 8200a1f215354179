package detect

import (
	"math"
	"math/bits"
)

// oddReach is how far around a pixel that fits badly its neighbours are left out,
// px: as far as the lens smears the edge of what is there.
const oddReach = 2

// misfit is the square of the residual, over the contrast, that the model's own
// shortcomings may leave at an edge without its being odd.
const misfit = 0.12 * 0.12

// markNear marks the pixels around those that fitted badly, for the next pass.
// Where they lie all around the outline it is the model that is wrong, and
// nothing is marked. It tells whether the marks have changed much.
func (f *Fitter) markNear(contrast float64) bool {
	dim := f.dimSectors(contrast)
	if len(f.odd) == 0 && !f.marked && dim == 0 {
		return false
	}
	var hit [sectors]bool
	wide := 0
	for _, i := range f.odd {
		q := &f.px[i]
		if !hit[q.sec] {
			hit[q.sec] = true
			wide++
		}
	}
	odd := f.odd
	if len(odd) <= 2 || wide > sectors*2/3 {
		odd = nil
	}
	for _, i := range odd {
		f.flagAround(int(f.px[i].at), true)
	}
	changed := f.readFlags(dim)
	for _, i := range odd {
		f.flagAround(int(f.px[i].at), false)
	}
	f.marked = len(odd) > 0 || dim != 0
	return changed > 8
}

// ringMean sums up residuals outside the outline in one sector.
type ringMean struct{ sum, n float64 }

// dimSectors returns, as bits, the sectors outside of which the wall is darker or
// lighter than the model has it over a stretch of the outline: a shadow that the
// bob casts close by. The outline cannot be trusted there.
func (f *Fitter) dimSectors(contrast float64) (dim uint32) {
	const run = 4
	var sign [sectors]int
	outside := 0
	for k := range f.around {
		if f.around[k].n == 0 {
			outside++
		}
		limit := 0.05 * math.Abs(contrast)
		if f.dimBefore>>k&1 != 0 {
			limit *= 0.5 // it does not go from one frame to the next
		}
		if a := &f.around[k]; a.n > 3 {
			switch m := a.sum / a.n; {
			case m > limit:
				sign[k] = 1
			case m < -limit:
				sign[k] = -1
			}
		}
	}
	for k := range sectors {
		same := sign[k] != 0
		for l := 1; l < run && same; l++ {
			same = sign[(k+l)%sectors] == sign[k]
		}
		if same {
			for l := -1; l <= run; l++ {
				dim |= 1 << ((k + l + sectors) % sectors)
			}
		}
	}
	f.dimNow = 0
	if outside > sectors/6 {
		return 0 // cut by the picture's edge: what is left of the outline is needed
	}
	// A shadow goes with its bob: what was not there a frame ago is something that
	// the bob passes.
	f.dimNow = dim
	b := f.dimBefore
	dim &= b | b<<1 | b>>1 | b>>(sectors-1) | b<<(sectors-1)
	if bits.OnesCount32(dim) > sectors*7/12 {
		return 0 // that is no shadow but a wrong level
	}
	return dim
}

// flagAround sets the flag of the patch's pixels within oddReach of one.
func (f *Fitter) flagAround(at int, v bool) {
	for dy := -oddReach; dy <= oddReach; dy++ {
		for dx := -oddReach; dx <= oddReach; dx++ {
			if k := at + dy*f.flagW + dx; dx*dx+dy*dy <= oddReach*oddReach+1 && k >= 0 && k < len(f.flag) {
				f.flag[k] = v
			}
		}
	}
}

// readFlags marks the band's pixels whose flag is set or whose sector is dim, and
// returns how many marks came or went.
func (f *Fitter) readFlags(dim uint32) (changed int) {
	f.marked = true
	for i := range f.px {
		q := &f.px[i]
		if now := f.flag[q.at] || dim>>q.sec&1 != 0; now != q.near {
			q.near = now
			changed++
		}
	}
	return changed
}

// keepOdd remembers where the outline did not agree: a rod that holds the bob
// will be there in the next frame too.
func (f *Fitter) keepOdd(m *model, from [2]float64) {
	f.oddAt = f.oddAt[:0]
	if !f.marked {
		return
	}
	for _, i := range f.odd {
		q := &f.px[i]
		x, y := float64(q.x)+from[0]-m.cu, float64(q.y)+from[1]-m.cv
		f.oddAt = append(f.oddAt, [2]int16{int16(math.Round(x)), int16(math.Round(y))})
	}
}

// recallOdd marks the places of keepOdd around the model's centre.
func (f *Fitter) recallOdd(m *model) {
	f.marked = false
	if len(f.oddAt) == 0 {
		return
	}
	u, v := int(math.Round(m.cu))-f.flagU, int(math.Round(m.cv))-f.flagV
	mark := func(on bool) {
		for _, o := range f.oddAt {
			if x, y := u+int(o[0]), v+int(o[1]); x >= 0 && x < f.flagW && y >= 0 {
				f.flagAround(y*f.flagW+x, on)
			}
		}
	}
	mark(true)
	f.readFlags(0)
	mark(false)
}
