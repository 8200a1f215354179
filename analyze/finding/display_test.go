package finding

import (
	"math"
	"testing"
)

func TestAFindingIsShownAsPeopleReadIt(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		f        Finding
		want     string
		interval string
	}{
		{Normal("", "", "", 1.063412, 0.000123, "s", ""), "1.06341 ± 0.00012 s", "1.06317 to 1.06365 s"},
		// Rounding that carries: 0.0996 to two significant digits is 0.10.
		{Normal("", "", "", 12.345, 0.0996, "1", ""), "12.35 ± 0.10", "12.15 to 12.54"},
		{Normal("", "", "", 0.2801, 0.00021, "m", ""), "280.10 ± 0.21 mm", "279.69 to 280.51 mm"},
		{Normal("", "", "", math.Pi/6, 0.002, "rad", ""), "30.00 ± 0.11°", "29.78 to 30.22°"},
		{Normal("", "", "", -0.0123, 0.0045, "s", ""), "−12.3 ± 4.5 ms", "−21.1 to −3.5 ms"},
		{Normal("", "", "", 412.4, 139, "1", ""), "410 ± 140", "140 to 680"},
		{Normal("", "", "", 3.104e-6, 1.2e-7, "1", ""), "(3.10 ± 0.12) × 10⁻⁶", "(2.87 to 3.34) × 10⁻⁶"},
		{Normal("", "", "", 0.00312, 0.00002, "1", ""), "0.003120 ± 0.000020", "0.003081 to 0.003159"},
		{Normal("", "", "", 2.3e-5, 1e-6, "N·m·s/rad", ""), "23.0 ± 1.0 µN·m·s/rad", "21.0 to 25.0 µN·m·s/rad"},
		{Normal("", "", "", 4.9e-3, 5e-5, "kg·m²", ""), "(4.900 ± 0.050) × 10⁶ g·mm²", "(4.802 to 4.998) × 10⁶ g·mm²"},
		{Normal("", "", "", 0, 0.0003, "m", ""), "0.00 ± 0.30 mm", "−0.59 to 0.59 mm"},
		{Normal("", "", "", 3.5, 0, "1", ""), "3.50000", ""},
		{Normal("", "", "", 3.5, nan, "furlong", ""), "3.50000 furlong", ""},
		{Finding{Kind: UpperLimit, Hi: 0.001234, Unit: "1"}, "below 0.0013", ""},
		{Finding{Kind: UpperLimit, Hi: 0.0012, Unit: "1"}, "below 0.0012", ""},
		{Finding{Kind: Undecided, Value: nan}, "", ""},
		{Finding{Kind: Statement, Text: "regular"}, "", ""},
	} {
		s := c.f.Display()
		if got := s.String(); got != c.want {
			t.Errorf("%v ± %v %s is shown as %q, want %q", c.f.Value, c.f.U, c.f.Unit, got, c.want)
		}
		if got := s.Interval(); got != c.interval {
			t.Errorf("%v ± %v %s: interval %q, want %q", c.f.Value, c.f.U, c.f.Unit, got, c.interval)
		}
	}
}

func TestABareUncertaintyCarriesItsUnit(t *testing.T) {
	for _, c := range []struct {
		u    float64
		unit string
		want string
	}{
		{1.234e-4, "s", "0.12 ms"},
		{4.72e-7, "rad", "2.7 × 10⁻⁵°"},
		{0.012, "1", "0.012"},
		{0, "s", "0"},
		{math.NaN(), "s", "0"},
	} {
		if got := DisplayU(c.u, c.unit); got != c.want {
			t.Errorf("%v %s is shown as %q, want %q", c.u, c.unit, got, c.want)
		}
	}
}

func TestEveryScaleStandsInOrderAndReachesZero(t *testing.T) {
	for si, choices := range scales {
		for i, c := range choices {
			if i > 0 && c.Least >= choices[i-1].Least {
				t.Errorf("%s: %q stands after %q but begins higher", si, c.Unit, choices[i-1].Unit)
			}
			if c.Factor <= 0 {
				t.Errorf("%s: factor %v", si, c.Factor)
			}
		}
		if choices[len(choices)-1].Least != 0 {
			t.Errorf("%s: the smallest values have no unit", si)
		}
	}
}

func TestAnAxisShowsItsOwnUnitOrWhatPeopleRead(t *testing.T) {
	if unit, f := (Axis{Unit: "m"}).Shown(0.3); unit != "mm" || f != 1e3 {
		t.Errorf("metres: %q × %v", unit, f)
	}
	if unit, f := (Axis{Unit: "m", ShowUnit: "cm", ShowFactor: 100}).Shown(0.3); unit != "cm" || f != 100 {
		t.Errorf("own choice: %q × %v", unit, f)
	}
	if unit, f := (Axis{Unit: "1"}).Shown(0); unit != "" || f != 1 {
		t.Errorf("pure number: %q × %v", unit, f)
	}
}
