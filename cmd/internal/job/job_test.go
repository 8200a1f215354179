package job

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/samples"
	"lodeswing/track/clip"
)

// filmed renders a sample and measures it, as `make demo` does.
func filmed(t *testing.T, sample string, seconds float64) (*record.Record, *samples.Truth, string) {
	t.Helper()
	if _, err := exec.LookPath("ffmpeg"); err != nil {
		t.Skip("ffmpeg is not installed: run make test, which installs it")
	}
	dir := t.TempDir()
	r, err := samples.Open(sample)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := samples.Film(t.Context(), r, dir, samples.Options{DurationS: seconds}); err != nil {
		t.Fatal(err)
	}
	stem := samples.Stem(r)
	j := &Job{Clip: filepath.Join(dir, stem+".mp4"), RigPath: filepath.Join(dir, stem+".toml"), Out: filepath.Join(dir, "result"), Version: "test"}
	rec, err := j.Measure(t.Context())
	if errors.Is(err, clip.ErrNoOpenCV) {
		t.Skip("built without OpenCV: run make test")
	}
	if err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(filepath.Join(dir, "truth.json"))
	if err != nil {
		t.Fatal(err)
	}
	truth := &samples.Truth{}
	if err := json.Unmarshal(text, truth); err != nil {
		t.Fatal(err)
	}
	return rec, truth, dir
}

// within says whether a finding lies within three standard uncertainties of the
// truth, and how far it is off; slack is what the truth itself is good for.
func within(t *testing.T, rec *record.Record, key string, want, slack float64) {
	t.Helper()
	f := rec.Find(key, "")
	if f == nil || f.Kind != finding.Measured {
		t.Errorf("%s: not measured: %+v", key, f)
		return
	}
	off := f.Value - want
	t.Logf("%-22s %.7g ± %.2g, true %.7g: off by %.2f u", key, f.Value, f.U, want, off/f.U)
	if math.Abs(off) > 3*f.U+slack {
		t.Errorf("%s = %.7g ± %.2g lies more than three standard uncertainties from %.7g", key, f.Value, f.U, want)
	}
}

// The demo's clip, measured as a user would: every number that the film maker
// knows comes back within three standard uncertainties.
func TestTheDemoComesBackTrue(t *testing.T) {
	rec, truth, dir := filmed(t, "lantern", 15)
	number := map[string]float64{}
	for _, n := range truth.Numbers {
		number[n.Name] = n.Value
	}
	inertia := number["arm.inertia"]
	within(t, rec, "series.radius", 0.28, 0)
	within(t, rec, "decay.period_zero", truth.Small[0].PeriodS, 0)
	within(t, rec, "decay.viscous", number["arm.friction.viscous"]/inertia, 0)
	within(t, rec, "decay.drag", number["arm.friction.drag"]/inertia, 0)
	within(t, rec, "decay.rest_angle", 0, 0)
	within(t, rec, "match.moment", number["lamp magnet.moment"], 0)
	within(t, rec, "match.product", number["lamp magnet.moment"]*number["base magnet.moment"], 0)
	within(t, rec, "match.viscous", number["arm.friction.viscous"], 0)
	within(t, rec, "match.drag", number["arm.friction.drag"], 0)

	// Period and damping at the stated amplitude from the film's own turning
	// points, each pair on one side; a ζ by first order in the loss agrees with
	// that of a finite loss δ to δ²/24 (Taylor), 1e-4 here.
	state := rec.Find("decay.zeta", "")
	if state == nil {
		t.Fatal("no damping ratio")
	}
	amplitude := statedAmplitude(t, rec)
	period, zeta := fromTurns(t, truth, amplitude)
	within(t, rec, "decay.period_at", period, 2e-5*period)
	within(t, rec, "decay.zeta", zeta, 1e-3*zeta)

	positions(t, rec, dir, 0.08)
	checkFolder(t, filepath.Join(dir, "result"))
}

// statedAmplitude reads back from the damping curve where it is marked.
func statedAmplitude(t *testing.T, rec *record.Record) float64 {
	t.Helper()
	for _, c := range rec.Curves {
		if c.Key != "decay-zeta" {
			continue
		}
		for _, l := range c.Lines {
			if l.Role == finding.Mark && len(l.X) == 1 {
				return l.X[0]
			}
		}
	}
	t.Fatal("no curve decay-zeta with a mark at the stated amplitude")
	return 0
}

// fromTurns interpolates period and damping ratio at an amplitude.
func fromTurns(t *testing.T, truth *samples.Truth, amplitude float64) (period, zeta float64) {
	t.Helper()
	type swing struct{ amplitude, period, zeta float64 }
	var turns []samples.Happened
	for _, e := range truth.Events {
		if e.What == "turn" {
			turns = append(turns, e)
		}
	}
	var all []swing
	for i := 2; i < len(turns); i++ {
		a, b := math.Abs(turns[i-2].AngleRad), math.Abs(turns[i].AngleRad)
		d := math.Log(a / b)
		all = append(all, swing{math.Sqrt(a * b), turns[i].TimeS - turns[i-2].TimeS, d / math.Hypot(2*math.Pi, d)})
	}
	for i := 1; i < len(all); i++ {
		if a, b := all[i-1], all[i]; a.amplitude >= amplitude && b.amplitude <= amplitude {
			x := (a.amplitude - amplitude) / (a.amplitude - b.amplitude)
			return a.period + x*(b.period-a.period), a.zeta + x*(b.zeta-a.zeta)
		}
	}
	t.Fatalf("no turning points about %g rad", amplitude)
	return 0, 0
}

// positions holds the track against the film's truth, in pixels: every bob is
// found in nearly all frames, and its centre is off by less than limit r.m.s.
func positions(t *testing.T, rec *record.Record, dir string, limit float64) {
	t.Helper()
	f, err := os.Open(filepath.Join(dir, "truth.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	col := map[string]int{}
	for i, name := range rows[0] {
		col[name] = i
	}
	for b := range rec.Track.Bobs {
		bob := &rec.Track.Bobs[b]
		var du, dv, z2 float64
		n := 0
		for _, row := range rows[1:] {
			i, _ := strconv.Atoi(row[col["frame"]])
			u, _ := strconv.ParseFloat(row[col["u_px"]], 64)
			v, _ := strconv.ParseFloat(row[col["v_px"]], 64)
			if row[col["bob"]] != bob.Name || i >= len(bob.Samples) || !bob.Samples[i].State.Usable() {
				continue
			}
			s := bob.Samples[i]
			du += (s.U - u) * (s.U - u)
			dv += (s.V - v) * (s.V - v)
			z2 += (s.U-u)*(s.U-u)/s.Pixel.AA + (s.V-v)*(s.V-v)/s.Pixel.BB
			n++
		}
		if n < len(bob.Samples)*95/100 {
			t.Errorf("%s: only %d of %d frames hold it", bob.Name, n, len(bob.Samples))
		}
		du, dv = math.Sqrt(du/float64(n)), math.Sqrt(dv/float64(n))
		t.Logf("%s: positions after H.264 %.3f px across, %.3f px down r.m.s. in %d frames; over the stated uncertainty %.2f", bob.Name, du, dv, n, math.Sqrt(z2/float64(2*n)))
		if du > limit || dv > limit {
			t.Errorf("%s: positions are off by %.3f and %.3f px r.m.s.; allowed is %.2f", bob.Name, du, dv, limit)
		}
	}
}

// Every toy of the harbour set goes the whole road. Balls that hide one another,
// and blue ones, which the encoder shows worst, are allowed half a pixel here; the
// accuracy on one ball is track/follow's to show.
func TestTheWholeWorkshopIsMeasured(t *testing.T) {
	for _, name := range samples.Names() {
		if name == "lantern" {
			continue // the demo's own test
		}
		t.Run(name, func(t *testing.T) {
			rec, _, dir := filmed(t, name, 2)
			positions(t, rec, dir, 0.5)
			checkFolder(t, filepath.Join(dir, "result"))
			if rec.Headline == "" {
				t.Error("no headline")
			}
			for _, f := range rec.Findings {
				if f.Kind == finding.Measured && !(f.U > 0) {
					t.Errorf("%s of %s has no uncertainty: %+v", f.Key, f.Subject, f)
				}
			}
		})
	}
}

// checkFolder holds the folder against design section 4.
func checkFolder(t *testing.T, dir string) {
	t.Helper()
	for _, name := range []string{"datapackage.json", "track.csv", "angles.csv", "findings.json", "curves", "still.png", "figures", "report.html", "run.json"} {
		if _, err := os.Stat(filepath.Join(dir, name)); err != nil {
			t.Errorf("the result lacks %s", name)
		}
	}
}

// A measurement that is stopped leaves nothing behind.
func TestStoppedHalfWay(t *testing.T) {
	if _, err := exec.LookPath("ffmpeg"); err != nil {
		t.Skip("ffmpeg is not installed: run make test, which installs it")
	}
	dir := t.TempDir()
	r, err := samples.Open("lantern")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := samples.Film(t.Context(), r, dir, samples.Options{DurationS: 1}); err != nil {
		t.Fatal(err)
	}
	before, _ := os.ReadDir(dir)
	ctx, stop := context.WithCancel(t.Context())
	stop()
	j := &Job{Clip: filepath.Join(dir, "lantern.mp4"), RigPath: filepath.Join(dir, "lantern.toml"), Out: filepath.Join(dir, "result")}
	if _, err := j.Measure(ctx); err == nil {
		t.Fatal("a stopped measurement said that it was done")
	}
	if after, _ := os.ReadDir(dir); len(after) != len(before) {
		t.Errorf("%d entries before, %d after", len(before), len(after))
	}
}
