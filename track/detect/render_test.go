package detect

import (
	"image"
	"math"
	"math/rand/v2"

	"lodeswing/track/clip"
)

// scene is a little picture of one bob with known truth. It is drawn by
// brute force, so that it shares nothing with the model that is fitted: the
// bob's inside is sampled on a grid of fine² points per pixel, blurred there,
// and averaged over the pixel and over the exposure.
type scene struct {
	w, h       int
	u, v, r    float64
	bob, wall  float64 // levels
	blur       float64 // px
	noise      float64 // levels, white
	texture    float64 // levels r.m.s.
	grain      float64 // px, the texture's correlation length
	shade      [3]float64
	gloss      float64 // a highlight's height, levels; up left
	smear      [2]float64
	axes       [2]float64 // relative lengthening along u and v
	tint       [3]float64 // blue, green, red multiples of (level − wall)
	gain       []float64  // a texture drawn before, reused
	rod        bool       // a light rod from the bob upwards
	cover      *Disc      // something in front
	coverLevel float64
}

const fine = 4

func (s *scene) render(rng *rand.Rand) *clip.Patch { return s.expose(s.levels(rng), rng) }

// expose adds noise to levels and rounds them to bytes.
func (s *scene) expose(img []float64, rng *rand.Rand) *clip.Patch {
	p := &clip.Patch{Rect: image.Rect(0, 0, s.w, s.h), W: s.w, H: s.h, BGR: make([]byte, 3*s.w*s.h)}
	for i, v := range img {
		n := 0.0
		if s.noise > 0 {
			n = s.noise * rng.NormFloat64()
		}
		for c := range 3 {
			x := v
			if s.tint != [3]float64{} {
				x = s.wall + s.tint[c]*(v-s.wall)
				if c > 0 && s.noise > 0 {
					n = s.noise * rng.NormFloat64()
				}
			}
			p.BGR[3*i+c] = byte(math.Min(math.Max(math.Round(x+n), 0), 255))
		}
	}
	return p
}

// levels is the noiseless picture.
func (s *scene) levels(rng *rand.Rand) []float64 {
	fw, fh := s.w*fine, s.h*fine
	cover := make([]float64, fw*fh) // coverage
	light := make([]float64, fw*fh) // coverage times level
	n := 1
	if l := math.Hypot(s.smear[0], s.smear[1]); l > 0 {
		n = int(4*l) + 9
	}
	ax, ay := 1+s.axes[0], 1+s.axes[1]
	if s.shade == [3]float64{} && s.gloss == 0 {
		s.spans(cover, fw, fh, ax, ay)
		gaussBlur(cover, fw, fh, s.blur*fine)
		for i, c := range cover {
			light[i] = s.bob * c
		}
		n = 0
	}
	for k := range n {
		t := (float64(k)+0.5)/float64(n) - 0.5
		cu, cv := s.u+t*s.smear[0], s.v+t*s.smear[1]
		for y := range fh {
			py := (float64(y)+0.5)/fine - 0.5 - cv
			for x := range fw {
				px := (float64(x)+0.5)/fine - 0.5 - cu
				dx, dy := px/ax/s.r, py/ay/s.r
				d2 := dx*dx + dy*dy
				if d2 >= 1 {
					continue
				}
				lv := s.bob + s.shade[0]*dx + s.shade[1]*dy + s.shade[2]*math.Sqrt(1-d2)
				if s.gloss > 0 {
					hx, hy := dx+0.4, dy+0.4
					lv += s.gloss * math.Exp(-(hx*hx+hy*hy)/(2*0.18*0.18))
				}
				cover[y*fw+x] += 1 / float64(n)
				light[y*fw+x] += lv / float64(n)
			}
		}
	}
	if n > 0 {
		gaussBlur(cover, fw, fh, s.blur*fine)
		gaussBlur(light, fw, fh, s.blur*fine)
	}
	if s.texture > 0 && s.gain == nil {
		s.gain = grainy(rng, s.w, s.h, s.grain, s.texture)
	}
	out := make([]float64, s.w*s.h)
	for y := range s.h {
		for x := range s.w {
			var c, l float64
			for j := range fine {
				for i := range fine {
					at := (y*fine+j)*fw + x*fine + i
					c += cover[at]
					l += light[at]
				}
			}
			c /= fine * fine
			l /= fine * fine
			back := s.wall
			if s.gain != nil {
				back += s.gain[y*s.w+x]
			}
			v := l + (1-c)*back
			if s.rod && float64(y) < s.v && math.Abs(float64(x)-s.u) < 3 {
				v = v*c + (1-c)*(s.bob+20)
			}
			if d := s.cover; d != nil && math.Hypot(float64(x)-d.U, float64(y)-d.V) < d.R {
				v = s.coverLevel
			}
			out[y*s.w+x] = v
		}
	}
	return out
}

// spans adds up the coverage of an evenly bright bob row by row: each instant of
// the exposure adds a run whose ends are exact along the row.
func (s *scene) spans(cover []float64, fw, fh int, ax, ay float64) {
	n := 1
	if l := math.Hypot(s.smear[0], s.smear[1]); l > 0 {
		n = int(10*l) + 21
	}
	const lines = 4 // sampled per row
	k := 1 / float64(n*lines)
	for i := range n * lines {
		t := (float64(i/lines)+0.5)/float64(n) - 0.5
		cu, cv := s.u+t*s.smear[0], s.v+t*s.smear[1]
		for y := range fh {
			dy := ((float64(y)+(float64(i%lines)+0.5)/lines)/fine - 0.5 - cv) / ay / s.r
			if dy*dy >= 1 {
				continue
			}
			h := ax * s.r * math.Sqrt(1-dy*dy)
			// In cells: cell x spans x to x+1, and its middle is at (x+½)/fine − ½ px.
			lo, hi := (cu-h+0.5)*fine, (cu+h+0.5)*fine
			lo, hi = math.Max(lo, 0), math.Min(hi, float64(fw))
			if hi <= lo {
				continue
			}
			row := cover[y*fw : (y+1)*fw]
			a, b := int(lo), int(hi)
			if a == b {
				row[a] += k * (hi - lo)
				continue
			}
			row[a] += k * (float64(a+1) - lo)
			for x := a + 1; x < b; x++ {
				row[x] += k
			}
			if b < fw {
				row[b] += k * (hi - float64(b))
			}
		}
	}
}

// grainy makes a texture of the given correlation length and r.m.s.
func grainy(rng *rand.Rand, w, h int, length, rms float64) []float64 {
	g := make([]float64, w*h)
	for i := range g {
		g[i] = rng.NormFloat64()
	}
	if length > 0 {
		gaussBlur(g, w, h, length)
	}
	var q float64
	for _, v := range g {
		q += v * v
	}
	k := rms / math.Sqrt(q/float64(len(g)))
	for i := range g {
		g[i] *= k
	}
	return g
}

func gaussBlur(a []float64, w, h int, sd float64) {
	if sd <= 0 {
		return
	}
	n := int(4*sd) + 1
	k := make([]float64, 2*n+1)
	sum := 0.0
	for i := range k {
		d := float64(i-n) / sd
		k[i] = math.Exp(-d * d / 2)
		sum += k[i]
	}
	tmp := make([]float64, max(w, h))
	line := func(at, step, size int) {
		for i := range size {
			tmp[i] = a[at+i*step]
		}
		for i := range size {
			s := 0.0
			for j := -n; j <= n; j++ {
				q := min(max(i+j, 0), size-1)
				s += k[j+n] * tmp[q]
			}
			a[at+i*step] = s / sum
		}
	}
	for y := range h {
		line(y*w, 1, w)
	}
	for x := range w {
		line(x, w, h)
	}
}
