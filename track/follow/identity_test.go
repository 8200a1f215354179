package follow

import (
	"context"
	"errors"
	"math"
	"strings"
	"testing"

	"lodeswing/samples/film"
	"lodeswing/track"
	"lodeswing/track/clip"
)

// plainCamera is a small picture seen from straight ahead, 1 px = 1 mm.
func plainCamera() film.Camera {
	return film.Camera{Width: 400, Height: 240, PixelsPerM: 1000, ExposureS: 0.003}
}

const plainRig = `
name = "Test"
[camera]
readout_ms = 0
vertical = "picture"
[scale]
length_mm = 100
ends_px = [[99.5, 20], [199.5, 20]]
`

func follow(t *testing.T, s *film.Scene, text string, frames int) (*track.Track, error) {
	t.Helper()
	r, cam := solve(t, text, s.Camera.Width, s.Camera.Height)
	return Follow(context.Background(), newFilmed(s, frames), r, cam, Options{
		Again: func(context.Context) (clip.Source, error) { return newFilmed(s, frames), nil },
	})
}

// farthest is the greatest distance of a bob's usable samples from the truth, px.
func farthest(s *film.Scene, tr *track.Track, name string) (worst float64, usable int) {
	for i, q := range tr.Find(name).Samples {
		for _, p := range s.Truth(s.Time(i)) {
			if p.Name == name && q.State.Usable() {
				usable++
				worst = math.Max(worst, math.Hypot(q.U-p.U, q.V-p.V))
			}
		}
	}
	return worst, usable
}

// Two bobs of one colour swing through each other's place, one before the other:
// each keeps its name, and positions stay good to a fraction of a pixel while
// part of one is covered.
func TestLikeBobsCross(t *testing.T) {
	for _, deep := range []float64{0.02, -0.02} {
		s := &film.Scene{
			Camera: plainCamera(), FramesPerS: 60, Seed: 5,
			Wall:  film.Wall{Level: film.RGB{180, 180, 178}},
			Noise: film.Noise{Read: 3},
			Bobs: []film.Bob{
				{Name: "left", Colour: film.RGB{30, 90, 170}, DiameterM: 0.03, At: func(t float64) film.Vec {
					return film.Vec{-0.09 * math.Cos(4*t), 0, 0.03 * math.Sin(4*t)}
				}},
				{Name: "right", Colour: film.RGB{30, 90, 170}, DiameterM: 0.03, At: func(t float64) film.Vec {
					return film.Vec{0.09 * math.Cos(4.5*t), deep, 0.02 * math.Sin(4.5*t)}
				}},
			},
		}
		tr, err := follow(t, s, plainRig+`
[[bob]]
name = "left"
colour = "#1e5aaa"
diameter_mm = 30
[[bob]]
name = "right"
colour = "#1e5aaa"
diameter_mm = 30
`, 300)
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range []string{"left", "right"} {
			worst, n := farthest(s, tr, name)
			t.Logf("%s (the other at depth %g m): usable in %d of 300 frames, at most %.2f px off", name, deep, n, worst)
			if worst > 1 || n < 255 {
				t.Errorf("%s: %d usable samples, worst %.2f px", name, n, worst)
			}
		}
	}
}

// A bob leaves the picture and comes back; clutter of its colour stands about.
func TestLeavesAndComesBack(t *testing.T) {
	s := &film.Scene{
		Camera: plainCamera(), FramesPerS: 60, Seed: 6,
		Wall:  film.Wall{Level: film.RGB{180, 180, 178}},
		Noise: film.Noise{Read: 3},
		Bobs: []film.Bob{
			{Name: "ball", Colour: film.RGB{190, 60, 40}, DiameterM: 0.03, At: func(t float64) film.Vec {
				return film.Vec{0.26 * math.Sin(2.5*t), 0, 0.05 * math.Cos(2.5*t)}
			}},
			{Name: "clutter", Colour: film.RGB{190, 60, 40}, DiameterM: 0.03, Still: true, At: func(float64) film.Vec { return film.Vec{-0.1, 0.05, -0.08} }},
		},
	}
	tr, err := follow(t, s, plainRig+`
[[bob]]
name = "ball"
colour = "#be3c28"
diameter_mm = 30
start_px = [199.5, 69.5]
`, 400)
	if err != nil {
		t.Fatal(err)
	}
	worst, n := farthest(s, tr, "ball")
	inside := 0
	for i, q := range tr.Bobs[0].Samples {
		p := s.Truth(s.Time(i))[0]
		if p.U > 17 && p.U < 382 {
			inside++
			if q.State == track.Missing {
				t.Logf("frame %d: missing at (%.0f, %.0f)", i, p.U, p.V)
			}
		} else if p.U < -20 || p.U > 420 {
			if q.State != track.Missing {
				t.Errorf("frame %d: %v at (%.0f, %.0f) although it is outside", i, q.State, q.U, q.V)
			}
		}
	}
	t.Logf("usable in %d of %d frames in which it is inside, at most %.2f px off", n, inside, worst)
	if worst > 0.5 || n < inside-8 {
		t.Errorf("%d usable of %d, worst %.2f px", n, inside, worst)
	}
}

// A post in front hides the bob, partly and then wholly.
func TestBehindAPost(t *testing.T) {
	s := &film.Scene{
		Camera: plainCamera(), FramesPerS: 60, Seed: 7,
		Wall:  film.Wall{Level: film.RGB{180, 180, 178}},
		Noise: film.Noise{Read: 3},
		Bobs: []film.Bob{{Name: "ball", Colour: film.RGB{190, 60, 40}, DiameterM: 0.03, At: func(t float64) film.Vec {
			return film.Vec{-0.12 * math.Cos(3*t), 0, 0.03 * math.Sin(3*t)}
		}}},
		Rods: []film.Rod{{
			Colour: film.RGB{90, 90, 95}, DiameterM: 0.014, Front: true, Still: false,
			From: func(float64) film.Vec { return film.Vec{0.01, -0.1, 0.2} }, To: func(float64) film.Vec { return film.Vec{0.01, -0.1, -0.2} },
		}},
	}
	tr, err := follow(t, s, plainRig+"[[bob]]\nname = \"ball\"\ncolour = \"#be3c28\"\ndiameter_mm = 30\n", 200)
	if err != nil {
		t.Fatal(err)
	}
	worst, n := farthest(s, tr, "ball")
	hidden := 0
	for i, q := range tr.Bobs[0].Samples {
		p := s.Truth(s.Time(i))[0]
		if q.State == track.PartlyHidden {
			hidden++
		}
		if math.Abs(p.U-209.5) < 14 && q.State == track.Seen {
			t.Errorf("frame %d: seen whole at (%.1f, %.1f), the post is in front", i, q.U, q.V)
		}
	}
	t.Logf("usable in %d of 200 frames, %d of them partly hidden, at most %.2f px off", n, hidden, worst)
	if worst > 0.6 || n < 170 || hidden < 5 {
		t.Errorf("%d usable, %d hidden, worst %.2f px", n, hidden, worst)
	}
}

// What moves is found without being told a colour.
func TestMovingIsFound(t *testing.T) {
	s := &film.Scene{
		Camera: plainCamera(), FramesPerS: 60, Seed: 8,
		Wall:  film.Wall{Level: film.RGB{150, 150, 148}, Texture: 6},
		Noise: film.Noise{Read: 3},
		Bobs: []film.Bob{
			{Name: "ball", Colour: film.RGB{90, 95, 100}, DiameterM: 0.03, At: func(t float64) film.Vec {
				return film.Vec{-0.12 * math.Cos(3*t), 0, 0.03 * math.Sin(3*t)}
			}},
			{Name: "clutter", Colour: film.RGB{90, 95, 100}, DiameterM: 0.03, Still: true, At: func(float64) film.Vec { return film.Vec{0.1, 0.05, -0.08} }},
		},
	}
	tr, err := follow(t, s, plainRig+"[[bob]]\nname = \"ball\"\nlook = \"moving\"\ndiameter_mm = 30\n", 200)
	if err != nil {
		t.Fatal(err)
	}
	worst, n := farthest(s, tr, "ball")
	t.Logf("usable in %d of 200 frames, at most %.2f px off", n, worst)
	if worst > 0.5 || n < 195 {
		t.Errorf("%d usable, worst %.2f px", n, worst)
	}
}

func TestNotFoundSaysWhatWasSeen(t *testing.T) {
	ball := func(x, z float64) func(float64) film.Vec {
		return func(float64) film.Vec { return film.Vec{x, 0, z} }
	}
	s := &film.Scene{
		Camera: plainCamera(), FramesPerS: 60, Seed: 9,
		Wall: film.Wall{Level: film.RGB{180, 180, 178}},
		Bobs: []film.Bob{
			{Name: "a", Colour: film.RGB{190, 60, 40}, DiameterM: 0.03, At: ball(-0.1, 0)},
			{Name: "b", Colour: film.RGB{190, 60, 40}, DiameterM: 0.03, At: ball(0.1, 0.02)},
		},
	}
	for _, c := range []struct {
		name, bob string
		words     []string
		ambiguous bool
		seen      int
	}{
		{"two of a colour", "colour = \"#be3c28\"\ndiameter_mm = 30", []string{`bob "ball"`, "2 things look #be3c28", "start_px", "1: at ["}, true, 2},
		{"no such colour", "colour = \"#20c040\"\ndiameter_mm = 30", []string{"nothing round that looks #20c040", "nearest colour"}, false, 0},
		{"nothing light", "look = \"moving\"", []string{"nothing round that looks moving", "moves"}, false, 0},
		{"start where nothing is", "colour = \"#be3c28\"\nstart_px = [200, 20]", []string{"nothing that looks #be3c28 is at start_px = [200, 20]"}, false, -1},
	} {
		_, err := follow(t, s, plainRig+"[[bob]]\nname = \"ball\"\n"+c.bob+"\n", 90)
		var lost *NotFound
		if !errors.As(err, &lost) {
			t.Errorf("%s: got %v, want NotFound", c.name, err)
			continue
		}
		for _, w := range c.words {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("%s: the error lacks %q:\n%v", c.name, w, err)
			}
		}
		if lost.Ambiguous != c.ambiguous || c.seen >= 0 && len(lost.Seen) != c.seen {
			t.Errorf("%s: ambiguous %v, %d seen", c.name, lost.Ambiguous, len(lost.Seen))
		}
		if lost.Picture == nil || lost.Picture.Bounds().Dx() != 400 {
			t.Errorf("%s: no marked picture", c.name)
		}
	}
	_, err := follow(t, s, plainRig+"[[bob]]\nname = \"ball\"\ncolour = \"#be3c28\"\nstart_px = [500, 20]\n", 9)
	if err == nil || !strings.Contains(err.Error(), "start_px = [500, 20] lies outside the picture of 400 × 240 pixels") {
		t.Errorf("start outside the picture: %v", err)
	}
}
