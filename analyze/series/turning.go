package series

import "math"

// Turning is one turning point of the motion.
type Turning struct {
	T, UT         float64 // s
	Angle, UAngle float64 // rad
	Index         int     // of the sample before it
}

// TurningPoints finds where the rate changes sign, beyond four times its
// uncertainty on both sides, and fits the angle there by a parabola in the time about it.
func (a *Angle) TurningPoints() []Turning {
	var out []Turning
	last, lastSign := -1, 0.0 // the last sample whose rate is certain, and its sign
	for i, r := range a.Rate {
		if math.IsNaN(r) || math.Abs(r) < 4*a.URate[i] {
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
	if edge := a.WindowS / 2; t0+tv < a.T[0]+edge || t0+tv > a.T[len(a.T)-1]-edge {
		return Turning{}, false // too near the record's end to be seen from both sides
	}
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
