package modes

import (
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// shape is the complex amplitude of mode k in bob b at the clip's middle.
func (j *joint) shape(p []float64, b, k int) complex128 {
	at := j.at(b, k)
	return complex(p[at], -p[at+1])
}

// tell works out everything that follows from the joint fit.
func (res *Result) tell() {
	j := res.fit
	n := len(j.p)
	half := (res.To - res.From) / 2
	energies := make([]float64, j.modes)
	total := 0.0
	for k := range j.modes {
		w, d := j.p[2*k], j.p[2*k+1]
		m := Mode{Frequency: w / (2 * math.Pi), UFrequency: math.Sqrt(j.cov[2*k*n+2*k]) / (2 * math.Pi), Decay: d, UDecay: math.Sqrt(j.cov[(2*k+1)*n+2*k+1])}
		m.Zeta, m.UZeta = j.of(func(p []float64) float64 { return p[2*k+1] / math.Hypot(p[2*k], p[2*k+1]) })
		ref := 0
		over := 1.0 // mean of exp(−2·decay·x) over the clip
		if a := 2 * d * half; math.Abs(a) > 1e-6 {
			over = math.Sinh(a) / a
		}
		for b := range j.bobs {
			s := j.shape(j.p, b, k)
			m.Shape = append(m.Shape, s)
			if cmplx.Abs(s) > cmplx.Abs(m.Shape[ref]) {
				ref = b
			}
			energies[k] += w * w * over * real(s*cmplx.Conj(s))
		}
		total += energies[k]
		for b := range j.bobs {
			now := m.Shape[b] / m.Shape[ref]
			r, ur := j.of(func(p []float64) float64 { return real(j.shape(p, b, k) / j.shape(p, ref, k)) })
			turn, ut := j.of(func(p []float64) float64 { return cmplx.Phase(j.shape(p, b, k) / j.shape(p, ref, k) / now) })
			m.Ratio, m.URatio = append(m.Ratio, r), append(m.URatio, ur)
			m.Phase, m.UPhase = append(m.Phase, cmplx.Phase(now)+turn), append(m.UPhase, ut)
		}
		res.Modes = append(res.Modes, m)
	}
	for k := range res.Modes {
		res.Modes[k].Share = energies[k] / total
	}
	for k := range res.Modes {
		m := &res.Modes[k]
		for l := range res.Modes {
			o := &res.Modes[l]
			ratio := math.Round(m.Frequency / o.Frequency)
			if ratio >= 2 && ratio <= 5 && energies[k] < 0.1*energies[l] && math.Abs(m.Frequency-ratio*o.Frequency)*2*half < 1 {
				m.Overtone = int(ratio)
			}
		}
	}
	res.beats()
	res.wander()
	res.couple()
}

// own lists the modes that are no overtone and hold more than a thousandth of the
// energy.
func (res *Result) own() []int {
	var out []int
	for k, m := range res.Modes {
		if m.Overtone == 0 && m.Share > 1e-3 {
			out = append(out, k)
		}
	}
	return out
}

// beats lists the pairs of modes that make some bob wax and wane by more than a
// tenth, over at least two swings.
func (res *Result) beats() {
	strength := map[[2]int]float64{}
	own := res.own()
	for i, k := range own {
		for _, l := range own[i+1:] {
			a, b := &res.Modes[k], &res.Modes[l]
			if b.Frequency-a.Frequency > 0.25*(a.Frequency+b.Frequency) {
				continue
			}
			beat := Beat{First: k, Second: l}
			for bob := range res.Bobs {
				x, y := cmplx.Abs(a.Shape[bob]), cmplx.Abs(b.Shape[bob])
				strength[[2]int{k, l}] += x * y
				if x+y > 0.2*cmplx.Abs(a.Shape[largest(a.Shape)]) {
					beat.Depth = math.Max(beat.Depth, 2*math.Min(x, y)/(x+y))
				}
			}
			if beat.Depth < 0.1 {
				continue
			}
			beat.Period, beat.U = res.fit.of(func(p []float64) float64 { return 2 * math.Pi / math.Abs(p[2*l]-p[2*k]) })
			res.Beats = append(res.Beats, beat)
		}
	}
	slices.SortFunc(res.Beats, func(a, b Beat) int {
		if strength[[2]int{a.First, a.Second}] > strength[[2]int{b.First, b.Second}] {
			return -1
		}
		return 1
	})
}

func largest(s []complex128) int {
	best := 0
	for i := range s {
		if cmplx.Abs(s[i]) > cmplx.Abs(s[best]) {
			best = i
		}
	}
	return best
}

// shares writes each bob's share of the energy at x (s from the middle), as means
// over one swing of the slowest mode: mode k and l make |ω_k S_k + ω_l S_l|², whose
// cross terms the mean weakens by sinc. The bobs are taken as equally heavy.
func (res *Result) shares(p []float64, own []int, x float64, dst []float64) {
	j := res.fit
	slow := p[2*own[0]]
	for _, k := range own {
		slow = math.Min(slow, p[2*k])
	}
	total := 0.0
	for b := range dst {
		dst[b] = 0
		for _, k := range own {
			zk := complex(p[2*k], 0) * j.shape(p, b, k) * cmplx.Exp(complex(-p[2*k+1]*x, p[2*k]*x))
			for _, l := range own {
				zl := complex(p[2*l], 0) * j.shape(p, b, l) * cmplx.Exp(complex(-p[2*l+1]*x, p[2*l]*x))
				f := 1.0
				if a := math.Pi * (p[2*k] - p[2*l]) / slow; a != 0 {
					f = math.Sin(a) / a
				}
				dst[b] += f * real(zk*cmplx.Conj(zl))
			}
		}
		dst[b] = math.Max(0, dst[b])
		total += dst[b]
	}
	if total > 0 {
		for b := range dst {
			dst[b] /= total
		}
	}
}

// Shares returns each bob's share of the energy of all, one slice per bob, at n
// moments evenly spread over the clip, which it returns too. Nil where there are
// fewer than two bobs.
func (res *Result) Shares(n int) (t []float64, shares [][]float64) {
	own := res.own()
	if len(res.Bobs) < 2 || len(own) == 0 {
		return nil, nil
	}
	shares = make([][]float64, len(res.Bobs))
	one := make([]float64, len(res.Bobs))
	for i := range n {
		x := (res.To - res.From) * (float64(i)/float64(n-1) - 0.5)
		res.shares(res.fit.p, own, x, one)
		t = append(t, res.Middle+x)
		for b := range one {
			shares[b] = append(shares[b], one[b])
		}
	}
	return t, shares
}

// moments is how many moments show every beat well.
func (res *Result) moments() int {
	shortest := res.To - res.From
	for _, b := range res.Beats {
		shortest = math.Min(shortest, b.Period)
	}
	return min(max(200, int(40*(res.To-res.From)/shortest)), 4000)
}

// wander finds how much of the energy goes to and fro, and who gives to whom.
func (res *Result) wander() {
	t, shares := res.Shares(res.moments())
	if t == nil {
		return
	}
	lead, from, to := 0, 0, 0
	for b, s := range shares {
		lo, hi := slices.Index(s, slices.Min(s)), slices.Index(s, slices.Max(s))
		if s[hi]-s[lo] > res.Wandering {
			lead, from, to, res.Wandering = b, lo, hi, s[hi]-s[lo]
		}
	}
	own := res.own()
	one := make([]float64, len(res.Bobs))
	_, res.UWandering = res.fit.of(func(p []float64) float64 {
		res.shares(p, own, t[to]-res.Middle, one)
		hi := one[lead]
		res.shares(p, own, t[from]-res.Middle, one)
		return hi - one[lead]
	})
	if res.Wandering < 0.05 || res.Wandering < 3*res.UWandering {
		return
	}
	// Turning points of the share that swings most, with a fifth of its swing as
	// the least turn.
	turns := []int{0}
	s := shares[lead]
	lo, hi, dir := 0, 0, 0
	for i := range s {
		if s[i] < s[lo] {
			lo = i
		}
		if s[i] > s[hi] {
			hi = i
		}
		least := 0.2 * res.Wandering
		switch {
		case dir >= 0 && s[hi]-s[i] > least:
			if hi > turns[len(turns)-1] {
				turns = append(turns, hi)
			}
			dir, lo = -1, i
			hi = i
		case dir <= 0 && s[i]-s[lo] > least:
			if lo > turns[len(turns)-1] {
				turns = append(turns, lo)
			}
			dir, hi = 1, i
			lo = i
		}
	}
	turns = append(turns, len(s)-1)
	for i := 1; i < len(turns); i++ {
		a, b := turns[i-1], turns[i]
		e := Exchange{FromS: t[a], ToS: t[b]}
		for k := range shares {
			c := shares[k][b] - shares[k][a]
			if -c > e.Lost {
				e.Lost, e.Giver = -c, k
			}
			if c > e.Won {
				e.Won, e.Taker = c, k
			}
		}
		if e.Giver != e.Taker && math.Min(e.Lost, e.Won) > 0.02 {
			res.Exchanges = append(res.Exchanges, e)
		}
	}
}

// couple rebuilds the equations of motion ÿ = −D·y from frequencies and shapes,
// D = Φ·Ω²·Φ⁻¹. What bob i and j do to each other is √|D_ij·D_ji|, whatever their
// inertias; over the mean angular frequency it is the rate at which two bobs alone
// and alike would exchange their energy.
func (res *Result) couple() {
	own := res.own()
	n := len(res.Bobs)
	if n < 2 || len(own) != n {
		return
	}
	strength := func(p []float64, a, b int) float64 {
		phi, left := mat.NewDense(n, n, nil), mat.NewDense(n, n, nil)
		mean := 0.0
		for c, k := range own {
			w2 := p[2*k]*p[2*k] + p[2*k+1]*p[2*k+1]
			mean += math.Sqrt(w2) / float64(n)
			ref := res.fit.shape(p, largest(res.Modes[k].Shape), k)
			for i := range n {
				v := real(res.fit.shape(p, i, k) / ref)
				phi.Set(i, c, v)
				left.Set(i, c, v*w2)
			}
		}
		// D = left·Φ⁻¹, that is Φᵀ·Dᵀ = leftᵀ.
		var dt mat.Dense
		if err := dt.Solve(phi.T(), left.T()); err != nil {
			return math.NaN()
		}
		return math.Sqrt(math.Abs(dt.At(a, b)*dt.At(b, a))) / (2 * math.Pi * mean)
	}
	for a := range n {
		for b := a + 1; b < n; b++ {
			c := Coupling{First: a, Second: b}
			c.Hz, c.U = res.fit.of(func(p []float64) float64 { return strength(p, a, b) })
			if math.IsNaN(c.Hz + c.U) {
				res.Couplings = nil
				return
			}
			res.Couplings = append(res.Couplings, c)
		}
	}
}
