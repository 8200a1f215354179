package plots

import (
	"math"
	"strings"

	"golang.org/x/image/font/sfnt"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// words draws one line of text, with raised exponents made of small ordinary
// digits: the face of the figures lacks some of the raised ones.
type words struct{ text.Handler }

func handler() words { return words{plot.DefaultTextHandler} }

const (
	raisedSize = 0.72 // of the text's size
	raisedBy   = 0.36
)

var raised = strings.NewReplacer("⁻", "−", "⁰", "0", "¹", "1", "²", "2", "³", "3", "⁴", "4", "⁵", "5", "⁶", "6", "⁷", "7", "⁸", "8", "⁹", "9")

// split cuts a text into ordinary and raised pieces, in turn, ordinary first.
func split(s string) []string {
	var pieces []string
	up := false
	from := 0
	for i, r := range s {
		if isRaised := strings.ContainsRune("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", r); isRaised != up {
			pieces = append(pieces, s[from:i])
			from, up = i, isRaised
		}
	}
	return append(pieces, s[from:])
}

func smaller(f font.Font) font.Font {
	f.Size *= raisedSize
	return f
}

// Box implements text.Handler.
func (h words) Box(s string, f font.Font) (w, height, depth vg.Length) {
	for i, piece := range split(s) {
		size := f
		if i%2 == 1 {
			size, piece = smaller(f), raised.Replace(piece)
		}
		pw, _, _ := h.Handler.Box(piece, size)
		w += pw
	}
	_, height, depth = h.Handler.Box("", f)
	return w, height, depth
}

// Draw implements text.Handler.
func (h words) Draw(c vg.Canvas, s string, style text.Style, at vg.Point) {
	if s == "" {
		return
	}
	c.SetColor(style.Color)
	if style.Rotation != 0 {
		c.Push()
		c.Rotate(style.Rotation)
		defer c.Pop()
	}
	sin64, cos64 := math.Sincos(style.Rotation)
	sin, cos := vg.Length(sin64), vg.Length(cos64)
	x, y := at.Y*sin+at.X*cos, at.Y*cos-at.X*sin
	w, _, _ := h.Box(s, style.Font)
	x += vg.Length(style.XAlign) * w
	y += vg.Length(style.YAlign)*style.Height(s) + style.Font.Size - h.Extents(style.Font).Ascent // as gonum's plain text
	for i, piece := range split(s) {
		if piece == "" {
			continue
		}
		f, up := style.Font, vg.Length(0)
		if i%2 == 1 {
			f, piece, up = smaller(style.Font), raised.Replace(piece), raisedBy*style.Font.Size
		}
		face := h.Cache().Lookup(f, f.Size)
		c.FillString(face, vg.Point{X: x, Y: y + up}, piece)
		pw, _, _ := h.Handler.Box(piece, f)
		x += pw
	}
}

// textWidth is the width of one line.
func textWidth(s string, f font.Font) vg.Length {
	w, _, _ := handler().Box(s, f)
	return w
}

// drawable tells whether the face has every letter of s.
func drawable(s string, f font.Font) bool {
	face := handler().Cache().Lookup(f, f.Size)
	var b sfnt.Buffer
	for _, r := range s {
		if i, err := face.Face.GlyphIndex(&b, r); err != nil || i == 0 {
			return false
		}
	}
	return true
}
