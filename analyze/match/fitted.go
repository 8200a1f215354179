package match

import (
	"math"
	"slices"
	"strings"

	"lodeswing/track/rig"
)

// fittedRig is the rig with the numbers that were found. Those that the clips do
// not determine stay free.
func (r *reporter) fittedRig() {
	c := r.rig.Clone()
	c.FreeFitted()
	var addresses []string
	var values []float64
	var index []int
	for i := range r.params {
		q := &r.params[i]
		_, what := split(q.address)
		if q.role != byModel || !(q.asked && !r.poor[i] || what == "inertia" || what == "gap") {
			continue
		}
		for _, a := range q.tied {
			n, err := c.Find(a)
			if err != nil || !n.MayFit {
				continue
			}
			addresses, values, index = append(addresses, n.Address), append(values, q.value), append(index, i)
		}
	}
	cov := make([][]float64, len(index))
	for a := range index {
		cov[a] = make([]float64, len(index))
		for b := range index {
			cov[a][b] = r.j.cov[index[a]*r.j.np+index[b]]
		}
	}
	if err := c.SetFitted(addresses, values, cov); err != nil {
		r.res.Cautions = append(r.res.Cautions, "The rig with the fitted numbers could not be made: "+err.Error())
		return
	}
	r.places(c)
	c.Start = r.startOf(c)
	r.res.Fitted = c
}

// places puts what else the model needs to move as matched into the rig: weights
// and places, each within what the rig admits of it.
func (r *reporter) places(c *rig.Rig) {
	for i := range r.params {
		q := &r.params[i]
		if q.role != byModel || q.tied != nil {
			continue
		}
		if name, ok := strings.CutSuffix(q.address, ".weight moment"); ok {
			if p := c.FindPart(name); p != nil {
				p.MassKg.V *= q.value
			}
			continue
		}
		owner, axis := split(q.address)
		owner, what := split(owner)
		if g := c.FindMagnet(owner); g != nil && what == "axis" {
			slanted(g, axis, q.value)
			continue
		}
		var at *[]float64
		if p := c.FindPart(owner); p != nil && what == "centre" {
			at = &p.CentreM
		} else if p != nil && what == "pivot" {
			at = &p.PivotM
		} else if g := c.FindMagnet(owner); g != nil && what == "at" {
			at = &g.AtM
		}
		if at == nil {
			continue
		}
		x := rig.XYZ(*at)
		x[slices.Index([]string{"x", "y", "z"}, axis)] = q.value
		if len(*at) == 3 || axis == "y" {
			*at = x[:]
		} else {
			*at = []float64{x[0], x[2]}
		}
	}
}

// slanted turns a magnet's axis in the rig, as the model does.
func slanted(g *rig.Magnet, way string, by float64) {
	x := rig.XYZ(g.Axis)
	s, c := math.Sincos(by)
	flat := math.Hypot(x[0], x[2])
	switch {
	case way == "turn":
		x[0], x[2] = c*x[0]+s*x[2], c*x[2]-s*x[0]
	case flat > 0:
		x[0], x[1], x[2] = x[0]*(c*flat-s*x[1])/flat, c*x[1]+s*flat, x[2]*(c*flat-s*x[1])/flat
	}
	if g.Axis = []float64{x[0], x[2]}; x[1] != 0 {
		g.Axis = x[:]
	}
}

// startOf is the matched state at the first clip's start, as a rig's starts.
func (r *reporter) startOf(c *rig.Rig) []rig.Start {
	k := &r.clips[0]
	if len(k.segments) == 0 || len(k.model.Parts()) < len(c.Parts) {
		return c.Start
	}
	y := k.segments[0].y
	given := func(x float64) rig.Value { return rig.Value{V: x, Set: true} }
	var out []rig.Start
	for i, name := range k.model.Parts() {
		s := rig.Start{Part: name}
		if k.model.OneAxis(i) {
			a, w := k.model.Angle(y, i)
			s.AngleRad, s.RateRadS = given(a), given(w)
		} else {
			a, az, w, azw, spin := k.model.Ball(y, i)
			s.AngleRad, s.AzimuthRad, s.RateRadS, s.AzimuthRateRadS, s.SpinRadS = given(a), given(az), given(w), given(azw), given(spin)
		}
		out = append(out, s)
	}
	return out
}
