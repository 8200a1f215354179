package match

import (
	"context"
	"math"
	"sync"

	"lodeswing/analyze/ode"
	"lodeswing/analyze/toy"
)

// segment is one stretch of a clip with its own state at its start.
type segment struct {
	t0, t1   float64
	from, to int // observations
	y        []float64
	others   [][]float64 // further states in which it may begin
	broken   bool        // no continuity with the stretch that follows

	seen              // what the last computation gave
	spare seen        // of a step that is tried
	slope []float64   // rate at t1, as a deviation
	dpos  [][]float64 // by column: 3 numbers per observation
	dend  [][]float64 // by column: 2·nv numbers
}

// seen is what an integration over a segment gives.
type seen struct {
	pose     []pose // by observation
	pos, vel [][3]float64
	end      []float64 // state at t1
}

// swap sets what was computed aside, or puts it back.
func (g *segment) swap() { g.seen, g.spare = g.spare, g.seen }

// cut makes a clip's segments from states at times; each ends where the next
// begins.
func (f *fitter) cut(c int, times []float64, states [][]float64) {
	k := &f.clips[c]
	k.segments = k.segments[:0]
	i := 0
	for i < len(k.obs) && k.obs[i].t < times[0] {
		i++
	}
	for s := range times {
		g := segment{t0: times[s], y: append([]float64(nil), states[s]...), from: i}
		g.t1 = math.Inf(1)
		if s+1 < len(times) {
			g.t1 = times[s+1]
		}
		for i < len(k.obs) && k.obs[i].t < g.t1 {
			i++
		}
		g.to = i
		if math.IsInf(g.t1, 1) {
			g.t1 = g.t0
			if g.to > g.from {
				g.t1 = k.obs[g.to-1].t + 1e-3
			}
		}
		if g.broken = k.parted(g.t0, g.t1); g.broken && g.to > g.from {
			g.t1 = k.obs[g.to-1].t + 1e-3
		}
		g.broken = g.broken || s+1 < len(times) && k.slowAt(times[s+1])
		k.segments = append(k.segments, g)
	}
}

// shot is one integration over a segment.
type shot struct {
	f   *fitter
	see *viewer
	m   *toy.Model
	z   []float64
	y   []float64
}

// ago is the time step of the differences that give speeds, s.
const ago = 1e-5

// run integrates segment g from y0 and gives the places at its observations. pose
// and vel may be nil. end gets the state at its end.
func (s *shot) run(ctx context.Context, g *segment, y0 []float64, pos [][3]float64, poses []pose, vel [][3]float64, end []float64) error {
	k := s.see.k
	n := g.to - g.from
	stretch := 1 + s.see.clock
	tau := func(i int) float64 {
		o := &k.obs[g.from+i]
		return (o.t + s.see.row*o.row - g.t0) * stretch
	}
	put := func(i int, y []float64) {
		w := k.obs[g.from+i].who
		p := k.pose(s.m, y, w)
		pos[i] = s.see.world(&p, w)
		if poses != nil {
			poses[i] = p
		}
	}
	i := 0
	if len(s.y) != len(y0) {
		s.y, s.z = make([]float64, len(y0)), make([]float64, len(y0))
	}
	copy(s.y, y0)
	for i < n && tau(i) <= 0 { // at the very start, or a row's time before it
		s.early(tau(i), y0)
		put(i, s.z)
		if vel != nil {
			s.early(tau(i)-ago, y0)
			w := k.obs[g.from+i].who
			p := k.pose(s.m, s.z, w)
			x := s.see.world(&p, w)
			for a := range 3 {
				vel[i][a] = (pos[i][a] - x[a]) / ago
			}
		}
		i++
	}
	err := s.m.Run(ctx, 0, s.y, (g.t1-g.t0)*stretch, toy.Options{Tol: s.f.tol, Undriven: k.off((g.t0 + g.t1) / 2)}, func(o *ode.Solver) error {
		for ; i < n && tau(i) <= o.Time(); i++ {
			o.At(tau(i), s.z)
			put(i, s.z)
			if vel != nil {
				o.At(tau(i)-ago, s.z)
				w := k.obs[g.from+i].who
				p := k.pose(s.m, s.z, w)
				x := s.see.world(&p, w)
				for a := range 3 {
					vel[i][a] = (pos[i][a] - x[a]) / ago
				}
			}
		}
		return nil
	}, nil)
	for ; i < n; i++ { // a row's time after the end
		s.late(tau(i)-(g.t1-g.t0)*stretch, s.y)
		put(i, s.z)
		if vel != nil {
			vel[i] = [3]float64{}
			if i > 0 {
				vel[i] = vel[i-1]
			}
		}
	}
	copy(end, s.y)
	return err
}

// early moves y0 along its speeds by the time t into z.
func (s *shot) early(t float64, y0 []float64) {
	copy(s.z, y0)
	nv := s.m.Freedoms()
	d := make([]float64, 2*nv)
	at := len(y0) - s.m.Aux() - nv
	for i := range nv {
		d[i] = y0[at+i] * t
	}
	s.m.Displace(s.z, d)
}

func (s *shot) late(t float64, y []float64) { s.early(t, y) }

// stateSteps are the differences' steps of a state's deviations.
func (f *fitter) stateStep(v, nv int) float64 {
	if v < nv {
		return 1e-5
	}
	return 1e-5 * f.omega() // rad/s
}

// omega is the motion's typical angular frequency, rad/s.
func (f *fitter) omega() float64 {
	if f.angle > 0 && f.rate > 0 {
		return math.Min(math.Max(f.rate/f.angle, 1), 100)
	}
	return 6
}

// jobs runs do for every segment of every clip on all workers.
func (f *fitter) jobs(ctx context.Context, do func(c int, s *segment, m *toy.Model) error) error {
	type job struct{ c, s int }
	var all []job
	for c := range f.clips {
		for s := range f.clips[c].segments {
			all = append(all, job{c, s})
		}
	}
	workers := min(f.opt.workers(), len(all))
	for c := range f.clips {
		k := &f.clips[c]
		for len(k.clones) < workers {
			k.clones = append(k.clones, k.model.Clone())
		}
	}
	var mu sync.Mutex
	var wait sync.WaitGroup
	var first error
	next := 0
	for w := range workers {
		wait.Go(func() {
			for {
				mu.Lock()
				i := next
				next++
				stop := first != nil || i >= len(all)
				mu.Unlock()
				if stop {
					return
				}
				j := all[i]
				k := &f.clips[j.c]
				if err := do(j.c, &k.segments[j.s], k.clones[w]); err != nil {
					mu.Lock()
					if first == nil {
						first = err
					}
					mu.Unlock()
				}
			}
		})
	}
	wait.Wait()
	return first
}

// shootAll computes every segment at the parameters p. With slopes it also finds
// the derivatives by each segment's state and by the model's parameters; those of
// nuisance parameters only when all is set.
func (f *fitter) shootAll(ctx context.Context, p []float64, slopes, all bool) error {
	sees := make([]viewer, len(f.clips))
	for c := range f.clips {
		sees[c] = f.viewer(c, p)
	}
	for c := range f.clips {
		for _, m := range f.clips[c].clones {
			f.apply(c, m, p)
		}
		f.apply(c, f.clips[c].model, p)
	}
	if f.oneMotion {
		for c := range f.clips {
			k := &f.clips[c]
			s := &shot{f: f, see: &sees[c], m: k.model}
			for i := range k.segments {
				if i > 0 && !k.segments[i-1].broken {
					copy(k.segments[i].y, k.segments[i-1].end)
				}
				if err := s.plain(ctx, &k.segments[i]); err != nil {
					return err
				}
			}
		}
		if !slopes {
			return nil
		}
	}
	return f.jobs(ctx, func(c int, g *segment, m *toy.Model) error {
		s := &shot{f: f, see: &sees[c], m: m}
		f.apply(c, m, p) // a clone may be new
		if !f.oneMotion {
			if err := s.plain(ctx, g); err != nil || !slopes {
				return err
			}
		}
		return f.slopes(ctx, s, c, g, p, all)
	})
}

// plain integrates a segment from its own state.
func (s *shot) plain(ctx context.Context, g *segment) error {
	n := g.to - g.from
	if len(g.pos) != n {
		g.pos, g.vel, g.pose = make([][3]float64, n), make([][3]float64, n), make([]pose, n)
	}
	if len(g.end) != len(g.y) {
		g.end = make([]float64, len(g.y))
	}
	return s.run(ctx, g, g.y, g.pos, g.pose, g.vel, g.end)
}

// slopes fills the derivatives of one segment by central differences; nuisance
// parameters by one-sided ones until the last steps, where all must be exact: what
// scales inertia, weight, moments and friction alike is felt by nothing, and an
// error of a derivative would pass for a response.
func (f *fitter) slopes(ctx context.Context, s *shot, c int, g *segment, p []float64, all bool) error {
	m := s.m
	nv := m.Freedoms()
	n := g.to - g.from
	cols := 2*nv + len(f.params)
	if len(g.dpos) != cols || len(g.dpos[0]) != 3*n || len(g.dend[0]) != 2*nv {
		g.dpos, g.dend = make([][]float64, cols), make([][]float64, cols)
		for j := range cols {
			g.dpos[j], g.dend[j] = make([]float64, 3*n), make([]float64, 2*nv)
		}
		all = true
	}
	up, down := make([][3]float64, n), make([][3]float64, n)
	ends := [2][]float64{make([]float64, len(g.y)), make([]float64, len(g.y))}
	d0, d1 := make([]float64, 2*nv), make([]float64, 2*nv)
	store := func(col int, h float64, two bool) {
		other, width := g.pos, h
		otherEnd := g.end
		if two {
			other, otherEnd, width = down, ends[1], 2*h
		}
		for i := range n {
			for a := range 3 {
				g.dpos[col][3*i+a] = (up[i][a] - other[i][a]) / width
			}
		}
		m.Deviation(g.end, ends[0], d0)
		m.Deviation(g.end, otherEnd, d1)
		for v := range d0 {
			g.dend[col][v] = (d0[v] - d1[v]) / width
		}
	}
	y := make([]float64, len(g.y))
	d := make([]float64, 2*nv)
	for v := range 2 * nv {
		h := f.stateStep(v, nv)
		for i := range d {
			d[i] = 0
		}
		copy(y, g.y)
		d[v] = h
		m.Displace(y, d)
		if err := s.run(ctx, g, y, up, nil, nil, ends[0]); err != nil {
			return err
		}
		copy(y, g.y)
		d[v] = -h
		m.Displace(y, d)
		if err := s.run(ctx, g, y, down, nil, nil, ends[1]); err != nil {
			return err
		}
		store(v, h, true)
	}
	// The rate at the end, by which the clock moves it.
	if len(g.slope) != 2*nv {
		g.slope = make([]float64, 2*nv)
	}
	dy := make([]float64, len(g.y))
	m.Derive(g.end, dy)
	at := len(g.y) - m.Aux() - nv
	for v := range nv {
		g.slope[v], g.slope[nv+v] = g.end[at+v], dy[at+v]
	}
	for j := range f.params {
		q := &f.params[j]
		col := 2*nv + j
		if q.role != byModel || len(q.targets[c]) == 0 || q.held {
			continue
		}
		if q.nuisance && !all {
			continue
		}
		h := q.step(p[j])
		if f.exact {
			h *= 2
		}
		set := func(x float64) {
			for _, t := range q.targets[c] {
				m.Set(t.index, t.base+t.coef*x)
			}
		}
		two := (f.exact || !q.nuisance) && p[j]-h >= q.lo
		set(p[j] + h)
		err := s.run(ctx, g, g.y, up, nil, nil, ends[0])
		if err == nil && two {
			set(p[j] - h)
			err = s.run(ctx, g, g.y, down, nil, nil, ends[1])
		}
		set(p[j])
		if err != nil {
			return err
		}
		store(col, h, two)
	}
	return nil
}

// step is the differences' step of a parameter at x.
func (q *param) step(x float64) float64 {
	if q.scale > 0 {
		return math.Max(q.scale, 1e-5*math.Abs(x))
	}
	return 1e-4 * math.Max(math.Abs(x), 1e-12)
}
