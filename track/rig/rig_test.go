package rig

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

// lantern is the example of the design's section 4, with everything in it that
// a rig can hold.
const lantern = `name = "Lantern 07"
gravity_m_s2 = 9.8123

[camera]
readout_ms = 0          # rolling shutter, top row to bottom row
rate_factor = 1
distance_mm = 1200
plumb_px = [[90, 40], [92, 430]]
lens = [-0.05, 0.01]
[scale]
length_mm = 100.0
u_length_mm = 0.2
depth_mm = 0
ends_px = [[675.6, 133.6], [677.9, 243.8]]
[[bob]]
name = "lamp"
colour = "#b8261f"
diameter_mm = 36
part = "arm"
at_mm = [0, -280]
[[bob]]
name = "second"
look = "dark"
ball = false
[[part]]
name = "arm"
joint = "hinge"
pivot_mm = [0, 0]
mass_g = 70
centre_mm = [0, -260]
inertia_g_mm2 = 4.9e6
friction = { viscous = "fit", drag = "fit from 1.5e-6", dry = 0 }
spring = { rate_mN_m = 0, rest_deg = 0 }
[[part]]
name = "fin"
on = "arm"
joint = "ball"
pivot_mm = [0, 3, -280]
spin_inertia_g_mm2 = 2e3
[[magnet]]
name = "bob magnet"
part = "arm"
at_mm = [0, -280]
axis = [0, -1]
moment_A_m2 = "fit"
[[magnet]]
name = "base magnet"
part = "base"
at_mm = [0, -322]
axis = [0, 1]
gap_mm = "fit from 30"
cylinder = { diameter_mm = 12, height_mm = 6, u_height_mm = 0.02, remanence_T = 1.2 }
[[coil]]
at_mm = [0, -310]
kick_mJ = "fit"
capacity_mAh = 550
[[mark]]
name = "corner"
on = "stand"
px = [10, 20]
[[clip]]
file = "no-battery.mp4"
battery = false
without = ["base magnet"]
moved_mm = { "bob magnet" = [0, -285.5] }
supply_V = 8.9
temperature_C = 21
[[claim]]
runs_for_min = 20
[[start]]
part = "arm"
angle_deg = 43.5
[decay]
from_s = 1.5
[fit]
equal = [["bob magnet.moment", "coil.kick"]]
bounds = { "bob magnet.moment" = [0.2, 3], "arm.inertia" = [4e6, 5e6] }
[film]
width_px = 1920
pixels_per_mm = 1.1
`

func parse(t *testing.T, text string) *Rig {
	t.Helper()
	r, err := Parse("lantern.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// whole is the example without the tie of unlike quantities, which is an error.
func whole() string {
	return strings.Replace(lantern, `"coil.kick"`, `"bob magnet.moment_A_m2"`, 1)
}

func TestParseGivesSI(t *testing.T) {
	r := parse(t, whole())
	for _, c := range []struct {
		address    string
		v, u       float64
		set, given bool
		fit        bool
	}{
		{"scale.length", 0.1, 0.0002, true, true, false},
		{"camera.distance", 1.2, 0.024, true, false, false}, // 2 %
		{"camera.readout", 0, 0.001, true, false, false},
		{"lamp.diameter", 0.036, 0.00072, true, false, false},
		{"arm.mass", 0.07, 0.00035, true, false, false},
		{"arm.inertia", 4.9e-3, 4.9e-5, true, false, false},
		{"arm.friction.viscous", 0, 0, false, false, true},
		{"arm.friction.drag", 1.5e-6, 0, true, false, true},
		{"arm.friction.dry", 0, 0, true, false, false},
		{"arm.spring.rest", 0, 0.5 * math.Pi / 180, true, false, false},
		{"fin.spin_inertia", 2e-6, 4e-8, true, false, false},
		{"bob magnet.moment", 0, 0, false, false, true},
		{"base magnet.gap", 0.03, 0, true, false, true},
		{"base magnet.cylinder.height", 0.006, 2e-5, true, true, false},
		{"base magnet.cylinder.remanence", 1.2, 0.036, true, false, false},
		{"coil.kick", 0, 0, false, false, true},
		{"coil.capacity", 1980, 198, true, false, false}, // 550 mA·h = 1980 C
		{"clip no-battery.mp4.supply", 8.9, 0.05, true, false, false},
		{"claim.runs_for", 1200, 0, true, false, false},
		{"arm.start.angle", 43.5 * math.Pi / 180, 0, true, false, false},
		{"film.pixels_per_mm", 1100, 0, true, false, false},
		{"gravity", 9.8123, 0.01, true, false, false},
	} {
		v, err := r.Number(c.address)
		if err != nil {
			t.Error(err)
			continue
		}
		near := func(a, b float64) bool { return math.Abs(a-b) <= 1e-15*math.Max(1, math.Abs(b)) }
		if !near(v.V, c.v) || !near(v.U, c.u) || v.Set != c.set || v.UGiven != c.given || v.Fit != c.fit {
			t.Errorf("%s = %+v, want value %g, u %g, set %t, given %t, fit %t", c.address, *v, c.v, c.u, c.set, c.given, c.fit)
		}
	}
	if got := r.Magnets[1].AtM; !reflect.DeepEqual(got, []float64{0, -0.322}) {
		t.Errorf("at_mm gave %v m", got)
	}
	if got := XYZ(r.Parts[1].PivotM); got != [3]float64{0, 0.003, -0.28} {
		t.Errorf("pivot_mm gave %v m", got)
	}
	if b := r.Fit.Bounds["arm.inertia"]; b != [2]float64{4e-3, 5e-3} {
		t.Errorf("bounds gave %v kg·m²", b)
	}
	if r.Clips[0].Battery || !r.Bobs[0].Ball || r.Bobs[1].Ball || !r.Bobs[1].BallSet {
		t.Error("battery or ball read wrongly")
	}
	if r := parse(t, strings.Replace(whole(), "battery = false", "", 1)); !r.Clips[0].Battery {
		t.Error("a clip's battery must be in unless the rig says otherwise")
	}
}

func TestReadAndWrittenIsTheSameRig(t *testing.T) {
	first := parse(t, whole())
	path := filepath.Join(t.TempDir(), "lantern.toml")
	if err := first.Save(path); err != nil {
		t.Fatal(err)
	}
	second, err := Load(path)
	if err != nil {
		text, _ := os.ReadFile(path)
		t.Fatalf("%v\n%s", err, text)
	}
	second.Path = first.Path
	if !reflect.DeepEqual(first, second) {
		t.Errorf("the rig changed on its way through a file:\n%s\n%+v\n%+v", first.Marshal(), first, second)
	}
	if a, b := string(first.Marshal()), string(second.Marshal()); a != b {
		t.Error("written twice, the texts differ")
	}
	if !strings.Contains(string(first.Marshal()), "diameter_mm = 36\n") {
		t.Error("36 mm is not written as 36")
	}
}

func TestTimeRatio(t *testing.T) {
	if x := parse(t, "[camera]\nrate_factor = 8\nclock_ppm = 25").Camera.TimeRatio(); math.Abs(x-8.0002) > 1e-12 {
		t.Errorf("eightfold slow motion with a clock 25 ppm fast gives %.9g, want 8.0002", x)
	}
	if x := parse(t, "").Camera.TimeRatio(); x != 1 {
		t.Errorf("nothing said gives %g", x)
	}
}

// What other editors leave behind: a byte order mark and carriage returns.
func TestOtherEditors(t *testing.T) {
	text := "\xef\xbb\xbf" + strings.ReplaceAll(whole(), "\n", "\r\n")
	if r := parse(t, text); r.Name != "Lantern 07" || len(r.Bobs) != 2 {
		t.Errorf("read as %+v", r)
	}
	_, err := Parse("lantern.toml", []byte(strings.Replace(text, "mass_g", "mass_q", 1)))
	if err == nil || !strings.Contains(err.Error(), "line 29: key \"mass_q\"") {
		t.Errorf("got %v", err)
	}
	utf16 := []byte{0xff, 0xfe, 'n', 0, 'a', 0}
	if _, err := Parse("lantern.toml", utf16); err == nil || !strings.Contains(err.Error(), "not valid TOML") {
		t.Errorf("got %v", err)
	}
}

func TestCloneSharesNothing(t *testing.T) {
	r := parse(t, whole())
	c := r.Clone()
	if !reflect.DeepEqual(r, c) {
		t.Fatal("the copy differs")
	}
	c.Magnets[1].Cylinder.HeightM.V, c.Bobs[0].AtM[1], c.Fit.Bounds["arm.inertia"] = 1, 1, [2]float64{1, 2}
	if r.Magnets[1].Cylinder.HeightM.V == 1 || r.Bobs[0].AtM[1] == 1 || r.Fit.Bounds["arm.inertia"][0] == 1 {
		t.Error("changing the copy changed the rig")
	}
}

func TestFittedRoundTrip(t *testing.T) {
	r := parse(t, whole())
	names := []string{"bob magnet.moment", "arm.inertia", "base magnet.gap"}
	cov := [][]float64{{4e-4, 1e-9, 2e-7}, {1e-9, 1e-10, 0}, {2e-7, 0, 9e-8}}
	if err := r.SetFitted(names, []float64{1.1, 4.87e-3, 0.0304}, cov); err != nil {
		t.Fatal(err)
	}
	again, err := Parse("fitted.toml", r.Marshal())
	if err != nil {
		t.Fatalf("%v\n%s", err, r.Marshal())
	}
	for i, n := range names {
		v, _ := again.Number(n)
		if v.Fit || !v.Set || math.Abs(v.U-math.Sqrt(cov[i][i])) > 1e-15 {
			t.Errorf("%s came back as %+v", n, *v)
		}
		for j := range names {
			if d := math.Abs(again.Fitted.Covariance[i][j] - cov[i][j]); d > 1e-14*math.Abs(cov[i][j]) {
				t.Errorf("covariance %d, %d came back as %g, was %g", i, j, again.Fitted.Covariance[i][j], cov[i][j])
			}
		}
	}
	again.FreeFitted()
	if v, _ := again.Number(names[0]); !v.Fit || v.V != 1.1 || len(again.Fitted.Of) != 0 {
		t.Errorf("after FreeFitted %s is %+v", names[0], *v)
	}
	before := r.Clone()
	for _, bad := range [][]string{{"bob magnet.moment", "arm.inertia", "arm.mass"}, {"bob magnet.moment", "arm.inertia", "nothing"}, {"arm.inertia"}} {
		if err := r.SetFitted(bad, []float64{1, 2, 3}, cov); err == nil || !reflect.DeepEqual(r, before) {
			t.Errorf("SetFitted(%v): error %v, or the rig was changed", bad, err)
		}
	}
}

// Every problem names file, line and key, and what to do.
func TestProblems(t *testing.T) {
	for _, c := range []struct{ name, old, new, want string }{
		{"unknown key", "diameter_mm = 36", "diametre_mm = 36", `lantern.toml line 18: key "diametre_mm" is not known in [[bob]] "lamp"; did you mean "diameter_mm"?`},
		{"wrong unit", "mass_g = 70", "mass_kg = 0.07", `line 29: key "mass_kg" is not known in [[part]] "arm"; did you mean "mass_g"?`},
		{"key of another table", "rate_factor = 1", "diameter_mm = 1", `line 6: key "diameter_mm" is not known in [camera]; it belongs in [[bob]] or cylinder of [[magnet]]`},
		{"nested key", "dry = 0", "dri = 0", `line 32: key "dri" is not known in friction of [[part]] "arm"; did you mean "dry"?`},
		{"unknown table", "[decay]", "[dekay]", `key "dekay" is not known in a rig; did you mean "decay"?`},
		{"text for number", "mass_g = 70", `mass_g = "heavy"`, `line 29: key "mass_g" in [[part]] "arm" must be a number, not the text "heavy"`},
		{"number for text", `name = "lamp"`, "name = 5", `line 16: key "name" in [[bob]] must be text in quotes, not the number 5`},
		{"fit where none", "mass_g = 70", `mass_g = "fit"`, `key "mass_g" in [[part]] "arm" cannot be fitted`},
		{"bad fit", `kick_mJ = "fit"`, `kick_mJ = "free"`, `key "kick_mJ" in [[coil]] must be a number or "fit", not the text "free"`},
		{"bad fit start", `kick_mJ = "fit"`, `kick_mJ = "fit from much"`, `what follows "fit from" must be a number, not "much"`},
		{"negative", "mass_g = 70", "mass_g = -70", `line 29: key "mass_g" in [[part]] "arm" is -70, but must be greater than 0`},
		{"negative diameter", "diameter_mm = 36", "diameter_mm = -36", `line 18: key "diameter_mm" in [[bob]] "lamp" is -36, but must be greater than 0`},
		{"not a number", "mass_g = 70", "mass_g = nan", `key "mass_g" in [[part]] "arm" must be a number`},
		{"too large", "mass_g = 70", "mass_g = 1e300", `which no toy has`},
		{"lone end", "ends_px = [[675.6, 133.6], [677.9, 243.8]]", "ends_px = [[675.6, 133.6]]", `line 14: key "ends_px" in [scale] needs the two ends`},
		{"half a point", "[677.9, 243.8]]", "[677.9]]", `line 14: key "ends_px" in [scale] must be a list of points`},
		{"one plumb point", "plumb_px = [[90, 40], [92, 430]]", "plumb_px = [[90, 40]]", `line 8: key "plumb_px"`},
		{"depth without distance", "distance_mm = 1200\n", "\n", ``},
		{"depth", "depth_mm = 0", "depth_mm = 1300", `line 13: key "depth_mm" in [scale] puts the length behind the camera`},
		{"colour", "#b8261f", "red", `line 17: key "colour" in [[bob]] "lamp" must be like "#b8261f"`},
		{"look", `look = "dark"`, `look = "#b8261f"`, `line 23: key "look" in [[bob]] "second" must be`},
		{"no look", `look = "dark"`, ``, `line 21: [[bob]] "second" says neither colour`},
		{"two names", `name = "second"`, `name = "lamp"`, `line 22: the name "lamp" is given to two [[bob]] tables`},
		{"no name", `name = "second"`, ``, `[[bob]] has no "name"`},
		{"unknown part", `part = "arm"
at_mm = [0, -280]
[[bob]]`, `part = "arn"
at_mm = [0, -280]
[[bob]]`, `line 19: [[bob]] "lamp" names the part "arn", which this rig does not have; did you mean "arm"?`},
		{"on itself", `on = "arm"`, `on = "fin"`, `line 36: [[part]] "fin" is on itself`},
		{"ring", `joint = "hinge"`, "joint = \"hinge\"\non = \"fin\"", `carry each other in a ring`},
		{"joint", `joint = "hinge"`, `joint = "hook"`, `line 27: key "joint" in [[part]] "arm" must be "hinge", "ball" or "pin", not "hook"`},
		{"spring on ball", `spin_inertia_g_mm2 = 2e3`, `spring = { rate_mN_m = 3 }`, `line 39: [[part]] "fin" has a spring on a ball joint`},
		{"spin on hinge", `mass_g = 70`, `spin_inertia_g_mm2 = 2e3`, `only a ball joint`},
		{"inertia about centre", `inertia_g_mm2 = 4.9e6`, `inertia_g_mm2 = 1e5`, `line 31: key "inertia_g_mm2" in [[part]] "arm" is 1e+05, less than mass × distance² = 4.732e+06`},
		{"same place", `part = "base"
at_mm = [0, -322]`, `part = "arm"
at_mm = [0, -280]`, `[[magnet]] "base magnet" is in the same place as "bob magnet" (line 43)`},
		{"no axis", `axis = [0, 1]`, `axis = [0, 0]`, `line 50: key "axis" in [[magnet]] "base magnet" points nowhere`},
		{"both strengths", `gap_mm = "fit from 30"`, `moment_A_m2 = 1`, `gives both moment_A_m2 and the cylinder's remanence_T`},
		{"no strength", "moment_A_m2 = \"fit\"", "", `neither moment_A_m2 nor cylinder`},
		{"gap of a moving magnet", "moment_A_m2 = \"fit\"", "moment_A_m2 = \"fit\"\nat_fit = true", `line 46: key "at_fit" in [[magnet]] "bob magnet" has a meaning only for a magnet on the base`},
		{"no kick", `kick_mJ = "fit"`, ``, `[[coil]] says nothing of its kick`},
		{"single brackets", "[[coil]]", "[coil]", `line 53: write [[coil]] in double brackets`},
		{"double brackets", "[decay]", "[[decay]]", `write [decay] in single brackets`},
		{"uncertainty of a list", "centre_mm = [0, -260]", "u_centre_mm = 1", `line 30: key "u_centre_mm": "centre_mm" in [[part]] "arm" takes no uncertainty of its own; "centre_reading_mm" says`},
		{"uncertainty alone", "mass_g = 70", "u_mass_g = 1", `line 29: key "u_mass_g" in [[part]] "arm" stands alone: give "mass_g" too`},
		{"uncertainty of fit", `kick_mJ = "fit"`, "kick_mJ = \"fit\"\nu_kick_mJ = 1", `goes with a number, but "kick_mJ" is to be fitted`},
		{"negative uncertainty", `u_length_mm = 0.2`, "u_length_mm = -0.2", `line 12: key "u_length_mm"`},
		{"vector", `pivot_mm = [0, 0]`, "pivot_mm = [0]", `line 28: key "pivot_mm" in [[part]] "arm" must be [x, z] or [x, y, z], not 1 numbers`},
		{"vector of text", `pivot_mm = [0, 0]`, "pivot_mm = \"from the track\"", `or "from track", not "from the track"`},
		{"pivot from track of a carried part", `pivot_mm = [0, 3, -280]`, "pivot_mm = \"from track\"", `this one rides on "arm"`},
		{"without", `without = ["base magnet"]`, `without = ["bass magnet"]`, `line 64: [[clip]] "no-battery.mp4" names the magnet or part "bass magnet", which this rig does not have; did you mean "base magnet"?`},
		{"moved", `{ "bob magnet" = [0, -285.5] }`, `{ "arm" = [0, 1] }`, `names the magnet "arm"`},
		{"claim", `runs_for_min = 20`, "runs_for_min = 20\nnever_settles = true", `states one thing, not 2`},
		{"start", `angle_deg = 43.5`, "spin_deg_s = 4", `"arm" is on a hinge: azimuth and spin are for a ball joint`},
		{"tie", `[0.2, 3]`, `[3, 0.2]`, `the bounds of "bob magnet.moment" in [fit] must be [least, greatest]`},
		{"bounds of nothing", `"arm.inertia" = [4e6, 5e6]`, `"arm.inertja" = [4e6, 5e6]`, `this rig has no number "arm.inertja"; did you mean "arm.inertia"?`},
		{"tie of unlike", `"bob magnet.moment_A_m2"`, `"coil.kick"`, `which is another kind of quantity`},
		{"decay", `from_s = 1.5`, "from_s = 1.5\nto_s = 1", `"to_s" in [decay] must be later`},
		{"mark", `on = "stand"`, `on = "shelf"`, `must be "stand" or "base", not "shelf"`},
		{"syntax", "[scale]", "[scale", `line 10: this is not valid TOML`},
		{"twice", "mass_g = 70", "mass_g = 70\nmass_g = 71", `line 30: this is not valid TOML`},
		{"lens", "lens = [-0.05, 0.01]", "lens = [1,2,3]", `line 9: key "lens"`},
		{"vertical", "rate_factor = 1", `vertical = "yes"`, `line 6: key "vertical" in [camera] must be`},
		{"rate factor", "rate_factor = 1", `rate_factor = 0`, `must be greater than 0`},
	} {
		t.Run(c.name, func(t *testing.T) {
			text := whole()
			if !strings.Contains(text, c.old) {
				t.Fatalf("the example has no %q", c.old)
			}
			_, err := Parse("lantern.toml", []byte(strings.Replace(text, c.old, c.new, 1)))
			if c.want == "" {
				if err != nil {
					t.Errorf("unexpected: %v", err)
				}
				return
			}
			if err == nil {
				t.Fatalf("no error; want %s", c.want)
			}
			if !strings.Contains(err.Error(), c.want) {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
			var ps Problems
			if !errors.As(err, &ps) {
				t.Errorf("the error is a %T", err)
			}
		})
	}
}

func TestAllProblemsAtOnce(t *testing.T) {
	text := strings.NewReplacer("mass_g = 70", "mass = 70", "diameter_mm = 36", "diameter_mm = -1", "rate_factor = 1", "rate_faktor = 1").Replace(whole())
	_, err := Parse("lantern.toml", []byte(text))
	var ps Problems
	if !errors.As(err, &ps) || len(ps) != 3 || ps[0].Line != 6 || ps[1].Line != 18 || ps[2].Line != 29 {
		t.Errorf("want three problems on lines 6, 18, 29; got\n%v", err)
	}
}

func TestCheckScale(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		{"", "", ""},
		{"ends_px = [[675.6, 133.6], [677.9, 243.8]]", "", "add ends_px"},
		{"length_mm = 100.0\nu_length_mm = 0.2\n", "", "add length_mm"},
		{"length_mm = 100.0\nu_length_mm = 0.2\ndepth_mm = 0\nends_px = [[675.6, 133.6], [677.9, 243.8]]", "", "there is no scale"},
	} {
		err := parse(t, strings.Replace(whole(), c.old, c.new, 1)).CheckScale()
		if (err == nil) != (c.want == "") || (err != nil && !strings.Contains(err.Error(), c.want)) {
			t.Errorf("got %v, want %q", err, c.want)
		}
	}
}

func TestLoadSaysWhatIsWrong(t *testing.T) {
	dir := t.TempDir()
	if _, err := Load(filepath.Join(dir, "none.toml")); err == nil || !errors.Is(err, os.ErrNotExist) {
		t.Errorf("missing file: %v", err)
	}
	if _, err := Load(dir); err == nil || strings.Contains(err.Error(), "%!") {
		t.Errorf("a folder: %v", err)
	}
	big := filepath.Join(dir, "big.toml")
	if err := os.WriteFile(big, make([]byte, maxBytes+10), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Load(big); err == nil || !strings.Contains(err.Error(), "not a rig") {
		t.Errorf("a large file: %v", err)
	}
	r := parse(t, whole())
	if err := r.Save(filepath.Join(dir, "no", "such.toml")); err == nil {
		t.Error("saved into a folder that does not exist")
	}
}

func TestFindNamesTheNearest(t *testing.T) {
	r := parse(t, whole())
	for address, want := range map[string]string{
		"base magnet.gab": `did you mean "base magnet.gap"`,
		"arm.zzzzzzzzzz":  `those of "arm" are arm.mass`,
		"q":               "an address is a name and a quantity",
	} {
		if _, err := r.Find(address); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v", address, err)
		}
	}
	seen := map[string]bool{}
	for _, n := range r.Numbers() {
		if seen[n.Address] {
			t.Errorf("the address %s stands for two numbers", n.Address)
		}
		seen[n.Address] = true
	}
}

// Every unit ending in a tag must be in the table of units: a Value whose key
// has none must be on the list of plain numbers.
func TestEveryKeyHasItsUnit(t *testing.T) {
	plain := map[string]bool{
		"rate_factor": true, "recoil": true, "turns": true, "noise": true, "texture": true, "seed": true, "sharpening": true,
		"shadow": true, "uneven": true, "cells": true,
		"viscous": true, "drag": true, "dry": true,
	}
	r := parse(t, whole())
	for _, n := range r.Numbers() {
		if n.Unit.u.Ending == "" && !plain[n.Key] {
			t.Errorf("%s: the key %s names no known unit", n.Address, n.Key)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add(lantern)
	f.Add(whole())
	for _, s := range []string{
		"", "[[bob]]\n", "bob = [1]", "bob = [{name=\"a\"}]", "a.b.c = 1\n", "[fit]\nbounds = {\"x\" = [1]}",
		"[fitted]\nof = [\"arm.inertia\"]\ncovariance = [[1]]", "[[part]]\nname=\"a\"\non=\"b\"\n[[part]]\nname=\"b\"\non=\"a\"",
		"camera.plumb_px = [[1,2]]", "[[magnet]]\ncylinder = 4", "part = [{friction = {viscous = \"fit from\"}}]", "name = 1979-05-27", "x = '''",
	} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		r, err := Parse("fuzz.toml", []byte(text))
		if err != nil {
			if r != nil || err.Error() == "" {
				t.Error("an error must come alone and say something")
			}
			return
		}
		again, err := Parse("again.toml", r.Marshal())
		if err != nil {
			t.Fatalf("what was written is not read: %v\n%s", err, r.Marshal())
		}
		if len(again.Numbers()) != len(r.Numbers()) {
			t.Error("numbers were lost")
		}
		_ = r.CheckScale()
	})
}
