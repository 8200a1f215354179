package toy

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"lodeswing/analyze/ode/odetest"
	"lodeswing/track/rig"
)

// A double pendulum, one part riding on another, against SciPy with Lagrange's
// equations of the textbook written out there and another method (Radau).
func TestDoublePendulumAgainstSciPy(t *testing.T) {
	out := odetest.SciPy(t, `
import numpy as np
from scipy.integrate import solve_ivp
m1, m2, l1, l2, g = 0.1, 0.07, 0.2, 0.15, 9.81
def f(t, y):
    a, b, u, v = y          # angles from the vertical, and rates
    s, c = np.sin(a-b), np.cos(a-b)
    M = np.array([[(m1+m2)*l1*l1, m2*l1*l2*c], [m2*l1*l2*c, m2*l2*l2]])
    r = np.array([-m2*l1*l2*s*v*v - (m1+m2)*g*l1*np.sin(a), m2*l1*l2*s*u*u - m2*g*l2*np.sin(b)])
    return [u, v, *np.linalg.solve(M, r)]
r = solve_ivp(f, (0, 2), [1.1, -0.6, 0, 2], method='Radau', rtol=1e-11, atol=1e-12)
print(*["%.15g" % x for x in r.y[:, -1]])
`)
	m := mustNew(t, &rig.Rig{
		Name: "double", Gravity: number(9.81),
		Parts: []rig.Part{
			{Name: "upper", Joint: "hinge", PivotM: []float64{0.3, 0.1}, CentreM: []float64{0, -0.2}, MassKg: number(0.1)},
			{Name: "lower", On: "upper", Joint: "hinge", PivotM: []float64{0, -0.2}, CentreM: []float64{0, -0.15}, MassKg: number(0.07)},
		},
	})
	y := m.Rest()
	m.SetAngle(y, 0, 1.1, 0)
	m.SetAngle(y, 1, -0.6, 2)
	if err := m.Run(t.Context(), 0, y, 2, Options{Tol: 1e-12}, nil, nil); err != nil {
		t.Fatal(err)
	}
	a, u := m.Angle(y, 0)
	b, v := m.Angle(y, 1)
	got := []float64{a, b, u, v}
	for i, w := range strings.Fields(out) {
		want, err := strconv.ParseFloat(w, 64)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(got[i]-want) > 1e-7 {
			t.Errorf("component %d: %.11f, SciPy %.11f", i, got[i], want)
		}
	}
}

// A spherical pendulum keeps its vertical angular momentum and goes round a cone
// at the rate √(mgl/(I cos φ)) when it has no spin about its own axis (H.
// Goldstein, "Classical Mechanics", the heavy symmetrical top).
func TestConicalPendulum(t *testing.T) {
	r := pendulum()
	r.Parts[0].Joint = "ball"
	const inertia = 0.1*0.25*0.25 + 1e-4
	r.Parts[0].Inertia = number(inertia)
	r.Parts[0].SpinInertia = number(1e-4)
	m := mustNew(t, r)
	const polar = 0.6
	rate := math.Sqrt(0.1 * 9.81 * 0.25 / (inertia * math.Cos(polar)))
	y := m.Rest()
	m.SetBall(y, 0, polar, 0.3, 0, rate, 0)
	o := simulate(t, m, y, 5, Options{Tol: 1e-12})
	for _, at := range []float64{1, 2.7, 5} {
		o.At(at, y)
		p, azimuth, pr, ar, _ := m.Ball(y, 0)
		if math.Abs(p-polar) > 1e-8 || math.Abs(math.Remainder(azimuth-0.3-rate*at, 2*math.Pi)) > 1e-7 || math.Abs(pr) > 1e-7 || math.Abs(ar-rate) > 1e-6 {
			t.Errorf("at %g s: polar %.10f, azimuth %.8f, rates %.2g and %.8f", at, p, azimuth, pr, ar)
		}
	}
}

// SetBall and Ball are each other's inverse.
func TestBallAngles(t *testing.T) {
	r := pendulum()
	r.Parts[0].Joint = "ball"
	m := mustNew(t, r)
	y := m.Rest()
	for _, c := range [][5]float64{{0.3, 1, 0.5, -2, 3}, {2.5, -2, -1, 1, 0}, {1e-3, 3, 2, 4, -5}} {
		m.SetBall(y, 0, c[0], c[1], c[2], c[3], c[4])
		p, a, pr, ar, s := m.Ball(y, 0)
		for i, got := range []float64{p, a, pr, ar, s} {
			if math.Abs(got-c[i]) > 1e-9 {
				t.Errorf("%v came back as %v %v %v %v %v", c, p, a, pr, ar, s)
				break
			}
		}
	}
}

// A steady top hung from its tip: a fast spin makes the slow precession
// m g l / (I_s ω) (Goldstein, heavy symmetrical top), for a small tilt.
func TestPrecession(t *testing.T) {
	r := pendulum()
	r.Parts[0].Joint = "ball"
	r.Parts[0].SpinInertia = number(2e-3)
	r.Parts[0].Inertia = number(0.1*0.25*0.25 + 1e-3)
	m := mustNew(t, r)
	const spin, polar = 400.0, 0.4
	slow := 0.1 * 9.81 * 0.25 / (2e-3 * spin)
	y := m.Rest()
	// Precess at the steady rate from the start, so that it does not nod. Hanging, it
	// goes round against its spin seen from above.
	m.SetBall(y, 0, polar, 0, 0, -slow, spin)
	o := simulate(t, m, y, 2, Options{Tol: 1e-11})
	o.At(2, y)
	p, azimuth, _, _, _ := m.Ball(y, 0)
	if math.Abs(p-polar) > 5e-3 || math.Abs(azimuth/(-slow*2)-1) > 0.01 {
		t.Errorf("polar %.5f, precessed by %.5f rad, want %.5f", p, azimuth, -slow*2)
	}
}
