package chaos

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/recurrence"
)

// Correlation is the correlation dimension.
type Correlation struct {
	// D is the dimension, Found whether it stops rising with the embedding
	// dimension; Why says how it was read, or why not.
	D     Value
	Found bool
	Why   string
	Dim   int // embedding dimension in which D was read
	// R are distances (in the series' unit), and for each embedding dimension 1, 2 …
	// Sum the share of pairs nearer than R and Slope its local slope against R, both
	// logarithmic; NaN where there are too few pairs.
	R          []float64
	Sum, Slope [][]float64
	ByDim      []Value // D in each dimension; NaN where there is no scaling range
	From, To   float64 // the scaling range of D, distances
	// Most is the greatest dimension that so many samples can show at all.
	Most float64
}

// steps are the distances per doubling.
const perOctave = 8

// CorrelationDimension measures how the number of near states grows with the
// distance (P. Grassberger and I. Procaccia, Physica D 9 (1983) 189), in the
// maximum norm, for embeddings of x in 1 … most dimensions at the delay, without
// pairs nearer in time than band samples. The scaling range is the longest over
// which the local slope stays within a tenth.
func CorrelationDimension(x []float64, delay, most, band int) (*Correlation, error) {
	_, sd := meanSD(x)
	if most < 1 || delay < 1 || len(x)-(most-1)*delay < 300 {
		return nil, fmt.Errorf("chaos: %d samples are too few for the correlation dimension in %d dimensions at a delay of %d (300 states at least)", len(x), most, delay)
	}
	if !(sd > 0) {
		return nil, fmt.Errorf("chaos: all values are the same; nothing moves")
	}
	v, err := recurrence.Embed(0, 1, most, delay, x)
	if err != nil {
		return nil, err
	}
	c := &Correlation{}
	// J.-P. Eckmann and D. Ruelle, Physica D 56 (1992) 185, with a range of one decade.
	c.Most = 2 * math.Log10(float64(v.N))
	const octaves = 20
	top := math.Ceil(math.Log2(8 * sd))
	bins := octaves * perOctave
	total := make([][]float64, blocks)
	for b := range total {
		total[b] = make([]float64, most*bins)
	}
	pairs := c.count(v, band, top, bins, total)
	if pairs < 1000 {
		return nil, fmt.Errorf("chaos: only %d pairs of states are more than %d samples apart", pairs, band)
	}
	for k := range bins {
		c.R = append(c.R, edge(k, top, octaves))
	}
	whole := make([]float64, most*bins)
	for _, t := range total {
		for i, n := range t {
			whole[i] += n
		}
	}
	c.Sum, c.Slope = slopes(whole, most, bins, float64(pairs), c.R)
	c.read(total, whole, most, bins, float64(pairs))
	return c, nil
}

// edge is the upper end of bin k: bins divide octaves evenly, as the first bits
// of a number's mantissa do.
func edge(k int, top float64, octaves int) float64 {
	e, f := k/perOctave, k%perOctave
	return math.Exp2(top-float64(octaves)+float64(e)) * (1 + float64(f+1)/perOctave)
}

// count puts the distances of pairs into bins by dimension and by block of the
// first state, and returns the number of pairs. Of more than 4,000 states 4,000
// are compared with all.
func (c *Correlation) count(v recurrence.Vectors, band int, top float64, bins int, total [][]float64) int {
	const octaves = 20
	base := int64(math.Float64bits(math.Exp2(top-octaves)) >> (52 - 3))
	pairs := 0
	stride := max(1, v.N/4000)
	ok := make([]bool, v.N)
	for i := range ok {
		ok[i] = whole(v.State(i))
	}
	for i := 0; i < v.N; i += stride {
		if !ok[i] {
			continue
		}
		t := total[i*blocks/v.N]
		a := v.State(i)
		// With every state as first, each pair once; else all states as second.
		from := 0
		if stride == 1 {
			from = i + band
		}
		for j := from; j < v.N; j++ {
			if gap := j - i; !ok[j] || gap < band && gap > -band {
				continue
			}
			pairs++
			b := v.State(j)
			d := 0.0
			for m, x := range a {
				d = max(d, math.Abs(x-b[m]))
				k := int(int64(math.Float64bits(d)>>(52-3)) - base)
				if k < bins {
					t[m*bins+max(k, 0)]++
				}
			}
		}
	}
	return pairs
}

// slopes turns counts into shares of pairs and local slopes over two octaves.
func slopes(count []float64, most, bins int, pairs float64, r []float64) (sum, slope [][]float64) {
	const half = perOctave // the ripple of sets with gaps at all scales goes by octaves
	for m := range most {
		s, l := make([]float64, bins), make([]float64, bins)
		run := 0.0
		for k := range bins {
			run += count[m*bins+k]
			s[k] = run / pairs
			l[k] = math.NaN()
		}
		for k := half; k < bins-half; k++ {
			if s[k-half]*pairs >= 30 && s[k+half] < 0.999 {
				l[k] = math.Log(s[k+half]/s[k-half]) / math.Log(r[k+half]/r[k-half])
			}
		}
		sum, slope = append(sum, s), append(slope, l)
	}
	return sum, slope
}

// read finds the scaling range in each dimension, and the dimension in which D
// no longer rises.
func (c *Correlation) read(total [][]float64, all []float64, most, bins int, pairs float64) {
	ranges := make([][2]int, most)
	for m := range most {
		from, to := scaling(c.Slope[m], c.Sum[m])
		ranges[m] = [2]int{from, to}
		if to-from < perOctave {
			c.ByDim = append(c.ByDim, Value{math.NaN(), math.NaN()})
			continue
		}
		d := power(all, m, bins, from, to, c.R)
		mean, square := 0.0, 0.0
		buf := make([]float64, len(all))
		for _, t := range total {
			for i := range buf {
				buf[i] = all[i] - t[i]
			}
			l := power(buf, m, bins, from, to, c.R)
			mean += l / blocks
			square += l * l / blocks
		}
		scatter := math.Sqrt(max(0, square-mean*mean) * (blocks - 1))
		_, ripple := meanSD(c.Slope[m][from : to+1])
		c.ByDim = append(c.ByDim, Value{d, math.Hypot(scatter, ripple/2)})
	}
	for m := 0; m+1 < most; m++ {
		a, b := c.ByDim[m], c.ByDim[m+1]
		if math.IsNaN(a.V) || math.IsNaN(b.V) || float64(m+1) <= a.V+0.1 {
			continue
		}
		if b.V-a.V < max(0.05*a.V, a.U) {
			c.D = Value{b.V, math.Hypot(b.U, (b.V-a.V)/2)}
			c.Dim, c.Found = m+2, true
			c.From, c.To = c.R[ranges[m+1][0]], c.R[ranges[m+1][1]]
			c.Why = fmt.Sprintf("the same in %d and %d dimensions, over distances from %.2g to %.2g", m+1, m+2, c.From, c.To)
			if c.D.V > c.Most {
				c.Found = false
				c.Why = fmt.Sprintf("so few samples cannot show a dimension above %.1f", c.Most)
			}
			return
		}
	}
	c.Why = "the dimension rises with every embedding dimension, as that of noise does, or the series is too short"
}

// scaling is the longest range, in bins, over which the slope stays within a
// tenth of its middle: below a fifth of all pairs, where the motion's own size
// bends it.
func scaling(slope, sum []float64) (from, to int) {
	for a := range slope {
		lo, hi := math.Inf(1), math.Inf(-1)
		for b := a; b < len(slope); b++ {
			s := slope[b]
			if math.IsNaN(s) || sum[b] > 0.2 {
				break
			}
			lo, hi = min(lo, s), max(hi, s)
			if hi-lo > 0.2*(hi+lo)/2 {
				break
			}
			if b-a > to-from {
				from, to = a, b
			}
		}
	}
	return from, to
}

// power is the slope of the least-squares line through the logarithms of the
// shares of pairs between two distances.
func power(count []float64, m, bins, from, to int, r []float64) float64 {
	run := 0.0
	for k := range from {
		run += count[m*bins+k]
	}
	x, y := make([]float64, 0, to-from+1), make([]float64, 0, to-from+1)
	for k := from; k <= to; k++ {
		run += count[m*bins+k]
		x, y = append(x, math.Log(r[k])), append(y, math.Log(run))
	}
	d, _ := line(x, y, 0, len(x)-1)
	return d
}

// Best is the dimension as far as it is known: D, or the greatest that was read.
func (c *Correlation) Best() float64 {
	if c.Found {
		return c.D.V
	}
	best := 0.0
	for _, v := range slices.Clone(c.ByDim) {
		if v.V > best {
			best = v.V
		}
	}
	return best
}
