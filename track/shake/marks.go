package shake

import (
	"fmt"
	"math"

	"lodeswing/track/clip"
)

// start cuts the mark out of the first frame.
func (k *MarkMotion) start(f *clip.Frame, noise float64, buf *buffers) {
	if len(k.want.PX) != 2 {
		k.why = fmt.Sprintf("The mark %q has no place; give px = [u, v] in the rig.", k.Name)
		return
	}
	u, v := int(math.Round(k.want.PX[0])), int(math.Round(k.want.PX[1]))
	w, h := f.Size()
	if u < half+2 || v < half+2 || u >= w-half-2 || v >= h-half-2 {
		k.why = fmt.Sprintf("The mark %q at [%g, %g] lies at the edge of the picture (%d × %d) or outside it; place it at least %d pixels inside.", k.Name, k.want.PX[0], k.want.PX[1], w, h, half+2)
		return
	}
	t, ok := newTemplate(f, u, v, 1, buf)
	if !ok || t.minEigen-side*side*noise*noise/2 < noise*noise/0.01 {
		k.why = fmt.Sprintf("The mark %q at [%d, %d] shows too little contrast to be followed; stick a dark dot on it, or correct its px in the rig.", k.Name, u, v)
		return
	}
	k.tpl = t
	k.u0 = math.Hypot(noise*math.Sqrt((t.inv[0]+t.inv[2])/2), 0.01)
	k.add(f, 0, 0)
}

func (k *MarkMotion) add(f *clip.Frame, du, dv float64) {
	k.du, k.dv = du, dv
	k.frames = append(k.frames, f.Index)
	k.T = append(k.T, f.T)
	k.U = append(k.U, float64(k.tpl.cu)+du)
	k.V = append(k.V, float64(k.tpl.cv)+dv)
}

// follow finds the mark again, where it was last or where the background's
// motion would take it.
func (k *MarkMotion) follow(f *clip.Frame, background similarity, buf *buffers) {
	if k.tpl == nil {
		return
	}
	du, dv, like, ok := k.tpl.find(f, k.du, k.dv, buf)
	if !ok || like < 0.7 {
		w, h := f.Size()
		du, dv = background.at(float64(k.tpl.cu)-float64(w-1)/2, float64(k.tpl.cv)-float64(h-1)/2)
		du, dv, like, ok = k.tpl.find(f, du, dv, buf)
	}
	if !ok || like < 0.7 {
		k.lost++
		return
	}
	k.add(f, du, dv)
}
