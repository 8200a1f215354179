package match

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// anchor finds roughly where a clip shows the toy, for its motion to start from: the
// centre of the circles that bobs on hinges and pins of the base run on, or else from
// where a bob is on the whole, near which it would hang at rest.
func (f *fitter) anchor(c int) {
	k := &f.clips[c]
	jx, jz := f.shift(c)
	if jx < 0 || jz < 0 {
		return
	}
	p := f.values()
	f.apply(c, k.model, p)
	see := f.viewer(c, p)
	other := 2 // the plane's second direction
	if k.above {
		other = 1
	}
	rest := k.model.Rest()
	var circles, means [2]float64
	var nc, nm float64
	for w := range k.watched {
		o := &k.watched[w]
		if o.bob < 0 || !k.model.OnBase(o.part) {
			continue
		}
		at := k.pose(k.model, rest, w)
		x := see.world(&at, w)
		pivot := [2]float64{at.at[0], at.at[other]}
		arm := [2]float64{x[0] - at.at[0] - see.shift[0], x[other] - at.at[other] - see.shift[other]}
		px := k.plane(w, 0)
		if len(px) < fewest {
			continue
		}
		if k.model.OneAxis(o.part) {
			if centre, ok := circle(px, arm); ok {
				circles[0], circles[1] = circles[0]+centre[0]-pivot[0], circles[1]+centre[1]-pivot[1]
				nc++
			}
			continue
		}
		// Where it is on the whole, by Newton's steps on the picture.
		var a, b, n float64
		for i := range k.obs {
			if k.obs[i].who == w {
				a, b, n = a+k.obs[i].a, b+k.obs[i].b, n+1
			}
		}
		a, b = a/n, b/n
		for range 4 {
			u, v := see.project(w, x)
			const h = 1e-4
			x0, x1 := x, x
			x0[0] += h
			x1[other] += h
			ux, vx := see.project(w, x0)
			uz, vz := see.project(w, x1)
			ux, vx, uz, vz = (ux-u)/h, (vx-v)/h, (uz-u)/h, (vz-v)/h
			if d := ux*vz - uz*vx; d != 0 {
				x[0] += ((a-u)*vz - (b-v)*uz) / d
				x[other] += (ux*(b-v) - vx*(a-u)) / d
			}
		}
		if !k.above {
			x[2] = math.Min(x[2], k.highest(w, math.Hypot(arm[0], arm[1]), x[0]-arm[0])+arm[1])
		}
		means[0], means[1] = means[0]+x[0]-arm[0]-pivot[0], means[1]+x[other]-arm[1]-pivot[1]
		nm++
	}
	if nc == 0 {
		circles, nc = means, nm
	}
	if nc == 0 || math.IsNaN(circles[0]+circles[1]) {
		return
	}
	for i, j := range []int{jx, jz} {
		q := &f.params[j]
		q.value = circles[i] / nc
	}
}

// highest is the greatest height, m, at which the ball joint of a bob that hangs from
// it by radius may be for the bob to be where it is seen, at whatever depth. Where the
// camera looks level, it is that height: somewhere the bob passes the plane of the
// joint.
func (k *clipData) highest(w int, radius, x float64) float64 {
	const steps = 24
	var all []float64
	near, far := k.plane(w, radius), k.plane(w, -radius)
	for i := range min(len(near), len(far)) {
		best := math.Inf(-1)
		for s := range 2*steps + 1 {
			u := float64(s)/steps - 1 // depth over radius
			bx, bz := (near[i][0]*(1-u)+far[i][0]*(1+u))/2-x, (near[i][1]*(1-u)+far[i][1]*(1+u))/2
			if up2 := radius*radius*(1-u*u) - bx*bx; up2 >= 0 {
				best = math.Max(best, bz+math.Sqrt(up2))
			}
		}
		if !math.IsInf(best, 0) {
			all = append(all, best)
		}
	}
	if len(all) == 0 {
		return math.Inf(1)
	}
	slices.Sort(all)
	return all[len(all)/100]
}

// plane are the places of watched thing w in the plane of motion, or as far in front
// of it (+) as said, m.
func (k *clipData) plane(w int, front float64) [][2]float64 {
	var out [][2]float64
	for i := range k.obs {
		o := &k.obs[i]
		if o.who != w {
			continue
		}
		x, z := o.a, o.b
		if k.camera != nil {
			x, z, _ = k.camera.BobToPlane(o.a, o.b, k.watched[w].radius, k.watched[w].depth+front)
		}
		if !math.IsNaN(x + z) {
			out = append(out, [2]float64{x, z})
		}
	}
	return out
}

// circle is the centre of a circle of known radius through the places p: by
// Gauss–Newton steps on the distances, once from the circle that fits without
// knowing the radius (I. Kåsa, IEEE Trans. Instrumentation and Measurement 25 (1976)
// 8) and once from where the centre is when the places lie about the arm's end.
func circle(p [][2]float64, arm [2]float64) (centre [2]float64, ok bool) {
	radius := math.Hypot(arm[0], arm[1])
	if radius == 0 {
		return centre, false
	}
	n := len(p)
	var mean [2]float64
	a, rhs := mat.NewDense(n, 3, nil), mat.NewVecDense(n, nil)
	for i, q := range p {
		mean[0], mean[1] = mean[0]+q[0]/float64(n), mean[1]+q[1]/float64(n)
		a.SetRow(i, []float64{2 * q[0], 2 * q[1], 1})
		rhs.SetVec(i, q[0]*q[0]+q[1]*q[1])
	}
	starts := [][2]float64{{mean[0] - arm[0], mean[1] - arm[1]}}
	var free mat.VecDense
	if free.SolveVec(a, rhs) == nil {
		starts = append(starts, [2]float64{free.AtVec(0), free.AtVec(1)})
	}
	best := math.Inf(1)
	for _, c := range starts {
		var cost float64
		for range 20 {
			var xx, xz, zz, rx, rz float64
			cost = 0
			for _, q := range p {
				dx, dz := q[0]-c[0], q[1]-c[1]
				d := math.Hypot(dx, dz)
				if d == 0 {
					continue
				}
				dx, dz = dx/d, dz/d
				r := d - radius
				cost += r * r
				xx, xz, zz = xx+dx*dx, xz+dx*dz, zz+dz*dz
				rx, rz = rx+dx*r, rz+dz*r
			}
			xx, zz = xx*(1+1e-9), zz*(1+1e-9)
			det := xx*zz - xz*xz
			if det <= 0 {
				break
			}
			sx, sz := (zz*rx-xz*rz)/det, (xx*rz-xz*rx)/det
			if s := math.Hypot(sx, sz); s > radius/2 {
				sx, sz = sx*radius/2/s, sz*radius/2/s
			}
			c[0], c[1] = c[0]+sx, c[1]+sz
			if math.Hypot(sx, sz) < 1e-7 {
				break
			}
		}
		if cost < best {
			best, centre, ok = cost, c, true
		}
	}
	return centre, ok
}

// shift are the parameters of where a clip shows the toy; −1 where there are none.
func (f *fitter) shift(c int) (jx, jz int) {
	jx, jz = -1, -1
	for j := range f.params {
		if q := &f.params[j]; q.clip == c && q.role == byShiftX {
			jx = j
		} else if q.clip == c && q.role == byShiftZ {
			jz = j
		}
	}
	return jx, jz
}

// elsewhere tells whether a toy with a coil was found more than cutAgain from where
// it was taken to be when its motion was cut beside the coil's pushes.
func (f *fitter) elsewhere() bool {
	const cutAgain = 0.5e-3 // m: little beside a push's width
	for c := range f.clips {
		k := &f.clips[c]
		if jx, jz := f.shift(c); jx >= 0 && !k.undriven && math.Hypot(f.params[jx].value-k.cutAt[0], f.params[jz].value-k.cutAt[1]) > cutAgain {
			return true
		}
	}
	return false
}
