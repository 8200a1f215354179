package decay

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// GravityInfo is what the gravity check needs to know.
type GravityInfo struct {
	// Skip, when set, says why the check is not made (plain words).
	Skip string
	// Ratio is the length of the equivalent simple pendulum, I/(m·c), over the
	// bob's distance from the pivot: 1 for a point. From says where it is from.
	Ratio, URatio float64
	From          string
	// RigM is the bob's distance from its pivot by the rig, m; 0: not given.
	RigM, URigM float64
	// Local is the acceleration of free fall, m/s²; 0: 9.81 ± 0.02.
	Local, ULocal float64
}

// OptionsFor collects from a rig what the analysis of one part should know. clip
// is the entry of the rig's [[clip]] list for this clip, or nil: magnets and
// parts that it takes out do not act, and its battery tells whether coils do.
func OptionsFor(r *rig.Rig, part, bob string, clip *rig.Clip) Options {
	o := Options{FromS: math.NaN(), ToS: math.NaN()}
	if r == nil {
		return o
	}
	if r.Decay.FromS.Set || r.Decay.ToS.Set {
		o.Told = true
		o.FromS, o.ToS = r.Decay.FromS.Or(math.Inf(-1)), r.Decay.ToS.Or(math.Inf(1))
	}
	acting := without(r, clip)
	pulled := series.Pulled(acting, part)
	var p *rig.Part
	for i := range acting.Parts {
		if acting.Parts[i].Name == part {
			p = &acting.Parts[i]
		}
	}
	ownMagnet := false
	for _, m := range acting.Magnets {
		ownMagnet = ownMagnet || m.Part == part
	}
	for _, m := range acting.Magnets {
		if !ownMagnet || m.Part == part {
			continue
		}
		o.Restoring = Magnets
		if m.Part != "base" && m.Part != "" {
			o.NoDecay = fmt.Sprintf("magnets on %s and %s pass energy between them, so neither dies by its own friction alone; see the modes", part, m.Part)
		}
	}
	if len(acting.Coils) > 0 && ownMagnet && !o.Told {
		o.NoDecay = "a coil kicks this part; give a clip with battery = false, or the stretch with the coil off as [decay] from_s and to_s"
	}
	if p != nil {
		springy := p.Upright || p.Spring.Rate.Fit || p.Spring.Rate.V != 0 || p.Spring.Cubic.V != 0
		if springy && o.Restoring == Gravity {
			o.Restoring = Spring
		}
		if p.Joint == "pin" {
			o.Restoring = Magnets
			if pulled == "" {
				pulled = "a part on a pin has no weight moment of its own"
			}
		}
		if p.On != "" && p.On != "base" && o.NoDecay == "" {
			o.NoDecay = fmt.Sprintf("%s sits on %s, which moves and trades energy with it", part, p.On)
		}
	}
	if o.Restoring == Magnets {
		o.pulls = pullsOf(acting, p)
	}
	o.Gravity = gravityInfo(acting, p, bob, pulled)
	return o
}

// without is the rig with what a clip takes out taken out.
func without(r *rig.Rig, clip *rig.Clip) *rig.Rig {
	if clip == nil {
		return r
	}
	c := *r
	out := func(name string) bool {
		for _, w := range clip.Without {
			if w == name {
				return true
			}
		}
		return false
	}
	c.Magnets, c.Coils = nil, nil
	for _, m := range r.Magnets {
		if !out(m.Name) {
			c.Magnets = append(c.Magnets, m)
		}
	}
	for _, k := range r.Coils {
		if clip.Battery && !out(k.Name) {
			c.Coils = append(c.Coils, k)
		}
	}
	return &c
}

func gravityInfo(r *rig.Rig, p *rig.Part, bob, pulled string) GravityInfo {
	g := GravityInfo{Ratio: 1, URatio: 0.02, From: "the bob taken as a point (2 % allowed for the rest of the part)"}
	if r.Gravity.Set {
		g.Local, g.ULocal = r.Gravity.V, r.Gravity.U
	}
	if pulled != "" {
		g.Skip = pulled
		return g
	}
	var rb *rig.Bob
	for i := range r.Bobs {
		if r.Bobs[i].Name == bob {
			rb = &r.Bobs[i]
		}
	}
	if rb != nil && len(rb.AtM) >= 2 {
		g.RigM = math.Hypot(rb.AtM[0], rb.AtM[len(rb.AtM)-1])
		g.URigM = 0.5e-3
	}
	if p == nil || g.RigM == 0 {
		return g
	}
	if p.Inertia.Known() && p.MassKg.Known() && len(p.CentreM) >= 2 {
		c := math.Hypot(p.CentreM[0], p.CentreM[len(p.CentreM)-1])
		if c > 0 && p.MassKg.V > 0 && p.Inertia.V > 0 {
			g.Ratio = p.Inertia.V / (p.MassKg.V * c) / g.RigM
			g.URatio = g.Ratio * math.Sqrt(sq(p.Inertia.U/p.Inertia.V)+sq(p.MassKg.U/p.MassKg.V)+sq(0.5e-3/c)+sq(g.URigM/g.RigM))
			g.From = "the rig's inertia, mass and centre"
			return g
		}
	}
	if rb.DiameterM.Known() && g.RigM > 0 {
		// A ball about a pivot: I = mR²(1 + ⅖(r/R)²).
		g.Ratio = 1 + 0.4*sq(rb.DiameterM.V/2/g.RigM)
		if rb.DiameterM.V > 0.6*g.RigM {
			g.Skip = "the bob is too large to be taken as a point and the rig gives no inertia"
		}
	}
	return g
}

func sq(x float64) float64 { return x * x }

// gravityCheck compares the g that length and period imply with the local one.
func (an *analysis) gravityCheck() finding.Finding {
	const key, name = "decay.gravity", "Gravity that the length and the period imply"
	info, pv := an.opt.Gravity, an.angle.Pivot
	subject := an.angle.Part
	skip := info.Skip
	switch {
	case skip != "":
		skip = "Not checked, because " + skip + "."
	case an.opt.Restoring != Gravity:
		skip = "Not checked, because something besides gravity pulls the part back."
	case !(pv.R > 0):
		skip = "Not checked, because the series comes without a length."
	case pv.Moves:
		skip = "Not checked, because the pivot moves."
	}
	if skip != "" {
		return finding.Finding{Key: key, Subject: subject, Name: name, Kind: finding.Statement, Unit: "m/s²", Text: skip, Method: "period and length"}
	}
	if info.Ratio == 0 {
		info.Ratio, info.URatio, info.From = 1, 0.02, "the bob taken as a point (2 % allowed for the rest of the part)"
	}
	local, uLocal := info.Local, info.ULocal
	if local == 0 {
		local, uLocal = 9.81, 0.02 // sea level spans 9.780 to 9.832 m/s² (WGS 84)
	}
	length := pv.R * info.Ratio
	a := an.average(func(_ model, p []float64) float64 { return p[atK] * length })
	a = a.with("length from the track, with its scale", a.value*pv.UR/pv.R)
	a = a.with("equivalent length", a.value*info.URatio/info.Ratio)
	a = a.with("the camera's clock", 2*an.angle.UClock*a.value)
	f := a.finding(key, subject, name, "m/s²", fmt.Sprintf("ω₀² × equivalent length; length %.1f mm from the track, %s", 1e3*pv.R, info.From))
	if math.Abs(a.value-local) > 3*math.Hypot(a.u, uLocal) && math.Abs(a.value/local-1) > 0.01 {
		f.Cautions = append(f.Cautions, gravityCause(a.value/local, pv, info))
	}
	return f
}

// gravityCause says which of scale, slow motion or inertia is the likely cause
// of an implied g that is ratio times the true one.
func gravityCause(ratio float64, pv series.Pivot, info GravityInfo) string {
	lead := fmt.Sprintf("The implied gravity is %.3g times the true one. ", ratio)
	// A scale that is wrong shows in the length, when the rig knows it.
	if info.RigM > 0 {
		off := pv.R / info.RigM
		if math.Abs(off/ratio-1) < 0.25*math.Abs(ratio-1)+0.01 {
			return lead + fmt.Sprintf("The likely cause is the scale: the track puts the bob %.1f mm from its pivot, the rig %.1f mm, and that alone explains it. Check [scale].", 1e3*pv.R, 1e3*info.RigM)
		}
	}
	// A clip that plays slower by n makes g smaller by n², for the rates that phones use.
	for _, n := range []float64{2, 4, 8, 16, 32} {
		if math.Abs(ratio*n*n-1) < 0.15 {
			return lead + fmt.Sprintf("The likely cause is slow motion: the clip plays %g times slower than it was recorded. Set rate_factor = %g in [camera].", n, n)
		}
		if math.Abs(ratio/(n*n)-1) < 0.15 {
			return lead + fmt.Sprintf("The likely cause is a rate_factor that is %g times too large, or a clip that plays too fast.", n)
		}
	}
	scaleFree := info.RigM > 0 && math.Abs(pv.R/info.RigM-1) < 0.02
	if ratio > 0.6 && ratio < 1.6 {
		if scaleFree {
			return lead + "The length agrees with the rig, so the likely cause is inertia: the part's mass does not sit where the bob does. Give mass_g, centre_mm and inertia_g_mm2."
		}
		return lead + "The likely cause is inertia (the part's mass does not sit where the bob does) or the scale; a length in the rig (the bob's at_mm) would tell them apart."
	}
	if scaleFree {
		return lead + "The length agrees with the rig, so the likely cause is time: check rate_factor, and whether an application changed the clip's speed."
	}
	return lead + "The likely cause is the scale: check length_mm and ends_px, and that the length lies in the plane of motion."
}
