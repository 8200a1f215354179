package series

import (
	"flag"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lodeswing/track"
	"lodeswing/track/rig"
)

var long = flag.Bool("long", false, "run the full Monte Carlo counts")

// swingAngle is a damped swing whose rate is known in closed form; with a third
// harmonic, as a large swing has.
func swingAngle(t, a, w float64) (angle, rate float64) {
	const h = 0.01
	e := a * math.Exp(-0.03*t)
	s, c := math.Sincos(w * t)
	s3, c3 := math.Sincos(3 * w * t)
	angle = e * (c + h*c3)
	rate = -0.03*angle - e*w*(s+3*h*s3)
	return angle, rate
}

// film makes a bob of given positions with noise sigma (m) in both axes.
func film(rng *rand.Rand, name, part string, n int, dt, sigma float64, at func(t float64) (x, z float64)) track.Bob {
	b := track.Bob{Name: name, Part: part}
	for i := range n {
		t := float64(i) * dt
		x, z := at(t)
		s := track.Sample{
			Frame: i, T: t, X: x + sigma*rng.NormFloat64(), Z: z + sigma*rng.NormFloat64(),
			Plane: track.Cov{AA: sigma * sigma, BB: sigma * sigma}, State: track.Seen,
		}
		s.U, s.V = 500+s.X*2000, 300-s.Z*2000
		b.Samples = append(b.Samples, s)
	}
	return b
}

func knownCal() track.Calibration {
	return track.Calibration{MetresPerPixel: 0.5e-3, UScale: 0.002, VerticalKnown: true, UVertical: 1e-3, VerticalFrom: "plumb line", UClock: 50e-6, PictureW: 1000, PictureH: 800}
}

func hinge(name string, upright bool) rig.Part {
	return rig.Part{Name: name, Joint: "hinge", Upright: upright, PivotM: []float64{0, 0}}
}

// Angles and rates of a hanging bob, its pivot found from the track: errors in
// units of the stated uncertainty must look normal.
func TestHangingBob(t *testing.T) {
	const px, pz, r, w = 0.03, 0.11, 0.28, 5.6
	rng := rand.New(rand.NewPCG(1, 1))
	inA, inR, all, pulls := 0, 0, 0, 0.0
	runs := 20
	if *long {
		runs = 500
	}
	for range runs {
		tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "lamp", "arm", 600, 1.0/60, 0.1e-3, func(s float64) (float64, float64) {
			a, _ := swingAngle(s, 1.2, w)
			return px + r*math.Sin(a), pz - r*math.Cos(a)
		})}}
		rg := &rig.Rig{Parts: []rig.Part{hinge("arm", false)}, Bobs: []rig.Bob{{Name: "lamp", Part: "arm"}}}
		as, err := FromTrack(tr, rg)
		if err != nil || len(as) != 1 {
			t.Fatalf("%v, %d angles", err, len(as))
		}
		a := as[0]
		p := a.Pivot
		pulls += (sq((p.X-px)/p.UX) + sq((p.Z-pz)/p.UZ) + sq((p.R-r)/math.Sqrt(p.UR*p.UR-sq(0.002*r)))) / 3
		for i, s := range a.T {
			wantA, wantR := swingAngle(s, 1.2, w)
			all++
			if math.Abs(a.Angle[i]-wantA) < 1.96*total(&a, i) {
				inA++
			}
			if math.Abs(a.Rate[i]-wantR) < 1.96*a.URate[i] {
				inR++
			}
		}
	}
	fa, fr := float64(inA)/float64(all), float64(inR)/float64(all)
	t.Logf("95 %% intervals hold the angle in %.1f %%, the rate in %.1f %% of %d samples; pivot and radius off by %.2f u r.m.s.", 100*fa, 100*fr, all, math.Sqrt(pulls/float64(runs)))
	if fa < 0.92 || fa > 0.985 || fr < 0.92 || fr > 0.985 {
		t.Errorf("coverage of angle %.3f, of rate %.3f", fa, fr)
	}
	if q := math.Sqrt(pulls / float64(runs)); q < 0.6 || q > 1.4 {
		t.Errorf("pivot's uncertainty: r.m.s. pull %.2f", q)
	}
}

func sq(x float64) float64 { return x * x }

// total is the angle's whole uncertainty at sample i.
func total(a *Angle, i int) float64 {
	v := sq(a.UAngle[i])
	for _, s := range a.Shared {
		if s.Source == "pivot" {
			v += sq(s.D[i])
		}
	}
	return math.Sqrt(v)
}

func TestSigns(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	cases := []struct {
		name  string
		part  rig.Part
		at    []float64
		place func(a float64) (x, z float64)
	}{
		{"hanging", hinge("p", false), []float64{0, -0.2}, func(a float64) (float64, float64) { return 0.2 * math.Sin(a), -0.2 * math.Cos(a) }},
		{"upright, given as it stands", hinge("p", true), []float64{0, 0.2}, func(a float64) (float64, float64) { return 0.2 * math.Sin(a), 0.2 * math.Cos(a) }},
		{"upright, given hanging", hinge("p", true), []float64{0, -0.2}, func(a float64) (float64, float64) { return 0.2 * math.Sin(a), 0.2 * math.Cos(a) }},
		{"bob 90° off the axis", rig.Part{Name: "p", Joint: "hinge", PivotM: []float64{0, 0}, CentreM: []float64{0, -0.1}}, []float64{0.2, 0}, func(a float64) (float64, float64) { return 0.2 * math.Cos(a), 0.2 * math.Sin(a) }},
	}
	for _, c := range cases {
		tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "b", "p", 300, 1.0/60, 1e-5, func(s float64) (float64, float64) {
			a, _ := swingAngle(s, 0.7, 6)
			return c.place(a)
		})}}
		as, err := FromTrack(tr, &rig.Rig{Parts: []rig.Part{c.part}, Bobs: []rig.Bob{{Name: "b", Part: "p", AtM: c.at}}})
		if err != nil {
			t.Fatal(c.name, err)
		}
		for i, s := range as[0].T {
			if want, _ := swingAngle(s, 0.7, 6); math.Abs(as[0].Angle[i]-want) > 1e-3 {
				t.Errorf("%s: angle %.4f at %.2f s, want %.4f", c.name, as[0].Angle[i], s, want)
				break
			}
		}
	}
}

// A vane on a pin turns through full turns, and through a short gap.
func TestPinUnwraps(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 3))
	tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "tip", "vane", 400, 1.0/60, 1e-5, func(s float64) (float64, float64) {
		return 0.1 * math.Sin(9*s), -0.1 * math.Cos(9*s)
	})}}
	for i := 200; i < 208; i++ {
		tr.Bobs[0].Samples[i].State = track.Missing
	}
	rg := &rig.Rig{Parts: []rig.Part{{Name: "vane", Joint: "pin", PivotM: []float64{0, 0}}}, Bobs: []rig.Bob{{Name: "tip", Part: "vane", AtM: []float64{0, -0.1}}}}
	as, err := FromTrack(tr, rg)
	if err != nil {
		t.Fatal(err)
	}
	a := as[0]
	last := len(a.T) - 1
	if math.Abs(a.Angle[last]-9*a.T[last]) > 2e-3 {
		t.Errorf("after %.1f turns the angle is off by %g", 9*a.T[last]/2/math.Pi, a.Angle[last]-9*a.T[last])
	}
	if len(a.Gaps) != 1 || a.Gaps[0].Frames != 8 || math.Abs(a.Gaps[0].FromS-199.0/60) > 1e-9 || math.Abs(a.Gaps[0].ToS-208.0/60) > 1e-9 {
		t.Errorf("gaps %+v", a.Gaps)
	}
	if len(a.T) != 392 {
		t.Errorf("%d samples, 392 were seen", len(a.T))
	}
	bt, by := a.Broken(a.Angle)
	nan := 0
	for i := range bt {
		if math.IsNaN(by[i]) {
			nan++
		}
	}
	if nan != 1 || len(bt) != 393 {
		t.Errorf("Broken gave %d rows with %d breaks", len(bt), nan)
	}
}

// The ferry: an arm on a swinging frame, measured from the frame's bob, and by
// the line between two bobs.
func TestPartOnPart(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 4))
	const r1, r2 = 0.30, 0.08
	frame := func(s float64) float64 { a, _ := swingAngle(s, 0.4, 5); return a }
	arm := func(s float64) float64 { return 9 * s * 0.7 }
	hub := func(s float64) (float64, float64) {
		return r1 * math.Sin(frame(s)), -r1 * math.Cos(frame(s))
	}
	ball := func(sign float64) func(s float64) (float64, float64) {
		return func(s float64) (float64, float64) {
			x, z := hub(s)
			return x + sign*r2*math.Sin(arm(s)), z - sign*r2*math.Cos(arm(s))
		}
	}
	parts := []rig.Part{hinge("frame", false), {Name: "arm", On: "frame", Joint: "hinge", PivotM: []float64{0, -r1}}}
	tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{
		film(rng, "mark", "frame", 500, 1.0/60, 5e-5, func(s float64) (float64, float64) {
			return 0.2 * math.Sin(frame(s)), -0.2 * math.Cos(frame(s))
		}),
		film(rng, "red", "arm", 500, 1.0/60, 5e-5, ball(1)),
	}}
	rg := &rig.Rig{Parts: parts, Bobs: []rig.Bob{
		{Name: "mark", Part: "frame", AtM: []float64{0, -0.2}},
		{Name: "red", Part: "arm", AtM: []float64{0, -r2}},
		{Name: "blue", Part: "arm", AtM: []float64{0, r2}},
	}}
	one, err := FromTrack(tr, rg)
	if err != nil || len(one) != 2 {
		t.Fatal(err, len(one))
	}
	tr.Bobs = append(tr.Bobs, film(rng, "blue", "arm", 500, 1.0/60, 5e-5, ball(-1)))
	two, err := FromTrack(tr, rg)
	if err != nil || len(two) != 2 {
		t.Fatal(err, len(two))
	}
	for k, a := range []Angle{one[1], two[1]} {
		if a.Problem != "" || !a.Pivot.Moves {
			t.Fatalf("%+v", a.Problem)
		}
		in, worst := 0, 0.0
		for i, s := range a.T {
			d := math.Abs(a.Angle[i] - arm(s))
			v := sq(a.UAngle[i])
			for _, sh := range a.Shared {
				v += sq(sh.D[i])
			}
			if d < 2*math.Sqrt(v) {
				in++
			}
			worst = math.Max(worst, d)
		}
		t.Logf("way %d (%s): worst error %.4f rad, mean uncertainty %.4f rad", k, a.Pivot.From, worst, mean1(a.UAngle))
		if float64(in) < 0.93*float64(len(a.T)) || worst > 0.02 {
			t.Errorf("way %d: %d of %d within 2 u, worst %g", k, in, len(a.T), worst)
		}
	}
}

func mean1(x []float64) float64 { m, _ := meanStd(x); return m }

func TestShortArc(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 5))
	bob := film(rng, "b", "p", 300, 1.0/60, 0.2e-3, func(s float64) (float64, float64) {
		a, _ := swingAngle(s, 0.04, 6)
		return 0.25 * math.Sin(a), -0.25 * math.Cos(a)
	})
	tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{bob}}
	_, err := FromTrack(tr, &rig.Rig{Parts: []rig.Part{hinge("p", false)}, Bobs: []rig.Bob{{Name: "b", Part: "p"}}})
	if err == nil || !strings.Contains(err.Error(), "at_mm") {
		t.Errorf("an arc of ±2.3° gave a pivot without any help: %v", err)
	}
	// With the rig's length it can be done, and honestly.
	as, err := FromTrack(tr, &rig.Rig{Parts: []rig.Part{hinge("p", false)}, Bobs: []rig.Bob{{Name: "b", Part: "p", AtM: []float64{0, -0.25}}}})
	if err != nil {
		t.Fatal(err)
	}
	p := as[0].Pivot
	t.Logf("%s: pivot (%.2f ± %.2f, %.2f ± %.2f) mm, R %.2f ± %.2f mm", p.From, 1e3*p.X, 1e3*p.UX, 1e3*p.Z, 1e3*p.UZ, 1e3*p.R, 1e3*p.UR)
	if math.Abs(p.R-0.25) > 3*p.UR || math.Abs(p.X) > 4*p.UX || math.Abs(p.Z) > 4*p.UZ {
		t.Errorf("pivot %+v", p)
	}
}

// The rig and the track disagree on the length: the track is used and the user told.
func TestRigDisagrees(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 6))
	tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "b", "p", 300, 1.0/60, 1e-4, func(s float64) (float64, float64) {
		a, _ := swingAngle(s, 0.9, 6)
		return 0.25 * math.Sin(a), -0.25 * math.Cos(a)
	})}}
	as, err := FromTrack(tr, &rig.Rig{Parts: []rig.Part{hinge("p", false)}, Bobs: []rig.Bob{{Name: "b", Part: "p", AtM: []float64{0, -0.28}}}})
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(as[0].Pivot.R-0.25) > 1e-3 || len(as[0].Cautions) == 0 || !strings.Contains(as[0].Cautions[0], "280.0 mm") {
		t.Errorf("R = %g, cautions %q", as[0].Pivot.R, as[0].Cautions)
	}
}

// Rest as vertical: taken where only gravity acts, refused where a magnet pulls.
func TestRestAsVertical(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 7))
	const tilt = 0.05
	tr := &track.Track{Cal: track.Calibration{MetresPerPixel: 0.5e-3, UScale: 0.002}, Bobs: []track.Bob{film(rng, "b", "p", 900, 1.0/60, 1e-4, func(s float64) (float64, float64) {
		a, _ := swingAngle(s, 0.9, 6)
		return 0.25 * math.Sin(a+tilt), -0.25 * math.Cos(a+tilt)
	})}}
	rg := &rig.Rig{Camera: rig.Camera{Vertical: "rest"}, Parts: []rig.Part{hinge("p", false)}, Bobs: []rig.Bob{{Name: "b", Part: "p"}}}
	as, err := FromTrack(tr, rg)
	if err != nil {
		t.Fatal(err)
	}
	want, _ := swingAngle(as[0].T[100], 0.9, 6)
	if math.Abs(as[0].Angle[100]-want) > 2e-3 || !strings.Contains(as[0].VerticalFrom, "middle of the swing") {
		t.Errorf("angle %.4f, want %.4f; vertical from %q", as[0].Angle[100], want, as[0].VerticalFrom)
	}
	rg.Magnets = []rig.Magnet{{Name: "bob magnet", Part: "p"}, {Name: "base magnet", Part: "base"}}
	as, err = FromTrack(tr, rg)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(as[0].Angle[100]-want-tilt) > 5e-3 || as[0].VerticalFrom != "" || len(as[0].Cautions) == 0 || !strings.Contains(as[0].Cautions[0], "base magnet") {
		t.Errorf("angle %.4f, want %.4f; vertical from %q, cautions %q", as[0].Angle[100], want+tilt, as[0].VerticalFrom, as[0].Cautions)
	}
}

func TestEdgeAndLostFrames(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 8))
	b := film(rng, "b", "p", 600, 1.0/60, 1e-4, func(s float64) (float64, float64) {
		a, _ := swingAngle(s, 0.9, 6)
		return 0.25 * math.Sin(a), -0.25 * math.Cos(a)
	})
	for i := 50; i < 55; i++ {
		b.Samples[i].State = track.AtEdge
	}
	b.Samples = append(b.Samples[:300], b.Samples[306:]...) // the clip lacks six frames
	tr := &track.Track{Cal: knownCal(), Bobs: []track.Bob{b}}
	as, err := FromTrack(tr, &rig.Rig{})
	if err != nil {
		t.Fatal(err)
	}
	g := as[0].Gaps
	if len(g) != 2 || g[0].Why != "at the picture's edge" || g[0].Frames != 5 || g[1].Frames != 0 || math.Abs(g[1].ToS-g[1].FromS-7.0/60) > 1e-9 {
		t.Errorf("gaps %+v", g)
	}
	for i, s := range as[0].T {
		if _, want := swingAngle(s, 0.9, 6); math.Abs(as[0].Rate[i]-want) > 5*as[0].URate[i] {
			t.Errorf("rate at %.3f s off by %.1f u", s, math.Abs(as[0].Rate[i]-want)/as[0].URate[i])
		}
	}
}

func TestTurningPoints(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 9))
	var ts, ys []float64
	for i := range 900 {
		s := float64(i) / 60
		ts = append(ts, s)
		ys = append(ys, 0.5*math.Exp(-0.05*s)*math.Cos(6*s)+0.002*rng.NormFloat64())
	}
	a, err := FromTable("arm", ts, ys, nil)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(a.UAngle[0]/0.002-1) > 0.15 {
		t.Errorf("noise found from the table %.4f rad, it is 0.002", a.UAngle[0])
	}
	tp := a.TurningPoints()
	if len(tp) < 27 || len(tp) > 28 {
		t.Fatalf("%d turning points in 14.3 swings", len(tp))
	}
	for _, p := range tp {
		// Turning points of e^(−ct)cos ωt lie at ωt = kπ − atan(c/ω).
		k := math.Round((6*p.T + math.Atan(0.05/6)) / math.Pi)
		want := (k*math.Pi - math.Atan(0.05/6)) / 6
		if math.Abs(p.T-want) > 4*p.UT {
			t.Errorf("turning point %.0f at %.4f ± %.4f s, true %.4f", k, p.T, p.UT, want)
		}
	}
}

func TestBadTables(t *testing.T) {
	up := []float64{0, 1, 2, 3, 4, 5, 6, 7, 8, 9}
	for _, c := range []struct {
		name   string
		t, y   []float64
		inside string
	}{
		{"short", up[:3], up[:3], "3 usable rows"},
		{"lengths", up, up[:9], "differ in length"},
		{"backwards", []float64{0, 1, 2, 2, 4, 5, 6, 7, 8, 9}, up, "row 4"},
		{"time", []float64{0, 1, math.NaN(), 3, 4, 5, 6, 7, 8, 9}, up, "time 3"},
	} {
		if _, err := FromTable("x", c.t, c.y, nil); err == nil || !strings.Contains(err.Error(), c.inside) {
			t.Errorf("%s: error %v, want one about %q", c.name, err, c.inside)
		}
	}
	if _, err := FromTrack(&track.Track{}, nil); err == nil {
		t.Error("an empty track gave angles")
	}
}

// A series that needs two bobs says which of them was not found, and does not call
// it a fault of the recording.
func TestGapsOfTwoBobs(t *testing.T) {
	pair := [2]track.Bob{{Name: "red ball"}, {Name: "green ball"}}
	for i := range 40 {
		for k := range pair {
			s := track.Sample{Frame: i, T: float64(i) / 60, State: track.Seen}
			if k == 1 && i >= 10 && i < 14 || k == 0 && i == 12 {
				s.State = track.Missing
			}
			if k == 0 && i >= 30 && i < 33 {
				s.State = track.AtEdge
			}
			pair[k].Samples = append(pair[k].Samples, s)
		}
	}
	got := bobGaps(&pair[0], &pair[1])
	want := []Gap{
		{FromS: 9.0 / 60, ToS: 14.0 / 60, Frames: 4, Why: "“green ball” not found"},
		{FromS: 29.0 / 60, ToS: 33.0 / 60, Frames: 3, Why: "“red ball” at the picture's edge"},
	}
	if len(got) != len(want) {
		t.Fatalf("gaps %+v", got)
	}
	for i := range want {
		if got[i] != want[i] {
			t.Errorf("gap %d: %+v, want %+v", i, got[i], want[i])
		}
	}
}
