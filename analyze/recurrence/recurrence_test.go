package recurrence

import (
	"flag"
	"math"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"
)

var long = flag.Bool("long", false, "run the full Monte Carlo counts")

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s is %.6g, want %.6g ± %.2g", what, got, want, tol)
	}
}

func series(x []float64) Vectors { return Vectors{N: len(x), Dim: 1, Step: 1, X: x} }

// A period of T samples, states far apart but for whole periods: one diagonal
// line at each multiple k of T, of N − kT points. Everything follows by hand.
func TestPeriodic(t *testing.T) {
	const n, period = 1000, 20
	v := Vectors{N: n, Dim: 2, Step: 0.1, X: make([]float64, 2*n)}
	for i := range n {
		v.X[2*i], v.X[2*i+1] = math.Sincos(2 * math.Pi * float64(i) / period)
	}
	p, err := Auto(v, Options{Threshold: 0.05, Norm: Euclidean})
	if err != nil {
		t.Fatal(err)
	}
	points, lines := 0., 0.
	for k := 1; k*period < n; k++ {
		points += float64(n - k*period)
		lines++
	}
	m := p.Measures
	near(t, "RR", m.RR.V, 2*points/(n*(n-1)), 1e-12)
	near(t, "DET", m.DET.V, 1, 0)
	near(t, "L", m.L.V, 0.1*points/lines, 1e-9)
	near(t, "LMax", m.LMax.V, 0.1*(n-period), 1e-9)
	near(t, "DIV", m.DIV.V, 1/(0.1*(n-period)), 1e-9)
	near(t, "ENTR", m.ENTR.V, math.Log(lines), 1e-9) // all lengths differ
	near(t, "LAM", m.LAM.V, 0, 0)
	near(t, "VMax", m.VMax.V, 0.1, 1e-12)
	near(t, "T1", m.T1.V, 2, 1e-9)
	near(t, "T2", m.T2.V, 2, 1e-9)
	if !math.IsNaN(m.TT.V) || m.Vertical != 0 || m.Diagonal != int64(2*lines) {
		t.Errorf("trapping time %v, %d vertical and %d diagonal lines", m.TT.V, m.Vertical, m.Diagonal)
	}
	near(t, "recurrence rate at one period", p.Lag[period], 1, 0)
	near(t, "recurrence rate at half a period", p.Lag[period/2], 0, 0)
}

// Independent values, even on 0 … 1: with local rate q(x) = P(|x − y| ≤ ε) and
// p = 2ε − ε² its mean, a diagonal line goes on with chance p at each step (M.
// Thiel, M. C. Romano and J. Kurths, Izvestija vuzov: Prikladnaja nelinejnaja
// dinamika 11 (2003) 20), a vertical one with chance q(x), given its column.
func TestWhiteNoise(t *testing.T) {
	const n, eps = 6000, 0.1
	rng := rand.New(rand.NewPCG(3, 4))
	x := make([]float64, n)
	for i := range x {
		x[i] = rng.Float64()
	}
	p, err := Auto(series(x), Options{Threshold: eps})
	if err != nil {
		t.Fatal(err)
	}
	const q = 2*eps - eps*eps
	m := p.Measures
	// E[q^k (1−q)^l] over x by the midpoint rule.
	mean := func(f func(q float64) float64) float64 {
		s := 0.0
		for i := range 10000 {
			u := (float64(i) + 0.5) / 10000
			s += f(min(u+eps, 1)-max(u-eps, 0)) / 10000
		}
		return s
	}
	single := mean(func(q float64) float64 { return q * (1 - q) * (1 - q) })
	check := func(what string, got Value, want float64) {
		t.Helper()
		if !(got.U > 0) || got.U > 0.05*want {
			t.Errorf("%s: uncertainty %v of %v", what, got.U, got.V)
		}
		near(t, what, got.V, want, 4*got.U)
	}
	check("RR", m.RR, q)
	check("DET", m.DET, q*(2-q))
	check("L", m.L, 2+q/(1-q))
	check("ENTR", m.ENTR, -math.Log(1-q)-q/(1-q)*math.Log(q))
	check("LAM", m.LAM, 1-single/q)
	long := mean(func(q float64) float64 { return q * q * (1 - q) })
	check("TT", m.TT, (q-single)/long)
	check("T1", m.T1, 1/q)
	starts := mean(func(q float64) float64 { return q * (1 - q) })
	check("T2", m.T2, 1/starts)
	// The longest of K lines with tail p^l: ln K / −ln p and Gumbel's scatter.
	lines := q * (1 - q) * n * n / 2
	if got, want := m.LMax.V, math.Log(lines)/-math.Log(q); math.Abs(got-want) > 4*m.LMax.U || m.LMax.U > 3 {
		t.Errorf("LMax %v ± %v, want about %v", got, m.LMax.U, want)
	}
}

// The tent map (with a sliver of noise against its collapse in binary numbers):
// a small distance doubles at each step, so a line goes on with chance 1/2:
// DET = 3/4, L = 3, ENTR = 2 ln 2, and the number of lines of length l or more
// falls as exp(−K·l) with K = ln 2, the map's entropy.
func TestTentMap(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	const n = 10000
	x := make([]float64, n)
	x[0] = 0.3719
	for i := 1; i < n; i++ {
		y := 1 - math.Abs(2*x[i-1]-1) + 1e-12*rng.NormFloat64()
		x[i] = min(max(y, 0), 1)
	}
	p, err := Auto(series(x), Options{Threshold: 0.002})
	if err != nil {
		t.Fatal(err)
	}
	m := p.Measures
	near(t, "RR", m.RR.V, 0.004, 0.0001)
	near(t, "DET", m.DET.V, 0.75, 0.01)
	near(t, "L", m.L.V, 3, 0.03)
	near(t, "ENTR", m.ENTR.V, 2*math.Ln2, 0.03)
}

// Several tiles of columns: in one dimension the recurrences of each state are
// counted by sorting.
func TestManyTiles(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	const n, eps = 40000, 0.003
	x := make([]float64, n)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	p, err := Auto(series(x), Options{Threshold: eps})
	if err != nil {
		t.Fatal(err)
	}
	y := append([]float64(nil), x...)
	sort.Float64s(y)
	want := int64(-n)
	for _, v := range y {
		lo := sort.Search(n, func(i int) bool { return !(v-y[i] > eps) })
		hi := sort.Search(n, func(i int) bool { return y[i]-v > eps })
		want += int64(hi - lo)
	}
	if p.Points != want {
		t.Errorf("%d recurrences, by sorting %d", p.Points, want)
	}
}

// A fixed rate is met, by all pairs and by samples of them, for each norm.
func TestRate(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 10))
	for _, n := range []int{300, 3000} {
		for norm := Maximum; norm <= Manhattan; norm++ {
			v := wander(rng, n, 3, 0)
			p, err := Auto(v, Options{Rate: 0.05, Norm: norm, Theiler: 10})
			if err != nil {
				t.Fatal(err)
			}
			near(t, "rate", p.Measures.RR.V, 0.05, 0.0012)
		}
	}
}

// The stated uncertainties against the scatter over independent series, of noise
// with a memory and of a chaotic map.
// With -long (1,000 series each) those of averages were 0.95 to 1.39 × their
// scatter, those of extremes 0.84 to 1.68 ×.
func TestUncertainty(t *testing.T) {
	runs := 60
	if *long {
		runs = 1000
	}
	rng := rand.New(rand.NewPCG(11, 12))
	kinds := map[string]func() Vectors{
		"noise with memory": func() Vectors {
			x, y := make([]float64, 1200), 0.0
			for i := range x {
				y = 0.8*y + rng.NormFloat64()
				x[i] = y
			}
			return series(x)
		},
		"logistic map": func() Vectors {
			x := make([]float64, 1200)
			x[0] = rng.Float64()
			for i := 1; i < len(x); i++ {
				x[i] = 3.9 * x[i-1] * (1 - x[i-1])
			}
			return series(x)
		},
	}
	for name, make := range kinds {
		var mean, square, stated [11]float64
		for range runs {
			p, err := Auto(make(), Options{Threshold: 0.1})
			if err != nil {
				t.Fatal(err)
			}
			m := p.Measures
			for q, v := range []Value{m.RR, m.DET, m.L, m.ENTR, m.LAM, m.TT, m.T1, m.T2, m.LMax, m.VMax, m.DIV} {
				mean[q] += v.V / float64(runs)
				square[q] += v.V * v.V / float64(runs)
				stated[q] += v.U / float64(runs)
			}
		}
		for q, what := range []string{"RR", "DET", "L", "ENTR", "LAM", "TT", "T1", "T2", "LMax", "VMax", "DIV"} {
			ratio := stated[q] / math.Sqrt(square[q]-mean[q]*mean[q])
			t.Logf("%s: stated uncertainty of %s is %.2f × its scatter", name, what, ratio)
			most := 1.8
			if q >= 8 {
				most = 3 // extremes: said to be rough
			}
			if ratio < 0.6 || ratio > most {
				t.Errorf("%s: stated uncertainty of %s is %.2f × its scatter", name, what, ratio)
			}
		}
	}
}

// Two oscillators that keep step recur together at whole periods; ones that do
// not keep step seldom do.
func TestJointAndCross(t *testing.T) {
	phase := func(w, at float64, n int) Vectors {
		v := Vectors{N: n, Dim: 2, Step: 0.1, X: make([]float64, 2*n)}
		for i := range n {
			v.X[2*i], v.X[2*i+1] = math.Sincos(w*float64(i) + at)
		}
		return v
	}
	a, same, other := phase(0.2, 0, 1500), phase(0.2, 1, 1500), phase(0.2*math.Phi, 0, 1500)
	opt := Options{Threshold: 0.2}
	single, err := Auto(a, opt)
	if err != nil {
		t.Fatal(err)
	}
	locked, err := Joint(opt, a, same)
	if err != nil {
		t.Fatal(err)
	}
	free, err := Joint(opt, a, other)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "joint rate of two in step over the single rate", locked.Measures.RR.V/single.Measures.RR.V, 1, 0.15)
	near(t, "joint rate of two out of step over its square", free.Measures.RR.V/sq(single.Measures.RR.V), 1, 0.35)
	// Cross recurrence of a series with a shifted copy: the line of identity moves.
	shift, err := Embed(0, 0.1, 1, 1, a.X[2*7:])
	if err != nil {
		t.Fatal(err)
	}
	shifted := Vectors{N: a.N - 7, Dim: 2, Step: 0.1, X: shift.X}
	c, err := Cross(a, shifted, opt)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "longest line of a series and its copy", c.Measures.LMax.V, 0.1*float64(a.N-7), 1e-9)
}

func sq(x float64) float64 { return x * x }

// A motion that turns from a steady swing into noise: determinism falls.
func TestSliding(t *testing.T) {
	rng := rand.New(rand.NewPCG(13, 14))
	x := make([]float64, 2000)
	for i := range x {
		x[i] = math.Sin(0.2 * float64(i))
		if i >= 1000 {
			x[i] = rng.NormFloat64()
		}
	}
	v, err := Embed(5, 0.02, 2, 8, x)
	if err != nil {
		t.Fatal(err)
	}
	c, err := Sliding(v, 300, 100, Options{Rate: 0.05})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "first window's middle", c.Time[0], 5+0.02*149.5, 1e-9)
	first, last := c.Measures[0], c.Measures[len(c.Measures)-1]
	if first.DET.V < 0.98 || last.DET.V > 0.3 {
		t.Errorf("determinism %v at first and %v at last", first.DET, last.DET)
	}
}

// The findings are bounded by what shares can be, and the curves carry what the
// figures need.
func TestFindings(t *testing.T) {
	rng := rand.New(rand.NewPCG(15, 16))
	p, err := Auto(wander(rng, 400, 2, 0), Options{Rate: 0.1, Map: 50})
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, f := range p.Findings("lamp") {
		seen[f.Key] = true
		if f.Lo < 0 || f.Unit == "1" && f.Key != "recurrence.entropy" && f.Hi > 1 || !(f.U > 0) {
			t.Errorf("%s: %v ± %v, %v … %v", f.Key, f.Value, f.U, f.Lo, f.Hi)
		}
	}
	for _, k := range []string{"rate", "determinism", "entropy", "laminarity", "trapping_time", "divergence", "return_2"} {
		if !seen["recurrence."+k] {
			t.Errorf("no finding recurrence.%s", k)
		}
	}
	curves := p.Curves("lamp")
	if len(curves) != 2 || curves[0].Grid == nil || len(curves[0].Grid.Z) != 2500 || len(curves[0].Grid.X) != 50 {
		t.Fatalf("curves: %+v", curves)
	}
	near(t, "first cell's middle", curves[0].Grid.X[0], 3+0.5*3.5, 1e-9)
	near(t, "cell on the diagonal", curves[0].Grid.Z[0], 1, 1)
}

func TestEmbed(t *testing.T) {
	v, err := Embed(1, 0.5, 3, 2, []float64{0, 1, 2, 3, 4, 5, 6}, []float64{10, 11, 12, 13, 14, 15, 16})
	if err != nil {
		t.Fatal(err)
	}
	if v.N != 3 || v.Dim != 6 || v.Start != 1 || v.Step != 0.5 {
		t.Fatalf("%+v", v)
	}
	for i, want := range []float64{1, 3, 5, 11, 13, 15} {
		near(t, "component", v.State(1)[i], want, 0)
	}
}

func TestBadInput(t *testing.T) {
	good := series([]float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10})
	still := series(make([]float64, 50))
	bad := good
	bad.X = []float64{1, math.Inf(1), 3, 4, 5, 6, 7, 8, 9, 10}
	cases := []struct {
		want string
		v    Vectors
		opt  Options
	}{
		{"either a threshold or a rate", good, Options{}},
		{"either a threshold or a rate", good, Options{Rate: 0.1, Threshold: 1}},
		{"below 1", good, Options{Rate: 2}},
		{"no norm", good, Options{Rate: 0.1, Norm: 7}},
		{"negative", good, Options{Rate: 0.1, Theiler: -1}},
		{"fewer than the excluded band", good, Options{Threshold: 0.1, Theiler: 20}},
		{"infinite", bad, Options{Rate: 0.1}},
		{"nothing moves", still, Options{Rate: 0.1}},
		{"do not make", Vectors{N: 3, Dim: 2, X: []float64{1}, Step: 1}, Options{Rate: 0.1}},
		{"must be positive", Vectors{N: 3, Dim: 1, X: []float64{1, 2, 3}}, Options{Rate: 0.1}},
		{"no two can be compared", good, Options{Rate: 0.1, Theiler: 9}},
	}
	for _, c := range cases {
		if _, err := Auto(c.v, c.opt); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("want an error with %q, got %v", c.want, err)
		}
	}
	if _, err := Embed(0, 1, 3, 50, good.X); err == nil {
		t.Error("an embedding longer than the series was taken")
	}
	if _, err := Cross(good, Vectors{N: 5, Dim: 2, Step: 1, X: make([]float64, 10)}, Options{Threshold: 1}); err == nil {
		t.Error("states of different dimension were compared")
	}
	if _, err := Joint(Options{Threshold: 1}, good, still); err == nil {
		t.Error("series of different length were joined")
	}
	if _, err := Sliding(good, 500, 1, Options{Rate: 0.1}); err == nil {
		t.Error("a window beyond the series was taken")
	}
}
