package detect

import (
	"image"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/track/clip"
)

// paintDiscs draws flat discs of colours on a wall, with noise.
func paintDiscs(w, h int, wall [3]float64, noise float64, rng *rand.Rand, discs ...paintedDisc) *clip.Patch {
	p := &clip.Patch{Rect: image.Rect(0, 0, w, h), W: w, H: h, BGR: make([]byte, 3*w*h)}
	for y := range h {
		for x := range w {
			c := wall
			for _, d := range discs {
				a := math.Min(math.Max(d.R+0.5-math.Hypot(float64(x)-d.U, float64(y)-d.V), 0), 1)
				// Lit from the upper left: a third of the light is missing at the lower right.
				k := 1 - 0.2*((float64(x)-d.U)+(float64(y)-d.V))/d.R
				for i := range 3 {
					c[i] += a * (k*d.rgb[i] - c[i])
				}
			}
			for i := range 3 {
				p.BGR[3*(y*w+x)+2-i] = byte(math.Min(math.Max(c[i]+noise*rng.NormFloat64(), 0), 255))
			}
		}
	}
	return p
}

type paintedDisc struct {
	Disc
	rgb [3]float64
}

func TestSearchFindsByLook(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	red := paintedDisc{Disc{60, 70, 18}, [3]float64{184, 38, 31}}
	blue := paintedDisc{Disc{180, 60, 18}, [3]float64{40, 70, 170}}
	dark := paintedDisc{Disc{120, 140, 22}, [3]float64{30, 28, 30}}
	bright := paintedDisc{Disc{220, 150, 15}, [3]float64{245, 245, 240}}
	p := paintDiscs(280, 200, [3]float64{150, 148, 142}, 4, rng, red, blue, dark, bright)
	for _, c := range []struct {
		colour, look string
		want         paintedDisc
	}{
		{"#b8261f", "", red},
		{"#2846aa", "", blue},
		{"#1e1c1e", "", dark},
		{"", "dark", dark},
		{"", "light", bright},
	} {
		l, err := ParseLook(c.colour, c.look)
		if err != nil {
			t.Fatal(err)
		}
		s := Search{Look: l}
		found := s.Find(p, p.Rect, 0, nil, nil)
		if len(found) == 0 {
			t.Errorf("%v: nothing found", l)
			continue
		}
		f := found[0]
		if d := math.Hypot(f.U-c.want.U, f.V-c.want.V); d > 2 || math.Abs(f.R-c.want.R) > 2.5 {
			t.Errorf("%v: found (%.1f, %.1f) of radius %.1f, want (%.0f, %.0f) of %.0f", l, f.U, f.V, f.R, c.want.U, c.want.V, c.want.R)
		}
		if len(found) > 1 && found[1].Score() > 0.8*f.Score() {
			t.Errorf("%v: a second thing scores %.2f against %.2f: %+v", l, found[1].Score(), f.Score(), found[1])
		}
	}
}

// Half the light, and twice the light, leave a strong colour what it is.
func TestColourWithstandsLight(t *testing.T) {
	l := Look{R: 184, G: 38, B: 31}
	taste := newTaster(l, 0, 0, 0)
	for _, k := range []float64{0.45, 0.7, 1, 1.3} {
		if s := taste.score(31*k, 38*k, 184*k); s < 0.5 {
			t.Errorf("the colour in %.0f %% of the light scores %.2f", 100*k, s)
		}
	}
	for _, c := range [][3]float64{{150, 148, 142}, {40, 40, 40}, {170, 70, 40}, {60, 130, 45}, {35, 120, 200}} {
		if s := taste.score(c[0], c[1], c[2]); s >= 0.5 {
			t.Errorf("blue, green, red %v scores %.2f as red", c, s)
		}
	}
}

// Two that touch are two, and what the wall shows already is nothing new.
func TestSearchTellsTouchingOnes(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 5))
	col := [3]float64{40, 70, 170}
	a, b := paintedDisc{Disc{80, 60, 20}, col}, paintedDisc{Disc{121, 60, 20}, col}
	p := paintDiscs(200, 120, [3]float64{150, 148, 142}, 3, rng, a, b)
	l, _ := ParseLook("#2846aa", "")
	s := Search{Look: l, RMin: 14, RMax: 30}
	found := s.Find(p, p.Rect, 0, nil, nil)
	near := 0
	for _, c := range found {
		if c.Score() > 0.5 {
			near++
		}
	}
	if near != 2 {
		t.Errorf("two that touch are found as %d: %+v", len(found), found)
	}
	wall := NewWall(p.Rect)
	wall.Learn(p, []Disc{{80, 60, 26}}, 1)
	for _, c := range s.Find(p, p.Rect, 0, wall, nil) {
		if math.Hypot(c.U-121, c.V-60) < 10 {
			t.Errorf("what the wall shows is a candidate: %+v", c)
		}
	}
}

func TestParseLookSaysWhatIsWrong(t *testing.T) {
	for _, c := range [][2]string{{"b8261f", ""}, {"#b8261", ""}, {"#b8261g", ""}, {"", "blurry"}, {"", ""}} {
		if _, err := ParseLook(c[0], c[1]); err == nil {
			t.Errorf("colour %q, look %q: no error", c[0], c[1])
		}
	}
}

// The wall is the mean of what was seen, forgets what passed, and leaves out the
// bobs.
func TestWallLearns(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 6))
	r := image.Rect(0, 0, 40, 30)
	w := NewWall(r)
	for range 200 {
		p := paintDiscs(40, 30, [3]float64{100, 120, 140}, 5, rng)
		w.Learn(p, []Disc{{20, 15, 6}}, 1)
	}
	if _, _, _, ok := w.at(20, 15); ok {
		t.Error("the wall claims to know what is behind the bob")
	}
	var sum, n float64
	for v := range 30 {
		for u := range 40 {
			if b, g, rd, ok := w.at(u, v); ok {
				sum += math.Abs(b-139.5) + math.Abs(g-119.5) + math.Abs(rd-99.5)
				n += 3
			}
		}
	}
	if mean := sum / n; mean > 1 {
		t.Errorf("the wall is off by %.2f levels on average", mean)
	}
	// A hand comes to rest before it: after a while it is the wall.
	for range 60 {
		w.Learn(paintDiscs(40, 30, [3]float64{200, 60, 40}, 5, rng), nil, 1)
	}
	if b, _, rd, _ := w.at(2, 2); math.Abs(b-40) > 6 || math.Abs(rd-200) > 6 {
		t.Errorf("the wall still shows what was there before: blue %.0f, red %.0f", b, rd)
	}
}
