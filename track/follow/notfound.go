package follow

import (
	"fmt"
	"image"
	"math"
	"strings"

	"lodeswing/track/clip"
	"lodeswing/track/detect"
)

// NotFound is the error of a clip in which a bob was not found at the start, or
// in which more things than one may be it.
type NotFound struct {
	Bob       string
	Reason    string // plain words
	Advice    string // how to mend the rig
	Ambiguous bool
	Seen      []Seen      // what was seen, numbered from 1 as in Picture
	Picture   image.Image // the first frame with what was seen marked
	Path      string      // where Picture was written; empty: nowhere

	certain bool // more frames will not help
}

// Seen is one thing that may be the bob.
type Seen struct {
	U, V, R float64 // px
	Colour  string  // mean colour, "#rrggbb"
	Score   float64 // 0 to 1
}

// Error says what was seen and what to do.
func (e *NotFound) Error() string {
	var s strings.Builder
	fmt.Fprintf(&s, "bob %q is not found: %s.", e.Bob, e.Reason)
	for i, c := range e.Seen {
		fmt.Fprintf(&s, "\n  %d: at [%.0f, %.0f], %.0f px across, colour %q", i+1, c.U, c.V, 2*c.R, c.Colour)
	}
	if e.Advice != "" {
		fmt.Fprintf(&s, "\n%s", e.Advice)
	}
	if e.Path != "" {
		fmt.Fprintf(&s, "\nWhat was seen is marked in %s.", e.Path)
	}
	return s.String()
}

const mostSeen = 9

// nothing makes the error of a bob from the candidates that were not good.
func (b *bob) nothing(cands []detect.Candidate) *NotFound {
	e := &NotFound{Bob: b.rig.Name, Reason: fmt.Sprintf("nothing round that looks %s is seen", b.look)}
	for _, c := range cands {
		if len(e.Seen) == mostSeen {
			break
		}
		e.Seen = append(e.Seen, Seen{U: c.U, V: c.V, R: c.R, Colour: hex(c.Red, c.Green, c.Blue), Score: c.Score()})
	}
	switch {
	case len(e.Seen) > 1:
		e.Advice = fmt.Sprintf("Add start_px = [u, v] of the right one to [[bob]] %q, for instance start_px = [%.0f, %.0f], or diameter_mm to tell it by its size.", b.rig.Name, e.Seen[0].U, e.Seen[0].V)
	case len(e.Seen) == 1:
		e.Advice = fmt.Sprintf("If it is number 1, add start_px = [%.0f, %.0f] to [[bob]] %q; check its diameter_mm against the scale.", e.Seen[0].U, e.Seen[0].V, b.rig.Name)
	default:
		e.Advice = b.nearest()
	}
	return e
}

// nearest looks for what comes nearest to a bob's look when nothing fits.
func (b *bob) nearest() string {
	f := b.f
	switch b.look.Kind {
	case detect.ByMotion:
		return "Nothing moves in the first second and a half. Start the clip later, or give the bob's colour."
	case detect.ByDark, detect.ByLight:
		return fmt.Sprintf("Give the bob's colour instead of look, or start_px = [u, v] and diameter_mm for [[bob]] %q; check that it is in the picture at the clip's start.", b.rig.Name)
	}
	u, v, colour, ok := b.look.Nearest(&f.whole, f.active)
	if !ok {
		return "Check that the bob is in the picture at the clip's start."
	}
	return fmt.Sprintf("The nearest colour is %q, near [%d, %d]. If that is the bob, write colour = %q in [[bob]] %q; else check that it is in the picture at the clip's start.", colour, u, v, colour, b.rig.Name)
}

func hex(r, g, b float64) string {
	return fmt.Sprintf("#%02x%02x%02x", uint8(math.Round(r)), uint8(math.Round(g)), uint8(math.Round(b)))
}

// draw marks what was seen in the picture.
func (e *NotFound) draw(p *clip.Patch) {
	c := canvas{p}
	for i, s := range e.Seen {
		c.ring(s.U, s.V, s.R+3, ink{255, 220, 0})
		c.label(int(s.U+0.75*s.R)+6, int(s.V-0.75*s.R)-4, fmt.Sprint(i+1), ink{255, 220, 0})
	}
	c.label(8, 18, fmt.Sprintf("bob %q: %s", e.Bob, e.Reason), ink{255, 255, 255})
	e.Picture = p.RGBA()
}
