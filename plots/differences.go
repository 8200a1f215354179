package plots

import (
	"fmt"
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Change is one quantity's relative difference between two results.
type Change struct {
	Name    string
	Value   float64 // relative
	Lo, Hi  float64 // 95 % interval
	Differs bool
	Wide    [2]float64 // the interval that the two results alone would give; equal to Lo, Hi where nothing cancels
}

// Differences draws relative differences as intervals about zero, one below the
// other, and returns the figure as SVG and PNG.
func Differences(title, caption string, changes []Change) (svg, png []byte, err error) {
	d := differencesDrawing(title, caption, changes)
	if svg, err = d.svg(); err != nil {
		return nil, nil, err
	}
	png, err = d.png()
	return svg, png, err
}

func differencesDrawing(title, caption string, changes []Change) drawing {
	const row = vg.Length(30)
	head := newHead(title, width)
	foot := vg.Length(34)
	legend := 2 * legendRow
	d := drawing{name: "differences", title: title, caption: caption, w: width, h: head.height + legend + 4 + row*vg.Length(len(changes)) + foot}
	// The scale holds every interval of what differs, and of the others as far as
	// they are not much wider.
	reach, all := 0.0, 0.0
	for _, c := range changes {
		m := math.Max(math.Abs(c.Lo), math.Abs(c.Hi))
		all = math.Max(all, m)
		if c.Differs {
			reach = math.Max(reach, m)
		}
	}
	if reach == 0 {
		reach = all
	}
	reach = math.Min(all, 1.5*reach)
	step := niceStep(100 * reach / 3)
	most := step * math.Ceil(100*reach/step)
	d.draw = func(c draw.Canvas) {
		head.draw(c)
		small := textStyle(tickSize, false)
		top := c.Max.Y - head.height
		left, right := c.Min.X+8, c.Max.X-8
		at := func(percent float64) vg.Length {
			x := math.Max(-most, math.Min(most, percent))
			return left + (right-left)*vg.Length((x+most)/(2*most))
		}
		plain, bold := draw.LineStyle{Color: guideGrey, Width: 1}, draw.LineStyle{Color: dataInks[0], Width: 2.2}
		thin := draw.LineStyle{Color: guideGrey, Width: 0.7, Dashes: guideDash}
		for i, it := range []struct {
			style draw.LineStyle
			words string
		}{{bold, "95 % interval of the difference, where it differs; grey: where not"}, {thin, "what the two results alone would say"}} {
			y := top - vg.Length(i)*legendRow
			c.StrokeLine2(it.style, left, y-tickSize*0.55, left+swatch, y-tickSize*0.55)
			c.FillText(small, vg.Point{X: left + swatch + 4, Y: y}, it.words)
		}
		top -= legend + 4
		bottom := top - row*vg.Length(len(changes))
		for p := -most; p <= most+1e-9; p += step {
			x := at(p)
			style := draw.LineStyle{Color: faint, Width: 0.4}
			if math.Abs(p) < 1e-9 {
				style = draw.LineStyle{Color: ink, Width: 0.8}
			}
			c.StrokeLine2(style, x, bottom, x, top)
			label := signed(p)
			w := textWidth(label, small.Font)
			c.FillText(small, vg.Point{X: min(max(x-w/2, c.Min.X), c.Max.X-w), Y: bottom - 2}, label)
		}
		axis := "difference, %"
		c.FillText(small, vg.Point{X: (left+right)/2 - textWidth(axis, small.Font)/2, Y: bottom - 14}, axis)
		for i, ch := range changes {
			y := top - row*vg.Length(i)
			for _, l := range wrap(ch.Name, right-left, small.Font)[:1] {
				c.FillText(small, vg.Point{X: left, Y: y - 2}, l)
			}
			mid := y - 21
			style := plain
			if ch.Differs {
				style = bold
			}
			if ch.Wide[0] < ch.Lo-1e-12 || ch.Wide[1] > ch.Hi+1e-12 {
				c.StrokeLine2(thin, at(100*ch.Wide[0]), mid, at(100*ch.Wide[1]), mid)
			}
			c.StrokeLine2(style, at(100*ch.Lo), mid, at(100*ch.Hi), mid)
			for _, end := range []float64{ch.Lo, ch.Hi} {
				if math.Abs(100*end) <= most {
					c.StrokeLine2(style, at(100*end), mid-2.5, at(100*end), mid+2.5)
				}
			}
			dot := guideGrey
			if ch.Differs {
				dot = dataInks[0]
			}
			if math.Abs(100*ch.Value) <= most {
				fillDots(c, dot, 5, []vg.Point{{X: at(100 * ch.Value), Y: mid}})
			}
		}
	}
	return d
}

// niceStep is the next of 1, 2, 5 times a power of ten.
func niceStep(x float64) float64 {
	if !(x > 0) {
		return 1
	}
	p := math.Pow(10, math.Floor(math.Log10(x)))
	for _, k := range []float64{1, 2, 5} {
		if k*p >= x {
			return k * p
		}
	}
	return 10 * p
}

// signed writes a number with its sign, a true minus.
func signed(x float64) string {
	switch {
	case math.Abs(x) < 1e-9:
		return "0"
	case x < 0:
		return fmt.Sprintf("−%.4g", -x)
	}
	return fmt.Sprintf("+%.4g", x)
}
