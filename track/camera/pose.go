package camera

import (
	"context"
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"lodeswing/analyze/lsq"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// poseFit finds the camera that sees the points of a target where they were seen.
type poseFit struct {
	pts       []Point
	print     float64      // true size of the print over its nominal size
	world     []vec        // the points, m
	white     [][3]float64 // inverse Cholesky factor of each point's covariance
	pl        plane
	at        vec // the target's middle
	f0, uF    float64
	k0, uK    [2]float64
	dist, uD  float64 // 0: not given
	w, h      int
	leastFold float64 // px from the picture's middle within which no lens may fold it; corners may be lost
}

// newPoseFit takes what the rig says of the camera as prior knowledge.
func newPoseFit(pts []Point, print, depth float64, pl plane, w, h int, cam rig.Camera) (*poseFit, error) {
	q := &poseFit{
		pts: pts, print: print, pl: pl, w: w, h: h, at: pl.at.plus(depth, pl.n),
		f0: usualFocal * float64(max(w, h)), uF: uFreeFocal, uK: [2]float64{uTargetK, uTargetK},
		leastFold: float64(max(w, h)) / 2,
	}
	if cam.DistanceM.Set {
		q.dist, q.uD = cam.DistanceM.V, cam.DistanceM.U
		if s := scaleOf(pts, print); s > 0 { // a nearer start than a usual phone
			q.f0 = q.dist / s
		}
	}
	if cam.FocalPX.Set {
		q.f0, q.uF = cam.FocalPX.V, cam.FocalPX.U/cam.FocalPX.V
	}
	copy(q.k0[:], cam.Lens)
	if len(cam.Lens) > 0 {
		q.uK = [2]float64{uGivenLens(q.k0[0]), uGivenLens(q.k0[1])}
	}
	for i, p := range pts {
		q.world = append(q.world, q.at.plus(p.X*print, pl.e1).plus(p.Z*print, pl.e2))
		a := math.Sqrt(p.Pixel.AA)
		b := p.Pixel.AB / a
		d := math.Sqrt(p.Pixel.BB - b*b)
		if !(a > 0) || !(d > 0) || math.IsInf(a+d, 0) {
			return nil, fmt.Errorf("point %d was seen with the impossible covariance %v", i+1, p.Pixel)
		}
		q.white = append(q.white, [3]float64{1 / a, -b / (a * d), 1 / d})
	}
	return q, nil
}

// solve gives the camera, the covariance of its nine numbers (those of a
// track.Unsure), and, where the points do not decide which way the target leans,
// that uncertainty.
func (q *poseFit) solve() (p pinhole, cov *mat.SymDense, either *track.Unsure, err error) {
	var sum *lsq.Summary
	// A target that covers little of the picture may ask for a lens that folds the
	// rest of it over: such a lens is then held nearer to none.
	for try := 0; ; try++ {
		if p, sum, either, err = q.best(); err != nil {
			return p, nil, nil, err
		}
		if !p.folds(q.leastFold / p.f) {
			break
		}
		if try == 3 {
			return p, nil, nil, fmt.Errorf("its points ask for a lens that folds the picture over (k1 = %.3g, k2 = %.3g): it must be flat, and larger in the picture", p.k1, p.k2)
		}
		q.uK[1] /= 10
		if try > 0 {
			q.uK[0] /= 3
		}
	}
	// Points that scatter more than they claim widen the covariance (Birge ratio).
	birge := math.Max(1, sum.ChiSquare/float64(max(1, 2*len(q.pts)-9)))
	if birge > 25 {
		return p, nil, nil, fmt.Errorf("its points lie %.1f times as far from a flat target's as they can be seen: the print is bent, or was not drawn by lodeswing", math.Sqrt(birge))
	}
	cov = mat.NewSymDense(9, nil)
	for i := range 9 {
		for k := i; k < 9; k++ {
			cov.SetSym(i, k, birge*sum.Cov[9*i+k])
		}
	}
	return p, cov, either, nil
}

// best searches from the homography's start and from its mirror image.
func (q *poseFit) best() (pinhole, *lsq.Summary, *track.Unsure, error) {
	start := pinhole{cu: float64(q.w-1) / 2, cv: float64(q.h-1) / 2, f: q.f0, k1: q.k0[0], k2: q.k0[1]}
	if err := q.start(&start); err != nil {
		return start, nil, nil, err
	}
	_, p, err := q.search(start)
	if err != nil {
		return p, nil, nil, err
	}
	sum, p, err := q.search(p) // from the solution itself, so that the covariance is that of small steps
	if err != nil {
		return p, nil, nil, err
	}
	// A plane seen nearly square on fits about as well when it leans the other way
	// (D. Oberkampf, D. DeMenthon and L. Davis, Computer Vision and Image
	// Understanding 63 (1996) 495): try that too, and let what remains undecided
	// count as uncertainty.
	sum2, second, err := q.search(p.leaningBack(q.world, q.pl))
	if err != nil {
		return p, sum, nil, nil // the first solution stands
	}
	if sum2.ChiSquare < sum.ChiSquare {
		first, chi := p, sum.ChiSquare
		if sum, p, err = q.search(second); err != nil {
			return p, nil, nil, err
		}
		second, sum2.ChiSquare = first, chi
	}
	share := 1 / (1 + math.Exp(math.Min((sum2.ChiSquare-sum.ChiSquare)/2, 500)))
	if share < 1e-6 {
		return p, sum, nil, nil
	}
	either := &track.Unsure{Source: "which way the target leans", By: second.from(p)}
	for i := range either.By {
		either.By[i] *= math.Sqrt(share * (1 - share))
	}
	return p, sum, either, nil
}

// search is one descent; its parameters are the nine numbers that move start.
func (q *poseFit) search(start pinhole) (*lsq.Summary, pinhole, error) {
	rows := 2*len(q.pts) + 4
	residuals := func(x, out []float64) error {
		c := start.moved([9]float64(x))
		for i, wp := range q.world {
			u, v, _ := c.project(wp)
			du, dv := u-q.pts[i].U, v-q.pts[i].V
			out[2*i] = q.white[i][0] * du
			out[2*i+1] = q.white[i][1]*du + q.white[i][2]*dv
		}
		out[rows-4] = math.Log(c.f/q.f0) / q.uF
		out[rows-3], out[rows-2] = (c.k1-q.k0[0])/q.uK[0], (c.k2-q.k0[1])/q.uK[1]
		out[rows-1] = 0
		if q.dist > 0 {
			_, _, d, _ := c.meet(0, 0, q.pl, 0)
			out[rows-1] = (d - q.dist) / q.uD
		}
		return nil
	}
	size := start.eye.plus(-1, q.at).length()
	problem := lsq.Problem{
		N: 9, M: rows, Residuals: residuals,
		Names: []string{"f", "k1", "k2", "turn right", "turn down", "turn ahead", "eye x", "eye y", "eye z"},
		Scale: []float64{0.1, 0.05, 0.05, 0.1, 0.1, 0.1, size, size, size},
	}
	sum, err := lsq.Solve(context.Background(), problem, make([]float64, 9), lsq.Options{SigmaKnown: true, TolF: 1e-10})
	if err != nil {
		return nil, start, err
	}
	if !sum.Converged {
		return nil, start, fmt.Errorf("the fit of its points did not settle: %s", sum.Reason)
	}
	return sum, start.moved([9]float64(sum.P)), nil
}

// leaningBack is the camera to which the points, in their plane, seem to lean
// the other way: turned half round about the line of sight to their middle, and
// half round about the plane's normal.
func (p pinhole) leaningBack(world []vec, pl plane) pinhole {
	var m vec
	for _, w := range world {
		m = m.plus(1/float64(len(world)), w)
	}
	at := p.r.times(m.plus(-1, p.eye))
	l := at.unit()
	half := func(axis vec) turn {
		return rotation(vec{math.Pi * axis[0], math.Pi * axis[1], math.Pi * axis[2]})
	}
	p.r = half(l).after(p.r)
	p.r = half(p.r.times(pl.n)).after(p.r)
	p.eye = m.plus(-1, p.r.back(at))
	return p
}

// scaleOf is a rough scale in m/px: the spread of the points on the print over
// that in the picture.
func scaleOf(pts []Point, print float64) float64 {
	var m, q [2]float64
	for _, p := range pts {
		m[0], m[1] = m[0]+p.X/float64(len(pts)), m[1]+p.Z/float64(len(pts))
		q[0], q[1] = q[0]+p.U/float64(len(pts)), q[1]+p.V/float64(len(pts))
	}
	var a, b float64
	for _, p := range pts {
		a += (p.X-m[0])*(p.X-m[0]) + (p.Z-m[1])*(p.Z-m[1])
		b += (p.U-q[0])*(p.U-q[0]) + (p.V-q[1])*(p.V-q[1])
	}
	return print * math.Sqrt(a/b)
}

// start sets turn and eye from the homography between print and picture
// (direct linear transformation with normalised coordinates: R. Hartley and
// A. Zisserman, Multiple View Geometry, 2nd ed., algorithm 4.2; its factors as
// in Z. Zhang, IEEE PAMI 22 (2000) 1330, section 3.1).
func (q *poseFit) start(p *pinhole) error {
	pl, pts := q.pl, q.pts
	from, to := make([][2]float64, len(pts)), make([][2]float64, len(pts))
	for i, s := range pts {
		x, y, _ := p.unlens(s.U, s.V)
		from[i], to[i] = [2]float64{s.X * q.print, s.Z * q.print}, [2]float64{x, y}
	}
	h, err := homography(from, to)
	if err != nil {
		return err
	}
	col := func(k int) vec { return vec{h[k], h[3+k], h[6+k]} }
	a, b, t := col(0), col(1), col(2)
	if h[6]*from[0][0]+h[7]*from[0][1]+h[8] < 0 {
		for i := range 3 {
			a[i], b[i], t[i] = -a[i], -b[i], -t[i]
		}
	}
	scale := 2 / (a.length() + b.length())
	// The nearest pair of orthogonal directions: halfway apart about their middle.
	mid, off := a.unit().plus(1, b.unit()).unit(), a.unit().plus(-1, b.unit()).unit()
	r1 := vec{}.plus(math.Sqrt2/2, mid).plus(math.Sqrt2/2, off)
	r2 := vec{}.plus(math.Sqrt2/2, mid).plus(-math.Sqrt2/2, off)
	n := r1.cross(r2)
	if !(n[2] < 0) {
		return errors.New("its points are seen in mirror image")
	}
	for i := range 3 {
		p.r[i] = vec{}.plus(r1[i], pl.e1).plus(r2[i], pl.e2).plus(n[i], pl.n)
	}
	p.eye = q.at.plus(-scale, p.r.back(t))
	if l := p.eye.length(); math.IsNaN(l) || math.IsInf(l, 0) {
		return errors.New("its points do not span a plane")
	}
	return nil
}

// homography finds the 3×3 matrix, row by row, that takes from to to.
func homography(from, to [][2]float64) ([9]float64, error) {
	nf, sf := normalised(from)
	nt, st := normalised(to)
	a := mat.NewDense(2*len(from), 9, nil)
	for i := range nf {
		x, y, u, v := nf[i][0], nf[i][1], nt[i][0], nt[i][1]
		a.SetRow(2*i, []float64{-x, -y, -1, 0, 0, 0, u * x, u * y, u})
		a.SetRow(2*i+1, []float64{0, 0, 0, -x, -y, -1, v * x, v * y, v})
	}
	var svd mat.SVD
	if !svd.Factorize(a, mat.SVDFullV) {
		return [9]float64{}, errors.New("its points give no homography")
	}
	if s := svd.Values(nil); s[7] < 1e-9*s[0] {
		return [9]float64{}, errors.New("its points lie on one line")
	}
	var v mat.Dense
	svd.VTo(&v)
	col := make([]float64, 9)
	for i := range col {
		col[i] = v.At(i, 8)
	}
	hn := mat.NewDense(3, 3, col)
	// Undo the normalisation: H = St⁻¹ · Hn · Sf.
	inv := mat.NewDense(3, 3, []float64{1 / st[0], 0, st[1], 0, 1 / st[0], st[2], 0, 0, 1})
	fwd := mat.NewDense(3, 3, []float64{sf[0], 0, -sf[0] * sf[1], 0, sf[0], -sf[0] * sf[2], 0, 0, 1})
	var out mat.Dense
	out.Product(inv, hn, fwd)
	var h [9]float64
	for i := range 9 {
		h[i] = out.At(i/3, i%3)
	}
	return h, nil
}

// normalised moves points to their mean and scales them to a mean distance of
// √2; s is the scale and the mean.
func normalised(pts [][2]float64) (out [][2]float64, s [3]float64) {
	for _, p := range pts {
		s[1] += p[0] / float64(len(pts))
		s[2] += p[1] / float64(len(pts))
	}
	var d float64
	for _, p := range pts {
		d += math.Hypot(p[0]-s[1], p[1]-s[2]) / float64(len(pts))
	}
	s[0] = math.Sqrt2 / d
	out = make([][2]float64, len(pts))
	for i, p := range pts {
		out[i] = [2]float64{s[0] * (p[0] - s[1]), s[0] * (p[1] - s[2])}
	}
	return out, s
}
