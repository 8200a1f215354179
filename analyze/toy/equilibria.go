package toy

import (
	"context"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// Equilibrium is a place where a toy can stand still, dry friction apart.
type Equilibrium struct {
	State  []float64
	Energy float64 // J, potential
	// Stable: every small push raises the energy, but for Neutral directions.
	Stable bool
	// Neutral counts the directions in which the energy does not change, such as
	// the spin of a ball joint's part about its own axis.
	Neutral int
	// Curvatures are the eigenvalues of M⁻¹K in rad²/s², rising: squared angular
	// frequencies of small motions, negative along which it falls away.
	Curvatures []float64
}

// move adds the small displacement d of the degrees of freedom to the
// coordinates in y; a ball joint turns about its part's own axes.
func (m *Model) move(y, d []float64) {
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint != ball {
			y[b.q] += d[b.v]
			continue
		}
		q := y[b.q : b.q+4]
		x, yy, z := d[b.v]/2, d[b.v+1]/2, d[b.v+2]/2
		angle := math.Sqrt(x*x + yy*yy + z*z)
		c, s := math.Cos(angle), 1.0
		if angle > 1e-8 {
			s = math.Sin(angle) / angle
		}
		x, yy, z = s*x, s*yy, s*z
		w0, x0, y0, z0 := q[0], q[1], q[2], q[3]
		n := 1 / math.Sqrt(w0*w0+x0*x0+y0*y0+z0*z0)
		w0, x0, y0, z0 = n*w0, n*x0, n*y0, n*z0
		q[0] = w0*c - x0*x - y0*yy - z0*z
		q[1] = w0*x + x0*c + y0*z - z0*yy
		q[2] = w0*yy - x0*z + y0*c + z0*x
		q[3] = w0*z + x0*yy - y0*x + z0*c
	}
}

// statics writes the generalised forces of gravity, springs and magnets at rest
// in y's place to q: minus the gradient of the potential energy. Friction and
// coils do not count.
func (m *Model) statics(y, q []float64) {
	z := m.scratch
	copy(z, y)
	for i := m.nq; i < len(z); i++ {
		z[i] = 0
	}
	m.kinematics(z)
	m.massMatrix()
	m.magnetForces()
	m.bias(z)
	copy(q, m.rhs)
}

// stiffness writes the symmetric matrix of second derivatives of the potential
// energy (N·m/rad), by central differences of its exact gradient.
func (m *Model) stiffness(y []float64, k *mat.SymDense) {
	const h = 1e-5
	n := m.nv
	full := make([]float64, n*n)
	d, up, down := make([]float64, n), make([]float64, n), make([]float64, n)
	z := make([]float64, len(y))
	for j := range n {
		d[j] = h
		copy(z, y)
		m.move(z, d)
		m.statics(z, up)
		d[j] = -h
		copy(z, y)
		m.move(z, d)
		m.statics(z, down)
		d[j] = 0
		for i := range n {
			full[i*n+j] = (down[i] - up[i]) / (2 * h)
		}
	}
	for i := range n {
		for j := i; j < n; j++ {
			k.SetSym(i, j, (full[i*n+j]+full[j*n+i])/2)
		}
	}
}

func (m *Model) potential(y []float64) float64 {
	z := append([]float64(nil), y...)
	for i := m.nq; i < len(z); i++ {
		z[i] = 0
	}
	e := m.Energy(z)
	return e.Gravity + e.Spring + e.Magnetic
}

// Equilibria looks for the toy's places of rest, stable and not, from a grid of
// starts (one or two freedoms) or from up to 300 well spread ones (more; fewer
// when 80 in a row find nothing new), and returns those it found, lowest energy
// first. Angles are sought within ±reach rad of
// hanging or standing (0: all round). Where a toy has a whole ring of equal
// places (an axisymmetric lantern), one of them stands for all.
func (m *Model) Equilibria(ctx context.Context, reach float64) ([]Equilibrium, error) {
	if m.dirty {
		if err := m.refresh(); err != nil {
			return nil, err
		}
	}
	if reach <= 0 || reach > math.Pi {
		reach = math.Pi
	}
	var found []Equilibrium
	idle := 0
	for i := range m.seeds() {
		if err := ctx.Err(); err != nil {
			return found, err
		}
		if idle++; idle > 80 && m.nv > 2 {
			break
		}
		for _, toMinimum := range []bool{true, false} {
			y := m.seed(i, reach)
			if !m.toRest(y, toMinimum) {
				continue
			}
			e := m.classify(y)
			if m.within(y, reach) && !m.alreadyIn(found, e) {
				found = append(found, e)
				idle = 0
			}
		}
	}
	sort.Slice(found, func(i, j int) bool { return found[i].Energy < found[j].Energy })
	return found, nil
}

// RestNear is the place of rest that Newton's method reaches from y, which it
// should be near; ok is false where there is none.
func (m *Model) RestNear(y []float64) (e Equilibrium, ok bool) {
	m.prepare()
	z := append([]float64(nil), y...)
	if !m.toRest(z, false) {
		return Equilibrium{}, false
	}
	return m.classify(z), true
}

// SettlesAt is the stable place of rest into which the toy creeps from y by the
// way of falling energy.
func (m *Model) SettlesAt(y []float64) (e Equilibrium, ok bool) {
	m.prepare()
	z := append([]float64(nil), y...)
	if !m.toRest(z, true) {
		return Equilibrium{}, false
	}
	return m.classify(z), true
}

func (m *Model) seeds() int {
	switch m.nv {
	case 1:
		return 72
	case 2:
		return 24 * 24
	}
	return 300
}

// seed is start i: a grid for one or two freedoms, else points of the R-sequence
// (M. Roberts 2018, a Kronecker sequence with the generalised golden ratio).
func (m *Model) seed(i int, reach float64) []float64 {
	y := m.Rest()
	phi := 2.0
	for range 40 {
		phi = math.Pow(1+phi, 1/float64(m.nv+1))
	}
	d := make([]float64, m.nv)
	for j := range d {
		var u float64
		switch m.nv {
		case 1:
			u = (float64(i) + 0.5) / 72
		case 2:
			u = (float64([]int{i % 24, i / 24}[j]) + 0.5) / 24
		default:
			u = math.Mod(0.5+float64(i)*math.Pow(phi, -float64(j+1)), 1)
		}
		d[j] = reach * (2*u - 1)
	}
	m.move(y, d)
	return y
}

// within tells whether no one-axis part stands farther than reach from rest;
// angles that went round are brought back first.
func (m *Model) within(y []float64, reach float64) bool {
	for k := range m.bodies {
		b := &m.bodies[k]
		a, _ := m.Angle(y, k)
		if b.joint != ball && b.rate == 0 && b.cubic == 0 {
			a = math.Remainder(a, 2*math.Pi)
			m.SetAngle(y, k, a, 0)
		}
		if math.Abs(a) > reach+1e-6 {
			return false
		}
	}
	return true
}

// toRest moves y to a place of rest: to a minimum of the potential energy, or
// by a Newton method on its gradient to one of any kind, both damped in the way
// of Levenberg and Marquardt. It returns false where it finds none.
func (m *Model) toRest(y []float64, toMinimum bool) bool {
	n := m.nv
	for i := m.nq; i < len(y); i++ {
		y[i] = 0
	}
	k, c := mat.NewSymDense(n, nil), mat.NewDense(n, n, nil)
	q, qNew, d := make([]float64, n), make([]float64, n), make([]float64, n)
	trial := make([]float64, len(y))
	m.statics(y, q)
	u := m.potential(y)
	var eig mat.EigenSym
	lambda := 1e-3
	for range 100 {
		m.stiffness(y, k)
		if !eig.Factorize(k, true) {
			return false
		}
		eig.VectorsTo(c)
		w := eig.Values(nil)
		big := math.Max(math.Abs(w[0]), math.Abs(w[n-1]))
		if big == 0 || math.IsNaN(big) {
			return false
		}
		if norm(q) <= 1e-10*big {
			return true
		}
		improved := false
		for range 14 {
			// The step in the eigenvectors' axes: downhill in energy, or towards
			// zero force whatever the curvature's sign.
			for i := range d {
				d[i] = 0
			}
			for j := range n {
				g := 0.0
				for i := range n {
					g += c.At(i, j) * q[i]
				}
				step := g * w[j] / (w[j]*w[j] + lambda*big*big)
				if toMinimum {
					step = g / (math.Abs(w[j]) + lambda*big)
				}
				for i := range n {
					d[i] += step * c.At(i, j)
				}
			}
			if s := norm(d); s > 0.5 {
				for i := range d {
					d[i] *= 0.5 / s
				}
			}
			copy(trial, y)
			m.move(trial, d)
			m.statics(trial, qNew)
			better := norm(qNew) < norm(q)
			if toMinimum {
				uNew := m.potential(trial)
				if better = uNew < u || (norm(qNew) < norm(q) && uNew <= u+1e-14*math.Abs(u)); better {
					u = uNew
				}
			}
			if better {
				copy(y, trial)
				copy(q, qNew)
				lambda = math.Max(lambda/10, 1e-12)
				improved = true
				break
			}
			lambda = math.Min(lambda*10, 1e6)
		}
		if !improved {
			return norm(q) <= 1e-8*big
		}
	}
	return false
}

func norm(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return math.Sqrt(s)
}

// classify finds the curvatures at a place of rest.
func (m *Model) classify(y []float64) Equilibrium {
	e := Equilibrium{State: append([]float64(nil), y...), Energy: m.potential(y), Stable: true}
	e.Curvatures, _ = m.eigen(y)
	big := 0.0
	for _, w := range e.Curvatures {
		big = math.Max(big, math.Abs(w))
	}
	for _, w := range e.Curvatures {
		switch {
		case math.Abs(w) <= 1e-7*big:
			e.Neutral++
		case w < 0:
			e.Stable = false
		}
	}
	return e
}

// alreadyIn tells whether e is one of those found, or stands for the same ring.
func (m *Model) alreadyIn(found []Equilibrium, e Equilibrium) bool {
	mine := m.landmarks(e.State)
	for _, f := range found {
		same := true
		for i, p := range m.landmarks(f.State) {
			if p.Sub(mine[i]).Norm() > 1e-6 {
				same = false
				break
			}
		}
		if same {
			return true
		}
		if e.Neutral == 0 || f.Neutral != e.Neutral || math.Abs(f.Energy-e.Energy) > 1e-9*(math.Abs(e.Energy)+1e-6) {
			continue
		}
		same = true
		for i, w := range f.Curvatures {
			if math.Abs(w-e.Curvatures[i]) > 1e-4*(1+math.Abs(w)) {
				same = false
			}
		}
		if same && m.ring(e) {
			return true
		}
	}
	return false
}

// ring tells whether a place has more neutral directions than the spins of its
// ball joints account for.
func (m *Model) ring(e Equilibrium) bool {
	balls := 0
	for k := range m.bodies {
		if m.bodies[k].joint == ball {
			balls++
		}
	}
	return e.Neutral > balls || m.nv == e.Neutral
}

// landmarks are points that tell two places apart: centres of mass and magnets.
func (m *Model) landmarks(y []float64) []vec {
	m.kinematics(y)
	var out []vec
	for k := range m.bodies {
		b := &m.bodies[k]
		out = append(out, b.c)
		if b.joint != ball {
			out = append(out, b.p.Add(b.rot.mul(vec{X: 0.1, Z: -0.1})))
		}
	}
	for i := range m.magnets {
		if m.magnets[i].body >= 0 {
			out = append(out, m.magnets[i].r)
		}
	}
	return out
}

// Apart is how far two states' places are from each other: the greatest distance
// in m of a centre of mass, a magnet or a mark on a part between the two. The
// spin of a part about its own axis does not count.
func (m *Model) Apart(y, z []float64) float64 {
	a, b := m.landmarks(y), m.landmarks(z)
	most := 0.0
	for i := range a {
		most = math.Max(most, a[i].Sub(b[i]).Norm())
	}
	return most
}

// Creep follows the falling potential energy from the place of y in small steps,
// as a toy in syrup would, and returns the place at the bottom.
func (m *Model) Creep(y []float64) []float64 {
	m.prepare()
	z := append([]float64(nil), y...)
	for i := m.nq; i < len(z); i++ {
		z[i] = 0
	}
	q, d := make([]float64, m.nv), make([]float64, m.nv)
	trial := make([]float64, len(z))
	u := m.potential(z)
	for step := 0.02; step > 1e-5; {
		m.statics(z, q)
		size := norm(q)
		if size == 0 {
			break
		}
		for i := range d {
			d[i] = q[i] * step / size
		}
		copy(trial, z)
		m.move(trial, d)
		if v := m.potential(trial); v < u {
			copy(z, trial)
			u = v
		} else {
			step /= 2
		}
	}
	return z
}
