package analyze

import (
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/analyze/record"
)

// Two clips of one steady swing are alike wherever they begin; a swing of half the
// size is never where the first is; without a part in common it is said so.
func TestTwoUnits(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	clip := func(part string, size, phase, seconds, rate float64) *record.Record {
		a := record.Angles{Part: part}
		for i := range int(seconds * rate) {
			s := float64(i) / rate
			a.T, a.Angle, a.U = append(a.T, s), append(a.Angle, size*math.Sin(5.9*s+phase)+1e-3*rng.NormFloat64()), append(a.U, 1e-3)
		}
		return &record.Record{Angles: []record.Angles{a}}
	}
	first := clip("swing", 0.4, 0, 30, 60)
	for _, c := range []struct {
		name   string
		other  *record.Record
		lo, hi float64
	}{
		{"the same", clip("swing", 0.4, 1, 25, 50), 0.95, 1.05},
		{"half the size", clip("swing", 0.2, 1, 25, 60), 0, 0.01},
	} {
		fs, plot, err := TwoUnits(t.Context(), first, c.other)
		if err != nil {
			t.Fatal(err)
		}
		t.Log(c.name, fs[0].Value, fs[0].U)
		if v := fs[0].Value; v < c.lo || v > c.hi || math.IsNaN(fs[0].U) {
			t.Errorf("%s: likeness %v ± %v", c.name, v, fs[0].U)
		}
		if plot == nil || plot.Grid == nil {
			t.Errorf("%s: no plot", c.name)
		}
	}
	if _, _, err := TwoUnits(t.Context(), first, clip("vane", 0.4, 0, 30, 60)); err == nil {
		t.Error("two different parts were compared")
	}
}
