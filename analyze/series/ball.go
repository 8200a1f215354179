package series

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// ballPivot finds the pivot of a ball joint that is filmed from the side. In the
// picture the bob fills a disc: it is never farther from the pivot than its
// distance in space, and that far when it swings in the plane of motion. So the
// circle of the rig's radius is laid through the outermost fifth of the path.
func ballPivot(usable []track.Sample, pr prior) (circle, string, []string, error) {
	if pr.ux > 0 {
		c := circle{x: pr.x, z: pr.z}
		c.cov[0], c.cov[4], c.cov[8] = pr.ux*pr.ux, pr.uz*pr.uz, pr.ux*pr.ux
		c.measure(usable, pr.r)
		return c, "the rig's pivot", nil, nil
	}
	if pr.ur == 0 {
		return circle{}, "", nil, errors.New("give scale.origin_px and its pivot_mm, or the bob's at_mm")
	}
	kept := usable
	var c circle
	var err error
	for range 12 {
		if c, err = fitCircle(kept, pr); err != nil {
			return circle{}, "", nil, err
		}
		outer := slices.Clone(usable)
		slices.SortFunc(outer, func(a, b track.Sample) int {
			da, db := math.Hypot(a.X-c.x, a.Z-c.z), math.Hypot(b.X-c.x, b.Z-c.z)
			switch {
			case da > db:
				return -1
			case da < db:
				return 1
			}
			return 0
		})
		kept = outer[:max(minSamples, len(outer)/5)]
	}
	// How far inside the outermost fifth still lies is how well this is known.
	for i := range 2 {
		c.cov[4*i] += c.scatter * c.scatter
	}
	c.measure(usable, pr.r)
	return c, "the outermost part of the path, with the rig's length", nil, nil
}

// measure sets the radius to r, or to the largest distance seen when r is 0, and
// the scatter to the r.m.s. distance from it.
func (c *circle) measure(samples []track.Sample, r float64) {
	c.r, c.scatter = r, 0
	if r == 0 {
		for _, s := range samples {
			c.r = math.Max(c.r, math.Hypot(s.X-c.x, s.Z-c.z))
		}
	}
	for _, s := range samples {
		d := math.Hypot(s.X-c.x, s.Z-c.z) - c.r
		c.scatter += d * d / float64(len(samples))
	}
	c.scatter = math.Sqrt(c.scatter)
}

// fromAbove measures a ball joint from above: the angle of its tilt to the
// right, from asin(x/R), with R from the rig. The middle is the rig's pivot, or
// else the middle of the path's extent.
func (b *builder) fromAbove(a *Angle, part *rig.Part, bob *track.Bob, usable []track.Sample) {
	rb := b.rigBob(bob.Name)
	if rb == nil || len(rb.AtM) < 2 || math.Hypot(rb.AtM[0], rb.AtM[len(rb.AtM)-1]) == 0 {
		a.Problem = fmt.Sprintf("seen from above, the tilt of %q follows from the bob's distance from its pivot; give the bob's at_mm", part.Name)
		return
	}
	r := math.Hypot(rb.AtM[0], rb.AtM[len(rb.AtM)-1])
	lo, hi := math.Inf(1), math.Inf(-1)
	zLo, zHi := lo, hi
	for _, s := range usable {
		lo, hi = math.Min(lo, s.X), math.Max(hi, s.X)
		zLo, zHi = math.Min(zLo, s.Z), math.Max(zHi, s.Z)
	}
	p := Pivot{X: (lo + hi) / 2, Z: (zLo + zHi) / 2, UX: (hi - lo) / 20, UZ: (zHi - zLo) / 20, From: "the middle of the path, and the rig's length"}
	if len(b.rig.Scale.OriginPX) == 2 && !part.PivotFromTrack && len(part.PivotM) >= 2 {
		u := math.Hypot(uPlaceM, uOriginP*b.tr.Cal.MetresPerPixel)
		p = Pivot{X: part.PivotM[0], Z: part.PivotM[1], UX: u, UZ: u, From: "the rig's pivot and length"}
	}
	p.R, p.UR = r, math.Hypot(uPlaceM, r*b.tr.Cal.UScale)
	a.Pivot = p
	var middle, length []float64
	for _, s := range usable {
		sin := (s.X - p.X) / r
		if math.Abs(sin) > 1 {
			a.Problem = fmt.Sprintf("the bob %q lies farther from the middle than the rig's at_mm allows; check the scale and at_mm", bob.Name)
			return
		}
		cos := math.Sqrt(math.Max(1-sin*sin, 0.01))
		a.add(s.T, math.Asin(sin), math.Sqrt(s.Plane.AA)/(r*cos))
		middle = append(middle, p.UX/(r*cos))
		length = append(length, sin/cos*p.UR/r)
	}
	a.Shared = append(a.Shared, Shared{"pivot", middle}, Shared{"the bob's distance from the pivot", length})
	a.Cautions = append(a.Cautions, "A ball joint swings in space; seen from above, the angle is its tilt to the right.")
}
