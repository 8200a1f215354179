package detect

import (
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
	uu, agree        float64
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
	t.uu += (f.Cov.AA + f.Cov.BB) / 2
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

// run fits many frames of a scene at random places, with a guess that is off by
// about off px, as prediction leaves it.
func run(t *testing.T, s scene, n int, off float64, seed uint64, each func(*scene, *rand.Rand)) tally {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 1))
	var y tally
	f := NewFitter(grey, s.r*1.03, s.r*0.03, rect(s))
	var levels []float64
	for i := range n {
		// One drawing serves ten frames of different noise.
		if levels == nil || s.noise == 0 || i%10 == 0 {
			s.u = float64(s.w)/2 + rng.Float64() - 0.5
			s.v = float64(s.h)/2 + rng.Float64() - 0.5
			if each != nil {
				each(&s, rng)
			}
			levels = s.levels(rng)
		}
		p := s.expose(levels, rng)
		g := Guess{U: s.u + off*rng.NormFloat64(), V: s.v + off*rng.NormFloat64(), UPos: off}
		if l := math.Hypot(s.smear[0], s.smear[1]); l > 0 {
			k := 1 + 0.1*rng.NormFloat64()
			g.SmearU, g.SmearV, g.USmear = k*s.smear[0], k*s.smear[1], 0.2*l+0.5
		}
		free := i < 8
		r := f.Fit(p, nil, g, nil, free)
		f.Learn(&r)
		if i >= 8 {
			y.add(r, s.u, s.v)
		}
	}
	y.agree = f.agree
	return y
}

func TestCentreAgainstBound(t *testing.T) {
	for _, d := range []float64{20, 40, 60} {
		w := int(d) + 24
		s := scene{w: w, h: w, r: d / 2, bob: 80, wall: 180, blur: 0.8, noise: 5}
		y := run(t, s, 150, 0.3, 7, nil)
		b := bound(100, 5, d/2, 0.8)
		t.Logf("σ 5, %2.0f px: error %.4f px r.m.s., bound %.4f, ratio %.2f, bias %.4f, consistency %.2f, agree %.2f, bad %d, seen %.2f", d, y.rms(), b, y.rms()/b, y.bias(), y.consistency(), y.agree, y.bad, y.seen/float64(y.n))
		s.noise = 0
		y = run(t, s, 60, 0.3, 8, nil)
		t.Logf("clean, %2.0f px: error %.4f px r.m.s., bias %.4f, consistency %.2f, bad %d", d, y.rms(), y.bias(), y.consistency(), y.bad)
	}
}

func rect(s scene) image.Rectangle { return image.Rect(0, 0, s.w, s.h) }
