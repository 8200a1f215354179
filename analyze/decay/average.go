package decay

import (
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

// quantity is a number that follows from a fitted model; NaN where it does not exist.
type quantity func(m model, p []float64) float64

// averaged is a quantity over all laws, by their weights.
type averaged struct {
	value  float64
	random float64         // standard uncertainty from the noise
	spread float64         // from not knowing the law
	shared []finding.Share // from what is common to all samples
	u      float64
}

// average computes q for every law that has weight and its mean over them.
func (an *analysis) average(q quantity) averaged {
	return an.averageOver(q, func(law) bool { return true }, an.variance)
}

// withShape is average with what one more term in the restoring law would change.
func (an *analysis) withShape(q quantity) averaged {
	a := an.average(q)
	if f := an.richer; f != nil {
		top := an.fits[an.best()]
		a = a.with("the shape of the restoring law", q(f.m, f.p)-q(top.m, top.p))
	}
	return a
}

// averageOver is average over the laws that ok lets through, with a variance of
// one's choice.
func (an *analysis) averageOver(q quantity, ok func(law) bool, variance func(k int, g []float64) float64) averaged {
	type one struct{ w, v, variance, random float64 }
	var all []one
	total := 0.0
	common := make([]float64, len(an.sources))
	shift := 0.0
	for k, f := range an.fits {
		w := an.weights[k]
		if w < 1e-4 || !ok(f.m.law) {
			continue
		}
		v := q(f.m, f.p)
		if math.IsNaN(v) {
			continue
		}
		g := gradient(q, f)
		whole := variance(k, g)
		systematic := math.Min(whole, quadratic(g, an.cov[k])-quadratic(g, an.bare[k]))
		all = append(all, one{w, v, whole, whole - math.Max(0, systematic)})
		total += w
		for s := range an.sources {
			common[s] += w * dot(g, an.gain(k, s)) * f.uCommon[s]
		}
		shift += w * g[atRest]
	}
	a := averaged{value: math.NaN()}
	if total == 0 {
		return a
	}
	a.value = 0
	for _, o := range all {
		a.value += o.w * o.v / total
	}
	var vr, vs, vAll float64
	for _, o := range all {
		vr += o.w * o.random / total
		vAll += o.w * o.variance / total
		vs += o.w * (o.v - a.value) * (o.v - a.value) / total
	}
	a.random, a.spread = math.Sqrt(vr), math.Sqrt(vs)
	sum := vAll + vs
	// The shared causes' part, parted in the proportion of what each does.
	for s, c := range common {
		a.addShare(an.sources[s], math.Abs(c)/total)
	}
	parts := 0.0
	for _, s := range a.shared {
		parts += s.U * s.U
	}
	for i := range a.shared {
		if parts > 0 {
			a.shared[i].U *= math.Sqrt(math.Max(0, vAll-vr) / parts)
		}
	}
	for _, s := range an.shifts {
		u := math.Abs(s.D[0] * shift / total)
		if u > 0 {
			a.addShare(s.Source, u)
			sum += u * u
		}
	}
	a.u = math.Sqrt(sum)
	return a
}

// variance is gᵀCg for the k-th law; where the residuals are not white, its
// random part is not below what the jackknife says.
func (an *analysis) variance(k int, g []float64) float64 {
	v := quadratic(g, an.cov[k])
	if an.jack[k] != nil {
		v += math.Max(0, quadratic(g, an.jack[k])-quadratic(g, an.bare[k]))
	}
	return v
}

// uncertainty is the standard uncertainty of parameter j of the k-th law.
func (an *analysis) uncertainty(k, j int) float64 {
	g := make([]float64, an.fits[k].m.size())
	g[j] = 1
	return math.Sqrt(an.variance(k, g))
}

// addShare adds an independent share, merged with one of the same name.
func (a *averaged) addShare(source string, u float64) {
	for i := range a.shared {
		if a.shared[i].Source == source {
			a.shared[i].U = math.Hypot(a.shared[i].U, u)
			return
		}
	}
	a.shared = append(a.shared, finding.Share{Source: source, U: u})
}

// with adds one more independent share to the uncertainty.
func (a averaged) with(source string, u float64) averaged {
	if u == 0 || math.IsNaN(u) || math.IsNaN(a.value) {
		return a
	}
	a.shared = slices.Clone(a.shared)
	a.addShare(source, math.Abs(u))
	a.u = math.Hypot(a.u, u)
	return a
}

// through carries the average through a smooth function of it.
func (a averaged) through(f func(float64) float64) averaged {
	h := math.Max(1e-6*math.Abs(a.value), 1e-3*a.u)
	slope := math.Abs((f(a.value+h) - f(a.value-h)) / (2 * h))
	b := averaged{value: f(a.value), random: a.random * slope, spread: a.spread * slope, u: a.u * slope}
	for _, s := range a.shared {
		b.shared = append(b.shared, finding.Share{Source: s.Source, U: s.U * slope})
	}
	return b
}

// finding makes a finding of an average.
func (a averaged) finding(key, subject, name, unit, method string) finding.Finding {
	f := finding.Normal(key, subject, name, a.value, a.u, unit, method)
	f.Budget = append(f.Budget, finding.Share{Source: "the pictures' noise", U: a.random})
	if a.spread > 0.01*a.u {
		f.Budget = append(f.Budget, finding.Share{Source: "which friction it is", U: a.spread})
	}
	for _, s := range a.shared {
		if s.U > 1e-3*a.u {
			f.Budget = append(f.Budget, s)
		}
	}
	return f
}

// gradient is ∂q/∂p by central differences of a tenth of each parameter's
// standard uncertainty for unit noise.
func gradient(q quantity, f *fitted) []float64 {
	n := f.m.size()
	g := make([]float64, n)
	p := slices.Clone(f.p)
	for j := range n {
		h := 0.1 * math.Sqrt(f.cov[j*n+j])
		if !(h > 0) {
			continue
		}
		p[j] = f.p[j] + h
		up := q(f.m, p)
		p[j] = f.p[j] - h
		down := q(f.m, p)
		p[j] = f.p[j]
		if d := (up - down) / (2 * h); !math.IsNaN(d) {
			g[j] = d
		}
	}
	return g
}

// gain is by how much one standard uncertainty of shared cause s moves the
// parameters of law k when it is not fitted: (JᵀJ)⁻¹Jᵀ·(D/u).
func (an *analysis) gain(k, s int) []float64 {
	if g := an.gains[[2]int{k, s}]; g != nil {
		return g
	}
	if an.gains == nil {
		an.gains = map[[2]int][]float64{}
	}
	f := an.fits[k]
	n := f.m.size()
	jtd := make([]float64, n)
	for i, d := range an.data.common[s] {
		x := d / an.data.u[i]
		for j := range n {
			jtd[j] += f.jac[i*n+j] * x
		}
	}
	g := make([]float64, n)
	for i := range n {
		for j := range n {
			g[i] += f.bare[i*n+j] * jtd[j]
		}
	}
	an.gains[[2]int{k, s}] = g
	return g
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// quadratic is gᵀCg.
func quadratic(g, c []float64) float64 {
	n := len(g)
	s := 0.0
	for i := range n {
		for j := range n {
			s += g[i] * c[i*n+j] * g[j]
		}
	}
	return math.Max(0, s)
}

// The quantities.

func periodZero(_ model, p []float64) float64 { return 2 * math.Pi / math.Sqrt(p[atK]) }

func periodAt(a float64) quantity {
	return func(m model, p []float64) float64 {
		o, err := m.orbitAt(p, a)
		if err != nil {
			return math.NaN()
		}
		return o.period
	}
}

func zetaAt(a float64) quantity {
	return func(m model, p []float64) float64 {
		o, err := m.orbitAt(p, a)
		if err != nil {
			return math.NaN()
		}
		return m.zeta(p, o)
	}
}

func frictionOf(l law) quantity {
	return func(m model, p []float64) float64 { return m.friction(p, l) }
}

// upper95 is the 95 % quantile of a normal distribution cut off below zero, for
// an upper limit on what cannot be negative.
func upper95(value, u float64) float64 {
	if !(u > 0) {
		return value
	}
	below := normalCDF(-value / u)
	target := below + 0.95*(1-below)
	lo, hi := 0.0, math.Max(0, value)+10*u
	for range 80 {
		mid := (lo + hi) / 2
		if normalCDF((mid-value)/u) < target {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi
}

func normalCDF(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
