package chaos

import (
	"context"
	"math"

	"lodeswing/analyze/recurrence"
)

// chaos applies the tests to an irregular motion that does not decay. An exponent
// beyond three of its uncertainties and surrogates that all do worse must agree; the
// 0–1 test must speak for it or, from 300 passes on, not against it: of a weakly
// chaotic toy it comes to 0.4 or so in a clip.
func (r *Regime) chaos(ctx context.Context, e *evenly, m Motion) error {
	if m.Never != "" {
		return nil
	}
	if r.Passes < enough {
		r.NeedS = 1.2 * enough / float64(r.Passes) * e.step * float64(e.n)
		r.Confidence = 0.7
		return nil
	}
	e = e.thinned(max(1, int(r.PeriodS/e.step/perTurn)))
	period := r.PeriodS / e.step
	main := e.columns[e.main]
	var err error
	if r.Delay, r.Dimension, err = embedding(main, e.step, period); err != nil {
		return err
	}
	if r.States, err = e.states(period, r.Delay, r.Dimension); err != nil {
		return err
	}
	if r.Divergence, err = Diverge(r.States, DivergenceOptions{Period: max(1, period)}); err != nil {
		return err
	}
	var quarter []float64
	wild := e.columns[r.wild]                                      // one part may swing in step while another darts about
	for i := 0.0; int(i) < len(wild); i += max(1, period/4*1.13) { // not in step with the period
		quarter = append(quarter, wild[int(i)])
	}
	if len(quarter) >= 200 {
		if r.ZeroOne, err = ZeroOneTest(quarter); err != nil {
			return err
		}
	}
	dim := min(max(2, r.Dimension.Dim), 5)
	if r.Surrogates, err = SurrogateTest(ctx, thin(wild, period), SurrogateOptions{
		Dim: dim, Delay: max(1, r.Delay.Samples/stride(period)), Band: max(1, int(math.Ceil(period))/stride(period)), Count: 19,
	}); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		r.Cautions = append(r.Cautions, err.Error())
	}
	// As a figure for the reader; noise and short clips give none, and it has no vote.
	series := thin(wild, period)
	if r.Correlation, err = CorrelationDimension(series, max(1, r.Delay.Samples/stride(period)), 7, max(1, int(math.Ceil(period))/stride(period))); err != nil {
		r.Cautions = append(r.Cautions, err.Error())
	}
	d := r.Divergence
	parts := d.Found && d.Exponent.V > 3*d.Exponent.U
	notNoise := r.Surrogates != nil && r.Surrogates.Rejected
	k := 0.0
	if r.ZeroOne != nil {
		k = r.ZeroOne.K.V
	}
	r.Confidence = 0.6
	least := clearK // of 1,000 simulated clips five of 735 ordered ones passed leastK, all with 130 to 180 passes
	if r.Passes >= sure {
		least = leastK
	}
	if parts && notNoise && k > least {
		r.Kind = Chaotic
		// Certain only where all three say so.
		r.Confidence = min(0.98, 0.65+0.2*min(1, max(0, (k-leastK)/(clearK-leastK)))+0.03*(d.Exponent.V/d.Exponent.U-3))
		return nil
	}
	if r.Passes < sure {
		r.NeedS = 1.1 * sure / float64(r.Passes) * e.step * float64(e.n)
	}
	return nil
}

// perTurn is about how many samples of a turn the tests use.
const perTurn = 48

// thinned keeps one sample of so many.
func (e *evenly) thinned(of int) *evenly {
	if of <= 1 {
		return e
	}
	out := &evenly{from: e.from, step: e.step * float64(of), main: e.main}
	for _, c := range e.columns {
		var x []float64
		for i := 0; i < len(c); i += of {
			x = append(x, c[i])
		}
		out.columns, out.n = append(out.columns, x), len(x)
	}
	return out
}

// The 0–1 test's K below which it speaks against chaos, and from which on it speaks
// for it.
const (
	leastK = 0.2
	clearK = 0.7
)

// embedding chooses delay and dimension for a column of that period in samples.
func embedding(x []float64, step, period float64) (*Delay, *Dimension, error) {
	delay, err := MutualInformation(x, step, int(2*period))
	if err != nil {
		return nil, nil, err
	}
	dim, err := FalseNeighbours(x, delay.Samples, 8, int(math.Ceil(period)))
	return delay, dim, err
}

// states are positions and, by a short delay, their rates; of two columns, which may
// be all that is seen of a ball joint with a spin, a third value as well; of one alone
// the delays that its own embedding asks for.
func (e *evenly) states(period float64, delay *Delay, dim *Dimension) (recurrence.Vectors, error) {
	if n := len(e.columns); n > 1 {
		each := 2
		if n == 2 {
			each = 3
		}
		return recurrence.Embed(e.from, e.step, each, max(1, int(math.Round(period/8))), e.columns...)
	}
	return recurrence.Embed(e.from, e.step, max(2, dim.Dim), delay.Samples, e.columns...)
}

// stride thins a series to some twelve samples a period.
func stride(period float64) int { return max(1, int(period/12)) }

func thin(x []float64, period float64) []float64 {
	var out []float64
	for i := 0; i < len(x); i += stride(period) {
		out = append(out, x[i])
	}
	return out
}
