package spectrum

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/lsq"
)

// perLine is how many parameters the joint fit has for each line: frequency,
// decay, drift, and the cosine's and sine's amplitude at the first sample.
const perLine = 5

// fit is the joint fit of all lines and a constant to the data.
type fit struct {
	d     *data
	s     *Spectrum
	p     []float64 // perLine per line, then the constant
	hold  []bool
	found []Line // what was known when a line was found: its power's chance
	rest  []float64
	sum   *lsq.Summary
}

func (f *fit) lines() int { return len(f.p) / perLine }

// findLines finds lines one after the other in what the others leave, fits them
// together after each, and returns what is left of the data.
func (s *Spectrum) findLines(ctx context.Context, d *data) ([]float64, error) {
	f := &fit{d: d, s: s, p: []float64{0}, hold: []bool{false}, rest: slices.Clone(d.y)}
	const df = 1. / 8 // of a resolution: near enough for the fit to find the top
	n := int(s.opt.MaxFreq*d.span/df) + 1
	// A motion that changes takes several sinusoids for one line; room for that.
	for f.lines() < s.opt.MaxLines+s.opt.Spare {
		power := d.lombScargle(f.rest, df/d.span, n)
		if s.Power == nil {
			s.Power = make([]float64, len(s.Freq))
			for k := range s.Power {
				s.Power[k] = power[min(2*k, n-1)]
			}
		}
		if f.scatter() < 1e-12*s.size(d) {
			break // rounding
		}
		best := 0
		for k := int(math.Ceil(s.opt.MinFreq * d.span / df)); k < n; k++ {
			if power[k] > power[best] {
				best = k
			}
		}
		chance := d.falseAlarm(power[best], s.opt.MaxFreq)
		if best == 0 || chance > s.opt.FalseAlarm {
			break
		}
		old := *f
		if err := f.add(ctx, float64(best)*df/d.span, chance); err != nil {
			return nil, err
		}
		if f.sum == nil || !f.sum.Converged && f.lines() > 1 {
			*f = old
			break
		}
	}
	if f.lines() > 0 {
		if err := f.simplify(ctx); err != nil {
			return nil, err
		}
	}
	s.Noise = f.scatter()
	s.Lines = f.report()
	return f.rest, nil
}

// size is the size of the values, as they came.
func (s *Spectrum) size(d *data) float64 {
	ss := 0.0
	for _, y := range d.y {
		ss += y * y
	}
	return math.Sqrt(ss/float64(len(d.y))) + math.Abs(d.mean)
}

// add puts a line at frequency hz and fits all lines again.
func (f *fit) add(ctx context.Context, hz, chance float64) error {
	a, b, decay := f.start(hz)
	p := slices.Clone(f.p[:len(f.p)-1])
	p = append(p, hz, decay, 0, a, b, f.p[len(f.p)-1])
	hold := slices.Clone(f.hold[:len(f.hold)-1])
	f.hold = append(hold, false, false, true, false, false, false)
	f.p = p
	f.found = append(slices.Clone(f.found), Line{FalseAlarm: chance})
	return f.solve(ctx, 1e-6) // near enough to find the next line
}

// start estimates amplitudes and decay at hz from the first and second half.
func (f *fit) start(hz float64) (a, b, decay float64) {
	half := func(lo, hi float64) (c, s float64) {
		w := 0.0
		for i, t := range f.d.t {
			x := t - f.d.t[0]
			if x < lo || x > hi {
				continue
			}
			sin, cos := math.Sincos(2 * math.Pi * hz * x)
			c += 2 * f.rest[i] * cos
			s += 2 * f.rest[i] * sin
			w++
		}
		if w == 0 {
			return 0, 0
		}
		return c / w, s / w
	}
	T := f.d.span
	a1, b1 := half(0, T/2)
	a2, b2 := half(T/2, T)
	h1, h2 := math.Hypot(a1, b1), math.Hypot(a2, b2)
	if h1 > 0 && h2 > 0 {
		decay = min(max(math.Log(h1/h2)/(T/2), -5/T), 15/T)
	}
	a, b = half(0, T)
	grow := 1.0
	if x := decay * T; math.Abs(x) > 1e-6 {
		grow = x / -math.Expm1(-x)
	}
	return a * grow, b * grow, decay
}

// solve fits all lines and the constant together. A motion that no lines fit does
// not converge; what is then found is no worse than what was there.
func (f *fit) solve(ctx context.Context, tolF float64) error {
	T, n, m := f.d.span, len(f.p), len(f.d.t)
	lo, hi, scale := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range lo {
		lo[i], hi[i] = math.Inf(-1), math.Inf(1)
		scale[i] = f.d.step // replaced below; the constant's is set last
	}
	for l := range f.lines() {
		q := perLine * l
		lo[q], hi[q] = f.p[q]-2/T, f.p[q]+2/T
		lo[q+1], hi[q+1] = -10/T, 60/T
		lo[q+2], hi[q+2] = -4/(T*T)*max(1, f.p[q]*T/4), 4/(T*T)*max(1, f.p[q]*T/4)
		scale[q], scale[q+1], scale[q+2] = 1/T, 1/T, 1/(T*T)
		scale[q+3] = math.Hypot(f.p[q+3], f.p[q+4])
		scale[q+4] = scale[q+3]
	}
	scale[n-1] = math.Hypot(f.scatter(), f.d.y[0])
	root := make([]float64, m) // √weight, about 1
	for i, w := range f.d.w {
		root[i] = math.Sqrt(w * float64(m))
	}
	sum, err := lsq.Solve(ctx, lsq.Problem{
		N: n, M: m, Lo: lo, Hi: hi, Scale: scale, Hold: f.hold,
		Residuals: func(p, r []float64) error {
			f.model(p, r)
			for i := range r {
				r[i] = (r[i] - f.d.y[i]) * root[i]
			}
			return nil
		},
		Jacobian: func(p, j []float64) error { f.slopes(p, root, j); return nil },
	}, f.p, lsq.Options{TolF: tolF, MaxIterations: 40, Once: true})
	if err != nil {
		return fmt.Errorf("spectrum: the fit of %d lines failed: %w", f.lines(), err)
	}
	f.sum = sum
	f.p = sum.P
	f.rest = make([]float64, m)
	f.model(f.p, f.rest)
	for i := range f.rest {
		f.rest[i] = f.d.y[i] - f.rest[i]
	}
	return nil
}

// model fills y with all lines and the constant.
func (f *fit) model(p, y []float64) {
	for i, t := range f.d.t {
		x := t - f.d.t[0]
		sum := p[len(p)-1]
		for q := 0; q < len(p)-1; q += perLine {
			sin, cos := math.Sincos(2 * math.Pi * (p[q] + p[q+2]*x/2) * x)
			sum += math.Exp(-p[q+1]*x) * (p[q+3]*cos + p[q+4]*sin)
		}
		y[i] = sum
	}
}

// slopes fills j with the model's derivatives times root.
func (f *fit) slopes(p, root, j []float64) {
	n := len(p)
	for i, t := range f.d.t {
		x := t - f.d.t[0]
		row := j[i*n : (i+1)*n]
		for q := 0; q < n-1; q += perLine {
			sin, cos := math.Sincos(2 * math.Pi * (p[q] + p[q+2]*x/2) * x)
			e := math.Exp(-p[q+1]*x) * root[i]
			y, dy := e*(p[q+3]*cos+p[q+4]*sin), e*(p[q+4]*cos-p[q+3]*sin)
			row[q], row[q+1], row[q+2], row[q+3], row[q+4] = 2*math.Pi*x*dy, -x*y, math.Pi*x*x*dy, e*cos, e*sin
		}
		row[n-1] = root[i]
	}
}

// simplify lets each line drift, then holds decays and drifts that are not seen
// beyond three standard uncertainties, and fits again.
func (f *fit) simplify(ctx context.Context) error {
	kept := *f
	f.hold = slices.Clone(f.hold)
	for l := range f.lines() {
		f.hold[perLine*l+2] = false
	}
	if err := f.solve(ctx, 1e-8); err != nil {
		return err
	}
	if !f.sum.Converged || f.sum.Rank < len(f.p) {
		*f = kept
	}
	f.hold = slices.Clone(f.hold)
	for l := range f.lines() {
		q := perLine*l + 1
		for i := range 2 {
			u := f.sum.U[q+i] * f.noiseFactor(f.p[q-1])
			if math.Abs(f.p[q+i]) < 3*u || f.hold[q+i] {
				f.found[l].setUnseen(i, u)
				f.p[q+i], f.hold[q+i] = 0, true
			}
		}
	}
	// The amplitudes belong to the decay that was there: find them again.
	for l := range f.lines() {
		q := perLine * l
		if f.hold[q+1] {
			f.p[q+3], f.p[q+4], _ = f.startAll(l)
		}
	}
	return f.solve(ctx, 1e-14)
}

func (l *Line) setUnseen(i int, u float64) {
	if i == 0 {
		l.UDecay = u
	} else {
		l.UDrift = u
	}
}

// startAll estimates the amplitudes of line l, held at no decay, from the data
// less the other lines.
func (f *fit) startAll(l int) (a, b, decay float64) {
	p := slices.Clone(f.p)
	p[perLine*l+3], p[perLine*l+4] = 0, 0
	g := *f
	g.rest = make([]float64, len(f.d.y))
	f.model(p, g.rest)
	for i := range g.rest {
		g.rest[i] = f.d.y[i] - g.rest[i]
	}
	a, b, decay = g.start(f.p[perLine*l])
	if x := decay * f.d.span; math.Abs(x) > 1e-6 {
		grow := x / -math.Expm1(-x)
		a, b = a/grow, b/grow
	}
	return a, b, decay
}

// scatter is the standard deviation of what the lines leave.
func (f *fit) scatter() float64 {
	ss := 0.0
	for _, r := range f.rest {
		ss += r * r
	}
	used := len(f.rest) - 1
	for _, h := range f.hold {
		if !h {
			used--
		}
	}
	return math.Sqrt(ss / float64(max(1, used)))
}

// noiseFactor is the root of the noise density near hz over that of white noise
// of the same variance, not below 1: noise that is stronger near a line makes the
// line's uncertainties larger by this factor (the bound holds for the noise
// density at the line).
func (f *fit) noiseFactor(hz float64) float64 {
	d := f.d
	const half = 12 // resolutions to either side
	df := 1 / d.span
	n := int(hz/df) + half + 2
	p := d.periodogram(f.rest, Hann, df, n)
	lo := max(2, int(hz/df)-half)
	near := slices.Clone(p.psd[min(lo, n-half):])
	slices.Sort(near)
	s := f.scatter()
	white := 2 * s * s * d.step
	if white == 0 {
		return 1
	}
	ratio := near[len(near)/2] / math.Ln2 / white
	// The ratio itself scatters by a third: white noise shall not be taken for
	// coloured, nor make uncertainties too large on the average.
	if ratio < 2 {
		ratio = max(1, 1+(ratio-1.5)*2)
	}
	return math.Sqrt(ratio)
}

// report turns the fit into lines, strongest first, clusters made one.
func (f *fit) report() []Line {
	if f.lines() == 0 {
		return nil
	}
	n := len(f.p)
	T := f.d.span
	out := make([]Line, 0, f.lines())
	white := 2 * f.scatter() * f.scatter() * f.d.step
	for l := range f.lines() {
		q := perLine * l
		k := f.noiseFactor(f.p[q])
		a, b := f.p[q+3], f.p[q+4]
		amp := math.Hypot(a, b)
		line := f.found[l]
		g := make([]float64, n)
		g[q], g[q+2] = 1, T/2 // the middle's frequency
		line.Frequency, line.UFrequency = f.p[q]+f.p[q+2]*T/2, k*f.sum.Of(g)
		g[q], g[q+2] = 0, 0
		line.Amplitude, line.Phase = amp, math.Atan2(-b, a)
		g[q+3], g[q+4] = a/amp, b/amp
		line.UAmplitude = k * f.sum.Of(g)
		g[q+3], g[q+4] = b/(amp*amp), -a/(amp*amp)
		line.UPhase = k * f.sum.Of(g)
		if !f.hold[q+1] {
			line.Decay, line.UDecay = f.p[q+1], k*f.sum.U[q+1]
		}
		if !f.hold[q+2] {
			line.Drift, line.UDrift = f.p[q+2], k*f.sum.U[q+2]
		}
		power := amp * amp / 2
		if x := 2 * line.Decay * T; math.Abs(x) > 1e-6 {
			power *= -math.Expm1(-x) / x // mean over the clip
		}
		line.LevelDB = 10 * math.Log10(power*T/(white*k*k))
		if line.Frequency > 0 {
			out = append(out, line)
		}
	}
	slices.SortFunc(out, func(a, b Line) int { return cmp.Compare(a.Frequency, b.Frequency) })
	f.s.Sinusoids = slices.Clone(out)
	out = f.cluster(out)
	slices.SortFunc(out, func(a, b Line) int { return -cmp.Compare(a.LevelDB, b.LevelDB) })
	out = out[:min(len(out), f.s.opt.MaxLines)]
	harmonics(out)
	return out
}

// cluster makes one unsteady line of every group of three or more lines nearer
// than 3/duration and their widths to the next, or of two that the clip cannot
// part, and lets weak companions beside a line that
// decays or drifts go with it. The lines come in order of frequency.
func (f *fit) cluster(lines []Line) []Line {
	var out []Line
	for i := 0; i < len(lines); {
		j := i + 1
		merged := false // two nearer than the clip can part
		for j < len(lines) {
			apart := lines[j].Frequency - lines[j-1].Frequency
			widths := (math.Abs(lines[j].Decay) + math.Abs(lines[j-1].Decay)) / math.Pi
			if apart > 3/f.d.span+widths {
				break
			}
			merged = merged || apart < 1/f.d.span
			j++
		}
		group := lines[i:j]
		i = j
		top := group[0]
		for _, l := range group {
			if l.LevelDB > top.LevelDB {
				top = l
			}
		}
		if len(group) == 1 {
			out = append(out, top)
			continue
		}
		rest := slices.DeleteFunc(slices.Clone(group), func(l Line) bool {
			return l != top && (top.Decay != 0 || top.Drift != 0) && l.LevelDB < top.LevelDB-10
		})
		switch {
		case len(rest) < len(group) && len(rest) == 1:
			top.Unsteady = true
			out = append(out, f.broad(top, group))
		case len(rest) >= 3 || merged:
			out = append(out, f.broad(top, group))
		default:
			out = append(out, rest...)
		}
	}
	return out
}

// broad makes one unsteady line of a group: its frequency is the centre of the
// data's own power over the group's band, its uncertainty that power's half width.
func (f *fit) broad(top Line, group []Line) Line {
	df := 1 / f.d.span / 4
	lo, hi := group[0].Frequency-1.5/f.d.span, group[len(group)-1].Frequency+1.5/f.d.span
	psd := f.d.periodogram(f.d.y, Boxcar, df, int(hi/df)+2).psd
	var p, m1, m2 float64
	for k := max(1, int(lo/df)); k < len(psd); k++ {
		hz := float64(k) * df
		p += psd[k]
		m1 += psd[k] * hz
		m2 += psd[k] * hz * hz
	}
	m1 /= p
	top.Frequency = m1
	top.UFrequency = max(math.Sqrt(max(0, m2/p-m1*m1)), 0.5/f.d.span)
	top.Unsteady, top.Drift = true, 0
	return top
}

// harmonics marks lines at 2 … 9 times the frequency of a stronger line.
func harmonics(lines []Line) {
	for i := range lines {
		for of := range i {
			base := lines[of]
			k := math.Round(lines[i].Frequency / base.Frequency)
			u := math.Hypot(lines[i].UFrequency, k*base.UFrequency)
			if k >= 2 && k <= 9 && base.Harmonic == 0 && math.Abs(lines[i].Frequency-k*base.Frequency) < 3*u {
				lines[i].Harmonic, lines[i].Of = int(k), of
				break
			}
		}
	}
}
