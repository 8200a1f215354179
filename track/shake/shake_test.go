package shake

import (
	"math"
	"math/rand"
	"strings"
	"testing"

	"lodeswing/track/clip"
)

func cautions(r *Report) string { return strings.Join(append(r.Cautions, r.Why), "\n") }

// TestFindAgainstKnownShifts holds the sub-pixel search against shifts that the
// scene was drawn with, and its scatter against the stated one.
func TestFindAgainstKnownShifts(t *testing.T) {
	s := newScene(120, 120, 60, 1)
	var buf buffers
	still := s.frame(0, 0)
	tpl, ok := newTemplate(still, 60, 60, 1, &buf)
	if !ok {
		t.Fatal("no template")
	}
	sigma := s.noise * math.Sqrt(3.0/8) // of (b + 2g + r)/4, three independent channels
	// The template has noise of its own, common to all finds; the scatter about
	// the mean is the new frame's alone.
	u := sigma * math.Sqrt((tpl.inv[0]+tpl.inv[2])/2)
	rng := rand.New(rand.NewSource(2))
	var sum, sq float64
	const n = 200
	for i := range n {
		du, dv := 6*(rng.Float64()-0.5), 6*(rng.Float64()-0.5)
		s.camera = func(float64) similarity { return similarity{a: du, b: dv} }
		gu, gv, like, ok := tpl.find(s.frame(1, 0), math.Round(du), math.Round(dv), &buf)
		if !ok || like < 0.9 {
			t.Fatalf("shift %d (%.2f, %.2f) not found, likeness %.3f", i, du, dv, like)
		}
		sum += gu - du
		sq += ((gu-du)*(gu-du) + (gv-dv)*(gv-dv)) / 2
	}
	rms := math.Sqrt(sq / n)
	t.Logf("r.m.s. error %.4f px, mean %.4f, stated %.4f px", rms, sum/n, u)
	if rms > 1.5*math.Sqrt2*u+0.005 || rms > 0.03 {
		t.Errorf("r.m.s. error %.4f px, stated %.4f px", rms, u)
	}
}

func TestStillCamera(t *testing.T) {
	s := newScene(400, 300, 300, 3)
	s.bob = swinging
	r, _ := s.watch(12, standMark, baseMark)
	if strings.TrimSpace(cautions(r)) != "" {
		t.Errorf("a still camera is blamed: %s", cautions(r))
	}
	t.Logf("patches %d, moved %.3f ± %.3f px, fast %.3f, zoom %.1e ± %.1e, warp %.3f, rock %+v", r.Patches, r.MovePX, r.UMovePX, r.FastPX, r.Zoom, r.UZoom, r.WarpPX, r.Rock)
	if r.Patches < 10 || r.MovePX > 0.1 || r.Zoom > 1e-4 || r.TurnRad > 1e-4 {
		t.Errorf("patches %d, moved %g px, zoom %g, turn %g", r.Patches, r.MovePX, r.Zoom, r.TurnRad)
	}
	if r.Rock == nil || r.Rock.PX > 3*r.Rock.U || r.Rock.U > 0.02 {
		t.Errorf("rock %+v of a base that stands still", r.Rock)
	}
	if ratio, words := r.RockCaution(80); words != "" {
		t.Errorf("rock ratio %g: %s", ratio, words)
	}
}

// TestSlowMotionIsMeasuredAndCorrected: a camera that sags, turns and breathes.
func TestSlowMotionIsMeasuredAndCorrected(t *testing.T) {
	s := newScene(400, 300, 300, 4)
	s.bob = swinging
	s.camera = func(t float64) similarity {
		x := t / 12
		return similarity{a: 1.5 * x, b: 3 * x * x, z: 0.004 * x, r: 0.003 * x}
	}
	r, facts := s.watch(12)
	last := r.Motions[len(r.Motions)-1]
	want := s.camera(last.T)
	if math.Abs(last.DU-want.a) > 0.05 || math.Abs(last.DV-want.b) > 0.05 || math.Abs(last.Zoom-want.z) > 2e-4 || math.Abs(last.Turn-want.r) > 2e-4 {
		t.Errorf("motion %+v, want %+v", last, want)
	}
	if !strings.Contains(cautions(r), "scale changes by 0.4 %") && !strings.Contains(cautions(r), "scale changes by 0.3") {
		t.Errorf("cautions %q do not tell of the scale", r.Cautions)
	}
	mx, my := float64(facts.W-1)/2, float64(facts.H-1)/2
	worst := 0.0
	for _, p := range [][3]float64{{1.03, 100, 100}, {5.5, 300, 50}, {11.2, 20, 280}, {8, 200, 150}} {
		du, dv := s.camera(p[0]).at(p[1]-mx, p[2]-my)
		u, v, ok := r.Correct(p[0], p[1]+du, p[2]+dv)
		if !ok {
			t.Fatalf("no correction at %g s", p[0])
		}
		worst = math.Max(worst, math.Hypot(u-p[1], v-p[2]))
	}
	t.Logf("worst corrected place is off by %.3f px", worst)
	if worst > 0.08 {
		t.Errorf("corrected places are off by up to %.3f px", worst)
	}
}

func TestSagAlone(t *testing.T) {
	s := newScene(400, 300, 300, 5)
	s.camera = func(t float64) similarity { return similarity{b: 0.2 * t} }
	r, _ := s.watch(10)
	if math.Abs(r.MovePX-1) > 0.12 || !strings.Contains(cautions(r), "drifts slowly") {
		t.Errorf("moved %.3f px, want 1; cautions %q", r.MovePX, r.Cautions)
	}
}

func TestHandHeldIsFollowedAndCorrected(t *testing.T) {
	s := newScene(400, 300, 300, 6)
	s.bob = swinging
	s.camera = func(t float64) similarity {
		return similarity{a: 5 * math.Sin(7*t), b: 4*math.Sin(5*t+1) - 4*math.Sin(1), r: 0.004 * math.Sin(3*t)}
	}
	r, facts := s.watch(5)
	if r.Lost > 0 || len(r.Motions) < 140 {
		t.Errorf("lost in %d of %d frames, %d followed", r.Lost, r.Seen, len(r.Motions))
	}
	var sq float64
	mx, my := float64(facts.W-1)/2, float64(facts.H-1)/2
	for _, at := range facts.Times {
		du, dv := s.camera(at).at(150-mx, 200-my)
		u, v, ok := r.Correct(at, 150+du, 200+dv)
		if !ok {
			t.Fatalf("no correction at %g s", at)
		}
		sq += (u-150)*(u-150) + (v-200)*(v-200)
	}
	rms := math.Sqrt(sq / float64(len(facts.Times)) / 2)
	t.Logf("a still point is put back to %.3f px r.m.s. per axis", rms)
	if rms > 0.05 {
		t.Errorf("a still point is put back to %.3f px r.m.s. per axis", rms)
	}
	if !strings.Contains(cautions(r), "held by hand") {
		t.Errorf("cautions %q", r.Cautions)
	}
}

// TestJump: a camera that is let go of in the first frames and then stands, the
// jump far beyond a template's reach.
func TestJump(t *testing.T) {
	s := newScene(640, 480, 500, 11)
	s.camera = func(t float64) similarity {
		if t < 0.02 {
			return similarity{}
		}
		return similarity{a: 7.3, b: 38.6, z: 0.003}
	}
	r, _ := s.watch(4)
	last := r.Motions[len(r.Motions)-1]
	if math.Abs(last.DU-7.3) > 0.05 || math.Abs(last.DV-38.6) > 0.05 || r.Lost > 0 {
		t.Errorf("motion %+v, lost %d", last, r.Lost)
	}
	if n := len(r.Motions); n > 70 {
		t.Errorf("%d looks in 4 s: it did not calm down", n)
	}
}

func TestStabilisationBends(t *testing.T) {
	s := newScene(400, 300, 300, 7)
	s.warp = func(t, v float64) float64 {
		return 1.2 * math.Sin(2*math.Pi*v/300+9*t) * math.Max(0, math.Sin(1.3*t))
	}
	r, _ := s.watch(6)
	if !strings.Contains(cautions(r), "stabilisation") || r.WarpPX < warpLimit {
		t.Errorf("warp %.2f px, cautions %q", r.WarpPX, r.Cautions)
	}
}

func TestRockingBase(t *testing.T) {
	bob := 80.0
	for _, c := range []struct {
		amplitude float64 // px
		due       bool
	}{{1.2, true}, {0.1, false}} {
		s := newScene(400, 300, 300, 8)
		s.bob = swinging
		s.camera = func(t float64) similarity { return similarity{a: 0.5 * math.Sin(0.3*t)} }
		s.rock = func(t float64) (float64, float64) { return c.amplitude * math.Sin(2*math.Pi*1.1*t), 0 }
		for _, stand := range []bool{true, false} {
			marks := append(s.marks(stand), baseMark)
			r, _ := s.watch(6, marks...)
			if r.Rock == nil {
				t.Fatal("no rock measured")
			}
			want := c.amplitude / math.Sqrt2
			if math.Abs(r.Rock.PX-want) > 0.15*want+2*r.Rock.U {
				t.Errorf("rock %+v, want %.3f px r.m.s.", r.Rock, want)
			}
			ratio, words := r.RockCaution(bob)
			if (words != "") != c.due {
				t.Errorf("amplitude %g px: ratio %g, caution %q", c.amplitude, ratio, words)
			}
			if c.due && !strings.Contains(words, "base rocks") {
				t.Errorf("caution %q", words)
			}
		}
	}
}

func TestPlainWallSaysWhy(t *testing.T) {
	s := newScene(400, 300, 0, 9)
	s.unmarked = true
	r, _ := s.watch(4)
	if !strings.Contains(r.Why, "too little texture") || len(r.Motions) > 0 {
		t.Errorf("why %q, %d motions", r.Why, len(r.Motions))
	}
	r, _ = s.watch(2, baseMark, rigMark("void", 300, 150), rigMark("out", 900, 10), rigMark("none"))
	for _, w := range []string{`"void" at [300, 150] shows too little contrast`, `"out" at [900, 10] lies at the edge`, `"none" has no place`} {
		if !strings.Contains(cautions(r), w) {
			t.Errorf("cautions %q do not say %q", r.Cautions, w)
		}
	}
}

func TestNothingObserved(t *testing.T) {
	r := New(&clip.Facts{W: 10, H: 10, Times: []float64{0}}, nil, nil).Report()
	if r.Why == "" {
		t.Error("a report of nothing does not say so")
	}
	small := newScene(12, 12, 3, 1)
	r, _ = small.watch(1)
	if r.Why == "" {
		t.Error("a picture too small for a patch goes unmentioned")
	}
}

// BenchmarkObserve measures one look at a 1080p frame with all patches in use.
func BenchmarkObserve(b *testing.B) {
	s := newScene(1920, 1080, 6000, 10)
	first, next := s.frame(0, 0), s.frame(1, 0.2)
	facts := &clip.Facts{W: 1920, H: 1080, Times: []float64{0, 0.2}}
	b.Run("first", func(b *testing.B) {
		for b.Loop() {
			New(facts, nil, nil).Observe(first)
		}
	})
	b.Run("next", func(b *testing.B) {
		w := New(facts, nil, nil)
		w.Observe(first)
		for b.Loop() {
			w.Observe(next)
		}
		b.ReportMetric(float64(len(w.patches)), "patches")
	})
}
