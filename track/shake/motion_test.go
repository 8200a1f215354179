package shake

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Patches of a faint wall that scatter by much more than their noise: the motion's
// stated uncertainty is what it then scatters by, so that a still camera is not said
// to drift.
func TestScatteredPatchesStateMoreUncertainty(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 28))
	const n, runs, scatter = 24, 300, 0.15
	var places [n][2]float64
	for i := range places {
		places[i] = [2]float64{1100 * (rng.Float64() - 0.5), 600 * (rng.Float64() - 0.5)}
	}
	var shift2, stated2, turn2, statedTurn2 float64
	for range runs {
		shifts := make([]shift, n)
		for i, p := range places {
			shifts[i] = shift{x: p[0], y: p[1], du: scatter * rng.NormFloat64(), dv: scatter * rng.NormFloat64(), u: 0.02}
		}
		f, ok := leastSquares(shifts, nil)
		if !ok {
			t.Fatal("no motion")
		}
		shift2 += (f.a*f.a + f.b*f.b) / 2 / runs
		stated2 += f.u * f.u / runs
		turn2 += f.r * f.r / runs
		statedTurn2 += f.uz * f.uz / runs
	}
	// 300 runs tell each ratio to 4 % (shift) and 4 % (turn); four times that is allowed.
	if k := math.Sqrt(shift2 / stated2); math.Abs(k-1) > 0.16 {
		t.Errorf("shifts scatter by %.2f of what is stated", k)
	}
	if k := math.Sqrt(turn2 / statedTurn2); math.Abs(k-1) > 0.16 {
		t.Errorf("turns scatter by %.2f of what is stated", k)
	}
}
