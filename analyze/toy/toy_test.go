package toy

import (
	"context"
	"math"
	"testing"

	"lodeswing/track/rig"
)

// pendulum is a point of mass 0.1 kg at 0.25 m, without friction.
func pendulum() *rig.Rig {
	return &rig.Rig{
		Name:    "pendulum",
		Gravity: number(9.81),
		Parts: []rig.Part{{
			Name: "arm", Joint: "hinge", PivotM: []float64{0, 0}, CentreM: []float64{0, -0.25}, MassKg: number(0.1),
		}},
		Bobs: []rig.Bob{{Name: "bob", Part: "arm", AtM: []float64{0, -0.25}}},
	}
}

func mustNew(t testing.TB, r *rig.Rig) *Model {
	t.Helper()
	m, err := New(r)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func simulate(t testing.TB, m *Model, y []float64, until float64, opt Options) *Motion {
	t.Helper()
	o, err := m.Simulate(context.Background(), y, until, opt)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// Abramowitz & Stegun, "Handbook of Mathematical Functions", table 17.2: K(α)
// over π/2 at modular angles α = 15°, 30°, 45°, which are half the amplitude.
func TestPeriodOfLargeSwings(t *testing.T) {
	m := mustNew(t, pendulum())
	t0 := 2 * math.Pi * math.Sqrt(0.25/9.81)
	for _, c := range []struct{ amplitude, ratio float64 }{
		{30, 1.0174088}, {60, 1.0731820}, {90, 1.1803406},
	} {
		y := m.Rest()
		m.SetAngle(y, 0, c.amplitude*math.Pi/180, 0)
		o := simulate(t, m, y, 21*t0*c.ratio, Options{Tol: 1e-12, Passes: true})
		var passes []float64
		for _, e := range o.Events {
			if e.Kind == Pass && e.Rising {
				passes = append(passes, e.T)
			}
		}
		got := (passes[20] - passes[0]) / 20 / t0
		if math.Abs(got-c.ratio) > 6e-8 { // half a unit of the table's last place
			t.Errorf("amplitude %g°: T/T0 = %.9f, table %.7f", c.amplitude, got, c.ratio)
		}
	}
}

// A kick of given energy adds just that to the energy, as a blow and as a push
// of some width.
func TestKickAddsItsEnergy(t *testing.T) {
	for _, width := range []float64{0, 0.01} {
		r := pendulum()
		r.Magnets = []rig.Magnet{{Name: "foot", Part: "arm", AtM: []float64{0, -0.27}, Axis: []float64{0, -1}, Moment: number(0.5)}}
		r.Coils = []rig.Coil{{AtM: []float64{0, -0.29}, KickJ: number(1e-3), SensedRadS: number(0.1)}}
		if width > 0 {
			r.Coils[0].WidthM = number(width)
		}
		m := mustNew(t, r)
		y := m.Rest()
		m.SetAngle(y, 0, 0.3, 0)
		e0 := m.Energy(y).Total()
		o := simulate(t, m, y, 3.2, Options{Tol: 1e-11})
		kicks := 0
		for _, e := range o.Events {
			if e.Kind == Kick {
				kicks++
			}
		}
		o.At(3.2, y)
		if got, want := m.Energy(y).Total()-e0, 1e-3*float64(kicks); kicks != 7 && kicks != 6 || math.Abs(got-want) > 1e-10 {
			t.Errorf("width %g m: %d kicks added %.9g J, not %.9g J", width, kicks, got, want)
		}
	}
}

// Dry friction takes 2τ/k of amplitude per half swing of a linear oscillator
// and parks it inside ±τ/k (J. P. Den Hartog, "Mechanical Vibrations", 4th ed.
// 1956; from memory).
func TestDryFriction(t *testing.T) {
	r := pendulum()
	r.Gravity = number(0)
	r.Parts[0].Spring = rig.Spring{Rate: number(0.2)}
	r.Parts[0].Friction.Dry = number(0.004)
	m := mustNew(t, r)
	y := m.Rest()
	m.SetAngle(y, 0, 0.33, 0)
	o := simulate(t, m, y, 10, Options{Tol: 1e-11, Passes: true})
	half := math.Pi * math.Sqrt(0.1*0.25*0.25/0.2)
	want := 0.33
	for i := 1; ; i++ {
		want = -want + math.Copysign(0.04, want)
		o.At(float64(i)*half, y)
		got, _ := m.Angle(y, 0)
		if math.Abs(got-want) > 1e-9 {
			t.Errorf("half swing %d: %.10f, want %.10f", i, got, want)
		}
		if math.Abs(want) < 0.02 {
			break
		}
	}
	o.At(10, y)
	if got, rate := m.Angle(y, 0); math.Abs(got-want) > 1e-9 || rate != 0 {
		t.Errorf("parked at %.10f with rate %g, want %.10f", got, rate, want)
	}
	if last := o.Events[len(o.Events)-1]; last.Kind != Stick {
		t.Errorf("the last event is a %v, not the stick", last.Kind)
	}
}

// The quick sine and cosine against the library's.
func TestSincos(t *testing.T) {
	for i := range 200001 {
		x := (float64(i) - 1e5) * 0.0123456789 * float64(1+i%7)
		s, c := sincos(x)
		ws, wc := math.Sincos(x)
		if math.Abs(s-ws) > 4e-16 || math.Abs(c-wc) > 4e-16 {
			t.Fatalf("sincos(%g) = %.17g, %.17g, want %.17g, %.17g", x, s, c, ws, wc)
		}
	}
}

// The undamped lantern keeps its energy to 1e-9 over 1,000 swings at the tightest
// tolerance, by the short way and by the general one.
func TestEnergyOverThousandSwings(t *testing.T) {
	m := mustNew(t, lantern())
	for _, general := range []bool{false, true} {
		y := m.Rest()
		m.SetAngle(y, 0, 0.75, 0)
		e0 := m.Energy(y)
		scale := e0.Total() - m.Energy(m.Rest()).Gravity
		o := Options{Tol: 1e-14, general: general}
		if err := m.Run(context.Background(), 0, y, 1000*1.1, o, nil, nil); err != nil {
			t.Fatal(err)
		}
		off := math.Abs(m.Energy(y).Total()-e0.Total()) / scale
		t.Logf("general %v: the energy changed by %.2g of the swing's", general, off)
		if off > 1e-9 {
			t.Errorf("general %v: the energy changed by %.2g of the swing's", general, off)
		}
	}
}

// Steps allocate nothing: ten times the steps cost as many allocations.
func TestStepsAllocateNothing(t *testing.T) {
	r := lantern()
	r.Parts[0].Friction = rig.Friction{Viscous: number(1e-4), Dry: number(1e-5)}
	r.Parts = append(r.Parts, rig.Part{
		Name: "rider", On: "arm", Joint: "ball", PivotM: []float64{0, -0.1}, CentreM: []float64{0, 0.02, -0.05},
		MassKg: number(0.01), Inertia: number(5e-5), SpinInertia: number(1e-6),
	})
	r.Magnets[0].Moment, r.Magnets[0].Cylinder = rig.Value{}, &rig.Cylinder{DiameterM: number(0.012), HeightM: number(0.006), RemanenceT: number(1.2)}
	r.Coils = []rig.Coil{{AtM: []float64{0.05, -0.3}, KickJ: number(1e-4), SensedRadS: number(0.1), WidthM: number(0.005), Eddy: number(1e-6)}}
	m := mustNew(t, r)
	y := m.Rest()
	m.SetAngle(y, 0, 0.4, 0)
	z := make([]float64, len(y))
	allocs := func(seconds float64) float64 {
		return testing.AllocsPerRun(3, func() {
			copy(z, y)
			if err := m.Run(context.Background(), 0, z, seconds, Options{Tol: 1e-8}, nil, nil); err != nil {
				t.Fatal(err)
			}
		})
	}
	if few, many := allocs(1), allocs(10); many > few+2 {
		t.Errorf("1 s costs %g allocations, 10 s %g", few, many)
	}
}
