package board

import (
	"bytes"
	"fmt"
	"image/color"
	"io"
	"math"
	"strings"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Paper is a sheet's size, upright, in m.
type Paper struct {
	Name          string
	Width, Height float64
}

// Papers are the sheets that a target can be drawn for: ISO 216 A4 and ANSI
// Letter (8.5 × 11 inch).
var Papers = []Paper{
	{"a4", 0.210, 0.297},
	{"letter", 0.2159, 0.2794},
}

const (
	sideMM   = 12.0 // white at the sheet's sides; most printers leave 5 mm
	headMM   = 34.0 // from the sheet's top to the board
	footMM   = 110.0
	mostCols = 17 // more squares tell no more and are slower to find
	mostRows = 12
)

// Fit gives the target with squares of that side (m) that fills the sheet.
func Fit(p Paper, squareM float64) (Spec, error) {
	wide := int(math.Floor((p.Width*1e3-2*sideMM)/(squareM*1e3) + 1e-9))
	high := int(math.Floor((p.Height*1e3-headMM-footMM)/(squareM*1e3) + 1e-9))
	s := Spec{SquareM: squareM}
	s.Cols, s.Rows = min(wide, mostCols), min(high, mostRows)
	s.Cols -= 1 - s.Cols%2
	s.Rows -= s.Rows % 2
	least := 4e-3
	most := math.Min((p.Width-2*sideMM*1e-3)/leastCols, (p.Height-(headMM+footMM)*1e-3)/leastRows)
	if !(squareM >= least) || squareM > most {
		return s, fmt.Errorf("squares of %g mm make no target on %s paper: choose 4 to %.0f mm", squareM*1e3, p.Name, math.Floor(most*1e3))
	}
	return s, s.check()
}

// Draw writes the target as "svg" or "pdf", true to size, for a sheet of paper.
func (s Spec) Draw(w io.Writer, format string, p Paper) error {
	if err := s.check(); err != nil {
		return err
	}
	width, height := vg.Length(p.Width*1e3)*vg.Millimeter, vg.Length(p.Height*1e3)*vg.Millimeter
	switch format {
	case "pdf":
		c := vgpdf.New(width, height)
		s.draw(&sheet{c, p})
		_, err := c.WriteTo(w)
		return err
	case "svg":
		c := vgsvg.New(width, height)
		s.draw(&sheet{c, p})
		var b bytes.Buffer
		if _, err := c.WriteTo(&b); err != nil {
			return err
		}
		// The sheet's size in mm, and faces that nearly every system has one of.
		text := strings.NewReplacer(
			fmt.Sprintf(`width="%.5gpt" height="%.5gpt"`, width.Points(), height.Points()),
			fmt.Sprintf(`width="%gmm" height="%gmm"`, p.Width*1e3, p.Height*1e3),
			"font-family:Liberation Sans;font-variant:normal",
			"font-family:'Liberation Sans',Arial,Helvetica,sans-serif",
		).Replace(b.String())
		_, err := io.WriteString(w, text)
		return err
	}
	return fmt.Errorf("a target is drawn as svg or pdf, not as %q", format)
}

// sheet draws in mm from the sheet's upper left corner.
type sheet struct {
	c vg.Canvas
	p Paper
}

var faces = font.NewCache(liberation.Collection())

func (s *sheet) at(x, y float64) vg.Point {
	return vg.Point{X: vg.Length(x) * vg.Millimeter, Y: vg.Length(s.p.Height*1e3-y) * vg.Millimeter}
}

func (s *sheet) box(x, y, w, h float64) {
	var p vg.Path
	p.Move(s.at(x, y))
	p.Line(s.at(x+w, y))
	p.Line(s.at(x+w, y+h))
	p.Line(s.at(x, y+h))
	p.Close()
	s.c.Fill(p)
}

func (s *sheet) line(width float64, pts ...[2]float64) {
	s.c.SetLineWidth(vg.Length(width) * vg.Millimeter)
	var p vg.Path
	for i, q := range pts {
		if i == 0 {
			p.Move(s.at(q[0], q[1]))
		} else {
			p.Line(s.at(q[0], q[1]))
		}
	}
	s.c.Stroke(p)
}

// text writes in the one face that plot 0.17's PDF canvas can hold; it takes
// plain ASCII only.
func (s *sheet) text(x, y, points float64, words string) {
	f := font.Font{Typeface: "Liberation", Variant: "Sans"}
	s.c.FillString(faces.Lookup(f, vg.Length(points)), s.at(x, y), words)
}

func (s Spec) draw(sh *sheet) {
	sh.c.SetColor(color.Black)
	mm := s.SquareM * 1e3
	w, h := float64(s.Cols)*mm, float64(s.Rows)*mm
	left, top := (sh.p.Width*1e3-w)/2, headMM
	sh.text(sideMM+4, 14, 15, "Scale target "+s.Name())
	sh.text(sideMM+4, 20, 9.5, "In the rig file:   [scale]   target = \""+s.Name()+"\"")
	// Which way is up, for people; the program sees it by the two black corners.
	x := sh.p.Width*1e3 - sideMM - 12
	sh.line(0.6, [2]float64{x, 23}, [2]float64{x, 9}, [2]float64{x - 2.5, 13}, [2]float64{x, 9}, [2]float64{x + 2.5, 13})
	sh.text(x+4, 15, 11, "UP")

	for r := range s.Rows {
		for c := range s.Cols {
			if s.Black(c, r) {
				sh.box(left+float64(c)*mm, top+float64(r)*mm, mm, mm)
			}
		}
	}

	// Everything below hangs from the sheet's lower edge.
	low := sh.p.Height*1e3 - footMM
	s.bar(sh, 46, low+18)
	plumb(sh, 24, low+14, low+96)
	y := low + 32.0
	for _, l := range []struct {
		head  bool
		words string
	}{
		{true, "Before use"},
		{false, "Print at 100 % (\"actual size\"), never \"fit to page\": printers shrink pages without saying so."},
		{false, "Measure the bar above with a steel rule, from the outer edge of one end stroke to that of the other,"},
		{false, "and give what you read in the rig file, under [scale]:  length_mm = ...  (and u_length_mm, how"},
		{false, fmt.Sprintf("well you read it). The board must be %s x %s mm: if width and height are off by different", trimmed(w), trimmed(h))},
		{false, "shares, by more than 0.3 %, use another printer."},
		{false, "Glue the sheet to something flat and stiff. Matt paper, even light, no shadow across the board."},
		{true, "In front of the camera"},
		{false, "Put it in the plane in which the bob moves, or say how far in front of it: depth_mm in [scale]."},
		{false, "UP on the sheet is up: hang a thread with a weight from the dot on the left; it must cover the line."},
		{false, "For a camera that looks down, lay it level with UP away from you."},
		{false, "Film it for a second with the camera where it will stay, or leave it in the picture."},
		{false, "The camera must see the whole board sharp, each square at least 10 pixels wide."},
	} {
		size := 9.0
		if l.head {
			size, y = 11, y+2.5
		}
		sh.text(46, y, size, l.words)
		y += 4.6
	}
}

// bar draws the bar that is measured to check the print: BarM from outer edge to
// outer edge of its end strokes.
func (s Spec) bar(sh *sheet, x, y float64) {
	length := BarM * 1e3
	const stroke, tick = 0.4, 0.15
	sh.box(x, y-5, stroke, 8)
	sh.box(x+length-stroke, y-5, stroke, 8)
	sh.line(0.3, [2]float64{x, y}, [2]float64{x + length, y})
	for k := 1; k < 100; k++ {
		up := 1.2
		if k%10 == 0 {
			up = 2.8
		} else if k%5 == 0 {
			up = 2
		}
		at := x + length*float64(k)/100
		sh.line(tick, [2]float64{at, y}, [2]float64{at, y - up})
	}
	for k := 0; k <= 100; k += 50 {
		sh.text(x+length*float64(k)/100-1.5, y+6.5, 8, fmt.Sprint(k))
	}
	sh.text(x+length+4, y+1.5, 9, "must measure 100.0 mm")
}

// plumb draws the line that a hanging thread must cover, with an arrow down.
func plumb(sh *sheet, x, top, bottom float64) {
	var dot vg.Path
	c := sh.at(x, top)
	dot.Move(vg.Point{X: c.X + 1*vg.Millimeter, Y: c.Y})
	dot.Arc(c, 1*vg.Millimeter, 0, 2*math.Pi)
	dot.Close()
	sh.c.Fill(dot)
	sh.line(0.25, [2]float64{x, top}, [2]float64{x, bottom})
	sh.line(0.5, [2]float64{x - 2, bottom - 4}, [2]float64{x, bottom}, [2]float64{x + 2, bottom - 4})
	sh.text(x-7, bottom+5, 8, "plumb line")
}

func trimmed(mm float64) string {
	return strings.TrimSuffix(fmt.Sprintf("%.1f", mm), ".0")
}
