package samples

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
	"strings"
	"testing"

	"lodeswing/track/rig"
)

func open(t *testing.T, name string) *rig.Rig {
	t.Helper()
	r, err := Open(name)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func prepare(t *testing.T, r *rig.Rig, opt Options) *Take {
	t.Helper()
	take, err := Prepare(t.Context(), r, opt)
	if err != nil {
		t.Fatalf("%s: %v", r.Path, err)
	}
	return take
}

// Every sample can be filmed: its bobs stay whole inside the picture, and what
// the rig says of the picture (the ruler's ends, the plumb line) is where the
// camera would see it.
func TestEverySample(t *testing.T) {
	for _, want := range []string{"buoys", "lantern", "lantern-magnet-out", "lantern-ball", "lantern-ball-above", "vanes", "beacon", "gull", "ferry"} {
		t.Run(want, func(t *testing.T) {
			r := open(t, want)
			take := prepare(t, r, Options{})
			s := take.Scene
			edge := math.Inf(1)
			for i := 0; i < take.Frames; i += 5 {
				for k, p := range s.Truth(s.Time(i)) {
					reach := r.Bobs[k].DiameterM.V / 2 * s.Camera.PixelsPerM * 1.1
					edge = min(edge, p.U-reach, p.V-reach, float64(s.Camera.Width)-1-p.U-reach, float64(s.Camera.Height)-1-p.V-reach)
				}
			}
			t.Logf("nearest to the edge: %.0f px", edge)
			if edge < 5 {
				t.Errorf("a bob comes within %.0f px of the picture's edge", edge)
			}
			if ends := r.Scale.EndsPX; len(ends) == 2 {
				p := motionSheet(r, take.motion, r.Scale.DepthM.V)
				xa, za := p.seen(&s.Camera, ends[0])
				xb, zb := p.seen(&s.Camera, ends[1])
				off := math.Abs(math.Hypot(xa-xb, za-zb)-r.Scale.LengthM.V) * s.Camera.PixelsPerM
				if off > 0.3 {
					t.Errorf("the ruler's ends are %.2f px from %g mm apart", off, 1e3*r.Scale.LengthM.V)
				}
			}
			if px := r.Camera.PlumbPX; len(px) == 2 {
				p := motionSheet(r, take.motion, 0)
				xa, _ := p.seen(&s.Camera, px[0])
				xb, _ := p.seen(&s.Camera, px[1])
				if off := math.Abs(xa-xb) * s.Camera.PixelsPerM; off > 0.5 {
					t.Errorf("the plumb line leans by %.2f px", off)
				}
			}
		})
	}
	if n := len(Names()); n < 8 {
		t.Errorf("only %d samples: %v", n, Names())
	}
}

// The lantern with its magnet out is a compound pendulum: small period
// 2π√(I/(m g l)), damping ratio c/(2 I ω) from the viscous friction alone.
func TestMagnetOutTruth(t *testing.T) {
	take := prepare(t, open(t, "lantern-magnet-out"), Options{DurationS: 1})
	truth := take.Numbers("x.mp4")
	if len(truth.Small) != 1 {
		t.Fatalf("small swings: %v", truth.Small)
	}
	const inertia, mgl, viscous = 5.34e-3, 0.070 * 9.80665 * 0.274, 2.4e-4
	w := math.Sqrt(mgl / inertia)
	s := truth.Small[0]
	t.Logf("period %.6f s, damping ratio %.6f", s.PeriodS, s.Zeta)
	if math.Abs(s.PeriodS*w/(2*math.Pi)-1) > 1e-6 || math.Abs(s.Zeta/(viscous/(2*inertia*w))-1) > 1e-6 {
		t.Errorf("period %g, damping ratio %g, want %g and %g", s.PeriodS, s.Zeta, 2*math.Pi/w, viscous/(2*inertia*w))
	}
}

// The interpolated motion is the model's own: a bob stays on its circle, and
// the angle's rate is its derivative.
func TestMotionIsSmooth(t *testing.T) {
	r := open(t, "lantern")
	take := prepare(t, r, Options{DurationS: 3})
	worst, slope := 0.0, 0.0
	for x := 0.05; x < 2.9; x += 0.00137 {
		p := take.Scene.Bobs[0].At(x)
		worst = max(worst, math.Abs(math.Hypot(p[0], p[2])-0.28))
		a, _ := take.motion.angle(0, x-1e-5)
		b, _ := take.motion.angle(0, x+1e-5)
		_, rate := take.motion.angle(0, x)
		slope = max(slope, math.Abs((b-a)/2e-5-rate))
	}
	if worst > 1e-10 || slope > 1e-6 {
		t.Errorf("off the circle by %g m, rate off by %g rad/s", worst, slope)
	}
	a, b := take.Scene.Bobs[0].At(-1), take.Scene.Bobs[0].At(0)
	if a != b {
		t.Error("before the start the bob is not held")
	}
}

func TestOwnersRigKeepsNoSecret(t *testing.T) {
	for _, name := range Names() {
		text := string(OwnersRig(open(t, name)).Marshal())
		for _, secret := range []string{"fit from", "[film]", "[[start]]"} {
			if strings.Contains(text, secret) {
				t.Errorf("%s: the owner's rig holds %q", name, secret)
			}
		}
		if _, err := rig.Parse(name, []byte(text)); err != nil {
			t.Errorf("%s: the owner's rig is not a rig: %v", name, err)
		}
	}
}

func small(t *testing.T) *rig.Rig {
	r := open(t, "lantern")
	f := &r.Film
	f.WidthPX.V, f.HeightPX.V, f.PixelsPerM.V, f.DurationS.V = 320, 180, 425, 0.5
	return r
}

// The four files appear together; the truth is the projection of the bob.
func TestFilm(t *testing.T) {
	if _, err := exec.LookPath("ffmpeg"); err != nil {
		t.Skip("ffmpeg is not installed")
	}
	dir := filepath.Join(t.TempDir(), "made", "here")
	r := small(t)
	files, err := Film(t.Context(), r, dir, Options{})
	if err != nil {
		t.Fatal(err)
	}
	left, _ := os.ReadDir(dir)
	if len(left) != 4 {
		t.Errorf("the folder holds %v, want four files", left)
	}
	f, err := os.Open(files.Truth)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 31 {
		t.Fatalf("%d rows, %v: want a head and 30 frames", len(rows), err)
	}
	num := func(s string) float64 {
		x, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		return x
	}
	// By hand: a pinhole 1.2 m before (0, 0, −0.15), rolled by 0.8°.
	roll, focal := 0.8*math.Pi/180, 425*1.2
	for i, row := range rows[1:] {
		x, z := num(row[3]), num(row[5])
		a, b := x, -(z + 0.15)
		u := 159.5 + focal/1.2*(a*math.Cos(roll)-b*math.Sin(roll))
		v := 89.5 + focal/1.2*(a*math.Sin(roll)+b*math.Cos(roll))
		if math.Abs(u-num(row[6])) > 2e-5 || math.Abs(v-num(row[7])) > 2e-5 {
			t.Fatalf("frame %d: truth says (%s, %s), by hand (%.5f, %.5f)", i, row[6], row[7], u, v)
		}
		if late := num(row[1]) - float64(i)/60; math.Abs(late-0.009*(v/179-0.5)) > 2e-8 {
			t.Fatalf("frame %d: the row's delay is %g s, want %g", i, late, 0.009*(v/179-0.5))
		}
		if angle := math.Atan2(x, -z); math.Abs(angle-num(row[10])) > 1e-8 {
			t.Fatalf("frame %d: angle %s, want %g", i, row[10], angle)
		}
	}
	var truth Truth
	data, err := os.ReadFile(files.Numbers)
	if err == nil {
		err = json.Unmarshal(data, &truth)
	}
	if err != nil || truth.Clip != "lantern.mp4" || truth.Frames != 30 || len(truth.Numbers) == 0 {
		t.Errorf("truth.json: %v, clip %q, %d frames", err, truth.Clip, truth.Frames)
	}

	// A second film of the same rig replaces the first; one of another rig may not.
	if _, err := Film(t.Context(), r, dir, Options{DurationS: 0.2}); err != nil {
		t.Errorf("filming again: %v", err)
	}
	other := small(t)
	other.Path = "other.toml"
	if _, err := Film(t.Context(), other, dir, Options{}); err == nil || !strings.Contains(err.Error(), "--out") {
		t.Errorf("another film into the same folder: %v", err)
	}
	// A rig is never replaced by the owner's version of itself.
	r.Path = files.Rig
	before, _ := os.ReadFile(files.Rig)
	if _, err := Film(t.Context(), r, dir, Options{}); err == nil {
		t.Error("the film replaced its own rig")
	}
	if after, _ := os.ReadFile(files.Rig); string(after) != string(before) {
		t.Error("the rig was changed")
	}
}

func TestStoppedFilmLeavesNothing(t *testing.T) {
	if _, err := exec.LookPath("ffmpeg"); err != nil {
		t.Skip("ffmpeg is not installed")
	}
	dir := t.TempDir()
	ctx, cancel := context.WithCancel(t.Context())
	_, err := Film(ctx, small(t), dir, Options{DurationS: 60, Progress: func(done int) {
		if done == 3 {
			cancel()
		}
	}})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("stopped: %v", err)
	}
	if left, _ := os.ReadDir(dir); len(left) != 0 {
		t.Errorf("stopped: %v is left", left)
	}
}

func TestBadFilms(t *testing.T) {
	for _, c := range []struct {
		what, want string
		spoil      func(*rig.Rig)
	}{
		{"no bob", "no [[bob]]", func(r *rig.Rig) { r.Bobs = nil }},
		{"no film", "add [film]", func(r *rig.Rig) { r.Film = rig.Film{} }},
		{"no diameter", "diameter_mm", func(r *rig.Rig) { r.Bobs[0].DiameterM = rig.Value{} }},
		{"odd width", "must be even", func(r *rig.Rig) { r.Film.WidthPX.V = 321 }},
		{"turned", "turned_deg", func(r *rig.Rig) { r.Film.TurnedRad = rig.Value{V: 0.3, Set: true} }},
		{"too long", "shorter duration_s", func(r *rig.Rig) { r.Film.DurationS.V = 1e6 }},
		{"too short", "longer duration_s", func(r *rig.Rig) { r.Film.DurationS.V = 1e-4 }},
		{"no part", "[[part]]", func(r *rig.Rig) { r.Parts = nil }},
	} {
		r := small(t)
		c.spoil(r)
		if _, err := Prepare(t.Context(), r, Options{}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: the error is %v, want one with %q", c.what, err, c.want)
		}
	}
	if _, err := Open("lanten"); err == nil || !strings.Contains(err.Error(), "lantern") {
		t.Errorf("an unknown sample: %v", err)
	}
	if _, err := Open("no/such.toml"); err == nil || !strings.Contains(err.Error(), "cannot be read") {
		t.Errorf("a missing file: %v", err)
	}
}
