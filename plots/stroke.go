package plots

import (
	"image"
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lodeswing/analyze/finding"
)

const (
	dotSize = vg.Length(1.5)
	column  = vg.Length(0.4) // what is closer cannot be told apart: half a pixel on a screen, 1.7 in the PNG
	// tooMany dots are drawn as a picture, which then is smaller than its shapes.
	tooMany = 6000
)

func (l look) line() draw.LineStyle {
	return draw.LineStyle{Color: l.ink, Width: l.width, Dashes: l.dash}
}

// stroke draws one line of a curve: its band, then the line, dots or marks.
type stroke struct {
	line *finding.Line
	look look
	x, y axisScale
}

// Plot implements plot.Plotter.
func (s stroke) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	n := min(len(s.line.X), len(s.line.Y))
	pts := make([]vg.Point, n)
	for i := range n {
		pts[i] = vg.Point{X: s.put(trX, s.x, s.line.X[i]), Y: s.put(trY, s.y, s.line.Y[i])}
	}
	if s.line.Lo != nil && s.line.Hi != nil {
		lo, hi := make([]vg.Point, n), make([]vg.Point, n)
		for i := range n {
			lo[i] = vg.Point{X: pts[i].X, Y: nan}
			hi[i] = lo[i]
			if i < len(s.line.Lo) && i < len(s.line.Hi) {
				lo[i].Y, hi[i].Y = s.put(trY, s.y, s.line.Lo[i]), s.put(trY, s.y, s.line.Hi[i])
			}
		}
		if s.look.rings || s.look.dots && n <= 60 {
			for i := range n {
				if ok(lo[i]) && ok(hi[i]) {
					c.StrokeLine2(draw.LineStyle{Color: s.look.ink, Width: 0.7}, lo[i].X, lo[i].Y, hi[i].X, hi[i].Y)
				}
			}
		} else {
			band(c, s.look.ink, lo, hi)
		}
	}
	switch {
	case s.look.rings && n <= 400:
		for _, pt := range pts {
			if ok(pt) {
				ring(c, s.look, pt)
			}
		}
	case s.look.rings || s.look.dots:
		cloud(c, s.look.ink, s.look.size, pts)
	default:
		for _, piece := range runs(pts) {
			if len(piece) == 1 {
				fillDots(c, s.look.ink, dotSize, piece)
				continue
			}
			strokeLine(c, s.look.line(), thin(piece))
		}
	}
}

var nan = vg.Length(math.NaN())

// put is where a value comes to lie; NaN where it cannot be drawn. What lies
// far outside is kept near the edge, so that a line towards it keeps its slope.
func (s stroke) put(tr func(float64) vg.Length, a axisScale, v float64) vg.Length {
	v = a.place(v)
	if math.IsNaN(v) {
		return nan
	}
	return min(max(tr(v), -2000), 4000)
}

func ok(p vg.Point) bool { return !math.IsNaN(float64(p.X)) && !math.IsNaN(float64(p.Y)) }

// runs splits points at gaps.
func runs(pts []vg.Point) [][]vg.Point {
	var out [][]vg.Point
	from := 0
	for i := 0; i <= len(pts); i++ {
		if i == len(pts) || !ok(pts[i]) {
			if i > from {
				out = append(out, pts[from:i])
			}
			from = i + 1
		}
	}
	return out
}

// thin leaves out what cannot be seen. Of a line that runs along the first axis
// it keeps, in each half-pixel column, the first, least, greatest and last
// point, so that no peak is lost; of any other line the points that lie more
// than half a pixel from the one before.
func thin(pts []vg.Point) []vg.Point {
	if len(pts) < 1000 {
		return pts
	}
	along := true
	for i := 1; i < len(pts); i++ {
		if pts[i].X < pts[i-1].X {
			along = false
			break
		}
	}
	out := make([]vg.Point, 0, 4096)
	if !along {
		last := pts[0]
		out = append(out, last)
		for _, p := range pts[1:] {
			if math.Hypot(float64(p.X-last.X), float64(p.Y-last.Y)) >= float64(column) {
				out = append(out, p)
				last = p
			}
		}
		return append(out, pts[len(pts)-1])
	}
	for i := 0; i < len(pts); {
		cell := math.Floor(float64(pts[i].X / column))
		lo, hi, j := i, i, i
		for j < len(pts) && math.Floor(float64(pts[j].X/column)) == cell {
			if pts[j].Y < pts[lo].Y {
				lo = j
			}
			if pts[j].Y > pts[hi].Y {
				hi = j
			}
			j++
		}
		prev := -1
		for _, k := range []int{i, min(lo, hi), max(lo, hi), j - 1} {
			if k > prev {
				out = append(out, pts[k])
				prev = k
			}
		}
		i = j
	}
	return out
}

// strokeLine draws a long solid line in pieces: the time that the raster takes
// for one shape grows with the square of how often it crosses a row.
func strokeLine(c draw.Canvas, style draw.LineStyle, pts []vg.Point) {
	const piece = 200
	if len(style.Dashes) == 0 {
		for len(pts) > piece {
			c.StrokeLines(style, pts[:piece])
			pts = pts[piece-1:]
		}
	}
	c.StrokeLines(style, pts)
}

// band fills the area between two lines, piece by piece.
func band(c draw.Canvas, ink color.NRGBA, lo, hi []vg.Point) {
	ink.A = bandAlpha
	for i := range lo {
		if !ok(lo[i]) || !ok(hi[i]) {
			lo[i].Y, hi[i].Y = nan, nan
		}
	}
	los, his := runs(lo), runs(hi)
	for k := range los {
		a, b := thin(los[k]), thin(his[k])
		polygon := append([]vg.Point(nil), a...)
		for i := len(b) - 1; i >= 0; i-- {
			polygon = append(polygon, b[i])
		}
		if len(polygon) > 2 {
			c.FillPolygon(ink, c.ClipPolygonXY(polygon))
		}
	}
}

// ring is an open mark that shows what lies behind it.
func ring(c draw.Canvas, l look, at vg.Point) {
	c.SetColor(l.ink)
	c.SetLineWidth(l.width)
	c.SetLineDash(nil, 0)
	var p vg.Path
	const r = vg.Length(2.3)
	p.Move(vg.Point{X: at.X + r, Y: at.Y})
	p.Arc(at, r, 0, 2*math.Pi)
	p.Close()
	c.Stroke(p)
}

// cloud draws points as dots; those that fall on the same spot once.
func cloud(c draw.Canvas, ink color.NRGBA, size vg.Length, pts []vg.Point) {
	type spot struct{ x, y int32 }
	seen := make(map[spot]bool, min(len(pts), 1<<16))
	kept := make([]vg.Point, 0, min(len(pts), 1<<16))
	for _, p := range pts {
		if !ok(p) || !c.Contains(p) {
			continue
		}
		s := spot{int32(p.X / column), int32(p.Y / column)}
		if !seen[s] {
			seen[s] = true
			kept = append(kept, p)
		}
	}
	if len(kept) > tooMany/4 {
		size *= 0.7
	}
	if len(kept) <= tooMany {
		fillDots(c, ink, size, kept)
		return
	}
	c.DrawImage(c.Rectangle, spots(c.Rectangle, ink, kept))
}

// spots is a picture of dots within r, clear between them.
func spots(r vg.Rectangle, ink color.NRGBA, pts []vg.Point) image.Image {
	scale := pngDPI / vg.Inch.Points()
	w, h := int(math.Ceil(r.Size().X.Points()*scale)), int(math.Ceil(r.Size().Y.Points()*scale))
	img := image.NewPaletted(image.Rect(0, 0, w, h), color.Palette{color.NRGBA{}, ink})
	for _, p := range pts {
		x, y := int((p.X-r.Min.X).Points()*scale), int((r.Max.Y-p.Y).Points()*scale)
		for _, d := range [4]image.Point{{0, 0}, {1, 0}, {0, 1}, {1, 1}} {
			if at := image.Pt(x+d.X, y+d.Y); at.In(img.Rect) {
				img.SetColorIndex(at.X, at.Y, 1)
			}
		}
	}
	return img
}

// fillDots draws small squares as one shape, which keeps the file small.
func fillDots(c draw.Canvas, ink color.NRGBA, size vg.Length, pts []vg.Point) {
	if len(pts) == 0 {
		return
	}
	c.SetColor(ink)
	r := size / 2
	var p vg.Path
	for _, at := range pts {
		p.Move(vg.Point{X: at.X - r, Y: at.Y - r})
		p.Line(vg.Point{X: at.X + r, Y: at.Y - r})
		p.Line(vg.Point{X: at.X + r, Y: at.Y + r})
		p.Line(vg.Point{X: at.X - r, Y: at.Y + r})
		p.Close()
	}
	c.Fill(p)
}
