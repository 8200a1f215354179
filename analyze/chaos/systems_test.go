package chaos

import (
	"context"
	"math"
	"testing"

	"lodeswing/analyze/ode"
)

// The systems of the literature.

// logistic is x → r·x(1 − x).
func logistic(r float64) Map {
	return Map{
		N:       1,
		F:       func(x, out []float64) { out[0] = r * x[0] * (1 - x[0]) },
		Tangent: func(x, d, out []float64) { out[0] = r * (1 - 2*x[0]) * d[0] },
	}
}

// henon is (x, y) → (1 − 1.4x² + y, 0.3x) (M. Hénon, Communications in
// Mathematical Physics 50 (1976) 69).
var henon = Map{
	N:       2,
	F:       func(x, out []float64) { out[0], out[1] = 1-1.4*x[0]*x[0]+x[1], 0.3*x[0] },
	Tangent: func(x, d, out []float64) { out[0], out[1] = -2.8*x[0]*d[0]+d[1], 0.3*d[0] },
}

// lorenz is E. N. Lorenz's system (Journal of the Atmospheric Sciences 20 (1963)
// 130).
func lorenz(sigma, r, b float64) Flow {
	return Flow{
		N: 3,
		F: func(y, dy []float64) {
			dy[0], dy[1], dy[2] = sigma*(y[1]-y[0]), y[0]*(r-y[2])-y[1], y[0]*y[1]-b*y[2]
		},
		Tangent: func(y, d, out []float64) {
			out[0] = sigma * (d[1] - d[0])
			out[1] = (r-y[2])*d[0] - d[1] - y[0]*d[2]
			out[2] = y[1]*d[0] + y[0]*d[1] - b*d[2]
		},
	}
}

// rossler is O. E. Rössler's system (Physics Letters 57A (1976) 397).
func rossler(a, b, c float64) Flow {
	return Flow{
		N: 3,
		F: func(y, dy []float64) {
			dy[0], dy[1], dy[2] = -y[1]-y[2], y[0]+a*y[1], b+y[2]*(y[0]-c)
		},
		Tangent: func(y, d, out []float64) {
			out[0] = -d[1] - d[2]
			out[1] = d[0] + a*d[1]
			out[2] = y[2]*d[0] + (y[0]-c)*d[2]
		},
	}
}

// iterate returns n values of component k after a transient.
func iterate(f Map, start []float64, n, k int) []float64 {
	x, next := append([]float64(nil), start...), make([]float64, f.N)
	out := make([]float64, 0, n)
	for i := range n + 1000 {
		f.F(x, next)
		x, next = next, x
		if i >= 1000 {
			out = append(out, x[k])
		}
	}
	return out
}

// sample returns n values of component k at steps dt after a transient.
func sample(t testing.TB, f Flow, start []float64, n, k int, dt float64) []float64 {
	s := ode.New(f.N, func(_ float64, y, dy []float64) { f.F(y, dy) }, ode.Options{})
	s.Reset(0, start)
	out := make([]float64, 0, n)
	at := 0.0
	for i := range n + int(100/dt) {
		at = float64(i+1) * dt
		for s.Time() < at {
			if err := s.Step(at); err != nil {
				t.Fatal(err)
			}
		}
		if i >= int(100/dt) {
			out = append(out, s.State()[k])
		}
	}
	return out
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s is %.6g, want %.6g ± %.2g", what, got, want, tol)
	}
}

// Published exponents, in nats: A. Wolf et al., Physica D 16 (1985) 285, table 1
// (there in bits: Hénon 0.603, −2.34 per iteration; Lorenz 2.16, 0.00, −32.4 and
// Rössler 0.13, 0.00, −14.1 per second), and M. T. Rosenstein, J. J. Collins and C.
// J. De Luca, Physica D 65 (1993) 117 (logistic 0.693, Hénon 0.418, Lorenz 1.50,
// Rössler 0.090); J. C. Sprott, "Chaos and Time-Series Analysis", 2003, for the
// usual parameters (Lorenz 0.9056, 0, −14.5723; Rössler 0.0714, 0, −5.3943). The
// tolerance is one in the last digit printed.
func TestPublishedExponents(t *testing.T) {
	check := func(what string, e *Exponents, err error, want []float64, tol []float64) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: %v, Kaplan–Yorke dimension %.4f", what, e.L, e.KaplanYorke)
		for i, w := range want {
			near(t, what, e.L[i].V, w, tol[i]+2*e.L[i].U)
			if e.L[i].U > tol[i] {
				t.Errorf("%s: exponent %d is known to %v only, worse than its last printed digit %v", what, i+1, e.L[i].U, tol[i])
			}
		}
	}
	e, err := OfMap(logistic(4), []float64{0.3123}, Run{Transient: 100, Duration: 2e6})
	check("logistic map, r = 4", e, err, []float64{0.693}, []float64{0.001})
	e, err = OfMap(henon, []float64{0.1, 0.1}, Run{Count: 2, Transient: 100, Duration: 1e6})
	check("Hénon map", e, err, []float64{0.418, -1.622}, []float64{0.001, 0.005})
	near(t, "sum of Hénon's exponents", e.L[0].V+e.L[1].V, math.Log(0.3), 1e-9)
	ctx := context.Background()
	e, err = Variational(ctx, lorenz(16, 45.92, 4), []float64{1, 1, 40}, Run{Count: 3, Transient: 50, Duration: 6000})
	check("Lorenz (16, 45.92, 4)", e, err, []float64{1.50, 0, -22.46}, []float64{0.01, 0.01, 0.04})
	near(t, "sum of Lorenz's exponents", e.L[0].V+e.L[1].V+e.L[2].V, -21, 1e-5)
	e, err = Variational(ctx, lorenz(10, 28, 8./3), []float64{1, 1, 20}, Run{Count: 3, Transient: 50, Duration: 6000})
	check("Lorenz (10, 28, 8/3)", e, err, []float64{0.906, 0, -14.57}, []float64{0.005, 0.005, 0.01})
	near(t, "Kaplan–Yorke dimension of Lorenz", e.KaplanYorke, 2.062, 0.001) // Sprott 2003
	e, err = Variational(ctx, rossler(0.15, 0.2, 10), []float64{1, 1, 1}, Run{Count: 3, Transient: 200, Duration: 30000, Every: 2})
	check("Rössler (0.15, 0.2, 10)", e, err, []float64{0.090, 0, -9.77}, []float64{0.001, 0.001, 0.035})
	// The sum of the three is the divergence of the flow, a + x − c, averaged along
	// the motion.
	mean, _ := meanSD(sample(t, rossler(0.15, 0.2, 10), []float64{1, 1, 1}, 200000, 0, 0.1))
	near(t, "sum of Rössler's exponents", e.L[0].V+e.L[1].V+e.L[2].V, 0.15+mean-10, 0.03)
	e, err = Variational(ctx, rossler(0.2, 0.2, 5.7), []float64{1, 1, 1}, Run{Count: 3, Transient: 200, Duration: 30000, Every: 2})
	check("Rössler (0.2, 0.2, 5.7)", e, err, []float64{0.0714, 0, -5.394}, []float64{0.001, 0.001, 0.01})
}
