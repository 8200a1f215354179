package shake

import (
	"image"
	"math"

	"lodeswing/track/clip"
)

const (
	side  = 25 // template pixels, its width and height
	half  = side / 2
	reach = 4 // template pixels that a search may wander from where it started
)

// template is a small piece of the first observed frame that is found again in
// later ones, to a fraction of a pixel, by the inverse compositional method
// (Baker & Matthews, Lucas–Kanade 20 years on, IJCV 56, 2004), for a shift alone
// and blind to changes of brightness and contrast.
type template struct {
	cu, cv int // centre in the upright picture
	scale  int // pixels of the picture to one of the template
	// gu, gv are the gradients, made orthogonal to a constant and to the template
	// itself, so that brightness and contrast drop out.
	gu, gv   []float32
	zero     []float32  // the template less its mean
	norm     float64    // its length
	inv      [3]float64 // inverse of the gradients' 2 × 2 normal matrix: uu, uv, vv
	minEigen float64    // of the normal matrix itself
}

// newTemplate cuts a template about (cu, cv); ok is false where it does not fit
// into the picture or shows nothing.
func newTemplate(f *clip.Frame, cu, cv, scale int, buf *buffers) (*template, bool) {
	g, ok := buf.grey(f, cu, cv, half+1, scale)
	if !ok {
		return nil, false
	}
	const w = side + 2
	t := &template{cu: cu, cv: cv, scale: scale}
	n := side * side
	t.gu, t.gv, t.zero = make([]float32, n), make([]float32, n), make([]float32, n)
	var mean float64
	for v := 0; v < side; v++ {
		for u := 0; u < side; u++ {
			i, o := v*side+u, (v+1)*w+u+1
			t.gu[i] = (g[o+1] - g[o-1]) / 2
			t.gv[i] = (g[o+w] - g[o-w]) / 2
			t.zero[i] = g[o]
			mean += float64(g[o])
		}
	}
	mean /= float64(n)
	var sq float64
	for i := range t.zero {
		t.zero[i] -= float32(mean)
		sq += float64(t.zero[i]) * float64(t.zero[i])
	}
	if sq < float64(n) { // under one grey level r.m.s.
		return nil, false
	}
	t.norm = math.Sqrt(sq)
	for _, d := range [][]float32{t.gu, t.gv} {
		var m, along float64
		for i := range d {
			m += float64(d[i])
			along += float64(d[i]) * float64(t.zero[i])
		}
		m /= float64(n)
		along /= sq
		for i := range d {
			d[i] -= float32(m + along*float64(t.zero[i]))
		}
	}
	var uu, uv, vv float64
	for i := range t.gu {
		a, b := float64(t.gu[i]), float64(t.gv[i])
		uu += a * a
		uv += a * b
		vv += b * b
	}
	det := uu*vv - uv*uv
	t.minEigen = (uu+vv)/2 - math.Hypot((uu-vv)/2, uv)
	if !(t.minEigen > 1) || det <= 0 {
		return nil, false
	}
	t.inv = [3]float64{vv / det, -uv / det, uu / det}
	return t, true
}

// find looks for the template near its own place moved by (du, dv) pixels of
// the picture, and returns the refined shift and the likeness, the normalised
// cross-correlation. ok is false where it leaves the picture, does not settle or
// wanders.
func (t *template) find(f *clip.Frame, du, dv float64, buf *buffers) (u, v, likeness float64, ok bool) {
	s := float64(t.scale)
	iu, iv := int(math.Round(du)), int(math.Round(dv))
	g, inside := buf.grey(f, t.cu+iu, t.cv+iv, half+reach+2, t.scale)
	if !inside {
		return 0, 0, 0, false
	}
	w := side + 2*(reach+2)
	pu, pv := (du-float64(iu))/s, (dv-float64(iv))/s // in template pixels, from the window's centre
	for range 30 {
		if math.Abs(pu) > reach || math.Abs(pv) > reach {
			return 0, 0, 0, false
		}
		moved := buf.shift(g, w, pu, pv, reach+2)
		var bu, bv, along, mean, sq float64
		for i, x := range moved {
			y := float64(x)
			bu += float64(t.gu[i]) * y
			bv += float64(t.gv[i]) * y
			along += float64(t.zero[i]) * y
			mean += y
			sq += y * y
		}
		n := float64(len(moved))
		spread := math.Sqrt(math.Max(sq-mean*mean/n, 1e-9))
		likeness = along / (t.norm * spread)
		gain := along / (t.norm * t.norm)
		if gain < 0.2 { // something else is there
			return 0, 0, likeness, false
		}
		su := (t.inv[0]*bu + t.inv[1]*bv) / gain
		sv := (t.inv[1]*bu + t.inv[2]*bv) / gain
		if m := math.Hypot(su, sv); m > 1.5 {
			su, sv = su*1.5/m, sv*1.5/m
		}
		pu -= su
		pv -= sv
		if math.Abs(su)+math.Abs(sv) < 2e-3 {
			return float64(iu) + pu*s, float64(iv) + pv*s, likeness, true
		}
	}
	return 0, 0, likeness, false
}

// buffers are the scratch memory of one Watch.
type buffers struct {
	patch  clip.Patch
	plane  []float32
	rows   []float32
	result [side * side]float32
}

// grey returns the grey values, (b + 2g + r)/4, of (2·r+1)² template pixels
// about (cu, cv), each the mean of scale × scale pixels of the picture; ok is
// false where that leaves the picture. The slice is valid until the next call.
func (b *buffers) grey(f *clip.Frame, cu, cv, r, scale int) (out []float32, ok bool) {
	w := 2*r + 1
	// A block of even size has its middle between pixels; a template and what it
	// is compared with have the same offset, so it drops out.
	lo := image.Pt(cu-r*scale-scale/2, cv-r*scale-scale/2)
	rect := image.Rectangle{Min: lo, Max: lo.Add(image.Pt(w*scale, w*scale))}
	if !rect.In(f.Bounds()) {
		return nil, false
	}
	f.Patch(&b.patch, rect)
	if cap(b.plane) < w*w {
		b.plane = make([]float32, w*w)
	}
	out = b.plane[:w*w]
	if scale == 1 {
		p := b.patch.BGR
		for i := range out {
			q := p[3*i : 3*i+3 : 3*i+3]
			out[i] = float32(int(q[0])+2*int(q[1])+int(q[2])) * 0.25
		}
		return out, true
	}
	for v := 0; v < w; v++ {
		for u := 0; u < w; u++ {
			sum := 0
			for y := 0; y < scale; y++ {
				p := 3 * ((v*scale+y)*b.patch.W + u*scale)
				for _, q := 0, p; q < p+3*scale; q += 3 {
					sum += int(b.patch.BGR[q]) + 2*int(b.patch.BGR[q+1]) + int(b.patch.BGR[q+2])
				}
			}
			out[v*w+u] = float32(sum) / float32(4*scale*scale)
		}
	}
	return out, true
}

// shift samples the window g (w × w) at the template's pixels moved by (pu, pv),
// by cubic convolution (Keys, IEEE Trans. ASSP 29, 1981, a = −1/2). margin is
// what the window has on each side beyond the template; |pu|, |pv| ≤ margin − 2.
func (b *buffers) shift(g []float32, w int, pu, pv float64, margin int) []float32 {
	bu, bv := math.Floor(pu), math.Floor(pv)
	ku, kv := keys(pu-bu), keys(pv-bv)
	u0, v0 := margin+int(bu)-1, margin+int(bv)-1
	const tall = side + 3
	if cap(b.rows) < side*tall {
		b.rows = make([]float32, side*tall)
	}
	rows := b.rows[:side*tall]
	for v := 0; v < tall; v++ {
		in := g[(v0+v)*w+u0 : (v0+v)*w+u0+side+3]
		out := rows[v*side : (v+1)*side]
		for u := range out {
			q := in[u : u+4 : u+4]
			out[u] = ku[0]*q[0] + ku[1]*q[1] + ku[2]*q[2] + ku[3]*q[3]
		}
	}
	for v := 0; v < side; v++ {
		a, c, d, e := rows[v*side:], rows[(v+1)*side:], rows[(v+2)*side:], rows[(v+3)*side:]
		out := b.result[v*side : (v+1)*side]
		for u := range out {
			out[u] = kv[0]*a[u] + kv[1]*c[u] + kv[2]*d[u] + kv[3]*e[u]
		}
	}
	return b.result[:]
}

// keys returns the four weights of cubic convolution at the fraction x, for the
// samples at −1, 0, 1, 2.
func keys(x float64) [4]float32 {
	return [4]float32{
		float32(((-0.5*x+1)*x - 0.5) * x),
		float32((1.5*x-2.5)*x*x + 1),
		float32(((-1.5*x+2)*x + 0.5) * x),
		float32((0.5*x - 0.5) * x * x),
	}
}
