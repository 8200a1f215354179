package camera

import (
	"errors"
	"fmt"
	"math"

	"lodeswing/track/rig"
)

// Where a rig leaves something out, these stand: common practice, no source.
const (
	usualFocal     = 0.75 // focal length over the picture's longer side: a phone's main camera has 24–28 mm on 36 mm
	uUsualFocal    = 0.2  // relative
	uUsualAngle    = math.Pi / 180
	uUsualUpright  = 2 * math.Pi / 180   // of a picture's upright against true vertical
	uStatedUpright = 0.5 * math.Pi / 180 // the same where the rig says that the camera stood level
	uUsualK1       = 0.01                // of a lens whose distortion nobody measured
	uUsualDepth    = 1e-3                // m
	uUsualEnd      = 0.5                 // px
	uUsualPlumb    = 0.7                 // px
)

// setup is what a rig says of a camera that looks at a known length: all that
// is needed to solve for the camera.
type setup struct {
	w, h      int
	length    float64 // m
	ends      [2][2]float64
	depth     float64 // m, of the length, towards the camera
	focal     float64 // px; 0 where distance is given
	distance  float64 // m, lens to plane of motion along the line of sight; 0 where focal is given
	tilt, pan float64 // rad
	roll      float64 // rad, used without a plumb line; with one, added to what it gives
	plumb     *[2][2]float64
	k1, k2    float64
	origin    [2]float64 // px
	pl        plane
}

// solve finds the camera. The length is taken as parallel to the plane of motion.
func (s setup) solve() (pinhole, error) {
	p := pinhole{cu: float64(s.w-1) / 2, cv: float64(s.h-1) / 2, k1: s.k1, k2: s.k2}
	if s.focal > 0 {
		p.f = s.focal
		_, err := s.place(&p)
		return p, err
	}
	// The distance along the line of sight grows nearly in proportion to the
	// focal length, so that the ratio is a quickly converging correction.
	p.f = usualFocal * float64(max(s.w, s.h))
	for range 60 {
		d, err := s.place(&p)
		if err != nil {
			return p, err
		}
		ratio := s.distance / d
		if math.Abs(ratio-1) < 1e-13 {
			return p, nil
		}
		p.f *= ratio
		if !(p.f > 1e-3*float64(s.w)) || p.f > 1e6*float64(s.w) {
			break
		}
	}
	return p, errors.New("the scale's length and the camera's distance do not go together: no lens shows that length so large from there. Check length_mm, ends_px, depth_mm and distance_mm")
}

// place finds turn and eye for the focal length in p, and returns the distance
// to the plane of motion along the line of sight.
func (s setup) place(p *pinhole) (float64, error) {
	if err := s.checkLens(p); err != nil {
		return 0, err
	}
	p.r = pointed(s.pan, s.tilt, 0)
	roll := s.roll
	if s.plumb != nil {
		roll += plumbRoll(p, *s.plumb)
	}
	p.r = rotation(vec{0, 0, roll}).after(p.r)

	// Seen from height 1 above its plane, the length would be q.
	p.eye = s.pl.at.plus(1, s.pl.n)
	var q [2][2]float64
	for i, e := range s.ends {
		x, y, _ := p.unlens(e[0], e[1])
		a, b, _, _ := p.meet(x, y, s.pl, 0)
		q[i] = [2]float64{a, b}
	}
	height := s.length/math.Hypot(q[1][0]-q[0][0], q[1][1]-q[0][1]) + s.depth
	if !(height > 0) || math.IsInf(height, 0) {
		return 0, errors.New("the scale's ends do not lie in front of the camera as the rig has it. Check tilt_deg, from_above and ends_px")
	}
	x, y, _ := p.unlens(s.origin[0], s.origin[1])
	a, b, _, _ := p.meet(x, y, s.pl, 0)
	p.eye = s.pl.at.plus(height, s.pl.n).plus(-height*a, s.pl.e1).plus(-height*b, s.pl.e2)
	_, _, d, _ := p.meet(0, 0, s.pl, 0)
	if !(d > 0) || math.IsNaN(a) {
		return 0, errors.New("the camera as the rig has it does not look at the plane of motion. Check tilt_deg, from_above and origin_px")
	}
	return d, nil
}

func (s setup) checkLens(p *pinhole) error {
	if (p.k1 != 0 || p.k2 != 0) && p.folds(float64(max(s.w, s.h))/2/p.f) {
		return fmt.Errorf("the lens distortion k1 = %g, k2 = %g folds the picture over at a focal length of %.0f px. Check lens and focal_px in [camera]", p.k1, p.k2, p.f)
	}
	return nil
}

// plumbRoll is the camera's roll at which the picture of a vertical goes through
// the two points of a plumb line, the smaller of the two solutions. p has no
// roll yet.
func plumbRoll(p *pinhole, plumb [2][2]float64) float64 {
	ray := func(e [2]float64) vec {
		x, y, _ := p.unlens(e[0], e[1])
		return vec{x, y, 1}
	}
	n := ray(plumb[0]).cross(ray(plumb[1])) // normal of the plane through eye and line, camera axes with roll
	z := p.r.times(vec{0, 0, 1})            // up, camera axes without roll
	// n·(Rz(φ) z) = 0, that is A cos φ + B sin φ + C = 0.
	a, b, c := n[0]*z[0]+n[1]*z[1], n[1]*z[0]-n[0]*z[1], n[2]*z[2]
	amp := math.Hypot(a, b)
	if amp == 0 {
		return 0
	}
	at := math.Atan2(b, a)
	half := math.Acos(math.Max(-1, math.Min(1, -c/amp)))
	least := func(x float64) float64 { return math.Remainder(x, 2*math.Pi) }
	p1, p2 := least(at+half), least(at-half)
	if math.Abs(p1) < math.Abs(p2) {
		return p1
	}
	return p2
}

// plumbLine fits a line to the points of a plumb line (total least squares),
// and gives two points on it and the standard uncertainty of its direction.
func plumbLine(p *pinhole, pts [][2]float64, u float64) (ends [2][2]float64, uAngle float64) {
	// Points are straightened for the lens first; the ends go back through it.
	flat := make([][2]float64, len(pts))
	var mx, my float64
	for i, q := range pts {
		x, y, _ := p.unlens(q[0], q[1])
		flat[i] = [2]float64{x, y}
		mx += x / float64(len(pts))
		my += y / float64(len(pts))
	}
	var xx, xy, yy float64
	for _, q := range flat {
		xx += (q[0] - mx) * (q[0] - mx)
		xy += (q[0] - mx) * (q[1] - my)
		yy += (q[1] - my) * (q[1] - my)
	}
	angle := math.Atan2(2*xy, xx-yy) / 2
	s, c := math.Sincos(angle)
	var sum, far float64
	for _, q := range flat {
		along := (q[0]-mx)*c + (q[1]-my)*s
		sum += along * along
		far = math.Max(far, math.Abs(along))
	}
	for i, k := range []float64{-far, far} {
		ends[i][0], ends[i][1] = p.lens(mx+k*c, my+k*s)
	}
	return ends, u / p.f / math.Sqrt(sum)
}

// tiltOf gives the camera's tilt and its standard uncertainty.
func tiltOf(cam rig.Camera) (tilt, u float64) {
	switch {
	case cam.TiltRad.Set:
		return cam.TiltRad.V, cam.TiltRad.U
	case cam.FromAbove:
		return math.Pi / 2, uUsualAngle
	}
	return 0, uUsualAngle
}
