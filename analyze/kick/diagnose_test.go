package kick

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/track/rig"
)

// unit is one simulated unit: factors on the gull's kick and frictions.
type unit struct{ kick, viscous, dry float64 }

// withOff is the inspector's clip: 24 s with the battery in, 6 s with it out.
var withOff = []phase{{seconds: 24}, {seconds: 6, off: true}}

func (u unit) rig(t testing.TB) *rig.Rig {
	r := gull(t)
	r.Coils[0].KickJ.V *= u.kick
	r.Parts[0].Friction.Viscous.V *= u.viscous
	r.Parts[0].Friction.Dry.V *= u.dry
	return r
}

func (u unit) ledger(t testing.TB, rng *rand.Rand, phases []phase, start float64) *Result {
	r := u.rig(t)
	a, _ := filmed(t, model(t, r), rng, start*(1+0.02*rng.NormFloat64()), pictures, 0.002*rng.NormFloat64(), phases)
	res, err := Analyze(context.Background(), []Clip{{Angle: a}}, OptionsFor(r, "swing", nil))
	if err != nil {
		t.Fatal(err)
	}
	return res
}

// seated is a unit whose kick and loss scatter by 2 % from seat to seat.
func seated(rng *rand.Rand, kick, loss float64) unit {
	l := loss * (1 + 0.02*rng.NormFloat64())
	return unit{kick * (1 + 0.02*rng.NormFloat64()), l, l}
}

func reference(t testing.TB, family uint64) Reference {
	t.Helper()
	rng := rand.New(rand.NewPCG(100, family))
	var good []*Result
	for range 20 {
		good = append(good, seated(rng, 1, 1).ledger(t, rng, withOff, 0.42))
	}
	ref, err := ReferenceFrom(good)
	if err != nil {
		t.Fatal(err)
	}
	return ref
}

// Weak drives (−15 %) and more loss (+15 %) are told apart in 99 % of units, and
// at most 1 % of good units are rejected; "measure again" counts as not told.
// With -long 2,001 units of each of four families of seeds, each with twenty
// reference units of its own, none of them used in finding the limits; the table
// is printed. Measured so, of 667 each: weak drive told 667, 667, 667, 667; more loss
// 666, 667, 667, 667, one told wrong; good units rejected 3, 0, 1, 1, to be measured
// again 14, 7, 3, 2.
func TestUnitsAreToldApart(t *testing.T) {
	runs, families := 16, []uint64{1}
	if *long {
		runs, families = 667, []uint64{1009, 2003, 3001, 4001}
	}
	kinds := []struct {
		name       string
		kick, loss float64
		want       string
	}{{"good", 1, 1, "Nothing is wrong"}, {"weak drive", 0.85, 1, "Reject: drive weak"}, {"more loss", 1, 1.15, "Reject: more loss"}}
	for _, family := range families {
		ref := reference(t, family)
		for k, c := range kinds {
			told, rejected, again := 0, 0, 0
			for seed := range uint64(runs) {
				rng := rand.New(rand.NewPCG(seed, 16+family+uint64(k)*100_000))
				d := Diagnose(seated(rng, c.kick, c.loss).ledger(t, rng, withOff, 0.42), ref)
				switch {
				case strings.HasPrefix(d.Verdict, c.want) && !strings.Contains(d.Verdict, "And:"):
					told++
				case !d.Told:
					again++
				default:
					rejected++
				}
			}
			t.Logf("family %d, %-10s of %d: told right %d, told wrong %d, measure again %d", family, c.name, runs, told, rejected, again)
			if c.name != "good" && float64(told) < 0.99*float64(runs) || c.name == "good" && float64(rejected) > 0.01*float64(runs) {
				t.Errorf("%s: told right %d, wrong %d, again %d of %d", c.name, told, rejected, again, runs)
			}
		}
	}
}

func TestDiagnoses(t *testing.T) {
	ref := reference(t, 1)
	rng := rand.New(rand.NewPCG(7, 7))
	steady := []phase{{seconds: 30}}
	for _, c := range []struct {
		name   string
		unit   unit
		phases []phase
		start  float64
		want   []string
	}{
		// The same steady amplitude as a good unit's, by a weak coil in a free bearing.
		{"trap", unit{0.85, 0.85, 0.85}, withOff, 0.42, []string{"Reject: drive weak", "reference cell"}},
		{"trap at one amplitude", unit{0.85, 0.85, 0.85}, steady, 0.42265, []string{"cannot tell", "battery out"}},
		{"dead", unit{0, 1, 1}, withOff, 0.42, []string{"Reject: drive dead"}},
		{"dry bearing", unit{1, 1, 9}, withOff, 0.42, []string{"bearing drag (dry)"}},
		{"strong", unit{1.2, 1, 1}, withOff, 0.42, []string{"Nothing is wrong", "drive strong"}},
	} {
		d := Diagnose(c.unit.ledger(t, rng, c.phases, c.start), ref)
		for _, w := range c.want {
			if !strings.Contains(d.Verdict, w) {
				t.Errorf("%s: %q lacks %q; causes %+v", c.name, d.Verdict, w, d.Causes)
			}
		}
	}
}

// A reference cell in a unit that kicks 15 % too little: if the cell was weak, the
// kick rises by 1/0.85, else it stays.
func TestSwapSplitsTheGroup(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	before := unit{0.85, 1, 1}.ledger(t, rng, withOff, 0.42)
	for _, c := range []struct {
		kick float64
		want string
	}{{1, "The fault was in the cell"}, {0.85, "The fault was not in the cell"}, {0.893, "cannot tell"}} {
		after := unit{c.kick, 1, 1}.ledger(t, rng, withOff, 0.42)
		a, b := before.At(0.4), after.At(0.4)
		u := math.Sqrt(a.VarKick/a.Kick/a.Kick + b.VarKick/b.Kick/b.Kick)
		if said, p := Swap(b.Kick/a.Kick-1, u, Cell, "kick"); !strings.Contains(said, c.want) || p < 0 || p > 1 {
			t.Errorf("kick %g: %s (%g)", c.kick, said, p)
		}
	}
}
