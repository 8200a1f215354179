package decay

import (
	"errors"
	"math"
)

// orbit is one swing without friction at a given amplitude, and what each
// friction of unit strength would take from it. All per unit inertia.
type orbit struct {
	amplitude float64    // half the span between the turning points, rad
	centre    float64    // middle of the turning points from rest, rad
	period    float64    // s
	energy    float64    // above rest, rad² s⁻²
	slope     float64    // d energy / d amplitude
	loss      [3]float64 // per full swing: ∮δ̇² dt, ∮|δ̇|³ dt, ∮|δ̇| dt
}

var errNoOrbit = errors.New("no swing of this amplitude about the rest")

// quadrature is the number of nodes. With δ = c + A sin u the integrands are
// smooth and periodic in u, so that the midpoint rule converges geometrically
// (Trefethen & Weideman, SIAM Review 56, 2014): 64 nodes give the period of a
// pendulum at 150° to 1e-13.
const quadrature = 64

var sines = func() (s [quadrature]float64) {
	for i := range s {
		s[i] = math.Sin(math.Pi * ((float64(i)+0.5)/quadrature - 0.5))
	}
	return s
}()

// orbitAt computes the orbit of an amplitude (rad, > 0).
func (m model) orbitAt(p []float64, amplitude float64) (orbit, error) {
	o := orbit{amplitude: amplitude}
	if !(amplitude > 0) {
		return o, errNoOrbit
	}
	force := func(d float64) float64 { f, _ := m.restoring(p, d); return p[atK] * f }
	if !m.even() {
		// The centre for which both turning points have the same energy (Newton).
		for i := 0; ; i++ {
			hi, lo := o.centre+amplitude, o.centre-amplitude
			df := force(hi) - force(lo)
			if !(df > 0) || i > 50 {
				return o, errNoOrbit
			}
			step := (m.potential(p, hi) - m.potential(p, lo)) / df
			o.centre -= step
			if math.Abs(o.centre) > amplitude {
				return o, errNoOrbit
			}
			if math.Abs(step) <= 1e-15+1e-14*amplitude {
				break
			}
		}
	}
	hi, lo := o.centre+amplitude, o.centre-amplitude
	o.energy = m.potential(p, hi)
	up, down := force(hi), -force(lo)
	if !(up > 0 && down > 0) || m.sine && amplitude >= math.Pi {
		return o, errNoOrbit
	}
	o.slope = 2 * up * down / (up + down)
	const du = math.Pi / quadrature
	for _, s := range sines {
		d := o.centre + amplitude*s
		v2 := 2 * m.drop(p, d, hi, lo)
		if !(v2 > 0) {
			return o, errNoOrbit
		}
		v := math.Sqrt(v2)
		dd := amplitude * math.Sqrt(1-s*s) * du
		o.period += 2 * dd / v
		o.loss[0] += 2 * v * dd
		o.loss[1] += 2 * v2 * dd
	}
	o.loss[2] = 4 * amplitude
	return o, nil
}

// drop is the potential at the nearer of the turning points minus that at d,
// without cancellation for the sine.
func (m model) drop(p []float64, d, hi, lo float64) float64 {
	to := hi
	if d < (hi+lo)/2 {
		to = lo
	}
	var v float64
	if m.sine {
		v = 2 * math.Sin((to+d)/2) * math.Sin((to-d)/2)
	} else {
		v = (to - d) * (to + d) / 2
	}
	for i, e := range m.powers {
		// (toⁿ − dⁿ) = (to − d)·Σ toʲ dⁿ⁻¹⁻ʲ
		n := e + 1
		sum := 0.0
		for j := range n {
			sum += ipow(to, j) * ipow(d, n-1-j)
		}
		v += p[atShape+i] * (to - d) * sum / float64(n)
	}
	for i, h := range m.pulls {
		v += p[atShape+len(m.powers)+i] * (h.potential(to) - h.potential(d))
	}
	return p[atK] * v
}

// frictions are viscous, drag and dry in order.
var frictions = [3]law{viscous, drag, dry}

// zeta is the equivalent damping ratio of the orbit: that of the linear viscous
// oscillator that loses the same part of its amplitude per swing,
// ζ = ΔE/(2πA·dE/dA), to first order in the friction.
func (m model) zeta(p []float64, o orbit) float64 {
	lost := 0.0
	for i, l := range frictions {
		lost += m.friction(p, l) * o.loss[i]
	}
	return lost / (2 * math.Pi * o.amplitude * o.slope)
}

// share is the part of the loss per swing that one friction has.
func (m model) share(p []float64, o orbit, which law) float64 {
	lost, own := 0.0, 0.0
	for i, l := range frictions {
		x := m.friction(p, l) * o.loss[i]
		lost += x
		if l == which {
			own = x
		}
	}
	if lost == 0 {
		return 0
	}
	return own / lost
}

// amplitudeOf is the amplitude of the orbit through (d, v), by bisection within
// the amplitudes up to most that have an orbit; NaN where there is none.
func (m model) amplitudeOf(p []float64, d, v, most float64) float64 {
	e := v*v/2 + m.potential(p, d)
	lo, hi := 0.0, most
	for range 60 {
		mid := (lo + hi) / 2
		o, err := m.orbitAt(p, mid)
		if err != nil || o.energy > e {
			hi = mid
		} else {
			lo = mid
		}
	}
	if o, err := m.orbitAt(p, lo); err != nil || math.Abs(o.energy-e) > 1e-6*e+1e-300 {
		return math.NaN()
	}
	return lo
}
