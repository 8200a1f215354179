package compare

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/kick"
	"lodeswing/analyze/series"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

func one(fs ...finding.Finding) Result {
	return Result{Name: "r", Findings: fs, TemperatureC: math.NaN()}
}

func side(name string, rs ...Result) Side { return Side{Name: name, Results: rs} }

// measured has a value, an uncertainty of its own and one of a ruler.
func measured(value, own, ruler float64) finding.Finding {
	f := finding.Normal("kick.energy", "swing", "Energy of one kick", value, math.Hypot(own, ruler), "J", "")
	f.Budget = []finding.Share{{Source: "pictures", U: own}, {Source: "the rig's mass", U: ruler}}
	return f
}

func run(t *testing.T, a, b Side, o Options) []Difference {
	t.Helper()
	d, err := Run(a, b, o)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// Arithmetic of GUM (JCGM 100, 5.2): of x₁ = v₁(1+ε)+e₁, x₂ = v₂(1+ε)+e₂ the
// difference has the variance u₁² + u₂² + (v₂−v₁)²u(ε)².
func TestWhatIsCommonCancels(t *testing.T) {
	const own, rel = 0.001, 0.04
	a, b := measured(1, own, rel*1), measured(1.05, own, rel*1.05)
	d := run(t, side("a", one(a)), side("b", one(b)), Options{SameRig: true})[0]
	want := math.Sqrt(2*own*own + sq(0.05*rel))
	if math.Abs(d.U-want) > 1e-12 || math.Abs(d.D-0.05) > 1e-12 || !d.Apart || d.Alone {
		t.Errorf("%+v, want u = %g", d, want)
	}
	if r := math.Hypot(own*1.05, own); math.Abs(d.URatio-r) > 1e-12 {
		t.Errorf("the ratio's uncertainty is %g, want %g: a common relative error cancels from it", d.URatio, r)
	}
	if len(d.Cancelled) != 1 || d.Cancelled[0].Source != "the rig's mass" {
		t.Errorf("cancelled %+v", d.Cancelled)
	}
	d = run(t, side("a", one(a)), side("b", one(b)), Options{})[0]
	if d.Apart || math.Abs(d.U-math.Hypot(math.Hypot(own, rel), math.Hypot(own, 1.05*rel))) > 1e-12 {
		t.Errorf("rigs that differ: %+v", d)
	}
}

func sq(x float64) float64 { return x * x }

// The interval of the difference holds the truth in 95 % of simulated pairs whose
// scale is wrong alike.
func TestIntervalOfTheDifference(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	const n, own, rel = 2000, 0.004, 0.03
	in := 0
	for range n {
		wrong := 1 + rel*rng.NormFloat64()
		x := 1*wrong + own*rng.NormFloat64()
		y := 1.03*wrong + own*rng.NormFloat64()
		d := run(t, side("a", one(measured(x, own, rel*x))), side("b", one(measured(y, own, rel*y))), Options{SameRig: true})[0]
		if d.Lo <= 0.03 && 0.03 <= d.Hi {
			in++
		}
	}
	if share := float64(in) / n; share < 0.935 || share > 0.965 {
		t.Errorf("intervals hold the truth in %.1f %%", 100*share)
	}
}

// Means of lots: the scatter of the units counts, not how well each was measured.
// Student's 97.5 % points with 8 degrees of freedom: 2.306 (Abramowitz & Stegun,
// table 26.10).
func TestLots(t *testing.T) {
	var a, b Side
	va, vb := []float64{1, 1.02, 0.98, 1.01, 0.99}, []float64{1.1, 1.12, 1.08, 1.11, 1.09}
	for i := range va {
		a.Results = append(a.Results, one(measured(va[i], 0.001, 0)))
		b.Results = append(b.Results, one(measured(vb[i], 0.001, 0)))
	}
	d := run(t, a, b, Options{})[0]
	s := math.Sqrt((2*0.02*0.02 + 2*0.01*0.01) / 4)
	u := math.Sqrt(2 * s * s / 5)
	if math.Abs(d.D-0.1) > 1e-12 || math.Abs(d.U-u) > 1e-12 || math.Abs((d.Hi-d.D)/d.U-2.306) > 2e-3 {
		t.Errorf("%+v, want u = %g, factor %g", d, u, (d.Hi-d.D)/d.U)
	}
}

// A moment of 1 at 20 °C, seen at 10 °C and at 40 °C (−0.12 %/K, common practice).
func TestTemperature(t *testing.T) {
	at := func(c float64) Result {
		r := one(finding.Normal("match.moment", "foot magnet", "Moment", 1-0.0012*(c-20), 0.001, "A·m²", ""))
		r.TemperatureC, r.UTemperatureC = c, 1
		return r
	}
	d := run(t, side("cold", at(10)), side("warm", at(40)), Options{})[0]
	if math.Abs(d.D) > 1e-12 || !d.At20C || d.Apart {
		t.Errorf("%+v", d)
	}
	d = run(t, side("cold", at(10)), side("warm", one(at(40).Findings...)), Options{})[0]
	if len(d.Cautions) == 0 {
		t.Errorf("a temperature on one side only goes unsaid: %+v", d)
	}
}

func TestNothingInCommon(t *testing.T) {
	other := finding.Normal("decay.q", "arm", "Q", 100, 1, "1", "")
	if _, err := Run(side("a", one(measured(1, 0.1, 0))), side("b", one(other)), Options{}); err == nil || !strings.Contains(err.Error(), "no measured number in common") {
		t.Errorf("error %v", err)
	}
	if _, err := Run(Side{}, side("b", one(other)), Options{}); err == nil {
		t.Error("an empty side is no error")
	}
}

// Two windings whose kicks differ by 5 %, on one swing that was weighed to 4 % and
// given 3 % too heavy: the two results alone do not tell them apart, the comparison
// does, and the wrong mass does not show in the ratio.
func TestTwoWindings(t *testing.T) {
	var sides []Side
	for i, k := range []float64{0.11e-3, 0.11e-3 * 1.05} {
		r, err := rig.Load("../../samples/gull.toml")
		if err != nil {
			t.Fatal(err)
		}
		r.Coils[0].KickJ.V = k
		m, err := toy.New(r)
		if err != nil {
			t.Fatal(err)
		}
		a := filmed(t, m, uint64(i))
		r.Parts[0].MassKg.V *= 1.03
		r.Parts[0].MassKg.U = 0.04 * r.Parts[0].MassKg.V
		r.Parts[0].Inertia = rig.Value{}
		res, err := kick.Analyze(context.Background(), []kick.Clip{{Angle: a}}, kick.OptionsFor(r, "swing", nil))
		if err != nil {
			t.Fatal(err)
		}
		sides = append(sides, side("winding", one(res.Findings...)))
	}
	for _, d := range run(t, sides[0], sides[1], Options{SameRig: true}) {
		if d.Key == "kick.energy" {
			if !d.Apart || d.Alone || math.Abs(d.Ratio-0.05) > 2.5*d.URatio || d.URatio > 0.01 {
				t.Errorf("%+v", d)
			}
			return
		}
	}
	t.Error("no kick was compared")
}

// filmed is the model's motion at 60 frames a second: 20 s with the battery, 8 s
// without.
func filmed(t *testing.T, m *toy.Model, seed uint64) series.Angle {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 11))
	y := m.Rest()
	m.SetAngle(y, 0, 0.4, 0)
	var ts, as, us []float64
	z := make([]float64, len(y))
	at := 0.0
	for _, seconds := range []float64{20, 8} {
		o, err := m.Simulate(context.Background(), y, seconds, toy.Options{Undriven: at > 0, Tol: 1e-8})
		if err != nil {
			t.Fatal(err)
		}
		for i := range int(60 * seconds) {
			o.At(float64(i)/60, z)
			angle, _ := m.Angle(z, 0)
			const noise = 6e-5
			ts, as, us = append(ts, at+float64(i)/60), append(as, angle+noise*rng.NormFloat64()), append(us, noise)
		}
		o.At(seconds, y)
		at += seconds
	}
	a, err := series.FromTable("swing", ts, as, us)
	if err != nil {
		t.Fatal(err)
	}
	return a
}
