package toy

import (
	"context"
	"math"

	"lodeswing/analyze/ode"
)

// Tangent writes the rate of a small deviation d from the state y, J(y)·d with J
// the Jacobian of the equations of motion, to out: the right-hand side of the
// variational equations. It is a central difference along d of relative error
// 1e-9 or so. Blows and stuck joints are no part of it.
func (m *Model) Tangent(y, d, out []float64) {
	m.prepare()
	n := len(y)
	if len(m.tangentWork) < 2*n {
		m.tangentWork = make([]float64, 2*n)
	}
	z, minus := m.tangentWork[:n], m.tangentWork[n:2*n]
	size := norm(d)
	if size == 0 {
		for i := range out {
			out[i] = 0
		}
		return
	}
	h := 6e-6 / size
	for i := range z {
		z[i] = y[i] - h*d[i]
	}
	m.derive(0, z, minus)
	for i := range z {
		z[i] = y[i] + h*d[i]
	}
	m.derive(0, z, out)
	for i := range out {
		out[i] = (out[i] - minus[i]) / (2 * h)
	}
}

// Variational returns the equations of a motion together with k deviations from
// it, as one system of (k+1)·StateLen numbers for analyze/ode: the state, then
// the deviations one after the other. It serves Lyapunov exponents of toys that
// no coil kicks and no dry friction holds.
func (m *Model) Variational(k int) ode.Func {
	n := m.StateLen()
	return func(_ float64, y, dy []float64) {
		for j := 1; j <= k; j++ {
			m.Tangent(y[:n], y[j*n:(j+1)*n], dy[j*n:(j+1)*n])
		}
		m.derive(0, y[:n], dy[:n])
	}
}

// OntoStates takes out of the deviation d from y what is no deviation of a toy:
// a change of length of a ball joint's quaternion.
func (m *Model) OntoStates(y, d []float64) {
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint != ball {
			continue
		}
		q, e := y[b.q:b.q+4], d[b.q:b.q+4]
		qq, qe := 0.0, 0.0
		for i := range q {
			qq += q[i] * q[i]
			qe += q[i] * e[i]
		}
		for i := range q {
			e[i] -= qe / qq * q[i]
		}
	}
}

// Normalise gives every ball joint's quaternion in y unit length again.
func (m *Model) Normalise(y []float64) {
	for k := range m.bodies {
		b := &m.bodies[k]
		if b.joint != ball {
			continue
		}
		q := y[b.q : b.q+4]
		n := 1 / math.Sqrt(q[0]*q[0]+q[1]*q[1]+q[2]*q[2]+q[3]*q[3])
		for i := range q {
			q[i] *= n
		}
	}
}

// A Variable is something that a motion depends on: a number of Params, or a
// component of the state at the start.
type Variable struct {
	Param int // index in Params, or −1
	State int // index in the state, when Param is −1
	Step  float64
}

// Sensitivities computes what observe makes of the motion at the given times,
// and its derivatives by the variables, by central differences of whole motions
// of step Step (0: 1e-5 of the number's size, at least 1e-7). observe writes
// outputs numbers for a state to out. values is row-major times × outputs;
// slopes holds one such table per variable.
func (m *Model) Sensitivities(ctx context.Context, state []float64, times []float64, opt Options, vars []Variable, outputs int, observe func(y, out []float64)) (values []float64, slopes [][]float64, err error) {
	one := func(y []float64) ([]float64, error) {
		out := make([]float64, len(times)*outputs)
		err := m.Sample(ctx, y, times, opt, func(i int, y []float64) { observe(y, out[i*outputs:(i+1)*outputs]) })
		return out, err
	}
	if values, err = one(state); err != nil {
		return nil, nil, err
	}
	slopes = make([][]float64, len(vars))
	for j, v := range vars {
		y := append([]float64(nil), state...)
		var x0 float64
		set := func(x float64) {
			if v.Param >= 0 {
				m.Set(v.Param, x)
			} else {
				y[v.State] = x
			}
		}
		if v.Param >= 0 {
			x0 = m.Get(v.Param)
		} else {
			x0 = y[v.State]
		}
		h := v.Step
		if h <= 0 {
			h = math.Max(1e-5*math.Abs(x0), 1e-7)
		}
		set(x0 + h)
		up, err := one(y)
		if err == nil {
			set(x0 - h)
			slopes[j], err = one(y)
		}
		set(x0)
		if err != nil {
			return nil, nil, err
		}
		for i := range up {
			slopes[j][i] = (up[i] - slopes[j][i]) / (2 * h)
		}
	}
	return values, slopes, nil
}
