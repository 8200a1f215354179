package analyze

import (
	"context"
	"fmt"

	"lodeswing/analyze/modes"
)

// together finds the modes of parts that were measured together, and draws how
// the spectrum of each part that no free decay explains changes over the clip.
func together(ctx context.Context, w *work) error {
	opt := modes.Options{Unit: "rad", Quantity: "angle", ShowUnit: "°", ShowFactor: 1 / degree}
	var bobs []modes.Bob
	for i := range w.angles {
		a := &w.angles[i]
		opt.UClock = a.UClock
		t, y, u, _ := averaged(a.T, a.Angle, a.UAngle)
		b := modes.Bob{Name: a.Part, T: t, Y: y, U: u}
		opt.Unit, opt.Quantity, opt.ShowUnit, opt.ShowFactor = "rad", "angle", "°", 1/degree
		if goesRound(a) { // no mode of small motion, but a spectrum of its sideways motion
			b.Y, _ = sinCos(y)
			opt.Unit, opt.Quantity, opt.ShowUnit, opt.ShowFactor = "1", "sine of the angle", "", 0
		} else {
			bobs = append(bobs, b)
		}
		if w.decaysFreely(a.Part) {
			continue
		}
		c, err := modes.Spectrogram(b, opt)
		if err != nil {
			w.undecided("modes.spectrogram", a.Part, "Spectrum over time", err.Error(), "spectra of short stretches")
			continue
		}
		w.rec.Curves = append(w.rec.Curves, c)
		if ctx.Err() != nil {
			return ctx.Err()
		}
	}
	opt.Unit, opt.Quantity, opt.ShowUnit, opt.ShowFactor = "rad", "angle", "°", 1/degree
	if len(bobs) < 2 {
		return nil
	}
	// As many freedoms as were measured have as many modes: more lines than that come
	// of swings so large that frequencies change with them.
	opt.Most = len(bobs)
	if len(w.rig.Parts) > len(bobs) {
		opt.Most = 0
	}
	res, err := modes.Analyze(ctx, bobs, opt)
	if err != nil {
		return fmt.Errorf("the modes of these %d parts together: %w", len(bobs), err)
	}
	w.rec.Findings = append(w.rec.Findings, res.Findings()...)
	w.rec.Curves = append(w.rec.Curves, res.Curves()...)
	return nil
}
