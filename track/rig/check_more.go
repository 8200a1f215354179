package rig

import (
	"fmt"
	"math"
	"strings"
)

func (c *checker) clips() {
	files := map[string]bool{}
	for i, k := range c.r.Clips {
		where := fmt.Sprintf("[[clip]] %q", k.File)
		if k.File == "" {
			c.say(c.line("clip", i), "[[clip]] does not name its \"file\"")
		} else if files[k.File] {
			c.say(c.line("clip", i, "file"), "the clip %q is listed twice", k.File)
		}
		files[k.File] = true
		var known []string
		for _, m := range c.r.Magnets {
			known = append(known, m.Name)
		}
		magnets := len(known)
		for _, p := range c.r.Parts {
			known = append(known, p.Name)
		}
		for _, w := range k.Without {
			c.known(w, known, "magnet or part", where, c.line("clip", i, "without"))
		}
		for _, name := range sortedNames(k.Moved) {
			line := c.line("clip", i, "moved_mm", name)
			c.known(name, known[:magnets], "magnet", where, line)
			c.place(k.Moved[name], name, "moved_mm of "+where, line)
		}
	}
}

func sortedNames(m map[string][]float64) []string {
	a := map[string]any{}
	for k := range m {
		a[k] = nil
	}
	return sortedKeys(a)
}

func (c *checker) claims() {
	for i, k := range c.r.Claims {
		n := 0
		for _, v := range []Value{k.RunsForS, k.HandsOverWithinS, k.AmplitudeAtLeastRad, k.PeriodS} {
			if v.Set {
				n++
			}
		}
		if k.NeverSettles {
			n++
		}
		if n != 1 {
			c.say(c.line("claim", i), "each [[claim]] states one thing, not %d: runs_for_min, hands_over_within_s, never_settles, amplitude_at_least_deg or period_s", n)
		}
	}
}

func (c *checker) starts() {
	seen := map[string]bool{}
	for i, s := range c.r.Start {
		where := "[[start]]"
		if s.Part == "" {
			c.say(c.line("start", i), "[[start]] does not say which \"part\" it starts")
			continue
		}
		c.part(s.Part, where, c.line("start", i, "part"), false)
		if seen[s.Part] {
			c.say(c.line("start", i, "part"), "%q has two [[start]] tables", s.Part)
		}
		seen[s.Part] = true
		if p := c.r.FindPart(s.Part); p != nil && p.Joint != "ball" && (s.AzimuthRad.Set || s.AzimuthRateRadS.Set || s.SpinRadS.Set) {
			c.say(c.line("start", i), "%q is on a %s: azimuth and spin are for a ball joint", s.Part, p.Joint)
		}
	}
}

// fit checks ties and bounds and turns the bounds into SI.
func (c *checker) fit() {
	f := &c.r.Fit
	line := c.line("fit", "equal")
	for _, tie := range f.Equal {
		if len(tie) < 2 {
			c.say(line, "key \"equal\" in [fit] ties two or more numbers; a list of %d ties nothing", len(tie))
		}
		unit := ""
		for i, a := range tie {
			n, err := c.r.Find(a)
			switch {
			case err != nil:
				c.say(line, "key \"equal\" in [fit]: %v", err)
			case !n.MayFit:
				c.say(line, "key \"equal\" in [fit]: %q cannot be fitted, so it cannot be tied", a)
			case i > 0 && unit != "" && n.Unit.SI != unit:
				c.say(line, "key \"equal\" in [fit] ties %q to %q, which is another kind of quantity", a, tie[0])
			default:
				unit = n.Unit.SI
			}
		}
	}
	for a, b := range f.Bounds {
		line := c.line("fit", "bounds", a)
		n, err := c.r.Find(a)
		switch {
		case err != nil:
			c.say(line, "key \"bounds\" in [fit]: %v", err)
		case !n.MayFit:
			c.say(line, "key \"bounds\" in [fit]: %q cannot be fitted", a)
		case b[0] >= b[1]:
			c.say(line, "the bounds of %q in [fit] must be [least, greatest]", a)
		default:
			f.Bounds[a] = [2]float64{n.Unit.ToSI(b[0]), n.Unit.ToSI(b[1])}
		}
	}
}

// fitted checks the covariance block and turns it into SI.
func (c *checker) fitted() {
	f := c.r.Fitted
	line := c.line("fitted")
	n := len(f.Of)
	if len(f.Covariance) != n {
		c.say(c.line("fitted", "covariance"), "[fitted] names %d numbers but its covariance has %d rows", n, len(f.Covariance))
		return
	}
	units := make([]Unit, n)
	for i, a := range f.Of {
		num, err := c.r.Find(a)
		if err != nil {
			c.say(line, "key \"of\" in [fitted]: %v", err)
			return
		}
		if !num.MayFit || !num.Value.Set {
			c.say(line, "key \"of\" in [fitted]: %q is not a fitted number of this rig", a)
			return
		}
		units[i] = num.Unit
		if len(f.Covariance[i]) != n {
			c.say(c.line("fitted", "covariance"), "row %d of the covariance in [fitted] has %d numbers, not %d", i+1, len(f.Covariance[i]), n)
			return
		}
	}
	for i := range n {
		if f.Covariance[i][i] < 0 {
			c.say(c.line("fitted", "covariance"), "the covariance in [fitted] has a negative variance for %q", f.Of[i])
		}
		for j := range i {
			a, b := f.Covariance[i][j], f.Covariance[j][i]
			if math.Abs(a-b) > 1e-6*(math.Abs(a)+math.Abs(b)) {
				c.say(c.line("fitted", "covariance"), "the covariance in [fitted] is not symmetric between %q and %q", f.Of[i], f.Of[j])
				return
			}
		}
	}
	for i := range n {
		for j := range n {
			f.Covariance[i][j] = units[i].ToSI(units[j].ToSI(f.Covariance[i][j]))
		}
	}
}

// name checks that a name is given, usable in an address and not taken.
func (c *checker) name(name string, taken map[string]bool, table string, i int) {
	line := c.line(table, i, "name")
	switch {
	case strings.TrimSpace(name) == "":
		c.say(line, "[[%s]] has no \"name\"", table)
	case strings.ContainsAny(name, "\n\r\t=:,\"/\\") || len(name) > 60:
		c.say(line, "the name %q of a [[%s]] has a character that would confuse addresses and files (= : , / \\ \" or a line break), or more than 60 letters", name, table)
	case taken[name]:
		c.say(line, "the name %q is given to two [[%s]] tables", name, table)
	}
	taken[name] = true
}

// part checks a reference to a part; base tells whether "base" or nothing will do.
func (c *checker) part(name, where string, line int, base bool) {
	if name == "" || (base && name == Base) {
		return
	}
	var known []string
	for _, p := range c.r.Parts {
		known = append(known, p.Name)
	}
	c.known(name, known, "part", where, line)
}

func (c *checker) known(name string, known []string, kind, where string, line int) {
	for _, k := range known {
		if k == name {
			return
		}
	}
	if n, ok := nearest(name, known); ok {
		c.say(line, "%s names the %s %q, which this rig does not have; did you mean %q?", where, kind, name, n)
	} else {
		c.say(line, "%s names the %s %q, which this rig does not have; it has %s", where, kind, name, quoted(known))
	}
}

// place checks a place [x, z] or [x, y, z] where one is given.
func (c *checker) place(v []float64, key, where string, line int) {
	if v != nil && len(v) != 2 && len(v) != 3 {
		c.say(line, "key %q in %s must be [x, z] or [x, y, z], not %d numbers", key, where, len(v))
	}
}

func (c *checker) axis(v []float64, where string, line int) {
	c.place(v, "axis", where, line)
	a := XYZ(v)
	if v != nil && math.Hypot(a[0], math.Hypot(a[1], a[2])) < 1e-9 {
		c.say(line, "key \"axis\" in %s points nowhere: give a direction like [0, -1]", where)
	}
}

func (c *checker) point(v []float64, key, where string, line int, must bool) {
	if (v != nil || must) && len(v) != 2 {
		c.say(line, "key %q in %s must be a point [u, v] of the picture, in pixels", key, where)
	}
}
