package series

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/track/rig"
)

func sortGaps(g []Gap) {
	slices.SortFunc(g, func(a, b Gap) int {
		switch {
		case a.FromS < b.FromS:
			return -1
		case a.FromS > b.FromS:
			return 1
		}
		return 0
	})
}

// restIsVertical sets the angle's zero to the middle of the swing, where nothing
// but gravity acts on the part, and says so; otherwise it leaves the zero alone,
// tells why, and returns false.
func (b *builder) restIsVertical(a *Angle, part *rig.Part) bool {
	if why := Pulled(b.rig, part.Name); why != "" {
		a.Cautions = append(a.Cautions, fmt.Sprintf("The rig takes the rest as vertical, but %s; the picture's own upright was used instead. Give camera.plumb_px or a target.", why))
		return false
	}
	rest, u, how := a.middle()
	if math.IsNaN(rest) {
		a.Cautions = append(a.Cautions, "The rig takes the rest as vertical, but the clip shows neither a rest nor two full swings; the picture's own upright was used instead.")
		return false
	}
	for i := range a.Angle {
		a.Angle[i] -= rest
	}
	d := make([]float64, len(a.T))
	for i := range d {
		d[i] = u
	}
	a.Shared = append(a.Shared, Shared{"vertical", d})
	a.VerticalFrom = how
	return true
}

// Pulled says in plain words what besides gravity acts on a part, so that its
// rest is not vertical and its period tells nothing of g; empty for nothing.
func Pulled(r *rig.Rig, part string) string {
	for _, p := range r.Parts {
		if p.Name != part {
			continue
		}
		if p.Upright {
			return "it stands on a spring stem"
		}
		if p.Spring.Rate.Fit || p.Spring.Rate.V != 0 || p.Spring.Cubic.Fit || p.Spring.Cubic.V != 0 {
			return "a spring acts on it"
		}
	}
	own := false
	for _, m := range r.Magnets {
		if m.Part == part {
			own = true
		}
	}
	if own && (len(r.Magnets) > 1 || len(r.Coils) > 0) {
		for _, m := range r.Magnets {
			if m.Part != part {
				return fmt.Sprintf("the magnet %q acts on it", m.Name)
			}
		}
		if len(r.Coils) > 0 {
			return "a coil acts on it"
		}
	}
	for _, p := range r.Parts {
		if p.On == part {
			return fmt.Sprintf("the part %q that it carries moves", p.Name)
		}
		if p.Name == part && p.On != "" && p.On != "base" {
			return fmt.Sprintf("it sits on %q, which moves", p.On)
		}
	}
	return ""
}

// middle finds the angle about which the part swings: from three turning points
// in a row, (x₁ + 2x₂ + x₃)/4, which frees it of a decay that is even over two
// half swings, and which dry friction does not park. A part that never moves
// rests; half a degree is then allowed for the friction that may park it.
func (a *Angle) middle() (rest, u float64, how string) {
	tp := a.TurningPoints()
	if len(tp) < 5 {
		m, s := meanStd(a.Angle)
		if s < 5*median(a.UAngle) {
			return m, 0.5 * math.Pi / 180, "the part at rest"
		}
		return math.NaN(), 0, ""
	}
	var mids []float64
	for i := 2; i < len(tp); i++ {
		mids = append(mids, (tp[i-2].Angle+2*tp[i-1].Angle+tp[i].Angle)/4)
	}
	m, s := meanStd(mids)
	// Neighbouring mids share turning points: about every third is independent.
	return m, s / math.Sqrt(math.Max(1, float64(len(mids))/3)), "the middle of the swing, nothing but gravity acting"
}

func meanStd(x []float64) (m, s float64) {
	for _, v := range x {
		m += v
	}
	m /= float64(len(x))
	for _, v := range x {
		s += (v - m) * (v - m)
	}
	return m, math.Sqrt(s / math.Max(1, float64(len(x)-1)))
}

func median(x []float64) float64 {
	y := slices.Clone(x)
	slices.Sort(y)
	return y[len(y)/2]
}
