package lsq

import "math"

// box solves the trust-region subproblem within bounds on the factored
// Jacobian: the step s that makes |R·s + q|² least with |D·s| ≤ radius and
// lo ≤ s ≤ hi. Parameters that hit a bound are put on it one set after the
// other; the result is never worse than the projected gradient step.
type box struct {
	n          int
	tri, q, d  []float64
	lo, hi     []float64 // on the step
	grad       []float64
	s, cauchy  []float64
	rhs, c, y  []float64
	active     []int // columns still free to move
	full       bool  // svd holds all columns
	svd        *svd
	anyBlocked bool
	bounded    bool    // the last step met a bound
	lambda     float64 // damping of the last solve
	undamped   float64 // scaled length of the step without damping
	blocked    []bool
}

func newBox(n int) *box {
	f := func() []float64 { return make([]float64, n) }
	return &box{
		n: n, lo: f(), hi: f(), s: f(), cauchy: f(), rhs: f(), c: f(), y: f(), q: f(),
		active: make([]int, 0, n), svd: newSVD(n, n), blocked: make([]bool, n),
	}
}

// load takes the factored Jacobian of a search.
func (b *box) load(s *search) {
	b.tri, b.d, b.grad, b.full, b.anyBlocked = s.tri, s.d, s.grad, false, false
	copy(b.q, s.q[:min(s.n, s.m)])
	for c, j := range s.free {
		b.lo[c], b.hi[c] = s.pr.Lo[j]-s.p[j], s.pr.Hi[j]-s.p[j]
		b.blocked[c] = s.blocked(c, j)
		b.anyBlocked = b.anyBlocked || b.blocked[c]
	}
}

// step returns the step and by how much it is foreseen to lower the cost.
func (b *box) step(radius float64) (step []float64, foreseen float64) {
	n := b.n
	clear(b.s)
	copy(b.rhs, b.q)
	b.active = b.active[:0]
	for c := range n {
		if !b.blocked[c] {
			b.active = append(b.active, c)
		}
	}
	left := radius * radius // what of the radius the parameters put on bounds leave
	b.bounded = b.anyBlocked
	for len(b.active) > 0 && left > 0 {
		b.solve(math.Sqrt(left))
		hit := false
		keep := b.active[:0]
		for _, c := range b.active {
			at := b.s[c]
			switch {
			case at < b.lo[c]:
				at = b.lo[c]
			case at > b.hi[c]:
				at = b.hi[c]
			default:
				keep = append(keep, c)
				continue
			}
			hit = true
			b.s[c] = at
			left -= sq(b.d[c] * at)
			for i := 0; i <= c; i++ {
				b.rhs[i] += b.tri[i*n+c] * at
			}
		}
		b.active = keep
		if !hit {
			break
		}
		b.bounded, b.full = true, false
		if left <= 0 {
			for _, c := range b.active {
				b.s[c] = 0
			}
		}
	}
	foreseen = b.gain(b.s)
	if b.bounded {
		if g := b.gradientStep(radius); g > 10*foreseen || !(foreseen > 0) {
			return b.cauchy, g
		}
	}
	return b.s, foreseen
}

func sq(x float64) float64 { return x * x }

// solve sets s over the active columns to the trust-region step for rhs.
func (b *box) solve(radius float64) {
	n, k, d := b.n, len(b.active), b.svd
	if !b.full {
		for a, c := range b.active {
			for i := range n {
				d.us[a*n+i] = b.tri[i*n+c] / b.d[c]
			}
		}
		d.factor(n, k)
		b.full = k == n
	}
	// c = σ·(Uᵀrhs), s̃(λ) = −V·c/(σ²+λ).
	top := d.s[d.perm[0]]
	tiny := top * 1e-15 * float64(n)
	for a := range k {
		dot := 0.0
		for i := range n {
			dot += d.us[a*n+i] * b.rhs[i]
		}
		b.c[a] = dot
	}
	norm := func(lambda float64) (len, slope float64) {
		for a := range k {
			if d.s[a] <= tiny {
				continue
			}
			e := sq(d.s[a]) + lambda
			y := b.c[a] / e
			len += y * y
			slope += y * y / e
		}
		return math.Sqrt(len), slope
	}
	lambda := 0.0
	length, slope := norm(0)
	b.undamped = length
	// Newton on 1/|s| − 1/radius, which rises to its root from the left.
	for it := 0; it < 50 && length > 1.1*radius && slope > 0; it++ {
		lambda += length * length / slope * (length - radius) / radius
		length, slope = norm(lambda)
	}
	b.lambda = lambda
	for a := range k {
		b.y[a] = 0
		if d.s[a] > tiny {
			b.y[a] = -b.c[a] / (sq(d.s[a]) + lambda)
		}
	}
	for i, c := range b.active {
		sum := 0.0
		for a := range k {
			sum += d.v[a*k+i] * b.y[a]
		}
		b.s[c] = sum / b.d[c]
	}
}

// answer replaces g, a vector Jᵀ·x over all columns, by the damped least-squares
// answer −(JᵀJ + λD²)⁻¹·g with the damping of the last step. It needs a last
// step that met no bound.
func (b *box) answer(g []float64) {
	n, d := b.n, b.svd
	tiny := d.s[d.perm[0]] * 1e-15 * float64(n)
	for a := range n {
		b.y[a] = 0
		if d.s[a] <= tiny {
			continue
		}
		for i := range n {
			b.y[a] -= d.v[a*n+i] * g[i] / b.d[i]
		}
		b.y[a] /= sq(d.s[a]) + b.lambda
	}
	for i := range n {
		sum := 0.0
		for a := range n {
			sum += d.v[a*n+i] * b.y[a]
		}
		g[i] = sum / b.d[i]
	}
}

// gain is by how much a step lowers |R·s + q|².
func (b *box) gain(s []float64) float64 {
	n, g := b.n, 0.0
	for i := range n {
		rs := 0.0
		for c := i; c < n; c++ {
			rs += b.tri[i*n+c] * s[c]
		}
		g -= rs * (rs + 2*b.q[i])
	}
	return g
}

// gradientStep sets cauchy to the best projected step along the scaled gradient
// that is tried, and returns its gain.
func (b *box) gradientStep(radius float64) float64 {
	n := b.n
	norm := 0.0
	for c := range n {
		if !b.blocked[c] {
			norm = math.Hypot(norm, b.grad[c]/b.d[c])
		}
	}
	if norm == 0 {
		clear(b.cauchy)
		return 0
	}
	for t := radius / norm; t > 1e-12*radius/norm; t *= 0.3 {
		for c := range n {
			b.cauchy[c] = 0
			if !b.blocked[c] {
				b.cauchy[c] = min(max(-t*b.grad[c]/sq(b.d[c]), b.lo[c]), b.hi[c])
			}
		}
		slope := 0.0
		for c := range n {
			slope -= b.grad[c] * b.cauchy[c]
		}
		if g := b.gain(b.cauchy); g > 0.1*slope && g > 0 {
			return g
		}
	}
	clear(b.cauchy)
	return 0
}
