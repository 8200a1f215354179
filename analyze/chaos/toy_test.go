package chaos

import (
	"context"
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
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

// The workshop's two chaotic toys from more than 300 passes at 60 frames/s with the
// noise of a film: told chaotic, their exponent within 20 % of their model's own.
func TestToyData(t *testing.T) {
	const lead, rate, noise = 20.0, 60.0, 3e-4
	opt := toy.Options{Tol: 1e-9}
	for _, c := range []struct {
		name    string
		seconds float64
		lasting float64 // the least exponent, 1/s, of a path that stays chaotic
	}{
		{"ferry", 170, 1}, // lost within a turn; some of its paths fall into step after 100 to 600 s
		{"beacon", 560, 0.1},
	} {
		r := openRig(t, harbour(c.name))
		m, err := toy.New(r)
		if err != nil {
			t.Fatal(err)
		}
		for try := 0; ; try++ {
			if try == 5 {
				t.Fatalf("%s: no path of five stays chaotic", c.name)
			}
			starts := slices.Clone(r.Start)
			starts[0].AngleRad.V += 0.01 * float64(try)
			start, err := m.StartFrom(starts)
			if err != nil {
				t.Fatal(err)
			}
			e, err := OfDrivenToy(t.Context(), m, start, Run{Transient: lead, Duration: c.seconds - 5, Every: 1, Tol: opt.Tol})
			if err != nil {
				t.Fatal(err)
			}
			own := e.L[0]
			if own.V < c.lasting {
				continue
			}
			path, err := m.Simulate(t.Context(), start, max(200, lead+c.seconds), opt) // the exponent's own path, which is 200 s long
			if err != nil {
				t.Fatal(err)
			}
			see := Motion{U: noise, Columns: seen(m, r, path.At, lead, c.seconds, rate)}
			rng := rand.New(rand.NewPCG(5, 6))
			for i := range see.Columns[0] {
				see.T = append(see.T, float64(i)/rate)
				for _, col := range see.Columns {
					col[i] += noise * rng.NormFloat64()
				}
			}
			told, err := Assess(t.Context(), see)
			if err != nil {
				t.Fatal(err)
			}
			d := told.Divergence
			t.Logf("%s: %s %.2f; %d passes, model %.3f ± %.3f per s", c.name, told.Text, told.Confidence, told.Passes, own.V, own.U)
			if told.Kind != Chaotic || told.Passes < 300 {
				t.Errorf("%s: %s: %v", c.name, told.Text, told.Evidence)
				break
			}
			t.Logf("%s: data %.3f ± %.3f (%+.0f %%), %s", c.name, d.Exponent.V, d.Exponent.U, 100*(d.Exponent.V/own.V-1), d.Why)
			if math.Abs(d.Exponent.V-own.V) > 0.2*own.V {
				t.Errorf("%s: data %v, model %v", c.name, d.Exponent, own)
			}
			break
		}
	}
}
