package match

import (
	"math"
	"slices"
)

// rower turns segments into rows of the least squares.
type rower struct {
	f     *fitter
	c     int
	k     *clipData
	see   viewer
	moved []viewer  // by parameter that acts by the view alone
	acts  []int     // those parameters
	steps []float64 // and by how much each was moved
}

func (f *fitter) rower(c int, p []float64) *rower {
	w := &rower{f: f, c: c, k: &f.clips[c], see: f.viewer(c, p)}
	for j := range f.params {
		q := &f.params[j]
		if q.held || q.role == byModel || q.role == byRowTime || q.role == byClock || !f.concerns(j, c) {
			continue
		}
		h := q.step(p[j])
		x := p[j]
		p[j] = x + h
		w.moved = append(w.moved, f.viewer(c, p))
		p[j] = x
		w.acts, w.steps = append(w.acts, j), append(w.steps, h)
	}
	return w
}

// residual of observation i of segment g, whitened.
func (w *rower) residual(g *segment, i int) (r0, r1 float64) {
	o := &w.k.obs[g.from+i]
	a, b := w.see.project(o.who, g.pos[i])
	a, b = o.a-a, o.b-b
	return o.w0 * a, o.w1*a + o.w2*b
}

// block is a segment's rows.
func (w *rower) block(g *segment) block {
	f, k := w.f, w.k
	np, n := len(f.params), 2*k.model.Freedoms()
	count := g.to - g.from
	b := block{rows: count * k.dims, n: n}
	b.js, b.jp, b.r = make([]float64, b.rows*n), make([]float64, b.rows*np), make([]float64, b.rows)
	for i := range count {
		o := &k.obs[g.from+i]
		a0, b0 := w.see.project(o.who, g.pos[i])
		// How the picture moves with the place.
		var j [2][3]float64
		for a := range 3 {
			const h = 1e-5
			x := g.pos[i]
			x[a] += h
			u, v := w.see.project(o.who, x)
			j[0][a], j[1][a] = (u-a0)/h, (v-b0)/h
		}
		wt := math.Sqrt(o.weight)
		rows := [2]int{i * k.dims, i*k.dims + 1}
		put := func(to []float64, width, col int, da, db float64) {
			to[rows[0]*width+col] = wt * o.w0 * da
			if k.dims == 2 {
				to[rows[1]*width+col] = wt * (o.w1*da + o.w2*db)
			}
		}
		along := func(d []float64) (float64, float64) {
			return j[0][0]*d[0] + j[0][1]*d[1] + j[0][2]*d[2], j[1][0]*d[0] + j[1][1]*d[1] + j[1][2]*d[2]
		}
		put(b.r, 1, 0, o.a-a0, o.b-b0)
		for v := range n {
			da, db := along(g.dpos[v][3*i : 3*i+3])
			put(b.js, n, v, da, db)
		}
		for q := range f.params {
			if f.params[q].held {
				continue
			}
			switch f.params[q].role {
			case byModel:
				if len(f.params[q].targets[w.c]) > 0 {
					da, db := along(g.dpos[n+q][3*i : 3*i+3])
					put(b.jp, np, q, da, db)
				}
			case byRowTime:
				if f.concerns(q, w.c) {
					da, db := along(g.vel[i][:])
					put(b.jp, np, q, o.row*da, o.row*db)
				}
			case byClock:
				if f.concerns(q, w.c) {
					da, db := along(g.vel[i][:])
					put(b.jp, np, q, (o.t-g.t0)*da, (o.t-g.t0)*db)
				}
			}
		}
		for a, q := range w.acts {
			v := &w.moved[a]
			x := v.world(&g.pose[i], o.who)
			da, db := v.project(o.who, x)
			put(b.jp, np, q, (da-a0)/w.steps[a], (db-b0)/w.steps[a])
		}
	}
	return b
}

// meritBind is the least distance between ends of stretches, rad, that merit
// weighs: the linear steps close them far better, and a tighter weight would only
// forbid long steps for what they leave in second order.
const meritBind = 1e-6

// merit is the sum of squares at the parameters p and the segments as last
// computed: the observations', the priors' and the chain's.
func (f *fitter) merit(p []float64) (total, data float64, rows int) {
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		nv := k.model.Freedoms()
		gap := make([]float64, 2*nv)
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				q := k.obs[g.from+o].weight
				data += q * r0 * r0
				if k.dims == 2 {
					data += q * r1 * r1
				}
				rows += k.dims
			}
			if i+1 < len(k.segments) && !g.broken && !math.IsInf(f.bind, 1) {
				k.model.Deviation(k.segments[i+1].y, g.end, gap)
				for v, x := range gap {
					x /= math.Max(f.bind, f.lax)
					if v >= nv {
						x /= f.omega()
					}
					total += x * x
				}
			}
		}
	}
	total += data
	for j := range f.params {
		if q := &f.params[j]; q.prior {
			d := (p[j] - q.mean) / q.u
			total += d * d
		}
	}
	if math.IsNaN(total) {
		total = math.Inf(1)
	}
	return total, data, rows
}

func median(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	s := slices.Clone(v)
	slices.Sort(s)
	return s[len(s)/2]
}

// rms is the residuals' r.m.s., in units of what the pictures' noise allows.
func (f *fitter) rms() float64 {
	_, data, rows := f.merit(f.values())
	return math.Sqrt(data / float64(max(rows, 1)))
}

// reweigh gives observations that lie far out less weight (Huber), and finds the
// residuals' scatter.
func (f *fitter) reweigh() {
	p := f.values()
	var all []float64
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				all = append(all, math.Abs(r0))
				if k.dims == 2 {
					all = append(all, math.Abs(r1))
				}
			}
		}
	}
	f.scatter = median(all) / 0.6745
	limit := 4 * math.Max(f.scatter, 1)
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				r := math.Abs(r0)
				if k.dims == 2 {
					r = math.Max(r, math.Abs(r1))
				}
				q := &k.obs[g.from+o]
				q.weight = 1
				if r > limit {
					q.weight = limit / r
				}
			}
		}
	}
}

// mostWidened is how large residuals may be, in units of the noise, to be taken for
// noise while the stretches are still being bound together.
const mostWidened = 8.0

// widen takes the noise of each bob's each coordinate as large as its residuals are
// where they are clearly larger, and tells whether there are such. A model that is only
// nearly right, or a bob that is not found as well as the tracker says, must not force
// clock, weight and camera to make up for it.
func (f *fitter) widen() bool {
	before := f.rms()
	p := f.values()
	found := false
	for c := range f.clips {
		k := &f.clips[c]
		w := &rower{f: f, c: c, k: k, see: f.viewer(c, p)}
		sum := make([][3]float64, len(k.watched))
		for i := range k.segments {
			g := &k.segments[i]
			for o := range g.to - g.from {
				r0, r1 := w.residual(g, o)
				x := &k.obs[g.from+o]
				s := &sum[x.who]
				s[0], s[1], s[2] = s[0]+x.weight*r0*r0, s[1]+x.weight*r1*r1, s[2]+1
			}
		}
		by := func(sum, n float64) float64 {
			if s := math.Sqrt(sum / math.Max(n, 1)); s > clearMisfit {
				found = true
				return s
			}
			return 1
		}
		scale := make([][2]float64, len(k.watched))
		for i, s := range sum {
			scale[i] = [2]float64{by(s[0], s[2]), by(s[1], s[2])}
		}
		for i := range k.obs {
			o := &k.obs[i]
			s := scale[o.who]
			o.w0, o.w1, o.w2 = o.w0/s[0], o.w1/s[1], o.w2/s[1]
		}
	}
	if found {
		f.widened *= before / f.rms()
		f.opt.log("noise taken %.2f times as large", f.widened)
	}
	return found
}
