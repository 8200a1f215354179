package toy

import (
	"math"
	"testing"

	"lodeswing/track/rig"
)

// Deviation undoes Displace, for hinges and ball joints, over large turns too.
func TestDisplaceAndDeviation(t *testing.T) {
	r := &rig.Rig{Parts: []rig.Part{
		{Name: "arm", Joint: "ball", CentreM: []float64{0, -0.2}, MassKg: rig.Value{V: 0.05, Set: true}},
		{Name: "vane", On: "arm", Joint: "pin", PivotM: []float64{0, -0.2}, CentreM: []float64{0, -0.1}, MassKg: rig.Value{V: 0.05, Set: true}},
	}}
	m, err := New(r)
	if err != nil {
		t.Fatal(err)
	}
	a := m.Rest()
	m.SetBall(a, 0, 0.4, 1, 0.2, 3, -2)
	m.SetAngle(a, 1, 2, -1)
	want := []float64{0.3, -1.1, 0.7, 4, 1, 2, -3, 0.5}
	b := append([]float64(nil), a...)
	m.Displace(b, want)
	got := make([]float64, len(want))
	m.Deviation(a, b, got)
	for i := range want {
		if math.Abs(got[i]-want[i]) > 1e-12 {
			t.Errorf("deviation %d is %g, not %g", i, got[i], want[i])
		}
	}
}
