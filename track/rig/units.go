package rig

import (
	"strconv"
	"strings"
)

// fileUnit is a unit that a key's ending names: SI value = file value × Mul ÷ Div.
// Of Mul and Div one is 1 wherever it can be, so that 36 mm becomes the float64
// nearest to 0.036 and comes back as 36.
type fileUnit struct {
	Ending   string  // of the key, without its underscore
	Mul, Div float64 // to SI
	Shown    string  // the file's unit for people
	SI       string
}

const degree = 0.017453292519943295 // rad

// fileUnits is the one table of units. Longer endings win over shorter ones.
var fileUnits = []fileUnit{
	{"mm", 1, 1e3, "mm", "m"},
	{"g", 1, 1e3, "g", "kg"},
	{"deg", degree, 1, "°", "rad"},
	{"deg_s", degree, 1, "°/s", "rad/s"},
	{"rad_s", 1, 1, "rad/s", "rad/s"},
	{"ms", 1, 1e3, "ms", "s"},
	{"s", 1, 1, "s", "s"},
	{"min", 60, 1, "min", "s"},
	{"mJ", 1, 1e3, "mJ", "J"},
	{"g_mm2", 1, 1e9, "g·mm²", "kg·m²"},
	{"mN_m", 1, 1e3, "mN·m", "N·m"},
	{"uN_m_s", 1, 1e6, "µN·m·s", "N·m·s"},
	{"A_m2", 1, 1, "A·m²", "A·m²"},
	{"T", 1, 1, "T", "T"},
	{"V", 1, 1, "V", "V"},
	{"ohm", 1, 1, "Ω", "Ω"},
	{"mA", 1, 1e3, "mA", "A"},
	{"mAh", 3.6, 1, "mA·h", "A·s"},
	{"C", 1, 1, "°C", "°C"},
	{"px", 1, 1, "px", "px"},
	{"ppm", 1, 1, "ppm", "ppm"}, // the field's name says ppm
	{"m_s2", 1, 1, "m/s²", "m/s²"},
	{"per_s", 1, 1, "1/s", "1/s"},
	{"per_mm", 1e3, 1, "1/mm", "1/m"},
}

// siOfPlainKey names the SI unit of quantities whose key has no unit ending.
var siOfPlainKey = map[string]string{"viscous": "N·m·s/rad", "drag": "N·m·s²/rad²", "dry": "N·m"}

// unitOf finds the unit that a key's ending names. stem is the key without it.
// A key without a unit ending is a plain number.
func unitOf(key string) (stem string, unit fileUnit) {
	best := fileUnit{Mul: 1, Div: 1, Shown: siOfPlainKey[key], SI: siOfPlainKey[key]}
	stem = key
	for _, u := range fileUnits {
		if len(u.Ending) > len(best.Ending) && strings.HasSuffix(key, "_"+u.Ending) {
			best, stem = u, strings.TrimSuffix(key, "_"+u.Ending)
		}
	}
	// rate_mN_m and cubic_mN_m are per radian (and its cube); what turns is per radian too.
	switch key {
	case "rate_mN_m":
		best.Shown, best.SI = "mN·m/rad", "N·m/rad"
	case "cubic_mN_m":
		best.Shown, best.SI = "mN·m/rad³", "N·m/rad³"
	case "frames_per_s", "megabit_per_s", "pixels_per_mm":
		stem = key
	}
	return stem, best
}

func (u fileUnit) toSI(x float64) float64 { return x * u.Mul / u.Div }

func (u fileUnit) fromSI(x float64) float64 { return x / u.Mul * u.Div }

// text is the shortest decimal of the file's unit that reads back as exactly
// this SI value. Where float64 arithmetic allows none, it is the nearest.
func (u fileUnit) text(si float64) string {
	x := u.fromSI(si)
	for digits := 1; digits <= 17; digits++ {
		s := strconv.FormatFloat(x, 'g', digits, 64)
		if back, err := strconv.ParseFloat(s, 64); err == nil && u.toSI(back) == si {
			return tomlFloat(s)
		}
	}
	return tomlFloat(strconv.FormatFloat(x, 'g', 17, 64))
}

// tomlFloat turns Go's "5e+06" into a form that people write, and TOML reads.
func tomlFloat(s string) string {
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return s
	}
	if a := x; a == 0 || (a < 0 && a > -1e9 && a < -1e-4) || (a > 1e-4 && a < 1e9) {
		return strconv.FormatFloat(x, 'f', -1, 64)
	}
	return strings.Replace(strconv.FormatFloat(x, 'e', -1, 64), "e+0", "e", 1)
}
