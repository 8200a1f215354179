package decay

import (
	"flag"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/series"
)

var long = flag.Bool("long", false, "run the full Monte Carlo counts")

// truth is a simulated free decay.
type truth struct {
	m     model
	p     []float64 // at t = 0
	sigma float64   // rad, white noise of a sample
	dt    float64
	n     int
}

// record integrates the truth by a classical Runge–Kutta of order 4 with small
// steps that stop at turning points: independent of the code under test.
func (tr truth) record(rng *rand.Rand) (ts, ys []float64) {
	const sub = 24
	d, v := tr.p[atAngle], tr.p[atRate]
	c1, c2, t0 := tr.m.friction(tr.p, viscous), tr.m.friction(tr.p, drag), tr.m.friction(tr.p, dry)
	acc := func(d, v, s float64) float64 {
		f, _ := tr.m.restoring(tr.p, d)
		return -tr.p[atK]*f - c1*v - s*(c2*v*v+t0)
	}
	sgn := func(d, v float64) float64 {
		if v != 0 {
			return math.Copysign(1, v)
		}
		f, _ := tr.m.restoring(tr.p, d)
		return -math.Copysign(1, f)
	}
	step := func(d, v, s, h float64) (float64, float64) {
		k1d, k1v := v, acc(d, v, s)
		k2d, k2v := v+h/2*k1v, acc(d+h/2*k1d, v+h/2*k1v, s)
		k3d, k3v := v+h/2*k2v, acc(d+h/2*k2d, v+h/2*k2v, s)
		k4d, k4v := v+h*k3v, acc(d+h*k3d, v+h*k3v, s)
		return d + h/6*(k1d+2*k2d+2*k3d+k4d), v + h/6*(k1v+2*k2v+2*k3v+k4v)
	}
	stuck := false
	s := sgn(d, v)
	for i := range tr.n {
		ts = append(ts, float64(i)*tr.dt)
		ys = append(ys, d+tr.p[atRest]+tr.sigma*rng.NormFloat64())
		for range sub {
			h := tr.dt / sub
			for h > 0 && !stuck {
				nd, nv := step(d, v, s, h)
				if nv*s >= 0 || v == 0 && nv*s > 0 {
					d, v = nd, nv
					break
				}
				// A turning point inside: Newton on the step's length.
				g := h * v / (v - nv)
				for range 6 {
					_, w := step(d, v, s, g)
					g -= w / acc(d, w, s)
				}
				d, _ = step(d, v, s, g)
				v, h = 0, h-g
				f, _ := tr.m.restoring(tr.p, d)
				if math.Abs(tr.p[atK]*f) <= t0 {
					stuck = true
				}
				s = -s
			}
		}
	}
	return ts, ys
}

func (tr truth) angle(t testing.TB, rng *rand.Rand) series.Angle {
	t.Helper()
	ts, ys := tr.record(rng)
	u := make([]float64, len(ts))
	for i := range u {
		u[i] = tr.sigma
	}
	a, err := series.FromTable("arm", ts, ys, u)
	if err != nil {
		t.Fatal(err)
	}
	a.UClock = 0
	return a
}

// bound is the Cramér–Rao bound of a quantity: from the Fisher information of
// the true law with every parameter free.
func (tr truth) bound(q quantity) float64 {
	n := tr.m.size()
	times := make([]float64, tr.n)
	for i := range times {
		times[i] = float64(i) * tr.dt
	}
	out, jac := make([]float64, tr.n), make([]float64, tr.n*n)
	if err := newMover(tr.m, true).run(tr.p, 0, times, out, jac, nil); err != nil {
		return math.NaN()
	}
	info := make([]float64, n*n)
	for i := range tr.n {
		for a := range n {
			for b := range n {
				info[a*n+b] += jac[i*n+a] * jac[i*n+b] / (tr.sigma * tr.sigma)
			}
		}
	}
	f := &fitted{m: tr.m, p: tr.p, cov: invert(info, n)}
	return math.Sqrt(quadratic(gradient(q, f), f.cov))
}

// invert inverts a positive matrix by Gauss–Jordan with scaling.
func invert(a []float64, n int) []float64 {
	s := make([]float64, n)
	m := make([][]float64, n)
	for i := range n {
		s[i] = 1 / math.Sqrt(a[i*n+i])
	}
	for i := range n {
		m[i] = make([]float64, 2*n)
		for j := range n {
			m[i][j] = a[i*n+j] * s[i] * s[j]
		}
		m[i][n+i] = 1
	}
	for c := range n {
		piv := c
		for r := c; r < n; r++ {
			if math.Abs(m[r][c]) > math.Abs(m[piv][c]) {
				piv = r
			}
		}
		m[c], m[piv] = m[piv], m[c]
		for r := range n {
			if r == c {
				continue
			}
			k := m[r][c] / m[c][c]
			for j := range 2 * n {
				m[r][j] -= k * m[c][j]
			}
		}
	}
	out := make([]float64, n*n)
	for i := range n {
		for j := range n {
			out[i*n+j] = m[i][n+j] / m[i][i] * s[i] * s[j]
		}
	}
	return out
}

// swinging builds a truth from what people would say: the period of small
// swings, the release amplitude, each friction's share of the first swing's
// loss, the logarithm of first over last amplitude, the noise in dB below the
// release amplitude (20 log₁₀), swings and samples.
type swinging struct {
	period, release float64
	shares          [3]float64
	logRatio        float64
	db              float64
	duration, fps   float64
	sine            bool
}

func (s swinging) truth(rng *rand.Rand) truth {
	var l law
	for i, x := range s.shares {
		if x > 0 {
			l |= frictions[i]
		}
	}
	m := model{sine: s.sine, law: l}
	k := sq(2 * math.Pi / s.period)
	p := make([]float64, m.size())
	// A start anywhere in the swing, at the release amplitude's energy.
	full := make([]float64, m.size())
	full[atK] = k
	o, err := m.orbitAt(full, s.release)
	if err != nil {
		panic(err)
	}
	phase := 2 * math.Pi * rng.Float64()
	d := s.release * math.Cos(phase)
	v := math.Sqrt(math.Max(0, 2*(o.energy-m.potential(full, d))))
	if math.Sin(phase) > 0 {
		v = -v
	}
	p[atAngle], p[atRate], p[atRest], p[atK] = d, v, 0.02*(rng.Float64()-0.5), k
	// The total loss for which the amplitude falls by logRatio: averaged envelope,
	// by bisection on the first swing's decrement.
	end := func(first float64) float64 {
		c := make([]float64, 3)
		for i, x := range s.shares {
			c[i] = x * first * s.release * o.slope / o.loss[i]
		}
		a, t := s.release, 0.0
		for t < s.duration && a > 1e-3*s.release {
			q, err := m.orbitAt(full, a)
			if err != nil {
				break
			}
			lost := 0.0
			for i := range c {
				lost += c[i] * q.loss[i]
			}
			h := math.Min(0.05*a*q.slope*q.period/lost, s.duration-t)
			h = math.Max(h, s.duration*1e-4)
			a -= lost / q.slope / q.period * h
			t += h
		}
		return math.Log(s.release / math.Max(a, 1e-3*s.release))
	}
	lo, hi := 1e-6, 2.0
	for range 50 {
		mid := math.Sqrt(lo * hi)
		if end(mid) < s.logRatio {
			lo = mid
		} else {
			hi = mid
		}
	}
	for i, x := range s.shares {
		if x > 0 {
			p[m.frictionAt(frictions[i])] = x * lo * s.release * o.slope / o.loss[i]
		}
	}
	return truth{m: m, p: p, sigma: s.release * math.Pow(10, -s.db/20), dt: 1 / s.fps, n: int(s.duration * s.fps)}
}
