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

// Turning is one turning point of the motion.
type Turning struct {
	T, UT         float64 // s
	Angle, UAngle float64 // rad
	Index         int     // of the sample before it
}

// TurningPoints finds where the rate changes sign, beyond its uncertainty on
// both sides, and fits the angle there by a parabola in the time about it.
func (a *Angle) TurningPoints() []Turning {
	var out []Turning
	last, lastSign := -1, 0.0 // the last sample whose rate is certain, and its sign
	for i, r := range a.Rate {
		if math.IsNaN(r) || math.Abs(r) < 2.5*a.URate[i] {
			continue
		}
		s := math.Copysign(1, r)
		if lastSign != 0 && s != lastSign && !a.gapBetween(last, i) {
			if tp, ok := a.vertex(last, i); ok {
				out = append(out, tp)
			}
		}
		if lastSign != 0 && a.gapBetween(last, i) && s != lastSign {
			// A turn inside a gap was not seen: nothing is made up for it.
			lastSign = 0
		}
		last, lastSign = i, s
	}
	return out
}

func (a *Angle) gapBetween(i, j int) bool {
	longest := 3.5 * medianStepAround(a.T, i, j)
	for k := i + 1; k <= j; k++ {
		if a.T[k]-a.T[k-1] > longest {
			return true
		}
	}
	return false
}

func medianStepAround(t []float64, i, j int) float64 {
	lo, hi := max(0, i-10), min(len(t)-1, j+10)
	return medianStep(t[lo : hi+1])
}

// vertex finds the turning point between samples i and j by a line through the
// rates there and a parabola through the angles.
func (a *Angle) vertex(i, j int) (Turning, bool) {
	// Reach out so that the line has at least five samples.
	for j-i < 4 && (i > 0 || j < len(a.T)-1) {
		if i > 0 {
			i--
		}
		if j < len(a.T)-1 {
			j++
		}
	}
	t0 := (a.T[i] + a.T[j]) / 2
	var sw, sx, sy, sxx, sxy float64
	for k := i; k <= j; k++ {
		if math.IsNaN(a.Rate[k]) {
			continue
		}
		w := 1 / (a.URate[k]*a.URate[k] + 1e-300)
		x := a.T[k] - t0
		sw += w
		sx += w * x
		sy += w * a.Rate[k]
		sxx += w * x * x
		sxy += w * x * a.Rate[k]
	}
	det := sw*sxx - sx*sx
	if !(det > 0) {
		return Turning{}, false
	}
	slope := (sw*sxy - sx*sy) / det
	icept := (sxx*sy - sx*sxy) / det
	if slope == 0 {
		return Turning{}, false
	}
	tv := -icept / slope
	if tv < a.T[i]-t0 || tv > a.T[j]-t0 {
		return Turning{}, false
	}
	// The rates of neighbours are correlated over the smoothing window, so the
	// vertex is no better known than one rate allows.
	uRate := median(a.URate[i : j+1])
	tp := Turning{T: t0 + tv, UT: uRate / math.Abs(slope)}
	// Angle at the vertex: the mean of angle − ½·slope·(t − tv)².
	sw, sy = 0, 0
	for k := i; k <= j; k++ {
		x := a.T[k] - tp.T
		w := 1 / (a.UAngle[k]*a.UAngle[k] + 1e-300)
		sw += w
		sy += w * (a.Angle[k] - 0.5*slope*x*x)
		if a.T[k] <= tp.T {
			tp.Index = k
		}
	}
	tp.Angle, tp.UAngle = sy/sw, math.Max(1, a.NoiseRatio)/math.Sqrt(sw)
	return tp, true
}
