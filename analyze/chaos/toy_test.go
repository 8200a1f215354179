package chaos

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"lodeswing/analyze/recurrence"
	"lodeswing/analyze/spectrum"
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
	b, err := OfDrivenToy(ctx, m, start, Run{Duration: 200})
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

// harbour names a toy of the demo workshop.
func harbour(name string) string { return filepath.Join("..", "..", "samples", name+".toml") }

func openToy(t testing.TB, path string) (*toy.Model, []float64) {
	t.Helper()
	m, err := toy.New(openRig(t, path))
	if err != nil {
		t.Fatal(err)
	}
	start, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	return m, start
}

func openRig(t testing.TB, path string) *rig.Rig {
	t.Helper()
	r, err := rig.Load(path)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// watch returns where the bobs are, at steps dt from a time on.
func watch(t testing.TB, m *toy.Model, start []float64, from, dt float64, n int) [][][3]float64 {
	t.Helper()
	times := make([]float64, n)
	for i := range times {
		times[i] = dt * float64(i)
	}
	start = append([]float64(nil), start...)
	if from > 0 {
		if err := m.Run(context.Background(), 0, start, from, toy.Options{}, nil, nil); err != nil {
			t.Fatal(err)
		}
	}
	out := make([][][3]float64, n)
	if err := m.Sample(context.Background(), start, times, toy.Options{}, func(i int, s []float64) {
		out[i] = append([][3]float64(nil), m.Positions(s, nil)...)
	}); err != nil {
		t.Fatal(err)
	}
	return out
}

// The exponent of a chaotic toy from 300 s of positions (more than 300 passes)
// against its model's own over the same time, within 20 %, though it is lost
// within a turn.
func TestToyData(t *testing.T) {
	const dt, seconds, from = 1. / 30, 300.0, 60.0
	m, start := openToy(t, filepath.Join("testdata", "thrown.toml"))
	e, err := OfDrivenToy(context.Background(), m, start, Run{Transient: from, Duration: seconds})
	if err != nil {
		t.Fatal(err)
	}
	n := int(seconds / dt)
	x, y, z, times := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i, p := range watch(t, m, start, from, dt, n) { // the deck, and the arm from ball to ball
		x[i], y[i], z[i], times[i] = p[0][0], p[1][0]-p[2][0], p[1][2]-p[2][2], dt*float64(i)
	}
	lines, err := spectrum.Compute(times, x, nil, spectrum.Options{MaxLines: 1, Spare: -1})
	if err != nil {
		t.Fatal(err)
	}
	period := 1 / lines.Lines[0].Frequency / dt
	v, err := recurrence.Embed(0, dt, 2, int(math.Round(period/8)), x, y, z)
	if err != nil {
		t.Fatal(err)
	}
	d, err := Diverge(v, DivergenceOptions{Period: period})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("data %.3f ± %.3f, model %.3f ± %.3f per s (%+.0f %%), %.0f turns, %s", d.Exponent.V, d.Exponent.U, e.L[0].V, e.L[0].U, 100*(d.Exponent.V/e.L[0].V-1), d.Orbits, d.Why)
	if !d.Found || math.Abs(d.Exponent.V-e.L[0].V) > 0.2*e.L[0].V {
		t.Errorf("data %v, model %v", d.Exponent, e.L[0])
	}
}
