package board

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"

	"lodeswing/track"
)

func sortBy[T any](s []T, less func(a, b T) bool) {
	sort.SliceStable(s, func(i, j int) bool { return less(s[i], s[j]) })
}

// crossing is one crossing of four squares as it was fitted:
// brightness = mean + swing·E(d₁/blur)·E(d₂/blur) + shade·(x, y), with dᵢ the
// signed distance from edge i and E(t) = erf(t/√2).
type crossing struct {
	u, v    float64
	angle   [2]float64 // of the two edges, rad, v down
	mean    float64
	swing   float64 // > 0: the quarter with d₁, d₂ > 0 is the lighter one
	blur    float64 // px
	shade   [2]float64
	cov     track.Cov // px²
	scatter float64   // r.m.s. of the residuals, grey levels
}

// dir is the unit vector along edge k.
func (c *crossing) dir(k int) [2]float64 {
	s, co := math.Sincos(c.angle[k])
	return [2]float64{co, s}
}

// startCrossing reads the two edges from a circle around a rough place; ok is
// false where the circle is not cut into four.
func startCrossing(g *grey, u, v, radius float64) (c crossing, ok bool) {
	const n = 64
	var s [n]float64
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := range n {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / n)
		s[i] = g.at(u+radius*cos, v+radius*sin)
		lo, hi = math.Min(lo, s[i]), math.Max(hi, s[i])
	}
	mid := (lo + hi) / 2
	var cuts []float64
	for i := range n {
		a, b := s[i]-mid, s[(i+1)%n]-mid
		if (a < 0) != (b < 0) {
			cuts = append(cuts, 2*math.Pi*(float64(i)+a/(a-b))/n)
		}
	}
	if len(cuts) != 4 {
		return c, false
	}
	c = crossing{u: u, v: v, mean: mid, swing: (hi - lo) / 2, blur: 1}
	for k := range 2 {
		// Opposite cuts belong to one edge; the place may be off, so they need not be quite opposite.
		d := math.Remainder(cuts[k+2]-math.Pi-cuts[k], 2*math.Pi)
		if math.Abs(d) > 0.8 {
			return c, false
		}
		c.angle[k] = cuts[k] + d/2
	}
	// Between cut 0 and cut 1, d₁ > 0 and d₂ < 0.
	if m := (cuts[0] + cuts[1]) / 2; g.at(u+radius*math.Cos(m), v+radius*math.Sin(m)) > mid {
		c.swing = -c.swing
	}
	return c, true
}

// fit refines the crossing on the pixels within radius, by Gauss–Newton with a
// damped step. ok is false where the picture there is no crossing. The
// covariance is that of the fit, with the residuals' own scatter, widened where
// neighbouring residuals agree (compressed pictures do not have white noise).
func (c *crossing) fit(g *grey, radius float64) (ok bool) {
	const np = 9
	u0, v0 := c.u, c.v
	ui, vi, ri := int(math.Round(c.u)), int(math.Round(c.v)), int(math.Ceil(radius))
	if ui-ri < 1 || vi-ri < 1 || ui+ri > g.w-2 || vi+ri > g.h-2 {
		return false
	}
	p := [np]float64{c.u, c.v, c.angle[0], c.angle[1], c.mean, c.swing, c.blur, c.shade[0], c.shade[1]}
	side := 2*ri + 1
	res := make([]float64, side*side)
	in := make([]bool, side*side)
	n := 0
	for j := range side {
		for i := range side {
			if dx, dy := float64(i-ri), float64(j-ri); dx*dx+dy*dy <= radius*radius {
				in[j*side+i] = true
				n++
			}
		}
	}
	var ata [np * np]float64
	var atb [np]float64
	eval := func(p [np]float64, fill bool) float64 {
		if fill {
			ata, atb = [np * np]float64{}, [np]float64{}
		}
		s1, c1 := math.Sincos(p[2])
		s2, c2 := math.Sincos(p[3])
		var cost float64
		for j := range side {
			for i := range side {
				if !in[j*side+i] {
					continue
				}
				x, y := float64(ui-ri+i), float64(vi-ri+j)
				dx, dy := x-p[0], y-p[1]
				d1, d2 := c1*dy-s1*dx, c2*dy-s2*dx
				e1, g1 := edge(d1 / p[6])
				e2, g2 := edge(d2 / p[6])
				sx, sy := x-u0, y-v0
				r := float64(g.p[int(y)*g.w+int(x)]) - (p[4] + p[5]*e1*e2 + p[7]*sx + p[8]*sy)
				res[j*side+i] = r
				cost += r * r
				if !fill {
					continue
				}
				a1, a2 := p[5]*g1*e2/p[6], p[5]*g2*e1/p[6] // ∂I/∂d₁, ∂I/∂d₂
				row := [np]float64{
					a1*s1 + a2*s2, -(a1*c1 + a2*c2),
					-a1 * (c1*dx + s1*dy), -a2 * (c2*dx + s2*dy),
					1, e1 * e2, -(a1*d1 + a2*d2) / p[6], sx, sy,
				}
				for a := range np {
					atb[a] += row[a] * r
					for b := a; b < np; b++ {
						ata[a*np+b] += row[a] * row[b]
					}
				}
			}
		}
		return cost
	}
	cost := eval(p, true)
	damp := 1e-3
	settled := false
	for range 40 {
		step, good := solveDamped(ata[:], atb[:], damp)
		if !good {
			return false
		}
		q := p
		for k := range np {
			q[k] += step[k]
		}
		q[6] = math.Min(math.Max(math.Abs(q[6]), 0.25), radius/2)
		if math.Hypot(q[0]-u0, q[1]-v0) > radius/2 {
			return false
		}
		if next := eval(q, false); next <= cost {
			small := math.Hypot(q[0]-p[0], q[1]-p[1]) < 1e-5 && cost-next <= 1e-7*cost
			p, cost, damp = q, next, damp/10
			eval(p, true)
			if small {
				settled = true
				break
			}
		} else if damp *= 10; damp > 1e6 {
			settled = true // no step is better: a minimum to rounding
			eval(p, true)
			break
		}
	}
	c.u, c.v, c.angle = p[0], p[1], [2]float64{p[2], p[3]}
	c.mean, c.swing, c.blur, c.shade = p[4], p[5], p[6], [2]float64{p[7], p[8]}
	variance := cost / float64(max(1, n-np))
	c.scatter = math.Sqrt(variance)
	if !settled || c.scatter > 0.35*math.Abs(c.swing) || math.Abs(math.Sin(p[2]-p[3])) < 0.2 {
		return false
	}
	var chol mat.Cholesky
	sym := mat.NewSymDense(np, ata[:])
	if !chol.Factorize(sym) {
		return false
	}
	var inv mat.SymDense
	if err := chol.InverseTo(&inv); err != nil {
		return false
	}
	f := variance * agreement(res, in, side)
	c.cov = track.Cov{AA: f * inv.At(0, 0), AB: f * inv.At(0, 1), BB: f * inv.At(1, 1)}
	// Edges that lens or perspective bend shift the fit by some thousandths of a pixel.
	const floor = 0.004
	c.cov.AA += floor * floor
	c.cov.BB += floor * floor
	return true
}

// edge returns E(t) = erf(t/√2) and its derivative by t.
func edge(t float64) (e, slope float64) {
	return math.Erf(t / math.Sqrt2), math.Sqrt(2/math.Pi) * math.Exp(-t*t/2)
}

// solveDamped solves (A + damp·diag A) x = b for the upper triangle of A.
func solveDamped(a, b []float64, damp float64) ([]float64, bool) {
	n := len(b)
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, a[i*n+j])
		}
		s.SetSym(i, i, a[i*n+i]*(1+damp)+1e-12)
	}
	var chol mat.Cholesky
	if !chol.Factorize(s) {
		return nil, false
	}
	var x mat.VecDense
	if err := chol.SolveVecTo(&x, mat.NewVecDense(n, b)); err != nil {
		return nil, false
	}
	return x.RawVector().Data, true
}

// agreement is the factor by which neighbouring residuals that agree widen a
// variance: (1+ρ)/(1−ρ) of a first-order process, once along each axis.
func agreement(res []float64, in []bool, side int) float64 {
	f := 1.0
	for _, step := range []int{1, side} {
		var num, den float64
		for k := 0; k+step < len(res); k++ {
			if in[k] && in[k+step] {
				num += res[k] * res[k+step]
				den += (res[k]*res[k] + res[k+step]*res[k+step]) / 2
			}
		}
		if den > 0 {
			rho := math.Min(math.Max(num/den, 0), 0.8)
			f *= (1 + rho) / (1 - rho)
		}
	}
	return f
}
