package detect

import (
	"fmt"
	"image"
	"math"
	"strconv"

	"lodeswing/track/clip"
)

// Kind is by what a bob is told from everything else.
type Kind uint8

// The kinds of look.
const (
	ByColour Kind = iota // by its hue and saturation, whatever the light
	ByDark               // darker than most of the picture
	ByLight              // lighter than most of the picture
	ByMotion             // it moves and the wall does not
)

// Look says how a bob is told from everything else. R, G, B hold the colour
// when Kind is ByColour.
type Look struct {
	Kind    Kind
	R, G, B uint8
}

// ParseLook reads a rig's colour ("#rrggbb") and look ("dark", "light",
// "moving"), of which one is empty.
func ParseLook(colour, look string) (Look, error) {
	switch look {
	case "dark":
		return Look{Kind: ByDark}, nil
	case "light":
		return Look{Kind: ByLight}, nil
	case "moving":
		return Look{Kind: ByMotion}, nil
	case "":
	default:
		return Look{}, fmt.Errorf("look = %q is not known; say \"dark\", \"light\" or \"moving\", or give a colour", look)
	}
	if len(colour) == 7 && colour[0] == '#' {
		if n, err := strconv.ParseUint(colour[1:], 16, 32); err == nil {
			return Look{R: uint8(n >> 16), G: uint8(n >> 8), B: uint8(n)}, nil
		}
	}
	return Look{}, fmt.Errorf("colour = %q is not a colour; write it as \"#rrggbb\", for instance \"#b8261f\"", colour)
}

func (l Look) String() string {
	switch l.Kind {
	case ByDark:
		return "dark"
	case ByLight:
		return "light"
	case ByMotion:
		return "moving"
	}
	return fmt.Sprintf("#%02x%02x%02x", l.R, l.G, l.B)
}

// taster scores single pixels against a look.
type taster struct {
	look   Look
	y, cr  float64 // of the colour: luma, and red and blue differences over luma
	cb     float64
	chroma float64
	far    float64 // farther than this in cr and cb is another colour
	room   float64 // of ln(luma), to either side
	lo, hi float64 // by lightness: luma at which the score is 1 and 0 (dark: hi < lo is swapped)
}

// Luma weights of blue, green, red (ITU-R BT.601), the ones with which
// OpenCV's reader turns a clip's YCbCr into blue, green, red.
const (
	lumaB = 0.114
	lumaG = 0.587
	lumaR = 0.299
	// Light adds to every channel, dark pixels have no reliable hue: the
	// differences are compared over luma plus this much.
	veil = 24.0
)

func opponent(b, g, r float64) (y, cr, cb float64) {
	y = lumaB*b + lumaG*g + lumaR*r
	return y, (r - y) / (y + veil), (b - y) / (y + veil)
}

func newTaster(l Look, dark, middle, light float64) taster {
	t := taster{look: l}
	switch l.Kind {
	case ByColour:
		t.y, t.cr, t.cb = opponent(float64(l.B), float64(l.G), float64(l.R))
		t.chroma = math.Hypot(t.cr, t.cb)
		t.far = 0.55*t.chroma + 0.08
		t.room = 0.45 + math.Min(t.chroma/0.4, 1)
	case ByDark:
		t.lo, t.hi = dark+0.25*(middle-dark), dark+0.6*(middle-dark)
	case ByLight:
		t.lo, t.hi = light-0.25*(light-middle), light-0.6*(light-middle)
	}
	return t
}

// score is 1 for a pixel that looks like the bob and 0 for one that does not.
func (t *taster) score(b, g, r float64) float64 {
	y, cr, cb := opponent(b, g, r)
	switch t.look.Kind {
	case ByDark:
		return clamp01((t.hi - y) / (t.hi - t.lo + 1e-9))
	case ByLight:
		return clamp01((y - t.hi) / (t.lo - t.hi + 1e-9))
	}
	// A colour that is hardly a colour must also be about as light; a strong one
	// may lie in shadow or in glare.
	dr, db := cr-t.cr, cb-t.cb
	d2 := dr*dr + db*db
	if d2 >= t.far*t.far {
		return 0
	}
	// 2(q−1)/(q+1) is ln q to a few per cent for what is not refused anyway.
	a, b2 := y+veil, t.y+veil
	ratio := 2 * math.Abs(a-b2) / (a + b2)
	return clamp01(2 * math.Min(1-math.Sqrt(d2)/t.far, 1-ratio/t.room))
}

// distance tells how far a colour is from the look's, for advice: 0 is equal.
func (t *taster) distance(b, g, r float64) float64 {
	y, cr, cb := opponent(b, g, r)
	return math.Hypot(cr-t.cr, cb-t.cb) + 0.3*math.Abs(math.Log((y+veil)/(t.y+veil)))
}

// Nearest returns the place and colour ("#rrggbb") of the patch of picture that
// comes nearest to a look by colour, for advice. Blocks of pixels are averaged,
// so that noise is not taken for a colour.
func (l Look) Nearest(p *clip.Patch, area image.Rectangle) (u, v int, colour string, ok bool) {
	const block = 8
	t := newTaster(l, 0, 0, 0)
	best := math.Inf(1)
	area = area.Intersect(p.Rect)
	for y := area.Min.Y; y+block <= area.Max.Y; y += block {
		for x := area.Min.X; x+block <= area.Max.X; x += block {
			var b, g, r float64
			for j := range block {
				o := 3 * ((y+j-p.Rect.Min.Y)*p.W + x - p.Rect.Min.X)
				for range block {
					b += float64(p.BGR[o])
					g += float64(p.BGR[o+1])
					r += float64(p.BGR[o+2])
					o += 3
				}
			}
			const n = block * block
			if d := t.distance(b/n, g/n, r/n); d < best {
				best, ok = d, true
				u, v = x+block/2, y+block/2
				colour = fmt.Sprintf("#%02x%02x%02x", int(r/n+0.5), int(g/n+0.5), int(b/n+0.5))
			}
		}
	}
	return u, v, colour, ok
}

func clamp01(x float64) float64 { return math.Min(math.Max(x, 0), 1) }
