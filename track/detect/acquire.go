package detect

import (
	"image"
	"math"

	"lodeswing/track/clip"
)

// Acquire fits a candidate for the first time: it chooses the projection of the
// colours in which bob and wall differ most over their noise, and closes in
// from a coarse blur to the edge's own. subsampled says that the clip stores
// colour at half resolution (4:2:0 and the like), whose edges are soft and may
// be shifted: then the luma is used unless it shows almost nothing. Blur and
// ellipse are left uncertain, since the bob may be moving.
func Acquire(p *clip.Patch, c Candidate, active image.Rectangle, subsampled, ball bool) (*Fitter, Fit) {
	w, blocks, ok := projection(p, c, subsampled)
	if !ok {
		return nil, Fit{Why: "bob and wall do not differ"}
	}
	f := NewFitter(w, c.R, 0.12*c.R+1, active)
	f.Blocks = blocks
	g := Guess{U: c.U, V: c.V, UPos: 0.1*c.R + 1}
	coarse := math.Min(2.5, 0.25*c.R)
	f.Shape.Blur, f.Shape.UBlur = coarse, 0.1
	f.rough, f.unlit = 0.15, true
	r := f.Fit(p, nil, g, nil, false)
	if !r.OK {
		return nil, r
	}
	f.Shape.R, f.Shape.UR = r.R, 0.06*r.R+0.3
	f.Shape.UBlur, f.Shape.UE = coarse, 0.1
	if ball {
		f.ball = 1
		if w[0]*c.Blue+w[1]*c.Green+w[2]*c.Red < 0 {
			f.ball = -1
		}
	}
	even := r
	f.unlit = false
	f.forget()
	f.slow[2].mean = 10 * f.ball // from the camera's side, to begin with
	r, ok = f.closeIn(p, even)
	if !ok || wild(&r, &even) {
		// What is not lit as a ball is, and has a pattern of its own, can lead the
		// shading astray: it is taken as evenly bright.
		f.unlit = true
		f.forget()
		f.Shape.R, f.Shape.UR = even.R, 0.06*even.R+0.3
		f.Shape.Blur, f.Shape.UBlur = coarse, coarse
		f.Shape.E1, f.Shape.E2, f.Shape.UE = 0, 0, 0.1
		if r, ok = f.closeIn(p, even); !ok {
			return nil, r
		}
	}
	f.agree, f.agreeN = 1, 0
	f.loosen()
	return f, r
}

// wild tells whether a fit describes hardly anything that is there: its noise is
// half of the contrast, or its level is far from what a fit without shading found.
func wild(r, plain *Fit) bool {
	return r.Noise > 0.5*math.Abs(r.Contrast) || math.Abs(r.Level-plain.Level) > 0.5*math.Abs(plain.Contrast)
}

// Relearn drops what was learnt of the bob's light and shape but its size, and
// all trust in it: the first fits of a moving bob know nothing of its smear.
func (f *Fitter) Relearn() {
	f.forget()
	f.slow[2].mean = 10 * f.ball
	s := &f.Shape
	s.UR = math.Max(s.UR, 0.02*s.R)
	s.Blur, s.UBlur = math.Min(s.Blur, 1.2), 0.5
	s.E1, s.E2, s.UE = 0, 0, 0.05
	f.agree, f.agreeN = 1, 0
}

// loosen keeps the values of the slow quantities but not the trust in them: they
// were found while the outline was not yet.
func (f *Fitter) loosen() {
	for i := range f.slow {
		q := &f.slow[i]
		q.u, q.walk = 30, 1
	}
	f.known = 0
}

// faults is how far the model is usually from a real outline, over the contrast.
const faults = 0.01

// closeIn fits again with everything free, from a coarse fit.
func (f *Fitter) closeIn(p *clip.Patch, r Fit) (Fit, bool) {
	for _, rough := range []float64{0.08, 0.03, faults} {
		f.rough = rough
		g := Guess{U: r.U, V: r.V, UPos: 0.3}
		r = f.Fit(p, nil, g, nil, true)
		if !r.OK {
			return r, false
		}
		f.Shape.R, f.Shape.UR = r.R, 0.03*r.R+0.1
		f.Shape.Blur, f.Shape.UBlur = r.Blur, 0.5*r.Blur
		f.Shape.E1, f.Shape.E2, f.Shape.UE = r.E1, r.E2, 0.05
		f.loosen()
	}
	return r, true
}

// projection returns weights of blue, green and red in whose sum bob and wall
// differ most over the noise (Fisher's linear discriminant), scaled so that the
// weights' sizes add up to one. blocks says that it is one of
// colour differences, which subsampled clips store once per 2 × 2 pixels.
func projection(p *clip.Patch, c Candidate, subsampled bool) (w [3]float64, blocks, ok bool) {
	var in, out [3]float64
	var nIn, nOut float64
	var noise [3][3]float64
	var nNoise float64
	row := 3 * p.W
	in2, from2, far := 0.64*c.R*c.R, (1.15*c.R+1)*(1.15*c.R+1), 1.6*c.R+4
	box := image.Rect(int(c.U-far), int(c.V-far), int(c.U+far)+2, int(c.V+far)+2).Intersect(p.Rect).Sub(p.Rect.Min)
	for y := box.Min.Y; y < box.Max.Y; y++ {
		for x := box.Min.X; x < box.Max.X; x++ {
			dx, dy := float64(x+p.Rect.Min.X)-c.U, float64(y+p.Rect.Min.Y)-c.V
			d2 := dx*dx + dy*dy
			o := y*row + 3*x
			inside := d2 < in2
			outside := d2 > from2 && d2 < far*far
			if !inside && !outside {
				continue
			}
			sum, n := &out, &nOut
			if inside {
				sum, n = &in, &nIn
			}
			for k := range 3 {
				sum[k] += float64(p.BGR[o+k])
			}
			*n++
			// Differences of near pixels hold the noise and little else. They are taken
			// two apart, because subsampled colour repeats itself in next neighbours.
			if x+2 < p.W && y+2 < p.H {
				var e [3]float64
				for k := range 3 {
					e[k] = (float64(p.BGR[o+k]) - float64(p.BGR[o+6+k])) / math.Sqrt2
				}
				for i := range 3 {
					for j := range 3 {
						noise[i][j] += e[i] * e[j]
					}
				}
				nNoise++
			}
		}
	}
	if nIn < 5 || nOut < 5 || nNoise < 5 {
		return w, false, false
	}
	var diff [3]float64
	size := 0.0
	for k := range 3 {
		diff[k] = in[k]/nIn - out[k]/nOut
		size += math.Abs(diff[k])
	}
	if size < 3 {
		return w, false, false
	}
	luma := [3]float64{lumaB, lumaG, lumaR}
	if subsampled {
		var chroma [3]float64
		dy := luma[0]*diff[0] + luma[1]*diff[1] + luma[2]*diff[2]
		mean := (diff[0] + diff[1] + diff[2] - 3*dy) / 3
		for k := range 3 {
			chroma[k] = diff[k] - dy - mean // no luma of a grey in it
		}
		// How far a projection sees the bob through the noise.
		clear := func(w [3]float64) float64 {
			d, q := 0.0, 0.0
			for i := range 3 {
				d += w[i] * diff[i]
				for j := range 3 {
					q += w[i] * w[j] * noise[i][j] / nNoise
				}
			}
			return math.Abs(d) / math.Sqrt(q+quantum(w)+0.25*(w[0]*w[0]+w[1]*w[1]+w[2]*w[2]))
		}
		// Chroma's edges are twice as soft, its samples a quarter as many, and a codec
		// spends little on them: its centres are off by a tenth of a pixel and more,
		// the same in many frames. It is for bobs that luma hardly shows.
		if chroma = unit(chroma); clear(luma) < 4 && clear(chroma) > 3*clear(luma) {
			return chroma, true, true
		}
		return luma, false, true
	}
	var a [3][4]float64
	trace := (noise[0][0] + noise[1][1] + noise[2][2]) / nNoise / 3
	for i := range 3 {
		for j := range 3 {
			a[i][j] = noise[i][j] / nNoise
		}
		// Noise that is the same in all channels must not send the weights to
		// infinity, nor a channel without any be trusted alone.
		a[i][i] += 0.1*trace + 0.3
		a[i][3] = diff[i]
	}
	w, ok = solve3(a)
	if !ok {
		return luma, false, true
	}
	return unit(w), false, true
}

func unit(w [3]float64) [3]float64 {
	s := math.Abs(w[0]) + math.Abs(w[1]) + math.Abs(w[2])
	if !(s > 0) {
		return [3]float64{lumaB, lumaG, lumaR}
	}
	for k := range w {
		w[k] /= s
	}
	return w
}
