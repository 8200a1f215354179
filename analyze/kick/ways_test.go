package kick

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// number is a rig's number that is known exactly enough for a test.
func number(x float64) rig.Value { return rig.Value{V: x, U: 1e-9 * x, Set: true} }

// frictions sets what the gull's pivot does.
func withFriction(r *rig.Rig, viscous, drag, dry float64) {
	f := &r.Parts[0].Friction
	f.Viscous, f.Drag, f.Dry = number(viscous), number(drag), number(dry)
	r.Parts[0].Friction.Viscous.Fit, r.Parts[0].Friction.Drag.Fit, r.Parts[0].Friction.Dry.Fit = true, true, true
}

// kickedBy films the gull with a coil whose kick at the n-th pass is kick(n,
// rightward); it acts at once.
func kickedBy(t testing.TB, r *rig.Rig, seed uint64, start, noise, lean, seconds float64, kick func(n int, right bool) float64) series.Angle {
	t.Helper()
	r.Coils[0].WidthM = rig.Value{}
	m := model(t, r)
	at, err := m.Index("coil.kick")
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(seed, 7))
	y := m.Rest()
	m.SetAngle(y, 0, start, 0)
	var ts, as, us []float64
	n, was := 0, -1.0
	for i := 0; float64(i) < 60*seconds; i++ {
		a, v := m.Angle(y, 0)
		ts, as, us = append(ts, float64(i)/60), append(as, a+lean+noise*rng.NormFloat64()), append(us, noise)
		if s := math.Copysign(1, a); s != was && i > 0 {
			n, was = n+1, s
		}
		m.Set(at, kick(n, v > 0))
		o, err := m.Simulate(context.Background(), y, 1.0/60, toyOptions)
		if err != nil {
			t.Fatal(err)
		}
		o.At(1.0/60, y)
	}
	a, err := series.FromTable("swing", ts, as, us)
	if err != nil {
		t.Fatal(err)
	}
	a.Shared = []series.Shared{{Source: "vertical", D: make([]float64, len(a.T))}}
	for i := range a.Shared[0].D {
		a.Shared[0].D[i] = 0.0005
	}
	return a
}

func analyzed(t testing.TB, r *rig.Rig, a series.Angle) *Result {
	t.Helper()
	res, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(r, "swing", nil))
	if err != nil {
		t.Fatal(err)
	}
	return res
}

func states(res *Result) map[State]int {
	n := map[State]int{}
	for _, p := range res.Passes {
		n[p.State]++
	}
	return n
}

// At the steady amplitude kick equals loss, and that is all that shows.
func TestSteadyAmplitudeSeparatesNothing(t *testing.T) {
	r := gull(t)
	m := model(t, r)
	for seed := range uint64(12) {
		a, _ := filmed(t, m, rand.New(rand.NewPCG(seed, 3)), 0.42265, pictures, 0.001, []phase{{seconds: 30}})
		res := analyzed(t, r, a)
		if res.Separated || !math.IsNaN(res.Kick) {
			t.Errorf("seed %d: separated by %d: kick %.4g ± %.2g mJ", seed, res.How, 1e3*res.Kick, 1e3*res.UKick)
		}
		if f := find(res, "kick.energy"); f == nil || f.Kind != "undecided" {
			t.Errorf("seed %d: %+v", seed, f)
		}
	}
}

// The closed-form balances of a small swing: a pass takes π/2·c₁ωA² by viscous
// friction, 4/3·c₂ω²A³ by air drag, 2τA by dry friction (the work of each along a
// sine's half period), and at the steady amplitude the kick.
func TestClosedFormBalances(t *testing.T) {
	const amp, kick = 0.08, 8e-6
	r := gull(t)
	w := math.Sqrt(0.046 * 9.80665 * 0.128 / 8.2e-4)
	for _, c := range []struct {
		name               string
		viscous, drag, dry float64
	}{
		{"viscous", kick / (math.Pi / 2 * w * amp * amp), 0, 0},
		{"air drag", 0, kick / (4.0 / 3 * w * w * amp * amp * amp), 0},
		{"dry", 0, 0, kick / (2 * amp)},
	} {
		withFriction(r, c.viscous, c.drag, c.dry)
		a := kickedBy(t, r, 5, 0.7*amp, 5e-6, 0, 40, func(n int, _ bool) float64 {
			if n >= 70 && n < 90 {
				return 0 // the battery out for a while
			}
			return kick
		})
		o := OptionsFor(r, "swing", nil)
		clip := Clip{Angle: a, OffFromS: passTime(a, 69), OffToS: passTime(a, 89)}
		res, err := Analyze(context.Background(), []Clip{clip}, o)
		if err != nil {
			t.Fatal(err)
		}
		f := find(res, "kick.steady_amplitude")
		if f == nil || f.Kind != "" || math.Abs(f.Value/amp-1) > 2e-3+3*f.U/amp {
			t.Errorf("%s: steady amplitude %+v, closed form %g", c.name, f, amp)
		}
		if !res.Separated || math.Abs(res.Kick/kick-1) > 0.01 {
			t.Errorf("%s: kick %.4g ± %.2g, truth %.4g (separated %v)", c.name, res.Kick, res.UKick, kick, res.Separated)
		}
		k, l := res.Amplitude, 0.0
		l += math.Pi/2*c.viscous*w*k*k + 4.0/3*c.drag*w*w*k*k*k + 2*c.dry*k
		if math.Abs(res.Loss/l-1) > 0.01 {
			t.Errorf("%s: loss %.4g ± %.2g, closed form %.4g", c.name, res.Loss, res.ULoss, l)
		}
	}
}

// passTime is the time at which the angle has changed sign n times, and a bit.
func passTime(a series.Angle, n int) float64 {
	for i := 1; i < len(a.T); i++ {
		if a.Angle[i]*a.Angle[i-1] < 0 {
			if n--; n < 0 {
				return a.T[i] - 0.1
			}
		}
	}
	return a.T[len(a.T)-1]
}

func TestMissedDoubleAndIntermittentKicks(t *testing.T) {
	r := gull(t)
	missed := map[int]bool{12: true, 30: true, 31: true, 55: true}
	a := kickedBy(t, r, 1, 0.2, pictures, 0.0005, 30, func(n int, _ bool) float64 {
		switch {
		case missed[n]:
			return 0
		case n == 40:
			return 2.2e-4
		}
		return 1.1e-4
	})
	res := analyzed(t, r, a)
	if n := states(res); n[Missed] != 4 || n[Double] != 1 || n[Odd] != 0 {
		t.Errorf("single misses: %v, want 4 missed and 1 double", n)
	}
	if !res.Separated || math.Abs(res.Kick/1.1e-4-1) > 0.03 {
		t.Errorf("single misses: kick %.4g ± %.2g", res.Kick, res.UKick)
	}
	// A coil that fires at some passes only, in no order.
	rng := rand.New(rand.NewPCG(9, 9))
	fires := make([]bool, 200)
	none := 0
	for i := range fires {
		fires[i] = rng.Float64() < 0.6
	}
	a = kickedBy(t, r, 2, 0.25, pictures, 0.0005, 30, func(n int, _ bool) float64 {
		if fires[n] {
			return 1.6e-4
		}
		return 0
	})
	res = analyzed(t, r, a)
	n := states(res)
	for i := range len(res.Passes) {
		if !fires[i+1] {
			none++
		}
	}
	if math.Abs(float64(n[Missed]-none)) > 2 || math.Abs(res.Kick/1.6e-4-1) > 0.03 {
		t.Errorf("intermittent: %v, want about %d missed; kick %.4g ± %.2g", n, none, res.Kick, res.UKick)
	}
}

func TestDirectionAndFading(t *testing.T) {
	r := gull(t)
	offAfter := 50
	a := kickedBy(t, r, 3, 0.25, pictures, 0.0005, 30, func(n int, right bool) float64 {
		switch {
		case n > offAfter:
			return 0
		case right:
			return 1.2e-4
		}
		return 1.0e-4
	})
	res := analyzed(t, r, a)
	f := find(res, "kick.by_direction")
	if f == nil || math.Abs(f.Value-0.2/1.1) > 3*f.U || f.U > 0.03 || len(f.Cautions) == 0 {
		t.Errorf("by direction %+v, truth %.3f", f, 0.2/1.1)
	}
	if n := states(res); n[Off] < 20 {
		t.Errorf("the coil's end was not found: %v", n)
	}
	a = kickedBy(t, r, 4, 0.25, pictures, 0.0005, 30, func(n int, _ bool) float64 {
		if n > offAfter {
			return 0
		}
		return 1.1e-4 * (1.1 - 0.2*float64(n)/float64(offAfter))
	})
	res = analyzed(t, r, a)
	f = find(res, "kick.fading")
	if f == nil || math.Abs(f.Value+0.2) > 0.02 || f.U > 0.02 {
		t.Errorf("fading %+v, truth −0.2", f)
	}
	// An even coil shows neither.
	a = kickedBy(t, r, 5, 0.25, pictures, 0.0005, 30, func(n int, _ bool) float64 {
		if n > offAfter {
			return 0
		}
		return 1.1e-4
	})
	res = analyzed(t, r, a)
	for _, key := range []string{"kick.by_direction", "kick.fading"} {
		if f := find(res, key); math.Abs(f.Value) > 3.5*f.U {
			t.Errorf("%s of an even coil %+v", key, f)
		}
	}
}

// A coil that does nothing.
func TestIdleCoil(t *testing.T) {
	r := gull(t)
	res := analyzed(t, r, kickedBy(t, r, 6, 0.4, pictures, 0, 30, func(int, bool) float64 { return 0 }))
	f := find(res, "kick.energy")
	if !res.Idle || f == nil || f.Kind != "upper limit" || f.Hi > 2e-5 {
		t.Errorf("idle %v, %+v", res.Idle, f)
	}
}
