package series

import (
	"fmt"
	"math"
	"slices"
)

// despike takes out single samples that stand apart from their neighbours: the
// follower caught something else for one frame. Each is told as a gap. A sample
// counts as such when it lies eight robust standard deviations from the cubic
// through its four neighbours, and when their own distances show the pattern
// that one wrong sample makes (−⅔ of it on either side); a quick turn of the
// motion does not.
func (a *Angle) despike() {
	n := len(a.T)
	if n < 20 {
		return
	}
	d := make([]float64, n)
	for i := 2; i < n-2; i++ {
		d[i] = apart(a.T, a.Angle, i)
	}
	size := make([]float64, 0, n)
	for _, v := range d[2 : n-2] {
		size = append(size, math.Abs(v))
	}
	slices.Sort(size)
	level := 8 * size[len(size)/2] / 0.6744897501960817
	if level == 0 {
		return
	}
	spike := make([]bool, n)
	count := 0
	for i := 2; i < n-2; i++ {
		s := d[i]
		if math.Abs(s) < level {
			continue
		}
		alike := func(j int, share float64) bool {
			return j < 2 || j >= n-2 || math.Abs(d[j]-share*s) < 0.35*math.Abs(s)
		}
		if alike(i-1, -2.0/3) && alike(i+1, -2.0/3) {
			spike[i] = true
			count++
		}
	}
	if count == 0 || count > n/10 {
		return
	}
	var gaps []Gap
	k := 0
	shared := a.Shared
	for i := range a.T {
		if spike[i] {
			gaps = append(gaps, Gap{FromS: a.T[i-1], ToS: a.T[i+1], Frames: 1, Why: "stood apart from its neighbours"})
			continue
		}
		a.T[k], a.Angle[k], a.UAngle[k] = a.T[i], a.Angle[i], a.UAngle[i]
		for _, s := range shared {
			s.D[k] = s.D[i]
		}
		k++
	}
	a.T, a.Angle, a.UAngle = a.T[:k], a.Angle[:k], a.UAngle[:k]
	for i := range a.Shared {
		a.Shared[i].D = a.Shared[i].D[:k]
	}
	a.Gaps = append(a.Gaps, gaps...)
	sortGaps(a.Gaps)
	a.Cautions = append(a.Cautions, fmt.Sprintf("%d samples stood apart from their neighbours and were left out.", count))
}

// apart is how far sample i lies from the cubic through two neighbours on each side.
func apart(t, y []float64, i int) float64 {
	js := [4]int{i - 2, i - 1, i + 1, i + 2}
	at := 0.0
	for _, j := range js {
		l := 1.0
		for _, k := range js {
			if k != j {
				l *= (t[i] - t[k]) / (t[j] - t[k])
			}
		}
		at += l * y[j]
	}
	return y[i] - at
}
