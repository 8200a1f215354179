package kick

import "math"

// sharpen measures each turning point again, by the free swing about it: between
// two kicks the part moves as its potential and little friction let it, so that
// all samples from one kick to the next tell its amplitude, and not the few about
// the turning point alone. The fit has the amplitude, the time, and, for friction,
// a part that is odd in time, which leaves the amplitude alone. What an error of
// the vertical does to the amplitude so measured is kept in lean.
func (l *ledger) sharpen() {
	for c := range l.turns {
		for i := range l.turns[c] {
			t := &l.turns[c][i]
			half := l.halfAt(c, i)
			if s, ok := l.freeSwing(c, *t, half); ok && math.Abs(s.t-t.t) < 0.1*half && math.Abs(s.angle-t.angle) < 0.1*math.Abs(t.angle-l.rest[c]) {
				*t = s
			}
		}
	}
	l.enter()
}

// halfAt is the time of a half swing about turning point i.
func (l *ledger) halfAt(c, i int) float64 {
	tp := l.turns[c]
	best := math.Inf(1)
	if i > 0 {
		best = tp[i].t - tp[i-1].t
	}
	if i+1 < len(tp) {
		best = math.Min(best, tp[i+1].t-tp[i].t)
	}
	return best
}

// orbit is a free swing from rest at an amplitude, at even times from 0.
type orbit struct {
	step     float64
	at, rate []float64
}

func (l *ledger) orbit(amplitude, until float64) orbit {
	const n = 48
	o := orbit{step: until / n, at: []float64{amplitude}, rate: []float64{0}}
	x, v, h := amplitude, 0.0, until/n
	acc := func(x float64) float64 { return -l.torque(x) / l.inertia }
	for range n + 1 {
		k1x, k1v := v, acc(x)
		k2x, k2v := v+h/2*k1v, acc(x+h/2*k1x)
		k3x, k3v := v+h/2*k2v, acc(x+h/2*k2x)
		k4x, k4v := v+h*k3v, acc(x+h*k3x)
		x += h / 6 * (k1x + 2*k2x + 2*k3x + k4x)
		v += h / 6 * (k1v + 2*k2v + 2*k3v + k4v)
		o.at, o.rate = append(o.at, x), append(o.rate, v)
	}
	return o
}

// angle is the orbit's angle and rate at time t from its turning point, even in t.
func (o *orbit) angle(t float64) (x, v float64) {
	s := math.Abs(t) / o.step
	i := min(int(s), len(o.at)-2)
	f := s - float64(i)
	a, b, p, q := o.at[i], o.at[i+1], o.rate[i]*o.step, o.rate[i+1]*o.step
	c2, c3 := 3*(b-a)-2*p-q, 2*(a-b)+p+q
	x = a + f*(p+f*(c2+f*c3))
	v = (p + f*(2*c2+3*f*c3)) / o.step
	return x, math.Copysign(1, t) * v
}

func (l *ledger) freeSwing(c int, t turn, half float64) (turn, bool) {
	const (
		reach = 0.42 // of a half swing, on each side: clear of the kick at the lowest point
		size  = 3
	)
	a := &l.clips[c].Angle
	rest := l.rest[c]
	amp, at := t.angle-rest, t.t
	keep := 1.3 * l.opt.PushOver // nearer to the lowest point the coil pushes
	var inv []float64
	var offset [size]float64
	for range 3 {
		o, o2 := l.orbit(amp, 1.2*reach*half), l.orbit(amp*1.001, 1.2*reach*half)
		var m [size * size]float64
		var b [size]float64
		offset = [size]float64{}
		left, right := 0, 0
		for i := max(0, t.index-1); i > 0 && a.T[i] > at-reach*half; i-- {
			left = i
		}
		for i := left; i < len(a.T) && a.T[i] < at+reach*half; i++ {
			tau := a.T[i] - at
			if tau < -reach*half || math.Abs(a.Angle[i]-rest) < keep {
				continue
			}
			x, v := o.angle(tau)
			x2, _ := o2.angle(tau)
			g := [size]float64{(x2 - x) / (0.001 * amp), -v, tau / half * x}
			w := 1 / (a.UAngle[i] * a.UAngle[i])
			for j := range size {
				b[j] += w * g[j] * (a.Angle[i] - rest - x)
				offset[j] += w * g[j]
				for k := range size {
					m[j*size+k] += w * g[j] * g[k]
				}
			}
			right++
		}
		if right < 7 {
			return turn{}, false
		}
		var ok bool
		if inv, ok = inverse(m[:], size); !ok {
			return turn{}, false
		}
		var d [size]float64
		for j := range size {
			for k := range size {
				d[j] += inv[j*size+k] * b[k]
			}
		}
		amp, at = amp+d[0], at+d[1]
	}
	lean := 0.0
	for k := range size {
		lean += inv[k] * offset[k]
	}
	t.t, t.angle, t.lean = at, rest+amp, lean
	t.u = math.Sqrt(inv[0]) * math.Max(1, a.NoiseRatio)
	return t, true
}
