package record

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
)

// A curve's grid of cells comes back with it, gaps and all; a table that lost a
// cell is refused.
func TestAGridReadsBack(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "result")
	want := &finding.Grid{
		X: []float64{0.1, 0.2, 0.30000000000000004}, Y: []float64{-1, 1}, Z: []float64{1, math.NaN(), 3, 4, 5, 1.0 / 3},
		Label: "period", Unit: "s", Log: true,
	}
	rec := &Record{Curves: []finding.Curve{
		{Key: "map", Title: "A map", X: finding.Axis{Label: "a", Unit: "m"}, Y: finding.Axis{Label: "b", Unit: "kg"}, Grid: want},
		{Key: "line", Title: "A line", Lines: []finding.Line{{Name: "l", Role: finding.Model, X: []float64{1}, Y: []float64{2}}}},
	}}
	if err := Write(t.Context(), dir, rec); err != nil {
		t.Fatal(err)
	}
	back, err := Read(dir)
	if err != nil {
		t.Fatal(err)
	}
	if len(back.Curves) != 2 || back.Curves[0].Grid == nil || back.Curves[1].Grid != nil {
		t.Fatalf("curves came back as %+v", back.Curves)
	}
	got := back.Curves[0].Grid
	if got.Label != want.Label || got.Unit != want.Unit || got.Log != want.Log || len(got.X) != 3 || len(got.Y) != 2 {
		t.Errorf("the grid came back as %+v", got)
	}
	for i, z := range want.Z {
		if got.Z[i] != z && !(math.IsNaN(z) && math.IsNaN(got.Z[i])) {
			t.Errorf("cell %d came back as %v, not %v", i, got.Z[i], z)
		}
	}
	file := filepath.Join(dir, "curves", "map-cells.csv")
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	cut := data[:strings.LastIndexByte(strings.TrimSpace(string(data)), '\n')+1]
	if err := os.WriteFile(file, cut, 0o666); err != nil {
		t.Fatal(err)
	}
	if _, err := Read(dir); err == nil || !strings.Contains(err.Error(), "no whole rows") {
		t.Errorf("a table that lost a cell: %v", err)
	}
}
