package lsq

import (
	"math"
	"slices"
)

// LossKind names a robust loss.
type LossKind int

// The losses, with s the square of a residual in units of C·σ. Huber: P. J.
// Huber, "Robust Statistics", 1981; Cauchy and Tukey's biweight with the
// tuning constants for 95 % efficiency on normal residuals: P. W. Holland and
// R. E. Welsch, Communications in Statistics A6 (1977) 813.
const (
	Squares LossKind = iota // ρ = s
	Huber                   // s below 1, 2√s − 1 above; C = 1.345
	SoftL1                  // 2(√(1+s) − 1); C = 1.345
	Cauchy                  // ln(1+s); C = 2.385
	Tukey                   // (1 − (1−s)³)/3 below 1, 1/3 above; C = 4.685
)

// Loss is a robust loss: ρ as its Kind says, applied to residuals over C·Scale.
type Loss struct {
	Kind LossKind
	C    float64 // 0: the constant beside the kind
	// Scale is the residual that counts as one σ. 0: 1 with SigmaKnown; otherwise
	// it is found from the residuals themselves (median absolute deviation /
	// 0.6745), again after each fit until it stays.
	Scale float64
}

func (l Loss) tuning() float64 {
	if l.C > 0 {
		return l.C
	}
	switch l.Kind {
	case Huber, SoftL1:
		return 1.345
	case Cauchy:
		return 2.385
	case Tukey:
		return 4.685
	}
	return 1
}

// rho returns ρ(s) and ρ'(s) with ρ(s) ≈ s near 0.
func (l Loss) rho(s float64) (rho, slope float64) {
	switch l.Kind {
	case Huber:
		if s <= 1 {
			return s, 1
		}
		q := math.Sqrt(s)
		return 2*q - 1, 1 / q
	case SoftL1:
		q := math.Sqrt(1 + s)
		return 2 * (q - 1), 1 / q
	case Cauchy:
		return math.Log1p(s), 1 / (1 + s)
	case Tukey:
		if s >= 1 {
			return 1. / 3, 0
		}
		d := 1 - s
		return (1 - d*d*d) / 3, d * d
	}
	return s, 1
}

// psiSlope is d(ψ)/dr for ψ(r) = ρ'(s)·r, with s = r² in units of C·σ.
func (l Loss) psiSlope(s float64) float64 {
	switch l.Kind {
	case Huber:
		if s <= 1 {
			return 1
		}
		return 0
	case SoftL1:
		return math.Pow(1+s, -1.5)
	case Cauchy:
		return (1 - s) / ((1 + s) * (1 + s))
	case Tukey:
		if s >= 1 {
			return 0
		}
		return (1 - s) * (1 - 5*s)
	}
	return 1
}

// cost returns Σ over r of k²ρ(r²/k²).
func (l Loss) cost(r []float64, k float64) float64 {
	var sum float64
	if l.Kind == Squares {
		for _, x := range r {
			sum += x * x
		}
		return sum
	}
	for _, x := range r {
		x /= k
		rho, _ := l.rho(x * x)
		sum += rho
	}
	return sum * k * k
}

// medianAbs returns the median of |r|, with buf of r's length as workspace.
func medianAbs(r, buf []float64) float64 {
	if len(r) == 0 {
		return 0
	}
	for i, x := range r {
		buf[i] = math.Abs(x)
	}
	slices.Sort(buf)
	n := len(buf)
	if n%2 == 1 {
		return buf[n/2]
	}
	return (buf[n/2-1] + buf[n/2]) / 2
}
