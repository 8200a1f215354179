package decay

import (
	"math"
	"testing"
)

func TestTheDrawnModelRunsOnThroughGaps(t *testing.T) {
	var in []float64
	for k := range 100 {
		if k < 40 || k >= 60 {
			in = append(in, float64(k)/60+1e-4*math.Sin(float64(k)))
		}
	}
	out := unbroken(in)
	if len(out) != 100 {
		t.Errorf("%d times, want 100", len(out))
	}
	for i := 1; i < len(out); i++ {
		if d := out[i] - out[i-1]; d <= 0 || d > 1.1/60 {
			t.Errorf("step %d is %v s", i, d)
		}
	}
}
