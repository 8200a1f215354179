package sweep

import (
	"bytes"
	"context"
	"encoding/csv"
	"errors"
	"math"
	"strings"
	"sync/atomic"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/track/rig"
)

func parse(t *testing.T, text string) *rig.Rig {
	t.Helper()
	r, err := rig.Parse("test.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return r
}

const swing = `
name = "Swing"
gravity_m_s2 = 9.81
u_gravity_m_s2 = 0
[[bob]]
name = "bob"
look = "dark"
part = "arm"
at_mm = [0, -250]
[[part]]
name = "arm"
joint = "hinge"
pivot_mm = [0, 0]
mass_g = 100
u_mass_g = 0
centre_mm = [0, -250]
inertia_g_mm2 = 6.25e6
u_inertia_g_mm2 = 1.25e5
[[start]]
part = "arm"
angle_deg = 1
`

func TestParseRange(t *testing.T) {
	r := parse(t, swing)
	g, err := ParseRange(r, "arm.mass=50:150:5")
	if err != nil || len(g.Values) != 5 || g.Values[0] != 0.05 || math.Abs(g.Values[4]-0.15) > 1e-15 || g.Unit != "g" {
		t.Errorf("%+v, %v", g, err)
	}
	if g, err := ParseRange(r, "arm.start.angle=30"); err != nil || len(g.Values) != 1 || math.Abs(g.Values[0]-math.Pi/6) > 1e-12 {
		t.Errorf("%+v, %v", g, err)
	}
	for text, says := range map[string]string{
		"arm.mass":                       "no range",
		"arm.mas=1:2:3":                  `did you mean "arm.mass"?`,
		"arm.mass=1:2":                   "from:to:number",
		"arm.mass=1:2:3:4":               "from:to:number",
		"arm.mass=1:x:3":                 "from:to:number",
		"arm.mass=1:2:2.5":               "whole number",
		"arm.mass=1:2:1":                 "whole number",
		"camera.distance=1:2:3":          "no number of the toy",
		"arm.mass, arm.inertia=1:2:3":    "cannot be varied together",
		"arm.mass, no such thing.x=1:2:": "no number",
	} {
		if _, err := ParseRange(r, text); err == nil || !strings.Contains(err.Error(), says) {
			t.Errorf("%q: error %v does not say %q", text, err, says)
		}
	}
}

// The period of small swings over a range of inertias is 2π√(I/mgl), here with
// the first term of the amplitude's share, θ²/16.
func TestVaryAgainstClosedForm(t *testing.T) {
	r := parse(t, swing)
	g, err := ParseRange(r, "arm.inertia=6.25e6:12e6:7")
	if err != nil {
		t.Fatal(err)
	}
	table, err := Vary(context.Background(), r, []Range{g}, Options{Seconds: 30})
	if err != nil {
		t.Fatal(err)
	}
	amplitude := math.Pi / 180
	for i, a := range table.Answers {
		want := 2 * math.Pi * math.Sqrt(g.Values[i]/(0.1*9.81*0.25)) * (1 + amplitude*amplitude/16)
		if got := a.Parts[0].Period; math.Abs(got/want-1) > 1e-7 {
			t.Errorf("inertia %g: period %.9f, want %.9f", g.Values[i], got, want)
		}
		if got := a.Rests[0].Modes[0]; math.Abs(got*want/(1+amplitude*amplitude/16)-1) > 1e-7 {
			t.Errorf("inertia %g: small swings at %.9f Hz", g.Values[i], got)
		}
		if math.Abs(a.Parts[0].Amplitude/amplitude-1) > 1e-6 || a.Regime != Steady || a.StableRests() != 1 {
			t.Errorf("inertia %g: %+v", g.Values[i], a)
		}
	}
	// One percent more inertia changes the period by half a percent.
	found := false
	for _, f := range table.Findings(r) {
		found = found || f.Key == "sweep.period" && strings.Contains(f.Text, "+0.5 %")
	}
	if !found {
		t.Errorf("no word of the period's change: %+v", table.Findings(r))
	}
	var b bytes.Buffer
	if err := table.WriteCSV(&b); err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(&b).ReadAll()
	if err != nil || len(rows) != 8 || rows[0][0] != "arm.inertia (g·mm²)" || rows[1][0] != "6.25e+06" {
		t.Errorf("table %v, %v", rows, err)
	}
}

// A value that makes no toy is told, and the others stand.
func TestVaryWithImpossibleValues(t *testing.T) {
	r := parse(t, swing)
	g, err := ParseRange(r, "arm.mass=-100:100:3")
	if err != nil {
		t.Fatal(err)
	}
	table, err := Vary(context.Background(), r, []Range{g}, Options{Seconds: 5})
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(table.Answers[0].Problem, "mass_g") || table.Answers[2].Problem != "" {
		t.Errorf("%+v", table.Answers)
	}
	if f := table.Findings(r); len(f) == 0 || f[0].Key != "sweep.problems" {
		t.Errorf("findings %+v", f)
	}
}

// Stopped, a sweep keeps what is done.
func TestVaryKeepsWhatIsDone(t *testing.T) {
	r := parse(t, swing)
	g, err := ParseRange(r, "arm.inertia=6.25e6:12e6:200")
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	var done atomic.Int64
	table, err := Vary(ctx, r, []Range{g}, Options{Seconds: 5, Progress: func(n int) {
		done.Store(int64(n))
		if n == 10 {
			cancel()
		}
	}})
	if !errors.Is(err, context.Canceled) || table == nil || table.Done < 10 || table.Done > 20 {
		t.Fatalf("table %+v, error %v", table, err)
	}
	n := 0
	for _, a := range table.Answers {
		if a != nil {
			n++
		}
	}
	if n != table.Done || len(table.Curves()) == 0 {
		t.Errorf("%d answers are there, %d were done", n, table.Done)
	}
}

// Two ranges make maps: period over mass and inertia, constant where their ratio is.
func TestMaps(t *testing.T) {
	r := parse(t, swing)
	a, err := ParseRange(r, "arm.mass=50:100:2")
	if err != nil {
		t.Fatal(err)
	}
	b, err := ParseRange(r, "arm.inertia=6.25e6:12.5e6:2")
	if err != nil {
		t.Fatal(err)
	}
	table, err := Vary(context.Background(), r, []Range{a, b}, Options{Seconds: 20})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range table.Curves() {
		if c.Key != "map-period" {
			continue
		}
		z := c.Grid.Z // (50 g, 6.25e6), (100 g, 6.25e6), (50 g, 12.5e6), (100 g, 12.5e6)
		if math.Abs(z[0]/z[3]-1) > 1e-8 || math.Abs(z[0]/z[1]-math.Sqrt2) > 1e-6 || math.Abs(z[2]/z[0]-math.Sqrt2) > 1e-6 {
			t.Errorf("periods %v", z)
		}
		return
	}
	t.Error("no map of the period")
}

// The interval of the period from the inertia's uncertainty: u(T)/T = u(I)/2I.
func TestEnsembleInterval(t *testing.T) {
	r := parse(t, swing)
	res, err := Motion(context.Background(), r, Options{Seconds: 10, Ensemble: 400, Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range res.Findings {
		if f.Key != "simulate.period" {
			continue
		}
		want := f.Value * 0.5 * 1.25e5 / 6.25e6
		if math.Abs(f.U/want-1) > 0.12 || math.Abs((f.Hi-f.Lo)/(2*1.96*want)-1) > 0.2 {
			t.Errorf("period %.6f, u %.2g (want %.2g), interval %.6f to %.6f", f.Value, f.U, want, f.Lo, f.Hi)
		}
		if len(res.Track.Bobs) != 1 || len(res.Track.Bobs[0].Samples) != 601 {
			t.Error("the track is not one bob of 601 frames")
		}
		return
	}
	t.Error("no period was found")
}

// Fitted numbers are drawn with their correlation.
func TestDrawKeepsCorrelation(t *testing.T) {
	r := parse(t, swing)
	if err := r.SetFitted([]string{"arm.inertia", "arm.friction.viscous"}, []float64{6.25e-3, 1e-3}, [][]float64{{1e-10, 0.9e-11 * 0.9}, {0.9e-11 * 0.9, 0.81e-12}}); err != nil {
		t.Fatal(err)
	}
	d, err := newDrawer(r)
	if err != nil {
		t.Fatal(err)
	}
	var sxx, syy, sxy float64
	for i := range 4000 {
		c := d.draw(1, i)
		x, y := c.Parts[0].Inertia.V-6.25e-3, c.Parts[0].Friction.Viscous.V-1e-3
		sxx, syy, sxy = sxx+x*x, syy+y*y, sxy+x*y
	}
	if rho := sxy / math.Sqrt(sxx*syy); math.Abs(rho-0.9) > 0.02 || math.Abs(math.Sqrt(sxx/4000)/1e-5-1) > 0.05 {
		t.Errorf("correlation %.3f, u(I) %.3g", rho, math.Sqrt(sxx/4000))
	}
}

const between = `
name = "Between"
[[part]]
name = "arm"
joint = "hinge"
pivot_mm = [0, 0]
mass_g = 50
centre_mm = [0, -200]
friction = { viscous = 4e-4 }
[[magnet]]
name = "bob"
part = "arm"
at_mm = [0, -200]
axis = [0, -1]
moment_A_m2 = 0.6
[[magnet]]
name = "left"
part = "base"
at_mm = [-28, -222]
axis = [0, -1]
moment_A_m2 = 0.6
[[magnet]]
name = "right"
part = "base"
at_mm = [28, -222]
axis = [0, -1]
moment_A_m2 = 0.6
[[start]]
part = "arm"
angle_deg = 40
`

// Over two magnets that pull, the arm has a place of rest over each; weak ones
// leave it one in the middle. The sweep finds the change.
func TestSweepFindsTheFork(t *testing.T) {
	r := parse(t, between)
	g, err := ParseRange(r, "left.moment, right.moment=0.01:0.6:12")
	if err != nil {
		t.Fatal(err)
	}
	table, err := Vary(context.Background(), r, []Range{g}, Options{Seconds: 20})
	if err != nil {
		t.Fatal(err)
	}
	if a, b := table.Answers[0].StableRests(), table.Answers[11].StableRests(); a != 1 || b < 2 {
		t.Errorf("%d and %d places of rest", a, b)
	}
	found := false
	for _, f := range table.Findings(r) {
		found = found || f.Key == "sweep.rests"
	}
	if !found {
		t.Error("the fork is not told")
	}
}

// Mirrored releases fall into mirrored places, and each release where a plain
// simulation of it ends.
func TestBasins(t *testing.T) {
	r := parse(t, between)
	const side = 10
	b, err := FallInto(context.Background(), r, side, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Rests) != 3 && len(b.Rests) != 2 {
		t.Fatalf("%d places of rest", len(b.Rests))
	}
	mirror := make([]int, len(b.Rests))
	for i := range b.Rests {
		for j := range b.Rests {
			if math.Abs(b.Rests[i].Angles[0]+b.Rests[j].Angles[0]) < 1e-4 {
				mirror[i] = j
			}
		}
	}
	into := map[int]bool{}
	for i, at := range b.Into {
		if at < 0 {
			t.Fatalf("release %d was not decided", i)
		}
		into[at] = true
		if other := b.Into[side*side-1-i]; other != mirror[at] {
			t.Errorf("release %d falls into %d, its mirror image into %d", i, at, other)
		}
	}
	if len(into) < 2 {
		t.Error("all releases fall into one place")
	}
	for _, i := range []int{7, 33, 58} {
		m, y, err := build(r)
		if err != nil {
			t.Fatal(err)
		}
		m.SetAngle(y, 0, b.X[i%side], b.Y[i/side])
		a, _, err := ask(context.Background(), m, y, 120, Options{})
		if err != nil || a.Regime != Rests || a.EndsAt < 0 || math.Abs(a.Rests[a.EndsAt].Angles[0]-b.Rests[b.Into[i]].Angles[0]) > 1e-6 {
			t.Errorf("release %d: simulated %+v, basin %d", i, a, b.Into[i])
		}
	}
	sum := 0.0
	for _, f := range b.Findings([]string{"arm"}) {
		if f.Kind == finding.Measured {
			sum += f.Value
		}
	}
	if math.Abs(sum-1) > 1e-12 {
		t.Errorf("the shares sum to %g", sum)
	}
	if _, err := FallInto(context.Background(), parse(t, strings.Replace(between, "friction = { viscous = 4e-4 }", "", 1)), 3, Options{}); err == nil || !strings.Contains(err.Error(), "friction") {
		t.Errorf("without friction: %v", err)
	}
}

// Regimes of toys whose regime is known: a free decay, a swing that a coil keeps
// going, one without friction.
func TestRegimes(t *testing.T) {
	kicked := swing + `
[[magnet]]
name = "foot"
part = "arm"
at_mm = [0, -270]
axis = [0, -1]
moment_A_m2 = 0.5
[[coil]]
at_mm = [0, -290]
kick_mJ = 0.3
sensed_rad_s = 0.05
`
	friction := func(s string) string {
		return strings.Replace(s, "mass_g = 100\n", "mass_g = 100\nfriction = { viscous = 6e-4 }\n", 1)
	}
	for _, c := range []struct {
		name, text string
		seconds    float64
		want       Regime
	}{
		{"without friction", swing, 30, Steady},
		{"dying", friction(swing), 30, Dying},
		{"dead", friction(swing), 300, Rests},
		{"kicked from small", friction(kicked), 10, Growing},
		{"kicked for long", friction(kicked), 600, Steady},
	} {
		a, err := Ask(context.Background(), parse(t, c.text), Options{Seconds: c.seconds})
		if err != nil {
			t.Fatal(err)
		}
		if a.Regime != c.want {
			t.Errorf("%s: %s, want %s (energy %g)", c.name, a.Regime, c.want, a.Energy)
		}
	}
}
