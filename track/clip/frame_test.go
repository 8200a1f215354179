package clip_test

import (
	"image"
	"image/color"
	"testing"

	"lodeswing/track/clip"
)

// turnedFrame stores the upright picture img as a camera that must be turned by
// deg would.
func turnedFrame(img *image.RGBA, deg int) *clip.Frame {
	w, h := img.Rect.Dx(), img.Rect.Dy()
	sw, sh := w, h
	if deg%180 == 90 {
		sw, sh = h, w
	}
	f := clip.NewFrame(0, 0, sw, sh)
	f.RotationDeg = deg
	for y := 0; y < sh; y++ {
		for x := 0; x < sw; x++ {
			// Turn the stored pixel clockwise by deg, a quarter at a time.
			u, v, hh := x, y, sh
			for k := 0; k < deg; k += 90 {
				u, v = hh-1-v, u
				if hh == sh {
					hh = sw
				} else {
					hh = sh
				}
			}
			c := img.RGBAAt(u, v)
			p := y*f.Stride + 3*x
			f.Pix[p], f.Pix[p+1], f.Pix[p+2] = c.B, c.G, c.R
		}
	}
	return f
}

func TestPatch(t *testing.T) {
	img := image.NewRGBA(image.Rect(0, 0, 23, 14))
	for v := 0; v < 14; v++ {
		for u := 0; u < 23; u++ {
			img.SetRGBA(u, v, color.RGBA{byte(u), byte(v), byte(u ^ v<<3), 255})
		}
	}
	for _, deg := range []int{0, 90, 180, 270} {
		f := turnedFrame(img, deg)
		if w, h := f.Size(); w != 23 || h != 14 {
			t.Fatalf("%d°: upright size %d × %d", deg, w, h)
		}
		var p clip.Patch
		for _, r := range []image.Rectangle{
			image.Rect(3, 4, 9, 6), image.Rect(-5, -5, 4, 3), image.Rect(20, 10, 40, 40),
			image.Rect(0, 0, 23, 14), image.Rect(22, 13, 23, 14), image.Rect(30, 0, 40, 5), image.Rect(5, 5, 5, 9),
		} {
			f.Patch(&p, r)
			want := r.Intersect(img.Rect)
			if p.Rect != want || p.W != want.Dx() || p.H != want.Dy() || len(p.BGR) != 3*p.W*p.H {
				t.Fatalf("%d° %v: patch %v of %d × %d with %d bytes", deg, r, p.Rect, p.W, p.H, len(p.BGR))
			}
			for v := 0; v < p.H; v++ {
				for u := 0; u < p.W; u++ {
					c := img.RGBAAt(p.Rect.Min.X+u, p.Rect.Min.Y+v)
					got := p.BGR[3*(v*p.W+u):]
					if got[0] != c.B || got[1] != c.G || got[2] != c.R {
						t.Fatalf("%d° %v: pixel (%d, %d) is %v, want %v", deg, r, u, v, got[:3], c)
					}
					if b, g, r := f.BGR(p.Rect.Min.X+u, p.Rect.Min.Y+v); b != c.B || g != c.G || r != c.R {
						t.Fatalf("%d°: BGR(%d, %d) is %d %d %d, want %v", deg, u, v, b, g, r, c)
					}
				}
			}
		}
		up := f.Upright()
		if up.RGBAAt(17, 5) != img.RGBAAt(17, 5) {
			t.Errorf("%d°: upright picture differs", deg)
		}
	}
}
