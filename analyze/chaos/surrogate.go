package chaos

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"lodeswing/analyze/recurrence"
)

// SurrogateOptions says how a series is compared with surrogates.
type SurrogateOptions struct {
	Dim, Delay int // embedding
	Band       int // samples; neighbours nearer in time are not used
	Horizon    int // samples ahead that are foretold; 0: Delay
	Count      int // surrogates; 0: 39, for a one-sided test at 2.5 %
	Seed       uint64
}

// Surrogates is a test of the hypothesis that a series is noise with a spectrum,
// seen through a fixed curve: linear, stationary, with whatever distribution.
type Surrogates struct {
	// Error is the series' error of a nonlinear forecast, over its spread; Errors
	// those of the surrogates, in order.
	Error  float64
	Errors []float64
	// P is the chance of so small an error under the hypothesis, by rank.
	P float64
	// Z is how many standard deviations of the surrogates the error lies below
	// their mean.
	Z float64
	// Rejected: no surrogate does as well, and Z is above 3. The rank alone rejects
	// strongly resonant noise too often, since the iteration cannot quite
	// give a short surrogate both the spectrum and the values.
	Rejected bool
	Samples  int // used: the stretch of x whose ends match best
	Why      string
}

// SurrogateTest compares how well x foretells itself with how well surrogates of
// the same spectrum and distribution do (iterative amplitude-adjusted Fourier
// transform: T. Schreiber and A. Schmitz, Physical Review Letters 77 (1996) 635;
// the forecast by the mean of four nearest states: T. Schreiber and A. Schmitz,
// Physical Review E 55 (1997) 5443, who find it the most telling). Noise, however
// it is filtered, is not rejected; neither is a periodic motion. A rejection says
// nonlinear or not stationary, not yet chaotic: a motion that decays is rejected
// for its decay. Of more than 4,000 samples the first 4,000 are used.
func SurrogateTest(ctx context.Context, x []float64, opt SurrogateOptions) (*Surrogates, error) {
	if slices.ContainsFunc(x, math.IsNaN) {
		return nil, fmt.Errorf("chaos: surrogates need a series without gaps; take the longest stretch without one")
	}
	if opt.Count <= 0 {
		opt.Count = 39
	}
	if opt.Horizon <= 0 {
		opt.Horizon = max(1, opt.Delay)
	}
	if opt.Dim < 1 || opt.Delay < 1 || len(x)-(opt.Dim-1)*opt.Delay-opt.Horizon < 200 {
		return nil, fmt.Errorf("chaos: %d samples are too few to compare with surrogates in %d dimensions at a delay of %d", len(x), opt.Dim, opt.Delay)
	}
	x = matchingEnds(x[:min(len(x), 4000)])
	s := &Surrogates{Samples: len(x)}
	_, sd := meanSD(x)
	if sd == 0 {
		return nil, fmt.Errorf("chaos: all values are the same; nothing moves")
	}
	var err error
	if s.Error, err = forecastError(x, opt); err != nil {
		return nil, err
	}
	s.Error /= sd
	rng := rand.New(rand.NewPCG(opt.Seed, 11))
	maker := newSurrogateMaker(x)
	below := 0
	for range opt.Count {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		e, err := forecastError(maker.make(rng), opt)
		if err != nil {
			return nil, err
		}
		s.Errors = append(s.Errors, e/sd)
		if e/sd <= s.Error {
			below++
		}
	}
	s.P = float64(below+1) / float64(opt.Count+1)
	mean, spread := meanSD(s.Errors)
	if spread > 0 {
		s.Z = (mean - s.Error) / spread
	}
	s.Rejected = below == 0 && s.Z > 3
	slices.Sort(s.Errors)
	s.Why = fmt.Sprintf("a forecast of the series errs by %.3g of its spread, of %d surrogates by %.3g to %.3g", s.Error, opt.Count, s.Errors[0], s.Errors[opt.Count-1])
	return s, nil
}

// forecastError is the root mean square error of foretelling x by the mean of what
// followed on the four nearest states.
func forecastError(x []float64, opt SurrogateOptions) (float64, error) {
	v, err := recurrence.Embed(0, 1, opt.Dim, opt.Delay, x)
	if err != nil {
		return 0, err
	}
	last := (opt.Dim - 1) * opt.Delay
	n := v.N - opt.Horizon
	t := newTree(v, n)
	ss, count := 0.0, 0.0
	for i := 0; i < n; i += max(1, n/1500) {
		near := t.some(v.State(i), 4, i, max(1, opt.Band))
		if len(near) == 0 {
			continue
		}
		told := 0.0
		for _, c := range near {
			told += x[c.i+last+opt.Horizon] / float64(len(near))
		}
		e := x[i+last+opt.Horizon] - told
		ss += e * e
		count++
	}
	if count == 0 {
		return 0, fmt.Errorf("chaos: no state has a neighbour %d samples away in time; the series is too short", opt.Band)
	}
	return math.Sqrt(ss / count), nil
}

// matchingEnds is the stretch of x, at least nine tenths of it and of a length
// that the Fourier transform likes, whose ends match best in value and slope: a
// jump between them would give the surrogates false high frequencies.
func matchingEnds(x []float64) []float64 {
	best, least := x, math.Inf(1)
	n := len(x)
	for length := n; length >= n*9/10; length-- {
		if !smoothNumber(length) {
			continue
		}
		for from := 0; from+length <= n; from++ {
			a, b := x[from], x[from+length-1]
			a1, b1 := x[from+1]-a, b-x[from+length-2]
			if d := (a-b)*(a-b) + (a1-b1)*(a1-b1); d < least {
				best, least = x[from:from+length], d
			}
		}
	}
	return best
}

func smoothNumber(n int) bool {
	for _, p := range []int{2, 3, 5, 7} {
		for n%p == 0 {
			n /= p
		}
	}
	return n == 1
}

// surrogateMaker makes series with the spectrum and, nearly, the values of x.
type surrogateMaker struct {
	fft    *fourier.FFT
	sorted []float64
	size   []float64 // |X| of each frequency
	coeff  []complex128
	order  []int
}

func newSurrogateMaker(x []float64) *surrogateMaker {
	m := &surrogateMaker{fft: fourier.NewFFT(len(x)), sorted: slices.Clone(x), order: make([]int, len(x))}
	slices.Sort(m.sorted)
	m.coeff = m.fft.Coefficients(nil, x)
	for _, c := range m.coeff {
		m.size = append(m.size, cmplx.Abs(c))
	}
	return m
}

// make starts from the values in random order and gives them in turn the
// spectrum and the values until the order stays. It ends with the spectrum, which
// the forecast depends on most: with the values last a short series of resonant
// noise comes out too white, and the noise would be rejected too often.
func (m *surrogateMaker) make(rng *rand.Rand) []float64 {
	n := len(m.sorted)
	y := slices.Clone(m.sorted)
	rng.Shuffle(n, func(i, j int) { y[i], y[j] = y[j], y[i] })
	was := make([]int, n)
	for range 200 {
		m.fft.Coefficients(m.coeff, y)
		for k, c := range m.coeff {
			if a := cmplx.Abs(c); a > 0 {
				m.coeff[k] = c * complex(m.size[k]/a/float64(n), 0) // Sequence does not divide
			}
		}
		m.fft.Sequence(y, m.coeff)
		for i := range m.order {
			m.order[i] = i
		}
		slices.SortFunc(m.order, func(a, b int) int { return cmp.Compare(y[a], y[b]) })
		if slices.Equal(was, m.order) {
			return y
		}
		for r, i := range m.order {
			y[i] = m.sorted[r]
		}
		copy(was, m.order)
	}
	return y
}
