package match

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

// curves draws measured against model, and the residuals.
func (r *reporter) curves() {
	for c := range r.clips {
		k := &r.clips[c]
		see := r.viewer(c, r.p)
		step := k.step()
		for who := range k.watched {
			o := &k.watched[who]
			data := finding.Line{Name: "measured", Role: finding.Data}
			model := finding.Line{Name: "model", Role: finding.Model}
			across := finding.Line{Name: "sideways", Role: finding.Residual}
			up := finding.Line{Name: "upwards", Role: finding.Residual}
			last := math.NaN()
			put := func(t float64, v ...float64) {
				for i, l := range []*finding.Line{&data, &model, &across, &up} {
					l.X, l.Y = append(l.X, t), append(l.Y, v[i])
				}
			}
			for s := range k.segments {
				g := &k.segments[s]
				for i := range g.to - g.from {
					x := &k.obs[g.from+i]
					if x.who != who {
						continue
					}
					if x.t-last > 2.5*step {
						n := math.NaN()
						put((x.t+last)/2, n, n, n, n)
					}
					last = x.t
					a, b := see.project(who, g.pos[i])
					measured, at := x.a, a
					if o.bob >= 0 && see.camera != nil {
						measured, _, _ = see.camera.BobToPlane(x.a, x.b, o.radius, o.depth)
						at, _, _ = see.camera.BobToPlane(a, b, o.radius, o.depth)
					}
					put(x.t, measured, at, x.a-a, b-x.b)
				}
			}
			out := k.leftLine(who, &see)
			subject := k.its(o.name)
			y := finding.Axis{Label: "sideways place", Unit: "m", ShowUnit: "mm", ShowFactor: 1e3}
			res := finding.Axis{Label: "measured − model", Unit: "px"}
			if see.camera == nil {
				res = finding.Axis{Label: "measured − model", Unit: "m", ShowUnit: "mm", ShowFactor: 1e3}
				for i := range up.Y {
					up.Y[i] = -up.Y[i]
				}
			}
			lines := []finding.Line{across, up}
			if o.bob < 0 {
				y = finding.Axis{Label: "angle", Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}
				res = finding.Axis{Label: "measured − model", Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}
				across.Name = "angle"
				lines = []finding.Line{across}
			}
			r.res.Curves = append(r.res.Curves, finding.Curve{
				Key: "match-fit", Subject: subject, Title: "Measured and matched: " + subject,
				Caption: "Where it was, and where the matched model puts it, over the whole clip.",
				X:       finding.Axis{Label: "time", Unit: "s"}, Y: y, Lines: append([]finding.Line{data, model}, out...),
			}, finding.Curve{
				Key: "match-residuals", Subject: subject, Title: "What the model leaves: " + subject,
				Caption: fmt.Sprintf("Measured less model. All residuals together are %.2f times what the picture's noise lets expect.", r.res.Scatter),
				X:       finding.Axis{Label: "time", Unit: "s"}, Y: res, Lines: lines,
			})
		}
	}
	r.torqueCurve()
}

// leftLine is where a watched thing was while the clip was left out of the matching; none
// where all took part.
func (k *clipData) leftLine(who int, see *viewer) []finding.Line {
	l := finding.Line{Name: "left out", Role: finding.Data}
	for i := range k.left {
		for _, x := range k.left[i].gone {
			if x.who != who {
				continue
			}
			at := x.a
			if o := &k.watched[who]; o.bob >= 0 && see.camera != nil {
				at, _, _ = see.camera.BobToPlane(x.a, x.b, o.radius, o.depth)
			}
			l.X, l.Y = append(l.X, x.t), append(l.Y, at)
		}
	}
	if len(l.X) == 0 {
		return nil
	}
	return []finding.Line{l}
}

// forceCurve draws the force of a pair on one axis against distance.
func (r *reporter) forceCurve(a, b *rig.Magnet, product, u float64) {
	lo, hi := r.distances(a.Name, b.Name)
	if !(hi > lo) {
		return
	}
	ma, _, _, _ := r.magnetTerm(a.Name)
	mb, _, _, _ := r.magnetTerm(b.Name)
	force := func(d float64) float64 { return 3 * magnet.Mu0 * product / (2 * math.Pi * math.Pow(d, 4)) }
	how := "dipoles"
	if a.Cylinder != nil && b.Cylinder != nil {
		ca, cb := cylinderOf(a), cylinderOf(b)
		ca.Remanence *= ma / ca.Moment()
		cb.Remanence *= mb / cb.Moment()
		how = "cylinders"
		force = func(d float64) float64 { return magnet.CoaxialForce(ca, cb, d-(ca.Height+cb.Height)/2) }
	}
	l := finding.Line{Name: a.Name + " and " + b.Name, Role: finding.Model}
	hi = math.Min(hi, 3*lo)
	for i := range 81 {
		d := lo + (hi-lo)*float64(i)/80
		x := force(d)
		e := 1.96 * u / math.Abs(product) * math.Abs(x)
		l.X, l.Y, l.Lo, l.Hi = append(l.X, d), append(l.Y, x), append(l.Lo, x-e), append(l.Hi, x+e)
	}
	r.res.Curves = append(r.res.Curves, finding.Curve{
		Key: "match-force", Subject: a.Name + " and " + b.Name, Title: "Force of the pair against distance",
		Caption: "The force between the two magnets on one axis, as " + how + " of the matched strength, over the distances that the clip holds, centre to centre, with its 95 % band.",
		X:       finding.Axis{Label: "distance of centres", Unit: "m", ShowUnit: "mm", ShowFactor: 1e3}, Y: finding.Axis{Label: "force", Unit: "N"},
		Lines: []finding.Line{l},
	})
}

// distances are the least and greatest distance of two magnets at the nodes and
// observations of the clips.
func (r *reporter) distances(a, b string) (lo, hi float64) {
	lo = math.Inf(1)
	for c := range r.clips {
		m := r.clips[c].model
		r.apply(c, m, r.p)
		times, states := r.fine(c)
		for i := range times {
			p, okA := m.MagnetPlace(states[i], a)
			q, okB := m.MagnetPlace(states[i], b)
			if !okA || !okB {
				continue
			}
			d := math.Sqrt((p[0]-q[0])*(p[0]-q[0]) + (p[1]-q[1])*(p[1]-q[1]) + (p[2]-q[2])*(p[2]-q[2]))
			lo, hi = math.Min(lo, d), math.Max(hi, d)
		}
	}
	return lo, hi
}
