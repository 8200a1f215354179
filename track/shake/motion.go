package shake

import (
	"math"
	"sort"
)

// shift is one patch's measured move: its place from the picture's centre, and
// how far it went, in pixels.
type shift struct {
	x, y   float64
	du, dv float64
	u      float64 // standard uncertainty per axis
}

// similarity moves a point (x, y) by (a + z·x − r·y, b + r·x + z·y): a shift, a
// small zoom z and a small clockwise turn r.
type similarity struct{ a, b, z, r float64 }

func (s similarity) at(x, y float64) (du, dv float64) {
	return s.a + s.z*x - s.r*y, s.b + s.r*x + s.z*y
}

// fitted is a similarity with its uncertainties and which shifts it is from.
type fitted struct {
	similarity
	u, uz  float64 // standard uncertainty of a and b, and of z and r
	used   int
	spread float64 // r.m.s. of the used shifts about the fit, per axis, weighted
	in     []bool
}

// fit finds the motion that the largest part of the shifts agrees on: least
// median of squares over pairs, then least squares over those that fit
// (Rousseeuw & Leroy 1987). ok is false where fewer than three, or fewer than
// half of them, agree.
func fit(shifts []shift) (best fitted, ok bool) {
	n := len(shifts)
	if n < 3 {
		return fitted{}, false
	}
	start, good := leastSquares(shifts, nil)
	score := math.Inf(1)
	if good {
		score = medianMiss(shifts, start.similarity)
	}
	// Pairs are taken in a fixed order, so that a run can be repeated.
	tries, seed := 0, uint32(1)
	for tries < 150 && n > 3 && score > 0.02*0.02 {
		seed = seed*1664525 + 1013904223
		i := int(seed>>8) % n
		seed = seed*1664525 + 1013904223
		j := int(seed>>8) % n
		tries++
		if i == j {
			continue
		}
		if s, ok := throughPair(shifts[i], shifts[j]); ok {
			if m := medianMiss(shifts, s); m < score {
				start.similarity, score, good = s, m, true
			}
		}
	}
	if !good {
		return fitted{}, false
	}
	best = start
	for range 3 {
		limit := math.Max(2.5*1.4826*math.Sqrt(score), 0.1)
		in := make([]bool, n)
		used := 0
		for i, s := range shifts {
			u, v := best.at(s.x, s.y)
			in[i] = math.Hypot(u-s.du, v-s.dv) <= math.Max(limit, 4*s.u)
			if in[i] {
				used++
			}
		}
		if used < 3 || 2*used < n {
			return fitted{}, false
		}
		next, ok := leastSquares(shifts, in)
		if !ok {
			return fitted{}, false
		}
		best = next
		score = medianMiss(shifts, best.similarity)
	}
	return best, true
}

// throughPair is the similarity that moves both points exactly.
func throughPair(p, q shift) (similarity, bool) {
	x, y := q.x-p.x, q.y-p.y
	d := x*x + y*y
	if d < 40*40 {
		return similarity{}, false
	}
	du, dv := q.du-p.du, q.dv-p.dv
	s := similarity{z: (x*du + y*dv) / d, r: (x*dv - y*du) / d}
	s.a = p.du - s.z*p.x + s.r*p.y
	s.b = p.dv - s.r*p.x - s.z*p.y
	return s, true
}

func medianMiss(shifts []shift, s similarity) float64 {
	miss := make([]float64, len(shifts))
	for i, p := range shifts {
		u, v := s.at(p.x, p.y)
		miss[i] = (u-p.du)*(u-p.du) + (v-p.dv)*(v-p.dv)
	}
	sort.Float64s(miss)
	return miss[len(miss)/2]
}

// leastSquares fits the shifts marked in (all, when nil), weighted by their
// uncertainties. About the weighted centre of the points the four unknowns
// separate, so the solution is written down. Where the points lie too close
// together for a zoom and a turn, those stay zero.
func leastSquares(shifts []shift, in []bool) (f fitted, ok bool) {
	var sw, mx, my, mu, mv float64
	for i, s := range shifts {
		if in == nil || in[i] {
			w := 1 / (s.u * s.u)
			sw += w
			mx += w * s.x
			my += w * s.y
			mu += w * s.du
			mv += w * s.dv
			f.used++
		}
	}
	if f.used == 0 {
		return fitted{}, false
	}
	mx, my, mu, mv = mx/sw, my/sw, mu/sw, mv/sw
	var d, z, r float64
	for i, s := range shifts {
		if in == nil || in[i] {
			w := 1 / (s.u * s.u)
			x, y, du, dv := s.x-mx, s.y-my, s.du-mu, s.dv-mv
			d += w * (x*x + y*y)
			z += w * (x*du + y*dv)
			r += w * (x*dv - y*du)
		}
	}
	f.u = 1 / math.Sqrt(sw)
	if f.used >= 3 && d/sw > 60*60 {
		f.z, f.r = z/d, r/d
		f.uz = 1 / math.Sqrt(d)
	}
	f.a = mu - f.z*mx + f.r*my
	f.b = mv - f.r*mx - f.z*my
	f.u = math.Hypot(f.u, f.uz*math.Hypot(mx, my)) // at the picture's centre
	var sq float64
	for i, s := range shifts {
		if in == nil || in[i] {
			u, v := f.at(s.x, s.y)
			sq += ((u-s.du)*(u-s.du) + (v-s.dv)*(v-s.dv)) / (s.u * s.u)
		}
	}
	free := float64(max(2*f.used-4, 1))
	f.spread = math.Sqrt(sq / sw * float64(f.used) / free)
	// Patches scatter by more than the noise: a codec redraws each block of a faint
	// wall on its own (Birge, Physical Review 40, 1932, 207–227).
	if birge := math.Sqrt(sq / free); birge > 1 {
		f.u *= birge
		f.uz *= birge
	}
	f.in = in
	return f, true
}
