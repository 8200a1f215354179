package finding

import (
	"math"
	"strconv"
	"strings"
)

// Shown is a finding as people read it: in a unit of everyday size, the
// uncertainty to two significant digits and everything else to match.
type Shown struct {
	Value string // without unit
	U     string // standard uncertainty; empty when it is not known
	Lo    string // 95 % interval
	Hi    string
	Unit  string // what all four are in, "" for a pure number
	Power int    // all four are to be multiplied by ten to this power; mostly 0
}

// scale is one unit in which people read a quantity, from Least (of the SI
// value's magnitude) upwards.
type scale struct {
	Least  float64
	Unit   string
	Factor float64 // shown = SI × Factor
}

// scales lists, for each SI unit, what people read, largest first. A unit that
// is not listed is shown as it is. (Common practice, no source.)
var scales = map[string][]scale{
	"s":           {{172800, "d", 1.0 / 86400}, {7200, "h", 1.0 / 3600}, {600, "min", 1.0 / 60}, {0.1, "s", 1}, {1e-4, "ms", 1e3}, {0, "µs", 1e6}},
	"m":           {{10, "m", 1}, {1e-4, "mm", 1e3}, {0, "µm", 1e6}},
	"m/s":         {{0.1, "m/s", 1}, {0, "mm/s", 1e3}},
	"rad":         {{0, "°", 180 / math.Pi}},
	"kg":          {{1, "kg", 1}, {1e-3, "g", 1e3}, {0, "mg", 1e6}},
	"J":           {{1, "J", 1}, {1e-4, "mJ", 1e3}, {1e-7, "µJ", 1e6}, {0, "nJ", 1e9}},
	"W":           {{1, "W", 1}, {1e-3, "mW", 1e3}, {1e-6, "µW", 1e6}, {0, "nW", 1e9}},
	"N":           {{1, "N", 1}, {1e-3, "mN", 1e3}, {0, "µN", 1e6}},
	"N/m":         {{1, "N/m", 1}, {0, "mN/m", 1e3}},
	"T²·m²":       {{0, "T²·mm²", 1e6}},
	"N·m":         {{1, "N·m", 1}, {1e-3, "mN·m", 1e3}, {0, "µN·m", 1e6}},
	"N·m/rad":     {{1, "N·m/rad", 1}, {1e-4, "mN·m/rad", 1e3}, {0, "µN·m/rad", 1e6}},
	"N·m/rad³":    {{1, "N·m/rad³", 1}, {1e-4, "mN·m/rad³", 1e3}, {0, "µN·m/rad³", 1e6}},
	"N·m·s":       {{1e-3, "mN·m·s", 1e3}, {0, "µN·m·s", 1e6}},
	"N·m·s/rad":   {{1e-3, "mN·m·s/rad", 1e3}, {0, "µN·m·s/rad", 1e6}},
	"N·m·s²":      {{1e-3, "mN·m·s²", 1e3}, {0, "µN·m·s²", 1e6}},
	"N·m·s²/rad²": {{1e-3, "mN·m·s²/rad²", 1e3}, {0, "µN·m·s²/rad²", 1e6}},
	"T":           {{0.1, "T", 1}, {1e-4, "mT", 1e3}, {0, "µT", 1e6}},
	"A":           {{1, "A", 1}, {1e-3, "mA", 1e3}, {0, "µA", 1e6}},
	"V":           {{1, "V", 1}, {0, "mV", 1e3}},
	"A·m²":        {{0.01, "A·m²", 1}, {0, "mA·m²", 1e3}},
	"kg·m²":       {{0, "g·mm²", 1e9}},
	"Hz":          {{0.1, "Hz", 1}, {0, "mHz", 1e3}},
	"A·s":         {{0, "mAh", 1 / 3.6}},
	"1":           {{0, "", 1}},
}

// Unit says in which unit people read an SI quantity of that magnitude, and
// the factor: shown = SI × factor. A unit it does not know comes back as it is,
// with factor 1; "1" comes back as "".
func Unit(si string, magnitude float64) (show string, factor float64) {
	choices, ok := scales[si]
	if !ok {
		return si, 1
	}
	magnitude = math.Abs(magnitude)
	if magnitude == 0 || math.IsNaN(magnitude) {
		for _, c := range choices { // nothing to go by: the unit itself, or the first
			if c.Factor == 1 {
				return c.Unit, c.Factor
			}
		}
		return choices[0].Unit, choices[0].Factor
	}
	for _, c := range choices {
		if magnitude >= c.Least {
			return c.Unit, c.Factor
		}
	}
	last := choices[len(choices)-1]
	return last.Unit, last.Factor
}

// Shown returns what a figure prints along this axis for data whose largest
// magnitude is given: the axis's own choice, or else what people read.
func (a Axis) Shown(magnitude float64) (unit string, factor float64) {
	if a.ShowUnit == "" && a.ShowFactor == 0 {
		return Unit(a.Unit, magnitude)
	}
	unit, factor = a.ShowUnit, a.ShowFactor
	if unit == "1" {
		unit = ""
	}
	if factor == 0 {
		factor = 1
	}
	return unit, factor
}

// Display returns the finding as people read it. For an UpperLimit only Hi is
// filled, rounded up; for a Statement, or an Undecided one, nothing is.
func (f Finding) Display() Shown {
	switch f.Kind {
	case Statement, Undecided:
		return Shown{}
	case UpperLimit:
		unit, factor := Unit(f.Unit, f.Hi)
		hi := f.Hi * factor
		s := Shown{Unit: unit, Power: power(hi, hi)}
		hi *= math.Pow10(-s.Power)
		d := decimals(hi)
		s.Hi = fixed(ceilTo(hi, d), d)
		return s
	}
	u := f.U
	if !(u > 0) || math.IsInf(u, 0) {
		u = 0
	}
	unit, factor := Unit(f.Unit, math.Max(math.Abs(f.Value), u))
	s := Shown{Unit: unit}
	s.Power = power(f.Value*factor, u*factor)
	factor *= math.Pow10(-s.Power)
	d := 0
	if u > 0 {
		d = decimals(u * factor)
		s.U = fixed(u*factor, d)
	} else {
		d = decimals(f.Value*factor) + 4 // six significant digits
		if f.Value == 0 {
			d = 0
		}
	}
	s.Value, s.Lo, s.Hi = fixed(f.Value*factor, d), fixed(f.Lo*factor, d), fixed(f.Hi*factor, d)
	return s
}

// DisplayValue is Display for a bare value with standard uncertainty u (0 or
// NaN: not known) in an SI unit.
func DisplayValue(value, u float64, si string) Shown {
	return Normal("", "", "", value, u, si, "").Display()
}

// DisplayU writes a bare standard uncertainty of an SI unit with two digits and
// its unit, as in "0.12 ms"; "0" where there is none.
func DisplayU(u float64, si string) string {
	s := DisplayValue(0, u, si)
	if s.U == "" {
		return "0"
	}
	return s.U + s.times() + s.unit()
}

// String is the value, its uncertainty and its unit, as in
// "1.0634 ± 0.0012 s", "(3.10 ± 0.12) × 10⁻⁶" or "below 0.013 s".
func (s Shown) String() string {
	var b strings.Builder
	switch {
	case s.Value == "" && s.Hi == "":
		return ""
	case s.Value == "":
		b.WriteString("below " + s.Hi + s.times())
	case s.U == "":
		b.WriteString(s.Value + s.times())
	case s.Power != 0:
		b.WriteString("(" + s.Value + " ± " + s.U + ")" + s.times())
	default:
		b.WriteString(s.Value + " ± " + s.U)
	}
	b.WriteString(s.unit())
	return b.String()
}

// Interval is the 95 % interval in words, as in "1.0611 to 1.0657 s"; empty
// where there is none.
func (s Shown) Interval() string {
	if s.Value == "" || s.U == "" || s.Lo == "" || s.Hi == "" {
		return ""
	}
	if s.Power != 0 {
		return "(" + s.Lo + " to " + s.Hi + ")" + s.times() + s.unit()
	}
	return s.Lo + " to " + s.Hi + s.unit()
}

func (s Shown) unit() string {
	switch s.Unit {
	case "":
		return ""
	case "°":
		return "°"
	}
	return " " + s.Unit
}

func (s Shown) times() string {
	if s.Power == 0 {
		return ""
	}
	return " × 10" + Superscript(s.Power)
}

// Superscript writes an exponent with raised digits.
func Superscript(n int) string {
	return strings.NewReplacer("-", "⁻", "0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴",
		"5", "⁵", "6", "⁶", "7", "⁷", "8", "⁸", "9", "⁹").Replace(strconv.Itoa(n))
}

// decimals is how many decimals show a positive u to two significant digits;
// negative for tens and hundreds.
func decimals(u float64) int {
	if u == 0 || math.IsNaN(u) || math.IsInf(u, 0) {
		return 0
	}
	d := 1 - int(math.Floor(math.Log10(math.Abs(u))))
	if math.Round(math.Abs(u)*math.Pow10(d)) >= 100 { // 0.0996 is 0.10
		d--
	}
	return d
}

// power is the common factor that keeps very small and very large numbers
// readable: 0 from a thousandth to a million.
func power(value, u float64) int {
	big := math.Max(math.Abs(value), math.Abs(u))
	if big == 0 || math.IsNaN(big) || math.IsInf(big, 0) || (big >= 1e-3 && big < 1e6) {
		return 0
	}
	return int(math.Floor(math.Log10(big)))
}

func ceilTo(x float64, d int) float64 {
	p := math.Pow10(d)
	up := math.Ceil(x * p * (1 - 1e-12)) // a limit that is already round stays
	return up / p
}

// fixed writes x with d decimals (tens and hundreds rounded when d < 0), with a
// true minus sign. NaN is "", infinity "∞".
func fixed(x float64, d int) string {
	switch {
	case math.IsNaN(x):
		return ""
	case math.IsInf(x, 1):
		return "∞"
	case math.IsInf(x, -1):
		return "−∞"
	}
	if d < 0 {
		p := math.Pow10(-d)
		x, d = math.Round(x/p)*p, 0
	}
	s := strconv.FormatFloat(x, 'f', d, 64)
	if neg, ok := strings.CutPrefix(s, "-"); ok {
		if strings.Trim(neg, "0.") == "" {
			return neg // no "−0.00"
		}
		return "−" + neg
	}
	return s
}
