package chaos

import (
	"math"

	"lodeswing/track/rig"
)

// Never says in plain words why the toy of a rig cannot be chaotic whatever it
// does; empty where it may be. A part on one hinge that no coil drives has two
// numbers for a state, and a path in a plane cannot tangle (Poincaré and
// Bendixson); a toy that is round about its axis keeps its angular momentum, which
// leaves its polar angle such a part.
func Never(r *rig.Rig) string {
	if len(r.Parts) != 1 {
		return ""
	}
	p := &r.Parts[0]
	if p.Joint != "ball" {
		if len(r.Coils) == 0 {
			return "one part on one hinge that no coil drives cannot be"
		}
		return ""
	}
	if len(r.Coils) > 0 {
		return ""
	}
	px, py := plan(p.PivotM)
	for i := range r.Magnets {
		m := &r.Magnets[i]
		x, y := plan(m.AtM)
		if m.Part == "base" || m.Part == "" {
			x, y = x-px, y-py
		}
		ax, ay := plan(m.Axis)
		if math.Hypot(x, y) > 1e-9 || math.Hypot(ax, ay) > 1e-9 {
			return ""
		}
	}
	if x, y := plan(p.CentreM); math.Hypot(x, y) > 1e-9 {
		return ""
	}
	return "a toy that is round about its axis cannot be"
}

// plan is a rig's place or direction, [x, z] or [x, y, z], seen from above.
func plan(a []float64) (x, y float64) {
	switch len(a) {
	case 2:
		return a[0], 0
	case 3:
		return a[0], a[1]
	}
	return 0, 0
}
