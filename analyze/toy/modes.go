package toy

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Mode is a small motion about a place of rest.
type Mode struct {
	// Frequency in Hz; 0 for a direction in which the toy falls away or drifts.
	Frequency float64
	Growth    float64 // 1/s, of a direction in which it falls away, else 0
	Zeta      float64 // damping ratio by viscous friction and eddy currents, first order
	// Shape is the motion of each degree of freedom in the state's order, the
	// shown sense for hinges and pins, largest 1; a ball joint has three, turns
	// about its part's own axes.
	Shape []float64
}

// Modes returns the small motions about the place of rest y, slowest first.
func (m *Model) Modes(y []float64) []Mode {
	m.prepare()
	n := m.nv
	w, x := m.eigen(y)
	damp := m.damping(y)
	big := 0.0
	for _, l := range w {
		big = math.Max(big, math.Abs(l))
	}
	out := make([]Mode, n)
	for j := range n {
		mode := Mode{Shape: make([]float64, n)}
		most := 0.0
		for i := range n {
			s := x.At(i, j)
			if m.bodies[m.dofOf[i]].stands {
				s = -s
			}
			mode.Shape[i] = s
			if math.Abs(s) > math.Abs(most) {
				most = s
			}
		}
		for i := range mode.Shape {
			mode.Shape[i] /= most
		}
		switch {
		case w[j] > 1e-9*big:
			omega := math.Sqrt(w[j])
			mode.Frequency = omega / (2 * math.Pi)
			c := 0.0
			for a := range n {
				for b := range n {
					c += x.At(a, j) * damp[a*n+b] * x.At(b, j)
				}
			}
			mode.Zeta = c / (2 * omega)
		case w[j] < -1e-9*big:
			mode.Growth = math.Sqrt(-w[j])
		}
		out[j] = mode
	}
	return out
}

// damping is the matrix of viscous friction and eddy drag at rest in y's place,
// N·m·s/rad: minus the rate of the generalised forces with the speeds.
func (m *Model) damping(y []float64) []float64 {
	n := m.nv
	c := make([]float64, n*n)
	z := append([]float64(nil), y...)
	dy := make([]float64, len(y))
	const h = 1e-6
	up, down := make([]float64, n), make([]float64, n)
	dry := make([]float64, len(m.bodies))
	for k := range m.bodies { // dry friction is no matter of small motions
		dry[k], m.bodies[k].dry = m.bodies[k].dry, 0
	}
	for j := range n {
		for _, s := range []float64{h, -h} {
			for i := m.nq; i < len(z); i++ {
				z[i] = 0
			}
			z[m.nq+j] = s
			m.derive(0, z, dy)
			if s > 0 {
				copy(up, m.rhs)
			} else {
				copy(down, m.rhs)
			}
		}
		for i := range n {
			c[i*n+j] = (down[i] - up[i]) / (2 * h)
		}
	}
	for k := range m.bodies {
		m.bodies[k].dry = dry[k]
	}
	return c
}

// eigen solves K x = λ M x at rest in y's place: eigenvalues rising, vectors in
// columns with xᵀMx = 1.
func (m *Model) eigen(y []float64) ([]float64, *mat.Dense) {
	n := m.nv
	k := mat.NewSymDense(n, nil)
	m.stiffness(y, k)
	z := append([]float64(nil), y...)
	for i := m.nq; i < len(z); i++ {
		z[i] = 0
	}
	m.kinematics(z)
	m.massMatrix()
	mass := mat.NewSymDense(n, nil)
	for i := range n {
		for j := 0; j <= i; j++ {
			mass.SetSym(i, j, m.mass[i*n+j])
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(mass) {
		return make([]float64, n), mat.NewDense(n, n, nil)
	}
	// L⁻¹ K L⁻ᵀ has the same eigenvalues.
	var l mat.TriDense
	chol.LTo(&l)
	var half, whole mat.Dense
	half.Copy(k)
	_ = half.Solve(&l, k)
	_ = whole.Solve(&l, half.T())
	a := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			a.SetSym(i, j, (whole.At(i, j)+whole.At(j, i))/2)
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(a, true) {
		return make([]float64, n), mat.NewDense(n, n, nil)
	}
	var v, x mat.Dense
	eig.VectorsTo(&v)
	_ = x.Solve(l.T(), &v)
	return eig.Values(nil), &x
}
