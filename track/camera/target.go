package camera

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"lodeswing/track"
	"lodeswing/track/rig"
)

const (
	uPrint      = 0.005 // relative, of a print whose check bar nobody measured (common practice, no source)
	uTargetUp   = 0.5 * math.Pi / 180
	uTargetK    = 0.05 // prior of k1 and k2, from which a target that fills enough of the picture departs
	uFreeFocal  = 0.3  // prior of ln f where the rig gives neither focal_px nor distance_mm
	leastPoints = 8
)

// fromTarget solves the camera from the points of a printed target.
func (c *Camera) fromTarget(r *rig.Rig, origin [2]float64, seen *Sighting) ([]track.Unsure, verticalFrom, error) {
	none := verticalFrom{}
	cal, cam, sc := &c.cal, r.Camera, r.Scale
	if seen == nil || len(seen.Points) < leastPoints {
		return nil, none, fmt.Errorf("the printed target %q was not found in the picture: it must be flat, whole, sharp and evenly lit", sc.Target)
	}
	print, uP := 1.0, uPrint
	if sc.LengthM.Set {
		if seen.BarM <= 0 {
			return nil, none, fmt.Errorf("[scale] gives a measured bar, but the target %q has none: take length_mm out", sc.Target)
		}
		print, uP = sc.LengthM.V/seen.BarM, sc.LengthM.U/sc.LengthM.V
		if math.Abs(print-1) > 0.3 {
			return nil, none, fmt.Errorf("the bar of the target %q is %.0f mm long as designed, the rig says that it measures %.1f mm: length_mm must be the measured length of that bar", sc.Target, seen.BarM*1e3, sc.LengthM.V*1e3)
		}
	} else {
		c.caution(fmt.Sprintf("The target's print was not checked: lengths carry %.1f %% for it. Measure the bar on the print with a ruler and give it as length_mm in [scale].", uP*100))
	}
	depth := sc.DepthM.Or(0)
	fit, err := newPoseFit(seen.Points, print, depth, c.pl, cal.PictureW, cal.PictureH, cam)
	if err != nil {
		return nil, none, fmt.Errorf("the printed target %q: %w", sc.Target, err)
	}
	pose, cov, either, err := fit.solve()
	if err != nil {
		return nil, none, fmt.Errorf("the printed target %q: %w", sc.Target, err)
	}
	cal.ScaleFrom = fmt.Sprintf("the printed target %s", sc.Target)
	cal.LensCorrected, cal.TiltCorrected = true, true
	vertical, uRoll := verticalFrom{"the printed target's upright", true}, uTargetUp
	if seen.UVertical > 0 {
		uRoll = seen.UVertical
	}
	about := func(p pinhole, angle float64) pinhole { return p.swung(c.pl, angle) }
	switch {
	case cam.FromAbove:
		vertical = verticalFrom{"the printed target, lying level", true}
	case len(cam.PlumbPX) >= 2:
		var ends [2][2]float64
		ends, uRoll = plumbLine(&pose, cam.PlumbPX, cam.PlumbUPX.Or(uUsualPlumb))
		var ray [2]vec
		for i, e := range ends {
			x, y, _ := pose.unlens(e[0], e[1])
			ray[i] = vec{x, y, 1}
		}
		n := pose.r.back(ray[0].cross(ray[1]))
		turn := math.Atan(-n.dot(c.pl.e2) / n.dot(c.pl.e1))
		pose = about(pose, turn)
		vertical = verticalFrom{"the plumb line in the rig", true}
	}
	p := pose.anchored(c.pl, origin)
	if _, _, d, _ := p.meet(0, 0, c.pl, 0); !(d > 0) {
		return nil, none, errors.New("the plane of motion does not lie in front of the camera: check depth_mm in [scale]")
	}
	c.pinhole = p

	var unsure []track.Unsure
	add := func(source string, q pinhole) {
		if by := q.anchored(c.pl, origin).from(p); by != [9]float64{} {
			unsure = append(unsure, track.Unsure{Source: source, By: by})
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(cov, true) {
		return nil, none, errors.New("the target's covariance has no eigenvectors")
	}
	var axes mat.Dense
	eig.VectorsTo(&axes)
	for i, v := range eig.Values(nil) {
		var by [9]float64
		for k := range by {
			by[k] = math.Sqrt(math.Max(v, 0)) * axes.At(k, i)
		}
		add("seeing the printed target", pose.moved(by))
	}
	if either != nil {
		add(either.Source, pose.moved(either.By))
	}
	bigger := pose
	at := c.pl.at.plus(depth, c.pl.n)
	bigger.eye = at.plus(1+uP, pose.eye.plus(-1, at))
	add("the print's size", bigger)
	uDepth := uUsualDepth
	if sc.DepthM.Set {
		uDepth = sc.DepthM.U
	}
	nearer := pose
	nearer.eye = pose.eye.plus(uDepth, c.pl.n)
	add("the target's depth", nearer)
	if !cam.FromAbove {
		add("the vertical", about(pose, uRoll))
	} else {
		add("the target's level", pose.leaned(c.pl, vec{1, 0, 0}, uRoll))
		add("the target's level", pose.leaned(c.pl, vec{0, 1, 0}, uRoll))
	}
	return unsure, vertical, nil
}

// swung turns the world's axes within the plane by angle about its normal: the
// camera as seen from axes whose up leans by angle towards e1.
func (p pinhole) swung(pl plane, angle float64) pinhole {
	n := pl.n
	return p.leaned(pl, n, -angle)
}

// leaned is the camera as seen from world axes that are turned by angle about an
// axis through the plane's point.
func (p pinhole) leaned(pl plane, axis vec, angle float64) pinhole {
	t := rotation(vec{angle * axis[0], angle * axis[1], angle * axis[2]})
	p.r = p.r.after(t)
	p.eye = pl.at.plus(1, t.back(p.eye.plus(-1, pl.at)))
	return p
}

// anchored slides the camera along the plane until the plane's point shows at
// the origin's pixel.
func (p pinhole) anchored(pl plane, origin [2]float64) pinhole {
	x, y, _ := p.unlens(origin[0], origin[1])
	a, b, _, _ := p.meet(x, y, pl, 0)
	p.eye = p.eye.plus(-a, pl.e1).plus(-b, pl.e2)
	return p
}
