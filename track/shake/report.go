package shake

import (
	"fmt"
	"math"
	"sort"
)

// Report is what a Watch saw.
type Report struct {
	Patches int           `json:"patches"` // still patches that were followed
	Seen    int           `json:"frames_seen"`
	Lost    int           `json:"frames_lost"` // in which the background was not found again
	Motions []Motion      `json:"motions,omitempty"`
	Marks   []*MarkMotion `json:"marks,omitempty"`

	MovePX  float64 `json:"move_px"`   // farthest that a background point came from its mean place, anywhere in the picture
	UMovePX float64 `json:"u_move_px"` // how far noise alone would make it seem to go
	FastPX  float64 `json:"fast_px"`   // the part of the motion, r.m.s., that is too fast to be followed from look to look
	TurnRad float64 `json:"turn_rad"`  // half of peak to peak
	Zoom    float64 `json:"zoom"`      // slow change of scale over the clip, peak to peak
	UZoom   float64 `json:"u_zoom"`
	WarpPX  float64 `json:"warp_px"` // r.m.s. by which the background bends in its worst tenth of frames, beyond its quietest tenth

	Rock     *Rock    `json:"rock,omitempty"` // nil when the rig has no mark on the base, or none could be followed
	Why      string   `json:"why,omitempty"`  // why the background was not measured
	Cautions []string `json:"cautions,omitempty"`

	marked []string // cautions about marks, also in Cautions
	w, h   int
}

// Rock is how far the base moved against the stand, or, without a mark on the
// stand, against the background.
type Rock struct {
	Against string  `json:"against"`
	PX      float64 `json:"rms_px"`      // r.m.s. of the motion about its mean, both axes together, noise taken out
	U       float64 `json:"u_px"`        // its standard uncertainty
	Floor   float64 `json:"floor_px"`    // what noise alone would show
	PeakPX  float64 `json:"peak_px"`     // farthest from the mean
	Frames  int     `json:"frames_seen"` // looked at
}

// Limits above which a motion is worth a caution, in pixels; common practice,
// no source: a tenth of a pixel is what a bob's own place can be told to.
const (
	moveLimit = 0.2
	warpLimit = 0.35
	zoomLimit = 3e-4
	rockLimit = 0.005 // of the bob's motion
)

// Report sums up what was seen so far. It may be called at any time.
func (w *Watch) Report() *Report {
	r := &Report{Patches: len(w.patches), Seen: w.seen, Lost: w.lost, Motions: w.motions, w: w.facts.W, h: w.facts.H}
	for _, k := range w.marks {
		switch {
		case k.why != "":
			r.marked = append(r.marked, k.why)
		case k.tpl != nil:
			r.Marks = append(r.Marks, k)
			if k.lost > 0 && 5*k.lost > len(k.T) {
				r.marked = append(r.marked, fmt.Sprintf("The mark %q was not found in %d of %d frames looked at; something covers it.", k.Name, k.lost, k.lost+len(k.T)))
			}
		}
	}
	r.Cautions = append(r.Cautions, r.marked...)
	switch {
	case !w.started:
		r.Why = "No frame was looked at."
	case r.Patches < 3:
		r.Why = fmt.Sprintf("The background shows too little texture to tell whether the camera moved (%d places to hold on to; 3 are needed). Pin a few printed sheets or dark dots to the wall.", r.Patches)
	case len(r.Motions) < 3:
		r.Why = "Too few frames were looked at to tell whether the camera moved."
		if w.lost > 0 {
			r.Why = "The background was not found again: the camera was moved, or something covers it."
			r.Cautions = append(r.Cautions, r.Why+" Positions are not corrected for it.")
		}
	default:
		r.sumUp()
		r.judge(w.lastLost)
	}
	r.rock()
	return r
}

// corner are points at which the background's motion is judged, in fractions of
// the picture from its centre.
var corners = [][2]float64{{0, 0}, {-0.5, -0.5}, {0.5, -0.5}, {-0.5, 0.5}, {0.5, 0.5}}

func (m *Motion) similarity() similarity { return similarity{m.DU, m.DV, m.Zoom, m.Turn} }

// sumUp fills the report's figures from its motions.
func (r *Report) sumUp() {
	n := len(r.Motions)
	for _, c := range corners {
		x, y := c[0]*float64(r.w), c[1]*float64(r.h)
		us, vs := make([]float64, n), make([]float64, n)
		var noise float64
		for i := range r.Motions {
			m := &r.Motions[i]
			us[i], vs[i] = m.similarity().at(x, y)
			noise = math.Max(noise, math.Hypot(m.U, m.UZoom*math.Hypot(x, y)))
		}
		mu, mv := mean(us), mean(vs)
		for i := range us {
			if d := math.Hypot(us[i]-mu, vs[i]-mv); d > r.MovePX {
				// The largest of n noisy distances is about √(2 ln n) too long.
				r.MovePX, r.UMovePX = d, noise*math.Sqrt(2*math.Log(float64(n)))
			}
		}
	}
	r.FastPX = r.fast()

	turns, zooms, spreads := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, m := range r.Motions {
		turns[i], zooms[i], spreads[i] = m.Turn, m.Zoom, m.Spread
	}
	lo, hi := ends(turns)
	r.TurnRad = (hi - lo) / 2
	// Focus and warming change the scale slowly; means over a second keep that
	// and lose the noise.
	perS := 1.0
	if d := r.Motions[n-1].T - r.Motions[0].T; d > 0 {
		perS = math.Max(1, float64(n-1)/d)
	}
	lo, hi = ends(smooth(zooms, int(perS)))
	r.Zoom = hi - lo
	r.UZoom = 2 * r.Motions[n/2].UZoom / math.Sqrt(perS)
	sort.Float64s(spreads)
	quiet, worst := spreads[max(n/10, 1)], spreads[n-1-n/10] // the first frame's is 0
	r.WarpPX = math.Sqrt(math.Max(worst*worst-quiet*quiet, 0))
}

// fast is the r.m.s. distance of the picture's centre from its mean place in the
// second around, less what noise explains. Slow parts of a motion drop out.
func (r *Report) fast() float64 {
	m := r.Motions
	var sum float64
	n, lo, hi := 0, 0, 0
	for i := range m {
		for m[i].T-m[lo].T > 0.5 {
			lo++
		}
		for hi < len(m) && m[hi].T-m[i].T <= 0.5 {
			hi++
		}
		if m[i].T-m[0].T < 0.5 || m[len(m)-1].T-m[i].T < 0.5 || hi-lo < 3 {
			continue
		}
		var du, dv float64
		for _, k := range m[lo:hi] {
			du += k.DU
			dv += k.DV
		}
		k := float64(hi - lo)
		du, dv = m[i].DU-du/k, m[i].DV-dv/k
		sum += du*du + dv*dv - 2*m[i].U*m[i].U*(1-1/k)
		n++
	}
	return math.Sqrt(math.Max(sum, 0) / float64(max(n, 1)))
}

// judge puts the cautions.
func (r *Report) judge(lastLost float64) {
	say := func(format string, a ...any) { r.Cautions = append(r.Cautions, fmt.Sprintf(format, a...)) }
	if 10*r.Lost > r.Seen {
		say("The still background was lost in %d of %d frames looked at, last at %.2f s: the camera was moved or something large passed before it.", r.Lost, r.Seen, lastLost)
	}
	switch r.kind() {
	case shaken:
		rest := ""
		if r.WarpPX > warpLimit {
			rest = fmt.Sprintf(", and bends by %.2g px (near and far things move differently, or stabilisation warps the picture), so what is put right is right to about that", r.WarpPX)
		}
		say("The still background moves by up to %.2g px and fast: the camera was held by hand or shaken, or electronic stabilisation was on%s. Use a tripod and switch stabilisation off.", r.MovePX, rest)
	case bending:
		say("The still background bends by %.2g px from frame to frame, as electronic stabilisation makes it. Positions are off by about as much: switch stabilisation off and film from a tripod.", r.WarpPX)
	case drifting:
		if !r.breathes() {
			say("The still background drifts slowly by up to %.2g px: the camera sagged or was touched.", r.MovePX)
		}
	}
	if r.breathes() {
		say("The background's scale changes by %.2g %% during the clip: the focus moved (focus breathing), or the camera came nearer. Lock the focus before filming; lengths and amplitudes carry this change where it is not put right.", 100*r.Zoom)
	}
}

// motionKind sorts what a camera did.
type motionKind int

const (
	stood motionKind = iota
	drifting
	bending
	shaken
)

func (r *Report) kind() motionKind {
	moved := r.MovePX > moveLimit && r.MovePX > 3*r.UMovePX
	switch {
	case moved && r.FastPX > moveLimit/2:
		return shaken
	case r.WarpPX > warpLimit:
		return bending
	case moved:
		return drifting
	}
	return stood
}

// breathes tells whether the scale changed by itself; a camera in the hand comes
// nearer and goes farther anyhow.
func (r *Report) breathes() bool {
	return r.Zoom > zoomLimit && r.Zoom > 4*r.UZoom && r.kind() != shaken
}

// Correct returns where a point of the picture, seen at (u, v) at time t, would
// have been seen by a camera that had stayed where it was in the first frame.
// ok is false, and the point unchanged, where the background was not measured
// within a second of t. The correction is right for a camera that turns or
// breathes; one that shifts sideways moves near things more than the wall behind
// them.
func (r *Report) Correct(t, u, v float64) (u2, v2 float64, ok bool) {
	n := len(r.Motions)
	if n < 3 || t < r.Motions[0].T-1 || t > r.Motions[n-1].T+1 {
		return u, v, false
	}
	i := sort.Search(n, func(i int) bool { return r.Motions[i].T >= t })
	var s similarity
	switch {
	case i == 0:
		s = r.Motions[0].similarity()
	case i == n:
		s = r.Motions[n-1].similarity()
	default:
		a, b := &r.Motions[i-1], &r.Motions[i]
		if t-a.T > 1 && b.T-t > 1 {
			return u, v, false
		}
		x := (t - a.T) / (b.T - a.T)
		p, q := a.similarity(), b.similarity()
		s = similarity{p.a + x*(q.a-p.a), p.b + x*(q.b-p.b), p.z + x*(q.z-p.z), p.r + x*(q.r-p.r)}
	}
	// Solve d + shift + zoom·d + turn×d = seen for d.
	x := u - float64(r.w-1)/2 - s.a
	y := v - float64(r.h-1)/2 - s.b
	det := (1+s.z)*(1+s.z) + s.r*s.r
	dx := ((1+s.z)*x + s.r*y) / det
	dy := ((1+s.z)*y - s.r*x) / det
	return dx + float64(r.w-1)/2, dy + float64(r.h-1)/2, true
}

// rock compares the base's marks with the stand's, or with the background.
func (r *Report) rock() {
	var stand *MarkMotion
	for _, k := range r.Marks {
		if k.On == "stand" && (stand == nil || len(k.T) > len(stand.T)) {
			stand = k
		}
	}
	for _, k := range r.Marks {
		if k.On != "base" {
			continue
		}
		rock := r.rockOf(k, stand)
		if rock != nil && (r.Rock == nil || rock.PX > r.Rock.PX) {
			r.Rock = rock
		}
	}
}

// rockOf measures one mark of the base; nil where there is nothing to hold it
// against.
func (r *Report) rockOf(base, stand *MarkMotion) *Rock {
	at := map[int][2]float64{} // frame -> where the still thing is
	rock := &Rock{}
	var u float64
	switch {
	case stand != nil:
		rock.Against = fmt.Sprintf("the mark %q on the stand", stand.Name)
		u = math.Hypot(base.u0, stand.u0)
		for i, f := range stand.frames {
			at[f] = [2]float64{stand.U[i], stand.V[i]}
		}
	case len(r.Motions) >= 3:
		rock.Against = "the background"
		u = math.Hypot(base.u0, r.Motions[len(r.Motions)/2].U)
		x, y := float64(base.tpl.cu)-float64(r.w-1)/2, float64(base.tpl.cv)-float64(r.h-1)/2
		for i := range r.Motions {
			du, dv := r.Motions[i].similarity().at(x, y)
			at[r.Motions[i].Frame] = [2]float64{du, dv}
		}
	default:
		return nil
	}
	var us, vs []float64
	for i, f := range base.frames {
		if p, ok := at[f]; ok {
			us = append(us, base.U[i]-p[0])
			vs = append(vs, base.V[i]-p[1])
		}
	}
	n := len(us)
	if n < 5 {
		return nil
	}
	mu, mv := mean(us), mean(vs)
	var sq float64
	for i := range us {
		d := (us[i]-mu)*(us[i]-mu) + (vs[i]-mv)*(vs[i]-mv)
		sq += d
		rock.PeakPX = math.Max(rock.PeakPX, math.Sqrt(d))
	}
	sq /= float64(n - 1)
	rock.Frames, rock.Floor = n, u*math.Sqrt2
	rock.PX = math.Sqrt(math.Max(sq-2*u*u, 0))
	// Of a root mean square of 2n normal numbers, and of how well noise is known.
	rock.U = math.Hypot(math.Sqrt(sq)/(2*math.Sqrt(float64(n))), rock.Floor/4)
	return rock
}

// RockCaution holds the base's motion against a bob's (r.m.s. about its mean,
// pixels, both axes together). It returns the ratio and, when it is above 0.5 %
// or may be, the caution that every coupling figure must carry; words are empty
// when none is due. The ratio is 0 where nothing was measured.
func (r *Report) RockCaution(bobMotionPX float64) (ratio float64, words string) {
	if r.Rock == nil || !(bobMotionPX > 0) {
		return 0, ""
	}
	ratio = r.Rock.PX / bobMotionPX
	switch {
	case ratio > rockLimit:
		return ratio, fmt.Sprintf("The base rocks: it moves by %.2g px r.m.s. against %s, %.2g %% of the bob's motion (0.5 %% is the limit). Bobs on one base exchange energy through it, so couplings are not the magnets' alone. Clamp the base down.", r.Rock.PX, r.Rock.Against, 100*ratio)
	case 2*r.Rock.U > rockLimit*bobMotionPX:
		return ratio, fmt.Sprintf("Whether the base rocks cannot be told to 0.5 %% of the bob's motion: the marks are read to %.2g px, the bob moves %.2g px r.m.s. Use marks with more contrast, or film from nearer.", r.Rock.U, bobMotionPX)
	}
	return ratio, ""
}

func mean(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v
	}
	return s / float64(len(x))
}

func ends(x []float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, v := range x {
		lo, hi = math.Min(lo, v), math.Max(hi, v)
	}
	return lo, hi
}

// smooth returns running means over w neighbours, only where all are there; the
// mean of all when x is shorter.
func smooth(x []float64, w int) []float64 {
	if len(x) <= w {
		return []float64{mean(x)}
	}
	out := make([]float64, 0, len(x)-w+1)
	for i := 0; i+w <= len(x); i++ {
		out = append(out, mean(x[i:i+w]))
	}
	return out
}
