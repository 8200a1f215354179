package plots

import (
	"bytes"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"strings"

	xdraw "golang.org/x/image/draw"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
)

// pathDrawing draws where each bob went: over the still of the clip where there
// is one, else in the plane of motion. ok is false when the record holds no
// positions.
func pathDrawing(r *record.Record) (d drawing, ok bool, err error) {
	if r.Track == nil {
		return d, false, nil
	}
	if len(r.Still) > 0 {
		img, err := png.Decode(bytes.NewReader(r.Still))
		if err != nil {
			return d, false, fmt.Errorf("the still of the clip cannot be read: %w", err)
		}
		box := pathBox(r.Track, img.Bounds())
		if box.Empty() {
			return d, false, nil
		}
		return overStill(r, img, box), true, nil
	}
	c := inPlane(r.Track)
	if len(c.Lines) == 0 {
		return d, false, nil
	}
	return curveDrawing([]*finding.Curve{c}), true, nil
}

// pathBox is the part of the picture that holds all paths and what is around.
func pathBox(t *track.Track, picture image.Rectangle) image.Rectangle {
	lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for i := range t.Bobs {
		for _, s := range t.Bobs[i].Samples {
			if !math.IsNaN(s.U) && !math.IsNaN(s.V) {
				lo[0], hi[0] = math.Min(lo[0], s.U), math.Max(hi[0], s.U)
				lo[1], hi[1] = math.Min(lo[1], s.V), math.Max(hi[1], s.V)
			}
		}
	}
	if !(lo[0] <= hi[0]) {
		return image.Rectangle{}
	}
	if o := t.Cal; o.OriginU != 0 || o.OriginV != 0 { // the pivot, mostly
		lo[0], hi[0] = math.Min(lo[0], o.OriginU), math.Max(hi[0], o.OriginU)
		lo[1], hi[1] = math.Min(lo[1], o.OriginV), math.Max(hi[1], o.OriginV)
	}
	margin := 0.35 * math.Max(math.Max(hi[0]-lo[0], hi[1]-lo[1]), 60)
	box := image.Rect(int(lo[0]-margin), int(lo[1]-margin), int(hi[0]+margin)+1, int(hi[1]+margin)+1)
	return box.Intersect(picture)
}

// pale turns a picture grey and light, so that what is drawn on it stands out.
func pale(img image.Image, box image.Rectangle, w, h int) *image.Gray {
	small := image.NewRGBA(image.Rect(0, 0, w, h))
	xdraw.CatmullRom.Scale(small, small.Bounds(), img, box, xdraw.Src, nil)
	out := image.NewGray(small.Bounds())
	for y := range h {
		for x := range w {
			g := color.GrayModel.Convert(small.At(x, y)).(color.Gray).Y
			out.SetGray(x, y, color.Gray{Y: 90 + uint8(float64(g)*165/255)})
		}
	}
	return out
}

func overStill(r *record.Record, img image.Image, box image.Rectangle) drawing {
	t := r.Track
	d := drawing{name: "path", title: "Where " + bobNames(t) + " went", w: width}
	head := newHead(d.title, width)
	aspect := float64(box.Dy()) / float64(box.Dx())
	const tallest = 3.6 * vg.Inch
	w := width
	h := w * vg.Length(aspect)
	if h > tallest {
		w, h = tallest/vg.Length(aspect), tallest
	}
	const dpi = 150 // 1.5 pixels of the still for one of a screen
	pw := min(box.Dx(), int(w.Dots(dpi)))
	still := pale(img, box, pw, max(1, int(math.Round(float64(pw)*aspect))))
	var legend legend
	looks := make([]look, len(t.Bobs))
	var c finding.Curve
	for i := range t.Bobs {
		looks[i] = look{ink: append([]color.NRGBA{modelInks[0]}, dataInks...)[i%6], dash: nil, width: 1}
		c.Lines = append(c.Lines, finding.Line{Name: t.Bobs[i].Name})
	}
	legend = newLegend(&c, looks)
	d.h = head.height + legend.height + h
	d.caption = pathCaption(t)
	d.draw = func(cv draw.Canvas) {
		head.draw(cv)
		legend.draw(cv, cv.Max.Y-head.height)
		left := cv.Min.X + (width-w)/2
		top := cv.Max.Y - head.height - legend.height
		rect := vg.Rectangle{Min: vg.Point{X: left, Y: top - h}, Max: vg.Point{X: left + w, Y: top}}
		cv.DrawImage(rect, still)
		scale := w / vg.Length(box.Dx())
		at := func(u, v float64) vg.Point {
			// Pixel centres are at whole numbers, edges half a pixel out.
			return vg.Point{X: left + vg.Length(u+0.5-float64(box.Min.X))*scale, Y: top - vg.Length(v+0.5-float64(box.Min.Y))*scale}
		}
		for i := range t.Bobs {
			var pts []vg.Point
			for _, s := range t.Bobs[i].Samples {
				if math.IsNaN(s.U) || math.IsNaN(s.V) {
					pts = append(pts, vg.Point{X: nan, Y: nan})
					continue
				}
				pts = append(pts, at(s.U, s.V))
			}
			pieces := runs(pts)
			for _, halo := range []bool{true, false} {
				style := looks[i].line()
				if halo {
					style = draw.LineStyle{Color: pathHalo, Width: 2.6}
				}
				for _, piece := range pieces {
					if len(piece) == 1 {
						fillDots(cv, looks[i].ink, dotSize, piece)
					} else {
						strokeLine(cv, style, thin(piece))
					}
				}
			}
			if len(pieces) > 0 {
				fillDots(cv, ink, 5, pieces[0][:1])
				last := pieces[len(pieces)-1]
				ring(cv, look{ink: ink, width: 1.2}, last[len(last)-1])
			}
		}
		scaleBar(cv, rect, t.Cal.MetresPerPixel/float64(scale))
	}
	return d
}

// scaleBar draws a round length in the lower left corner of rect.
func scaleBar(c draw.Canvas, rect vg.Rectangle, metresPerPoint float64) {
	if !(metresPerPoint > 0) || math.IsInf(metresPerPoint, 0) {
		return
	}
	w := rect.Max.X - rect.Min.X
	most := float64(w) * 0.3 * metresPerPoint
	power := math.Pow(10, math.Floor(math.Log10(most)))
	length := power
	for _, m := range []float64{2, 5} {
		if m*power <= most {
			length = m * power
		}
	}
	unit, factor := finding.Unit("m", length)
	label := tickLabel(length*factor, max(0, int(math.Ceil(-math.Log10(length*factor)-1e-9)))) + " " + unit
	bar := vg.Length(length / metresPerPoint)
	f := typeface(tickSize, true)
	x, y := rect.Min.X+8, rect.Min.Y+8
	box := max(bar, textWidth(label, f)) + 8
	c.FillPolygon(pathHalo, []vg.Point{{X: x - 4, Y: y - 4}, {X: x - 4 + box, Y: y - 4}, {X: x - 4 + box, Y: y + 14}, {X: x - 4, Y: y + 14}})
	c.StrokeLine2(draw.LineStyle{Color: ink, Width: 1.8}, x, y, x+bar, y)
	style := textStyle(tickSize, true)
	c.FillText(style, vg.Point{X: x, Y: y + 12}, label)
}

func bobNames(t *track.Track) string {
	var names []string
	for i := range t.Bobs {
		names = append(names, t.Bobs[i].Name)
	}
	switch {
	case len(names) == 1:
		return "the bob “" + names[0] + "”"
	case len(names) <= 3:
		return "the bobs “" + strings.Join(names[:len(names)-1], "”, “") + "” and “" + names[len(names)-1] + "”"
	}
	return fmt.Sprintf("the %d bobs", len(names))
}

func pathCaption(t *track.Track) string {
	var b strings.Builder
	b.WriteString("The measured path over one picture of the clip, paled and cropped. Filled square: first position; ring: last.")
	for i := range t.Bobs {
		bob := &t.Bobs[i]
		seen := len(bob.Usable())
		fmt.Fprintf(&b, " “%s” was measured in %d of %d frames.", bob.Name, seen, len(bob.Samples))
	}
	if u := t.Cal.UScale; u > 0 {
		fmt.Fprintf(&b, " Lengths carry a scale uncertainty of %s %%.", finding.DisplayU(100*u, "1"))
	}
	return b.String()
}

// inPlane is the paths as a curve, for a track without a still.
func inPlane(t *track.Track) *finding.Curve {
	c := &finding.Curve{
		Key: "path", Title: "Where " + bobNames(t) + " went",
		Caption: "The measured positions in the plane of motion, seen as the camera sees it.",
		X:       finding.Axis{Label: "to the right", Unit: "m"}, Y: finding.Axis{Label: "up", Unit: "m"},
	}
	for i := range t.Bobs {
		b := &t.Bobs[i]
		l := finding.Line{Name: b.Name, Role: finding.Data}
		any := false
		for _, s := range b.Samples {
			l.X, l.Y = append(l.X, s.X), append(l.Y, s.Z)
			any = any || !math.IsNaN(s.X)
		}
		if any {
			c.Lines = append(c.Lines, l)
		}
	}
	return c
}
