package toy

import (
	"math"
	"testing"

	"lodeswing/track/rig"
)

// kicked is a swing with a magnet at its foot over a winding.
func kicked() *rig.Rig {
	r := pendulum()
	r.Parts[0].Friction.Viscous = number(4e-5)
	r.Magnets = []rig.Magnet{{Name: "foot", Part: "arm", AtM: []float64{0, -0.27}, Axis: []float64{0, -1}, Moment: number(0.5)}}
	r.Coils = []rig.Coil{{
		Name: "coil", AtM: []float64{0, -0.29}, Turns: number(1000), RadiusM: number(0.012), Ohm: number(150),
		SupplyV: number(9), PulseS: number(0.02), TriggerV: number(0.02), CapacityAs: number(500 * 3.6),
	}}
	return r
}

// The energy balance of a pulse: what the supply gives is the coil's heat and the
// work on the swing; the swing's own energy grows by that work less friction.
func TestPulseBalance(t *testing.T) {
	r := kicked()
	r.Parts[0].Friction.Viscous = number(0)
	m := mustNew(t, r)
	y := m.Rest()
	m.SetAngle(y, 0, 0.25, 0)
	e0 := m.Energy(y).Total()
	o := simulate(t, m, y, 5, Options{Tol: 1e-11})
	kicks, work, charge := 0, 0.0, 0.0
	for _, e := range o.Events {
		if e.Kind == Kick {
			kicks++
			work += e.Energy
			charge += e.Charge
			if e.Energy <= 0 || e.Charge <= 0 {
				t.Errorf("a kick of %g J and %g A·s", e.Energy, e.Charge)
			}
		}
	}
	o.At(5, y)
	if kicks < 8 || math.Abs(m.Energy(y).Total()-e0-work) > 1e-8*work {
		t.Errorf("%d kicks did %.12g J of work, the energy grew by %.12g J", kicks, work, m.Energy(y).Total()-e0)
	}
	// Without motion the current would be V/R for the pulse; the motion takes some.
	if most := float64(kicks) * 9.0 / 150 * 0.02; charge >= most || charge < 0.5*most {
		t.Errorf("%d kicks drew %g A·s, at rest they would draw %g A·s", kicks, charge, most)
	}
	if heat := 9*charge - work; heat <= 0 {
		t.Errorf("the supply gave %g J and the swing got %g J", 9*charge, work)
	}
	use := m.Battery(o)
	if len(use) != 1 || use[0].Kicks != kicks || math.Abs(use[0].Days*use[0].MeanCurrent*86400/(500*3.6)-1) > 1e-12 {
		t.Errorf("battery use %+v", use)
	}
}

// The work of one pulse, closed form for a magnet that hardly moves aside: the
// induced voltage is minus the rate of the flux, N times the moment times the
// loop's field; a swing too slow to reach the trigger gets no kick.
func TestPulseNeedsItsTrigger(t *testing.T) {
	m := mustNew(t, kicked())
	y := m.Rest()
	m.SetAngle(y, 0, 0.1, 0)
	m.kinematics(y)
	// Peak induced voltage of a slow pass scales with speed: find it.
	peak := func(amplitude float64) float64 {
		best := 0.0
		speed := amplitude * math.Sqrt(9.81/0.25)
		for i := range 400 {
			z := m.Rest()
			m.SetAngle(z, 0, -0.2+0.2*float64(i)/400, speed)
			m.kinematics(z)
			best = math.Max(best, m.approach(&m.coils[0]))
		}
		return best
	}
	p := peak(0.1)
	for _, c := range []struct {
		trigger float64
		kicks   bool
	}{{0.7 * p, true}, {1.3 * p, false}} {
		i, err := m.Index("coil.trigger")
		if err != nil {
			t.Fatal(err)
		}
		m.Set(i, c.trigger)
		o := simulate(t, m, y, 0.6, Options{})
		got := false
		for _, e := range o.Events {
			got = got || e.Kind == Kick
		}
		if got != c.kicks {
			t.Errorf("trigger %.3g V of a peak of %.3g V: kicked %v", c.trigger, p, got)
		}
	}
}

// The gull: where the kick equals the loss the amplitude is steady. For small
// swings of a viscous pendulum a half swing of amplitude A takes π c ω A²/2, so
// A² = 2E/(π c ω); the pendulum's own lengthening with amplitude is held small.
func TestGullsSteadyAmplitude(t *testing.T) {
	const kick, c = 2e-6, 4e-5
	r := pendulum()
	r.Parts[0].Friction.Viscous = number(c)
	r.Magnets = []rig.Magnet{{Name: "foot", Part: "arm", AtM: []float64{0, -0.27}, Axis: []float64{0, -1}, Moment: number(0.5)}}
	r.Coils = []rig.Coil{{AtM: []float64{0, -0.29}, KickJ: number(kick), SensedRadS: number(0.05)}}
	m := mustNew(t, r)
	y := m.Rest()
	m.SetAngle(y, 0, 0.05, 0)
	o := simulate(t, m, y, 3000, Options{Tol: 1e-9, Passes: true})
	omega := math.Sqrt(9.81 / 0.25)
	want := math.Sqrt(2 * kick / (math.Pi * c * omega))
	for i := len(o.Events) - 8; i < len(o.Events); i++ {
		if o.Events[i].Kind != Turn {
			continue
		}
		o.At(o.Events[i].T, y)
		got, _ := m.Angle(y, 0)
		// The swing decays a little within each half: relative order of πζ.
		if math.Abs(math.Abs(got)/want-1) > 2e-3 {
			t.Errorf("steady amplitude %.6f rad, by balance %.6f", math.Abs(got), want)
		}
	}
}

// Eddy drag right over the coil is its number times the angular speed, and fades
// as a Gaussian of the radius to the side.
func TestEddyDrag(t *testing.T) {
	r := kicked()
	r.Parts[0].Friction.Viscous = number(0)
	r.Coils = []rig.Coil{{AtM: []float64{0, -0.29}, KickJ: number(0), Eddy: number(3e-4), RadiusM: number(0.012)}}
	m := mustNew(t, r)
	dy, y := make([]float64, 2), m.Rest()
	const inertia = 0.1 * 0.25 * 0.25
	for _, x := range []float64{0, 0.006, 0.02} {
		angle := math.Asin(x / 0.27)
		var rate [2]float64
		for i, speed := range []float64{1.5, -1.5} {
			m.SetAngle(y, 0, angle, speed)
			m.Derive(y, dy)
			rate[i] = dy[1]
		}
		got := -(rate[0] - rate[1]) / 3 * inertia
		if want := 3e-4 * math.Exp(-x*x/(0.012*0.012)); math.Abs(got/want-1) > 1e-10 {
			t.Errorf("%g m aside: drag %.10g N·m·s, want %.10g", x, got, want)
		}
	}
}
