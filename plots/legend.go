package plots

import (
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lodeswing/analyze/finding"
)

// legend names the lines, in rows above the panel, where it covers no data.
type legend struct {
	items  []legendItem
	height vg.Length
	key    *key // what a grid's colours mean, below the items; nil for none
}

type legendItem struct {
	name string
	look look
	band bool
	x    vg.Length
	row  int
}

const (
	swatch    = vg.Length(20)
	legendRow = tickSize * 1.4
)

func newLegend(c *finding.Curve, styles []look) legend {
	var l legend
	seen := map[string]bool{}
	x, row := vg.Length(2), 0
	f := typeface(tickSize, false)
	for i, line := range c.Lines {
		if line.Name == "" || seen[line.Name] {
			continue
		}
		seen[line.Name] = true
		w := swatch + 4 + textWidth(line.Name, f) + 12
		if x > 2 && x+w > width {
			x, row = 2, row+1
		}
		l.items = append(l.items, legendItem{line.Name, styles[i], line.Lo != nil, x, row})
		x += w
	}
	if len(l.items) < 2 && c.Grid == nil || len(l.items) == 0 {
		l.items = nil // the title says what a single line is
		return l
	}
	l.height = vg.Length(row+1)*legendRow + 3
	return l
}

func (l legend) draw(c draw.Canvas, top vg.Length) {
	if l.key != nil {
		l.key.draw(c, top-l.height+l.key.height())
	}
	style := textStyle(tickSize, false)
	for _, it := range l.items {
		y := top - vg.Length(it.row)*legendRow
		x := c.Min.X + it.x
		mid := y - tickSize*0.55
		if it.band && !it.look.rings {
			fill := it.look.ink
			fill.A = bandAlpha
			c.FillPolygon(fill, []vg.Point{{X: x, Y: mid - 3}, {X: x + swatch, Y: mid - 3}, {X: x + swatch, Y: mid + 3}, {X: x, Y: mid + 3}})
		}
		switch {
		case it.look.rings:
			ring(c, it.look, vg.Point{X: x + swatch/2, Y: mid})
		case it.look.dots:
			for k := range 3 {
				fillDots(c, it.look.ink, it.look.size, []vg.Point{{X: x + 4 + vg.Length(k)*6, Y: mid}})
			}
		default:
			c.StrokeLine2(it.look.line(), x, mid, x+swatch, mid)
		}
		c.FillText(style, vg.Point{X: x + swatch + 4, Y: y}, it.name)
	}
}
