package match

import (
	"math"
	"slices"

	"lodeswing/analyze/finding"
)

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
