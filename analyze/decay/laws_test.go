package decay

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/finding"
)

// outcome counts what was said of the laws of many clips.
type outcome struct {
	n, right, undecided, wrong int
	best                       int            // the true law had the largest weight
	said                       map[string]int // chosen laws
}

func (o *outcome) add(t *testing.T, tr truth, rng *rand.Rand) {
	t.Helper()
	res, err := Analyze(context.Background(), tr.angle(t, rng), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if o.said == nil {
		o.said = map[string]int{}
	}
	o.n++
	same := res.Law == tr.m.law.String()
	if same {
		o.best++
	}
	switch {
	case !res.Found || !res.Decided:
		o.undecided++
		o.said["not decided"]++
	case same:
		o.right++
		o.said[res.Law]++
	default:
		o.wrong++
		o.said[res.Law]++
	}
}

func (o *outcome) String() string {
	p := func(k int) float64 { return 100 * float64(k) / float64(o.n) }
	return fmt.Sprintf("best by BIC %5.1f %%; said: right %5.1f %%, not decided %5.1f %%, wrong %5.1f %%", p(o.best), p(o.right), p(o.undecided), p(o.wrong))
}

// What design section 6 asks to be decided: pure laws from ln(A₀/A) = 0.4 at
// 30 dB, mixtures whose parts are each at least 20 % of the first loss from 0.7
// at 55 dB, here in 30 s at 60 frames/s. Beside each row stands how often an
// ideal fit would let BIC find the law (see ideal): 30 s are too short for some
// mixtures, above all for those of three frictions of which two imitate the
// third, and there the test only prints. Measured with -long (60 clips a row): in
// rows that an ideal fit decides, BIC is right in 99.3 %; in 98.6 % the law is
// called decided and is right, in 0.5 % decided and wrong. In the others BIC is
// as often right as the ideal fit.
func TestLawsThatMustBeDecided(t *testing.T) {
	runs := 2
	if *long {
		runs = 60
	}
	type row struct {
		shares       [3]float64
		logRatio, db float64
		release      float64
	}
	var rows []row
	for _, release := range []float64{0.35, 1.2} {
		for i := range 3 {
			var s [3]float64
			s[i] = 1
			rows = append(rows, row{s, 0.4, 30, release})
		}
		for _, s := range [][3]float64{{.5, .5, 0}, {.8, .2, 0}, {.2, .8, 0}, {.5, 0, .5}, {.8, 0, .2}, {.2, 0, .8}, {0, .5, .5}, {0, .8, .2}, {0, .2, .8}, {.34, .33, .33}, {.4, .4, .2}, {.2, .4, .4}, {.4, .2, .4}} {
			rows = append(rows, row{s, 0.7, 55, release})
		}
	}
	var all outcome
	for i, r := range rows {
		if !*long && i%3 != 0 {
			continue // every third row in the quick run
		}
		rng := rand.New(rand.NewPCG(uint64(i), 7))
		var o outcome
		perfect := 0.0
		for range runs {
			tr := swinging{1, r.release, r.shares, r.logRatio, r.db, 30, 60, true}.truth(rng)
			if o.n == 0 {
				perfect = tr.ideal(t)
			}
			o.add(t, tr, rng)
		}
		t.Logf("ln %.1f %.0f dB %.2f rad, viscous/drag/dry %3.0f/%3.0f/%3.0f %%: ideal %5.1f %%; %v", r.logRatio, r.db, r.release,
			100*r.shares[0], 100*r.shares[1], 100*r.shares[2], 100*perfect, &o)
		if perfect < 0.97 {
			continue
		}
		all.n, all.right, all.wrong, all.best, all.undecided = all.n+o.n, all.right+o.right, all.wrong+o.wrong, all.best+o.best, all.undecided+o.undecided
		if slack := 3 * math.Sqrt(0.95*0.05/float64(o.n)); float64(o.best) < (0.95-slack)*float64(o.n) {
			t.Errorf("the true law is best in %d of %d only", o.best, o.n)
		}
	}
	t.Logf("all that must be decided: %v", &all)
	slack := 3 * math.Sqrt(0.95*0.05/float64(all.n))
	if float64(all.right) < (0.95-slack)*float64(all.n) {
		t.Errorf("right in %d of %d only", all.right, all.n)
	}
	if float64(all.wrong) > (0.02+slack)*float64(all.n) {
		t.Errorf("wrong in %d of %d", all.wrong, all.n)
	}
}

// ideal is how often BIC would find the true law if every fit were perfect: each
// rival is fitted to the motion without noise, and what it lacks there, χ², makes
// the difference in BIC normal with mean χ² + Δk·ln n and standard deviation
// 2√χ². A rival that holds the true law is chosen when its extra terms gain more
// than their price by chance.
func (tr truth) ideal(t *testing.T) float64 {
	t.Helper()
	quiet := tr
	quiet.sigma = 0
	ts, ys := quiet.record(rand.New(rand.NewPCG(0, 0)))
	s := &samples{t: ts, y: ys}
	for range ts {
		s.u = append(s.u, tr.sigma)
	}
	own := &fitted{m: tr.m, p: tr.p}
	amplitude := 0.0
	for _, y := range ys {
		amplitude = math.Max(amplitude, math.Abs(y))
	}
	price := math.Log(float64(tr.n))
	p := 1.0
	for _, l := range laws {
		if l == tr.m.law {
			continue
		}
		more := float64(l.count() - tr.m.law.count())
		if l&tr.m.law == tr.m.law {
			// Each extra term cannot be negative: it gains by chance on one side only.
			p *= 1 - (1-normalCDF(math.Sqrt(more*price)))*more
			continue
		}
		f, err := s.fit(t.Context(), model{sine: tr.m.sine, law: l}, restart(own, model{sine: tr.m.sine, law: l}, 0.7*amplitude), false)
		if err != nil {
			t.Fatal(err)
		}
		p = math.Min(p, normalCDF((f.chi2+more*price)/(2*math.Sqrt(f.chi2))))
	}
	return p
}

// A dry friction that takes 0.3 % of the loss is seen at 80 dB, but makes no law.
func TestNegligibleFriction(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 9))
	tr := swinging{1, 0.5, [3]float64{0.997, 0, 0.003}, 1, 80, 30, 60, true}.truth(rng)
	res, err := Analyze(context.Background(), tr.angle(t, rng), Options{})
	if err != nil || !res.Found {
		t.Fatal(err, res)
	}
	f := byKey(t, res, "decay.dry")
	t.Log(byKey(t, res, "decay.law").Text, f.Hi)
	if res.Law != "viscous" || !res.Decided || f.Kind != finding.UpperLimit || f.Hi < tr.p[5] {
		t.Errorf("law %s, decided %v, dry friction %+v, true %g", res.Law, res.Decided, f, tr.p[5])
	}
}

// The confusion table over Q, length and noise; mixtures in equal parts.
func TestConfusionTable(t *testing.T) {
	runs, qs, lengths, noises := 1, []float64{30, 300}, []float64{40}, []float64{45}
	if *long {
		runs, qs, lengths, noises = 12, []float64{30, 100, 300}, []float64{20, 60}, []float64{30, 45, 55}
	}
	var all outcome
	short := map[string]string{"viscous": "V", "drag": "D", "dry": "F", "viscous + drag": "VD", "viscous + dry": "VF", "drag + dry": "DF", "viscous + drag + dry": "VDF", "not decided": "?"}
	for _, q := range qs {
		for _, swings := range lengths {
			for _, db := range noises {
				ln := math.Min(math.Pi*swings/q, db/8.7-0.5)
				line := ""
				for i, l := range laws {
					rng := rand.New(rand.NewPCG(uint64(i), uint64(q*swings+db)))
					var o outcome
					var s [3]float64
					for j, f := range frictions {
						if l&f != 0 {
							s[j] = 1 / float64(l.count())
						}
					}
					for range runs {
						o.add(t, swinging{1, 0.35, s, ln, db, swings, 60, true}.truth(rng), rng)
					}
					line += fmt.Sprintf("  %s→", short[l.String()])
					for _, name := range []string{"viscous", "drag", "dry", "viscous + drag", "viscous + dry", "drag + dry", "viscous + drag + dry", "not decided"} {
						if k := o.said[name]; k > 0 {
							line += fmt.Sprintf("%s%d ", short[name], k)
						}
					}
					all.n, all.right, all.wrong, all.best, all.undecided = all.n+o.n, all.right+o.right, all.wrong+o.wrong, all.best+o.best, all.undecided+o.undecided
				}
				t.Logf("Q %3.0f, %2.0f swings (ln %.2f), %2.0f dB:%s", q, swings, ln, db, line)
			}
		}
	}
	t.Logf("all: %v", &all)
	// Of what is called decided, one in ten may be wrong (a mixture of which the
	// clip shows only one part); most wrong calls lie at the edge of what a clip holds.
	if float64(all.wrong) > 0.1*float64(all.right+all.wrong)+3*math.Sqrt(float64(all.n)*0.05) {
		t.Errorf("wrong in %d, right in %d", all.wrong, all.right)
	}
}
