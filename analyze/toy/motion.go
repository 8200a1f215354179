package toy

import (
	"context"

	"lodeswing/analyze/ode"
)

// Motion is a computed motion.
type Motion struct {
	T0, T1 float64
	Events []Event
	path   *ode.Path
	last   []float64
}

// At writes the state at time t to dst. Outside of T0 to T1 the nearer end stands.
func (o *Motion) At(t float64, dst []float64) {
	if o.path.Len() == 0 || t >= o.T1 {
		copy(dst, o.last)
		return
	}
	o.path.At(t, dst)
}

// Simulate moves the toy from state, at time 0, until the given time in s. When
// ctx ends before that, it returns the motion so far together with ctx's error.
func (m *Model) Simulate(ctx context.Context, state []float64, until float64, opt Options) (*Motion, error) {
	o := &Motion{path: ode.NewPath(m.StateLen()), last: append([]float64(nil), state...)}
	err := m.Run(ctx, 0, o.last, until, opt, func(s *ode.Solver) error {
		o.path.Add(s)
		return nil
	}, func(e Event) { o.Events = append(o.Events, e) })
	if m.solver != nil {
		o.T1 = m.solver.Time()
	}
	return o, err
}

// Sample moves the toy from state at times[0] and calls visit with the state at
// each of the times, which must rise. It keeps nothing, so that long motions
// cost no memory; the slice that visit gets is valid only during the call.
func (m *Model) Sample(ctx context.Context, state []float64, times []float64, opt Options, visit func(i int, y []float64)) error {
	if len(times) == 0 {
		return nil
	}
	y := append([]float64(nil), state...)
	at := make([]float64, len(y))
	visit(0, y)
	i := 1
	return m.Run(ctx, times[0], y, times[len(times)-1], opt, func(s *ode.Solver) error {
		for ; i < len(times) && times[i] <= s.Time(); i++ {
			s.At(times[i], at)
			visit(i, at)
		}
		return nil
	}, nil)
}

// Derive writes the rate of the state y to dy, with dry friction along the
// speeds and no coil pushing.
func (m *Model) Derive(y, dy []float64) {
	m.prepare()
	m.derive(0, y, dy)
}
