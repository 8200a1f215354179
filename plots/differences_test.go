package plots

import (
	"strings"
	"testing"
)

// The figure holds each name and a scale that holds what differs; what lies beyond it
// is cut off, not drawn at a wrong place.
func TestDifferencesFigure(t *testing.T) {
	svg, png, err := Differences("How much new differs from old", "Two windings.", []Change{
		{Name: "swing: Energy of one kick", Value: -0.12, Lo: -0.16, Hi: -0.08, Differs: true, Wide: [2]float64{-0.3, 0.05}},
		{Name: "swing: Decay rate of line 2", Value: 3, Lo: -2, Hi: 8, Wide: [2]float64{-2, 8}},
	})
	if err != nil || len(png) == 0 {
		t.Fatal(err)
	}
	text := string(svg)
	for _, want := range []string{"How much new differs from old", "swing: Energy of one kick", "swing: Decay rate of line 2", "difference, %", "−20", "+20"} {
		if !strings.Contains(text, want) {
			t.Errorf("the figure lacks %q", want)
		}
	}
	if strings.Contains(text, "300") || strings.Contains(text, "+800") {
		t.Error("the scale follows what is hardly known")
	}
	for _, c := range []struct{ x, want float64 }{{0.3, 0.5}, {1.01, 2}, {7, 10}, {0, 1}} {
		if got := niceStep(c.x); got != c.want {
			t.Errorf("step of %g is %g, want %g", c.x, got, c.want)
		}
	}
}
