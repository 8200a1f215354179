package shake

import (
	"strings"
	"testing"

	"lodeswing/track/clip"
)

// pick returns the advice on a topic and fails when there is not exactly one.
func pick(t *testing.T, all []Advice, topic string) Advice {
	t.Helper()
	var found []Advice
	for _, a := range all {
		if a.Topic == topic {
			found = append(found, a)
		}
		if a.State != Good && a.State != Unknown && a.Do == "" {
			t.Errorf("%s: %q says nothing to do", a.Topic, a.Seen)
		}
		if a.Seen == "" {
			t.Errorf("%s: nothing said", a.Topic)
		}
	}
	if len(found) != 1 {
		t.Fatalf("%d advices on %s", len(found), topic)
	}
	return found[0]
}

func TestAdvice(t *testing.T) {
	facts := func(change func(*clip.Facts)) *clip.Facts {
		f := &clip.Facts{
			Codec: "h264", Profile: "High", W: 1920, H: 1080, TrueRate: 60, RateFactor: 1, BitRate: 17e6,
			Times: make([]float64, 600), Tags: map[string]string{"com.android.version": "14"},
		}
		if change != nil {
			change(f)
		}
		return f
	}
	long := 1.0 / 70
	good := func(change func(*clip.Survey)) *clip.Survey {
		s := &clip.Survey{Frames: 600, Brightness: 140, Noise: 2, EdgePX: 1, SpeedPX: 9, ExposureS: &long, UExposureS: 0.001, BlurPX: 2}
		if change != nil {
			change(s)
		}
		return s
	}
	still := func(change func(*Report)) *Report {
		r := &Report{Patches: 12, Seen: 50, Motions: make([]Motion, 50), MovePX: 0.05, UMovePX: 0.02}
		if change != nil {
			change(r)
		}
		return r
	}
	for _, c := range []struct {
		topic string
		state State
		words string
		f     *clip.Facts
		s     *clip.Survey
		r     *Report
	}{
		{"file", Good, "straight from the phone", facts(nil), good(nil), still(nil)},
		{"file", Improve, "black bars", facts(nil), good(func(s *clip.Survey) { s.Bars.Left, s.Bars.Right = 300, 300 }), still(nil)},
		{"file", Improve, "encoded anew", facts(func(f *clip.Facts) { f.Tags, f.Profile, f.W, f.H = nil, "Constrained Baseline", 848, 470 }), good(nil), still(nil)},
		{"file", Improve, "fine detail is gone", facts(func(f *clip.Facts) { f.BitRate = 2e6 }), good(nil), still(nil)},
		{"frame rate", Good, "60 frames/s", facts(nil), good(nil), still(nil)},
		{"frame rate", Improve, "30 frames/s", facts(func(f *clip.Facts) { f.TrueRate = 30 }), good(nil), still(nil)},
		{"frame rate", Bad, "15 frames/s", facts(func(f *clip.Facts) { f.TrueRate = 15 }), good(nil), still(nil)},
		{"times", Good, "own time", facts(nil), good(nil), still(nil)},
		{"times", Improve, "dropped 40 of 640", facts(func(f *clip.Facts) { f.Lost = []clip.LostFrames{{AfterIndex: 3, Count: 40}} }), good(nil), still(nil)},
		{"times", Bad, "show the one before", facts(nil), good(func(s *clip.Survey) { s.Repeats = 100 }), still(nil)},
		{"light", Good, "brightness 140", facts(nil), good(nil), still(nil)},
		{"light", Improve, "noise 9.0", facts(nil), good(func(s *clip.Survey) { s.Noise = 9 }), still(nil)},
		{"light", Improve, "flickers by 2.0 %", facts(nil), good(func(s *clip.Survey) { s.Flicker = 0.02 }), still(nil)},
		{"light", Unknown, "No frame", facts(nil), nil, still(nil)},
		{"shutter", Good, "about 1/70 s", facts(nil), good(nil), still(nil)},
		{"shutter", Improve, "smear over 12.0 px", facts(nil), good(func(s *clip.Survey) { s.BlurPX = 12 }), still(nil)},
		{"shutter", Good, "not longer than 1/70 s", facts(nil), good(func(s *clip.Survey) { s.ExposureLess = true }), still(nil)},
		{"shutter", Unknown, "moved fast enough", facts(nil), good(func(s *clip.Survey) { s.ExposureS = nil }), still(nil)},
		{"focus", Good, "did not move", facts(nil), good(nil), still(nil)},
		{"focus", Improve, "soft", facts(nil), good(func(s *clip.Survey) { s.EdgePX = 3 }), still(nil)},
		{"focus", Bad, "scale changed by 0.4 %", facts(nil), good(nil), still(func(r *Report) { r.Zoom, r.UZoom = 0.004, 1e-4 })},
		{"camera", Good, "Still", facts(nil), good(nil), still(nil)},
		{"camera", Improve, "drifts slowly by up to 2 px", facts(nil), good(nil), still(func(r *Report) { r.MovePX = 2 })},
		{"camera", Bad, "hand-held", facts(nil), good(nil), still(func(r *Report) { r.MovePX, r.FastPX = 9, 3 })},
		{"camera", Bad, "bends", facts(nil), good(nil), still(func(r *Report) { r.WarpPX = 1 })},
		{"camera", Bad, "lost in 20", facts(nil), good(nil), still(func(r *Report) { r.Lost = 20 })},
		{"camera", Unknown, "No frame", facts(nil), good(nil), nil},
		{"wall", Good, "12 still places", facts(nil), good(nil), still(nil)},
		{"wall", Improve, "plain", facts(nil), good(nil), still(func(r *Report) { r.Patches = 0 })},
		{"base", Unknown, "not measured", facts(nil), good(nil), still(nil)},
		{"base", Improve, "0.8 ± 0.02 px", facts(nil), good(nil), still(func(r *Report) { r.Rock = &Rock{Against: "the wall", PX: 0.8, U: 0.02} })},
	} {
		a := pick(t, Advise(c.f, c.s, c.r), c.topic)
		if a.State != c.state || !strings.Contains(a.Seen, c.words) {
			t.Errorf("%s: %s, %q; want %s and %q", c.topic, a.State, a.Seen, c.state, c.words)
		}
	}
}
