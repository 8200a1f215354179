package decay

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
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

const (
	uScale = 0.003 // relative
	uClock = 50e-6 // relative
	uRuler = 0.5e-3
)

// trackBound is the Cramér–Rao bound of a quantity from the positions of a bob at
// distance r: pivot and radius are unknown too, and told by the positions' own
// distances and by the rig's length.
func (tr truth) trackBound(q quantity, r float64) float64 {
	n := tr.m.size()
	times := make([]float64, tr.n)
	for i := range times {
		times[i] = float64(i) * tr.dt
	}
	out, jac := make([]float64, tr.n), make([]float64, tr.n*n)
	if err := newMover(tr.m, true).run(tr.p, 0, times, out, jac, nil); err != nil {
		return math.NaN()
	}
	all := n + 3 // and pivot x, z, radius
	info := make([]float64, all*all)
	add := func(row []float64, u float64) {
		for a, x := range row {
			for b, y := range row {
				info[a*all+b] += x * y / (u * u)
			}
		}
	}
	row := make([]float64, all)
	for i := range tr.n {
		sin, cos := math.Sincos(out[i])
		copy(row, jac[i*n:(i+1)*n])
		row[n], row[n+1], row[n+2] = -cos/r, -sin/r, 0
		add(row, tr.sigma)
		clear(row)
		row[n], row[n+1], row[n+2] = -sin, cos, -1
		add(row, tr.sigma*r)
	}
	clear(row)
	row[n+2] = 1
	add(row, math.Hypot(uRuler, uScale*r))
	c := invert(info, all)
	f := &fitted{m: tr.m, p: tr.p, cov: make([]float64, n*n)}
	for i := range n {
		copy(f.cov[i*n:(i+1)*n], c[i*all:])
	}
	return math.Sqrt(quadratic(gradient(q, f), f.cov))
}

// track films a truth: the bob's places in the plane of motion with the noise of
// the picture, by a camera whose clock, scale and upright are off by their
// standard uncertainties times chance, and a rig whose length is as good as a
// ruler's.
func (tr truth) track(t *testing.T, rng *rand.Rand, r float64) series.Angle {
	t.Helper()
	const uVertical = 2e-3
	scale, clock, tilt := 1+uScale*rng.NormFloat64(), 1+uClock*rng.NormFloat64(), uVertical*rng.NormFloat64()
	quiet := tr
	quiet.sigma = 0
	ts, ys := quiet.record(rng)
	s := tr.sigma * r
	b := track.Bob{Name: "bob", Part: "arm"}
	for i := range ts {
		sin, cos := math.Sincos(ys[i] + tilt)
		b.Samples = append(b.Samples, track.Sample{
			T: ts[i] * clock, X: scale * (0.02 + r*sin + s*rng.NormFloat64()), Z: scale * (0.05 - r*cos + s*rng.NormFloat64()),
			Plane: track.Cov{AA: s * s, BB: s * s}, State: track.Seen,
		})
	}
	cal := track.Calibration{MetresPerPixel: 4e-4, UScale: uScale, UClock: uClock, VerticalKnown: true, UVertical: uVertical, VerticalFrom: "plumb line"}
	rg := &rig.Rig{Parts: []rig.Part{{Name: "arm", Joint: "hinge"}}, Bobs: []rig.Bob{{Name: "bob", Part: "arm", AtM: []float64{0, -r + uRuler*rng.NormFloat64()}}}}
	as, err := series.FromTrack(&track.Track{Bobs: []track.Bob{b}, Cal: cal}, rg)
	if err != nil {
		t.Fatal(err)
	}
	return as[0]
}

// Coverage of the 95 % intervals over simulated tracks, pooled, and their width
// against the Cramér–Rao bound of the true law (for periods, with the clock's
// share).
func TestCoverage(t *testing.T) {
	runs := 30
	if *long {
		runs = 1200
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
		r := 0.15 + 0.25*rng.Float64()
		res, err := Analyze(context.Background(), tr.track(t, rng, r), Options{})
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
			b := tr.trackBound(q, r)
			if k != "decay.zeta" {
				b = math.Hypot(b, uClock*want)
			}
			c.ratio = append(c.ratio, f.U/b)
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
	pooled := float64(in) / float64(all)
	lo, hi := 0.93, 0.97
	if !*long {
		// Three standard deviations of a binomial count of so many clips.
		slack := 3 * math.Sqrt(0.95*0.05/float64(runs))
		lo, hi = 0.95-slack, 1
	}
	if pooled < lo || pooled > hi {
		t.Errorf("pooled coverage %.3f, wanted %.3f to %.3f", pooled, lo, hi)
	}
	for _, k := range keys {
		if m := mean(tallies[k].ratio); m > 1.2 || m < 0.9 {
			t.Errorf("%s: intervals are %.2f × the bound's on average", k, m)
		}
	}
	if lost > runs/50 {
		t.Errorf("no decay was found in %d of %d clips", lost, runs)
	}
	t.Logf("pooled %.2f %% of %d; no decay found in %d of %d", 100*float64(in)/float64(all), all, lost, runs)
}

func sorted(x []float64) []float64 {
	y := slices.Clone(x)
	slices.Sort(y)
	return y
}

func mean(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v
	}
	return s / float64(len(x))
}
