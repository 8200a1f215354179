package match

import (
	"math"
)

// regular tells whether a whole clip may be computed as one motion: small
// deviations grow by no more than a few hundred over it, or there is but one joint
// that nothing drives, whose motion is cut where it hardly gets over a magnet.
func (f *fitter) regular() bool {
	if _, lone := f.overMagnet(); lone && !f.driven() {
		return true
	}
	for c := range f.clips {
		k := &f.clips[c]
		if f.growth*(k.obs[len(k.obs)-1].t-k.obs[0].t) > 6 {
			return false
		}
	}
	return true
}

// typical finds the motion's usual speed and size.
func (f *fitter) typical() {
	var rate, angle, n float64
	for c := range f.clips {
		k := &f.clips[c]
		m := k.model
		nv := m.Freedoms()
		for v := range nv {
			mean, m2 := 0.0, 0.0
			d := make([]float64, 2*nv)
			for i := range k.segments {
				y := k.segments[i].y
				w := y[len(y)-m.Aux()-nv+v]
				rate += w * w
				m.Deviation(k.segments[0].y, y, d)
				mean += d[v]
				m2 += d[v] * d[v]
				n++
			}
			s := float64(len(k.segments))
			angle += m2 - mean*mean/s
		}
	}
	f.rate, f.angle = math.Sqrt(rate/n), math.Sqrt(angle/n)
	w := f.omega()
	for j := range f.params {
		q := &f.params[j]
		if q.role != byModel || q.scale > 0 {
			continue
		}
		owner, what := split(q.address)
		inertia := 0.0
		for c := range f.clips {
			if i, err := f.clips[c].model.Index(owner + ".inertia"); err == nil {
				inertia = f.clips[c].model.Get(i)
			}
		}
		switch what {
		case "viscous":
			q.scale = 1e-4 * inertia * w
		case "drag":
			q.scale = 1e-4 * inertia
		case "dry":
			q.scale = 1e-4 * inertia * w * f.rate
		case "rate":
			q.scale = 1e-4 * inertia * w * w
		case "cubic":
			q.scale = 1e-3 * inertia * w * w
		case "rest":
			q.scale = 1e-4
		case "moment", "remanence", "inertia", "spin_inertia", "weight moment":
			q.scale = 1e-4 * math.Max(math.Abs(q.value), 1e-6)
		case "kick":
			q.scale = math.Max(1e-3*q.value, 1e-7)
		case "eddy":
			q.scale = 1e-7
		}
	}
}

// regauge turns parts about their own axes, where that is not felt, so that each
// stretch begins turned as the one before it ended.
func (f *fitter) regauge() {
	if math.IsInf(f.bind, 1) {
		return
	}
	for c := range f.clips {
		k := &f.clips[c]
		own := k.model.OwnTurns()
		if len(own) == 0 {
			continue
		}
		d := make([]float64, 2*k.model.Freedoms())
		for i := 0; i+1 < len(k.segments); i++ {
			g := &k.segments[i+1]
			// A few rounds: turns in space do not add up simply.
			for range 4 {
				k.model.Deviation(g.y, k.segments[i].end, d)
				for _, v := range own {
					k.model.TurnOwn(g.y, v, d[v])
					if len(g.end) > 0 {
						k.model.TurnOwn(g.end, v, d[v])
					}
				}
			}
		}
	}
}

// gaps is the r.m.s. of what lies between the ends of stretches and the starts of
// the next, rad.
func (f *fitter) gaps() float64 {
	sum, n := 0.0, 0.0
	for c := range f.clips {
		k := &f.clips[c]
		nv := k.model.Freedoms()
		gap := make([]float64, 2*nv)
		for i := 0; i+1 < len(k.segments); i++ {
			if k.segments[i].broken {
				continue
			}
			k.model.Deviation(k.segments[i+1].y, k.segments[i].end, gap)
			for v, x := range gap {
				if v >= nv {
					x /= f.omega()
				}
				sum += x * x
				n++
			}
		}
	}
	if n == 0 {
		return 0
	}
	return math.Sqrt(sum / n)
}

// longest is the longest stretch, s, and mostGrowth how much a deviation may grow
// over one.
const (
	longest    = 2.0
	mostGrowth = 3.0
)

// merge joins stretches to as long ones as the motion's own divergence allows.
func (f *fitter) merge() {
	for c := range f.clips {
		k := &f.clips[c]
		nv := k.model.Freedoms()
		// The mean growth of deviations over a stretch, by its matrix's size.
		var growth, n float64
		for i := range k.segments {
			g := &k.segments[i]
			dt := g.t1 - g.t0
			if dt <= 0 || len(g.dend) == 0 {
				continue
			}
			sum := 0.0
			for u := range 2 * nv {
				for v := range 2 * nv {
					x := g.dend[u][v]
					if u < nv && v >= nv {
						x /= f.omega()
					}
					if u >= nv && v < nv {
						x *= f.omega()
					}
					sum += x * x
				}
			}
			growth += 0.5 * math.Log(sum/float64(2*nv)) / dt
			n++
		}
		growth = math.Max(growth/math.Max(n, 1), 0)
		f.growth = math.Max(f.growth, growth)
		span := longest
		if growth > 0 {
			span = math.Min(span, math.Log(mostGrowth)/growth)
		}
		var times []float64
		var states [][]float64
		slow := k.slow
		for i := range k.segments {
			g := &k.segments[i]
			for len(slow) > 0 && slow[0].t <= g.t0 {
				times, states = append(times, slow[0].t), append(states, slow[0].y)
				slow = slow[1:]
			}
			afterBreak := i > 0 && (k.segments[i-1].broken || k.off((g.t0+g.t1)/2) != k.off((k.segments[i-1].t0+k.segments[i-1].t1)/2))
			if len(times) == 0 || afterBreak || g.broken || g.t0-times[len(times)-1] > span-1e-9 {
				times, states = append(times, g.t0), append(states, g.y)
			}
		}
		for _, s := range slow {
			times, states = append(times, s.t), append(states, s.y)
		}
		f.opt.log("%d stretches of about %.2g s (growth %.2g /s)", len(times), span, growth)
		f.cut(c, times, states)
	}
}
