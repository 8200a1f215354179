// Package shake measures the camera's own motion, and a base that rocks. What
// comes in: frames of a clip (track/clip), the rig's marks, and where bobs are.
// What goes out: how the still background moved, turned and grew over time, how
// the marks moved, what to say about it, and, with the container's facts and a
// look at the pixels (clip.Survey), advice on filming better. Units: seconds,
// pixels of the upright picture (u right, v down), radians clockwise as seen.
//
// It looks at a few frames a second only and at small patches of them, so it
// costs a follower next to nothing; while the camera shakes it looks at every
// frame, which costs a quarter to half a millisecond each.
package shake

import (
	"image"
	"math"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// Motion is how the background lay in one frame against the first observed one:
// a background point that was at c+d (c the picture's centre, (W−1)/2, (H−1)/2)
// is found at c + (DU, DV) + d + Zoom·d + Turn·(−d_v, d_u).
type Motion struct {
	Frame  int     `json:"frame"`
	T      float64 `json:"t_s"`
	DU     float64 `json:"du_px"`
	DV     float64 `json:"dv_px"`
	Turn   float64 `json:"turn_rad"`
	Zoom   float64 `json:"zoom"`
	U      float64 `json:"u_px"`   // standard uncertainty of DU and of DV
	UZoom  float64 `json:"u_zoom"` // of Zoom and of Turn
	Used   int     `json:"patches"`
	Spread float64 `json:"spread_px"` // r.m.s. of the patches' own shifts about this motion: warping and noise
}

// MarkMotion is one of the rig's marks over the observed frames.
type MarkMotion struct {
	Name string    `json:"name"`
	On   string    `json:"on"`
	T    []float64 `json:"t_s"`
	U    []float64 `json:"u_px"` // NaN is never written: frames in which it was not found are left out
	V    []float64 `json:"v_px"`

	frames []int
	u0     float64 // standard uncertainty of one position, per axis
	want   rig.Mark
	tpl    *template
	du, dv float64 // where it was last
	lost   int     // observed frames in which it was not found
	why    string  // why it cannot be followed at all
}

// Watch follows still patches of the background and the rig's marks through
// some frames of a clip.
type Watch struct {
	facts  *clip.Facts
	marks  []*MarkMotion
	avoid  []image.Rectangle
	wanted map[int]bool // what is looked at while all is calm

	started  bool
	noise    float64
	patches  []*template
	thumb    *thumb
	wide     []*template // the same places, coarse, for large moves; nil where they do not fit
	seen     int
	lost     int // observed frames in which the background was not found
	lastLost float64
	farAgain float64 // when a search far and wide may be tried again, s
	farPause float64
	calm     Motion // where the background was when it last was at rest
	restless int    // looks to go until the camera counts as still again
	motions  []Motion
	last     similarity
	shifts   []shift
	buf      buffers
}

// perSecond is how many frames a second are looked at, on average.
const perSecond = 5

// New returns a Watch for the clip. marks are the rig's; avoid holds rectangles
// (upright pixels) in which bobs and other moving things are, and may be nil:
// patches that move unlike the rest are found out anyhow.
func New(facts *clip.Facts, marks []rig.Mark, avoid []image.Rectangle) *Watch {
	w := &Watch{facts: facts, avoid: avoid, wanted: map[int]bool{}}
	for _, m := range marks {
		w.marks = append(w.marks, &MarkMotion{Name: m.Name, On: m.On, want: m})
	}
	// Uneven steps (the golden ratio's multiples), so that no swing and no mains
	// hum can hide by keeping step with the looking.
	const golden = 0.6180339887498949
	phase, next := 0.0, 0.0
	for i, t := range facts.Times {
		if t >= next || i == 0 {
			w.wanted[i] = true
			phase += golden
			phase -= math.Floor(phase)
			next = t + (0.6+0.8*phase)/perSecond
		}
	}
	return w
}

// Wants tells whether Observe would look at the frame of this index.
func (w *Watch) Wants(index int) bool {
	return w.restless > 0 || w.wanted[index] || index < 4
}

// restlessPX is how far the background may go from one look to the next, in
// pixels, before every frame is looked at.
const restlessPX = 0.3

// mind decides from the latest motion whether to look at every frame: as soon
// as the background has gone far from where it was when all was calm, and for as
// long as it has not stayed in one place for a second.
func (w *Watch) mind(m *Motion) {
	far := 0.0
	for _, c := range corners {
		x, y := c[0]*float64(w.facts.W), c[1]*float64(w.facts.H)
		u1, v1 := m.similarity().at(x, y)
		u0, v0 := w.calm.similarity().at(x, y)
		far = math.Max(far, math.Hypot(u1-u0, v1-v0)-4*math.Hypot(m.U, m.UZoom*math.Hypot(x, y)))
	}
	switch {
	case far > restlessPX:
		w.calm, w.restless = *m, max(10, int(w.facts.TrueRate))
	case w.restless > 0:
		w.restless--
	default:
		w.calm = *m // a slow drift is no restlessness
	}
}

// Observe looks at a frame, cheaply, and does nothing for frames that it does
// not want. Frames come in order.
func (w *Watch) Observe(f *clip.Frame) {
	if !w.Wants(f.Index) {
		return
	}
	if !w.started {
		w.start(f)
		return
	}
	w.seen++
	m, ok := w.background(f)
	if ok {
		w.motions = append(w.motions, m)
		w.mind(&m)
	} else if len(w.patches) > 0 {
		w.lost++
		w.lastLost = f.T
		w.restless /= 2 // looking at every frame would not help
	}
	for _, k := range w.marks {
		k.follow(f, w.last, &w.buf)
	}
}

// start takes the first frame as the place that all others are held against.
func (w *Watch) start(f *clip.Frame) {
	w.started, w.seen = true, 1
	w.noise = noiseOf(f, &w.buf)
	avoid := append(bars(f, &w.buf), w.avoid...)
	w.patches = choose(f, avoid, w.noise, &w.buf)
	w.thumb = newThumb(f, &w.buf)
	w.thumb.mask(avoid)
	for _, t := range w.patches {
		w.wide = append(w.wide, wideTemplate(f, t, &w.buf))
	}
	if len(w.patches) >= 3 {
		w.motions = append(w.motions, Motion{Frame: f.Index, T: f.T, Used: len(w.patches)})
	}
	for _, k := range w.marks {
		k.start(f, w.noise, &w.buf)
	}
}

// wideTemplate cuts a coarse template about the same place, as coarse as the
// picture's edge allows a later search; nil where none fits.
func wideTemplate(f *clip.Frame, t *template, buf *buffers) *template {
	for _, scale := range []int{4, 2} {
		if _, ok := buf.grey(f, t.cu, t.cv, half+reach+2, scale); !ok {
			continue
		}
		if c, ok := newTemplate(f, t.cu, t.cv, scale, buf); ok {
			return c
		}
	}
	return nil
}

// background measures where the background lies in frame f.
func (w *Watch) background(f *clip.Frame) (Motion, bool) {
	if len(w.patches) < 3 {
		return Motion{}, false
	}
	best, ok := w.look(f, w.last, false)
	// When it went far: coarsely first, from where it was and from where the
	// whole picture fits best, then finely from there.
	weak := func() bool { return !ok || 10*best.used < 6*len(w.patches) }
	if weak() && f.T < w.farAgain {
		// It has been searched for in vain, or is covered for good: not each time.
		return w.settle(f, best, ok)
	}
	for try := 0; try < 2 && weak(); try++ {
		guess := w.last
		if try == 1 {
			guess = similarity{}
			guess.a, guess.b = w.thumb.shift(newThumb(f, &w.buf))
		}
		rough, found := w.look(f, guess, true)
		if !found {
			rough.similarity = guess
		}
		if fine, found := w.look(f, rough.similarity, false); found && (!ok || fine.used > best.used) {
			best, ok = fine, true
		}
		if try == 1 && weak() {
			w.farPause = math.Min(2*w.farPause+0.25, 4)
			w.farAgain = f.T + w.farPause
		}
	}
	if !weak() {
		w.farPause = 0
	}
	return w.settle(f, best, ok)
}

// settle takes a fit as the frame's motion.
func (w *Watch) settle(f *clip.Frame, best fitted, ok bool) (Motion, bool) {
	if !ok {
		return Motion{}, false
	}
	w.last = best.similarity
	return Motion{
		Frame: f.Index, T: f.T, DU: best.a, DV: best.b, Zoom: best.z, Turn: best.r,
		U: best.u, UZoom: best.uz, Used: best.used, Spread: best.spread,
	}, true
}

// look finds all patches, starting from where guess puts them, and fits.
func (w *Watch) look(f *clip.Frame, guess similarity, far bool) (fitted, bool) {
	pw, ph := f.Size()
	mx, my := float64(pw-1)/2, float64(ph-1)/2
	w.shifts = w.shifts[:0]
	possible := 0
	for i, t := range w.patches {
		if far {
			if t = w.wide[i]; t == nil {
				continue
			}
		}
		possible++
		x, y := float64(t.cu)-mx, float64(t.cv)-my
		du, dv := guess.at(x, y)
		du, dv, likeness, ok := t.find(f, du, dv, &w.buf)
		if !ok || likeness < 0.7 {
			continue
		}
		// The patch's own scatter from noise, and a floor for what interpolation
		// and the codec do.
		u := math.Hypot(float64(t.scale)*w.noise*math.Sqrt((t.inv[0]+t.inv[2])/2), 0.02*float64(t.scale))
		w.shifts = append(w.shifts, shift{x: x, y: y, du: du, dv: dv, u: u})
	}
	if len(w.shifts) < 3 || 10*len(w.shifts) < 3*possible {
		return fitted{}, false
	}
	return fit(w.shifts)
}
