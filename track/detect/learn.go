package detect

import "math"

// Learn updates what is known of the bob's outline from a good fit. free says
// that the fit had blur and ellipse free.
func (f *Fitter) Learn(r *Fit, free bool) {
	if !r.OK || r.Cut || r.Visible < 0.8 {
		f.Shape.UR = math.Hypot(f.Shape.UR, 0.004*f.Shape.R)
		return
	}
	// The fit already holds the prior: its R is the updated mean.
	f.Shape.R = r.R
	f.Shape.UR = math.Hypot(r.UR, 0.004*r.R)
	if free {
		f.Shape.Blur, f.Shape.UBlur = r.Blur, math.Max(r.UBlur, 0.02)
		f.Shape.E1, f.Shape.E2 = r.E1, r.E2
		f.Shape.UE = math.Max(r.UE, 0.01)
	}
}
