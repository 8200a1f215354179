package follow

import (
	"fmt"
	"math"
	"strings"

	"lodeswing/track/camera"
	"lodeswing/track/clip"
	"lodeswing/track/detect"
	"lodeswing/track/rig"
)

// Two marks are taken for the scale's when both are this round and alike, and
// the next best thing is clearly worse.
const (
	markScore  = 0.55
	markBetter = 1.25 // the pair's weaker mark over the third best
	markSizes  = 1.3  // of the larger over the smaller
)

// Marks finds the two round marks of the rig's [scale] mark_look in a frame by
// themselves: the two roundest things of that look, of like size. Their centres
// come with the fit's own covariance. Where it is not plain which two are meant
// the error lists what was seen and says what to write instead.
func Marks(frame *clip.Frame, r *rig.Rig, subsampled bool) (*camera.Sighting, error) {
	look, err := markLook(r.Scale.MarkLook)
	if err != nil {
		return nil, err
	}
	var p clip.Patch
	frame.Patch(&p, frame.Bounds())
	active := activeArea(&p)
	s := detect.Search{Look: look, RMin: 3, RMax: float64(min(p.W, p.H)) / 12}
	var found []detect.Candidate
	for _, c := range s.Find(&p, active, 1, nil, nil) {
		if c.Score() >= 0.3 && !nearBob(c, r) {
			found = append(found, c)
		}
	}
	if !plainPair(found) {
		return nil, marksUnclear(look, found)
	}
	ends := &camera.Ends{}
	for i, c := range found[:2] {
		_, fit := detect.Acquire(&p, c, active, subsampled, false)
		if !fit.OK {
			return nil, fmt.Errorf("the scale's mark at [%.0f, %.0f] could not be fitted (%s): give [scale] ends_px instead of mark_look", c.U, c.V, fit.Why)
		}
		ends.At[i] = [2]float64{fit.U, fit.V}
		ends.Pixel[i] = fit.Cov
	}
	return &camera.Sighting{Ends: ends}, nil
}

func markLook(word string) (detect.Look, error) {
	if strings.HasPrefix(word, "#") {
		return detect.ParseLook(word, "")
	}
	return detect.ParseLook("", word)
}

// nearBob leaves out things at a place where the rig says that a bob starts.
func nearBob(c detect.Candidate, r *rig.Rig) bool {
	for _, b := range r.Bobs {
		if len(b.StartPX) == 2 && math.Hypot(c.U-b.StartPX[0], c.V-b.StartPX[1]) < 2*c.R {
			return true
		}
	}
	return false
}

// plainPair tells whether the two best candidates (best first) are the marks.
func plainPair(c []detect.Candidate) bool {
	if len(c) < 2 || c[1].Score() < markScore {
		return false
	}
	if math.Max(c[0].R, c[1].R) > markSizes*math.Min(c[0].R, c[1].R) {
		return false
	}
	return len(c) == 2 || c[1].Score() > markBetter*c[2].Score()
}

func marksUnclear(look detect.Look, seen []detect.Candidate) error {
	var s strings.Builder
	fmt.Fprintf(&s, "the scale's two marks (mark_look: %s) are not plain: ", look)
	switch len(seen) {
	case 0:
		s.WriteString("nothing round of that look is seen")
	default:
		s.WriteString("seen were")
		for i, c := range seen[:min(len(seen), mostSeen)] {
			if i > 0 {
				s.WriteByte(',')
			}
			fmt.Fprintf(&s, " [%.0f, %.0f] %.0f px across", c.U, c.V, 2*c.R)
		}
	}
	s.WriteString("; give the two ends yourself as [scale] ends_px = [[u, v], [u, v]], or use marks of another colour than the rest")
	return fmt.Errorf("%s", s.String())
}
