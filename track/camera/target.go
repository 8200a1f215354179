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

const (
	uPrint      = 0.005 // relative, of a print whose check bar nobody measured (common practice, no source)
	uTargetUp   = 0.5 * math.Pi / 180
	uTargetK    = 0.05 // prior of k1 and k2, from which a target that fills enough of the picture departs
	uFreeFocal  = 0.3  // prior of ln f where the rig gives neither focal_px nor distance_mm
	leastPoints = 8
)

// fromTarget solves the camera from the points of a printed target.
func (c *Camera) fromTarget(r *rig.Rig, origin [2]float64, seen *Sighting) ([]track.Unsure, verticalFrom, error) {
	none := verticalFrom{}
	cal, cam, sc := &c.cal, r.Camera, r.Scale
	if seen == nil || len(seen.Points) < leastPoints {
		return nil, none, fmt.Errorf("the printed target %q was not found in the picture: it must be flat, whole, sharp and evenly lit", sc.Target)
	}
	print, uP := 1.0, uPrint
	if sc.LengthM.Set {
		if seen.BarM <= 0 {
			return nil, none, fmt.Errorf("[scale] gives a measured bar, but the target %q has none: take length_mm out", sc.Target)
		}
		print, uP = sc.LengthM.V/seen.BarM, sc.LengthM.U/sc.LengthM.V
		if math.Abs(print-1) > 0.3 {
			return nil, none, fmt.Errorf("the bar of the target %q is %.0f mm long as designed, the rig says that it measures %.1f mm: length_mm must be the measured length of that bar", sc.Target, seen.BarM*1e3, sc.LengthM.V*1e3)
		}
	} else {
		c.caution(fmt.Sprintf("The target's print was not checked: lengths carry %.1f %% for it. Measure the bar on the print with a ruler and give it as length_mm in [scale].", uP*100))
	}
	depth := sc.DepthM.Or(0)
	pose, cov, err := solvePose(seen.Points, print, depth, c.pl, cal.PictureW, cal.PictureH, cam)
	if err != nil {
		return nil, none, fmt.Errorf("the printed target %q: %w", sc.Target, err)
	}
	cal.ScaleFrom = fmt.Sprintf("the printed target %s", sc.Target)
	cal.LensCorrected, cal.TiltCorrected = true, true
	vertical, uRoll := verticalFrom{"the printed target's upright", true}, uTargetUp
	if seen.UVertical > 0 {
		uRoll = seen.UVertical
	}
	about := func(p pinhole, angle float64) pinhole { return p.swung(c.pl, angle) }
	switch {
	case cam.FromAbove:
		vertical = verticalFrom{"the printed target, lying level", true}
	case len(cam.PlumbPX) >= 2:
		var ends [2][2]float64
		ends, uRoll = plumbLine(&pose, cam.PlumbPX, cam.PlumbUPX.Or(uUsualPlumb))
		var ray [2]vec
		for i, e := range ends {
			x, y, _ := pose.unlens(e[0], e[1])
			ray[i] = vec{x, y, 1}
		}
		n := pose.r.back(ray[0].cross(ray[1]))
		turn := math.Atan(-n.dot(c.pl.e2) / n.dot(c.pl.e1))
		pose = about(pose, turn)
		vertical = verticalFrom{"the plumb line in the rig", true}
	}
	p := pose.anchored(c.pl, origin)
	if _, _, d, _ := p.meet(0, 0, c.pl, 0); !(d > 0) {
		return nil, none, errors.New("the plane of motion does not lie in front of the camera: check depth_mm in [scale]")
	}
	c.pinhole = p

	var unsure []track.Unsure
	add := func(source string, q pinhole) {
		if by := q.anchored(c.pl, origin).from(p); by != [9]float64{} {
			unsure = append(unsure, track.Unsure{Source: source, By: by})
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(cov, true) {
		return nil, none, errors.New("the target's covariance has no eigenvectors")
	}
	var axes mat.Dense
	eig.VectorsTo(&axes)
	for i, v := range eig.Values(nil) {
		var by [9]float64
		for k := range by {
			by[k] = math.Sqrt(math.Max(v, 0)) * axes.At(k, i)
		}
		add("seeing the printed target", pose.moved(by))
	}
	bigger := pose
	at := c.pl.at.plus(depth, c.pl.n)
	bigger.eye = at.plus(1+uP, pose.eye.plus(-1, at))
	add("the print's size", bigger)
	uDepth := uUsualDepth
	if sc.DepthM.Set {
		uDepth = sc.DepthM.U
	}
	nearer := pose
	nearer.eye = pose.eye.plus(uDepth, c.pl.n)
	add("the target's depth", nearer)
	if !cam.FromAbove {
		add("the vertical", about(pose, uRoll))
	} else {
		add("the target's level", pose.leaned(c.pl, vec{1, 0, 0}, uRoll))
		add("the target's level", pose.leaned(c.pl, vec{0, 1, 0}, uRoll))
	}
	return unsure, vertical, nil
}

// swung turns the world's axes within the plane by angle about its normal: the
// camera as seen from axes whose up leans by angle towards e1.
func (p pinhole) swung(pl plane, angle float64) pinhole {
	n := pl.n
	return p.leaned(pl, n, -angle)
}

// leaned is the camera as seen from world axes that are turned by angle about an
// axis through the plane's point.
func (p pinhole) leaned(pl plane, axis vec, angle float64) pinhole {
	t := rotation(vec{angle * axis[0], angle * axis[1], angle * axis[2]})
	p.r = p.r.after(t)
	p.eye = pl.at.plus(1, t.back(p.eye.plus(-1, pl.at)))
	return p
}

// anchored slides the camera along the plane until the plane's point shows at
// the origin's pixel.
func (p pinhole) anchored(pl plane, origin [2]float64) pinhole {
	x, y, _ := p.unlens(origin[0], origin[1])
	a, b, _, _ := p.meet(x, y, pl, 0)
	p.eye = p.eye.plus(-a, pl.e1).plus(-b, pl.e2)
	return p
}

// solvePose finds the camera that sees the points where they were seen, and the
// covariance of its nine numbers (those of a track.Unsure).
func solvePose(pts []Point, print, depth float64, pl plane, w, h int, cam rig.Camera) (pinhole, *mat.SymDense, error) {
	p := pinhole{cu: float64(w-1) / 2, cv: float64(h-1) / 2}
	f0, uF := usualFocal*float64(max(w, h)), uFreeFocal
	if cam.FocalPX.Set {
		f0, uF = cam.FocalPX.V, cam.FocalPX.U/cam.FocalPX.V
	}
	var k0 [2]float64
	uK := [2]float64{uTargetK, uTargetK}
	copy(k0[:], cam.Lens)
	if len(cam.Lens) > 0 {
		uK = [2]float64{uGivenLens(k0[0]), uGivenLens(k0[1])}
	}
	at := pl.at.plus(depth, pl.n)
	world := make([]vec, len(pts))
	white := make([][3]float64, len(pts)) // inverse Cholesky factor of each point's covariance
	for i, q := range pts {
		world[i] = at.plus(q.X*print, pl.e1).plus(q.Z*print, pl.e2)
		a := math.Sqrt(q.Pixel.AA)
		b := q.Pixel.AB / a
		d := math.Sqrt(q.Pixel.BB - b*b)
		if !(a > 0) || !(d > 0) || math.IsInf(a+d, 0) {
			return p, nil, fmt.Errorf("point %d was seen with the impossible covariance %v", i+1, q.Pixel)
		}
		white[i] = [3]float64{1 / a, -b / (a * d), 1 / d}
	}
	if cam.DistanceM.Set && !cam.FocalPX.Set { // a nearer start than a usual phone
		if s := scaleOf(pts, print); s > 0 {
			f0, uF = cam.DistanceM.V/s, uFreeFocal
		}
	}
	p.f, p.k1, p.k2 = f0, k0[0], k0[1]
	if err := startPose(&p, pts, print, at, pl); err != nil {
		return p, nil, err
	}

	rows := 2*len(pts) + 4
	base := p
	residuals := func(x, out []float64) error {
		q := base.moved([9]float64(x))
		for i, wp := range world {
			u, v, _ := q.project(wp)
			du, dv := u-pts[i].U, v-pts[i].V
			out[2*i] = white[i][0] * du
			out[2*i+1] = white[i][1]*du + white[i][2]*dv
		}
		out[rows-4] = math.Log(q.f/f0) / uF
		out[rows-3], out[rows-2] = (q.k1-k0[0])/uK[0], (q.k2-k0[1])/uK[1]
		out[rows-1] = 0
		if cam.DistanceM.Set {
			_, _, d, _ := q.meet(0, 0, pl, 0)
			out[rows-1] = (d - cam.DistanceM.V) / cam.DistanceM.U
		}
		return nil
	}
	size := base.eye.plus(-1, at).length()
	problem := lsq.Problem{
		N: 9, M: rows, Residuals: residuals,
		Names: []string{"f", "k1", "k2", "turn right", "turn down", "turn ahead", "eye x", "eye y", "eye z"},
		Scale: []float64{0.1, 0.05, 0.05, 0.1, 0.1, 0.1, size, size, size},
	}
	sum, err := lsq.Solve(context.Background(), problem, make([]float64, 9), lsq.Options{SigmaKnown: true, TolF: 1e-12})
	if err != nil {
		return p, nil, err
	}
	if !sum.Converged {
		return p, nil, fmt.Errorf("the fit of its points did not settle: %s", sum.Reason)
	}
	p = base.moved([9]float64(sum.P))
	if p.folds(math.Hypot(float64(w), float64(h)) / 2 / p.f) {
		return p, nil, fmt.Errorf("its points ask for a lens that folds the picture over (k1 = %.3g, k2 = %.3g): it must be flat, and larger in the picture", p.k1, p.k2)
	}
	// The covariance belongs to steps from base; near the solution those are the
	// same but for the turn's second order, far below its uncertainty's effect.
	// Points that scatter more than they claim widen it (Birge ratio).
	birge := math.Max(1, sum.ChiSquare/float64(max(1, 2*len(pts)-9)))
	if birge > 25 {
		return p, nil, fmt.Errorf("its points lie %.1f times as far from a flat target's as they can be seen: the print is bent, or was not drawn by lodeswing", math.Sqrt(birge))
	}
	cov := mat.NewSymDense(9, nil)
	for i := range 9 {
		for k := i; k < 9; k++ {
			cov.SetSym(i, k, birge*sum.Cov[9*i+k])
		}
	}
	return p, cov, nil
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

// startPose sets turn and eye from the homography between print and picture
// (direct linear transformation with normalised coordinates: R. Hartley and
// A. Zisserman, Multiple View Geometry, 2nd ed., algorithm 4.2; its factors as
// in Z. Zhang, IEEE PAMI 22 (2000) 1330, section 3.1).
func startPose(p *pinhole, pts []Point, print float64, at vec, pl plane) error {
	from, to := make([][2]float64, len(pts)), make([][2]float64, len(pts))
	for i, q := range pts {
		x, y, _ := p.unlens(q.U, q.V)
		from[i], to[i] = [2]float64{q.X * print, q.Z * print}, [2]float64{x, y}
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
	p.eye = at.plus(-scale, p.r.back(t))
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
