package rig

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// Base is the name of what does not move.
const Base = "base"

// checker looks for what the schema cannot: names, references, contradictions.
type checker struct {
	*reporter
	lines lineMap
	r     *Rig
}

func (c *checker) line(key ...any) int {
	words := make([]string, len(key))
	for i, k := range key {
		words[i] = fmt.Sprint(k)
	}
	return c.lines.at(strings.Join(words, "/"))
}

func (c *checker) all() {
	c.camera()
	c.scale()
	c.bobs()
	c.parts()
	c.magnets()
	c.coils()
	c.clips()
	c.claims()
	c.starts()
	c.fit()
	c.fitted()
	if d := c.r.Decay; d.FromS.Set && d.ToS.Set && d.FromS.V >= d.ToS.V {
		c.say(c.line("decay", "to_s"), "key \"to_s\" in [decay] must be later than \"from_s\"")
	}
	for i, m := range c.r.Marks {
		if m.On != "stand" && m.On != Base {
			c.say(c.line("mark", i, "on"), "key \"on\" in [[mark]] %q must be \"stand\" or \"base\", not %q", m.Name, m.On)
		}
		c.point(m.PX, "px", fmt.Sprintf("[[mark]] %q", m.Name), c.line("mark", i, "px"), true)
	}
	c.place(c.r.Film.CentreM, "centre_mm", "[film]", c.line("film", "centre_mm"))
}

func (c *checker) camera() {
	cam := c.r.Camera
	if n := len(cam.PlumbPX); n == 1 || (n > 1 && spread(cam.PlumbPX) < 1) {
		c.say(c.line("camera", "plumb_px"), "key \"plumb_px\" in [camera] needs two or more points that lie apart on one plumb line")
	}
	if len(cam.Lens) > 2 {
		c.say(c.line("camera", "lens"), "key \"lens\" in [camera] takes the radial distortion k1 or [k1, k2], not %d numbers", len(cam.Lens))
	}
	switch cam.Vertical {
	case "", "rest", "picture":
	default:
		c.say(c.line("camera", "vertical"), "key \"vertical\" in [camera] must be \"rest\" or \"picture\", or be left out where a plumb line or target gives it, not %q", cam.Vertical)
	}
	if cam.Vertical == "rest" && len(cam.PlumbPX) > 0 {
		c.say(c.line("camera", "vertical"), "[camera] gives both a plumb line and vertical = \"rest\": keep one")
	}
	if t := cam.TiltRad; t.Set && math.Abs(t.V) > math.Pi/2+1e-9 {
		c.say(c.line("camera", "tilt_deg"), "key \"tilt_deg\" in [camera] must lie between -90 and 90")
	}
}

// farKnown tells whether the camera's distance follows from the rig.
func (c *checker) farKnown() bool {
	return c.r.Camera.DistanceM.Set || c.r.Camera.FocalPX.Set || c.r.Scale.Target != ""
}

func spread(p [][2]float64) (most float64) {
	for _, q := range p[1:] {
		most = math.Max(most, math.Hypot(q[0]-p[0][0], q[1]-p[0][1]))
	}
	return most
}

func (c *checker) scale() {
	s := c.r.Scale
	if n := len(s.EndsPX); n != 0 && n != 2 {
		c.say(c.line("scale", "ends_px"), "key \"ends_px\" in [scale] needs the two ends of the length, [[u, v], [u, v]], not %d", n)
	} else if n == 2 && spread(s.EndsPX) < 2 {
		c.say(c.line("scale", "ends_px"), "the two ends in \"ends_px\" of [scale] are less than 2 px apart")
	}
	if s.MarkLook != "" && !isLook(s.MarkLook, "dark", "light") {
		c.say(c.line("scale", "mark_look"), "key \"mark_look\" in [scale] must be \"dark\", \"light\" or a colour like \"#b8261f\", not %q", s.MarkLook)
	}
	if s.Target != "" && (len(s.EndsPX) > 0 || s.MarkLook != "") {
		c.say(c.line("scale", "target"), "[scale] names a printed target and a length as well: keep one")
	} else if len(s.EndsPX) > 0 && s.MarkLook != "" {
		c.say(c.line("scale", "mark_look"), "[scale] gives both ends_px and mark_look: keep one")
	}
	if s.DepthM.Set && s.DepthM.V != 0 && !c.farKnown() {
		c.say(c.line("scale", "depth_mm"), "key \"depth_mm\" in [scale] can be corrected only with the camera's distance: add distance_mm to [camera], lens to plane of motion")
	} else if c.r.Camera.DistanceM.Set && s.DepthM.V >= c.r.Camera.DistanceM.V {
		c.say(c.line("scale", "depth_mm"), "key \"depth_mm\" in [scale] puts the length behind the camera: it must be less than distance_mm")
	}
	c.point(s.OriginPX, "origin_px", "[scale]", c.line("scale", "origin_px"), false)
}

var colourForm = regexp.MustCompile(`^#[0-9a-fA-F]{6}$`)

func isLook(s string, words ...string) bool {
	for _, w := range words {
		if s == w {
			return true
		}
	}
	return colourForm.MatchString(s)
}

func (c *checker) bobs() {
	names := map[string]bool{}
	for i, b := range c.r.Bobs {
		where := fmt.Sprintf("[[bob]] %q", b.Name)
		c.name(b.Name, names, "bob", i)
		switch {
		case b.Colour == "" && b.Look == "":
			c.say(c.line("bob", i), "%s says neither colour = \"#rrggbb\" nor look = \"dark\", \"light\" or \"moving\"", where)
		case b.Colour != "" && b.Look != "":
			c.say(c.line("bob", i, "look"), "%s gives both colour and look: keep one", where)
		case b.Colour != "" && !colourForm.MatchString(b.Colour):
			c.say(c.line("bob", i, "colour"), "key \"colour\" in %s must be like \"#b8261f\" (red, green, blue in hexadecimal), not %q", where, b.Colour)
		case b.Look != "" && (!isLook(b.Look, "dark", "light", "moving") || strings.HasPrefix(b.Look, "#")):
			c.say(c.line("bob", i, "look"), "key \"look\" in %s must be \"dark\", \"light\" or \"moving\", not %q", where, b.Look)
		}
		c.place(b.AtM, "at_mm", where, c.line("bob", i, "at_mm"))
		c.point(b.StartPX, "start_px", where, c.line("bob", i, "start_px"), false)
		if b.Part == "" && b.AtM != nil {
			c.say(c.line("bob", i, "at_mm"), "key \"at_mm\" in %s needs \"part\", the part that it sits on", where)
		}
		c.part(b.Part, where, c.line("bob", i, "part"), true)
		if b.DepthM.Set && b.DepthM.V != 0 && !c.farKnown() {
			c.say(c.line("bob", i, "depth_mm"), "key \"depth_mm\" in %s can be corrected only with the camera's distance: add distance_mm to [camera]", where)
		}
	}
}

func (c *checker) parts() {
	names := map[string]bool{}
	for i, p := range c.r.Parts {
		where := fmt.Sprintf("[[part]] %q", p.Name)
		c.name(p.Name, names, "part", i)
		if p.Name == Base {
			c.say(c.line("part", i, "name"), "a part cannot be called \"base\": that is what does not move")
		}
		switch p.Joint {
		case "hinge", "pin", "ball":
		case "":
			c.say(c.line("part", i), "%s has no \"joint\": say \"hinge\" (swings in the picture), \"ball\" (swings freely) or \"pin\" (turns about y)", where)
		default:
			c.say(c.line("part", i, "joint"), "key \"joint\" in %s must be \"hinge\", \"ball\" or \"pin\", not %q", where, p.Joint)
		}
		if p.Joint == "ball" {
			s := p.Spring
			for _, v := range []Value{s.Rate, s.Cubic, s.RestRad} {
				if v.Fit || v.V != 0 {
					c.say(c.line("part", i, "spring"), "%s has a spring on a ball joint, where a torsion spring has no meaning: take \"spring\" out or make the joint a hinge", where)
					break
				}
			}
			if p.Upright {
				c.say(c.line("part", i, "upright"), "%s stands upright on a ball joint and would fall over: make the joint a hinge with a spring", where)
			}
		} else if p.SpinInertia.Set || p.SpinInertia.Fit {
			c.say(c.line("part", i, "spin_inertia_g_mm2"), "key \"spin_inertia_g_mm2\" in %s has no meaning on a %s: only a ball joint lets a part spin about its own axis", where, p.Joint)
		}
		if p.Flat && p.Joint != "pin" {
			c.say(c.line("part", i, "flat"), "key \"flat\" in %s has a meaning only with joint = \"pin\"", where)
		}
		c.place(p.PivotM, "pivot_mm", where, c.line("part", i, "pivot_mm"))
		c.place(p.CentreM, "centre_mm", where, c.line("part", i, "centre_mm"))
		if p.PivotFromTrack {
			c.pivotFromTrack(i, p, where)
		}
		if p.On == p.Name {
			c.say(c.line("part", i, "on"), "%s is on itself", where)
		} else {
			c.part(p.On, where, c.line("part", i, "on"), true)
		}
		if p.MassKg.Set && p.CentreM != nil && p.Inertia.Known() && p.Joint != "pin" {
			at := XYZ(p.CentreM)
			least := p.MassKg.V * (at[0]*at[0] + at[2]*at[2])
			if p.Joint == "ball" {
				least = p.MassKg.V * (at[0]*at[0] + at[1]*at[1] + at[2]*at[2])
			}
			if p.Inertia.V < least*(1-1e-6)-4*p.Inertia.U {
				c.say(c.line("part", i, "inertia_g_mm2"), "key \"inertia_g_mm2\" in %s is %s, less than mass × distance² = %s: it must be about the pivot, not about the centre of mass",
					where, short(p.Inertia.V*1e9), short(least*1e9))
			}
		}
	}
	c.cycles()
}

func short(x float64) string { return strconv.FormatFloat(x, 'g', 4, 64) }

func (c *checker) pivotFromTrack(i int, p Part, where string) {
	if p.On != "" && p.On != Base {
		c.say(c.line("part", i, "pivot_mm"), "key \"pivot_mm\" in %s: only a pivot on the base can come from the track; this one rides on %q", where, p.On)
		return
	}
	for _, b := range c.r.Bobs {
		if b.Part == p.Name {
			return
		}
	}
	c.say(c.line("part", i, "pivot_mm"), "key \"pivot_mm\" in %s: no [[bob]] has part = %q, so no track can show where its pivot is", where, p.Name)
}

// cycles looks for parts that carry each other in a ring.
func (c *checker) cycles() {
	for i, p := range c.r.Parts {
		at := p.On
		for steps := 0; at != "" && at != Base && at != p.Name; steps++ {
			next := c.r.FindPart(at)
			if next == nil || steps > len(c.r.Parts) {
				at = ""
				break
			}
			at = next.On
		}
		if at == p.Name && p.On != p.Name && p.Name != "" {
			c.say(c.line("part", i, "on"), "[[part]] %q and %q carry each other in a ring: one of them must be on the base", p.Name, p.On)
			return
		}
	}
}

func (c *checker) magnets() {
	names := map[string]bool{}
	for i, m := range c.r.Magnets {
		where := fmt.Sprintf("[[magnet]] %q", m.Name)
		c.name(m.Name, names, "magnet", i)
		if m.Part == "" {
			c.say(c.line("magnet", i), "%s does not say on which \"part\" it is; write part = \"base\" for one that does not move", where)
		}
		c.part(m.Part, where, c.line("magnet", i, "part"), true)
		if m.AtM == nil {
			c.say(c.line("magnet", i), "%s has no place: add at_mm = [x, z]", where)
		}
		c.place(m.AtM, "at_mm", where, c.line("magnet", i, "at_mm"))
		c.axis(m.Axis, where, c.line("magnet", i, "axis"))
		if m.Axis == nil {
			c.say(c.line("magnet", i), "%s has no \"axis\": say which way its north points, [x, z]", where)
		}
		hasMoment := m.Moment.Set || m.Moment.Fit
		switch cy := m.Cylinder; {
		case cy == nil && !hasMoment:
			c.say(c.line("magnet", i), "%s has neither moment_A_m2 nor cylinder: give one; moment_A_m2 = \"fit\" leaves it to the clip", where)
		case cy != nil:
			if !cy.DiameterM.Set || !cy.HeightM.Set {
				c.say(c.line("magnet", i, "cylinder"), "the cylinder of %s needs diameter_mm and height_mm", where)
			}
			hasB := cy.RemanenceT.Set || cy.RemanenceT.Fit
			if hasB && hasMoment {
				c.say(c.line("magnet", i, "cylinder"), "%s gives both moment_A_m2 and the cylinder's remanence_T, and the one follows from the other: keep one", where)
			} else if !hasB && !hasMoment {
				c.say(c.line("magnet", i, "cylinder"), "the cylinder of %s needs remanence_T, a number or \"fit\"", where)
			}
			if cy.Recoil.Set && cy.Recoil.V < 1 {
				c.say(c.line("magnet", i, "cylinder", "recoil"), "key \"recoil\" of %s is %g, but no magnet has a recoil permeability below 1", where, cy.Recoil.V)
			}
		}
		if (m.GapM.Set || m.GapM.Fit) && m.Part != Base {
			key := "gap_mm"
			if m.GapFit {
				key = "at_fit"
			}
			c.say(c.line("magnet", i, key), "key %q in %s has a meaning only for a magnet on the base", key, where)
		}
		for j, o := range c.r.Magnets[:i] {
			if m.Part == o.Part && m.AtM != nil && o.AtM != nil && XYZ(m.AtM) == XYZ(o.AtM) {
				c.say(c.line("magnet", i, "at_mm"), "%s is in the same place as %q (line %d): two magnets cannot be", where, o.Name, c.line("magnet", j, "at_mm"))
			}
		}
	}
}

func (c *checker) coils() {
	names := map[string]bool{}
	for i, k := range c.r.Coils {
		where := "[[coil]]"
		if k.Name != "" {
			where += fmt.Sprintf(" %q", k.Name)
		}
		if len(c.r.Coils) > 1 || k.Name != "" {
			c.name(k.Name, names, "coil", i)
		}
		c.place(k.AtM, "at_mm", where, c.line("coil", i, "at_mm"))
		c.axis(k.Axis, where, c.line("coil", i, "axis"))
		c.part(k.Part, where, c.line("coil", i, "part"), false)
		if k.Cell != "" && !slices.Contains(Cells, k.Cell) {
			c.say(c.line("coil", i, "cell"), "key \"cell\" of %s is %q; the usual cells are %q, and of any other capacity_mAh says how much it holds", where, k.Cell, Cells)
		}
		if !k.KickJ.Set && !k.KickJ.Fit && !(k.Turns.Set && k.RadiusM.Set && k.SupplyV.Set && k.Ohm.Set) {
			c.say(c.line("coil", i), "%s says nothing of its kick: give kick_mJ (a number or \"fit\"), or turns, radius_mm, resistance_ohm and supply_V", where)
		}
	}
}
