package follow

import (
	"image"
	"image/color"
	"math"

	"golang.org/x/image/font"
	"golang.org/x/image/font/basicfont"
	"golang.org/x/image/math/fixed"

	"lodeswing/track/clip"
)

// canvas draws on a picture of blue, green, red bytes. Everything it draws has a
// dark rim, so that it shows on any ground.
type canvas struct{ *clip.Patch }

// ink is red, green, blue.
type ink [3]uint8

// thick is the width of lines, px: wider on large pictures.
func (c canvas) thick() float64 { return math.Max(1, float64(min(c.W, c.H))/540) }

// blend mixes a colour into a pixel by share a.
func (c canvas) blend(x, y int, k ink, a float64) {
	if x < 0 || y < 0 || x >= c.W || y >= c.H || a <= 0 {
		return
	}
	o := 3 * (y*c.W + x)
	for i := range 3 {
		v := float64(c.BGR[o+i])
		c.BGR[o+i] = uint8(v + a*(float64(k[2-i])-v) + 0.5)
	}
}

// stroke paints a pixel that lies d px from the middle of a line.
func (c canvas) stroke(x, y int, d float64, k ink, strength float64) {
	w := c.thick()
	c.blend(x, y, ink{}, 0.75*strength*ramp(w+1.5-d))
	c.blend(x, y, k, strength*ramp(w+0.5-d))
}

func ramp(x float64) float64 { return math.Min(math.Max(x, 0), 1) }

// ring draws a circle.
func (c canvas) ring(u, v, r float64, k ink) {
	m := r + c.thick() + 2
	for y := int(v - m); y <= int(v+m)+1; y++ {
		for x := int(u - m); x <= int(u+m)+1; x++ {
			if d := math.Abs(math.Hypot(float64(x)-u, float64(y)-v) - r); d < c.thick()+2 {
				c.stroke(x, y, d, k, 1)
			}
		}
	}
}

// line draws a straight line.
func (c canvas) line(u0, v0, u1, v1 float64, k ink, strength float64) {
	m := c.thick() + 2
	lu, lv := u1-u0, v1-v0
	l2 := lu*lu + lv*lv
	for y := int(math.Min(v0, v1) - m); y <= int(math.Max(v0, v1)+m)+1; y++ {
		for x := int(math.Min(u0, u1) - m); x <= int(math.Max(u0, u1)+m)+1; x++ {
			t := 0.0
			if l2 > 0 {
				t = math.Min(math.Max(((float64(x)-u0)*lu+(float64(y)-v0)*lv)/l2, 0), 1)
			}
			if d := math.Hypot(float64(x)-u0-t*lu, float64(y)-v0-t*lv); d < m {
				c.stroke(x, y, d, k, strength)
			}
		}
	}
}

// cross draws a small upright cross.
func (c canvas) cross(u, v, size float64, k ink) {
	c.line(u-size, v, u+size, v, k, 1)
	c.line(u, v-size, u, v+size, k, 1)
}

// label writes words on a dark plate whose left lower corner is near (x, y),
// moved so that all of it is in the picture, and larger on large pictures. Signs
// that the face lacks are left out.
func (c canvas) label(x, y int, words string, k ink) {
	const tall, base = 17, 12
	face := basicfont.Face7x13
	w := font.MeasureString(face, words).Ceil() + 6
	plate := image.NewAlpha(image.Rect(0, 0, w, tall))
	d := font.Drawer{Dst: plate, Src: image.NewUniform(color.Alpha{A: 255}), Face: face, Dot: fixed.P(3, base)}
	d.DrawString(words)
	size := max(min(c.W, c.H)/500, 1)
	x = min(max(x, 0), max(c.W-size*w, 0))
	y = min(max(y-base*size, 0), max(c.H-tall*size, 0))
	for j := range tall * size {
		for i := range w * size {
			c.blend(x+i, y+j, ink{}, 0.65)
			c.blend(x+i, y+j, k, float64(plate.AlphaAt(i/size, j/size).A)/255)
		}
	}
}
