package detect

import "math"

// What a bob's outline may change from frame to frame, one standard deviation:
// its radius (it comes nearer), its ellipse (it turns), its blur (the focus
// breathes).
const (
	walkR    = 0.004 // of the radius
	walkE    = 0.003
	walkBlur = 0.005 // px
)

// Learn updates what is known of the bob's outline from a fit. The fit already
// holds what was known before: its values are the updated means.
func (f *Fitter) Learn(r *Fit) {
	s := &f.Shape
	if r.OK && !r.Cut && r.Visible > 0.8 {
		s.R, s.UR = r.R, r.UR
		if r.UBlur > 0 {
			s.Blur, s.UBlur = r.Blur, r.UBlur
		}
		if r.UE > 0 {
			s.E1, s.E2, s.UE = r.E1, r.E2, r.UE
		}
	}
	s.UR = math.Hypot(s.UR, walkR*s.R)
	s.UE = math.Min(math.Hypot(s.UE, walkE), 0.1)
	s.UBlur = math.Min(math.Hypot(s.UBlur, walkBlur), 0.5)
}

// Widen makes room in what is known of the outline for one that was seen
// coarsely and may have turned meanwhile.
func (f *Fitter) Widen(r float64) {
	s := &f.Shape
	s.UR = math.Max(s.UR, math.Abs(r-s.R)+0.02*s.R)
	s.UE = math.Max(s.UE, 0.02)
	f.uneven = math.Max(f.uneven, 0.005*s.R)
}
