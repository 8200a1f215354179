package clip

import "image"

// Frame is one picture of a clip as it is stored: three bytes blue, green, red
// per pixel, row by row, Stride bytes from one row to the next. RotationDeg is
// the clockwise turn (0, 90, 180, 270) that makes it upright.
type Frame struct {
	Index       int
	T           float64 // s since the clip's first frame
	Pix         []byte
	W, H        int // stored
	Stride      int
	RotationDeg int
}

// NewFrame returns a black upright frame of w × h pixels in Go memory.
func NewFrame(index int, t float64, w, h int) *Frame {
	return &Frame{Index: index, T: t, Pix: make([]byte, 3*w*h), W: w, H: h, Stride: 3 * w}
}

// Size returns the upright picture's width and height in pixels.
func (f *Frame) Size() (w, h int) {
	if f.RotationDeg == 90 || f.RotationDeg == 270 {
		return f.H, f.W
	}
	return f.W, f.H
}

// Bounds returns the upright picture's rectangle, (0, 0) to Size.
func (f *Frame) Bounds() image.Rectangle {
	w, h := f.Size()
	return image.Rect(0, 0, w, h)
}

// BGR returns the pixel at (u, v) of the upright picture. It panics outside
// Bounds.
func (f *Frame) BGR(u, v int) (b, g, r byte) {
	p := f.offset(u, v)
	return f.Pix[p], f.Pix[p+1], f.Pix[p+2]
}

// offset returns where the upright pixel (u, v) starts in Pix.
func (f *Frame) offset(u, v int) int {
	x, y := u, v
	switch f.RotationDeg {
	case 90:
		x, y = v, f.H-1-u
	case 180:
		x, y = f.W-1-u, f.H-1-v
	case 270:
		x, y = f.W-1-v, u
	}
	return y*f.Stride + 3*x
}

// Patch is an upright rectangle of a frame, copied: W × H pixels of blue, green,
// red without gaps. Rect says where it lies in the upright picture.
type Patch struct {
	Rect image.Rectangle
	W, H int
	BGR  []byte
}

// Patch copies the part of r (upright pixel coordinates) that lies inside the
// picture into dst, reusing its memory. Where nothing lies inside, dst becomes
// empty (W = H = 0).
func (f *Frame) Patch(dst *Patch, r image.Rectangle) {
	r = r.Intersect(f.Bounds())
	dst.Rect, dst.W, dst.H = r, r.Dx(), r.Dy()
	n := 3 * dst.W * dst.H
	if cap(dst.BGR) < n {
		dst.BGR = make([]byte, n)
	}
	dst.BGR = dst.BGR[:n]
	if n == 0 {
		return
	}
	row := 3 * dst.W
	if f.RotationDeg == 0 {
		for y := 0; y < dst.H; y++ {
			p := (r.Min.Y+y)*f.Stride + 3*r.Min.X
			copy(dst.BGR[y*row:(y+1)*row], f.Pix[p:p+row])
		}
		return
	}
	if f.RotationDeg == 180 {
		for y := 0; y < dst.H; y++ {
			p, out := f.offset(r.Min.X, r.Min.Y+y), dst.BGR[y*row:(y+1)*row]
			in := f.Pix[p+3-row : p+3]
			for i, k := 0, row-3; i+2 < len(out) && k+2 < len(in) && k >= 0; i, k = i+3, k-3 {
				out[i], out[i+1], out[i+2] = in[k], in[k+1], in[k+2]
			}
		}
		return
	}
	// Turned by a quarter: walk along stored rows, which are upright columns, so
	// that the big picture is read in order and only the small patch is strided.
	dv := 3 // upright one down is stored one to the right (90)
	if f.RotationDeg == 270 {
		dv = -3
	}
	for x := 0; x < dst.W; x++ {
		p := f.offset(r.Min.X+x, r.Min.Y)
		for o := 3 * x; o < n; o += row {
			out, in := dst.BGR[o:o+3:o+3], f.Pix[p:p+3:p+3]
			out[0], out[1], out[2] = in[0], in[1], in[2]
			p += dv
		}
	}
}

// Upright copies the whole upright picture into an image that Go's encoders
// take, for stills and marked pictures.
func (f *Frame) Upright() *image.RGBA {
	var p Patch
	f.Patch(&p, f.Bounds())
	return p.RGBA()
}

// RGBA returns the patch as an image with its own origin at (0, 0).
func (p *Patch) RGBA() *image.RGBA {
	img := image.NewRGBA(image.Rect(0, 0, p.W, p.H))
	for i, o := 0, 0; i+2 < len(p.BGR); i, o = i+3, o+4 {
		img.Pix[o], img.Pix[o+1], img.Pix[o+2], img.Pix[o+3] = p.BGR[i+2], p.BGR[i+1], p.BGR[i], 255
	}
	return img
}

// FrameFromImage turns any image into an upright frame in Go memory.
func FrameFromImage(index int, t float64, img image.Image) *Frame {
	b := img.Bounds()
	f := NewFrame(index, t, b.Dx(), b.Dy())
	fillFrame(f, img)
	return f
}

// fillFrame copies img into f, which has its size.
func fillFrame(f *Frame, img image.Image) {
	b := img.Bounds()
	for y := 0; y < f.H; y++ {
		out := f.Pix[y*f.Stride : y*f.Stride+3*f.W]
		switch src := img.(type) {
		case *image.Gray:
			p := src.PixOffset(b.Min.X, b.Min.Y+y)
			for x := 0; x < f.W; x++ {
				g := src.Pix[p+x]
				out[3*x], out[3*x+1], out[3*x+2] = g, g, g
			}
		case *image.RGBA:
			p := src.PixOffset(b.Min.X, b.Min.Y+y)
			for x := 0; x < f.W; x++ {
				out[3*x], out[3*x+1], out[3*x+2] = src.Pix[p+4*x+2], src.Pix[p+4*x+1], src.Pix[p+4*x]
			}
		default:
			for x := 0; x < f.W; x++ {
				r, g, bl, _ := img.At(b.Min.X+x, b.Min.Y+y).RGBA()
				out[3*x], out[3*x+1], out[3*x+2] = byte(bl>>8), byte(g>>8), byte(r>>8)
			}
		}
	}
}
