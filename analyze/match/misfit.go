package match

import (
	"context"
	"fmt"
	"math"
	"sort"
	"strings"
	"time"

	"lodeswing/analyze/finding"
)

// A fit whose residuals are more than plainMisfit times a picture's noise is that of
// a wrong model. An encoder sees far more sharply: there they must also be more
// than wrongShare of the motion's own size. What lies between is a model that is
// nearly right, and its uncertainties are widened by the residuals as they are.
const (
	plainMisfit = 3.0
	clearMisfit = 1.5
	causesFrom  = 2.2 // and from here on causes are looked for, for so long at most
	causesTime  = 30 * time.Second
	wrongShare  = 0.03
	filmedShare = 0.005 // of a film: half a pixel in a swing of a hundred
)

// size is the motion's own r.m.s. size, in units of the noise.
func (f *fitter) size() float64 {
	total, n := 0.0, 0
	for c := range f.clips {
		k := &f.clips[c]
		for w := range k.watched {
			var sa, sb, saa, sbb, m float64
			for i := range k.obs {
				if o := &k.obs[i]; o.who == w {
					a, b := o.a*o.w0, o.b*math.Hypot(o.w1, o.w2)
					sa, sb, saa, sbb, m = sa+a, sb+b, saa+a*a, sbb+b*b, m+1
				}
			}
			if m > 0 {
				total += saa - sa*sa/m + sbb - sb*sb/m
				n += int(m) * k.dims
			}
		}
	}
	return math.Sqrt(math.Max(total, 0) / float64(max(n, 1)))
}

// fine gives states of a clip, a few per stretch.
func (f *fitter) fine(c int) (times []float64, states [][]float64) {
	k := &f.clips[c]
	for i := range k.segments {
		g := &k.segments[i]
		const parts = 12
		y := append([]float64(nil), g.y...)
		for p := range parts {
			times, states = append(times, g.t0+(g.t1-g.t0)*float64(p)/parts), append(states, append([]float64(nil), y...))
			if err := k.model.Move(y, (g.t1-g.t0)/parts, k.off((g.t0+g.t1)/2)); err != nil {
				break
			}
		}
	}
	return times, states
}

// misfit looks at the residuals and, where the model plainly does not fit, for a
// magnet that is reversed or missing. It returns a caution for every number; empty
// where the model fits.
func (r *reporter) misfit(ctx context.Context) string {
	s := r.res.Scatter
	text := fmt.Sprintf("The residuals are %.2f times what the pictures' noise lets expect; from one frame to the next they correlate by %.2f.", s, r.j.lag1)
	share := s / r.widened / r.size()
	cause := ""
	if s > causesFrom && !r.opt.Quick {
		limited, stop := context.WithTimeout(ctx, causesTime)
		cause = r.causes(limited)
		stop()
	}
	limit := wrongShare
	for c := range r.clips {
		if r.clips[c].tables == nil {
			limit = filmedShare
		}
	}
	wrong := cause != "" || s > plainMisfit && share > limit
	switch {
	case s < clearMisfit:
		text += " The model fits."
	case !wrong:
		text += fmt.Sprintf(" That is %.2g %% of the motion: the model is nearly right, and the uncertainties are widened by what it leaves.", 100*share)
	default:
		text += fmt.Sprintf(" That is %.2g %% of the motion: the model does not fit.", 100*share)
	}
	r.add(finding.Finding{Key: "match.residuals", Name: "Does the model fit", Kind: finding.Statement, Unit: "1", Text: text, Method: r.say})
	if !wrong {
		if s > plainMisfit {
			r.res.Cautions = append(r.res.Cautions, fmt.Sprintf("The matched model leaves residuals %.1f times the measurement's noise (%.2g %% of the motion): something small acts that the rig does not hold.", s, 100*share))
		}
		return ""
	}
	if cause == "" && !r.opt.Quick {
		cause = "Neither a reversed nor a missing magnet explains it. Look for a part that touches, a loose joint, a magnet that is not in the rig, or a wrong scale."
	}
	if cause != "" {
		r.add(finding.Finding{Key: "match.cause", Name: "Likely cause", Kind: finding.Statement, Unit: "1", Text: cause, Method: "the same clip matched with each magnet reversed and taken out in turn"})
		r.res.Cautions = append(r.res.Cautions, cause)
	}
	return fmt.Sprintf("The model does not fit the motion: the residuals are %.1f times the pictures' noise.", s)
}

// causes matches the clips with each magnet reversed or taken out, and names what
// fits clearly better.
func (r *reporter) causes(ctx context.Context) string {
	type trial struct {
		names []string
		what  string
		rms   float64
	}
	var all []trial
	now := r.widened * math.Sqrt(r.j.chi2/float64(r.j.rows))
	for i := range r.rig.Magnets {
		name := r.rig.Magnets[i].Name
		for _, what := range []string{"reversed", "missing"} {
			c := r.rig.Clone()
			if what == "reversed" {
				for k := range c.Magnets[i].Axis {
					c.Magnets[i].Axis[k] *= -1
				}
			} else {
				c.Magnets = append(c.Magnets[:i:i], c.Magnets[i+1:]...)
				for g := range c.Fit.Equal {
					var keep []string
					for _, a := range c.Fit.Equal[g] {
						if owner, _ := split(a); owner != name {
							keep = append(keep, a)
						}
					}
					c.Fit.Equal[g] = keep
				}
				for a := range c.Fit.Bounds {
					if owner, _ := split(a); owner == name {
						delete(c.Fit.Bounds, a)
					}
				}
			}
			clips := r.source
			o := r.opt
			o.Quick, o.Log = true, nil
			f, err := prepare(clips, c, o)
			if err != nil {
				continue
			}
			f.giveUp = 0.5 * now
			for _, t := range all {
				f.giveUp = math.Min(f.giveUp, 2*t.rms+1)
			}
			if err := f.quick(ctx); err != nil {
				continue // what is out of time, or fits no better, is not told
			}
			all = append(all, trial{[]string{name}, what, f.widened * f.rms()})
		}
	}
	if len(all) == 0 {
		return ""
	}
	sort.Slice(all, func(a, b int) bool { return all[a].rms < all[b].rms })
	best := all[0]
	if !(best.rms < 0.5*now) {
		return ""
	}
	var same []string
	for _, t := range all {
		if t.rms < 1.2*best.rms+0.1 {
			for _, n := range t.names {
				same = append(same, fmt.Sprintf("“%s” is %s", n, t.what))
			}
		}
	}
	if len(same) == 1 {
		return fmt.Sprintf("The motion fits (residuals %.1f times the noise) if %s.", best.rms, same[0])
	}
	return fmt.Sprintf("The motion fits (residuals %.1f times the noise) if either %s; this clip cannot say which.", best.rms, strings.Join(same, " or "))
}

// quick fits only as far as is needed to judge a cause.
func (f *fitter) quick(ctx context.Context) error { return f.approach(ctx) }
