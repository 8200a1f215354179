package magnet

import "math"

// Grade is a magnet material as it is sold.
type Grade struct {
	Material string // "NdFeB", "hard ferrite", "SmCo"
	Name     string // the trade's short name
	// From and To are the remanence in T that the trade gives for it, at 20 °C.
	From, To float64
	// IEC is the nearest code of IEC 60404-8-1 and its least remanence in T; empty
	// where none is near. From memory, to be checked against the standard.
	IEC    string
	IECMin float64
}

// Grades are the common ones. Trade ranges: common practice, no source. IEC
// 60404-8-1 codes and least remanences: from memory.
var Grades = []Grade{
	{"hard ferrite", "Y10", 0.20, 0.235, "HF 8/22", 0.20},
	{"hard ferrite", "Y25", 0.36, 0.40, "HF 24/16", 0.35},
	{"hard ferrite", "Y30", 0.37, 0.40, "HF 26/16", 0.37},
	{"hard ferrite", "Y35", 0.40, 0.41, "HF 28/26", 0.385},
	{"hard ferrite", "Y40", 0.44, 0.46, "HF 32/22", 0.41},
	{"SmCo", "SmCo5 18", 0.84, 0.89, "RECo5 140/120", 0.86},
	{"SmCo", "Sm2Co17 26", 1.02, 1.05, "RE2Co17 200/150", 1.05},
	{"NdFeB", "N30", 1.08, 1.13, "REFeB 210/130", 1.06},
	{"NdFeB", "N33", 1.13, 1.17, "REFeB 250/120", 1.13},
	{"NdFeB", "N35", 1.17, 1.22, "REFeB 240/180", 1.16},
	{"NdFeB", "N38", 1.22, 1.25, "REFeB 280/120", 1.24},
	{"NdFeB", "N40", 1.25, 1.28, "REFeB 280/120", 1.24},
	{"NdFeB", "N42", 1.28, 1.32, "REFeB 310/130", 1.30},
	{"NdFeB", "N45", 1.32, 1.38, "REFeB 340/130", 1.33},
	{"NdFeB", "N48", 1.38, 1.42, "REFeB 360/90", 1.35},
	{"NdFeB", "N50", 1.40, 1.45, "", 0},
	{"NdFeB", "N52", 1.43, 1.48, "", 0},
}

// NearestGrade is the grade of the material whose range holds the remanence
// (T, at 20 °C, corrected for self-demagnetisation), or else lies nearest to it;
// inside tells which. An empty material searches all.
func NearestGrade(remanence float64, material string) (g Grade, inside bool) {
	best := math.Inf(1)
	for _, c := range Grades {
		if material != "" && c.Material != material {
			continue
		}
		middle := (c.From + c.To) / 2
		off := math.Abs(math.Abs(remanence) - middle)
		if off < best {
			g, best = c, off
		}
	}
	r := math.Abs(remanence)
	return g, r >= g.From && r <= g.To
}

// Temperature coefficients of remanence, relative per kelvin (common practice,
// no source).
var temperatureCoefficients = map[string]float64{"NdFeB": -0.0012, "hard ferrite": -0.002, "SmCo": -0.0004}

// At20 is the remanence or moment at 20 °C of what is x at the temperature t in
// °C, for a material of Grades (NdFeB where it is not known).
func At20(x, t float64, material string) float64 {
	k, ok := temperatureCoefficients[material]
	if !ok {
		k = temperatureCoefficients["NdFeB"]
	}
	return x / (1 + k*(t-20))
}

// FluxIndexLimit in T²m²·1e-6 is 50 kG²mm² (16 CFR 1262, ASTM F963, EN 71-1).
const FluxIndexLimit = 0.5e-6

// FluxIndex estimates the flux index in T²m² (1 kG²mm² = 1e-8 T²m²): the
// square of the largest flux density over a face, 0.38 mm above it, times the
// face's area. How those rules have it measured, from memory. It is a screening
// figure, never a certificate: conformity is for an accredited laboratory under
// local law.
func (c Cylinder) FluxIndex() float64 {
	most := 0.0
	for i := range 41 {
		bRho, bZ := c.field(c.Radius*float64(i)/40, c.Height/2+0.38e-3)
		most = math.Max(most, math.Hypot(bRho, bZ))
	}
	return most * most * math.Pi * c.Radius * c.Radius
}
