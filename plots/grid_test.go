package plots

import (
	"bytes"
	"image/color"
	"image/png"
	"math"
	"testing"

	"lodeswing/analyze/finding"
)

// Each cell has its colour, in its place: rows of Y upwards, a gap left white.
func TestCellsAreInTheirPlaces(t *testing.T) {
	c := &finding.Curve{
		Key: "map", Title: "A map", X: finding.Axis{Label: "mass", Unit: "kg"}, Y: finding.Axis{Label: "gap", Unit: "m"},
		Grid: &finding.Grid{X: []float64{1, 2}, Y: []float64{0.01, 0.02}, Z: []float64{1, 2, 3, math.NaN()}, Label: "places of rest", Unit: "1"},
	}
	svg, data, err := Curve(c)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Contains(svg, []byte("<image")) {
		t.Error("the SVG holds no picture")
	}
	img, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		t.Fatal(err)
	}
	// The middle of all pixels of each colour, below the key.
	b := img.Bounds()
	middle := map[color.NRGBA][3]float64{}
	for y := b.Dy() / 4; y < b.Dy(); y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			p := color.NRGBAModel.Convert(img.At(x, y)).(color.NRGBA)
			m := middle[p]
			middle[p] = [3]float64{m[0] + float64(x), m[1] + float64(y), m[2] + 1}
		}
	}
	at := func(i int) (x, y float64) {
		m := middle[kinds[i]]
		if m[2] < 1000 {
			t.Fatalf("colour %d fills %g pixels", i, m[2])
		}
		return m[0] / m[2], m[1] / m[2]
	}
	x1, y1 := at(0)
	x2, y2 := at(1)
	x3, y3 := at(2)
	if !(x2 > x1+100 && math.Abs(y2-y1) < 3 && math.Abs(x3-x1) < 3 && y3 < y1-100) {
		t.Errorf("cells lie at (%.0f, %.0f), (%.0f, %.0f), (%.0f, %.0f)", x1, y1, x2, y2, x3, y3)
	}
}

// Shades darken with the value, whatever its range; a yes or no is black on white.
func TestShades(t *testing.T) {
	grid := &finding.Grid{X: []float64{1, 2, 3}, Y: []float64{1}, Z: []float64{1e-3, 0.1, 10}, Label: "power", Unit: "W", Log: true}
	c := &finding.Curve{X: finding.Axis{Unit: "s"}, Y: finding.Axis{Unit: "Hz"}, Grid: grid}
	g := newCells(c, newScale(c, true), newScale(c, false))
	before := 1e9
	for _, z := range grid.Z {
		p := g.palette()[g.index(z)].(color.NRGBA)
		light := 0.299*float64(p.R) + 0.587*float64(p.G) + 0.114*float64(p.B)
		if light >= before {
			t.Errorf("%g is lighter than what is less", z)
		}
		before = light
	}
	c.Grid = &finding.Grid{X: []float64{1, 2}, Y: []float64{1}, Z: []float64{0, 1}, Label: "near", Unit: ""}
	g = newCells(c, newScale(c, true), newScale(c, false))
	if p := g.palette(); p[g.index(0)] != color.Color(background) || p[g.index(1)] != color.Color(ink) {
		t.Errorf("yes and no are %v and %v", p[g.index(1)], p[g.index(0)])
	}
}
