package decay

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/series"
)

// swing is one half swing between two turning points.
type swing struct {
	at       float64 // middle time, s
	duration float64 // s
	span     float64 // rad, peak to peak
	uSpan    float64
	middle   float64 // mean of its turning points, rad
	from, to series.Turning
}

// halfSwings pairs neighbouring turning points; a pair across a gap in which a
// turn may be missing (both on the same side) is left out.
func halfSwings(tp []series.Turning) []swing {
	var out []swing
	for i := 1; i < len(tp); i++ {
		a, b := tp[i-1], tp[i]
		out = append(out, swing{
			at: (a.T + b.T) / 2, duration: b.T - a.T, span: math.Abs(b.Angle - a.Angle),
			uSpan: math.Hypot(a.UAngle, b.UAngle), middle: (a.Angle + b.Angle) / 2, from: a, to: b,
		})
	}
	return out
}

// usualSwing is what half swings usually do: the part that is lost from one to
// the next (hereabouts), and the scatter of a span and of a duration, seen in how
// three in a row bend; a slow sway of the camera shows there, not in uSpan.
type usualSwing struct{ loss, uSpan, uDuration float64 }

func usualOf(sw []swing) usualSwing {
	var u usualSwing
	var spans, durations []float64
	for i := 2; i < len(sw); i++ {
		spans = append(spans, (sw[i-2].span-2*sw[i-1].span+sw[i].span)/math.Sqrt(6))
		durations = append(durations, (sw[i-2].duration-2*sw[i-1].duration+sw[i].duration)/math.Sqrt(6))
	}
	if len(spans) > 4 {
		u.uSpan = medianAbs(spans) / 0.6744897501960817
		u.uDuration = medianAbs(durations) / 0.6744897501960817
	}
	return u
}

// lossAbout is the median part lost from one half swing to the next, over the
// three before and the three after the step to i.
func lossAbout(sw []swing, i int) float64 {
	var losses []float64
	for j := max(1, i-3); j <= min(len(sw)-1, i+3); j++ {
		losses = append(losses, 1-sw[j].span/sw[j-1].span)
	}
	slices.Sort(losses)
	return math.Max(0, losses[len(losses)/2])
}

// follows tells whether half swing b can come after a in a free decay: it is no
// larger, not suddenly smaller than the loss so far allows, and lasts about as
// long.
func follows(a, b swing, usual usualSwing) bool {
	u := 3 * math.Hypot(math.Max(a.uSpan, usual.uSpan), math.Max(b.uSpan, usual.uSpan))
	if b.from.T != a.to.T {
		return false
	}
	if b.span > a.span+u {
		return false
	}
	if b.span < a.span*(1-2*usual.loss-0.01)-u {
		return false
	}
	ratio := b.duration / a.duration
	// Small swings' turning points are known less well.
	slack := 0.12 + 3*math.Max(math.Hypot(a.from.UT+a.to.UT, b.from.UT+b.to.UT), 2*usual.uDuration)/a.duration
	return ratio > 1-slack && ratio < 1+slack
}

// run is a row of half swings that may be one free decay.
type run struct{ from, to int } // indices into swings, to exclusive

// longestRun finds the row of half swings that holds the most information on a
// decay: Σ span²·duration.
func longestRun(sw []swing) (run, bool) {
	if len(sw) == 0 {
		return run{}, false
	}
	usual := usualOf(sw)
	best, bestInfo := run{}, 0.0
	for i := 0; i < len(sw); {
		j := i + 1
		info := sw[i].span * sw[i].span * sw[i].duration
		for j < len(sw) {
			usual.loss = lossAbout(sw, j)
			if !follows(sw[j-1], sw[j], usual) {
				break
			}
			info += sw[j].span * sw[j].span * sw[j].duration
			j++
		}
		if j-i >= minHalfSwings && info > bestInfo {
			best, bestInfo = run{i, j}, info
		}
		i = j
	}
	return best, bestInfo > 0
}

// minHalfSwings is the least that a decay is read from.
const minHalfSwings = 4

// stretch is where the free decay was found.
type stretch struct {
	from, to int // sample indices, to exclusive
	swings   []swing
	how      string
}

// findStretch finds the row of half swings that may be a free decay, or cuts it
// as told. from and to are NaN where not told.
func findStretch(a *series.Angle, from, to float64) (stretch, error) {
	sw := halfSwings(a.TurningPoints())
	told := !math.IsNaN(from) || !math.IsNaN(to)
	if told {
		var kept []swing
		for _, s := range sw {
			if !(s.from.T < from-1e-9) && !(s.to.T > to+1e-9) {
				kept = append(kept, s)
			}
		}
		sw = kept
		if len(sw) < 2 {
			return stretch{}, fmt.Errorf("the rig's [decay] stretch holds %d half swings only; at least 2 are needed", len(sw))
		}
		st := stretch{from: 0, to: len(a.T), swings: sw, how: "given by the rig"}
		for st.from < len(a.T) && a.T[st.from] < from-1e-9 {
			st.from++
		}
		for st.to > st.from && a.T[st.to-1] > to+1e-9 {
			st.to--
		}
		return st, nil
	}
	r, ok := longestRun(sw)
	if !ok {
		return stretch{}, fmt.Errorf("no free decay was found: nowhere do %d half swings follow each other, each no larger than the one before and as long as it", minHalfSwings)
	}
	sw = sw[r.from:r.to]
	return stretch{from: sw[0].from.Index, to: min(len(a.T), sw[len(sw)-1].to.Index+2), swings: sw, how: "found by itself"}, nil
}

// block is a half swing's worth of residuals.
type block struct {
	from, to int // sample indices of the series
	mean2    float64
}

// level is what blocks' mean squares usually are, and how much their logarithms
// scatter from block to block, which is more than chance where the noise is
// slow (a camera that sways) or the model is not perfect.
type level struct{ usual, scatter float64 }

// bad tells whether a block's residuals are larger than usual by more than
// chance: four standard deviations of its mean square, as white noise or the
// scatter of all blocks lets expect, whichever is more.
func (l level) bad(b block) bool {
	n := float64(b.to - b.from)
	return n > 0 && math.Log(b.mean2/l.usual) > math.Max(math.Log(1.5+4*math.Sqrt(2/n)), 4*l.scatter)
}

// blocks cuts residuals into half swings. res and t belong together; offset is
// the index of the first in the series.
func blocks(t, res []float64, offset int, half float64) []block {
	var out []block
	for i := 0; i < len(t); {
		j := i
		sum := 0.0
		for j < len(t) && t[j] < t[i]+half {
			sum += res[j] * res[j]
			j++
		}
		out = append(out, block{offset + i, offset + j, sum / float64(j-i)})
		i = j
	}
	return out
}

// levelOf is the level of blocks: the median of their mean squares, not below
// the noise that a local polynomial sees, and the robust scatter of the logarithms.
func levelOf(bs []block, noiseRatio float64) level {
	x := make([]float64, len(bs))
	for i, b := range bs {
		x[i] = math.Log(b.mean2 + 1e-300)
	}
	slices.Sort(x)
	mid := x[len(x)/2]
	for i := range x {
		x[i] -= mid
	}
	l := level{usual: math.Max(math.Exp(mid), noiseRatio*noiseRatio)}
	if len(bs) >= 8 {
		l.scatter = medianAbs(x) / 0.6744897501960817
	}
	return l
}

// refine moves the ends of a stretch that was found by itself: it drops half
// swings that the model does not follow (a hand, a kick), and takes in samples
// beyond the ends that it foretells. It returns the model fitted to what is left.
func (an *analysis) refine(st *stretch, m model) (*fitted, error) {
	a := an.angle
	var f *fitted
	for round := 0; ; round++ {
		s := an.samples(st.from, st.to)
		var err error
		if f, err = an.fitFirst(s, m, st, f); err != nil {
			return nil, err
		}
		if an.opt.Told {
			return f, nil
		}
		half := math.Pi / math.Sqrt(f.p[atK])
		bs := blocks(s.t, f.resid, st.from, half)
		usual := levelOf(bs, a.NoiseRatio)
		if round < 8 {
			if at, ok := pushAt(s.t, f, half); ok && st.split(s.t[at], a) {
				continue
			}
			if st.drop(bs, usual, a) {
				continue
			}
		}
		moved := an.extendForward(st, f, usual, half)
		if an.extendBackward(st, f, usual, half) {
			moved = true
		}
		if !moved || round >= 11 {
			return f, nil
		}
	}
}

// drop shortens the stretch where its first or last half swing, or a push in
// its middle, is not followed by the model. It tells whether it did.
func (st *stretch) drop(bs []block, usual level, a *series.Angle) bool {
	if len(bs) < minHalfSwings+1 {
		return false
	}
	worst := -1
	for i, b := range bs {
		if usual.bad(b) && (worst < 0 || b.mean2 > bs[worst].mean2) {
			worst = i
		}
	}
	if worst < 0 {
		return false
	}
	at := bs[worst]
	return st.keep(at.from, at.to, a)
}

// split parts the stretch at a time and keeps the larger side.
func (st *stretch) split(at float64, a *series.Angle) bool {
	i := st.from
	for i < st.to && a.T[i] < at {
		i++
	}
	// A few samples on either side are left out: the push takes a moment.
	return st.keep(max(st.from, i-3), min(st.to, i+3), a)
}

// keep leaves out the samples cutFrom to cutTo and the smaller side of the rest,
// by information, that is by the half swings' squares. It tells whether enough
// is left.
func (st *stretch) keep(cutFrom, cutTo int, a *series.Angle) bool {
	from, to := st.from, st.to
	left, right := 0.0, 0.0
	at := (a.T[cutFrom] + a.T[cutTo-1]) / 2
	for _, w := range st.swings {
		if w.at < at {
			left += w.span * w.span * w.duration
		} else {
			right += w.span * w.span * w.duration
		}
	}
	if left > right {
		to = cutFrom
	} else {
		from = cutTo
	}
	var kept []swing
	for _, w := range st.swings {
		if w.from.T >= a.T[from]-1e-9 && w.to.T <= a.T[to-1]+1e-9 {
			kept = append(kept, w)
		}
	}
	if len(kept) < minHalfSwings-1 {
		return false
	}
	st.from, st.to, st.swings = from, to, kept
	return true
}

// extendForward takes in half swings after the end while the model foretells
// them and they rise above the noise.
func (an *analysis) extendForward(st *stretch, f *fitted, usual level, half float64) bool {
	a := an.angle
	n := len(a.T) - st.to
	if n <= 0 {
		return false
	}
	times, out := a.T[st.to:], make([]float64, n)
	if err := newMover(f.m, false).run(f.p, a.T[st.from], times, out, nil, nil); err != nil {
		return false
	}
	res := make([]float64, n)
	for i := range res {
		res[i] = (a.Angle[st.to+i] - out[i]) / a.UAngle[st.to+i]
	}
	to := st.to
	for _, b := range blocks(times, res, st.to, half) {
		lo, hi := math.Inf(1), math.Inf(-1)
		for i := b.from; i < b.to; i++ {
			lo, hi = math.Min(lo, out[i-st.to]), math.Max(hi, out[i-st.to])
		}
		u := a.UAngle[b.from] * math.Max(1, a.NoiseRatio)
		if usual.bad(b) || hi-lo < u {
			break
		}
		to = b.to
	}
	moved := to > st.to
	st.to = to
	return moved
}

// extendBackward takes in samples before the first while the model, run
// backwards, meets them. Where it ends at something other than the record's
// beginning, a thirtieth of a swing is left as a margin for the hand's last touch.
func (an *analysis) extendBackward(st *stretch, f *fitted, usual level, half float64) bool {
	a := an.angle
	if st.from == 0 || an.backDone {
		return false
	}
	n := st.from
	times, out := make([]float64, n), make([]float64, n)
	for i := range times {
		times[i] = a.T[n-1-i]
	}
	limit := max(0, n-20*an.samplesPer(half))
	times, out = times[:n-limit], out[:n-limit]
	if err := newMover(f.m, false).run(f.p, a.T[st.from], times, out, nil, nil); err != nil {
		return false
	}
	one := math.Sqrt(usual.usual)
	good := 0
	over := 0
	for i := range times {
		r := math.Abs(a.Angle[n-1-i]-out[i]) / a.UAngle[n-1-i] / one
		if r > 3.5 {
			over++
		} else {
			over = max(0, over-1)
		}
		if over >= 2 {
			break
		}
		good = i + 1
	}
	if good < len(times) {
		edge := times[good] + half/15
		for good > 0 && times[good-1] < edge {
			good--
		}
	}
	if good == 0 {
		return false
	}
	st.from -= good
	an.backDone = good < len(times) || st.from == 0
	return true
}
