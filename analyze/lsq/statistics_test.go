package lsq

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
)

// decaying is a decaying sinusoid with five parameters: amplitude, decay rate,
// frequency, phase, offset; and its Jacobian.
func decaying(p []float64, t float64) float64 {
	return p[0]*math.Exp(-p[1]*t)*math.Cos(p[2]*t+p[3]) + p[4]
}

func decayProblem(t, y []float64, sigma float64) Problem {
	return Problem{
		N: 5, M: len(t),
		Residuals: func(p, r []float64) error {
			for i := range t {
				r[i] = (decaying(p, t[i]) - y[i]) / sigma
			}
			return nil
		},
		Jacobian: func(p, j []float64) error {
			for i := range t {
				e := math.Exp(-p[1]*t[i]) / sigma
				s, c := math.Sincos(p[2]*t[i] + p[3])
				row := j[i*5 : i*5+5]
				row[0], row[1], row[2], row[3], row[4] = e*c, -p[0]*t[i]*e*c, -p[0]*t[i]*e*s, -p[0]*e*s, 1/sigma
			}
			return nil
		},
	}
}

var decayTruth = []float64{0.7, 0.05, 5.9, 0.3, 0.01}

// Intervals of ± 1.96 u must hold the truth 95 times in 100: over 400 fits with
// 5 parameters the count scatters by 0.5 %, so 93.5 … 96.5 % is three of that.
func TestCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(21, 22))
	const fits, m, sigma = 400, 300, 0.02
	for _, known := range []bool{true, false} {
		held := 0
		for range fits {
			x, y := make([]float64, m), make([]float64, m)
			for i := range x {
				x[i] = 20 * float64(i) / m
				y[i] = decaying(decayTruth, x[i]) + sigma*rng.NormFloat64()
			}
			s := 1.0
			if known {
				s = sigma
			}
			sum, err := Solve(context.Background(), decayProblem(x, y, s), decayTruth, Options{SigmaKnown: known})
			if err != nil || !sum.Converged {
				t.Fatal(err, sum)
			}
			for j, want := range decayTruth {
				if math.Abs(sum.P[j]-want) < 1.96*sum.U[j] {
					held++
				}
			}
		}
		share := 100 * float64(held) / (5 * fits)
		t.Logf("σ known %v: intervals hold the truth in %.1f %%", known, share)
		if share < 93.5 || share > 96.5 {
			t.Errorf("σ known %v: intervals hold the truth in %.1f %%, want 95", known, share)
		}
	}
}

// With a tenth of the samples thrown off, a robust loss stays near the truth,
// tells which samples it let go, and its intervals still hold.
func TestRobust(t *testing.T) {
	const fits, m, sigma = 100, 300, 0.02
	for _, kind := range []LossKind{Huber, SoftL1, Cauchy, Tukey} {
		rng := rand.New(rand.NewPCG(31, 32))
		held, square, plain := 0, 0.0, 0.0
		for range fits {
			x, y := make([]float64, m), make([]float64, m)
			off := make([]bool, m)
			for i := range x {
				x[i] = 20 * float64(i) / m
				y[i] = decaying(decayTruth, x[i]) + sigma*rng.NormFloat64()
				if rng.Float64() < 0.1 {
					off[i] = true
					y[i] += 0.3 + 0.5*rng.Float64()
				}
			}
			sum, err := Solve(context.Background(), decayProblem(x, y, 1), decayTruth, Options{Loss: Loss{Kind: kind}})
			if err != nil || !sum.Converged {
				t.Fatal(kind, err, sum)
			}
			ls, err := Solve(context.Background(), decayProblem(x, y, 1), decayTruth, Options{})
			if err != nil {
				t.Fatal(err)
			}
			for j, want := range decayTruth[:4] { // the offset is biased by one-sided outliers
				if math.Abs(sum.P[j]-want) < 1.96*sum.U[j] {
					held++
				}
			}
			square += sq(sum.P[2] - decayTruth[2])
			plain += sq(ls.P[2] - decayTruth[2])
			for i, w := range sum.Weights {
				if off[i] && w > 0.4 {
					t.Errorf("loss %d: sample %d is off by %.2g and keeps weight %.2f", kind, i, sum.Residuals[i], w)
				}
			}
			if sum.LossScale < 0.8*sigma || sum.LossScale > 1.5*sigma {
				t.Errorf("loss %d: scale %v, noise %v", kind, sum.LossScale, sigma)
			}
		}
		share := 100 * float64(held) / (4 * fits)
		t.Logf("loss %d: frequency error %.2f × that of plain squares, intervals hold in %.1f %%", kind, math.Sqrt(square/plain), share)
		if square > 0.2*plain {
			t.Errorf("loss %d: frequency error is %.2f × that of plain squares", kind, math.Sqrt(square/plain))
		}
		if share < 91 || share > 99 {
			t.Errorf("loss %d: intervals hold in %.1f %%", kind, share)
		}
	}
}

// A loss of a scale too large to bite gives plain least squares.
func TestRobustLimit(t *testing.T) {
	x, y := []float64{1, 2, 3, 4, 5}, []float64{2.1, 3.9, 6.2, 7.8, 10.1}
	want, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, kind := range []LossKind{Huber, SoftL1, Cauchy, Tukey} {
		got, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{Loss: Loss{Kind: kind, Scale: 1e5}})
		if err != nil {
			t.Fatal(err)
		}
		for j := range want.P {
			near(t, "parameter", got.P[j], want.P[j], 1e-8)
			near(t, "uncertainty", got.U[j], want.U[j], 1e-8)
		}
	}
}

// ρ and ψ' by differences of one another.
func TestLossSlopes(t *testing.T) {
	for _, kind := range []LossKind{Squares, Huber, SoftL1, Cauchy, Tukey} {
		l := Loss{Kind: kind}
		for _, r := range []float64{0.1, 0.5, 0.9, 1.5, 3} {
			const h = 1e-6
			rho := func(r float64) float64 { v, _ := l.rho(r * r); return v }
			psi := func(r float64) float64 { _, s := l.rho(r * r); return s * r }
			near(t, "ψ", psi(r), (rho(r+h)-rho(r-h))/(4*h), 1e-8)
			near(t, "ψ'", l.psiSlope(r*r), (psi(r+h)-psi(r-h))/(2*h), 1e-8)
		}
	}
}

// Noise with a memory of ten samples: the plain covariance claims far too much,
// the one for correlated residuals holds its promise.
func TestCorrelated(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 42))
	const fits, m, sigma, phi = 300, 600, 0.02, 0.9
	plain, hac := 0, 0
	for range fits {
		x, y := make([]float64, m), make([]float64, m)
		e := sigma * rng.NormFloat64()
		for i := range x {
			e = phi*e + sigma*math.Sqrt(1-phi*phi)*rng.NormFloat64()
			x[i] = float64(i) / m
			y[i] = 1 + 2*x[i] + e
		}
		sum, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{})
		if err != nil {
			t.Fatal(err)
		}
		cov, _ := sum.CovarianceCorrelated(nil, -1)
		for j, want := range []float64{1, 2} {
			d := math.Abs(sum.P[j] - want)
			if d < 1.96*sum.U[j] {
				plain++
			}
			if d < 1.96*math.Sqrt(cov[j*2+j]) {
				hac++
			}
		}
	}
	sharePlain, shareHAC := 100*float64(plain)/(2*fits), 100*float64(hac)/(2*fits)
	t.Logf("noise with memory: plain intervals hold in %.1f %%, those for correlated residuals in %.1f %%", sharePlain, shareHAC)
	if sharePlain > 60 || shareHAC < 87 || shareHAC > 98 {
		t.Errorf("plain %.1f %%, correlated %.1f %%", sharePlain, shareHAC)
	}
}

// White noise, two residuals per moment: both covariances agree.
func TestCorrelatedWhite(t *testing.T) {
	rng := rand.New(rand.NewPCG(43, 44))
	const m = 20000
	x, y, moment := make([]float64, m), make([]float64, m), make([]int, m)
	for i := range x {
		x[i] = float64(i) / m
		y[i] = 1 + 2*x[i] + 0.1*rng.NormFloat64()
		moment[i] = i / 2
	}
	sum, err := Solve(context.Background(), line(x, y), []float64{0, 0}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, lags := range []int{0, -1} {
		cov, used := sum.CovarianceCorrelated(moment, lags)
		for j := range 2 {
			if got := math.Sqrt(cov[j*2+j]) / sum.U[j]; math.Abs(got-1) > 0.05 {
				t.Errorf("reach %d (used %d): uncertainty of p%d is %.3f × the plain one", lags, used, j, got)
			}
		}
	}
}

func BenchmarkDecay5000x5(b *testing.B) { benchmarkDecay(b, true) }

func BenchmarkDecay5000x5Differences(b *testing.B) { benchmarkDecay(b, false) }

func benchmarkDecay(b *testing.B, exact bool) {
	rng := rand.New(rand.NewPCG(51, 52))
	const m = 5000
	x, y := make([]float64, m), make([]float64, m)
	for i := range x {
		x[i] = 20 * float64(i) / m
		y[i] = decaying(decayTruth, x[i]) + 0.02*rng.NormFloat64()
	}
	pr := decayProblem(x, y, 1)
	if !exact {
		pr.Jacobian = nil
	}
	b.ReportAllocs()
	for b.Loop() {
		sum, err := Solve(context.Background(), pr, []float64{0.6, 0.04, 5.95, 0.2, 0}, Options{})
		if err != nil || !sum.Converged {
			b.Fatal(err, sum)
		}
	}
}

// BenchmarkLinear5000x8 is the solver's own cost: the residuals cost nothing.
func BenchmarkLinear5000x8(b *testing.B) {
	const m, n = 5000, 8
	rng := rand.New(rand.NewPCG(53, 54))
	a := make([]float64, m*n)
	for i := range a {
		a[i] = rng.NormFloat64()
	}
	pr := Problem{
		N: n, M: m,
		Residuals: func(p, r []float64) error {
			for i := range r {
				r[i] = -1
				for j, v := range p {
					r[i] += a[i*n+j] * v
				}
			}
			return nil
		},
		Jacobian: func(_, j []float64) error { copy(j, a); return nil },
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Solve(context.Background(), pr, make([]float64, n), Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
