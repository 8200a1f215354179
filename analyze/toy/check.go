package toy

import "fmt"

// check looks for what makes a model that builds but cannot move.
func (m *Model) check() error {
	m.kinematics(m.Rest())
	for _, p := range m.pairs {
		a, b := &m.magnets[p.a], &m.magnets[p.b]
		if d := b.r.Sub(a.r).Norm(); d < 1e-4 {
			return fmt.Errorf("[[magnet]] %q and %q are in the same place when the toy is at rest (%.3g mm apart): look at their at_mm, and at pivot_mm of their parts", a.name, b.name, 1e3*d)
		}
	}
	return nil
}
