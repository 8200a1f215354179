package shake

import (
	"fmt"
	"math"
	"strings"

	"lodeswing/track/clip"
)

// Advice is one thing about a clip, whether it is good enough, and how to film
// it better.
type Advice struct {
	Topic string `json:"topic"` // file, frame rate, times, light, shutter, focus, camera, wall, base
	State State  `json:"state"`
	Seen  string `json:"seen"`         // what was found, plain words
	Do    string `json:"do,omitempty"` // what to do about it; empty when nothing is due
}

// State says how good a clip is in one respect.
type State string

// The states of an advice.
const (
	Good    State = "good"
	Improve State = "could be better"
	Bad     State = "spoils the measurement"
	Unknown State = "could not be told"
)

// Advise holds a clip's facts, the survey of its pixels and its background's
// motion against what a measurement needs. survey and report may be nil: what
// they would tell is then said to be unknown. Limits without a source are common
// practice.
func Advise(facts *clip.Facts, survey *clip.Survey, report *Report) []Advice {
	if survey == nil {
		survey = &clip.Survey{}
	}
	if report == nil {
		report = &Report{Why: "No frame was looked at."}
	}
	return []Advice{
		file(facts, survey), rate(facts), times(facts, survey), light(survey), shutter(facts, survey),
		focus(survey, report), camera(report), wall(report), base(report),
	}
}

func file(f *clip.Facts, s *clip.Survey) Advice {
	a := Advice{Topic: "file", State: Good}
	h := f.Handled()
	switch {
	case f.Numbered:
		a.Seen = fmt.Sprintf("%d numbered pictures (%s).", len(f.Times), f.Codec)
		if f.Codec == "jpeg" {
			a.State, a.Do = Improve, "Write the pictures as png: jpg smears edges."
		}
		if min(f.W, f.H) < 700 {
			a.State = Improve
			a.Seen += fmt.Sprintf(" They have only %d × %d pixels.", f.W, f.H)
			a.Do = strings.TrimSpace(a.Do + " Film with 1080 lines or more.")
		}
		return a
	case s.Bars.Any():
		a.State = Improve
		a.Seen = fmt.Sprintf("The picture has black bars (left %d, right %d, top %d, bottom %d px): a program re-framed it and encoded it anew.", s.Bars.Left, s.Bars.Right, s.Bars.Top, s.Bars.Bottom)
	case h.Reencoded():
		a.State = Improve
		a.Seen = fmt.Sprintf("The clip seems to have been encoded anew after filming: %s.", strings.Join(h.Signs, "; "))
	case h.FromPhone:
		a.Seen = "It carries a phone's own tags: straight from the phone."
	case len(h.Signs) > 0:
		a.Seen = fmt.Sprintf("No phone's tags are in it; %s. The pictures themselves seem not to have suffered.", strings.Join(h.Signs, "; "))
	default:
		a.Seen = "No phone's tags are in it, and no sign of a messenger or an upload."
	}
	for _, w := range f.Warnings {
		if strings.Contains(w, "encoded anew") { // says all of it, and the bits
			a.Seen, h.Poor = w, false
		}
	}
	if h.Poor {
		if a.State == Good {
			a.State = Improve
		}
		a.Seen += fmt.Sprintf(" It has only %.2g bits per pixel, so fine detail is gone.", h.BitsPerPixel)
	}
	if min(f.W, f.H) < 700 {
		a.State = Improve
		a.Seen += fmt.Sprintf(" The picture has only %d × %d pixels.", f.W, f.H)
	}
	if a.State != Good {
		a.Do = "Film with 1080 lines or more and take the file straight from the phone, by cable or as a document, never through a messenger, an upload or an editing program."
	}
	return a
}

func rate(f *clip.Facts) Advice {
	a := Advice{Topic: "frame rate", State: Good, Seen: fmt.Sprintf("%.4g frames/s in real time.", f.TrueRate)}
	switch {
	case f.TrueRate < 20:
		a.State, a.Do = Bad, "Film with 60 frames/s or more: a fast bob is seen too seldom to be followed."
	case f.TrueRate < 45:
		a.State, a.Do = Improve, "Film with 60 frames/s or more, so that a bob moves less between frames and is smeared less."
	}
	if math.Abs(f.RateFactor-1) > 1e-3 {
		a.Seen += fmt.Sprintf(" Slow motion is undone by rate_factor %.4g.", f.RateFactor)
	}
	for _, w := range f.Warnings {
		if strings.Contains(w, "rate_factor") {
			a.State, a.Do = Bad, w
		}
	}
	return a
}

func times(f *clip.Facts, s *clip.Survey) Advice {
	a := Advice{Topic: "times", State: Good}
	step := 1.0
	if f.TrueRate > 0 {
		step = 1 / f.TrueRate
	}
	a.Seen = "Frames are evenly spaced; each frame's own time is used."
	if f.JitterS > 1e-5 {
		a.Seen = fmt.Sprintf("Frame times vary by %.2g ms r.m.s.; each frame's own time is used.", 1e3*f.JitterS)
	}
	if f.Numbered {
		a.State, a.Seen = Unknown, "Pictures carry no times: they are as even as the rig's frames_per_s says."
		a.Do = "Give a video file where you have one; it brings its own times."
	}
	if n := f.LostCount(); n > 0 {
		a.Seen += fmt.Sprintf(" The phone dropped %d of %d frames.", n, n+len(f.Times))
		if 20*n > len(f.Times) {
			a.State, a.Do = Improve, "Close other programs on the phone, let it cool and free some storage: it could not keep up."
		}
	}
	if f.JitterS > 0.1*step && a.State == Good {
		a.State, a.Do = Improve, "Use more light: phones lengthen frames when it is dark, and the rate varies."
	}
	if s.Repeats > 0 {
		a.State = Bad
		a.Seen += fmt.Sprintf(" %d of %d frames looked at show the one before again: the clip's rate was changed by a program, and its times are not the camera's.", s.Repeats, s.Frames)
		a.Do = "Use the file straight from the phone, not an exported or uploaded one."
	}
	return a
}

func light(s *clip.Survey) Advice {
	a := Advice{Topic: "light", State: Good}
	if s.Frames == 0 {
		return Advice{Topic: "light", State: Unknown, Seen: "No frame was looked at."}
	}
	a.Seen = fmt.Sprintf("Mean brightness %.0f of 255, noise %.1f grey levels, %.1f %% blown out, %.1f %% black.", s.Brightness, s.Noise, 100*s.OverShare, 100*s.UnderShare)
	var do []string
	if s.Noise > 6 || s.Brightness < 45 {
		do = append(do, "use more light, from a window or two lamps at the sides")
	}
	if s.OverShare > 0.05 {
		do = append(do, "lower the exposure a little: blown-out surfaces swallow a light bob's edge")
	}
	if s.Flicker > 0.004 {
		a.Seen += fmt.Sprintf(" Brightness flickers by %.1f %% from frame to frame, as under mains lamps.", 100*s.Flicker)
		do = append(do, "use daylight or a flicker-free lamp")
	}
	if len(do) > 0 {
		a.State, a.Do = Improve, sentence(strings.Join(do, "; "))
	}
	return a
}

func shutter(f *clip.Facts, s *clip.Survey) Advice {
	a := Advice{Topic: "shutter", State: Good}
	switch {
	case s.ExposureS == nil:
		a.State = Unknown
		a.Seen = "Nothing with clear edges moved fast enough to show the exposure."
		a.Do = "Where the phone lets you, set the shutter to 1/500 s or shorter and add light until the picture is bright again."
	case s.ExposureLess:
		a.Seen = fmt.Sprintf("Exposure not longer than %s: the fastest edges move %.1f px per frame and smear over less than %.1f px.", part(*s.ExposureS), s.SpeedPX, s.SpeedPX**s.ExposureS*f.TrueRate)
	default:
		a.Seen = fmt.Sprintf("Exposure about %s (± %.0f %%); the fastest edges move %.1f px per frame and smear over %.1f px.", part(*s.ExposureS), 100*s.UExposureS / *s.ExposureS, s.SpeedPX, s.BlurPX)
		if s.BlurPX > 6 {
			a.State, a.Do = Improve, "Set the shutter to 1/500 s or shorter and add light until the picture is bright again, or film with more frames/s."
		}
	}
	if s.SpeedPX > 40 && a.State != Unknown {
		a.State = Improve
		a.Do = strings.TrimSpace(a.Do + " Things move far between frames: film with 120 or 240 frames/s.")
	}
	return a
}

// part writes an exposure as photographers do.
func part(s float64) string {
	if s >= 0.4 {
		return fmt.Sprintf("%.2g s", s)
	}
	n := 1 / s
	digit := math.Pow(10, math.Floor(math.Log10(n))-1)
	return fmt.Sprintf("1/%.0f s", math.Round(n/digit)*digit)
}

func focus(s *clip.Survey, r *Report) Advice {
	a := Advice{Topic: "focus", State: Good}
	switch {
	case s.EdgePX == 0:
		a.State, a.Seen = Unknown, "No still edge was clear enough to judge sharpness."
		a.Do = "Lock focus and exposure before filming (on most phones: hold a finger on the toy)."
	case s.EdgePX > 2.2:
		a.State, a.Seen = Improve, fmt.Sprintf("Even the sharpest edges are soft: blurred by %.1f px (standard deviation).", s.EdgePX)
		a.Do = "Wipe the lens, focus on the toy by touching it on the screen, and lock focus and exposure."
	default:
		a.Seen = fmt.Sprintf("Sharp: still edges are blurred by %.1f px (standard deviation).", s.EdgePX)
	}
	switch {
	case len(r.Motions) < 3 || r.kind() == shaken:
	case r.breathes():
		a.State = Bad
		a.Seen = fmt.Sprintf("The picture's scale changed by %.2g %% while filming: the focus moved. ", 100*r.Zoom) + a.Seen
		a.Do = "Lock focus and exposure before filming (on most phones: hold a finger on the toy)."
	default:
		a.Seen += " It did not move while filming."
	}
	return a
}

func camera(r *Report) Advice {
	a := Advice{Topic: "camera", State: Good}
	const do = "Stand the phone on a tripod or wedge it firmly, switch video stabilisation off, and start by a timer or a remote."
	if len(r.Motions) < 3 {
		return Advice{Topic: "camera", State: Unknown, Seen: r.Why, Do: do}
	}
	kind := r.kind()
	switch {
	case 10*r.Lost > r.Seen:
		a.State, a.Do = Bad, do
		a.Seen = fmt.Sprintf("The still background was lost in %d of %d frames looked at: the camera was moved, or something large passed before it.", r.Lost, r.Seen)
	case kind == shaken:
		a.State, a.Do = Bad, do
		a.Seen = fmt.Sprintf("The background moves by up to %.2g px and fast: hand-held, shaken, or electronic stabilisation.", r.MovePX)
		if r.WarpPX > warpLimit {
			a.Seen += fmt.Sprintf(" It also bends by %.2g px: near and far things move differently, or stabilisation warps the picture.", r.WarpPX)
		}
	case kind == bending:
		a.State, a.Do = Bad, do
		a.Seen = fmt.Sprintf("The background bends by %.2g px from frame to frame, as electronic stabilisation makes it.", r.WarpPX)
	case kind == drifting:
		a.State, a.Do = Improve, do
		a.Seen = fmt.Sprintf("The background drifts slowly by up to %.2g px: the camera sagged or was touched.", r.MovePX)
	default:
		a.Seen = fmt.Sprintf("Still: the background stays within %.2g px, and does not bend as stabilisation would make it.", math.Max(r.MovePX, 0.01))
	}
	return a
}

func wall(r *Report) Advice {
	a := Advice{Topic: "wall", State: Good}
	switch {
	case r.Seen == 0:
		return Advice{Topic: "wall", State: Unknown, Seen: r.Why}
	case r.Patches < 3:
		a.State = Improve
		a.Seen = "The wall is plain, which is best behind the bobs, but nothing at its edges shows whether the camera moved."
		a.Do = "Keep it plain where the bobs swing, and stick a few dark dots or a printed sheet near the picture's edges."
	case r.Patches >= mostPatches:
		a.State = Improve
		a.Seen = fmt.Sprintf("Texture all over the picture (%d still places to hold on to).", r.Patches)
		a.Do = "Where it lies behind the bobs, hang a plain sheet in a colour unlike theirs."
	default:
		a.Seen = fmt.Sprintf("%d still places to hold on to.", r.Patches)
	}
	return a
}

func base(r *Report) Advice {
	const do = "To have it watched, stick a dark dot on the base and one on the stand or the wall, and name both as [[mark]] in the rig (on = \"base\", on = \"stand\")."
	if r.Rock == nil {
		a := Advice{Topic: "base", State: Unknown, Seen: "Whether the base rocks was not measured.", Do: do}
		if len(r.marked) > 0 {
			a.Seen, a.Do = strings.Join(r.marked, " "), "Correct the [[mark]]s in the rig, so that a base that rocks is noticed."
		}
		return a
	}
	a := Advice{Topic: "base", State: Good}
	a.Seen = fmt.Sprintf("The base moves by %.2g ± %.1g px r.m.s. against %s.", r.Rock.PX, r.Rock.U, r.Rock.Against)
	if r.Rock.PX > 0.25 && r.Rock.PX > 3*r.Rock.U {
		a.State, a.Do = Improve, "Clamp the base down. More than 0.5 % of a bob's own motion makes bobs exchange energy through it."
	}
	return a
}

// sentence gives words a capital and a full stop.
func sentence(s string) string { return strings.ToUpper(s[:1]) + s[1:] + "." }
