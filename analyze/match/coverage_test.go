package match

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/track/rig"
)

var longUnits = flag.Int("units", 334, "units of each toy in the long coverage run")

// drawn is a unit as it might have come from the workshop: each number that the
// rig gives with an uncertainty is drawn from it, so that what the rig says is
// off by as much as it admits.
func drawn(t testing.TB, r *rig.Rig, seed uint64) *rig.Rig {
	t.Helper()
	rnd := rand.New(rand.NewPCG(seed, 77))
	c := r.Clone()
	place := func(x []float64, u float64) {
		x[0] += u * rnd.NormFloat64()
		x[len(x)-1] += u * rnd.NormFloat64()
	}
	for i := range c.Parts {
		p := &c.Parts[i]
		p.MassKg.V += p.MassKg.U * rnd.NormFloat64()
		p.Inertia.V += p.Inertia.U * rnd.NormFloat64()
		place(p.CentreM, 0.5e-3)
		if i > 0 {
			place(p.PivotM, 0.5e-3)
		}
		if s := &p.Spring; s.Rate.Set || s.Rate.Fit {
			s.RestRad.V += s.RestRad.U * rnd.NormFloat64()
		}
	}
	for i := range c.Magnets {
		place(c.Magnets[i].AtM, 0.5e-3)
		slanted(&c.Magnets[i], "turn", uAxis*rnd.NormFloat64())
	}
	for i := range c.Bobs {
		place(c.Bobs[i].AtM, 0.5e-3)
	}
	g := 9.80665
	c.Gravity = rig.Value{V: g + 0.01*rnd.NormFloat64(), Set: true}
	return c
}

// coverage matches units drawn from the rig's uncertainties with the rig as it
// stands, and counts how often the 95 % interval of a number asked for holds its
// truth.
func coverage(t *testing.T, name string, units int, seconds float64) (inside, all int) {
	r := sample(t, name)
	for seed := range uint64(units) {
		unit := drawn(t, r, seed)
		tr := simulate(t, unit, take{seconds: seconds, noise: 0.05, seed: seed + 100, lens: rand.New(rand.NewPCG(seed, 78))})
		res, err := Run(context.Background(), []Clip{{Track: tr}}, r, Options{Quick: true})
		if err != nil {
			t.Errorf("%s, unit %d: %v", name, seed, err)
			continue
		}
		if !res.Converged {
			t.Logf("%s, unit %d did not settle: %s", name, seed, res.Fits[0].Why)
			continue
		}
		for _, e := range res.Estimates {
			if !e.Asked {
				continue
			}
			n, err := unit.Find(e.Address)
			if err != nil {
				t.Fatal(err)
			}
			all++
			if math.Abs(e.Value-n.Value.V) < 1.96*e.U {
				inside++
			} else if testing.Verbose() {
				t.Logf("%s, unit %d: %s %.5g ± %.2g, truth %.5g (%.1f u)", name, seed, e.Address, e.Value, e.U, n.Value.V, (e.Value-n.Value.V)/e.U)
			}
		}
	}
	t.Logf("%s: %d of %d 95 %% intervals hold the truth (%.1f %%)", name, inside, all, 100*float64(inside)/float64(all))
	return inside, all
}

// Coverage of the 95 % intervals where all that the rig and the camera are unsure of is
// drawn anew for each unit (JCGM 101). With so few units the share may lie between 80
// and 100 %. Measured with -long on 10 s clips: lantern 957 of 1,002 (95.5 %, 334
// clips), gull 945 of 1,002 (94.3 %, 334 clips), buoys 282 of 303 (93.1 %, stopped
// after 104 clips, of which 3 did not settle and told nothing); pooled 94.7 %.
func TestCoverage(t *testing.T) {
	units := 12
	if *long {
		units = *longUnits
	}
	inside, all := 0, 0
	names := []string{"lantern"}
	if *long {
		names = append(names, "buoys", "gull")
	}
	for _, name := range names {
		t.Run(name, func(t *testing.T) {
			i, n := coverage(t, name, units, 10)
			inside, all = inside+i, all+n
		})
	}
	share := float64(inside) / float64(all)
	lo, hi := 0.80, 1.0
	if *long {
		lo, hi = 0.93, 0.97
	}
	if share < lo || share > hi {
		t.Errorf("%.1f %% of the intervals hold the truth", 100*share)
	}
}
