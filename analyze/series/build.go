package series

import (
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// Defaults where the rig gives no uncertainty of a place.
const (
	uPlaceM  = 0.5e-3 // of each coordinate of pivot_mm and at_mm, as of the rig's magnets
	uOriginP = 1.0    // px, of scale.origin_px
	uUpright = 0.0175 // rad (1°), of a picture's own upright taken for the vertical
)

// longArc is the largest relative uncertainty of a radius that a track may give
// by itself; beyond it the arc is too short, and its circle biased.
const longArc = 0.1

// builder makes angles bob by bob; a part on another part needs its parent's.
type builder struct {
	tr    *track.Track
	rig   *rig.Rig
	done  map[string]*Angle // by bob
	depth int
}

// order is the bobs in the track's order.
func (b *builder) order() []*track.Bob {
	out := make([]*track.Bob, len(b.tr.Bobs))
	for i := range b.tr.Bobs {
		out[i] = &b.tr.Bobs[i]
	}
	return out
}

// rigBob returns the rig's entry of that name, or nil.
func (b *builder) rigBob(name string) *rig.Bob {
	for i := range b.rig.Bobs {
		if b.rig.Bobs[i].Name == name {
			return &b.rig.Bobs[i]
		}
	}
	return nil
}

// partOf returns the part that a bob sits on; nil with a problem when there is none.
func (b *builder) partOf(bob *track.Bob) (*rig.Part, string) {
	if len(b.rig.Parts) == 0 {
		return &rig.Part{Name: bob.Name, Joint: "hinge"}, ""
	}
	name := bob.Part
	if rb := b.rigBob(bob.Name); name == "" && rb != nil {
		name = rb.Part
	}
	if name == "" && len(b.rig.Parts) == 1 {
		return &b.rig.Parts[0], ""
	}
	for i := range b.rig.Parts {
		if b.rig.Parts[i].Name == name {
			return &b.rig.Parts[i], ""
		}
	}
	if name == "" {
		return nil, fmt.Sprintf("the bob %q names no part; give it part = \"...\" in the rig", bob.Name)
	}
	return nil, fmt.Sprintf("the bob %q sits on the part %q, which the rig does not describe", bob.Name, name)
}

// bobsOn lists the track's bobs on a part.
func (b *builder) bobsOn(part string) []*track.Bob {
	var out []*track.Bob
	for i := range b.tr.Bobs {
		if p, _ := b.partOf(&b.tr.Bobs[i]); p != nil && p.Name == part {
			out = append(out, &b.tr.Bobs[i])
		}
	}
	return out
}

// angle makes the Angle of one bob; nil when another bob already tells its part.
func (b *builder) angle(bob *track.Bob) *Angle {
	if a := b.done[bob.Name]; a != nil {
		return a
	}
	part, problem := b.partOf(bob)
	a := &Angle{Bob: bob.Name, Joint: "hinge", UClock: b.tr.Cal.UClock}
	if part == nil {
		a.Problem = problem
		return a
	}
	a.Part = part.Name
	if part.Joint != "" {
		a.Joint = part.Joint
	}
	if b.depth++; b.depth > len(b.rig.Parts)+1 {
		a.Problem = fmt.Sprintf("the part %q sits on itself, by way of other parts", part.Name)
		b.depth--
		return a
	}
	defer func() { b.depth-- }()
	usable := bob.Usable()
	if len(usable) < minSamples {
		a.Problem = fmt.Sprintf("the bob %q was seen whole in %d frames only; at least %d are needed", bob.Name, len(usable), minSamples)
		return a
	}
	a.Gaps = bobGaps(bob)
	switch {
	case b.rig.Camera.FromAbove && part.Joint == "ball":
		b.fromAbove(a, part, bob, usable)
	case part.On != "" && part.On != "base":
		if on := b.bobsOn(part.Name); len(on) >= 2 {
			if bob != on[0] {
				return nil
			}
			b.byLine(a, part, on[0], on[1])
		} else {
			b.onPart(a, part, bob, usable)
		}
	default:
		b.byPivot(a, part, bob, usable)
	}
	if a.Problem == "" {
		b.finish(a, part, bob)
	}
	b.done[bob.Name] = a
	return a
}

// frameOf is how directions on a part become its angle: ang = sign·(dir − zero),
// where dir is counted from hanging (or standing) towards +x.
type frameOf struct {
	upright bool
	zero    float64 // the bob's own direction in the part, rad
	centre  float64 // the centre of mass's direction in the part, rad
}

func newFrame(part *rig.Part, rb *rig.Bob) frameOf {
	f := frameOf{upright: part.Upright && part.Joint != "pin"}
	if rb != nil && len(rb.AtM) >= 2 {
		f.zero = f.direction(rb.AtM)
	}
	if part.Joint != "pin" && len(part.CentreM) >= 2 {
		f.centre = f.direction(part.CentreM)
	}
	return f
}

// direction is the angle of a place given in a part's own axes. A standing part
// may be given as it stands or hanging, turned by π.
func (f frameOf) direction(at []float64) float64 {
	x, z := at[0], at[len(at)-1]
	if x == 0 && z == 0 {
		return 0
	}
	if f.upright {
		if z < 0 {
			x, z = -x, -z
		}
		return math.Atan2(x, z)
	}
	return math.Atan2(x, -z)
}

// turn is the part's angle for a bob at (dx, dz) from the pivot, and the unit
// vector along which the bob moves when the angle grows.
func (f frameOf) turn(dx, dz float64) (angle, tx, tz float64) {
	r := math.Hypot(dx, dz)
	if f.upright {
		return math.Atan2(dx, dz) - f.zero + f.centre, dz / r, -dx / r
	}
	return math.Atan2(dx, -dz) - f.zero + f.centre, -dz / r, dx / r
}

// byPivot measures a part on the base: direction from a fixed pivot to the bob.
func (b *builder) byPivot(a *Angle, part *rig.Part, bob *track.Bob, usable []track.Sample) {
	rb := b.rigBob(bob.Name)
	c, from, cautions, err := b.pivot(part, rb, usable)
	if err != nil && part.Joint == "ball" {
		a.Problem = fmt.Sprintf("the pivot of the ball joint %q is not known: %v", part.Name, err)
		return
	}
	if err != nil {
		a.Problem = fmt.Sprintf("the pivot of %q is not known: %v. Give scale.origin_px and the part's pivot_mm, or the bob's at_mm, or film a larger swing", part.Name, err)
		return
	}
	a.Cautions = append(a.Cautions, cautions...)
	uScale := b.tr.Cal.UScale
	a.Pivot = Pivot{
		X: c.x, Z: c.z, UX: math.Sqrt(c.cov[0]), UZ: math.Sqrt(c.cov[4]), CovXZ: c.cov[1],
		R: c.r, UR: math.Hypot(math.Sqrt(c.cov[8]), c.r*uScale), From: from, ScatterR: c.scatter,
	}
	f := newFrame(part, rb)
	n := len(usable)
	tx, tz, inv := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, s := range usable {
		dx, dz := s.X-c.x, s.Z-c.z
		r := math.Hypot(dx, dz)
		if r == 0 {
			a.Problem = fmt.Sprintf("the bob %q was seen on its own pivot; the pivot cannot be right", bob.Name)
			return
		}
		var ang float64
		ang, tx[i], tz[i] = f.turn(dx, dz)
		inv[i] = 1 / r
		v := tx[i]*tx[i]*s.Plane.AA + 2*tx[i]*tz[i]*s.Plane.AB + tz[i]*tz[i]*s.Plane.BB
		a.add(s.T, ang, math.Sqrt(v)/r)
	}
	// The pivot's covariance as two independent shifts (Cholesky).
	l11 := a.Pivot.UX
	if l11 > 0 {
		l21 := a.Pivot.CovXZ / l11
		l22 := math.Sqrt(math.Max(0, a.Pivot.UZ*a.Pivot.UZ-l21*l21))
		d1, d2 := make([]float64, n), make([]float64, n)
		for i := range d1 {
			d1[i] = -(tx[i]*l11 + tz[i]*l21) * inv[i]
			d2[i] = -tz[i] * l22 * inv[i]
		}
		a.Shared = append(a.Shared, Shared{"pivot", d1}, Shared{"pivot", d2})
	}
	if part.Joint == "ball" {
		a.Cautions = append(a.Cautions, "A ball joint swings in space; the angle is that of its picture in the plane of motion.")
		if a.Pivot.ScatterR > 0.01*a.Pivot.R {
			a.Cautions = append(a.Cautions, "The bob leaves the plane of motion: its distance from the pivot, as pictured, varies by more than 1 %.")
		}
	}
}

// pivot finds a base part's pivot by circle fit, with what the rig says where
// the two agree.
func (b *builder) pivot(part *rig.Part, rb *rig.Bob, usable []track.Sample) (circle, string, []string, error) {
	var pr prior
	cal := &b.tr.Cal
	if len(b.rig.Scale.OriginPX) == 2 && !part.PivotFromTrack && len(part.PivotM) >= 2 {
		pr.x, pr.z = part.PivotM[0], part.PivotM[len(part.PivotM)-1]
		d := math.Hypot(pr.x, pr.z)
		u := math.Hypot(uPlaceM, math.Hypot(uOriginP*cal.MetresPerPixel, cal.UScale*d))
		pr.ux, pr.uz = u, u
	}
	if rb != nil && len(rb.AtM) >= 2 {
		pr.r = math.Hypot(rb.AtM[0], rb.AtM[len(rb.AtM)-1])
		if pr.r > 0 {
			pr.ur = math.Hypot(uPlaceM, cal.UScale*pr.r)
		}
	}
	ball := part.Joint == "ball"
	if ball {
		return ballPivot(usable, pr)
	}
	free, err := fitCircle(usable, prior{})
	if err == nil && math.Sqrt(free.cov[8]) > longArc*free.r {
		err = errShortArc
	}
	if pr.ux == 0 && pr.ur == 0 {
		return free, "circle through the track", circleCautions(free, err), err
	}
	both, bothErr := fitCircle(usable, pr)
	if bothErr != nil {
		return free, "circle through the track", circleCautions(free, err), err
	}
	if err == nil {
		if c := disagree(free, pr); c != "" {
			return free, "circle through the track", append(circleCautions(free, nil), c), nil
		}
	}
	from := "circle through the track, with the rig's dimensions"
	if err != nil || math.Sqrt(free.cov[8]) > 3*math.Sqrt(both.cov[8]) {
		from = "the rig's dimensions, and the arc of the track as far as it bends"
	}
	return both, from, circleCautions(both, nil), nil
}

func circleCautions(c circle, err error) []string {
	if err != nil {
		return nil
	}
	if c.scatter > 0.015*c.r {
		return []string{fmt.Sprintf("The bob's distance from its pivot varies by %.1f %% (r.m.s.): the camera moved, the bob left its plane, or it is not on a hinge.", 100*c.scatter/c.r)}
	}
	return nil
}

// disagree says in plain words that rig and track do not fit together; empty
// when they do, within four standard uncertainties.
func disagree(free circle, pr prior) string {
	if pr.ur > 0 {
		u := math.Hypot(pr.ur, math.Sqrt(free.cov[8]))
		if math.Abs(free.r-pr.r) > 4*u {
			return fmt.Sprintf("The rig puts the bob %.1f mm from its pivot, the track %.1f ± %.1f mm; the track's circle was used. Check the scale and at_mm.",
				1e3*pr.r, 1e3*free.r, 1e3*math.Sqrt(free.cov[8]))
		}
	}
	if pr.ux > 0 {
		dx, dz := free.x-pr.x, free.z-pr.z
		if math.Abs(dx) > 4*math.Hypot(pr.ux, math.Sqrt(free.cov[0])) || math.Abs(dz) > 4*math.Hypot(pr.uz, math.Sqrt(free.cov[4])) {
			return fmt.Sprintf("The track turns about a point %.1f mm to the right of and %.1f mm above the rig's pivot; the track's circle was used. Check scale.origin_px and pivot_mm.",
				1e3*dx, 1e3*dz)
		}
	}
	return ""
}

// add appends one sample.
func (a *Angle) add(t, angle, u float64) {
	a.T, a.Angle, a.UAngle = append(a.T, t), append(a.Angle, angle), append(a.UAngle, u)
}
