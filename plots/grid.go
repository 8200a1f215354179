package plots

import (
	"image"
	"image/color"
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lodeswing/analyze/finding"
)

// shades run from light to dark, so that they keep their order in grey print and
// for every kind of colour vision.
var shades = []color.NRGBA{
	{0xf5, 0xf1, 0xe3, 0xff}, {0xb9, 0xd9, 0xe8, 0xff}, {0x56, 0xa5, 0xd4, 0xff}, {0x00, 0x72, 0xb2, 0xff}, {0x0a, 0x42, 0x73, 0xff}, {0x10, 0x1d, 0x36, 0xff},
}

// kinds are for cells that name one of a few things.
var kinds = []color.NRGBA{
	{0x56, 0xb4, 0xe9, 0xff},
	{0xe6, 0x9f, 0x00, 0xff},
	{0x00, 0x72, 0xb2, 0xff},
	{0xf0, 0xe4, 0x42, 0xff},
	{0x00, 0x9e, 0x73, 0xff},
	{0xcc, 0x79, 0xa7, 0xff},
	{0xd5, 0x5e, 0x00, 0xff},
	{0x22, 0x22, 0x22, 0xff},
}

const shadeCount = 240

// cells draws a curve's grid: a few whole numbers in a colour each, a yes or no in
// black on white, all else in shades.
type cells struct {
	grid   *finding.Grid
	x, y   axisScale
	values []float64 // the whole numbers, when they are few; nil for shades
	lo, hi float64   // of what is shaded, places on its scale
}

func newCells(c *finding.Curve, x, y axisScale) *cells {
	g := &cells{grid: c.Grid, x: x, y: y, lo: math.Inf(1), hi: math.Inf(-1)}
	whole := map[float64]bool{}
	for _, z := range c.Grid.Z {
		v := g.level(z)
		if math.IsNaN(v) {
			continue
		}
		g.lo, g.hi = math.Min(g.lo, v), math.Max(g.hi, v)
		if z != math.Trunc(z) {
			whole[math.NaN()] = true // not whole: more and more of them
		} else if len(whole) <= len(kinds) {
			whole[z] = true
		}
	}
	if n := len(whole); n >= 1 && n <= len(kinds) && !c.Grid.Log {
		for v := g.lo; v <= g.hi; v++ {
			if whole[v] {
				g.values = append(g.values, v)
			}
		}
		if len(g.values) != n {
			g.values = nil
		}
	}
	return g
}

// level is a cell's place on the shades' scale.
func (g *cells) level(z float64) float64 {
	if g.grid.Log {
		z = math.Log10(z)
	}
	if math.IsInf(z, 0) {
		return math.NaN()
	}
	return z
}

// yesNo tells whether the cells say no more than 0 or 1, as in a recurrence plot.
func (g *cells) yesNo() bool {
	return len(g.values) == 2 && g.values[0] == 0 && g.values[1] == 1
}

// palette has no colour first, for cells without a value.
func (g *cells) palette() color.Palette {
	p := color.Palette{color.NRGBA{}}
	switch {
	case g.yesNo():
		p = append(p, background, ink)
	case g.values != nil:
		for i := range g.values {
			p = append(p, kinds[i])
		}
	default:
		for i := range shadeCount {
			p = append(p, shade(float64(i)/(shadeCount-1)))
		}
	}
	return p
}

func shade(u float64) color.NRGBA {
	u *= float64(len(shades) - 1)
	i := min(int(u), len(shades)-2)
	u -= float64(i)
	mix := func(a, b uint8) uint8 { return uint8(math.Round(float64(a) + u*(float64(b)-float64(a)))) }
	a, b := shades[i], shades[i+1]
	return color.NRGBA{mix(a.R, b.R), mix(a.G, b.G), mix(a.B, b.B), 0xff}
}

// index is a cell's colour in the palette.
func (g *cells) index(z float64) uint8 {
	v := g.level(z)
	if math.IsNaN(v) {
		return 0
	}
	if g.values != nil {
		for i, w := range g.values {
			if w == v {
				return uint8(i + 1)
			}
		}
		return 0
	}
	if g.hi <= g.lo {
		return 1 + shadeCount/2
	}
	return uint8(1 + math.Round((v-g.lo)/(g.hi-g.lo)*(shadeCount-1)))
}

// Plot implements plot.Plotter. The picture has the resolution of the PNG, so
// that cells keep their edges.
func (g *cells) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	left, right := edges(g.grid.X)
	low, high := edges(g.grid.Y)
	box := vg.Rectangle{
		Min: vg.Point{X: max(trX(g.x.place(left)), c.Min.X), Y: max(trY(g.y.place(low)), c.Min.Y)},
		Max: vg.Point{X: min(trX(g.x.place(right)), c.Max.X), Y: min(trY(g.y.place(high)), c.Max.Y)},
	}
	scale := pngDPI / vg.Inch.Points()
	w, h := int(math.Ceil(box.Size().X.Points()*scale)), int(math.Ceil(box.Size().Y.Points()*scale))
	if w < 1 || h < 1 || len(g.grid.Z) < len(g.grid.X)*len(g.grid.Y) {
		return
	}
	img := image.NewPaletted(image.Rect(0, 0, w, h), g.palette())
	nx, ny := len(g.grid.X), len(g.grid.Y)
	for v := range h {
		j := min((2*(h-1-v)+1)*ny/(2*h), ny-1)
		for u := range w {
			i := min((2*u+1)*nx/(2*w), nx-1)
			img.Pix[v*img.Stride+u] = g.index(g.grid.Z[j*nx+i])
		}
	}
	c.DrawImage(box, img)
}

// edges are where the first cell begins and the last one ends.
func edges(middles []float64) (from, to float64) {
	n := len(middles)
	switch n {
	case 0:
		return 0, 1
	case 1:
		return middles[0] - 0.5, middles[0] + 0.5
	}
	half := (middles[n-1] - middles[0]) / float64(n-1) / 2
	return middles[0] - half, middles[n-1] + half
}

// key is what the colours mean, above the picture.
type key struct {
	cells *cells
	label string
	from  string // the scale's ends, as shown
	to    string
	names []string // of the whole numbers
}

const keyHeight = 2*tickSize + 8

func newKey(g *cells) *key {
	axis := finding.Axis{Label: g.grid.Label, Unit: g.grid.Unit}
	lo, hi := g.lo, g.hi
	if g.grid.Log {
		lo, hi = math.Pow(10, lo), math.Pow(10, hi)
	}
	unit, factor := axis.Shown(math.Max(math.Abs(lo), math.Abs(hi)))
	k := &key{cells: g, label: axisLabel(g.grid.Label, unit, 0)}
	if g.values != nil {
		for _, v := range g.values {
			k.names = append(k.names, strconv.FormatFloat(v, 'f', -1, 64))
		}
		return k
	}
	if lo > hi {
		k.label += ": none"
		return k
	}
	digits := 3
	if lo != 0 && hi != lo { // enough of them to tell the ends apart
		digits = max(3, min(8, int(math.Ceil(math.Log10(math.Max(math.Abs(lo), math.Abs(hi))/(hi-lo))))+2))
	}
	number := func(x float64) string {
		s, power, ok := strings.Cut(strconv.FormatFloat(x*factor, 'g', digits, 64), "e")
		if ok {
			n, _ := strconv.Atoi(power) // what FormatFloat writes
			s += " × 10" + finding.Superscript(n)
		}
		return strings.Replace(s, "-", "−", 1)
	}
	k.from, k.to = number(lo), number(hi)
	return k
}

func (k *key) draw(c draw.Canvas, top vg.Length) {
	style := textStyle(tickSize, false)
	f := typeface(tickSize, false)
	x := c.Min.X + 2
	c.FillText(style, vg.Point{X: x, Y: top}, k.label)
	y := top - tickSize - 4
	box := func(x, w vg.Length, ink color.Color) {
		c.SetColor(ink)
		var p vg.Path
		p.Move(vg.Point{X: x, Y: y})
		p.Line(vg.Point{X: x + w, Y: y})
		p.Line(vg.Point{X: x + w, Y: y - tickSize})
		p.Line(vg.Point{X: x, Y: y - tickSize})
		p.Close()
		c.Fill(p)
		if ink == color.Color(background) {
			c.SetColor(guideGrey)
			c.SetLineWidth(0.5)
			c.Stroke(p)
		}
	}
	palette := k.cells.palette()
	switch {
	case k.names != nil:
		for i, name := range k.names {
			box(x, 10, palette[i+1])
			c.FillText(style, vg.Point{X: x + 13, Y: y}, name)
			x += 13 + textWidth(name, f) + 10
		}
	case k.from != "":
		c.FillText(style, vg.Point{X: x, Y: y}, k.from)
		x += textWidth(k.from, f) + 5
		const steps, each = 40, vg.Length(3)
		for i := range steps {
			box(x+vg.Length(i)*each, each+0.3, shade(float64(i)/(steps-1)))
		}
		c.FillText(style, vg.Point{X: x + steps*each + 5, Y: y}, k.to)
	}
}

// height is what the key takes.
func (k *key) height() vg.Length {
	if k.names == nil && k.from == "" {
		return tickSize + 6
	}
	return keyHeight
}
