package match

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// path gives where one watched thing was between its samples, by a local cubic
// through the samples around the moment.
type path struct {
	t, a, b []float64
}

func (k *clipData) paths() []path {
	out := make([]path, len(k.watched))
	for i := range k.obs {
		o := &k.obs[i]
		p := &out[o.who]
		p.t, p.a, p.b = append(p.t, o.t), append(p.a, o.a), append(p.b, o.b)
	}
	return out
}

// localHalf is how many samples on either side a local cubic takes.
const localHalf = 4

// at returns the place at time t; ok is false in gaps and far outside.
func (p *path) at(t float64, step float64) (a, b float64, ok bool) {
	lo, hi := 0, len(p.t)
	for lo < hi {
		m := (lo + hi) / 2
		if p.t[m] < t {
			lo = m + 1
		} else {
			hi = m
		}
	}
	from, to := max(lo-localHalf, 0), min(lo+localHalf+1, len(p.t))
	for from < to && p.t[from] < t-(localHalf+2)*step {
		from++
	}
	for from < to && p.t[to-1] > t+(localHalf+2)*step {
		to--
	}
	n := to - from
	if n < 4 || p.t[from] > t+1.5*step || p.t[to-1] < t-1.5*step {
		return 0, 0, false
	}
	degree := 3
	if n < 7 {
		degree = 2
	}
	x := mat.NewDense(n, degree+1, nil)
	y := mat.NewDense(n, 2, nil)
	for i := range n {
		u := (p.t[from+i] - t) / step
		v := 1.0
		for j := range degree + 1 {
			x.Set(i, j, v)
			v *= u
		}
		y.Set(i, 0, p.a[from+i])
		y.Set(i, 1, p.b[from+i])
	}
	var c mat.Dense
	if c.Solve(x, y) != nil {
		return 0, 0, false
	}
	return c.At(0, 0), c.At(0, 1), true
}

// step is the usual time between samples of one bob.
func (k *clipData) step() float64 {
	p := k.paths()
	if len(p) == 0 || len(p[0].t) < 2 {
		return 1.0 / 60
	}
	var d []float64
	for i := 1; i < len(p[0].t); i++ {
		d = append(d, p[0].t[i]-p[0].t[i-1])
	}
	return median(d)
}

// poser finds the toy's pose from where its bobs are.
type poser struct {
	k     *clipData
	see   viewer
	paths []path
	step  float64
	want  [][2]float64 // where the watched things are
	have  []bool       // and which of them are seen
}

// residuals of a pose: the watched things at places (a, b).
func (s *poser) residuals(y, out []float64) {
	i := 0
	for w := range s.k.watched {
		if !s.have[w] {
			continue
		}
		at := s.k.pose(s.k.model, y, w)
		a, b := s.see.project(w, s.see.world(&at, w))
		out[i] = s.want[w][0] - a
		if s.k.dims == 2 {
			out[i+1] = s.want[w][1] - b
		}
		i += s.k.dims
	}
}

// solve moves the pose y (speeds are left alone) to where the bobs are, by damped
// Gauss–Newton steps, and returns the r.m.s. distance left.
func (s *poser) solve(y []float64, rounds int) float64 {
	m := s.k.model
	nv := m.Freedoms()
	rows := 0
	for _, h := range s.have {
		if h {
			rows += s.k.dims
		}
	}
	if rows == 0 {
		return math.Inf(1)
	}
	r0, r1 := make([]float64, rows), make([]float64, rows)
	d := make([]float64, 2*nv)
	cost := func(r []float64) float64 {
		sum := 0.0
		for _, x := range r {
			sum += x * x
		}
		return sum
	}
	s.residuals(y, r0)
	c0 := cost(r0)
	lambda := 1e-6
	z := make([]float64, len(y))
	for range rounds {
		j := mat.NewDense(rows+nv, nv, nil)
		rhs := mat.NewVecDense(rows+nv, nil)
		size := 0.0
		for v := range nv {
			copy(z, y)
			for i := range d {
				d[i] = 0
			}
			d[v] = 1e-5
			m.Displace(z, d)
			s.residuals(z, r1)
			for i := range rows {
				g := (r0[i] - r1[i]) / 1e-5
				j.Set(i, v, g)
				size = math.Max(size, math.Abs(g))
			}
		}
		for v := range nv {
			j.Set(rows+v, v, math.Sqrt(lambda)*size+1e-9*size)
		}
		for i := range rows {
			rhs.SetVec(i, r0[i])
		}
		var step mat.VecDense
		if step.SolveVec(j, rhs) != nil {
			break
		}
		copy(z, y)
		most := 0.0
		for v := range nv {
			d[v] = math.Max(-0.5, math.Min(0.5, step.AtVec(v)))
			most = math.Max(most, math.Abs(d[v]))
		}
		m.Displace(z, d)
		s.residuals(z, r1)
		if c1 := cost(r1); c1 < c0 {
			copy(y, z)
			c0 = c1
			copy(r0, r1)
			lambda *= 0.1
			if most < 1e-9 {
				break
			}
		} else if lambda *= 10; lambda > 1e3 {
			break
		}
	}
	return math.Sqrt(c0 / float64(rows))
}

// starts finds the toy's states at moments about every span seconds, where the
// bobs are seen and no coil pushes, and cuts the clip there.
func (f *fitter) starts(c int, span float64) error {
	k := &f.clips[c]
	step := k.step()
	p := f.values()
	f.apply(c, k.model, p)
	s := &poser{k: k, see: f.viewer(c, p), paths: k.paths(), step: step}
	seen, poses, err := s.follow()
	if err != nil {
		return err
	}
	m := k.model
	var busy []bool
	if !k.undriven {
		busy = m.MayPush(seen, poses, pushMargin*step, maxHole*step)
	}
	nv := m.Freedoms()
	var times []float64
	var states [][]float64
	var others [][][]float64
	before, after := m.Rest(), m.Rest()
	d := make([]float64, 2*nv)
	h := 1.5 * step
	next := math.Inf(-1)
	for i, t := range seen {
		if t < next-step/2 || busy != nil && busy[i] || t > k.obs[len(k.obs)-1].t-3*step {
			continue
		}
		// The speeds come from the pose a little before and a little after.
		begin := func(y []float64) []float64 {
			copy(before, y)
			copy(after, y)
			t0, t1 := t, t
			if s.look(t - h) {
				s.solve(before, 10)
				t0 = t - h
			}
			if s.look(t + h) {
				s.solve(after, 10)
				t1 = t + h
			}
			z := append([]float64(nil), y...)
			for v := range nv {
				z[len(y)-f.auxOf(c)-nv+v] = 0
			}
			if t1 > t0 {
				m.Deviation(before, after, d)
				for v := range nv {
					d[nv+v], d[v] = d[v]/(t1-t0), 0
				}
				m.Displace(z, d)
			}
			m.Normalise(z)
			return z
		}
		times, states = append(times, t), append(states, begin(poses[i]))
		var also [][]float64
		for w := range k.watched {
			if y, ok := s.mirrored(poses[i], w); ok && s.look(t) {
				s.solve(y, 20)
				also = append(also, begin(y))
			}
		}
		others = append(others, also)
		next = k.resume(t, t+span)
	}
	if len(times) == 0 {
		return fmt.Errorf("no moment of the clip%s shows all bobs for long enough while no coil pushes", k.its(""))
	}
	f.cut(c, times, states)
	if jx, jz := f.shift(c); jx >= 0 {
		k.cutAt = [2]float64{f.params[jx].value, f.params[jz].value}
	}
	for i := range k.segments {
		k.segments[i].others = others[i]
	}
	return nil
}

// pushMargin and maxHole are in frames: how near the begin or end of a push the
// motion may be cut, and how long a bob may be out of sight before it is no longer
// known whether a coil pushes.
const (
	pushMargin = 1.6
	maxHole    = 6.5
)

// look takes the watched things' places at time t; false where one is not seen.
func (s *poser) look(t float64) bool {
	all := true
	for w := range s.k.watched {
		s.want[w][0], s.want[w][1], s.have[w] = s.paths[w].at(t, s.step)
		all = all && s.have[w]
	}
	return all
}

// follow finds the toy's poses, a frame's time apart, wherever all bobs are seen:
// each from the one before, so that a turning part is not lost. Speeds are 0.
func (s *poser) follow() (times []float64, poses [][]float64, err error) {
	s.want, s.have = make([][2]float64, len(s.k.watched)), make([]bool, len(s.k.watched))
	first, last := s.k.obs[0].t, s.k.obs[len(s.k.obs)-1].t
	y := s.k.model.Rest()
	for i := 0; ; i++ {
		t := first + float64(i)*s.step
		if t > last {
			return times, poses, nil
		}
		if !s.look(t) {
			continue
		}
		if len(times) == 0 {
			if err := s.first(y); err != nil {
				return nil, nil, err
			}
		} else {
			s.solve(y, 30)
		}
		times, poses = append(times, t), append(poses, append([]float64(nil), y...))
	}
}

// first finds the pose without knowing one before.
func (s *poser) first(y []float64) error {
	m := s.k.model
	best, keep := math.Inf(1), append([]float64(nil), y...)
	nv := m.Freedoms()
	d := make([]float64, 2*nv)
	// Two freedoms at most are gone through, the smallest turns first: where several
	// poses show the same picture (a ball joint seen from the front has two) the one
	// nearest to rest is taken.
	const turns = 12
	var tries [][2]float64
	for i := range turns * turns {
		a, b := 2*math.Pi*float64(i%turns)/turns, 2*math.Pi*float64(i/turns)/turns
		a, b = math.Remainder(a, 2*math.Pi), math.Remainder(b, 2*math.Pi)
		if !m.OneAxis(0) {
			a, b = 0.3*a, 0.3*b
		}
		if nv == 1 && i >= turns {
			break
		}
		tries = append(tries, [2]float64{a, b})
	}
	slices.SortStableFunc(tries, func(p, q [2]float64) int {
		return cmp.Compare(math.Hypot(p[0], p[1]), math.Hypot(q[0], q[1]))
	})
	good := 0.0
	for i := range s.k.obs {
		good = math.Max(good, 5/s.k.obs[i].w0)
	}
	for _, try := range tries {
		z := m.Rest()
		for j := range d {
			d[j] = 0
		}
		for v := range min(nv, 2) {
			d[v] = try[v]
		}
		m.Displace(z, d)
		if c := s.solve(z, 60); c < 0.98*best {
			best = c
			copy(keep, z)
			if best < good {
				break
			}
		}
	}
	copy(y, keep)
	if math.IsInf(best, 1) {
		return fmt.Errorf("the bobs' first places cannot be those of the rig's toy")
	}
	return nil
}

// auxOf is how many numbers of a clip's state are not places or speeds.
func (f *fitter) auxOf(c int) int { return f.clips[c].model.Aux() }
