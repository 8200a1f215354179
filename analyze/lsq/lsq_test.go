package lsq

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// line is y = a + b·x at the given x.
func line(x, y []float64) Problem {
	return Problem{N: 2, M: len(x), Names: []string{"a", "b"}, Residuals: func(p, r []float64) error {
		for i := range x {
			r[i] = p[0] + p[1]*x[i] - y[i]
		}
		return nil
	}}
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s is %v, want %v ± %v", what, got, want, tol)
	}
}

// The straight line through five points by hand: Sxx = 10, b = Sxy/Sxx = 1.99,
// a = 0.05, χ² = 0.107, σ² = χ²/3, u_b = √(σ²/10), u_a = √(σ²·(1/5 + 9/10)).
func TestLineByHand(t *testing.T) {
	x, y := []float64{1, 2, 3, 4, 5}, []float64{2.1, 3.9, 6.2, 7.8, 10.1}
	sum, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "a", sum.P[0], 0.05, 1e-9)
	near(t, "b", sum.P[1], 1.99, 1e-9)
	near(t, "χ²", sum.ChiSquare, 0.107, 1e-9)
	near(t, "u_a", sum.U[0], math.Sqrt(0.107/3*1.1), 1e-9)
	near(t, "u_b", sum.U[1], math.Sqrt(0.107/3/10), 1e-9)
	near(t, "correlation", sum.Correlation()[1], -3/math.Sqrt(11), 1e-9)
	near(t, "u of a + 3b", sum.Of([]float64{1, 3}), math.Sqrt(0.107/3/5), 1e-9)
	if sum.DoF != 3 || sum.Rank != 2 || !sum.Converged || len(sum.Weak)+len(sum.Inseparable) > 0 {
		t.Errorf("unexpected summary: %v", sum)
	}
	known, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{SigmaKnown: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u_b with σ known", known.U[1], math.Sqrt(1./10), 1e-9)
}

func TestHoldAndPrior(t *testing.T) {
	x, y := []float64{1, 2, 3, 4, 5}, []float64{2.1, 3.9, 6.2, 7.8, 10.1}
	pr := line(x, y)
	pr.Hold = []bool{true, false}
	sum, err := Solve(context.Background(), pr, []float64{0, 7}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "b through the origin, Σxy/Σx²", sum.P[1], 110.2/55, 1e-9)
	if sum.U[0] != 0 || sum.P[0] != 0 || sum.DoF != 4 || sum.Cov[0] != 0 || sum.Cov[1] != 0 {
		t.Errorf("the held parameter did not stay: %v", sum)
	}
	if !strings.Contains(sum.String(), "(held)") {
		t.Errorf("the text does not say what was held: %v", sum)
	}
	// A prior as sharp as the data's own knowledge of b at fixed a meets it half way.
	pr.Prior = []Prior{{Parameter: 1, Value: 3, U: 1 / math.Sqrt(55)}}
	if _, err := Solve(context.Background(), pr, []float64{0, 7}, Options{}); err == nil {
		t.Error("a prior without known σ was taken")
	}
	sum, err = Solve(context.Background(), pr, []float64{0, 7}, Options{SigmaKnown: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "b with prior", sum.P[1], (110.2/55+3)/2, 1e-9)
	near(t, "u_b with prior", sum.U[1], 1/math.Sqrt(110), 1e-9)
	pr.Hold = []bool{true, true}
	sum, err = Solve(context.Background(), pr, []float64{0, 2}, Options{SigmaKnown: true})
	if err != nil || !sum.Converged || sum.Rank != 0 {
		t.Errorf("with everything held: %v, %v", sum, err)
	}
}

// rosenbrock is the banana valley, least 0 at (1, 1).
func rosenbrock(p, r []float64) error {
	r[0], r[1] = 10*(p[1]-p[0]*p[0]), 1-p[0]
	return nil
}

func TestBounds(t *testing.T) {
	ctx := context.Background()
	inf := math.Inf(1)
	cases := []struct {
		name   string
		lo, hi []float64
		start  []float64
		want   []float64
		bound  []int
	}{
		{"free", nil, nil, []float64{-1.2, 1}, []float64{1, 1}, nil},
		{"bounds that do not matter", []float64{-5, -5}, []float64{5, 5}, []float64{-1.2, 1}, []float64{1, 1}, nil},
		// On p0 = 0.5 the first residual vanishes at p1 = 0.25.
		{"one upper bound", []float64{-inf, -inf}, []float64{0.5, inf}, []float64{-1.2, 1}, []float64{0.5, 0.25}, []int{0}},
		// On p1 = 1.5, 100(1.5 − p0²)² + (1 − p0)² is least where
		// 200·p0·(p0² − 1.5)·2 + 2(p0 − 1) = 0, near 1.2243710.
		{"lower bound on the other", []float64{-inf, 1.5}, []float64{inf, inf}, []float64{2, 2}, []float64{1.2243710, 1.5}, []int{1}},
		{"a corner", []float64{-2, 1.5}, []float64{0.5, 3}, []float64{0, 2}, []float64{0.5, 1.5}, []int{0, 1}},
		{"start outside", []float64{-2, -2}, []float64{0.5, 3}, []float64{9, 9}, []float64{0.5, 0.25}, []int{0}},
	}
	for _, c := range cases {
		sum, err := Solve(ctx, Problem{N: 2, M: 2, Residuals: rosenbrock, Lo: c.lo, Hi: c.hi}, c.start, Options{})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		near(t, c.name+" p0", sum.P[0], c.want[0], 1e-6)
		near(t, c.name+" p1", sum.P[1], c.want[1], 1e-6)
		if len(sum.AtBound) != len(c.bound) || !sum.Converged {
			t.Errorf("%s: on bounds %v, want %v; %v", c.name, sum.AtBound, c.bound, sum)
		}
	}
}

// A random convex problem with random bounds: the end must satisfy the
// conditions of Karush, Kuhn and Tucker.
func TestBoundsKKT(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 12))
	for trial := range 200 {
		n, m := 2+rng.IntN(5), 12
		a, y := make([]float64, n*m), make([]float64, m)
		for i := range a {
			a[i] = rng.NormFloat64()
		}
		for i := range y {
			y[i] = 3 * rng.NormFloat64()
		}
		lo, hi, start := make([]float64, n), make([]float64, n), make([]float64, n)
		for j := range n {
			lo[j] = -rng.Float64()
			hi[j] = lo[j] + rng.Float64()
			start[j] = lo[j] + rng.Float64()*(hi[j]-lo[j])
		}
		pr := Problem{N: n, M: m, Lo: lo, Hi: hi, Residuals: func(p, r []float64) error {
			for i := range m {
				r[i] = -y[i]
				for j := range n {
					r[i] += a[i*n+j] * (p[j] + 0.1*p[j]*p[j]*p[j])
				}
			}
			return nil
		}}
		sum, err := Solve(context.Background(), pr, start, Options{})
		if err != nil || !sum.Converged {
			t.Fatalf("trial %d: %v %v", trial, err, sum)
		}
		for j := range n {
			g := 0.0
			for i, r := range sum.Residuals {
				g += r * sum.Jacobian[i*n+j]
			}
			ok := math.Abs(g) < 1e-5 || sum.P[j] == lo[j] && g > 0 || sum.P[j] == hi[j] && g < 0
			if !ok || sum.P[j] < lo[j] || sum.P[j] > hi[j] {
				t.Errorf("trial %d: p%d = %v in %v … %v has gradient %v", trial, j, sum.P[j], lo[j], hi[j], g)
			}
		}
	}
}

// A product of two parameters is all that the data see: rank 1 short, both
// reported, the product with its right uncertainty.
func TestInseparableProduct(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	const m, sigma = 400, 0.01
	x, y := make([]float64, m), make([]float64, m)
	for i := range x {
		x[i] = float64(i) / m
		y[i] = 6*x[i] + 1 + sigma*rng.NormFloat64()
	}
	pr := Problem{N: 3, M: m, Names: []string{"bob", "base", "offset"}, Residuals: func(p, r []float64) error {
		for i := range x {
			r[i] = (p[0]*p[1]*x[i] + p[2] - y[i]) / sigma
		}
		return nil
	}}
	sum, err := Solve(context.Background(), pr, []float64{1, 4, 0}, Options{SigmaKnown: true})
	if err != nil {
		t.Fatal(err)
	}
	if sum.Rank != 2 || len(sum.Inseparable) != 1 || !math.IsInf(sum.U[0], 1) || !math.IsInf(sum.U[1], 1) || math.IsInf(sum.U[2], 1) {
		t.Fatalf("the product was not seen as one: %v", sum)
	}
	near(t, "product", sum.P[0]*sum.P[1], 6, 0.01)
	co := sum.Inseparable[0]
	if len(co.Kept) != 2 || math.Abs(co.Kept[0]-1) > 1e-3 || math.Abs(co.Kept[1]-1) > 1e-3 {
		t.Errorf("what is kept: %v, want the product (1, 1)", co.Kept)
	}
	// u of the slope of a line with m even x over one unit: σ/√(m·var x) = σ·√(12/m).
	near(t, "relative u of the product", co.UKept, sigma*math.Sqrt(12./m)/6, 1e-6)
	if !strings.Contains(co.Text, "bob and base cannot be told apart") && !strings.Contains(co.Text, "base and bob cannot be told apart") {
		t.Errorf("text: %q", co.Text)
	}
	// A prior on one of them separates.
	pr.Prior = []Prior{{Parameter: 0, Value: 2, U: 0.02}}
	sum, err = Solve(context.Background(), pr, []float64{1, 4, 0}, Options{SigmaKnown: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "base with the prior", sum.P[1], 3, 0.02)
	near(t, "u of base", sum.U[1], 0.03, 0.001)
	if sum.Rank != 3 || len(sum.Inseparable) != 0 {
		t.Errorf("still inseparable: %v", sum)
	}
}

func TestNoEffect(t *testing.T) {
	pr := line([]float64{1, 2, 3}, []float64{1, 2, 4})
	pr.N, pr.Names = 3, []string{"a", "b", "idle"}
	sum, err := Solve(context.Background(), pr, []float64{1, 1, 1}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if sum.Rank != 2 || len(sum.Inseparable) != 1 || !strings.Contains(sum.Inseparable[0].Text, "idle has no effect") || !math.IsInf(sum.U[2], 1) {
		t.Errorf("idle parameter: %v", sum)
	}
}

// Two columns that differ by 1 %: full rank, but hard to tell apart.
func TestWeak(t *testing.T) {
	const m = 200
	pr := Problem{N: 3, M: m, Names: []string{"viscous", "drag", "start"}, Residuals: func(p, r []float64) error {
		rng := rand.New(rand.NewPCG(7, 8))
		for i := range r {
			t := float64(i) / m
			r[i] = p[0]*(1+t) + p[1]*(1+t+0.02*math.Sin(9*t)) + p[2]*t*t - 3 + 0.01*rng.NormFloat64()
		}
		return nil
	}}
	sum, err := Solve(context.Background(), pr, []float64{1, 1, 1}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(sum.Weak) != 1 || sum.Rank != 3 || !strings.Contains(sum.Weak[0].Text, "hard to tell apart") {
		t.Fatalf("weak direction not told: %v", sum)
	}
	got := map[int]bool{}
	for _, j := range sum.Weak[0].Parameters {
		got[j] = true
	}
	if !got[0] || !got[1] || got[2] {
		t.Errorf("weak direction holds %v, want viscous and drag", sum.Weak[0].Parameters)
	}
}

// Places where the model does not exist: the search must turn back, from both
// NaN and errors, and find the least beside them.
func TestNoModelThere(t *testing.T) {
	wall := errors.New("the bob leaves the toy")
	for _, byError := range []bool{false, true} {
		pr := Problem{N: 1, M: 2, Residuals: func(p, r []float64) error {
			if p[0] > 1 && byError {
				return wall
			}
			r[0] = math.Sqrt(1-p[0]) - 0.01
			r[1] = 0.1 * (p[0] - 3)
			return nil
		}}
		sum, err := Solve(context.Background(), pr, []float64{-3}, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if sum.P[0] > 1 || sum.P[0] < 0.9 {
			t.Errorf("by error %v: %v", byError, sum)
		}
		if _, err := Solve(context.Background(), pr, []float64{2}, Options{}); err == nil || !strings.Contains(err.Error(), "at the start") {
			t.Errorf("by error %v: a start without a model gave %v", byError, err)
		}
	}
}

func TestBadInput(t *testing.T) {
	good := line([]float64{1, 2, 3}, []float64{1, 2, 3})
	start := []float64{0, 0}
	cases := []struct {
		want  string
		mend  func(p *Problem)
		start []float64
	}{
		{"needs parameters", func(p *Problem) { p.N = 0 }, start},
		{"residual function", func(p *Problem) { p.Residuals = nil }, start},
		{"the start has 1", func(*Problem) {}, []float64{1}},
		{"start of b is NaN", func(*Problem) {}, []float64{1, math.NaN()}},
		{"Lo has 1 entries", func(p *Problem) { p.Lo = []float64{1} }, start},
		{"bounds of a leave no room", func(p *Problem) { p.Lo, p.Hi = []float64{1, 1}, []float64{1, 2} }, start},
		{"cannot determine", func(p *Problem) { p.M = 1 }, start},
		{"prior on parameter 5", func(p *Problem) { p.Prior = []Prior{{5, 1, 1}} }, start},
		{"Jacobian of residual 0 by a is NaN", func(p *Problem) {
			p.Jacobian = func(_, j []float64) error { j[0] = math.NaN(); return nil }
		}, start},
	}
	for _, c := range cases {
		pr := good
		c.mend(&pr)
		_, err := Solve(context.Background(), pr, c.start, Options{SigmaKnown: true})
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("want an error with %q, got %v", c.want, err)
		}
	}
}

func TestContextEnds(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	calls := 0
	pr := Problem{N: 2, M: 2, Residuals: func(p, r []float64) error {
		if calls++; calls == 20 {
			cancel()
		}
		return rosenbrock(p, r)
	}}
	sum, err := Solve(ctx, pr, []float64{-1.2, 1}, Options{})
	if !errors.Is(err, context.Canceled) || sum == nil || sum.Converged || !strings.Contains(sum.Reason, "from outside") {
		t.Errorf("after cancel: %v, %v", sum, err)
	}
}

func TestWorkersAgree(t *testing.T) {
	dir := nistFolder(t)
	set := readNIST(t, dir+"/Thurber.dat")
	one := set.problem(false)
	fresh := func(p, r []float64) error { return set.problem(false).Residuals(p, r) }
	many := one
	many.Residuals = fresh // each call with its own room
	a, err := Solve(context.Background(), one, set.starts[1], Options{})
	if err != nil {
		t.Fatal(err)
	}
	b, err := Solve(context.Background(), many, set.starts[1], Options{Workers: 3})
	if err != nil {
		t.Fatal(err)
	}
	for j := range a.P {
		if a.P[j] != b.P[j] {
			t.Errorf("p%d: %v with one worker, %v with three", j, a.P[j], b.P[j])
		}
	}
}
