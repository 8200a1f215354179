package toy

import "math"

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

// MayPush tells for a motion as it was seen, states at rising times t in s, at
// which of them a coil may be pushing, however strongly: it follows the coils' rules from one seen
// place to the next, and takes a push to begin and end up to margin (s) sooner and
// later than it finds. The speeds in the states take no part. Between any other two
// moments the motion may be cut and started anew. Where places are missing for
// longer than hole (s), as before the first one, a push may be under way until the
// magnet comes nearer or is out of reach.
func (m *Model) MayPush(t []float64, states [][]float64, margin, hole float64) []bool {
	m.prepare()
	out := make([]bool, len(t))
	mark := func(from, to float64) {
		for i := range t {
			if t[i] >= from-margin && t[i] <= to+margin {
				out[i] = true
			}
		}
	}
	for i := range m.coils {
		m.mayPush(&m.coils[i], t, states, hole, mark)
	}
	return out
}

// nearThreshold is how far from the least sensed speed, relative, a pass is no
// longer in doubt.
const nearThreshold = 0.2

func (m *Model) mayPush(c *coilPart, t []float64, states [][]float64, hole float64, mark func(from, to float64)) {
	n := len(t)
	place, flux := make([]vec, n), make([]float64, n)
	for i, y := range states {
		m.kinematics(y)
		place[i] = m.magnets[c.magnet].r
		if c.wound {
			f, _, _, _ := m.linkage(c)
			flux[i] = math.Abs(f)
		}
	}
	one := m.onePath(m.magnets[c.magnet].body)
	// A push that began at from and points along dir; known false: where is not known.
	pushing, known := false, false
	var from, dir vec
	began := 0.0
	for i := range n {
		fresh := i == 0 || t[i]-t[i-1] > hole
		if fresh {
			if pushing {
				mark(began, t[i])
			}
			pushing, known, began = true, false, t[i]
		}
		d := place[i].Sub(c.at)
		nearer := i+1 < n && place[i+1].Sub(place[i]).Dot(d) < 0
		if pushing {
			switch {
			case !known && c.wound:
				pushing = t[i]-began < c.pulse
			case !known:
				over := d.Sub(c.axis.Scale(d.Dot(c.axis))).Norm()
				pushing = over < 1.3*c.width+1e-3 || !one && !nearer
			case c.wound:
				pushing = t[i]-began < c.pulse
			default:
				u := place[i].Sub(from).Dot(dir)
				pushing = u < c.width && u > -1e-3*c.width
			}
			if !pushing && !fresh {
				mark(began, t[i])
			}
		}
		if i == 0 || i+1 == n || fresh || t[i+1]-t[i] > hole {
			continue
		}
		var passes bool
		if c.wound {
			passes = flux[i] >= flux[i-1] && flux[i] > flux[i+1]
		} else {
			b, a := place[i-1].Sub(c.at), place[i+1].Sub(c.at)
			passes = d.Dot(d) <= b.Dot(b) && d.Dot(d) < a.Dot(a)
		}
		if !passes || pushing {
			continue
		}
		v := place[i+1].Sub(place[i-1]).Scale(1 / (t[i+1] - t[i-1]))
		speed := v.Norm()
		if c.wound {
			pushing, known, began = true, true, t[i]
			continue
		}
		if speed < (1-nearThreshold)*c.sensed*c.arm || speed == 0 {
			continue
		}
		// The nearest place between the samples, by a parabola through the squares.
		before, here, after := place[i-1].Sub(c.at), d, place[i+1].Sub(c.at)
		b2, h2, a2 := before.Dot(before), here.Dot(here), after.Dot(after)
		shift := 0.0
		if bend := b2 - 2*h2 + a2; bend > 0 {
			shift = math.Max(-1, math.Min(1, (b2-a2)/(2*bend))) * (t[i+1] - t[i-1]) / 2
		}
		pushing, known, began = true, true, t[i]+math.Min(shift, 0)
		from, dir = place[i].Add(v.Scale(shift)), v.Scale(1/speed)
	}
	if pushing {
		mark(began, t[n-1])
	}
}
