package match

import (
	"fmt"
	"math"
	"slices"
	"strings"

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
				X:       finding.Axis{Label: "time", Unit: "s"}, Y: y, Lines: []finding.Line{data, model},
			}, finding.Curve{
				Key: "match-residuals", Subject: subject, Title: "What the model leaves: " + subject,
				Caption: fmt.Sprintf("Measured less model. All residuals together are %.2f times what the picture's noise lets expect.", r.res.Scatter),
				X:       finding.Axis{Label: "time", Unit: "s"}, Y: res, Lines: lines,
			})
		}
	}
	r.torqueCurve()
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

// torqueCurve compares the magnets' torque on a single hinged part, found from the
// measured accelerations alone, with the matched law.
func (r *reporter) torqueCurve() {
	if r.nv != 1 || len(r.rig.Parts) != 1 || len(r.rig.Magnets) < 2 {
		return
	}
	name := r.rig.Parts[0].Name
	at := func(quantity string) float64 {
		for i := range r.params {
			if slices.Contains(r.params[i].tied, name+"."+quantity) {
				return r.params[i].value
			}
		}
		if i, err := r.clips[0].model.Index(name + "." + quantity); err == nil {
			return r.clips[0].model.Get(i)
		}
		return 0
	}
	inertia := at("inertia")
	viscous, drag, dry := at("friction.viscous"), at("friction.drag"), at("friction.dry")
	data := finding.Line{Name: "from measured accelerations", Role: finding.Data}
	alike := finding.Line{Name: "from the model's motion, in the same way", Role: finding.Model}
	law := finding.Line{Name: "matched law itself", Role: finding.Guide}
	lo, hi := math.Inf(1), math.Inf(-1)
	var bin [61]struct{ sum, sq, n, angle, model float64 }
	type point struct{ angle, torque, model float64 }
	var all []point
	for c := range r.clips {
		k := &r.clips[c]
		if k.entry != nil && len(k.entry.Without) > 0 {
			continue
		}
		m := k.model
		r.apply(c, m, r.p)
		see := r.viewer(c, r.p)
		times, angles := k.hingeAngles(&see, k.obs)
		_, modelled := k.hingeAngles(&see, r.predicted(c, &see))
		torque := func(angles []float64, i int) (angle, torque float64, ok bool) {
			a, w, acc, ok := quartic(times[i-5:i+6], angles[i-5:i+6])
			// All but the magnets: gravity and springs come from the model without them.
			return a, inertia*acc + (viscous+drag*math.Abs(w))*w + dry*sign(w) - m.TorqueWithoutMagnets(a), ok
		}
		for i := 5; i+5 < len(times); i++ {
			a, t, ok := torque(angles, i)
			_, o, _ := torque(modelled, i)
			if !ok {
				continue
			}
			all = append(all, point{a, t, o})
			lo, hi = math.Min(lo, a), math.Max(hi, a)
		}
	}
	if len(all) < 100 || !(hi > lo) {
		return
	}
	for _, p := range all {
		b := &bin[min(int(float64(len(bin))*(p.angle-lo)/(hi-lo)), len(bin)-1)]
		b.sum += p.torque
		b.sq += p.torque * p.torque
		b.angle += p.angle
		b.model += p.model
		b.n++
	}
	for i := range bin {
		b := &bin[i]
		if b.n < 4 {
			continue
		}
		mean := b.sum / b.n
		u := math.Sqrt(math.Max(b.sq/b.n-mean*mean, 0) / (b.n - 1))
		data.X, data.Y = append(data.X, b.angle/b.n), append(data.Y, mean)
		data.Lo, data.Hi = append(data.Lo, mean-1.96*u), append(data.Hi, mean+1.96*u)
		alike.X, alike.Y = append(alike.X, b.angle/b.n), append(alike.Y, b.model/b.n)
	}
	m := r.clips[0].model
	r.apply(0, m, r.p)
	y, dy := m.Rest(), m.Rest()
	for i := range 121 {
		a := lo + (hi-lo)*float64(i)/120
		m.SetAngle(y, 0, a, 0)
		m.Derive(y, dy)
		acc := dy[1]
		if r.rig.Parts[0].Upright {
			acc = -acc
		}
		law.X, law.Y = append(law.X, a), append(law.Y, inertia*acc-m.TorqueWithoutMagnets(a))
	}
	r.res.Curves = append(r.res.Curves, finding.Curve{
		Key: "match-torque", Subject: name, Title: "The magnets' torque against the angle",
		Caption: "Points: inertia times the measured acceleration, with weight, spring and friction taken out, averaged over narrow ranges of angle, with a 95 % band. They know nothing of the magnets' law, but eleven frames go into each acceleration, which rounds off what is sharp. The model's own motion, treated in the same way, is to be compared with them: where the two part, the law does not hold. The law itself is shown beside.",
		X:       finding.Axis{Label: "angle", Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}, Y: finding.Axis{Label: "torque", Unit: "N·m", ShowUnit: "mN·m", ShowFactor: 1e3},
		Lines: []finding.Line{data, alike, law},
	})
}

// predicted are a clip's observations as the model has them, without noise.
func (r *reporter) predicted(c int, see *viewer) []observation {
	k := &r.clips[c]
	out := slices.Clone(k.obs)
	for s := range k.segments {
		g := &k.segments[s]
		for i := range g.to - g.from {
			o := &out[g.from+i]
			o.a, o.b = see.project(o.who, g.pos[i])
		}
	}
	return out
}

func sign(x float64) float64 {
	switch {
	case x > 0:
		return 1
	case x < 0:
		return -1
	}
	return 0
}

// hingeAngles are the angles of a single hinged part by observations of its first
// bob.
func (k *clipData) hingeAngles(see *viewer, obs []observation) (t, angle []float64) {
	pivot := see.shift
	p0 := k.pose(k.model, k.model.Rest(), 0)
	own := 0.0
	if k.watched[0].bob >= 0 {
		x := see.at[0]
		own = math.Atan2(x[0], -x[2])
		for i := range 3 {
			pivot[i] += p0.at[i]
		}
	}
	stands := false
	if a, _ := k.model.Angle(k.model.Rest(), 0); a == 0 && k.watched[0].bob >= 0 && p0.turn[2][2] < 0 {
		stands = true
	}
	for i := range obs {
		o := &obs[i]
		if o.who != 0 {
			continue
		}
		a := o.a - see.zero[0]
		if k.watched[0].bob >= 0 {
			x, z := o.a, o.b
			if see.camera != nil {
				x, z, _ = see.camera.BobToPlane(o.a, o.b, k.watched[0].radius, k.watched[0].depth)
			}
			a = math.Atan2(x-pivot[0], -(z-pivot[2])) - own
			if stands {
				a = math.Atan2(x-pivot[0], z-pivot[2]) + own
			}
		}
		if n := len(angle); n > 0 {
			a = angle[n-1] + math.Remainder(a-angle[n-1], 2*math.Pi)
		}
		t, angle = append(t, o.t+see.row*o.row), append(angle, a)
	}
	return t, angle
}

// quartic gives value, slope and second derivative in the middle of eleven samples,
// by a polynomial of degree four.
func quartic(t, y []float64) (v, slope, second float64, ok bool) {
	n := len(t)
	t0 := t[n/2]
	h := (t[n-1] - t[0]) / 2
	if !(h > 0) || h > 7.5*(t[n/2+1]-t0) {
		return 0, 0, 0, false // a gap
	}
	var a [5][6]float64
	for i := range t {
		u := (t[i] - t0) / h
		pw := [5]float64{1, u, u * u, u * u * u, u * u * u * u}
		for r := range pw {
			for c := range pw {
				a[r][c] += pw[r] * pw[c]
			}
			a[r][5] += pw[r] * y[i]
		}
	}
	for i := range 5 {
		for r := i + 1; r < 5; r++ {
			f := a[r][i] / a[i][i]
			for c := i; c < 6; c++ {
				a[r][c] -= f * a[i][c]
			}
		}
	}
	var x [5]float64
	for i := 4; i >= 0; i-- {
		s := a[i][5]
		for c := i + 1; c < 5; c++ {
			s -= a[i][c] * x[c]
		}
		x[i] = s / a[i][i]
	}
	return x[0], x[1] / h, 2 * x[2] / (h * h), true
}

// fitSummary is the fit for the record: what was free, held, and not separable.
func (r *reporter) fitSummary() {
	f := finding.Fit{Key: "match.fit", ChiSquare: r.j.chi2 * r.widened * r.widened, DegreesOf: r.j.dof, Converged: r.converged, Why: r.why}
	var order []int
	for i := range r.params {
		if r.params[i].asked && !r.poor[i] {
			order = append(order, i)
		}
	}
	for i := range r.params {
		if !r.params[i].asked && r.params[i].role == byModel {
			order = append(order, i)
		}
	}
	for i := range r.params {
		if !r.params[i].asked && r.params[i].role != byModel {
			order = append(order, i)
		}
	}
	for _, i := range order {
		q := &r.params[i]
		f.Free = append(f.Free, finding.Parameter{Name: q.address, Value: q.value, U: r.res.Estimates[i].U, Unit: q.unit})
	}
	for _, a := range order {
		row := make([]float64, 0, len(order))
		for _, b := range order {
			row = append(row, r.j.correlation(a, b))
		}
		f.Correlation = append(f.Correlation, row)
	}
	free := map[string]bool{}
	for i := range r.params {
		for _, a := range r.params[i].tied {
			free[a] = true
		}
	}
	for _, n := range r.rig.Numbers() {
		if n.Value.Known() && !free[n.Address] && r.modelIndex(n.Address) >= 0 {
			f.Held = append(f.Held, finding.Parameter{Name: n.Address, Value: n.Value.V, U: n.Value.U, Unit: n.Unit.SI})
		}
	}
	f.NotSeparable = r.notSeparable()
	r.res.Fits = append(r.res.Fits, f)
	r.res.Cautions = append(r.res.Cautions, r.cautions...)
	if !r.converged {
		r.res.Cautions = append(r.res.Cautions, "The matching did not settle: "+r.why+". Its numbers are not to be relied on.")
	}
}

// notSeparable tells in words what the clips leave open.
func (r *reporter) notSeparable() []string {
	var out []string
	var moments []string
	for i := range r.params {
		q := &r.params[i]
		if !r.poor[i] {
			continue
		}
		switch {
		case q.moment():
			moments = append(moments, strings.Join(q.tied, " = "))
		case r.twin(i) != "":
			out = append(out, fmt.Sprintf("%s and %s: only their sum over the speeds of the clip is determined; a second release from a smaller angle would separate them", q.address, r.twin(i)))
		default:
			out = append(out, fmt.Sprintf("%s: the clip hardly feels it; a longer clip or a larger release would", q.address))
		}
	}
	switch {
	case len(moments) > 1:
		out = append(out, strings.Join(moments, " and ")+": only products of pairs are determined; a magnet of known moment in place of one, or a tie in [fit] equal, would separate them")
	case len(moments) == 1:
		out = append(out, moments[0]+": not determined by this clip; a larger release that passes over the magnet would")
	}
	return out
}

// fittedRig is the rig with the numbers that were found. Those that the clips do
// not determine stay free.
func (r *reporter) fittedRig() {
	c := r.rig.Clone()
	c.FreeFitted()
	var addresses []string
	var values []float64
	var index []int
	for i := range r.params {
		q := &r.params[i]
		_, what := split(q.address)
		if q.role != byModel || !(q.asked && !r.poor[i] || what == "inertia" || what == "gap") {
			continue
		}
		for _, a := range q.tied {
			n, err := c.Find(a)
			if err != nil || !n.MayFit {
				continue
			}
			addresses, values, index = append(addresses, n.Address), append(values, q.value), append(index, i)
		}
	}
	cov := make([][]float64, len(index))
	for a := range index {
		cov[a] = make([]float64, len(index))
		for b := range index {
			cov[a][b] = r.j.cov[index[a]*r.j.np+index[b]]
		}
	}
	if err := c.SetFitted(addresses, values, cov); err != nil {
		r.res.Cautions = append(r.res.Cautions, "The rig with the fitted numbers could not be made: "+err.Error())
		return
	}
	r.places(c)
	c.Start = r.startOf(c)
	r.res.Fitted = c
}

// places puts what else the model needs to move as matched into the rig: weights
// and places, each within what the rig admits of it.
func (r *reporter) places(c *rig.Rig) {
	for i := range r.params {
		q := &r.params[i]
		if q.role != byModel || q.tied != nil {
			continue
		}
		if name, ok := strings.CutSuffix(q.address, ".weight moment"); ok {
			if p := c.FindPart(name); p != nil {
				p.MassKg.V *= q.value
			}
			continue
		}
		owner, axis := split(q.address)
		owner, what := split(owner)
		var at *[]float64
		if p := c.FindPart(owner); p != nil && what == "centre" {
			at = &p.CentreM
		} else if p != nil && what == "pivot" {
			at = &p.PivotM
		} else if g := c.FindMagnet(owner); g != nil && what == "at" {
			at = &g.AtM
		}
		if at == nil {
			continue
		}
		x := rig.XYZ(*at)
		x[slices.Index([]string{"x", "y", "z"}, axis)] = q.value
		if len(*at) == 3 || axis == "y" {
			*at = x[:]
		} else {
			*at = []float64{x[0], x[2]}
		}
	}
}

// startOf is the matched state at the first clip's start, as a rig's starts.
func (r *reporter) startOf(c *rig.Rig) []rig.Start {
	k := &r.clips[0]
	if len(k.segments) == 0 || len(k.model.Parts()) < len(c.Parts) {
		return c.Start
	}
	y := k.segments[0].y
	given := func(x float64) rig.Value { return rig.Value{V: x, Set: true} }
	var out []rig.Start
	for i, name := range k.model.Parts() {
		s := rig.Start{Part: name}
		if k.model.OneAxis(i) {
			a, w := k.model.Angle(y, i)
			s.AngleRad, s.RateRadS = given(a), given(w)
		} else {
			a, az, w, azw, spin := k.model.Ball(y, i)
			s.AngleRad, s.AzimuthRad, s.RateRadS, s.AzimuthRateRadS, s.SpinRadS = given(a), given(az), given(w), given(azw), given(spin)
		}
		out = append(out, s)
	}
	return out
}
