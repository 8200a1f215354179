// Package camera turns pixels into places in the plane of motion and back. What
// comes in: a rig's [camera] and [scale], the size of the upright picture in
// pixels, and, where there is one, the sighting of a printed target. What goes
// out: metres in world axes (x right, z up, y away from the camera, origin at
// the scale's origin), the Jacobian of each place by its pixel, and how well all
// of it is known. Pixels are those of the upright picture, u right, v down, with
// the middle of the top-left pixel at (0, 0).
//
// The camera is a pinhole with radial distortion. A known length gives the scale;
// the focal length or the distance to the plane of motion gives the perspective,
// and where the rig has neither, those of a usual phone stand with 20 %
// uncertainty. A printed target gives all of it, tilt and lens included, by
// nonlinear least squares on the pixels of its points.
//
// Seen from above ([camera] from_above), the plane of motion is horizontal, at
// the height of the first bob at rest; the second coordinate of a place is then
// world y, up in the picture.
package camera

import (
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// Camera is a solved camera. It does not change and may be used from several
// goroutines.
type Camera struct {
	pinhole
	pl       plane
	cal      track.Calibration
	cautions []string
	rotation int // degrees clockwise that the stored picture was turned to be upright
}

// New solves the camera for a picture of w by h pixels. seen is the sighting of
// the printed target that the rig names, or of the two marks that it asks to be
// found, and nil where the rig gives the ends of its length itself. Errors say
// which key of the rig is missing or contradicts another.
func New(r *rig.Rig, w, h int, seen *Sighting) (*Camera, error) {
	if w < 8 || h < 8 {
		return nil, fmt.Errorf("a picture of %d × %d pixels is too small to measure in", w, h)
	}
	if err := r.CheckScale(); err != nil {
		return nil, err
	}
	c := &Camera{}
	pz := 0.0
	if r.Camera.FromAbove {
		pz = restHeight(r)
	}
	c.pl = motionPlane(r.Camera.FromAbove, pz)
	origin := [2]float64{float64(w-1) / 2, float64(h-1) / 2}
	if len(r.Scale.OriginPX) == 2 {
		origin = [2]float64(r.Scale.OriginPX)
		if !inside(origin, w, h, 5) {
			return nil, fmt.Errorf("the rig's origin_px [%g, %g] lies far outside the picture of %d × %d pixels", origin[0], origin[1], w, h)
		}
	}
	c.cal = track.Calibration{
		OriginU: origin[0], OriginV: origin[1], PictureW: w, PictureH: h,
		RateFactor: r.Camera.RateFactor.Or(1), ExposureS: r.Camera.ExposureS.Or(0),
		UClock: 50e-6, ReadoutS: r.Camera.ReadoutS.Or(0), UReadoutS: uUnknownReadout,
	}
	if r.Camera.ClockPPM.Set {
		c.cal.UClock = r.Camera.ClockPPM.U * 1e-6
	}
	if r.Camera.ReadoutS.Set {
		c.cal.UReadoutS = r.Camera.ReadoutS.U
	} else {
		c.caution("The rig does not give readout_ms: a rolling shutter of up to some 10 ms is not corrected, which biases friction. Film a fast straight edge, or look the phone's read-out up, and add it to [camera].")
	}

	var err error
	var unsure []track.Unsure
	var vertical verticalFrom
	if r.Scale.Target != "" {
		unsure, vertical, err = c.fromTarget(r, origin, seen)
	} else {
		unsure, vertical, err = c.fromLength(r, origin, seen)
	}
	if err != nil {
		return nil, err
	}
	c.cal.VerticalFrom, c.cal.VerticalKnown = vertical.words, vertical.known
	if _, _, d, _ := c.meet(0, 0, c.pl, 0); !c.cal.Lens.Assumed {
		c.cal.DistanceM = d
	}
	l := &c.cal.Lens
	l.FocalPX, l.K1, l.K2, l.Eye = c.f, c.k1, c.k2, c.eye
	l.FromAbove, l.PlaneZ, l.Unsure = r.Camera.FromAbove, pz, unsure
	for i := range 3 {
		copy(l.Turn[3*i:], c.r[i][:])
	}
	c.budget()
	return c, nil
}

// Restore gives the camera of a track's calibration again, for analysis.
func Restore(cal track.Calibration) (*Camera, error) {
	l := cal.Lens
	if !(l.FocalPX > 0) || cal.PictureW < 1 || cal.PictureH < 1 {
		return nil, fmt.Errorf("this track does not hold its camera: it was not made by following a clip")
	}
	c := &Camera{cal: cal, pl: motionPlane(l.FromAbove, l.PlaneZ)}
	c.pinhole = pinhole{
		cu: float64(cal.PictureW-1) / 2, cv: float64(cal.PictureH-1) / 2,
		f: l.FocalPX, k1: l.K1, k2: l.K2, eye: l.Eye,
	}
	for i := range 3 {
		copy(c.r[i][:], l.Turn[3*i:])
	}
	return c, nil
}

// The sources that a camera which is not square to the plane brings.
const (
	fromTilt = "the camera's tilt"
	fromPan  = "the camera's pan"
)

// uUnknownReadout is the standard uncertainty of a read-out that the rig does not
// give: phones take 5 to 30 ms (common practice, no source).
const uUnknownReadout = 10e-3

// verticalFrom says what gave the vertical.
type verticalFrom struct {
	words string
	known bool
}

func (c *Camera) caution(text string) { c.cautions = append(c.cautions, text) }

func inside(p [2]float64, w, h int, by float64) bool {
	x, y := by*float64(w), by*float64(h)
	return p[0] > -x && p[0] < float64(w)+x && p[1] > -y && p[1] < float64(h)+y
}

// restHeight is the height of the first bob at rest: what a camera above sees.
func restHeight(r *rig.Rig) float64 {
	if len(r.Bobs) == 0 {
		return 0
	}
	b := r.Bobs[0]
	z, p := rig.XYZ(b.AtM)[2], r.FindPart(b.Part)
	for n := 0; p != nil && n <= len(r.Parts); n++ {
		if p.Upright { // a part's axes are those of its hanging state
			z = -z
		}
		z += rig.XYZ(p.PivotM)[2]
		p = r.FindPart(p.On)
	}
	return z
}

// Calibration is what a track keeps of the camera.
func (c *Camera) Calibration() track.Calibration { return c.cal }

// Cautions are plain sentences about what the rig leaves open.
func (c *Camera) Cautions() []string { return c.cautions }

// ToPlane gives the place in the plane of motion, in m, of a pixel, and the
// Jacobian ∂(x, z)/∂(u, v) in m/px. From above, z is world y. NaN where the line
// of sight does not meet the plane.
func (c *Camera) ToPlane(u, v float64) (x, z float64, j [2][2]float64) {
	return c.BobToPlane(u, v, 0, 0)
}

// BobToPlane is ToPlane for the picture's centre of a ball of that radius (m; 0
// for a flat disc) that moves depth metres before (+) the plane of motion. A
// ball's outline is an ellipse whose centre lies farther out than the picture of
// the ball's centre, by 1/(1 − R²/Z²) with Z its distance along the line of
// sight: for a ball at angle θ off the axis that subtends 2α, the outline runs
// from f·tan(θ−α) to f·tan(θ+α), with sin α = R·cos θ/Z; the middle of these is
// f·tan θ/(1 − R²/Z²).
func (c *Camera) BobToPlane(u, v, radius, depth float64) (x, z float64, j [2][2]float64) {
	fx, fy, ju := c.unlens(u, v)
	x, z, t, jp := c.meet(fx, fy, c.pl, depth)
	if radius > 0 {
		k := 1 - radius*radius/(t*t)
		_, _, t, _ = c.meet(fx*k, fy*k, c.pl, depth) // a tilted plane's distance changes a little
		k = 1 - radius*radius/(t*t)
		x, z, _, jp = c.meet(fx*k, fy*k, c.pl, depth)
		for i := range 2 {
			jp[i][0], jp[i][1] = k*jp[i][0], k*jp[i][1]
		}
	}
	for a := range 2 {
		for b := range 2 {
			j[a][b] = jp[a][0]*ju[0][b] + jp[a][1]*ju[1][b]
		}
	}
	return x, z, j
}

// ToPixel gives the pixel of a world point in m; NaN for one behind the camera.
func (c *Camera) ToPixel(x, y, z float64) (u, v float64) {
	u, v, _ = c.project(vec{x, y, z})
	return u, v
}

// BobToPixel gives the centre, in px, of the outline of a ball of that radius (m)
// at a world point: the inverse of BobToPlane, for any place.
func (c *Camera) BobToPixel(x, y, z, radius float64) (u, v float64) {
	p := c.r.times(vec{x, y, z}.plus(-1, c.eye))
	if p[2] <= radius {
		return math.NaN(), math.NaN()
	}
	k := 1 / (p[2] * (1 - radius*radius/(p[2]*p[2])))
	return c.lens(p[0]*k, p[1]*k)
}

// RadiusPX is the mean radius, in px, of the outline of a ball of that radius (m)
// whose outline is centred at a pixel, depth metres before (+) the plane of motion.
func (c *Camera) RadiusPX(u, v, radius, depth float64) float64 {
	x, y, _ := c.unlens(u, v)
	_, _, t, _ := c.meet(x, y, c.pl, depth)
	// Semi-axes of the outline: f·(R/Z)·√(1 + tan²θ/(1−R²/Z²))/√(1−R²/Z²) along
	// the radius and f·(R/Z)/√(1−R²/Z²) across.
	s := radius / t
	k := 1 - s*s
	if !(k > 0) {
		return math.NaN()
	}
	across := c.f * s / math.Sqrt(k)
	r2 := (x*x + y*y) * k
	along := across * math.Sqrt(1+r2)
	stretch := 1 + (c.k1*2+3*c.k2*r2)*r2 // mean of the lens's two magnifications
	return math.Sqrt(along*across) * stretch
}

// Rotated says how the stored picture was turned to become upright, in degrees
// clockwise (0, 90, 180, 270), so that RowTime knows which way the sensor's rows
// run. It returns a new camera.
func (c *Camera) Rotated(clockwise int) *Camera {
	d := *c
	d.rotation = ((clockwise % 360) + 360) % 360
	return &d
}

// RowTime is when the sensor reads the row of a pixel of the upright picture, in
// seconds after it reads the picture's middle.
func (c *Camera) RowTime(u, v float64) float64 {
	w, h := float64(c.cal.PictureW-1), float64(c.cal.PictureH-1)
	var share float64 // 0 first row, 1 last row
	switch c.rotation {
	case 90:
		share = 1 - u/w
	case 180:
		share = 1 - v/h
	case 270:
		share = u / w
	default:
		share = v / h
	}
	return c.cal.ReadoutS * (share - 0.5)
}

// Moved is the camera with each independent source of uncertainty i of
// Calibration().Lens.Unsure moved by by[i] standard uncertainties: for Monte
// Carlo and for the camera's share in a fit. A short slice leaves the rest alone.
func (c *Camera) Moved(by []float64) *Camera {
	var sum [9]float64
	for i, s := range c.cal.Lens.Unsure {
		if i < len(by) {
			for k := range sum {
				sum[k] += by[i] * s.By[k]
			}
		}
	}
	d := *c
	d.pinhole = c.moved(sum)
	return &d
}

// budget fills in what the sources of uncertainty do to lengths and directions.
func (c *Camera) budget() {
	cal := &c.cal
	w, h := float64(cal.PictureW-1), float64(cal.PictureH-1)
	// Lengths are judged over the middle half of the picture: those between the
	// nine points of a grid there.
	local := func(p *pinhole) (out [36]float64) {
		q := Camera{pinhole: *p, pl: c.pl}
		var pts [9][2]float64
		k := 0
		for i := range pts {
			x, z, _ := q.ToPlane(w*(0.25+0.25*float64(i%3)), h*(0.25+0.25*float64(i/3)))
			pts[i] = [2]float64{x, z}
			for _, o := range pts[:i] {
				out[k] = math.Hypot(x-o[0], z-o[1])
				k++
			}
		}
		return out
	}
	// Directions: where the picture's up at the middle points in the plane.
	upAngle := func(p *pinhole) float64 {
		q := Camera{pinhole: *p, pl: c.pl}
		_, _, j := q.ToPlane(w/2, h/2)
		return math.Atan2(-j[0][1], -j[1][1])
	}
	between := local(&c.pinhole)
	up := upAngle(&c.pinhole)
	_, _, j := c.ToPlane(w/2, h/2)
	cal.MetresPerPixel = math.Sqrt(math.Abs(j[0][0]*j[1][1] - j[0][1]*j[1][0]))
	var order []string
	sums := map[string]float64{}
	var vertical float64
	for _, s := range cal.Lens.Unsure {
		p := c.moved(s.By)
		var sum float64
		for i, x := range local(&p) {
			d := x/between[i] - 1
			sum += d * d / float64(len(between))
		}
		if _, known := sums[s.Source]; !known {
			order = append(order, s.Source)
		}
		sums[s.Source] += sum
		if cal.Lens.FromAbove {
			z := vec{0, 0, 1}
			d := p.r.times(z).plus(-1, c.r.times(z)).length()
			vertical += d * d
		} else {
			d := math.Remainder(upAngle(&p)-up, 2*math.Pi)
			vertical += d * d
		}
	}
	var total float64
	for _, name := range order {
		total += sums[name]
		if u := math.Sqrt(sums[name]); u > 1e-7 {
			cal.ScaleShares = append(cal.ScaleShares, track.Share{Source: name, U: u})
		}
	}
	cal.UScale, cal.UVertical = math.Sqrt(total), math.Sqrt(vertical)
	if askew := math.Hypot(math.Sqrt(sums[fromTilt]), math.Sqrt(sums[fromPan])); askew > 0.004 && askew > 0.7*cal.UScale {
		c.caution(fmt.Sprintf("A camera that is a degree off square would change lengths by %.1f %%, more than all else does. Put the scale's length nearer to the bob, film from farther away, or use the printed target (lodeswing target).", 100*askew))
	}
}
