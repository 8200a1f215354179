package spectrum

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Averaged is a spectrum averaged over overlapping segments.
type Averaged struct {
	Freq      []float64 // Hz
	PSD       []float64 // unit²/Hz, one-sided
	Lo, Hi    []float64 // 95 % interval of the PSD, as of noise
	Segments  int
	SegmentS  float64 // s
	Degrees   float64 // degrees of freedom of each PSD value
	Bandwidth float64 // Hz, equivalent noise bandwidth
}

// Welch averages the windowed periodograms of segments of the given length in s
// that overlap by half (P. D. Welch, IEEE Trans. Audio and Electroacoustics 15
// (1967) 70), each with its own mean, or line with opt.Trend, taken out. Times
// may be uneven; segments of which less than two thirds hold samples are left
// out. Frequencies are whole multiples of one over the segment. At even steps it
// is the textbook estimate. MinFreq, MaxLines and FalseAlarm are not used.
func Welch(t, y []float64, segment float64, opt Options) (*Averaged, error) {
	d, err := prepare(t, y, nil, &opt)
	if err != nil {
		return nil, err
	}
	per := int(math.Round(segment / d.step))
	if per < 16 || segment > d.span+1.5*d.step {
		return nil, fmt.Errorf("spectrum: a segment of %g s must hold 16 samples (%g s each) and lie within the series of %g s", segment, d.step, d.span)
	}
	segment = float64(per) * d.step
	df := 1 / segment
	n := min(int(opt.MaxFreq/df+1e-6)+1, per/2+1)
	a := &Averaged{SegmentS: segment, Freq: make([]float64, n), PSD: make([]float64, n)}
	for k := range n {
		a.Freq[k] = float64(k) * df
	}
	for from := d.t[0]; from+segment <= d.t[len(d.t)-1]+1.5*d.step; from += segment / 2 {
		seg := d.slice(from-d.step/4, from+segment-d.step/4)
		if 3*len(seg.t) < 2*per {
			continue
		}
		seg.takeOut(opt.Trend)
		seg.span, seg.step = segment-d.step, d.step
		seg.phase = seg.t[0] - from
		p := seg.periodogram(seg.y, opt.Window, df, n)
		for k, v := range p.psd {
			a.PSD[k] += v
		}
		a.Bandwidth += p.bandwidth
		a.Segments++
	}
	if a.Segments == 0 {
		return nil, fmt.Errorf("spectrum: no segment of %g s is filled to two thirds; take a shorter one", segment)
	}
	for k := range a.PSD {
		a.PSD[k] /= float64(a.Segments)
	}
	if per%2 == 0 && n == per/2+1 && opt.MaxFreq*d.step > 0.4999 {
		a.PSD[n-1] /= 2 // the highest frequency has no twin
	}
	a.Bandwidth /= float64(a.Segments)
	a.intervals(opt.Window, per)
	return a, nil
}

// intervals sets the degrees of freedom (Welch 1967, eq. 16, with the overlap's
// correlation) and the intervals.
func (a *Averaged) intervals(win Window, per int) {
	var whole, half float64
	for i := range per {
		w := win.at(float64(i) / float64(per))
		whole += w * w
		if j := i + per/2; j < per {
			half += w * win.at(float64(j)/float64(per))
		}
	}
	rho := sq(half / whole)
	k := float64(a.Segments)
	a.Degrees = 2 * k / (1 + 2*rho*(k-1)/k)
	chi := distuv.ChiSquared{K: a.Degrees}
	lo, hi := a.Degrees/chi.Quantile(0.975), a.Degrees/chi.Quantile(0.025)
	a.Lo, a.Hi = make([]float64, len(a.PSD)), make([]float64, len(a.PSD))
	for i, p := range a.PSD {
		a.Lo[i], a.Hi[i] = lo*p, hi*p
	}
}

func sq(x float64) float64 { return x * x }

// slice is the data with from ≤ t < to, values as they are.
func (d *data) slice(from, to float64) *data {
	out := &data{step: d.step}
	for i, t := range d.t {
		if t >= from && t < to {
			out.t, out.y, out.w = append(out.t, t), append(out.y, d.y[i]), append(out.w, d.w[i])
		}
	}
	total := 0.0
	for _, w := range out.w {
		total += w
	}
	for i := range out.w {
		out.w[i] /= total
	}
	return out
}

// Spectrogram is a spectrum that moves along the series.
type Spectrogram struct {
	Time    []float64   // s, middle of each stretch
	Freq    []float64   // Hz
	PSD     [][]float64 // unit²/Hz, one row per time
	WindowS float64     // s, length of a stretch
	// Ridge is the strongest frequency of each stretch in Hz with its standard
	// uncertainty, and Height its amplitude in the unit; NaN where no line stands
	// out.
	Ridge, URidge, Height []float64
}

// Moving computes spectra of stretches of the given length in s, at most 400 of
// them, evenly spread. Stretches of which less than half hold samples are NaN.
func Moving(t, y, u []float64, window float64, opt Options) (*Spectrogram, error) {
	d, err := prepare(t, y, u, &opt)
	if err != nil {
		return nil, err
	}
	per := int(math.Round(window / d.step))
	if per < 16 || window > d.span {
		return nil, fmt.Errorf("spectrum: a stretch of %g s must hold 16 samples (%g s each) and lie within the series of %g s", window, d.step, d.span)
	}
	df := 1 / window / 2
	n := int(opt.MaxFreq/df) + 1
	g := &Spectrogram{WindowS: window, Freq: make([]float64, n)}
	for k := range n {
		g.Freq[k] = float64(k) * df
	}
	count := min(400, int(8*(d.span-window)/window)+1)
	for i := range count {
		from := d.t[0]
		if count > 1 {
			from += (d.span - window) * float64(i) / float64(count-1)
		}
		row := make([]float64, n)
		f, uf, h := math.NaN(), math.NaN(), math.NaN()
		seg := d.slice(from, from+window+d.step/2)
		if 2*len(seg.t) < per {
			for k := range row {
				row[k] = math.NaN()
			}
		} else {
			seg.takeOut(opt.Trend)
			seg.span = window
			seg.phase = seg.t[0] - from
			row = seg.periodogram(seg.y, opt.Window, df, n).psd
			f, uf, h = seg.ridge(opt)
		}
		g.Time = append(g.Time, from+window/2)
		g.PSD = append(g.PSD, row)
		g.Ridge, g.URidge, g.Height = append(g.Ridge, f), append(g.URidge, uf), append(g.Height, h)
	}
	return g, nil
}

// ridge is the strongest frequency of a stretch: the top of its Lomb–Scargle
// power by a parabola through three points, with the uncertainty of the bound
// for the noise that the sinusoid leaves.
func (d *data) ridge(opt Options) (f, uf, amplitude float64) {
	const df = 1. / 16 // of a resolution
	n := int(opt.MaxFreq*d.span/df) + 1
	p := d.lombScargle(d.y, df/d.span, n)
	best := 0
	for k := int(math.Ceil(max(opt.MinFreq*d.span, 1) / df)); k < n-1; k++ {
		if p[k] > p[best] {
			best = k
		}
	}
	if best == 0 || d.falseAlarm(p[best], opt.MaxFreq) > opt.FalseAlarm {
		return math.NaN(), math.NaN(), math.NaN()
	}
	curve := p[best-1] - 2*p[best] + p[best+1]
	shift := 0.0
	if curve < 0 {
		shift = 0.5 * (p[best-1] - p[best+1]) / curve
	}
	f = (float64(best) + min(max(shift, -1), 1)) * df / d.span
	variance := 0.0
	for i, y := range d.y {
		variance += d.w[i] * y * y
	}
	amplitude = math.Sqrt(2 * p[best] * variance)
	noise := (1 - p[best]) * variance
	// Rife and Boorstyn 1974 for a real sinusoid: var f = 6σ²/(π²A²NT²).
	uf = math.Sqrt(6*noise/(math.Pi*math.Pi*amplitude*amplitude*float64(len(d.t)))) / d.span
	return f, uf, amplitude
}
