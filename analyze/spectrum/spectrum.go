// Package spectrum tells which frequencies a motion holds. What comes in: times
// in seconds as they are (uneven, with gaps), values in any one unit, and their
// standard uncertainties. What goes out: power spectral density in unit²/Hz and
// amplitude in the unit, and the spectral lines with frequency in Hz, amplitude,
// phase in rad and decay rate in 1/s, each with its standard uncertainty and the
// chance that noise alone would have made it.
//
// Curves (PSD, amplitude, Welch, spectrogram) are windowed Fourier sums over the
// true times. Lines are found in the generalised Lomb–Scargle periodogram
// (M. Zechmeister and M. Kürster, Astronomy & Astrophysics 496 (2009) 577),
// judged by the false-alarm probability of R. V. Baluev, Monthly Notices of the
// RAS 385 (2008) 1279, and refined together by nonlinear least squares, which
// for white noise is the maximum-likelihood estimate and reaches the bound of
// D. C. Rife and R. R. Boorstyn, IEEE Trans. Information Theory 20 (1974) 591.
package spectrum

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Options says how to look. The zero value is a good choice.
type Options struct {
	Window   Window  // of the PSD and amplitude curves; zero value: Hann
	MinFreq  float64 // Hz, least frequency of a line; 0: one over the duration
	MaxFreq  float64 // Hz; 0: half the sampling rate (from the median step)
	MaxLines int     // 0: 8
	// Spare is how many sinusoids beyond MaxLines may be spent on lines that are not
	// steady. 0: 6; negative: none.
	Spare int
	// FalseAlarm is the greatest chance that noise alone made a line for it to be
	// listed. 0: 0.001.
	FalseAlarm float64
	// Trend: take a straight line out, not only the mean.
	Trend bool
	// UClock is the relative standard uncertainty of every duration, UScale that
	// of every value; both go into Findings, not into the lines.
	UClock, UScale float64
	// Unit, Quantity and ShowUnit are for words and figures: "rad", "angle", "°"
	// with ShowFactor shown = value × ShowFactor.
	Unit, Quantity, ShowUnit string
	ShowFactor               float64
}

// Window is the taper of a spectrum's curves.
type Window int

// The windows, as functions of the time within the stretch (F. J. Harris,
// Proceedings of the IEEE 66 (1978) 51).
const (
	Hann     Window = iota
	Boxcar          // no taper: narrowest lines, most leakage
	Blackman        // least leakage, widest lines
)

// at is the taper at x from 0 to 1.
func (w Window) at(x float64) float64 {
	switch w {
	case Boxcar:
		return 1
	case Blackman:
		return 0.42 - 0.5*math.Cos(2*math.Pi*x) + 0.08*math.Cos(4*math.Pi*x)
	}
	return 0.5 - 0.5*math.Cos(2*math.Pi*x)
}

// Spectrum is what Compute finds. Freq, PSD, Amplitude and Background have one
// length and equal steps of frequency.
type Spectrum struct {
	Freq      []float64 // Hz
	PSD       []float64 // unit²/Hz, one-sided
	Amplitude []float64 // unit; a steady sinusoid shows its amplitude
	// Background is the noise's PSD near each frequency: what is left without the
	// lines, smoothed.
	Background []float64
	// Power is the generalised Lomb–Scargle power of the data at Freq: the share of
	// the variance that a sinusoid of that frequency explains.
	Power []float64
	// Lines, strongest first.
	Lines []Line
	// Sinusoids are all that were fitted, in order of frequency, before groups of them
	// were made one unsteady line.
	Sinusoids []Line

	From, To   float64 // s, first and last sample
	Samples    int
	Step       float64 // s, median time between samples
	Mean       float64 // unit
	Noise      float64 // unit, standard deviation of what the lines do not explain
	Bandwidth  float64 // Hz, equivalent noise bandwidth of the window
	Resolution float64 // Hz, one over the duration: lines nearer than this merge
	Gaps       []Gap   // stretches longer than four steps without a sample
	Cautions   []string
	opt        Options
}

// Gap is a stretch of time without samples, from the last before it to the first
// after it, in s.
type Gap struct{ From, To float64 }

// Line is a sinusoid in the data:
//
//	y = Amplitude·exp(−Decay·x)·cos(2π(Frequency·x + Drift·x(x−T)/2) + Phase)
//
// with x = t − From, the time since the first sample, and T = To − From.
type Line struct {
	Frequency, UFrequency float64 // Hz; in the middle of the clip when it drifts
	Amplitude, UAmplitude float64 // unit; at From when the line decays
	Phase, UPhase         float64 // rad, −π … π
	// Decay is the amplitude's decay rate in 1/s (negative: it grows); 0 with
	// UDecay > 0 when none was seen. Such a line is broadened by Decay/π Hz.
	Decay, UDecay float64
	// Drift is the change of frequency in Hz/s; 0 with UDrift > 0 when none was seen.
	Drift, UDrift float64
	// FalseAlarm is the chance that noise alone makes such a peak somewhere in the
	// band; LevelDB is its power over the background within one resolution, in dB.
	FalseAlarm float64
	LevelDB    float64
	// Harmonic and Of: this line is Harmonic times line Of (an index), within
	// uncertainty; 0 when it is not.
	Harmonic, Of int
	// Unsteady: a cluster of three or more peaks nearer than 3/duration to each
	// other stands here, from motion that changes or from modes too close to part.
	// Frequency is then the centre of their power and UFrequency its half width.
	Unsteady bool
}

// Compute finds the spectrum of y (unit) at the times t (s, increasing). u holds
// the standard uncertainties, or nil when all are alike; only their ratios count.
// Samples with a y that is NaN are left out. At least 16 samples are needed.
func Compute(t, y, u []float64, opt Options) (*Spectrum, error) {
	d, err := prepare(t, y, u, &opt)
	if err != nil {
		return nil, err
	}
	s := &Spectrum{
		From: d.t[0], To: d.t[len(d.t)-1], Samples: len(d.t), Step: d.step,
		Mean: d.mean, Resolution: 1 / d.span, Gaps: d.gaps, opt: opt,
	}
	// Four points per resolution: the highest point of a line stands within 2 % of
	// its top.
	df := s.Resolution / 4
	n := int(opt.MaxFreq/df) + 1
	s.Freq = make([]float64, n)
	for k := range n {
		s.Freq[k] = float64(k) * df
	}
	p := d.periodogram(d.y, opt.Window, df, n)
	s.PSD, s.Amplitude, s.Bandwidth = p.psd, p.amplitude, p.bandwidth
	rest, err := s.findLines(context.Background(), d)
	if err != nil {
		return nil, err
	}
	s.Background = smoothFloor(d.periodogram(rest, opt.Window, df, n).psd, 4*48)
	s.remark(d)
	return s, nil
}

// data is a checked series with its mean or trend taken out.
type data struct {
	t, y   []float64 // y less mean or trend
	w      []float64 // weights, sum 1
	span   float64   // s, duration
	step   float64
	mean   float64
	gaps   []Gap
	filled float64 // share of the duration that holds samples
	phase  float64 // s, from the start of the window to the first sample
}

// prepare checks the input, takes out the trend and fills in the options'
// defaults.
func prepare(t, y, u []float64, opt *Options) (*data, error) {
	if len(t) != len(y) || u != nil && len(u) != len(t) {
		return nil, fmt.Errorf("spectrum: %d times, %d values and %d uncertainties; they must be as many", len(t), len(y), len(u))
	}
	d := &data{}
	for i := range t {
		if math.IsNaN(y[i]) {
			continue
		}
		if math.IsInf(y[i], 0) || math.IsNaN(t[i]) || math.IsInf(t[i], 0) {
			return nil, fmt.Errorf("spectrum: sample %d has the time %v and the value %v", i, t[i], y[i])
		}
		if n := len(d.t); n > 0 && t[i] <= d.t[n-1] {
			return nil, fmt.Errorf("spectrum: times must increase, but sample %d has %g s after %g s", i, t[i], d.t[n-1])
		}
		w := 1.0
		if u != nil {
			if !(u[i] > 0) || math.IsInf(u[i], 0) {
				return nil, fmt.Errorf("spectrum: sample %d has the uncertainty %v; it must be positive", i, u[i])
			}
			w = 1 / (u[i] * u[i])
		}
		d.t, d.y, d.w = append(d.t, t[i]), append(d.y, y[i]), append(d.w, w)
	}
	n := len(d.t)
	if n < 16 {
		return nil, fmt.Errorf("spectrum: %d samples are too few to look for frequencies, 16 are the least", n)
	}
	d.span = d.t[n-1] - d.t[0]
	steps := make([]float64, n-1)
	for i := range steps {
		steps[i] = d.t[i+1] - d.t[i]
	}
	sorted := slices.Clone(steps)
	slices.Sort(sorted)
	d.step = sorted[len(sorted)/2]
	d.filled = 1
	for i, s := range steps {
		if s > 4*d.step {
			d.gaps = append(d.gaps, Gap{d.t[i], d.t[i+1]})
			d.filled -= (s - d.step) / d.span
		}
	}
	total := 0.0
	for _, w := range d.w {
		total += w
	}
	for i := range d.w {
		d.w[i] /= total
	}
	d.takeOut(opt.Trend)
	if opt.MaxFreq <= 0 {
		opt.MaxFreq = 0.5 / d.step
	}
	if opt.MinFreq <= 0 {
		opt.MinFreq = 1 / d.span
	}
	if opt.MaxLines <= 0 {
		opt.MaxLines = 8
	}
	if opt.Spare == 0 {
		opt.Spare = 6
	}
	opt.Spare = max(0, opt.Spare)
	if opt.FalseAlarm <= 0 {
		opt.FalseAlarm = 1e-3
	}
	if opt.MaxFreq <= opt.MinFreq {
		return nil, fmt.Errorf("spectrum: the band %g … %g Hz is empty", opt.MinFreq, opt.MaxFreq)
	}
	if points := opt.MaxFreq * d.span; points > 4e6 {
		return nil, fmt.Errorf("spectrum: %.3g Hz over %.3g s is %.2g resolutions; ask for a lower MaxFreq", opt.MaxFreq, d.span, points)
	}
	if slices.Max(d.y) == slices.Min(d.y) {
		return nil, errors.New("spectrum: all values are the same; there is nothing to analyse")
	}
	return d, nil
}

// takeOut removes the plain mean, or the straight line of least squares.
func (d *data) takeOut(trend bool) {
	n := float64(len(d.y))
	var sy, st float64
	for i, y := range d.y {
		sy += y
		st += d.t[i]
	}
	d.mean = sy / n
	slope, mid := 0.0, st/n
	if trend {
		var sty, stt float64
		for i, y := range d.y {
			sty += (d.t[i] - mid) * y
			stt += (d.t[i] - mid) * (d.t[i] - mid)
		}
		slope = sty / stt
	}
	for i := range d.y {
		d.y[i] -= d.mean + slope*(d.t[i]-mid)
	}
}

// remark says what a reader of the curves should know.
func (s *Spectrum) remark(d *data) {
	say := func(format string, args ...any) { s.Cautions = append(s.Cautions, fmt.Sprintf(format, args...)) }
	if d.filled < 0.9 {
		say("%.0f %% of the duration holds no sample; the gaps raise side lobes beside every line of the curve (the lines' own figures take the gaps into account).", 100*(1-d.filled))
	}
	if len(s.Lines) == 0 {
		say("No line stands out of the noise with a false-alarm chance below %.2g.", s.opt.FalseAlarm)
		return
	}
	for i, l := range s.Lines {
		switch {
		case l.Unsteady:
			say("Around %.4g Hz stands a group of peaks, not one line: the motion changes during the clip, or modes lie closer than the clip can part; see the spectrogram.", l.Frequency)
		case l.Decay > 0:
			say("Line %d (%.4g Hz) decays, which broadens it by %.2g Hz; its height in the spectrum is below its first amplitude, and depends on the clip's length.", i+1, l.Frequency, l.Decay/math.Pi)
		case l.Decay < 0:
			say("Line %d (%.4g Hz) grows during the clip, which broadens it.", i+1, l.Frequency)
		}
		if l.Drift != 0 && !l.Unsteady {
			say("The frequency of line %d (%.4g Hz) drifts by %.2g Hz over the clip.", i+1, l.Frequency, l.Drift*(s.To-s.From))
		}
		if l.Frequency*(s.To-s.From) < 3 {
			say("Line %d (%.4g Hz) goes through fewer than three periods in the clip; drift and it cannot be told apart well.", i+1, l.Frequency)
		}
	}
}
