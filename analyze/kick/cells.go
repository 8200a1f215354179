package kick

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

// cell is one kind of cell when it is fresh.
type cell struct {
	volt  float64
	ampS  float64 // A·s at a light load
	words string
}

// uCell is the relative standard uncertainty of a usual capacity: makes differ, and
// it falls with load, cold and age.
const uCell = 0.2

// cells are the usual capacities of fresh alkaline cells at a light load, and of a
// lithium button cell (common practice, no source).
var cells = map[string]cell{
	"9 V block": {9, 500 * 3.6, "a 9 V block"},
	"AA":        {1.5, 2500 * 3.6, "an AA cell"},
	"AAA":       {1.5, 1100 * 3.6, "an AAA cell"},
	"C":         {1.5, 7500 * 3.6, "a C cell"},
	"D":         {1.5, 15000 * 3.6, "a D cell"},
	"CR2032":    {3, 220 * 3.6, "a CR2032 button cell"},
	"LR44":      {1.5, 120 * 3.6, "an LR44 button cell"},
}

// rule is what the trade reckons with where nothing is known of the circuit.
const rule = "Common practice, no source: a fresh 9 V block, or two AA cells, keeps a kicked toy going for about two weeks."

const twoWeeks = 14 * 86400.0 // s

// battery reports the share of the battery's energy that reaches the swing and the
// time on one battery, where its current was measured or follows from the rig's
// coil. perDay is the number of kicks a day.
func (l *ledger) battery(res *Result, kick *finding.Finding, perDay float64) {
	o := &l.opt
	current, u, how := o.Current, o.UCurrent, "the mean current that was measured, by the rig"
	if !(current > 0) && o.Battery != nil {
		charge, err := o.Battery(res.Amplitude)
		if err == nil && charge > 0 {
			const uCharge = 0.1 // of a reckoned pulse: winding and timing are known no better; common practice, no source
			current, u, how = charge*perDay/86400, uCharge, "the charge per kick reckoned from the rig's winding and supply, not measured"
		}
	}
	if !(current > 0) {
		res.Findings = append(res.Findings, finding.Finding{
			Key: "kick.battery_time", Subject: l.part(), Name: "Time on one battery", Kind: finding.Undecided, Unit: "s", Method: "capacity over mean current",
			Text: "A film does not show what the circuit draws. Measure the mean current from the battery and give it as current_mA of the [[coil]], with capacity_mAh or cell; or give the coil's turns, radius_mm, resistance_ohm and supply_V. " + rule,
		})
		return
	}
	capacity, uCapacity, supply, usual := o.Capacity, 0.1, o.Supply, ""
	if c, ok := cells[o.Cell]; ok {
		n := math.Max(1, o.InSeries)
		if supply == 0 {
			supply = n * c.volt
		}
		if capacity == 0 {
			capacity, uCapacity = c.ampS, uCell
			usual = fmt.Sprintf("The capacity is the usual one of %s, %.0f mA·h (common practice, no source).", c.words, c.ampS/3.6)
		}
	}
	if supply > 0 {
		e := kick.Value * perDay / 86400 / (current * supply)
		f := finding.Normal("kick.efficiency", l.part(), "Share of the battery's energy that reaches the swing", e, e*math.Hypot(u, kick.U/kick.Value), "1", how)
		if e > 1 {
			f.Cautions = append(f.Cautions, "More than all of it cannot reach the swing: the current, the supply or the rig's mass is wrong.")
		}
		res.Findings = append(res.Findings, f)
	}
	if capacity > 0 {
		t := capacity / current
		f := finding.Normal("kick.battery_time", l.part(), "Time on one battery", t, t*math.Hypot(u, uCapacity), "s", "capacity over mean current: "+how)
		f.Cautions = append(f.Cautions, "Self-discharge, falling voltage and what the circuit draws between kicks, where that was not measured, are left out.")
		if usual != "" {
			f.Cautions = append(f.Cautions, usual)
		}
		if t < twoWeeks/4 || t > 4*twoWeeks {
			f.Cautions = append(f.Cautions, "That is far from what the trade reckons with: look at the current and the capacity again. "+rule)
		}
		res.Findings = append(res.Findings, f)
	}
}
