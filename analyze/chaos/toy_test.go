package chaos

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

const doublePendulum = `
name = "double"
[scale]
length_mm = 100
ends_px = [[0, 0], [100, 0]]
[[bob]]
name = "low"
look = "dark"
diameter_mm = 10
part = "lower"
at_mm = [0, -100]
[[part]]
name = "upper"
joint = "hinge"
pivot_mm = [0, 0]
mass_g = 50
centre_mm = [0, -60]
inertia_g_mm2 = 2.2e5
friction = { viscous = 0, drag = 0, dry = 0 }
[[part]]
name = "lower"
on = "upper"
joint = "hinge"
pivot_mm = [0, -100]
mass_g = 40
centre_mm = [0, -60]
inertia_g_mm2 = 1.8e5
friction = { viscous = 0, drag = 0, dry = 0 }
`

// The exponent of a frictionless double pendulum by the variational equations and
// by a second motion beside the first: two ways, one number.
func TestToyExponents(t *testing.T) {
	r, err := rig.Parse("double.toml", []byte(doublePendulum))
	if err != nil {
		t.Fatal(err)
	}
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	start := m.Rest()
	m.SetAngle(start, 0, 1.9, 0)
	m.SetAngle(start, 1, 2.3, 0)
	ctx := context.Background()
	v, err := OfToy(ctx, m, start, Run{Count: 4, Duration: 100, Every: 0.1, Tol: 1e-9})
	if err != nil {
		t.Fatal(err)
	}
	b, err := OfDrivenToy(ctx, m, 0, start, Run{Duration: 100})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("variational %.4v, side by side %.4v", v.L, b.L)
	if v.L[0].V < 10*v.L[0].U {
		t.Errorf("no chaos: %v", v.L)
	}
	near(t, "exponent side by side", b.L[0].V, v.L[0].V, 4*math.Hypot(v.L[0].U, b.L[0].U))
	// Nothing is lost: exponents come in pairs of opposite sign.
	near(t, "sum of the exponents", v.L[0].V+v.L[1].V+v.L[2].V+v.L[3].V, 0, 0.01)
	near(t, "outer pair", v.L[0].V+v.L[3].V, 0, 0.02*v.L[0].V)
}

// The beacon's exponent from 300 passes of data against the model's own.
func TestBeaconData(t *testing.T) {
	r, err := rig.Load(filepath.Join("..", "..", "samples", "beacon.toml"))
	if err != nil {
		t.Fatal(err)
	}
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	start, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	ctx := context.Background()
	e, err := OfDrivenToy(ctx, m, 0, start, Run{Transient: 60, Duration: 1500})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("model: %.4v", e.L)
	const dt = 1. / 30
	n := int(300 / dt)
	times := make([]float64, n)
	for i := range times {
		times[i] = 60 + dt*float64(i)
	}
	x, y := make([]float64, n), make([]float64, n)
	var at [][3]float64
	if err := m.Sample(ctx, start, times, toy.Options{}, func(i int, s []float64) {
		at = m.Positions(s, at)
		x[i], y[i] = at[0][0], at[0][1]
	}); err != nil {
		t.Fatal(err)
	}
	d, err := MutualInformation(x, dt, 60)
	if err != nil {
		t.Fatal(err)
	}
	f, err := FalseNeighbours(x, d.Samples, 8, 40)
	if err != nil {
		t.Fatal(err)
	}
	t.Log(d.Samples, d.Why, f.Dim, f.False)
}
