package clip_test

import (
	"math"
	"math/rand"
	"testing"

	"lodeswing/track/clip"
)

// filmed is a dark disc that swings before a light wall beside a dark post,
// with known exposure, blur, noise and light.
type filmed struct {
	perS, exposure, blur, noise float64
	light                       func(i int) float64
	repeat                      func(i int) bool
	turn, bar                   int
}

func (c filmed) survey(n int) *clip.Survey {
	const w, h = 320, 240
	facts := &clip.Facts{W: w, H: h, StoredW: w, StoredH: h, TrueRate: c.perS, RotationDeg: c.turn}
	if c.turn%180 == 90 {
		facts.W, facts.H = h, w
	}
	s := clip.NewSurveyor(facts)
	rng := rand.New(rand.NewSource(5))
	edge := func(d float64) float64 { return 0.5 * (1 + math.Erf(d/c.blur/math.Sqrt2)) } // 0 far inside, 1 outside
	var post [w]float64
	for x := range post {
		post[x] = 1 - 0.7*edge(float64(x)-20)*edge(50-float64(x))
	}
	var f *clip.Frame
	for i := 0; i < n; i++ {
		if c.repeat != nil && c.repeat(i) {
			f.Index, f.T = i, float64(i)/c.perS
			s.Observe(f)
			continue
		}
		f = clip.NewFrame(i, float64(i)/c.perS, w, h)
		f.RotationDeg = c.turn
		light := 1.0
		if c.light != nil {
			light = c.light(i)
		}
		plane := make([]float64, w*h)
		for p := range plane {
			plane[p] = 200
		}
		const sub = 24
		for k := 0; k < sub; k++ {
			t := f.T + (float64(k)+0.5-sub/2)/sub*c.exposure
			u, v := 190+85*math.Sin(6*t), 120-10*math.Cos(12*t)
			r := 25 + 5*c.blur
			for y := int(v - r); y <= int(v+r); y++ {
				for x := int(u - r); x <= int(u+r); x++ {
					if d := math.Hypot(float64(x)-u, float64(y)-v) - 25; d < 5*c.blur {
						plane[y*w+x] += 160 * (edge(d) - 1) / sub
					}
				}
			}
		}
		for y := 0; y < h; y++ {
			for x := 0; x < w; x++ {
				g := plane[y*w+x]*post[x]*light + c.noise*rng.NormFloat64()
				if y < c.bar || y >= h-c.bar {
					g = 0
				}
				b := byte(math.Max(0, math.Min(255, math.Round(g))))
				p := y*f.Stride + 3*x
				f.Pix[p], f.Pix[p+1], f.Pix[p+2] = b, b, b
			}
		}
		s.Observe(f)
	}
	return s.Survey()
}

func TestSurveyOfKnownExposures(t *testing.T) {
	for _, exposure := range []float64{1. / 90, 1. / 160, 1. / 400} {
		for _, noise := range []float64{0, 2} {
			v := filmed{perS: 60, exposure: exposure, blur: 1, noise: noise}.survey(80)
			if noise > 0 && exposure < 1./300 {
				// 1.3 px of smear on edges 1 px soft: a limit may be all there is.
				if v.ExposureS == nil || *v.ExposureS < exposure*0.8 || *v.ExposureS > 1./150 {
					t.Errorf("exposure 1/%.0f s, noise %g: %v", 1/exposure, noise, v.ExposureS)
				}
				continue
			}
			if v.ExposureS == nil || v.ExposureLess {
				t.Errorf("exposure 1/%.0f s, noise %g: not seen, %+v", 1/exposure, noise, v)
				continue
			}
			t.Logf("exposure 1/%.0f s, noise %g: seen 1/%.0f ± %.0f %%; edges %.2f px, noise %.2f, %.1f px per frame, smear %.1f px",
				1/exposure, noise, 1 / *v.ExposureS, 100*v.UExposureS / *v.ExposureS, v.EdgePX, v.Noise, v.SpeedPX, v.BlurPX)
			if r := *v.ExposureS / exposure; r < 0.8 || r > 1.2 || math.Abs(*v.ExposureS-exposure) > 4*v.UExposureS {
				t.Errorf("exposure 1/%.0f s seen as 1/%.0f ± %g s", 1/exposure, 1 / *v.ExposureS, v.UExposureS)
			}
			if v.EdgePX < 0.85 || v.EdgePX > 1.25 { // 1 px of blur and 0.29 of sampling
				t.Errorf("edges' blur %.2f px, drawn with 1", v.EdgePX)
			}
			if math.Abs(v.Noise-noise) > 0.1*noise+0.2 { // rounding to whole grey levels hides the rest
				t.Errorf("noise %.2f, drawn with %g", v.Noise, noise)
			}
			if v.SpeedPX < 6 || v.SpeedPX > 9.5 { // 85 px × 6 rad/s ÷ 60 = 8.5, and a little across
				t.Errorf("fastest %.2f px per frame", v.SpeedPX)
			}
			if v.Repeats > 0 || v.Bars.Any() || v.Flicker > 0.003 || v.OverShare > 0 {
				t.Errorf("faults seen in a clean clip: %+v", v)
			}
		}
	}
	v := filmed{perS: 60, exposure: 1e-5, blur: 1}.survey(80)
	if v.ExposureS == nil || !v.ExposureLess || *v.ExposureS > 1./400 {
		t.Errorf("a frozen clip: exposure %v, upper limit %v", v.ExposureS, v.ExposureLess)
	}
}

func TestSurveySeesFaults(t *testing.T) {
	v := filmed{
		perS: 60, exposure: 1. / 500, blur: 2.2, noise: 1, bar: 24,
		repeat: func(i int) bool { return i%10 == 9 },
		light:  func(i int) float64 { return 1 + 0.03*math.Sin(2*math.Pi*float64(i)*20/60) },
	}.survey(60)
	if v.Repeats < 4 || v.Repeats > 6 {
		t.Errorf("%d repeated frames, made 6 (the last has no neighbour)", v.Repeats)
	}
	if v.Bars != (clip.Bars{Top: 24, Bottom: 24}) {
		t.Errorf("bars %+v", v.Bars)
	}
	if v.Flicker < 0.01 || v.Flicker > 0.06 {
		t.Errorf("flicker %.3f", v.Flicker)
	}
	if v.EdgePX < 1.9 || v.EdgePX > 2.6 {
		t.Errorf("edges' blur %.2f px, drawn with 2.2", v.EdgePX)
	}
	v = filmed{perS: 60, exposure: 1. / 500, blur: 1, bar: 24, turn: 90}.survey(12)
	if v.Bars != (clip.Bars{Left: 24, Right: 24}) {
		t.Errorf("bars of a turned clip %+v", v.Bars)
	}
	v = filmed{perS: 60, exposure: 1. / 500, blur: 1, light: func(int) float64 { return 1.6 }}.survey(12)
	if v.OverShare < 0.5 {
		t.Errorf("blown-out share %.2f", v.OverShare)
	}
	if v := clip.NewSurveyor(&clip.Facts{}).Survey(); v.Frames != 0 || v.ExposureS != nil {
		t.Errorf("a survey of nothing: %+v", v)
	}
}
