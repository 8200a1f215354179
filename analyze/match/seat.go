package match

import (
	"context"
	"math"

	"gonum.org/v1/gonum/mat"

	"lodeswing/analyze/toy"
)

// mirrored is the pose y with a part on a ball joint turned to the other place on the
// same line of sight where its bob shows alike; ok is false where there is none, or
// none far off. What a single picture leaves open so, the motion decides.
func (s *poser) mirrored(y []float64, w int) (out []float64, ok bool) {
	k, m := s.k, s.k.model
	o := &k.watched[w]
	if o.bob < 0 || m.OneAxis(o.part) || !m.OnBase(o.part) || k.camera == nil {
		return nil, false
	}
	at := k.pose(m, y, w)
	x := s.see.world(&at, w)
	u, v := s.see.project(w, x)
	const apart = 0.1
	ax, az, _ := k.camera.BobToPlane(u, v, o.radius, o.depth)
	bx, bz, _ := k.camera.BobToPlane(u, v, o.radius, o.depth+apart)
	d := [3]float64{bx - ax, -apart, bz - az} // in front is towards −y
	if k.above {
		d = [3]float64{bx - ax, bz - az, apart}
	}
	n := math.Sqrt(d[0]*d[0] + d[1]*d[1] + d[2]*d[2])
	var p [3]float64
	along, length := 0.0, 0.0
	for i := range p {
		p[i] = x[i] - at.at[i] - s.see.shift[i]
		d[i] /= n
		along += p[i] * d[i]
		length += p[i] * p[i]
	}
	length = math.Sqrt(length)
	if math.Abs(along) < 0.05*length { // it all but touches the sphere: one place
		return nil, false
	}
	for i := range p {
		p[i] -= 2 * along * d[i]
	}
	out = append([]float64(nil), y...)
	m.SetBall(out, o.part, math.Atan2(math.Hypot(p[0], p[1]), -p[2]), math.Atan2(p[1], p[0]), 0, 0, 0)
	return out, true
}

// clearlyBetter is how much smaller a sum of squares must be for another start to be
// taken: where the toy is in the picture is only roughly known then.
const clearlyBetter = 0.1

// seat finds for each stretch by itself, at the parameters as they are, where it
// begins, and decides between the starts that its first pictures leave open.
func (f *fitter) seat(ctx context.Context) error {
	p := f.values()
	sees, rows := make([]viewer, len(f.clips)), make([]*rower, len(f.clips))
	was := make([]bool, len(f.params))
	for j := range f.params {
		was[j], f.params[j].held = f.params[j].held, true
	}
	defer func() {
		for j := range f.params {
			f.params[j].held = was[j]
		}
	}()
	for c := range f.clips {
		sees[c], rows[c] = f.viewer(c, p), f.rower(c, p)
	}
	return f.jobs(ctx, func(c int, g *segment, m *toy.Model) error {
		f.apply(c, m, p)
		s := &shot{f: f, see: &sees[c], m: m}
		var best []float64
		least := math.Inf(1)
		for _, y := range append([][]float64{g.y}, g.others...) {
			copy(g.y, y)
			cost, err := f.relax(ctx, s, rows[c], c, g, p)
			if err != nil && ctx.Err() != nil {
				return err
			}
			if best == nil || err == nil && cost < clearlyBetter*least {
				least, best = cost, append(best[:0], g.y...)
			}
		}
		copy(g.y, best)
		g.others = nil
		return nil
	})
}

// relax takes damped Gauss–Newton steps of a stretch's own state.
func (f *fitter) relax(ctx context.Context, s *shot, rows *rower, c int, g *segment, p []float64) (cost float64, err error) {
	measure := func() float64 {
		sum := 0.0
		for o := range g.to - g.from {
			r0, r1 := rows.residual(g, o)
			sum += r0*r0 + float64(rows.k.dims-1)*r1*r1
		}
		return sum
	}
	if err = s.plain(ctx, g); err != nil {
		return 0, err
	}
	if cost = measure(); g.to-g.from < s.m.Freedoms() {
		return cost, nil
	}
	lambda := 1e-2
	old := make([]float64, len(g.y))
	for range 8 {
		if err := f.slopes(ctx, s, c, g, p, false); err != nil {
			return cost, err
		}
		b := rows.block(g)
		before := cost
		for range 6 {
			a, rhs := mat.NewDense(b.rows+b.n, b.n, nil), mat.NewVecDense(b.rows+b.n, nil)
			size := make([]float64, b.n)
			for r := range b.rows {
				rhs.SetVec(r, b.r[r])
				for v := range b.n {
					x := b.js[r*b.n+v]
					a.Set(r, v, x)
					size[v] += x * x
				}
			}
			for v := range b.n {
				a.Set(b.rows+v, v, lambda*math.Sqrt(size[v])+1e-6*math.Sqrt(size[0]+1))
			}
			var step mat.VecDense
			if step.SolveVec(a, rhs) != nil {
				return cost, nil
			}
			copy(old, g.y)
			s.m.Displace(g.y, f.capped(step.RawVector().Data))
			s.m.Normalise(g.y)
			if err := s.plain(ctx, g); err == nil {
				if now := measure(); now < cost {
					cost, lambda = now, math.Max(lambda/10, 1e-6)
					break
				}
			}
			copy(g.y, old)
			lambda *= 8
		}
		if !(cost < 0.9*before) {
			break
		}
	}
	return cost, s.plain(ctx, g)
}
