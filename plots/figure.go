package plots

import (
	"bytes"
	"image/png"
	"math"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
)

// drawing is one figure that can be drawn on any canvas of its size.
type drawing struct {
	name    string // of the file, without ending
	key     string // of its first curve; empty for none
	subject string
	title   string
	caption string
	w, h    vg.Length
	draw    func(draw.Canvas)
}

// figureShown is a figure as the report shows it.
type figureShown struct {
	Name, Key, Title, Caption string
	SVG                       []byte
}

func (d *drawing) shown(svg []byte) figureShown {
	return figureShown{d.name, d.key, d.title, d.caption, svg}
}

// svg draws the figure as a stand-alone SVG file.
func (d *drawing) svg() ([]byte, error) {
	c := vgsvg.New(d.w, d.h)
	d.draw(draw.New(c))
	var b bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return nil, err
	}
	return finishSVG(b.Bytes(), d)
}

// png draws the figure for print.
func (d *drawing) png() ([]byte, error) {
	c := vgimg.NewWith(vgimg.UseWH(d.w, d.h), vgimg.UseDPI(pngDPI), vgimg.UseBackgroundColor(background))
	d.draw(draw.New(c))
	var b bytes.Buffer
	err := png.Encode(&b, c.Image())
	return b.Bytes(), err
}

// title is a curve's title with its subject, where the title does not name it.
func title(c *finding.Curve) string {
	if c.Subject == "" || strings.Contains(c.Title, c.Subject) {
		return c.Title
	}
	return c.Title + ": " + c.Subject
}

// curveDrawing draws curves of one subject above each other, with a common
// first axis where there are several.
func curveDrawing(curves []*finding.Curve) drawing {
	d := drawing{name: record.FileName(curves[0].Key, curves[0].Subject), key: curves[0].Key, subject: curves[0].Subject, title: title(curves[0]), w: width}
	for _, c := range curves {
		d.caption = strings.TrimSpace(d.caption + " " + c.Caption)
	}
	panels := make([]*panel, len(curves))
	for i, c := range curves {
		panels[i] = newPanel(c, i > 0, i < len(curves)-1)
	}
	if len(panels) > 1 {
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, p := range panels {
			lo, hi = math.Min(lo, p.plot.X.Min), math.Max(hi, p.plot.X.Max)
		}
		for _, p := range panels {
			p.plot.X.Min, p.plot.X.Max = lo, hi
		}
	}
	head := newHead(d.title, d.w)
	d.h = head.height
	for _, p := range panels {
		d.h += p.height + p.legend.height
	}
	d.h += gap * vg.Length(len(panels)-1)
	d.draw = func(c draw.Canvas) {
		head.draw(c)
		top := c.Max.Y - head.height
		canvases := make([]draw.Canvas, len(panels))
		left, right := vg.Length(0), vg.Length(0)
		for i, p := range panels {
			p.legend.draw(c, top)
			top -= p.legend.height
			canvases[i] = c
			canvases[i].Max.X -= edge
			canvases[i].Max.Y, canvases[i].Min.Y = top, top-p.height
			top -= p.height + gap
			data := p.plot.DataCanvas(canvases[i])
			left = max(left, data.Min.X-c.Min.X)
			right = max(right, c.Max.X-data.Max.X)
		}
		for i, p := range panels {
			data := p.plot.DataCanvas(canvases[i])
			canvases[i].Min.X += left - (data.Min.X - c.Min.X)
			canvases[i].Max.X -= right - (c.Max.X - data.Max.X)
			p.plot.Draw(canvases[i])
		}
	}
	return d
}

// panel is one curve, ready to be drawn.
type panel struct {
	plot   *plot.Plot
	height vg.Length
	legend legend
}

// newPanel makes a panel. low makes it a lower one; bare leaves the first axis'
// numbers to the panel below.
func newPanel(c *finding.Curve, low, bare bool) *panel {
	p := plot.New()
	p.BackgroundColor = nil
	x, y := newScale(c, true), newScale(c, false)
	for _, a := range []struct {
		axis *plot.Axis
		s    axisScale
	}{{&p.X, x}, {&p.Y, y}} {
		a.axis.Label.Text = a.s.label
		a.axis.Label.TextStyle.Font = typeface(labelSize, false)
		a.axis.Label.TextStyle.Color = ink
		a.axis.Label.Padding = 2
		a.axis.Label.TextStyle.Handler = handler()
		a.axis.Tick.Label.Handler = handler()
		a.axis.Tick.Label.Font = typeface(tickSize, false)
		a.axis.Tick.Label.Color = ink
		a.axis.Tick.Length = 3.5
		a.axis.Tick.LineStyle = draw.LineStyle{Color: ink, Width: 0.5}
		a.axis.LineStyle = draw.LineStyle{Color: ink, Width: 0.6}
		a.axis.Padding = 4
	}
	out := &panel{plot: p, height: mainHeight}
	numbers := 7
	switch {
	case low:
		out.height, numbers = lowHeight, 5
	case sameUnit(c):
		out.height = equalScales(&x, &y)
		numbers = max(3, int(out.height/25))
	case strings.Contains(c.Key, "phase"):
		out.height, numbers = 0.9*width, 9
	case c.Grid != nil:
		out.height, numbers = 0.75*width, 9
	}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = x.min, x.max, y.min, y.max
	x, y = x.most(7), y.most(numbers)
	p.X.Tick.Marker, p.Y.Tick.Marker = x, y
	if bare {
		p.X.Label.Text = ""
		p.X.Tick.Marker = unlabelled{p.X.Tick.Marker}
		out.height -= 20
	}
	if over := textWidth(p.Y.Label.Text, p.Y.Label.TextStyle.Font) / (out.height - besides); over > 1 {
		p.Y.Label.TextStyle.Font.Size /= over // else gonum would press the panel
	}
	var g *cells
	if c.Grid != nil {
		g = newCells(c, x, y)
		p.Add(g)
	} else {
		p.Add(lattice{x, y})
	}
	styles := looks(c)
	for i := range c.Lines {
		l := &c.Lines[i]
		if l.Role == finding.Guide {
			p.Add(stroke{line: l, look: styles[i], x: x, y: y})
		}
	}
	for i := range c.Lines {
		l := &c.Lines[i]
		if l.Role != finding.Guide {
			p.Add(stroke{line: l, look: styles[i], x: x, y: y})
		}
	}
	out.legend = newLegend(c, styles)
	if g != nil {
		out.legend.key = newKey(g)
		out.legend.height += out.legend.key.height()
	}
	return out
}

// sameUnit tells whether both axes mean the same, so that neither may be pressed.
func sameUnit(c *finding.Curve) bool {
	return c.X.Unit == c.Y.Unit && c.X.Unit != "" && c.X.Unit != "1" && !c.X.Log && !c.Y.Log
}

// besides is about what numbers, label and margins take of a panel's side.
const besides = vg.Length(46)

// equalScales gives both axes the same unit and widens the ranges so that a
// length is as long along one as along the other. It returns the height of the
// panel that this wants.
func equalScales(x, y *axisScale) vg.Length {
	if xs, ys := x.max-x.min, y.max-y.min; x.factor < y.factor || x.factor == y.factor && xs > ys {
		y.as(x)
	} else {
		x.as(y)
	}
	room := float64(width - besides)
	tall := math.Min(math.Max(room*(y.max-y.min)/(x.max-x.min), 60), float64(width))
	if per := (x.max - x.min) / room; (y.max - y.min) < per*tall {
		y.widen(per * tall)
	} else {
		x.widen((y.max - y.min) / tall * room)
	}
	return vg.Length(tall) + besides
}

// lattice is the faint lines behind the data, at the numbered ticks.
type lattice struct{ x, y axisScale }

func (l lattice) Plot(c draw.Canvas, p *plot.Plot) {
	trX, trY := p.Transforms(&c)
	style := draw.LineStyle{Color: faint, Width: 0.4}
	for _, t := range l.y.Ticks(p.Y.Min, p.Y.Max) {
		if y := trY(t.Value); !t.IsMinor() && t.Value >= p.Y.Min && t.Value <= p.Y.Max {
			c.StrokeLine2(style, c.Min.X, y, c.Max.X, y)
		}
	}
	for _, t := range l.x.Ticks(p.X.Min, p.X.Max) {
		if x := trX(t.Value); !t.IsMinor() && t.Value >= p.X.Min && t.Value <= p.X.Max {
			c.StrokeLine2(style, x, c.Min.Y, x, c.Max.Y)
		}
	}
}

// head is a figure's title, wrapped to its width.
type head struct {
	lines  []string
	height vg.Length
}

func newHead(title string, w vg.Length) head {
	h := head{lines: wrap(title, w-4, typeface(titleSize, true))}
	h.height = vg.Length(len(h.lines))*titleSize*1.25 + 4
	return h
}

func (h head) draw(c draw.Canvas) {
	style := textStyle(titleSize, true)
	y := c.Max.Y - 1
	for _, l := range h.lines {
		c.FillText(style, vg.Point{X: c.Min.X + 2, Y: y}, l)
		y -= titleSize * 1.25
	}
}

// wrap breaks a text into lines of at most that width, at spaces where it can.
func wrap(s string, w vg.Length, f font.Font) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(s) {
		for textWidth(word, f) > w { // a name longer than the line
			cut := len(word) - 1
			for cut > 1 && (textWidth(word[:cut], f) > w || !utf8Start(word, cut)) {
				cut--
			}
			if line != "" {
				lines = append(lines, line)
				line = ""
			}
			lines = append(lines, word[:cut])
			word = word[cut:]
		}
		switch {
		case line == "":
			line = word
		case textWidth(line+" "+word, f) > w:
			lines = append(lines, line)
			line = word
		default:
			line += " " + word
		}
	}
	return append(lines, line)
}

func utf8Start(s string, i int) bool { return s[i]&0xc0 != 0x80 }
