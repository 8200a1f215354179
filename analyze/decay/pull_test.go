package decay

import (
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/magnet"
	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// The demo's lantern: 70 g at 0.274 m, 5.34e-3 kg·m², two dipoles of 0.63 A·m²
// that push each other away, 60 mm apart at rest.
func lantern() *rig.Rig {
	return &rig.Rig{
		Parts: []rig.Part{{Name: "arm", Joint: "hinge", PivotM: []float64{0, 0}}},
		Magnets: []rig.Magnet{
			{Name: "lamp", Part: "arm", AtM: []float64{0, -0.28}, Axis: []float64{0, -1}},
			{Name: "base", Part: rig.Base, AtM: []float64{0, -0.34}, Axis: []float64{0, 1}},
		},
	}
}

const (
	lampWeight  = 0.07 * 9.80665 * 0.274
	lampInertia = 5.34e-3
)

// lampEnergy is the lantern's potential energy by the textbook formula alone.
func lampEnergy(angle float64) float64 {
	s, c := math.Sincos(angle)
	m := magnet.Vec{X: 0.63 * s, Z: -0.63 * c}
	at := magnet.Vec{X: 0.28 * s, Z: -0.28 * c}
	return -lampWeight*c + magnet.DipoleEnergy(magnet.Vec{Z: 0.63}, m, at.Sub(magnet.Vec{Z: -0.34}))
}

func lampTorque(angle float64) float64 {
	const h = 1e-4
	e := lampEnergy
	return (8*(e(angle+h)-e(angle-h)) - (e(angle+2*h) - e(angle-2*h))) / (12 * h)
}

func TestPullIsTheEnergysGradient(t *testing.T) {
	r := lantern()
	pulls := pullsOf(r, &r.Parts[0])
	if len(pulls) != 2 {
		t.Fatalf("%d shapes", len(pulls))
	}
	// The whole law is weight·sin + torque; its slope at rest times f is to come back.
	at0 := (lampTorque(1e-3) - lampTorque(-1e-3)) / 2e-3
	h := pulls[0]
	most := 0.0
	for d := -3.0; d < 3; d += 0.01 {
		most = math.Max(most, math.Abs(lampTorque(d)-at0*math.Sin(d)))
	}
	for d := -3.1; d < 3.1; d += 0.0137 {
		f, slope := h.at(d)
		if want := (lampTorque(d) - at0*math.Sin(d)) / most; math.Abs(math.Abs(f)-math.Abs(want)) > 2e-5 {
			t.Fatalf("at %.3f rad: shape %.7f, energy's gradient %.7f", d, f, want)
		}
		up, _ := h.at(d + 1e-5)
		down, _ := h.at(d - 1e-5)
		if n := (up - down) / 2e-5; math.Abs(n-slope) > 1e-5*(1+math.Abs(slope)) {
			t.Fatalf("at %.3f rad: slope %.7f, difference %.7f", d, slope, n)
		}
		if n := (h.potential(d+1e-4) - h.potential(d-1e-4)) / 2e-4; math.Abs(n-f) > 1e-6 {
			t.Fatalf("at %.3f rad: shape %.7f, slope of the potential %.7f", d, f, n)
		}
	}
}

func TestPullNeedsARestThatIsVertical(t *testing.T) {
	r := lantern()
	r.Magnets[1].AtM = []float64{0.02, -0.34}
	if p := pullsOf(r, &r.Parts[0]); p != nil {
		t.Error("a base magnet off to the side was taken as acting alike on both sides")
	}
	r = lantern()
	r.Magnets[0].Part = "other"
	if p := pullsOf(r, &r.Parts[0]); p != nil {
		t.Error("a magnet on another moving part was taken as fixed")
	}
}

// A lantern over its base magnet, integrated here by Runge and Kutta's method
// with the textbook energy: small swings that the clip never shows come out
// right, and so do both frictions.
func TestLanternOverItsMagnet(t *testing.T) {
	const viscous, drag, sigma, dt, steps = 0.045, 0.015, 1e-4, 1.0 / 60, 32
	acc := func(a, v float64) float64 { return -lampTorque(a)/lampInertia - viscous*v - drag*v*math.Abs(v) }
	rng := rand.New(rand.NewPCG(11, 12))
	var ts, ys, us []float64
	a, v := 0.7, 0.0
	for i := range 1500 {
		ts, ys, us = append(ts, float64(i)*dt), append(ys, a+sigma*rng.NormFloat64()), append(us, sigma)
		for range steps {
			const h = dt / steps
			k1, l1 := v, acc(a, v)
			k2, l2 := v+h/2*l1, acc(a+h/2*k1, v+h/2*l1)
			k3, l3 := v+h/2*l2, acc(a+h/2*k2, v+h/2*l2)
			k4, l4 := v+h*l3, acc(a+h*k3, v+h*l3)
			a, v = a+h/6*(k1+2*k2+2*k3+k4), v+h/6*(l1+2*l2+2*l3+l4)
		}
	}
	s, err := series.FromTable("arm", ts, ys, us)
	if err != nil {
		t.Fatal(err)
	}
	opt := OptionsFor(lantern(), "arm", "", nil)
	res, err := Analyze(t.Context(), s, opt)
	if err != nil || !res.Found {
		t.Fatal(err, res)
	}
	stiff := (lampTorque(1e-3) - lampTorque(-1e-3)) / 2e-3 / lampInertia
	want := 2 * math.Pi / math.Sqrt(stiff)
	z := byKey(t, res, "decay.period_zero")
	t.Logf("small swings: %.5f s ± %.5f, by the linearised equation %.5f; seen from %.1f° to %.1f°", z.Value, z.U, want, res.AmplitudeStart/deg, res.AmplitudeEnd/deg)
	near(t, z, want, 3)
	if z.U > 0.01 {
		t.Errorf("small swings are uncertain by %g s", z.U)
	}
	near(t, byKey(t, res, "decay.viscous"), viscous, 3)
	near(t, byKey(t, res, "decay.drag"), drag, 3)

	// Without the magnets' places nothing is said of small swings.
	opt.pulls = nil
	if res, err = Analyze(t.Context(), s, opt); err != nil || !res.Found {
		t.Fatal(err)
	}
	if z := byKey(t, res, "decay.period_zero"); z.Kind != finding.Undecided {
		t.Errorf("small swings were made up: %+v", z)
	}
}
