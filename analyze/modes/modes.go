// Package modes tells the modes of several bobs that move together.
//
// What comes in: one series per bob (seconds as they are, values in one unit,
// standard uncertainties); gaps and different times are allowed. What goes out:
// the modes that all bobs share, each with frequency in Hz, decay rate in 1/s,
// damping ratio and shape; beats in s; how the energy wanders between the bobs;
// coupling strengths in Hz; each with its standard uncertainty.
//
// All bobs are fitted together by a sum of damped sinusoids with common
// frequencies and decay rates, so that two modes nearer than one over the clip's
// length come apart as well as noise allows. The search starts from a subspace
// method: ESPRIT (R. Roy and T. Kailath, IEEE Trans. ASSP 37 (1989) 984) on the
// joint Hankel matrix, kin of the matrix pencil (Y. Hua and T. K. Sarkar, IEEE
// Trans. ASSP 38 (1990) 814). Amplitudes are eliminated by variable projection
// (G. H. Golub and V. Pereyra, SIAM J. Numerical Analysis 10 (1973) 413), and the
// number of modes is that which the Bayesian information criterion prefers
// (G. Schwarz, Annals of Statistics 6 (1978) 461).
package modes

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Bob is the series of one bob: times in s, rising; values and standard
// uncertainties in the unit of Options. A nil U takes all samples as equal.
type Bob struct {
	Name    string
	T, Y, U []float64
}

// Options says what is known beforehand. The zero value is a good choice.
type Options struct {
	Most   int     // modes looked for at most; 0: two more than there are bobs
	UClock float64 // relative standard uncertainty of every duration
	// Unit, Quantity and ShowUnit are for words and figures: "rad", "angle", "°"
	// with ShowFactor shown = value × ShowFactor.
	Unit, Quantity, ShowUnit string
	ShowFactor               float64
}

// Mode is one motion that all bobs share: bob b moves as
//
//	|Shape[b]|·exp(−Decay·x)·cos(2π·Frequency·x + arg Shape[b])
//
// with x the time from Result.Middle.
type Mode struct {
	Frequency, UFrequency float64      // Hz
	Decay, UDecay         float64      // 1/s; negative where it grows
	Zeta, UZeta           float64      // damping ratio
	Shape                 []complex128 // in the bobs' unit
	Ratio, URatio         []float64    // the shape over its largest, in step with it: +1 … −1
	Phase, UPhase         []float64    // rad from the largest; near 0 or π in a true mode
	Share                 float64      // of the energy of all modes over the clip
	// Overtone is n where this is n times the frequency of a stronger mode: what a
	// swing that is not quite a sine leaves, no mode of its own.
	Overtone int
}

// Beat is what two modes make together.
type Beat struct {
	First, Second int // indices of modes
	Period, U     float64
	Depth         float64 // 0 … 1: the share of one bob's envelope by which it waxes and wanes, greatest of the bobs, mid clip
}

// Exchange is one stretch in which energy goes from one bob to another.
type Exchange struct {
	FromS, ToS   float64
	Giver, Taker int     // indices of bobs: the one that lost most, the one that won most
	Lost, Won    float64 // change of their shares of the energy
}

// Coupling is how strongly two bobs pull at each other, as a frequency: for two
// equal bobs alone it is the beat frequency.
type Coupling struct {
	First, Second int
	Hz, U         float64
}

// Result is what the bobs' motion tells.
type Result struct {
	Bobs        []string
	From, To    float64 // s
	Middle      float64 // s, to which shapes and phases refer
	Modes       []Mode  // lowest frequency first
	Beats       []Beat  // strongest first
	Wandering   float64 // greatest swing of one bob's share of the energy; U beside it
	UWandering  float64
	Exchanges   []Exchange
	Couplings   []Coupling // nil unless there are as many modes as bobs
	Explained   float64    // share of the motion's power that the modes explain
	Scatter     float64    // of the residuals over the samples' uncertainty
	Orders      []Order
	Converged   bool
	Correlation float64 // factor by which correlated residuals widened the uncertainties

	opt  Options
	bobs []Bob
	fit  *joint
}

// Order is a number of modes that was weighed.
type Order struct {
	Modes int
	BIC   float64
}

// leastExplained is the share of power below which a motion is no sum of modes.
const leastExplained = 0.9

// ErrNoModes says that a motion is not a sum of a few modes.
var ErrNoModes = errors.New("the motion is not a sum of a few modes")

// Analyze finds the modes of bobs measured together. It returns an error for
// series that make no sense or are too short, when ctx ends, and one that wraps
// ErrNoModes for a motion that a few modes do not explain.
func Analyze(ctx context.Context, bobs []Bob, opt Options) (*Result, error) {
	if len(bobs) == 0 {
		return nil, errors.New("modes: there is no bob")
	}
	if opt.Most == 0 {
		opt.Most = len(bobs) + 2
	}
	d, err := prepare(bobs)
	if err != nil {
		return nil, err
	}
	res := &Result{From: d.from, To: d.to, Middle: d.middle, opt: opt, bobs: bobs}
	for _, b := range bobs {
		res.Bobs = append(res.Bobs, b.Name)
	}
	best, err := d.search(ctx, opt.Most, res)
	if err != nil {
		return nil, err
	}
	res.Explained = 1 - best.rss/d.power
	if res.Explained < leastExplained {
		return nil, fmt.Errorf("modes: %w: the best %d explain %.0f %% of it. It changes too much, or swings too far, to have modes; film smaller motion, let go and left alone",
			ErrNoModes, len(best.p)/2, 100*math.Max(0, res.Explained))
	}
	if err := d.complete(ctx, best, res); err != nil {
		return nil, err
	}
	return res, nil
}

// prepare checks the series and makes them ready.
func prepare(bobs []Bob) (*data, error) {
	d := &data{from: math.Inf(1), to: math.Inf(-1)}
	for _, b := range bobs {
		if len(b.T) != len(b.Y) || b.U != nil && len(b.U) != len(b.T) {
			return nil, fmt.Errorf("modes: “%s” has %d times, %d values and %d uncertainties", b.Name, len(b.T), len(b.Y), len(b.U))
		}
		if len(b.T) < 30 {
			return nil, fmt.Errorf("modes: “%s” has %d samples; 30 are needed", b.Name, len(b.T))
		}
		for i := range b.T {
			if math.IsNaN(b.T[i]+b.Y[i]) || math.IsInf(b.T[i]+b.Y[i], 0) {
				return nil, fmt.Errorf("modes: row %d of “%s” is not a number", i+1, b.Name)
			}
			if i > 0 && b.T[i] <= b.T[i-1] {
				return nil, fmt.Errorf("modes: the times of “%s” do not rise at row %d (%g s)", b.Name, i+1, b.T[i])
			}
			if b.U != nil && !(b.U[i] > 0) {
				return nil, fmt.Errorf("modes: the uncertainty in row %d of “%s” is not positive", i+1, b.Name)
			}
		}
		d.from, d.to = math.Min(d.from, b.T[0]), math.Max(d.to, b.T[len(b.T)-1])
		steps := make([]float64, 0, len(b.T))
		for i := 1; i < len(b.T); i++ {
			steps = append(steps, b.T[i]-b.T[i-1])
		}
		slices.Sort(steps)
		d.step = math.Max(d.step, steps[len(steps)/2])
	}
	d.middle, d.span = (d.from+d.to)/2, d.to-d.from
	for _, b := range bobs {
		s := one{x: make([]float64, len(b.T)), y: b.Y, w: make([]float64, len(b.T))}
		mean, sum := 0.0, 0.0
		for i := range b.T {
			s.x[i] = b.T[i] - d.middle
			s.w[i] = 1
			if b.U != nil {
				s.w[i] = 1 / b.U[i]
			}
			mean += s.w[i] * s.w[i] * b.Y[i]
			sum += s.w[i] * s.w[i]
		}
		s.mean = mean / sum
		for i := range b.T {
			r := s.w[i] * (b.Y[i] - s.mean)
			d.power += r * r
		}
		d.bobs = append(d.bobs, s)
		d.rows += len(b.T)
	}
	if d.power == 0 {
		return nil, errors.New("modes: nothing moves")
	}
	return d, nil
}
