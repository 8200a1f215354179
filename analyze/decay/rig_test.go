package decay

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
)

func val(v, u float64) rig.Value { return rig.Value{V: v, U: u, Set: true} }

// The gravity check: a point bob gives g; a wrong scale, slow motion that was not
// undone, and mass that sits elsewhere are told apart.
func TestGravityCheck(t *testing.T) {
	const length = 0.25
	k := 9.81 / length
	film := func(scale, slow, inertia float64) series.Angle {
		rng := rand.New(rand.NewPCG(3, 3))
		tr := truth{m: model{sine: true, law: viscous}, p: []float64{0.5, 0, 0, k / inertia, 0.05}, dt: 1.0 / 60, n: 1500}
		ts, ys := tr.record(rng)
		b := track.Bob{Name: "bob", Part: "arm"}
		for i := range ts {
			const s = 1e-4
			b.Samples = append(b.Samples, track.Sample{
				T: ts[i] * slow, X: scale * (length*math.Sin(ys[i]) + s*rng.NormFloat64()), Z: scale * (-length*math.Cos(ys[i]) + s*rng.NormFloat64()),
				Plane: track.Cov{AA: s * s * scale * scale, BB: s * s * scale * scale}, State: track.Seen,
			})
		}
		as, err := series.FromTrack(&track.Track{Bobs: []track.Bob{b}, Cal: track.Calibration{UScale: 0.003, VerticalKnown: true, UVertical: 1e-3, UClock: 50e-6, MetresPerPixel: 5e-4}},
			&rig.Rig{Parts: []rig.Part{{Name: "arm", Joint: "hinge"}}, Bobs: []rig.Bob{{Name: "bob", Part: "arm"}}})
		if err != nil {
			t.Fatal(err)
		}
		return as[0]
	}
	plain := &rig.Rig{Parts: []rig.Part{{Name: "arm", Joint: "hinge"}}, Bobs: []rig.Bob{{Name: "bob", Part: "arm", AtM: []float64{0, -length}}}}
	for _, c := range []struct {
		name                 string
		scale, slow, inertia float64
		rig                  *rig.Rig
		want                 string // in the caution; empty for none
	}{
		{"as it is", 1, 1, 1, plain, ""},
		{"scale 12 % off", 1.12, 1, 1, plain, "likely cause is the scale"},
		{"slow motion × 4", 1, 4, 1, plain, "rate_factor = 4"},
		{"inertia 20 % less", 1, 1, 0.8, plain, "likely cause is inertia"},
		{"inertia 20 % less, no length in the rig", 1, 1, 0.8, &rig.Rig{Parts: plain.Parts}, "or the scale"},
		{"inertia 20 % less, given", 1, 1, 0.8, &rig.Rig{
			Parts: []rig.Part{{Name: "arm", Joint: "hinge", MassKg: val(0.1, 1e-4), CentreM: []float64{0, -0.2}, Inertia: val(0.1*0.2*0.25*0.8, 3e-5)}},
			Bobs:  plain.Bobs,
		}, ""},
	} {
		a := film(c.scale, c.slow, c.inertia)
		r := analyze(t, a, OptionsFor(c.rig, "arm", "bob", nil))
		f := byKey(t, r, "decay.gravity")
		t.Logf("%s: g = %.3f ± %.3f m/s², %q", c.name, f.Value, f.U, f.Cautions)
		got := strings.Join(f.Cautions, " ")
		if c.want == "" && got != "" || !strings.Contains(got, c.want) {
			t.Errorf("%s: caution %q, want %q", c.name, got, c.want)
		}
		if c.want == "" && math.Abs(f.Value-9.81) > 3*f.U {
			t.Errorf("%s: g = %g ± %g", c.name, f.Value, f.U)
		}
	}
}

// What the rig says is taken up: magnets and springs stop the gravity check, a
// coil or a moving magnet the search, a clip's own entry changes that.
func TestOptionsFor(t *testing.T) {
	r := &rig.Rig{
		Parts:   []rig.Part{{Name: "arm", Joint: "hinge"}, {Name: "stem", Joint: "hinge", Upright: true}, {Name: "ball arm", Joint: "hinge", On: "arm"}},
		Magnets: []rig.Magnet{{Name: "bob magnet", Part: "arm"}, {Name: "base magnet", Part: "base"}},
		Coils:   []rig.Coil{{Name: "coil"}},
	}
	if o := OptionsFor(r, "arm", "bob", nil); !strings.Contains(o.NoDecay, "coil") || o.Restoring != Magnets || o.Gravity.Skip == "" {
		t.Errorf("coil on: %+v", o)
	}
	off := &rig.Clip{Battery: false}
	if o := OptionsFor(r, "arm", "bob", off); o.NoDecay != "" || !strings.Contains(o.Gravity.Skip, "base magnet") {
		t.Errorf("coil off: %+v", o)
	}
	out := &rig.Clip{Battery: false, Without: []string{"base magnet"}}
	if o := OptionsFor(r, "arm", "bob", out); o.NoDecay != "" || o.Restoring != Gravity {
		t.Errorf("magnet out: %+v", o)
	}
	if o := OptionsFor(r, "stem", "", off); o.Restoring != Spring || !strings.Contains(o.Gravity.Skip, "spring") {
		t.Errorf("stem: %+v", o)
	}
	if o := OptionsFor(r, "ball arm", "", off); !strings.Contains(o.NoDecay, "moves") {
		t.Errorf("part on part: %+v", o)
	}
	r.Decay.FromS, r.Decay.ToS = val(2, 0), val(9, 0)
	if o := OptionsFor(r, "arm", "bob", nil); o.NoDecay != "" || !o.Told || o.FromS != 2 || o.ToS != 9 {
		t.Errorf("told: %+v", o)
	}
	pair := &rig.Rig{Parts: []rig.Part{{Name: "a", Upright: true}, {Name: "b", Upright: true}}, Magnets: []rig.Magnet{{Name: "1", Part: "a"}, {Name: "2", Part: "b"}}}
	if o := OptionsFor(pair, "a", "", nil); !strings.Contains(o.NoDecay, "modes") {
		t.Errorf("pair: %+v", o)
	}
}

// Springs and magnets bend the restoring law; the period against amplitude
// follows, and the extra terms are taken only where the data want them.
func TestOtherRestoring(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	for _, c := range []struct {
		name   string
		o      Restoring
		powers []int
		beta   []float64
	}{
		{"linear spring", Spring, nil, nil},
		{"hardening spring", Spring, []int{3}, []float64{0.4}},
		{"magnets, even about the rest", Magnets, []int{3, 5}, []float64{0.6, -0.5}},
		{"magnets, one-sided", Magnets, []int{2, 3}, []float64{0.5, 0.3}},
	} {
		m := model{powers: c.powers, law: viscous}
		p := append([]float64{0.5, 0, 0.03, simK}, append(append([]float64{}, c.beta...), 0.06)...)
		tr := truth{m: m, p: p, dt: 1.0 / 60, n: 1800, sigma: 0.001}
		r := analyze(t, tr.angle(t, rng), Options{Restoring: c.o})
		if !r.Found {
			t.Errorf("%s: nothing found", c.name)
			continue
		}
		if c.o == Magnets {
			// Nothing tells how a magnet pulls within the swings that were seen.
			if z := byKey(t, r, "decay.period_zero"); z.Kind != finding.Undecided {
				t.Errorf("%s: small swings were made up: %+v", c.name, z)
			}
		} else {
			near(t, byKey(t, r, "decay.period_zero"), t0, 3)
		}
		near(t, byKey(t, r, "decay.period_at"), periodAt(r.Amplitude)(m, p), 3)
		near(t, byKey(t, r, "decay.zeta"), zetaAt(r.Amplitude)(m, p), 3)
		near(t, byKey(t, r, "decay.rest_angle"), 0.03, 3.5)
		if g := byKey(t, r, "decay.gravity"); g.Kind != finding.Statement {
			t.Errorf("%s: gravity was checked: %+v", c.name, g)
		}
	}
}

// Coloured noise: a camera that sways and a codec that smears. The intervals
// must still hold the truth.
func TestColouredNoise(t *testing.T) {
	runs := 10
	if *long {
		runs = 400
	}
	for _, rho := range []float64{0.5, 0.9} {
		in, all, z2 := 0, 0, 0.0
		rng := rand.New(rand.NewPCG(3, 5))
		for range runs {
			tr := truth{m: model{sine: true, law: viscous}, p: []float64{0.4, 0, 0, simK, 0.06}, dt: 1.0 / 60, n: 1500}
			ts, ys := tr.record(rng)
			const s = 0.003
			e := s * rng.NormFloat64()
			us := make([]float64, len(ts))
			for i := range ys {
				ys[i] += e
				e = rho*e + s*math.Sqrt(1-rho*rho)*rng.NormFloat64()
				us[i] = s
			}
			a, err := series.FromTable("arm", ts, ys, us)
			if err != nil {
				t.Fatal(err)
			}
			a.UClock = 0
			r, err := Analyze(t.Context(), a, Options{})
			if err != nil || !r.Found {
				t.Fatal(err)
			}
			for key, want := range map[string]float64{"decay.period_zero": t0, "decay.zeta": zetaOf(0.06, r.Amplitude)} {
				f := byKey(t, r, key)
				all++
				z := (f.Value - want) / f.U
				z2 += z * z
				if math.Abs(z) < 1.96 {
					in++
				}
			}
		}
		cover := float64(in) / float64(all)
		t.Logf("correlation %.1f from frame to frame: 95 %% intervals hold the truth in %.1f %% of %d, r.m.s. error %.2f u", rho, 100*cover, all, math.Sqrt(z2/float64(all)))
		// Four standard deviations of a binomial count.
		if slack := 4 * math.Sqrt(0.95*0.05/float64(all)); cover < 0.95-slack {
			t.Errorf("correlation %.1f: coverage %.3f", rho, cover)
		}
	}
}
