package chaos

import "math"

// Resample reads y, sampled at times t (s, increasing), at the times at: on the cubic
// through the four samples about each, NaN outside and within gaps (steps longer
// than three usual ones). Bobs that a rolling shutter saw at different moments are
// brought together so.
func Resample(t, y, at []float64) []float64 {
	out := make([]float64, len(at))
	if len(t) < 4 {
		for i := range out {
			out[i] = math.NaN()
		}
		return out
	}
	steps := make([]float64, 0, len(t)-1)
	for i := 1; i < len(t); i++ {
		steps = append(steps, t[i]-t[i-1])
	}
	usual := median(steps)
	k := 0
	for i, x := range at {
		for k+1 < len(t) && t[k+1] <= x {
			k++
		}
		switch {
		case t[k] == x:
			out[i] = y[k]
		// Half a step beyond the ends is still told by the last samples.
		case x < t[0]-usual/2, x > t[len(t)-1]+usual/2, k+1 < len(t) && x > t[k] && t[k+1]-t[k] > 3*usual:
			out[i] = math.NaN()
		default:
			lo := min(max(k-1, 0), len(t)-4)
			out[i] = through(t[lo:lo+4], y[lo:lo+4], x)
		}
	}
	return out
}
