package camera

import (
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"lodeswing/track"
)

var long = flag.Bool("long", false, "run the full Monte Carlo of the camera")

// trials is the number of simulated cameras.
func trials(t *testing.T) int {
	if *long {
		return 4000
	}
	return 250
}

// pulls gathers errors in units of their stated uncertainty.
type pulls []float64

func (p pulls) check(t *testing.T, what string) {
	t.Helper()
	n := float64(len(p))
	var sum, sq, in float64
	for _, x := range p {
		sum += x
		sq += x * x
		if math.Abs(x) < 1.959964 {
			in++
		}
	}
	abs := make([]float64, len(p))
	for i, x := range p {
		abs[i] = math.Abs(x)
	}
	sort.Float64s(abs)
	t.Logf("%-34s mean %+.3f, s.d. %.3f, within 95 %%: %.1f %% of %d, largest %.1f", what, sum/n, math.Sqrt(sq/n), 100*in/n, len(p), abs[len(abs)-1])
	// 3 standard deviations of a binomial count around 95 %, and the 93–97 % of the design.
	slack := 0.02 + 3*math.Sqrt(0.95*0.05/n)
	if math.Abs(in/n-0.95) > slack {
		t.Errorf("%s: 95 %% intervals hold the truth in %.1f %%", what, 100*in/n)
	}
	if math.Abs(sum/n) > 0.1+3/math.Sqrt(n) {
		t.Errorf("%s: biased by %.2f standard uncertainties", what, sum/n)
	}
}

// With -long, of 4,000 cameras, 94.8 % of the 95 % intervals of a length hold the
// truth and 94.5 % of those of the vertical; of 1,972 seen targets, 95.2 % of a
// length's, 95.2 % of the vertical's and 95.9 % of the focal length's.

// A rig's numbers are drawn around the truth with the uncertainties that the rig
// states (or that stand by default); lengths in the plane must then be right
// within what the calibration says.
func TestKnownLengthIsHonest(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 5))
	var lengths, verticals, moved pulls
	for range trials(t) {
		n := rng.NormFloat64
		s := setup{
			w: 1280, h: 720, length: 0.1, depth: 0.03, distance: 1.2, pl: motionPlane(false, 0),
			tilt: 0.1 + uUsualAngle*n(), pan: uUsualAngle * n(), roll: 0.01 * n(), k1: uUsualK1 * n(),
			origin: [2]float64{639.5, 359.5},
		}
		// The true camera: 1.0 mm/px or so, told by a length that it shows exactly.
		s.ends = [2][2]float64{{300 + 300*rng.Float64(), 200}, {0, 0}}
		s.ends[1] = [2]float64{s.ends[0][0] + 150, 200 + 100*rng.Float64()}
		s.length = 0.18
		truth, err := s.solve()
		if err != nil {
			t.Fatal(err)
		}
		// A true vertical near the middle, with its two ends as they show.
		var plumb [2][2]float64
		x0 := 0.05 * n()
		for i, z := range []float64{0.25, -0.25} {
			u, v, _ := truth.project(vec{x0, 0, z})
			plumb[i] = [2]float64{u + 0.7*n(), v + 0.7*n()}
		}
		text := fmt.Sprintf("[camera]\ntilt_deg = %.9g\nu_tilt_deg = 1\ndistance_mm = %.9g\nu_distance_mm = 24\nplumb_px = [[%.6f, %.6f], [%.6f, %.6f]]\n[scale]\nlength_mm = %.9g\nu_length_mm = 0.2\ndepth_mm = %.9g\nu_depth_mm = 2\nends_px = [[%.6f, %.6f], [%.6f, %.6f]]",
			0.1*180/math.Pi, 1200+24*n(), plumb[0][0], plumb[0][1], plumb[1][0], plumb[1][1], 180+0.2*n(), 30+2*n(),
			s.ends[0][0]+0.5*n(), s.ends[0][1]+0.5*n(), s.ends[1][0]+0.5*n(), s.ends[1][1]+0.5*n())
		c := solve(t, text, nil)
		p, l, v := compare(c, &truth, rng)
		lengths, verticals, moved = append(lengths, l), append(verticals, v), append(moved, p)
	}
	lengths.check(t, "a length in the middle half")
	verticals.check(t, "the vertical")
	moved.check(t, "the same length, by its own sources")
}

// compare measures a random length in the middle half of the picture with the
// solved camera and the true one. It gives the error over what the sources of
// uncertainty say of this very length, over what UScale says, and that of the
// vertical over UVertical.
func compare(c *Camera, truth *pinhole, rng *rand.Rand) (own, scale, vertical float64) {
	a := [2]float64{320 + 640*rng.Float64(), 180 + 360*rng.Float64()}
	b := [2]float64{320 + 640*rng.Float64(), 180 + 360*rng.Float64()}
	if math.Hypot(a[0]-b[0], a[1]-b[1]) < 150 {
		b[0] = a[0] + math.Copysign(200, 640-a[0])
	}
	tc := &Camera{pinhole: *truth, pl: c.pl, cal: c.cal}
	length := func(c *Camera) float64 {
		x1, z1, _ := c.ToPlane(a[0], a[1])
		x2, z2, _ := c.ToPlane(b[0], b[1])
		return math.Hypot(x2-x1, z2-z1)
	}
	up := func(c *Camera) float64 {
		_, _, j := c.ToPlane(639.5, 359.5)
		return math.Atan2(-j[0][1], -j[1][1])
	}
	got, want := length(c), length(tc)
	var u float64
	for i := range c.cal.Lens.Unsure {
		by := make([]float64, i+1)
		by[i] = 1
		d := length(c.Moved(by)) - got
		u += d * d
	}
	return (got - want) / math.Sqrt(u), (got/want - 1) / c.cal.UScale, (up(c) - up(tc)) / c.cal.UVertical
}

// The same for a printed target: random cameras see it with noise of 0.05 px, on
// a print whose size is off by what the rig says.
func TestTargetIsHonest(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 13))
	var lengths, verticals, own pulls
	var focal pulls
	count := trials(t) / 2 // each takes some 40 ms
	for range count {
		n := rng.NormFloat64
		pl := motionPlane(false, 0)
		truth := pinhole{
			cu: 639.5, cv: 359.5, f: 960 * math.Exp(uFreeFocal*n()), k1: uTargetK * n(), k2: uTargetK * n(),
			r: pointed(0.2*n(), 0.25*n(), 0.05*n()),
		}
		// 0.9 m away, the board near the middle.
		middle := vec{0.03 * n(), 0, 0.03 * n()}
		dist := 0.9 * truth.f / 960
		truth.eye = middle.plus(-dist, truth.r[2])
		if truth.folds(640 / truth.f) {
			continue // no such lens is on the market
		}
		print := 1 + 0.004*n()
		depth := 0.05 + 0.001*n()
		lean := uTargetUp * n()
		s := &Sighting{Target: "board-9x6-30mm", BarM: 0.1}
		seen := true
		for p := 1; p < 9; p++ {
			for q := 1; q < 6; q++ {
				x, z := (float64(p)-4.5)*0.03, (3-float64(q))*0.03
				sn, cs := math.Sincos(lean)
				wp := pl.at.plus(depth, pl.n).plus(print*(cs*x+sn*z), pl.e1).plus(print*(cs*z-sn*x), pl.e2)
				u, v, _ := truth.project(wp)
				seen = seen && u > 5 && v > 5 && u < 1275 && v < 715
				const sigma = 0.05
				s.Points = append(s.Points, Point{U: u + sigma*n(), V: v + sigma*n(), Pixel: track.Cov{AA: sigma * sigma, BB: sigma * sigma}, X: x, Z: z})
			}
		}
		if !seen {
			continue
		}
		text := fmt.Sprintf("[scale]\ntarget = \"board-9x6-30mm\"\nlength_mm = %.9g\nu_length_mm = 0.1\ndepth_mm = 50\nu_depth_mm = 1", 100*print+0.1*n())
		c := solve(t, text, s)
		truth = truth.anchored(pl, [2]float64{639.5, 359.5})
		o, l, v := compare(c, &truth, rng)
		own, lengths, verticals = append(own, o), append(lengths, l), append(verticals, v)
		var uf float64
		for _, s := range c.cal.Lens.Unsure {
			uf += s.By[0] * s.By[0]
		}
		focal = append(focal, (c.f/truth.f-1)/math.Sqrt(uf))
	}
	if len(own) < count/2 {
		t.Fatalf("only %d boards lay in the picture", len(own))
	}
	own.check(t, "a length, by its own sources")
	lengths.check(t, "a length in the middle half")
	verticals.check(t, "the vertical")
	focal.check(t, "the focal length")
}

// Without noise, tilt, perspective and lens come back.
func TestTargetGivesTheCamera(t *testing.T) {
	for _, above := range []bool{false, true} {
		text, tilt := "[scale]\ntarget = \"b\"\nlength_mm = 100", 0.17
		pl := motionPlane(false, 0)
		if above {
			text, tilt, pl = "[camera]\nfrom_above = true\n"+text, 1.2, motionPlane(true, 0)
		}
		truth := pinhole{cu: 639.5, cv: 359.5, f: 1000, k1: -0.06, k2: 0.01, r: pointed(0.12, tilt, 0.03)}
		truth.eye = vec{}.plus(-0.7, truth.r[2])
		s := &Sighting{Target: "b", BarM: 0.1}
		for i := range 11 {
			for k := range 8 {
				x, z := 0.06*(float64(i)-5), 0.045*(float64(k)-3.5)
				wp := pl.at.plus(x, pl.e1).plus(z, pl.e2)
				u, v, _ := truth.project(wp)
				s.Points = append(s.Points, Point{U: u, V: v, Pixel: track.Cov{AA: 1e-4, BB: 1e-4}, X: x, Z: z})
			}
		}
		c := solve(t, text, s)
		near(t, "focal length", c.f/1000, 1, 2e-3)
		near(t, "k1", c.k1, -0.06, 2e-3)
		near(t, "distance", c.cal.DistanceM, 0.7, 2e-3)
		for _, p := range s.Points {
			x, z, _ := c.ToPlane(p.U, p.V)
			tx, tz, _, _ := truth.meetAt(p.U, p.V, pl)
			near(t, "place", math.Hypot(x-tx, z-tz), 0, 2e-5)
		}
		if !c.cal.LensCorrected || !c.cal.TiltCorrected || !c.cal.VerticalKnown {
			t.Errorf("the calibration does not say what was corrected: %+v", c.cal)
		}
	}
}

// meetAt is where a pixel's line of sight meets the plane, from the place that
// the picture's middle shows.
func (p *pinhole) meetAt(u, v float64, pl plane) (a, b, t float64, j [2][2]float64) {
	q := p.anchored(pl, [2]float64{639.5, 359.5})
	x, y, _ := q.unlens(u, v)
	return q.meet(x, y, pl, 0)
}
