package toy

import (
	"strings"
	"testing"

	"lodeswing/track/rig"
)

// Rigs that no toy can be built from get an error that names the table and key.
// (Rigs from a file are refused before that, with the line: track/rig.)
func TestBadRigs(t *testing.T) {
	magnets := []rig.Magnet{
		{Name: "a", Part: "arm", AtM: []float64{0, -0.2}, Axis: []float64{0, 1}, Moment: number(1)},
		{Name: "b", Part: "base", AtM: []float64{0, -0.3}, Axis: []float64{0, 1}, Moment: number(1)},
	}
	for says, spoil := range map[string]func(r *rig.Rig){
		"no [[part]]":               func(r *rig.Rig) { r.Parts = nil },
		`"arm" is on itself`:        func(r *rig.Rig) { r.Parts[0].On = "arm" },
		`is on "hull"`:              func(r *rig.Rig) { r.Parts[0].On = "hull" },
		"carry each other in a rin": func(r *rig.Rig) { r.Parts[0].On = "b"; r.Parts = append(r.Parts, rig.Part{Name: "b", On: "arm"}) },
		"used twice":                func(r *rig.Rig) { r.Parts = append(r.Parts, r.Parts[0]) },
		"mass_g is -0.1":            func(r *rig.Rig) { r.Parts[0].MassKg = number(-0.1) },
		"viscous is -1":             func(r *rig.Rig) { r.Parts[0].Friction.Viscous = number(-1) },
		"neither mass_g nor inerti": func(r *rig.Rig) { r.Parts[0].MassKg = rig.Value{} },
		"less than mass × distance": func(r *rig.Rig) { r.Parts[0].Inertia = number(1e-3) },
		"on its axis and no inerti": func(r *rig.Rig) { r.Parts[0].CentreM = nil },
		"spring on a ball joint": func(r *rig.Rig) {
			r.Parts[0].Joint, r.Parts[0].Spring = "ball", rig.Spring{Rate: number(1)}
		},
		"upright on a ball joint":    func(r *rig.Rig) { r.Parts[0].Joint, r.Parts[0].Upright = "ball", true },
		"head at negative z":         func(r *rig.Rig) { r.Parts[0].Upright, r.Parts[0].CentreM = true, []float64{0, 0.1} },
		`joint must be "hinge"`:      func(r *rig.Rig) { r.Parts[0].Joint = "hook" },
		`sits on part "leg"`:         func(r *rig.Rig) { r.Bobs[0].Part = "leg" },
		`"b" is in the same place a`: func(r *rig.Rig) { r.Magnets[1].Part, r.Magnets[1].AtM = "arm", r.Magnets[0].AtM },
		"are in the same place when": func(r *rig.Rig) { r.Magnets[1].AtM = r.Magnets[0].AtM },
		"axis must point somewhere":  func(r *rig.Rig) { r.Magnets[0].Axis = []float64{0, 0} },
		`on part "oar"`:              func(r *rig.Rig) { r.Magnets[0].Part = "oar" },
		"needs a diameter":           func(r *rig.Rig) { r.Magnets[0].Cylinder = &rig.Cylinder{HeightM: number(0.01)} },
		"no moving magnet to sense":  func(r *rig.Rig) { r.Magnets = nil; r.Coils = []rig.Coil{{AtM: []float64{0, -0.3}, KickJ: number(1)}} },
		"says nothing of its kick":   func(r *rig.Rig) { r.Coils = []rig.Coil{{AtM: []float64{0, -0.3}}} },
		"degrees of freedom, more": func(r *rig.Rig) {
			for _, n := range []string{"p", "q", "r", "s"} {
				p := r.Parts[0]
				p.Name, p.Joint, p.PivotM = n, "ball", []float64{float64(len(n)), float64(len(r.Parts)), 0}
				r.Parts = append(r.Parts, p)
			}
		},
	} {
		r := pendulum()
		r.Magnets = append([]rig.Magnet(nil), magnets...)
		spoil(r)
		m, err := New(r)
		if err == nil || m != nil || !strings.Contains(err.Error(), says) {
			t.Errorf("error %v does not say %q", err, says)
		}
	}
}

// A number made impossible later is told when the toy is to move, and a motion
// into a singular place ends with an error, not a hang.
func TestBadNumbersLater(t *testing.T) {
	m := mustNew(t, pendulum())
	i, err := m.Index("arm.inertia")
	if err != nil {
		t.Fatal(err)
	}
	m.Set(i, -1)
	y := m.Rest()
	if _, err := m.Simulate(t.Context(), y, 1, Options{}); err == nil || !strings.Contains(err.Error(), "inertia") {
		t.Errorf("a negative inertia: %v", err)
	}
	if _, err := m.Simulate(t.Context(), y[:1], 1, Options{}); err == nil || !strings.Contains(err.Error(), "2 numbers") {
		t.Errorf("a short state: %v", err)
	}
	if _, err := m.Index("arm.weight"); err == nil || !strings.Contains(err.Error(), "arm.mass") {
		t.Errorf("an unknown number: %v", err)
	}
	// Two dipoles that meet head on.
	r := pendulum()
	r.Magnets = []rig.Magnet{
		{Name: "a", Part: "arm", AtM: []float64{0, -0.25}, Axis: []float64{0, -1}, Moment: number(2)},
		{Name: "b", Part: "base", AtM: []float64{0.05, 0.0005, -0.2449489743}, Axis: []float64{0, 1}, Moment: number(2)},
	}
	if m, err = New(r); err != nil {
		t.Fatal(err)
	}
	y = m.Rest()
	m.SetAngle(y, 0, 0.1, 0)
	if _, err := m.Simulate(t.Context(), y, 20, Options{}); err == nil || !strings.Contains(err.Error(), `"a" and "b" of "pendulum" meet`) {
		t.Errorf("magnets that meet: %v", err)
	}
}
