package plots

import (
	"image/color"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"

	"lodeswing/analyze/finding"
)

// Sizes are for a column of 10 cm on paper and still read on a phone.
const (
	width      = 4 * vg.Inch
	mainHeight = 2.1 * vg.Inch // of a panel, axes included
	lowHeight  = 1.5 * vg.Inch
	gap        = vg.Length(6)
	titleSize  = vg.Length(10.5)
	labelSize  = vg.Length(9)
	tickSize   = vg.Length(8.5)
	edge       = vg.Length(7) // kept free on the right, for a mark or half a number
	pngDPI     = 250
)

// The colours are those of M. Okabe and K. Ito, "Color Universal Design" (2008),
// which stay apart for every common kind of colour blindness; lines differ in
// dash as well, for print without colour.
var (
	ink        = color.NRGBA{0x22, 0x22, 0x22, 0xff}
	faint      = color.NRGBA{0xdd, 0xdd, 0xdd, 0xff}
	guideGrey  = color.NRGBA{0x6b, 0x6b, 0x6b, 0xff}
	dataInks   = []color.NRGBA{{0x00, 0x72, 0xb2, 0xff}, {0x00, 0x9e, 0x73, 0xff}, {0xcc, 0x79, 0xa7, 0xff}, {0xe6, 0x9f, 0x00, 0xff}, {0x56, 0xb4, 0xe9, 0xff}}
	modelInks  = []color.NRGBA{{0xd5, 0x5e, 0x00, 0xff}, {0x22, 0x22, 0x22, 0xff}, {0xcc, 0x79, 0xa7, 0xff}, {0x00, 0x9e, 0x73, 0xff}, {0xe6, 0x9f, 0x00, 0xff}}
	dashes     = [][]vg.Length{nil, {5, 2}, {2, 2}, {7, 2, 1.5, 2}, {1, 1.5}}
	guideDash  = []vg.Length{3, 2}
	bandAlpha  = uint8(0x40)
	pathHalo   = color.NRGBA{0xff, 0xff, 0xff, 0xcc}
	background = color.NRGBA{0xff, 0xff, 0xff, 0xff}
)

func typeface(size vg.Length, bold bool) font.Font {
	f := font.Font{Typeface: "Liberation", Variant: "Sans", Size: size}
	if bold {
		f.Weight = xfont.WeightBold
	}
	return f
}

func textStyle(size vg.Length, bold bool) text.Style {
	return text.Style{Color: ink, Font: typeface(size, bold), Handler: handler(), YAlign: text.YTop}
}

// look is how one line of a curve is drawn.
type look struct {
	ink   color.NRGBA
	dash  []vg.Length
	width vg.Length
	dots  bool      // dots instead of a line
	size  vg.Length // of the dots
	rings bool      // open marks
}

// looks gives each line of a panel its look: by role, and among equals by order.
func looks(c *finding.Curve) []look {
	hasModel := false
	for _, l := range c.Lines {
		hasModel = hasModel || l.Role == finding.Model
	}
	count := map[finding.Role]int{}
	out := make([]look, len(c.Lines))
	for i, l := range c.Lines {
		n := count[l.Role]
		count[l.Role]++
		switch l.Role {
		case finding.Model:
			out[i] = look{ink: modelInks[n%len(modelInks)], dash: dashes[n%len(dashes)], width: 0.9}
		case finding.Guide:
			out[i] = look{ink: guideGrey, dash: guideDash, width: 0.8}
		case finding.Mark:
			out[i] = look{ink: []color.NRGBA{ink, dataInks[0], modelInks[0]}[n%3], width: 0.9, rings: true, size: dotSize}
		case finding.Residual:
			out[i] = look{ink: dataInks[n%len(dataInks)], width: 0.8, dots: true, size: dotSize}
		default:
			if c.Grid != nil { // seen on light and on dark cells
				out[i] = look{ink: modelInks[n%len(modelInks)], dash: dashes[n%len(dashes)], width: 1.3}
				break
			}
			out[i] = look{ink: dataInks[n%len(dataInks)], dash: dashes[n%len(dashes)], width: 0.9, dots: hasModel, size: 2.2} // seen on both sides of the model
		}
	}
	return out
}
