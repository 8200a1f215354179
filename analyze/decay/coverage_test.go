package decay

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/finding"
)

func byKey(t testing.TB, res *Result, key string) finding.Finding {
	t.Helper()
	for _, f := range res.Findings {
		if f.Key == key {
			return f
		}
	}
	t.Fatalf("no finding %s among %d", key, len(res.Findings))
	return finding.Finding{}
}

// draw makes a simulated clip of any kind that the design speaks of: Q from 20 to 500,
// all laws, small and large swings, 30 to 60 dB, 20 to 40 swings.
func draw(rng *rand.Rand) swinging {
	between := func(lo, hi float64) float64 { return lo + (hi-lo)*rng.Float64() }
	s := swinging{
		period: between(0.5, 1.5), release: between(0.15, 1.3), db: between(30, 60),
		fps: []float64{30, 60, 120}[rng.IntN(3)], sine: true,
	}
	s.duration = s.period * between(20, 40)
	l := laws[rng.IntN(len(laws))]
	sum := 0.0
	for i, x := range frictions {
		if l&x != 0 {
			s.shares[i] = between(0.5, 1)
			sum += s.shares[i]
		}
	}
	for i := range s.shares {
		s.shares[i] /= sum
	}
	q := 20 * math.Pow(25, rng.Float64())
	// ln(A0/A) of a viscous decay at this Q, kept within what can be seen.
	s.logRatio = math.Min(math.Pi/q*s.duration/s.period, math.Min(2.5, s.db/8.7-1))
	return s
}

// Coverage of the 95 % intervals, pooled, and their width against the
// Cramér–Rao bound of the true law.
func TestCoverage(t *testing.T) {
	runs := 150
	if *long {
		runs = 1500
	}
	rng := rand.New(rand.NewPCG(20, 26))
	type tally struct {
		in, all int
		ratio   []float64
		z2      float64
	}
	keys := []string{"decay.period_zero", "decay.period_at", "decay.zeta"}
	tallies := map[string]*tally{}
	for _, k := range keys {
		tallies[k] = &tally{}
	}
	lost := 0
	for range runs {
		s := draw(rng)
		tr := s.truth(rng)
		res, err := Analyze(context.Background(), tr.angle(t, rng), Options{})
		if err != nil {
			t.Fatal(err)
		}
		if !res.Found {
			t.Logf("not found: %+v: %s", s, res.Findings[0].Text)
			lost++
			continue
		}
		for _, k := range keys {
			q := quantity(periodZero)
			switch k {
			case "decay.period_at":
				q = periodAt(res.Amplitude)
			case "decay.zeta":
				q = zetaAt(res.Amplitude)
			}
			f, want := byKey(t, res, k), q(tr.m, tr.p)
			c := tallies[k]
			c.all++
			if f.Lo <= want && want <= f.Hi {
				c.in++
			}
			z := (f.Value - want) / f.U
			c.z2 += z * z
			if math.Abs(z) > 3.5 {
				t.Logf("%s off by %.1f u: %+v law %v found %s; %v-%v of %v", k, z, s, tr.m.law, res.Law, res.FromS, res.ToS, float64(tr.n)*tr.dt)
			}
			c.ratio = append(c.ratio, f.U/tr.bound(q))
		}
	}
	in, all := 0, 0
	for _, k := range keys {
		c := tallies[k]
		in, all = in+c.in, all+c.all
		r := sorted(c.ratio)
		t.Logf("%-20s holds the truth in %.1f %% of %d; r.m.s. error %.3f u; width over the bound: median %.3f, mean %.3f, 90 %% %.3f, largest %.2f",
			k, 100*float64(c.in)/float64(c.all), c.all, math.Sqrt(c.z2/float64(c.all)), r[len(r)/2], mean(r), r[len(r)*9/10], r[len(r)-1])
	}
	t.Logf("pooled %.2f %% of %d; no decay found in %d of %d", 100*float64(in)/float64(all), all, lost, runs)
}

func sorted(x []float64) []float64 {
	y := append([]float64(nil), x...)
	for i := range y {
		for j := i; j > 0 && y[j] < y[j-1]; j-- {
			y[j], y[j-1] = y[j-1], y[j]
		}
	}
	return y
}

func mean(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v
	}
	return s / float64(len(x))
}
