package analyze

import (
	"context"
	"errors"
	"flag"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
	"lodeswing/track/rig"
)

var long = flag.Bool("long", false, "also the slow ones")

var keep = flag.String("keep", "", "folder in which the records of the tests are left, to be looked at")

// swing is the track of a bob that swings with viscous friction alone, small
// enough for the textbook's solution x = A·exp(−ζω₀t)·cos(ω_d t).
func swing(seconds, amplitude, zeta, period, sigma float64) *track.Track {
	rng := rand.New(rand.NewPCG(5, 9))
	const length, rate = 0.28, 60.0
	w0 := 2 * math.Pi / period
	b := track.Bob{Name: "lamp", Part: "arm"}
	for k := range int(seconds * rate) {
		t := float64(k) / rate
		q := amplitude * math.Exp(-zeta*w0*t) * math.Cos(w0*math.Sqrt(1-zeta*zeta)*t)
		b.Samples = append(b.Samples, track.Sample{
			Frame: k, T: t, X: length*math.Sin(q) + sigma*rng.NormFloat64(), Z: -length*math.Cos(q) + sigma*rng.NormFloat64(),
			U: 300 + 1000*length*math.Sin(q), V: 100 + 1000*length*math.Cos(q), State: track.Seen,
			Plane: track.Cov{AA: sigma * sigma, BB: sigma * sigma}, Pixel: track.Cov{AA: 1e-3, BB: 1e-3},
		})
	}
	return &track.Track{Bobs: []track.Bob{b}, BrokeAt: math.NaN(), Cal: track.Calibration{
		MetresPerPixel: 1e-3, UScale: 0.002, UClock: 50e-6, VerticalKnown: true, VerticalFrom: "a plumb line", UVertical: 0.001, PictureW: 640, PictureH: 480, RateFactor: 1,
	}}
}

func TestASwingBecomesARecord(t *testing.T) {
	const period, zeta = 1.0634, 0.005
	r := &rig.Rig{
		Name:  "Test lantern",
		Bobs:  []rig.Bob{{Name: "lamp", Part: "arm", AtM: []float64{0, -0.28}}},
		Parts: []rig.Part{{Name: "arm", Joint: "hinge", PivotFromTrack: true}},
	}
	tr := swing(30, 0.12, zeta, period, 3e-5)
	for k := 600; k < 630; k++ {
		s := &tr.Bobs[0].Samples[k]
		s.State, s.X, s.Z = track.Missing, math.NaN(), math.NaN()
	}
	tr.Cautions = []string{"The clip is dark."}
	var steps []string
	rec, err := Run(t.Context(), tr, r, Options{Step: func(s string) { steps = append(steps, s) }})
	if err != nil {
		t.Fatal(err)
	}
	if len(steps) != len(analyses) || len(rec.Run.Durations) != len(analyses) {
		t.Errorf("steps %v, durations %v", steps, rec.Run.Durations)
	}
	// The swing is small: the pendulum's law changes its period by A²/16 at most,
	// less than a thousandth (Abramowitz & Stegun 17.3.11).
	for _, want := range []struct {
		key   string
		value float64
		rel   float64
	}{
		{"decay.period_zero", period, 1.2e-3},
		{"decay.zeta", zeta, 0.03},
		{"spectrum.line1.frequency", 1 / period, 2e-3},
		{"series.radius", 0.28, 0.01},
	} {
		f := rec.Find(want.key, "arm")
		if f == nil {
			t.Errorf("the record holds no %s", want.key)
			continue
		}
		if math.Abs(f.Value-want.value) > want.rel*want.value || !(f.U > 0) || !(f.Lo < f.Value && f.Value < f.Hi) || f.Method == "" {
			t.Errorf("%s is %v ± %v (%v to %v), want %v", want.key, f.Value, f.U, f.Lo, f.Hi, want.value)
		}
	}
	if len(rec.Angles) != 1 || rec.Angles[0].Part != "arm" || len(rec.Angles[0].T) != 1770 {
		t.Errorf("angles: %d series", len(rec.Angles))
	}
	if rec.Track != tr || len(rec.Curves) < 4 || len(rec.Fits) == 0 {
		t.Errorf("%d curves, %d fits", len(rec.Curves), len(rec.Fits))
	}
	all := strings.Join(rec.Cautions, "\n")
	for _, want := range []string{"The clip is dark.", "was not measured from 9.98 s to 10.50 s"} {
		if !strings.Contains(all, want) {
			t.Errorf("no caution says %q; there are %q", want, all)
		}
	}
	for _, want := range []string{"“arm” swings once every 1.06", "(± 0.00", "loses 3.", "friction"} {
		if !strings.Contains(rec.Headline, want) {
			t.Errorf("the headline lacks %q: %s", want, rec.Headline)
		}
	}
	if *keep != "" {
		if err := record.Write(t.Context(), filepath.Join(*keep, "swing"), rec); err != nil {
			t.Fatal(err)
		}
	}
}

func TestWhatCannotBeAnalysedIsAFinding(t *testing.T) {
	still := swing(5, 0, 0, 1, 3e-5) // a bob that hangs still
	short := swing(0.05, 0.1, 0.01, 1, 3e-5)
	nowhere := swing(5, 0.1, 0.01, 1, 3e-5)
	for i := range nowhere.Bobs[0].Samples {
		s := &nowhere.Bobs[0].Samples[i]
		s.State, s.X, s.Z, s.U, s.V = track.Missing, math.NaN(), math.NaN(), math.NaN(), math.NaN()
	}
	for name, tr := range map[string]*track.Track{"still": still, "short": short, "nowhere": nowhere} {
		for _, r := range []*rig.Rig{nil, {Parts: []rig.Part{{Name: "arm", Joint: "hinge"}}}} {
			rec, err := Run(t.Context(), tr, r, Options{})
			if err != nil {
				t.Errorf("%s: %v", name, err)
				continue
			}
			undecided := 0
			for _, f := range rec.Findings {
				if f.Kind == finding.Undecided {
					undecided++
					if f.Text == "" || !strings.HasSuffix(f.Text, ".") {
						t.Errorf("%s: undecided without a reason: %+v", name, f)
					}
				}
				if strings.Contains(f.Text, "defect in the program") {
					t.Errorf("%s: %s", name, f.Text)
				}
			}
			if undecided == 0 {
				t.Errorf("%s: nothing is undecided; findings %+v", name, rec.Findings)
			}
			if rec.Headline == "" || rec.Track != tr {
				t.Errorf("%s: headline %q", name, rec.Headline)
			}
			if err := record.Write(t.Context(), filepath.Join(t.TempDir(), "r"), rec); err != nil {
				t.Errorf("%s: %v", name, err)
			}
		}
	}
	if _, err := Run(t.Context(), nil, nil, Options{}); err == nil {
		t.Error("no track is a record")
	}
	if _, err := RunAngles(t.Context(), nil, nil, Options{}); err == nil {
		t.Error("no table is a record")
	}
}

func TestADefectOfOneAnalysisLosesNoRecord(t *testing.T) {
	kept := analyses
	t.Cleanup(func() { analyses = kept })
	analyses = append([]analysis{
		{"breaking", "test.panic", "Breaking", func(context.Context, *work) error { panic("index out of range") }},
		{"failing", "test.error", "Failing", func(context.Context, *work) error { return errors.New("series: the moon is full") }},
	}, kept...)
	rec, err := Run(t.Context(), swing(20, 0.1, 0.005, 1, 3e-5), nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if f := rec.Find("test.panic", ""); f == nil || !strings.Contains(f.Text, "defect in the program") || !strings.Contains(f.Text, "index out of range") {
		t.Errorf("finding %+v", f)
	}
	if f := rec.Find("test.error", ""); f == nil || f.Text != "The moon is full." {
		t.Errorf("finding %+v", f)
	}
	if rec.Find("decay.period_zero", "lamp") == nil {
		t.Error("the other analyses did not run")
	}
}

func TestStoppedItReturnsAtOnce(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Run(ctx, swing(20, 0.1, 0.005, 1, 3e-5), nil, Options{}); !errors.Is(err, context.Canceled) {
		t.Errorf("error: %v", err)
	}
}

func TestSafetyCautionsFollowTheRig(t *testing.T) {
	r := &rig.Rig{Magnets: []rig.Magnet{{Name: "m"}}, Coils: []rig.Coil{{Name: "c"}}}
	all := strings.Join(safety(r), " ")
	for _, want := range []string{"swallowed", "pacemakers", "pinch", "children", "9 V", "needle points", "accredited laboratory", "local law"} {
		if !strings.Contains(all, want) {
			t.Errorf("the safety cautions do not speak of %q", want)
		}
	}
	if len(safety(&rig.Rig{})) != 0 {
		t.Error("a toy without magnets and cells carries their cautions")
	}
}

// The table is that of K. Kaheman et al., "The Experimental Multi-Arm Pendulum on
// a Cart" (2022); their estimate of ω₀² is 64.219 s⁻² (../shared/data/README.md).
func TestAnEncodersTableBecomesARecord(t *testing.T) {
	path := filepath.Join("..", "..", "shared", "data", "pendulum-encoder", "free-swing.csv")
	f, err := os.Open(path)
	if err != nil {
		t.Skipf("the encoder's table is not here: %v", err)
	}
	defer f.Close()
	tables, err := record.ReadAngles(f, "free-swing.csv", "pendulum")
	if err != nil {
		t.Fatal(err)
	}
	// Every fifth row, 50 a second, is more than a phone gives and keeps this test short.
	a := &tables[0]
	every := func(xs []float64) (out []float64) {
		for i := 0; i < len(xs); i += 5 {
			out = append(out, xs[i])
		}
		return out
	}
	a.T, a.Angle, a.U, a.Rate, a.URate = every(a.T), every(a.Angle), every(a.U), every(a.Rate), every(a.URate)
	rec, err := RunAngles(t.Context(), tables, nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	w2 := rec.Find("decay.omega_squared", "pendulum")
	if w2 == nil || math.Abs(w2.Value-64.219) > 0.01*64.219 {
		t.Errorf("ω₀² is %+v, want 64.219 within 1 %%", w2)
	}
	t.Log(rec.Headline)
	if *keep != "" {
		if err := record.Write(t.Context(), filepath.Join(*keep, "encoder"), rec); err != nil {
			t.Fatal(err)
		}
	}
}
