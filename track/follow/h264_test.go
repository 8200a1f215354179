package follow

import (
	"context"
	"path/filepath"
	"testing"

	"lodeswing/samples/film"
)

func TestEncodedFilm(t *testing.T) {
	for _, c := range []struct {
		name string
		set  func(*film.Scene)
		enc  film.Encoding
	}{
		{"h264", func(s *film.Scene) { s.Noise.Read = 4 }, film.Encoding{}},
		{"h264 texture", func(s *film.Scene) { s.Noise.Read = 4; s.Wall.Texture = 8 }, film.Encoding{}},
		{"h264 texture shadow sharp gloss", func(s *film.Scene) {
			s.Noise.Read = 4
			s.Wall.Texture = 8
			s.Light.Shadow = 0.4
			s.Sharpening = 0.6
			s.Bobs[0].Gloss = 1
		}, film.Encoding{}},
		{"h264 2 Mb/s", func(s *film.Scene) { s.Noise.Read = 4 }, film.Encoding{MegabitPerS: 2}},
		{"h264 blue", func(s *film.Scene) { s.Noise.Read = 4; s.Bobs[0].Colour = film.RGB{30, 60, 190} }, film.Encoding{}},
		{"h264 equal luma green", func(s *film.Scene) {
			s.Noise.Read = 4
			s.Bobs[0].Colour = film.RGB{160, 250, 40}
			s.Bobs[0].Plain = true
		}, film.Encoding{}},
		{"hevc", func(s *film.Scene) { s.Noise.Read = 4 }, film.Encoding{HEVC: true}},
		{"rotated", func(s *film.Scene) { s.Noise.Read = 4; s.Camera.ReadoutS = 0.01; s.Camera.Turned = 90 }, film.Encoding{}},
	} {
		s := pendulumScene()
		c.set(s)
		path := filepath.Join(t.TempDir(), "clip.mp4")
		const n = 120
		if err := s.Encode(context.Background(), path, n, c.enc, nil); err != nil {
			t.Fatal(err)
		}
		src := openClip(t, path)
		text := pendulumRig
		k := s.Bobs[0].Colour
		r, cam := solve(t, replaceReadout(text, s.Camera.ReadoutS), 640, 480)
		r.Bobs[0].Colour = hex(k[0], k[1], k[2])
		tr, err := Follow(context.Background(), src, r, cam, Options{})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		t.Logf("%-26s %.1f Mb/s %v, exposure %.1f ms, radius %.2f", c.name, src.Facts().BitRate/1e6, compare(s, tr, "lamp", 10), 1e3*tr.Cal.ExposureS, tr.Bobs[0].RadiusPX)
	}
}
