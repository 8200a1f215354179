package toy

import (
	"context"
	"math"
	"testing"

	"lodeswing/track/rig"
)

// A turning arm's magnet meets a fixed one that repels it: the arm passes when
// its energy is above the hill and is thrown back below. Balanced about its pin,
// without friction, the threshold speed is √(2ΔU/I), with U of two dipoles in
// closed form: side by side and parallel, μ₀m²/(4πd³) at the nearest, and far
// off at the start.
func TestFerryThreshold(t *testing.T) {
	const moment, inertia, arm, gap = 0.5, 2.6e-5, 0.045, 0.02
	r := &rig.Rig{
		Name: "ferry",
		Parts: []rig.Part{{
			Name: "arm", Joint: "pin", PivotM: []float64{0, 0}, CentreM: []float64{0, 0}, MassKg: number(0.012), Inertia: number(inertia),
		}},
		Magnets: []rig.Magnet{
			{Name: "ball", Part: "arm", AtM: []float64{0, -arm}, Axis: []float64{0, 1, 0}, Moment: number(moment)},
			{Name: "quay", Part: "base", AtM: []float64{0, -arm - gap}, Axis: []float64{0, 1, 0}, Moment: number(moment)},
		},
	}
	m := mustNew(t, r)
	const start = -2.5
	// Both moments lie along y, the pin's axis, so U = μ₀m²/(4πd³) all round.
	u := func(angle float64) float64 {
		x, z := arm*math.Sin(angle), -arm*math.Cos(angle)+arm+gap
		return 1.25663706212e-6 / (4 * math.Pi) * moment * moment / math.Pow(x*x+z*z, 1.5)
	}
	want := math.Sqrt(2 * (u(0) - u(start)) / inertia)
	passes := func(speed float64) bool {
		y := m.Rest()
		m.SetAngle(y, 0, start, speed)
		if err := m.Run(context.Background(), 0, y, 2*math.Abs(start)/speed+3, Options{Tol: 1e-12}, nil, nil); err != nil {
			t.Fatal(err)
		}
		a, _ := m.Angle(y, 0)
		return a > 0
	}
	lo, hi := 0.5*want, 1.5*want
	for range 40 {
		mid := (lo + hi) / 2
		if passes(mid) {
			hi = mid
		} else {
			lo = mid
		}
	}
	if math.Abs(hi/want-1) > 1e-8 {
		t.Errorf("the arm passes from %.10f rad/s, by energy %.10f rad/s", hi, want)
	}
}
