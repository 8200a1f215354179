package clip

import (
	"math"
	"sort"
)

// deriveTimes fills everything that follows from the container's presentation
// times f.pts (played seconds, ascending): times from the first frame with slow
// motion undone, rates, jitter and lost frames.
func (f *Facts) deriveTimes() {
	n := len(f.pts)
	f.Times = make([]float64, n)
	for i, p := range f.pts {
		f.Times[i] = (p - f.pts[0]) / f.RateFactor
	}
	if n < 2 {
		return
	}
	f.DurationS = f.Times[n-1]
	if f.DurationS <= 0 {
		return
	}
	f.TrueRate = float64(n-1) / f.DurationS
	steps := make([]float64, n-1)
	for i := range steps {
		steps[i] = f.Times[i+1] - f.Times[i]
	}
	usual := median(steps)
	if usual <= 0 {
		usual = f.DurationS / float64(n-1)
	}
	var sum float64
	kept := 0
	for i, d := range steps {
		// A hole is an interval of a whole number of usual ones, two or more. One
		// that fits no whole number is jitter, or a rate that changes.
		k := math.Round(d / usual)
		if k >= 2 && math.Abs(d/usual-k) <= 0.2 {
			f.Lost = append(f.Lost, LostFrames{AfterIndex: i, Count: int(k) - 1, T: f.Times[i]})
			continue
		}
		sum += (d - usual) * (d - usual)
		kept++
	}
	// Where a third of all intervals would be holes, the camera was changing its
	// rate and lost nothing.
	if len(f.Lost)*3 > n {
		f.Lost, sum, kept = nil, 0, len(steps)
		for _, d := range steps {
			sum += (d - usual) * (d - usual)
		}
	}
	if kept > 0 {
		f.JitterS = math.Sqrt(sum / float64(kept))
	}
}

// median returns the middle value of x, NaN when x is empty; x keeps its order.
func median(x []float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	s := append([]float64(nil), x...)
	sort.Float64s(s)
	m := len(s) / 2
	if len(s)%2 == 1 {
		return s[m]
	}
	return (s[m-1] + s[m]) / 2
}
