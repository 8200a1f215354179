package magnet

import "math"

// cel is Bulirsch's general complete elliptic integral,
// ∫₀^{π/2} (a cos²φ + b sin²φ) / ((cos²φ + p sin²φ) √(cos²φ + kc² sin²φ)) dφ,
// R. Bulirsch, Numer. Math. 13 (1969) 305, in the form of N. Derby and S.
// Olbert, Am. J. Phys. 78 (2010) 229, appendix. kc must not be 0.
func cel(kc, p, a, b float64) float64 {
	const tolerance = 1e-8 // converges quadratically: the result is good to double precision
	k := math.Abs(kc)
	em := 1.0
	if p > 0 {
		p = math.Sqrt(p)
		b /= p
	} else {
		f := kc * kc
		q := 1 - f
		g := 1 - p
		f -= p
		q *= b - a*p
		p = math.Sqrt(f / g)
		a = (a - b) / g
		b = -q/(g*g*p) + a*p
	}
	f := a
	a += b / p
	g := k / p
	b += f * g
	b += b
	p += g
	g = em
	em += k
	for kk := k; math.Abs(g-k) > g*tolerance; {
		k = 2 * math.Sqrt(kk)
		kk = k * em
		f = a
		a += b / p
		g = kk / p
		b += f * g
		b += b
		p += g
		g = em
		em += k
	}
	return math.Pi / 2 * (b + a*em) / (em * (em + p))
}

// ellipticK and ellipticE are the complete integrals of the first and second
// kind for the complementary modulus kc = √(1 − k²).
func ellipticK(kc float64) float64 { return cel(kc, 1, 1, 1) }

func ellipticE(kc float64) float64 {
	if kc == 0 {
		return 1
	}
	return cel(kc, 1, 1, kc*kc)
}
