package chaos

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
)

// Delay is the choice of a delay for embedding.
type Delay struct {
	Samples     int
	S           float64   // s
	Information []float64 // nats, average mutual information at delays 0, 1, 2 … samples
	Why         string    // plain words
}

// MutualInformation chooses the delay at the first minimum of the average mutual
// information between a series and itself later (A. M. Fraser and H. L. Swinney,
// Physical Review A 33 (1986) 1134), up to most samples; where there is none, at
// the first fall below 1/e of its start. Where the autocorrelation crosses zero
// before that, its crossing is taken: of a nearly pure swing the information's
// minimum can lie near half a period, where the values tell nothing new. Bins hold
// equal numbers of samples and
// the bias of so many bins is taken out. NaNs are left out.
func MutualInformation(x []float64, step float64, most int) (*Delay, error) {
	most = min(most, len(x)/3)
	var order []int
	for i, v := range x {
		if !math.IsNaN(v) {
			order = append(order, i)
		}
	}
	n := len(order)
	if n < 100 || most < 1 {
		return nil, fmt.Errorf("chaos: %d samples are too few to choose a delay from (100 at least)", n)
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(x[a], x[b]) })
	if x[order[0]] == x[order[n-1]] {
		return nil, fmt.Errorf("chaos: all values are the same; nothing moves")
	}
	bins := int(min(max(math.Cbrt(float64(n))*1.2, 8), 48))
	bin := make([]int, len(x))
	for i := range bin {
		bin[i] = -1
	}
	for r, i := range order {
		bin[i] = r * bins / n
	}
	d := &Delay{}
	joint := make([]float64, bins*bins)
	for lag := 0; lag <= most; lag++ {
		d.Information = append(d.Information, information(bin, lag, bins, joint))
	}
	d.Samples, d.Why = firstMinimum(d.Information)
	if zero := firstZero(x, d.Samples); zero > 0 {
		d.Samples, d.Why = zero, "first zero of the autocorrelation, which comes before the mutual information's first minimum"
	}
	d.S = float64(d.Samples) * step
	return d, nil
}

// information is the mutual information of the bins at a lag, less its bias for
// independent values ((bins−1)²/2n: M. S. Roulston, Physica D 125 (1999) 285).
func information(bin []int, lag, bins int, joint []float64) float64 {
	clear(joint)
	a, b := make([]float64, bins), make([]float64, bins)
	n := 0.0
	for i := 0; i+lag < len(bin); i++ {
		if p, q := bin[i], bin[i+lag]; p >= 0 && q >= 0 {
			joint[p*bins+q]++
			a[p]++
			b[q]++
			n++
		}
	}
	info := 0.0
	for p := range bins {
		for q := range bins {
			if c := joint[p*bins+q]; c > 0 {
				info += c / n * math.Log(c*n/(a[p]*b[q]))
			}
		}
	}
	return info - float64((bins-1)*(bins-1))/(2*n)
}

// firstZero is the lag at which the autocorrelation first crosses zero, if that is
// before lag most; else 0.
func firstZero(x []float64, most int) int {
	mean, _ := meanSD(x)
	for lag := 1; lag < most; lag++ {
		sum := 0.0
		for i := 0; i+lag < len(x); i++ {
			if p := (x[i] - mean) * (x[i+lag] - mean); !math.IsNaN(p) {
				sum += p
			}
		}
		if sum <= 0 {
			return lag
		}
	}
	return 0
}

func firstMinimum(info []float64) (at int, why string) {
	// A minimum counts when the curve has risen a little again before it falls
	// below it: ripples of counting noise do not.
	low := 1
	for k := 1; k < len(info); k++ {
		if info[k] < info[low] {
			low = k
		}
		if info[k] > info[low]+0.02*(info[0]-info[low])+1e-3 {
			return low, "first minimum of the mutual information"
		}
	}
	for k := 1; k < len(info); k++ {
		if info[k] < info[0]/math.E {
			return k, "the mutual information has no minimum; it falls below 1/e here"
		}
	}
	return len(info) - 1, "the mutual information neither has a minimum nor falls below 1/e; the longest delay that was looked at"
}

// Dimension is the choice of an embedding dimension.
type Dimension struct {
	Dim   int
	False []float64 // share of false nearest neighbours in dimensions 1, 2 …
	Clear bool      // the share falls below 1 %
	Why   string
}

// FalseNeighbours chooses the dimension in which nearest neighbours stop being
// false (M. B. Kennel, R. Brown and H. D. I. Abarbanel, Physical Review A 45
// (1992) 3403, with their limits 15 for the growth of a distance and 2 for its
// size): the first in which less than 1 % are, else the one from which on the
// share falls no further. Pairs nearer in time than band samples are left out.
func FalseNeighbours(x []float64, delay, most, band int) (*Dimension, error) {
	const growth, size = 15, 2
	_, sd := meanSD(x)
	d := &Dimension{}
	for dim := 1; dim <= most; dim++ {
		v, err := recurrence.Embed(0, 1, dim, delay, x)
		if err != nil || v.N-delay < 50 {
			break
		}
		n := v.N - delay // the next component must exist
		t := newTree(v, n)
		stride := max(1, n/3000)
		wrong, all := 0, 0
		for i := 0; i < n; i += stride {
			q := v.State(i)
			next := x[i+dim*delay]
			if !whole(q) || math.IsNaN(next) {
				continue
			}
			j, r := t.nearest(q, i, band)
			if j < 0 || math.IsNaN(x[j+dim*delay]) {
				continue
			}
			step := math.Abs(next - x[j+dim*delay])
			all++
			if step > growth*r || math.Hypot(step, r) > size*sd {
				wrong++
			}
		}
		if all < 30 {
			break
		}
		d.False = append(d.False, float64(wrong)/float64(all))
		if float64(wrong) < 0.01*float64(all) {
			d.Dim, d.Clear, d.Why = dim, true, "less than 1 % of the nearest neighbours are false"
			return d, nil
		}
	}
	if len(d.False) == 0 {
		return nil, fmt.Errorf("chaos: %d samples are too few to choose a dimension at a delay of %d", len(x), delay)
	}
	least := slices.Min(d.False)
	for k, f := range d.False {
		if f <= least+0.02 {
			d.Dim = k + 1
			break
		}
	}
	d.Why = fmt.Sprintf("the share of false neighbours never falls below 1 %% (noise); from here on it stays near %.0f %%", 100*least)
	return d, nil
}

func meanSD(x []float64) (mean, sd float64) {
	n, s, ss := 0.0, 0.0, 0.0
	for _, v := range x {
		if !math.IsNaN(v) {
			n++
			s += v
		}
	}
	mean = s / n
	for _, v := range x {
		if !math.IsNaN(v) {
			ss += (v - mean) * (v - mean)
		}
	}
	return mean, math.Sqrt(ss / max(1, n-1))
}
