package toy

// Pushing tells, within a callback of Run, whether a coil pushes at this moment. A
// motion must not be stopped and started anew then: a push that is under way is
// no part of the state.
func (m *Model) Pushing() bool {
	for i := range m.coils {
		if c := &m.coils[i]; c.pushing || c.pulsing {
			return true
		}
	}
	return false
}
