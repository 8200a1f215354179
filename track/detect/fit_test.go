package detect

import (
	"flag"
	"image"
	"math"
	"math/rand/v2"
	"testing"
)

var grey = [3]float64{1.0 / 3, 1.0 / 3, 1.0 / 3}

// tally gathers errors of a centre against the truth.
type tally struct {
	n                int
	su, sv, suu, svv float64
	nees             float64 // sum of eᵀC⁻¹e
	bad              int
	seen             float64
}

func (t *tally) add(f Fit, u, v float64) {
	if !f.OK {
		t.bad++
		return
	}
	du, dv := f.U-u, f.V-v
	t.n++
	t.su += du
	t.sv += dv
	t.suu += du * du
	t.svv += dv * dv
	t.seen += f.Visible
	det := f.Cov.AA*f.Cov.BB - f.Cov.AB*f.Cov.AB
	t.nees += (du*du*f.Cov.BB - 2*du*dv*f.Cov.AB + dv*dv*f.Cov.AA) / det
}

// rms is the error per axis.
func (t *tally) rms() float64 { return math.Sqrt((t.suu + t.svv) / float64(2*t.n)) }

// bias is the mean error, the larger of the two axes.
func (t *tally) bias() float64 {
	return math.Max(math.Abs(t.su), math.Abs(t.sv)) / float64(t.n)
}

// consistency is the mean of eᵀC⁻¹e over its expectation of 2.
func (t *tally) consistency() float64 { return t.nees / float64(2*t.n) }

// bound is the Cramér–Rao bound per axis of the centre of a disc with known
// levels: the information of an edge of blur s is contrast²/(2√π s σ²) per px of
// outline, cos² of it along each axis. The pixel's own width adds 1/12 to s².
// It gives the design's 0.0155, 0.0109 and 0.0089 px at 20, 40 and 60 px.
func bound(contrast, sigma, r, blur float64) float64 {
	s := math.Sqrt(blur*blur + 1.0/12)
	return sigma / contrast * math.Sqrt(2*math.Sqrt(math.Pi)*s/(math.Pi*r))
}

// numericBound is the same bound for any scene, from the drawing's own
// derivatives by the centre, along u and v.
func (s scene) numericBound(rng *rand.Rand) (u, v float64) {
	const d = 0.2
	s.noise = 0
	if s.texture > 0 && s.gain == nil {
		s.gain = grainy(rng, s.w, s.h, s.grain, s.texture)
	}
	at := func(du, dv float64) []float64 {
		q := s
		q.u += du
		q.v += dv
		return q.levels(rng)
	}
	sum := func(a, b []float64) (q float64) {
		for i := range a {
			x := (a[i] - b[i]) / (2 * d)
			q += x * x
		}
		return q
	}
	return 1 / math.Sqrt(sum(at(d, 0), at(-d, 0))), 1 / math.Sqrt(sum(at(0, d), at(0, -d)))
}

// trial is a run of frames of one scene at random places, each fitted from a
// guess that is off by about off px, as prediction leaves it.
type trial struct {
	scene  scene
	frames int
	off    float64
	seed   uint64
	draws  int // frames of different noise per drawing; 0: 10
	walls  bool
	ball   bool
	each   func(*scene, *rand.Rand) // changes the scene before each drawing
}

func (c trial) run(t *testing.T) (y tally) {
	t.Helper()
	rng := rand.New(rand.NewPCG(c.seed, 1))
	s := c.scene
	if s.texture > 0 {
		s.gain = grainy(rng, s.w, s.h, s.grain, s.texture)
	}
	var wall *Wall
	if c.walls {
		// What the wall showed in twenty frames without the bob.
		wall = NewWall(rect(s))
		empty := s
		empty.u = -500
		bare := empty.levels(rng)
		for range 20 {
			wall.Learn(empty.expose(bare, rng), nil, 1)
		}
	}
	draws := c.draws
	if draws == 0 {
		draws = 10
	}
	f := NewFitter(grey, s.r*1.02, s.r*0.03, rect(s))
	if c.ball {
		f.ball = 1
	}
	const learning = 30
	smear := s.smear
	var levels []float64
	for i := range c.frames + learning {
		if i%draws == 0 || i < learning && i%6 == 0 || i == learning {
			s.u = float64(s.w)/2 + rng.Float64() - 0.5
			s.v = float64(s.h)/2 + rng.Float64() - 0.5
			// A swing that begins at rest is known before it is fast.
			slow := math.Min(float64(i)/learning, 1)
			s.smear = [2]float64{slow * smear[0], slow * smear[1]}
			if c.each != nil {
				c.each(&s, rng)
				s.smear = [2]float64{slow * s.smear[0], slow * s.smear[1]}
			}
			levels = s.levels(rng)
		}
		p := s.expose(levels, rng)
		g := Guess{U: s.u + c.off*rng.NormFloat64(), V: s.v + c.off*rng.NormFloat64(), UPos: c.off}
		if l := math.Hypot(s.smear[0], s.smear[1]); l > 0 {
			// The speed is known to a tenth, the exposure too.
			k := 1 + 0.1*rng.NormFloat64()
			g.SmearU, g.SmearV, g.USmear = k*s.smear[0], k*s.smear[1], 0.15*l
		}
		r := f.Fit(p, wall, g, nil, i < learning)
		f.Learn(&r)
		if i >= learning {
			y.add(r, s.u, s.v)
		}
	}
	return y
}

func rect(s scene) image.Rectangle { return image.Rect(0, 0, s.w, s.h) }

var long = flag.Bool("long", false, "run the full number of simulated frames")

// many is how many frames a test simulates.
func many(quick, full int) int {
	if *long {
		return full
	}
	return quick
}

// The design's figures for a plain wall: within 1.5 times the bound with sensor
// noise, at most 0.03 px clean, per axis; and the stated covariance must be true:
// the mean of eᵀC⁻¹e over 2 lies within 0.7 to 1.35 (its own standard deviation
// is 0.06 for 300 frames; the fit states a little more than noise alone, for what
// the model cannot follow).
func TestCentreOnPlainWall(t *testing.T) {
	for _, c := range []struct{ d, bound float64 }{{20, 0.0155}, {40, 0.0109}, {60, 0.0089}} {
		w := int(c.d) + 24
		s := scene{w: w, h: w, r: c.d / 2, bob: 80, wall: 180, blur: 0.8, noise: 5}
		if b := bound(100, 5, c.d/2, 0.8); math.Abs(b-c.bound) > 1e-4 {
			t.Errorf("bound at %g px: %.4f, the design has %.4f", c.d, b, c.bound)
		}
		y := trial{scene: s, frames: many(300, 5000), off: 0.1, seed: 7}.run(t)
		t.Logf("%2.0f px, σ 5: error %.4f px r.m.s. = %.2f × bound, bias %.4f, consistency %.2f, %d lost", c.d, y.rms(), y.rms()/c.bound, y.bias(), y.consistency(), y.bad)
		if !(y.rms() < 1.5*c.bound) || y.bad > 0 {
			t.Errorf("%g px: %.4f px is more than 1.5 × %.4f, or frames are lost", c.d, y.rms(), c.bound)
		}
		if k := y.consistency(); !(k > 0.7 && k < 1.35) {
			t.Errorf("%g px: stated covariance is wrong: consistency %.2f", c.d, k)
		}
		s.noise = 0
		y = trial{scene: s, frames: 20, off: 0.3, seed: 8, draws: 1}.run(t)
		t.Logf("%2.0f px, clean: error %.4f px r.m.s., bias %.4f, consistency %.2f", c.d, y.rms(), y.bias(), y.consistency())
		if !(y.rms() < 0.03) || y.bad > 0 {
			t.Errorf("%g px clean: %.4f px", c.d, y.rms())
		}
		if k := y.consistency(); !(k < 1.5) {
			t.Errorf("%g px clean: stated covariance is too small: consistency %.2f", c.d, k)
		}
	}
}

// A wall with a pattern of σ 8: at most 0.08 px, and with the wall known from
// other frames nearly as good as before a plain one.
func TestCentreOnTexturedWall(t *testing.T) {
	for _, grain := range []float64{1.5, 4} {
		for _, d := range []float64{20, 60} {
			w := int(d) + 30
			s := scene{w: w, h: w, r: d / 2, bob: 80, wall: 170, blur: 0.8, noise: 3, texture: 8, grain: grain}
			c := trial{scene: s, frames: many(60, 2000), off: 0.1, seed: 9, draws: 3}
			blind := c.run(t)
			c.walls = true
			known := c.run(t)
			b := bound(90, 3, d/2, 0.8)
			t.Logf("%2.0f px, grain %.1f px: wall unknown %.4f px r.m.s. (consistency %.2f), known %.4f = %.2f × a plain wall's bound (consistency %.2f)", d, grain, blind.rms(), blind.consistency(), known.rms(), known.rms()/b, known.consistency())
			if !(known.rms() < 0.08) || !(known.rms() < 1.7*b) {
				t.Errorf("%g px, grain %g: %.4f px with the wall known", d, grain, known.rms())
			}
			if k := known.consistency(); !(k < 1.6) {
				t.Errorf("%g px, grain %g: stated covariance is too small: consistency %.2f", d, grain, k)
			}
		}
	}
}

// Motion blur up to one diameter: bias at mid exposure at most 0.05 px, scatter
// within 1.5 times the blurred bound, which is computed from the drawing itself.
func TestCentreUnderMotionBlur(t *testing.T) {
	for _, d := range []float64{20, 40} {
		for _, part := range []float64{0.1, 0.3, 0.6, 1} {
			l := part * d
			w := int(d+l) + 28
			s := scene{w: w, h: w, r: d / 2, bob: 80, wall: 180, blur: 0.8, noise: 5, smear: [2]float64{l * 0.8, l * 0.6}}
			s.u, s.v = float64(w)/2+0.2, float64(w)/2-0.3
			bu, bv := s.numericBound(nil)
			bu, bv = 5*bu, 5*bv
			b := math.Sqrt((bu*bu + bv*bv) / 2)
			y := trial{scene: s, frames: many(100, 3000), off: 0.15, seed: 11, each: func(s *scene, rng *rand.Rand) {
				sin, cos := math.Sincos(2 * math.Pi * rng.Float64())
				s.smear = [2]float64{l * cos, l * sin}
			}}.run(t)
			t.Logf("%2.0f px, smear %4.1f px: error %.4f px r.m.s. = %.2f × blurred bound %.4f, bias %.4f, consistency %.2f, %d lost", d, l, y.rms(), y.rms()/b, b, y.bias(), y.consistency(), y.bad)
			if !(y.rms() < 1.5*b) || y.bad > 0 {
				t.Errorf("%g px, smear %g: %.4f px against a bound of %.4f", d, l, y.rms(), b)
			}
			if !(y.bias() < 0.05) {
				t.Errorf("%g px, smear %g: bias %.4f px", d, l, y.bias())
			}
			// The same without noise: what is left is the model's own bias.
			s.noise = 0
			y = trial{scene: s, frames: 8, off: 0.15, seed: 12, draws: 1}.run(t)
			if !(y.rms() < 0.05) {
				t.Errorf("%g px, smear %g, clean: %.4f px", d, l, y.rms())
			}
			t.Logf("%2.0f px, smear %4.1f px, clean: %.4f px r.m.s., bias %.4f", d, l, y.rms(), y.bias())
		}
	}
}

// Lit, glossy, held by a rod, partly covered, oblong: what the centre must not
// be pulled by. Clean, so that bias shows.
func TestCentreIsNotPulled(t *testing.T) {
	base := scene{w: 72, h: 72, r: 20, bob: 60, wall: 180, blur: 0.8}
	for _, c := range []struct {
		name string
		set  func(*scene)
		most float64 // px r.m.s.
		ball bool
	}{
		{"lit ball", func(s *scene) { s.shade = [3]float64{-25, -30, 35} }, 0.03, true},
		{"glossy ball", func(s *scene) { s.shade = [3]float64{-20, -25, 30}; s.gloss = 120 }, 0.03, true},
		{"light rod behind", func(s *scene) { s.rod = true }, 0.03, false},
		{"oblong", func(s *scene) { s.axes = [2]float64{0.08, -0.05} }, 0.03, false},
		{"a third covered", func(s *scene) { s.cover, s.coverLevel = &Disc{U: 60, V: 36, R: 16}, 120 }, 0.08, false},
	} {
		s := base
		c.set(&s)
		y := trial{scene: s, frames: 20, off: 0.2, seed: 13, draws: 1, ball: c.ball}.run(t)
		t.Logf("%-18s error %.4f px r.m.s., bias %.4f, seen %.2f, %d lost", c.name, y.rms(), y.bias(), y.seen/float64(y.n), y.bad)
		if !(y.rms() < c.most) || y.bad > 0 {
			t.Errorf("%s: %.4f px, %d lost", c.name, y.rms(), y.bad)
		}
	}
}
