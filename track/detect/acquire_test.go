package detect

import (
	"math"
	"math/rand/v2"
	"testing"
)

// A codec keeps brightness at full resolution and colour at half of it, coarsely:
// whatever stands out in brightness is followed by it, a saturated blue as well, and
// colour is for bobs as bright as their wall.
func TestBrightnessBeforeColour(t *testing.T) {
	wall := [3]float64{198, 196, 188} // red, green, blue
	for _, c := range []struct {
		name   string
		bob    [3]float64
		colour bool
	}{
		{"blue", [3]float64{29, 79, 163}, false},
		{"red", [3]float64{184, 38, 31}, false},
		{"as bright as the wall", [3]float64{233, 205, 60}, true},
	} {
		rng := rand.New(rand.NewPCG(5, 1))
		p := paintDiscs(120, 100, wall, 0.5, rng, paintedDisc{Disc{U: 60.2, V: 49.7, R: 20}, c.bob})
		for i := 0; i < len(p.BGR); i += 3 { // a codec leaves the noise of brightness and smooths that of colour
			n := 6 * rng.NormFloat64()
			for k := range 3 {
				p.BGR[i+k] = byte(min(max(float64(p.BGR[i+k])+n, 0), 255))
			}
		}
		w, blocks, ok := projection(p, Candidate{U: 60, V: 50, R: 20}, true)
		if !ok || blocks != c.colour {
			t.Errorf("%s: weights %.2v, colour %v, ok %v", c.name, w, blocks, ok)
		}
		if d := w[0] + w[1] + w[2]; c.colour && math.Abs(d) > 0.02 {
			t.Errorf("%s: the colour's weights %v see grey light", c.name, w)
		}
	}
}

// What a fit that fails believes of odd places must not spoil the next one.
func TestAFailedFitLeavesNothingBehind(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 2))
	s := scene{w: 80, h: 80, u: 40.3, v: 39.8, r: 18, bob: 70, wall: 180, blur: 0.8, noise: 2}
	f := NewFitter(grey, 18, 0.5, rect(s))
	g := Guess{U: s.u + 0.2, V: s.v, UPos: 0.3}
	if r := f.Fit(s.render(rng), nil, g, nil, false); !r.OK {
		t.Fatal(r.Why)
	}
	for a := range 360 { // the whole outline is said to be odd
		for d := -6; d <= 6; d += 2 {
			sin, cos := math.Sincos(float64(a) * math.Pi / 180)
			f.oddAt = append(f.oddAt, [2]int16{int16(float64(18+d) * cos), int16(float64(18+d) * sin)})
		}
	}
	if r := f.Fit(s.render(rng), nil, g, nil, false); r.OK {
		t.Fatal("an outline of which nothing counts was fitted")
	}
	r := f.Fit(s.render(rng), nil, g, nil, false)
	if !r.OK || math.Hypot(r.U-s.u, r.V-s.v) > 0.1 {
		t.Errorf("the next fit: %+v", r)
	}
}
