package camera

import (
	"errors"
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// fromLength solves the camera from a known length with its two ends.
func (c *Camera) fromLength(r *rig.Rig, origin [2]float64, seen *Sighting) ([]track.Unsure, verticalFrom, error) {
	none := verticalFrom{}
	cal, cam, sc := &c.cal, r.Camera, r.Scale
	s := setup{
		w: cal.PictureW, h: cal.PictureH, length: sc.LengthM.V, depth: sc.DepthM.Or(0),
		focal: cam.FocalPX.Or(0), origin: origin, pl: c.pl,
	}
	var uEnds float64
	switch {
	case seen != nil && seen.Ends != nil:
		s.ends = seen.Ends.At
		d := [2]float64{s.ends[1][0] - s.ends[0][0], s.ends[1][1] - s.ends[0][1]}
		n := math.Hypot(d[0], d[1])
		for _, k := range seen.Ends.Pixel {
			uEnds += (d[0]*d[0]*k.AA + 2*d[0]*d[1]*k.AB + d[1]*d[1]*k.BB) / (n * n)
		}
		uEnds = math.Sqrt(uEnds)
		cal.ScaleFrom = "the rig's length between two marks found in the picture"
	case len(sc.EndsPX) == 2:
		s.ends = [2][2]float64(sc.EndsPX)
		uEnds = math.Sqrt2 * sc.EndsUPX.Or(uUsualEnd)
		cal.ScaleFrom = "the rig's length between its two ends in the picture"
	default:
		return nil, none, errors.New("the two marks of the scale were not found in the picture: check mark_look, or give ends_px")
	}
	span := math.Hypot(s.ends[1][0]-s.ends[0][0], s.ends[1][1]-s.ends[0][1])
	for _, e := range s.ends {
		if !inside(e, s.w, s.h, 0) {
			return nil, none, fmt.Errorf("the scale's end at [%g, %g] px lies outside the picture of %d × %d pixels: read ends_px from the upright picture", e[0], e[1], s.w, s.h)
		}
	}
	if span < 2 || !(uEnds < span/4) {
		return nil, none, fmt.Errorf("the scale's ends are %.1f px apart and read to %.1f px: too near to give a scale", span, uEnds)
	}
	if len(cam.Lens) > 0 {
		if s.focal == 0 && !cam.DistanceM.Set {
			return nil, none, errors.New("[camera] lens is in focal lengths: add focal_px or distance_mm, without which it has no size")
		}
		s.k1 = cam.Lens[0]
		if len(cam.Lens) > 1 {
			s.k2 = cam.Lens[1]
		}
		cal.LensCorrected = true
	}
	if s.focal == 0 {
		s.distance = cam.DistanceM.Or(0)
	}
	if s.focal == 0 && s.distance == 0 {
		s.focal, cal.Lens.Assumed = usualFocal*float64(max(s.w, s.h)), true
	}
	var uTilt float64
	s.tilt, uTilt = tiltOf(cam)
	cal.TiltCorrected = s.tilt != 0 || cam.TiltRad.Set

	// A first solution straightens the plumb line; then the camera itself.
	p, err := s.solve()
	if err != nil {
		return nil, none, err
	}
	vertical, uRoll := verticalFrom{}, uUsualUpright
	switch {
	case cam.FromAbove:
		vertical = verticalFrom{"the camera's view from above", true}
	case len(cam.PlumbPX) >= 2:
		var ends [2][2]float64
		ends, uRoll = plumbLine(&p, cam.PlumbPX, cam.PlumbUPX.Or(uUsualPlumb))
		s.plumb = &ends
		vertical = verticalFrom{"the plumb line in the rig", true}
	case cam.Vertical == "picture":
		vertical, uRoll = verticalFrom{"the picture's own upright, as the rig says", true}, uStatedUpright
	}
	if p, err = s.solve(); err != nil {
		return nil, none, err
	}
	c.pinhole = p
	if cam.FocalPX.Set && cam.DistanceM.Set {
		_, _, d, _ := p.meet(0, 0, c.pl, 0)
		u := math.Hypot(cam.FocalPX.U/cam.FocalPX.V*d, cam.DistanceM.U)
		if math.Abs(d-cam.DistanceM.V) > 3*u {
			c.caution(fmt.Sprintf("focal_px and the scale put the camera at %.0f mm, distance_mm says %.0f mm: one of them is wrong. focal_px was used.", d*1e3, cam.DistanceM.V*1e3))
		}
	}

	// One standard uncertainty of each number, solved anew.
	var unsure []track.Unsure
	vary := func(source string, change func(*setup, float64)) {
		if err != nil {
			return
		}
		var by [2][9]float64
		for i, k := range []float64{1, -1} {
			t := s
			change(&t, k)
			var q pinhole
			if q, err = t.solve(); err != nil {
				return
			}
			by[i] = q.from(p)
		}
		for i := range by[0] {
			by[0][i] = (by[0][i] - by[1][i]) / 2
		}
		if by[0] != [9]float64{} {
			unsure = append(unsure, track.Unsure{Source: source, By: by[0]})
		}
	}
	vary("the scale's length", func(t *setup, k float64) { t.length += k * sc.LengthM.U })
	vary("reading the scale's ends", func(t *setup, k float64) { t.stretch(k * uEnds) })
	uDepth := uUsualDepth
	if sc.DepthM.Set {
		uDepth = sc.DepthM.U
	}
	vary("the scale's depth", func(t *setup, k float64) { t.depth += k * uDepth })
	switch {
	case cal.Lens.Assumed:
		vary("the camera's distance (not given)", func(t *setup, k float64) { t.focal *= 1 + k*uUsualFocal })
	case cam.FocalPX.Set:
		vary("the focal length", func(t *setup, k float64) { t.focal += k * cam.FocalPX.U })
	default:
		vary("the camera's distance", func(t *setup, k float64) { t.distance += k * cam.DistanceM.U })
	}
	vary(fromTilt, func(t *setup, k float64) { t.tilt += k * uTilt })
	vary(fromPan, func(t *setup, k float64) { t.pan += k * uUsualAngle })
	if !cam.FromAbove {
		vary("the vertical", func(t *setup, k float64) { t.roll += k * uRoll })
	}
	uK1 := uUsualK1
	if len(cam.Lens) > 0 {
		uK1 = uGivenLens(s.k1)
	}
	vary("the lens's distortion", func(t *setup, k float64) { t.k1 += k * uK1 })
	return unsure, vertical, err
}

// uGivenLens is the standard uncertainty of a k1 that the rig gives: a tenth of
// it, at least 0.002 (common practice, no source).
func uGivenLens(k1 float64) float64 { return math.Max(0.1*math.Abs(k1), 0.002) }

// stretch moves the ends apart by d px.
func (s *setup) stretch(d float64) {
	du, dv := s.ends[1][0]-s.ends[0][0], s.ends[1][1]-s.ends[0][1]
	n := 2 * math.Hypot(du, dv) / d
	s.ends[0][0], s.ends[0][1] = s.ends[0][0]-du/n, s.ends[0][1]-dv/n
	s.ends[1][0], s.ends[1][1] = s.ends[1][0]+du/n, s.ends[1][1]+dv/n
}
