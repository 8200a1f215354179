package kick

import (
	"errors"
	"fmt"
	"math"

	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/rig"
)

// pad is how long before and after a push a stretch of free motion ends and
// begins, s; longestStep is the gap between samples that ends one.
const (
	pad         = 0.008
	longestStep = 0.06
	fewestFree  = 9 // samples of a stretch
)

// view is one clip of a part on a ball joint: what was seen of its bob.
type view struct {
	clip   int
	cam    *camera.Camera
	moved  *camera.Camera // as the fit has it
	t      []float64
	at     [][2]float64 // px
	white  [][3]float64 // inverse Cholesky of the picture's covariance
	dir    [][2]float64 // horizontal components of the direction to the bob; NaN where it cannot be told
	local  [][4]float64 // the same and their rates, smoothed; rad/s
	meets  []meeting
	free   []*stretch
	rate   []float64 // rad/s, of the direction, per sample
	polar  []float64 // rad, from hanging
	pushed []bool    // a push may act at this sample
	hands  []float64 // s, where something else acted
}

// meeting is one pass of the magnet by the coil.
type meeting struct {
	t, until float64    // s; the push, if there is one, ends at until
	aside    float64    // m, from the coil's axis
	over     [3]float64 // m, the same as a vector
	gain     float64    // share of a kick right over the coil that it had
	speed    float64    // rad/s
	slow     bool       // surely too slow to be sensed
	doubtful bool       // perhaps too slow
	back     bool       // it turned back before the push was over
}

func newView(clip int, c *Clip, b *Ball) (*view, error) {
	cam, err := camera.Restore(c.Track.Cal)
	if err != nil {
		return nil, fmt.Errorf("the track does not say how the camera stood (%w); measure the clip again", err)
	}
	bob := c.Track.Find(b.Rig.Bobs[b.Bob].Name)
	if bob == nil {
		return nil, fmt.Errorf("the track holds no bob %q", b.Rig.Bobs[b.Bob].Name)
	}
	v := &view{clip: clip, cam: cam}
	for _, s := range bob.Usable() {
		c := s.Pixel
		if !(c.AA > 0) || !(c.BB > 0) {
			c = track.Cov{AA: 0.01, BB: 0.01}
		}
		d := c.BB - c.AB*c.AB/c.AA
		if !(d > 1e-6*c.BB) {
			d, c.AB = c.BB, 0
		}
		v.t, v.at = append(v.t, s.T), append(v.at, [2]float64{s.U, s.V})
		w2 := 1 / math.Sqrt(d)
		v.white = append(v.white, [3]float64{1 / math.Sqrt(c.AA), -c.AB / c.AA * w2, w2})
	}
	if len(v.t) < 60 {
		return nil, fmt.Errorf("only %d pictures show the bob; film for longer", len(v.t))
	}
	return v, nil
}

// directions finds where on its sphere the bob is, picture by picture, by Newton's
// method from where it was in the picture before. Seen from below its own tilt a
// camera cannot tell far from near; an error says so.
func (v *view) directions(f *freeFit) error {
	v.dir = make([][2]float64, len(v.t))
	last, unclear := [2]float64{}, 0
	for i := range v.t {
		p := last
		ok := false
		for range 12 {
			u0, v0 := f.sphere(v, p)
			const h = 1e-5
			ux, vx := f.sphere(v, [2]float64{p[0] + h, p[1]})
			uy, vy := f.sphere(v, [2]float64{p[0], p[1] + h})
			a, b, c, d := (ux-u0)/h, (uy-u0)/h, (vx-v0)/h, (vy-v0)/h
			det := a*d - b*c
			// Against the picture of a sphere seen square on: how blunt the view is.
			if blunt := math.Abs(det) / (a*a + c*c); !(blunt > 0.1) {
				break
			}
			e0, e1 := v.at[i][0]-u0, v.at[i][1]-v0
			dx, dy := (d*e0-b*e1)/det, (a*e1-c*e0)/det
			p[0], p[1] = p[0]+dx, p[1]+dy
			if p[0]*p[0]+p[1]*p[1] > 0.95 {
				break
			}
			if math.Abs(dx)+math.Abs(dy) < 1e-9 {
				ok = true
				break
			}
		}
		if !ok {
			v.dir[i] = [2]float64{math.NaN(), math.NaN()}
			unclear++
			last = [2]float64{}
			continue
		}
		v.dir[i], last = p, p
	}
	if unclear > len(v.t)/4 {
		return errors.New("from where the camera stood, near and far cannot be told apart for too much of the motion; film it from a raised camera, 30° or more, or from above, and give camera.tilt_deg")
	}
	v.smooth()
	return nil
}

// smooth lays a polynomial of fourth degree through the directions about each sample.
func (v *view) smooth() {
	const reach, size = 6, 5
	n := len(v.t)
	v.local = make([][4]float64, n)
	for i := range n {
		lo, hi := i, i
		for lo > 0 && i-lo < reach && v.t[lo]-v.t[lo-1] < longestStep && !math.IsNaN(v.dir[lo-1][0]) {
			lo--
		}
		for hi+1 < n && hi-i < reach && v.t[hi+1]-v.t[hi] < longestStep && !math.IsNaN(v.dir[hi+1][0]) {
			hi++
		}
		nan := math.NaN()
		v.local[i] = [4]float64{nan, nan, nan, nan}
		if hi-lo < size+2 || math.IsNaN(v.dir[i][0]) {
			continue
		}
		var m [size * size]float64
		var b [2][size]float64
		x := [size]float64{1}
		span := (v.t[hi] - v.t[lo]) / 2
		for k := lo; k <= hi; k++ {
			d := (v.t[k] - v.t[i]) / span
			for j := 1; j < size; j++ {
				x[j] = x[j-1] * d
			}
			for j := range size {
				b[0][j] += x[j] * v.dir[k][0]
				b[1][j] += x[j] * v.dir[k][1]
				for l := range size {
					m[j*size+l] += x[j] * x[l]
				}
			}
		}
		inv, ok := inverse(m[:], size)
		if !ok {
			continue
		}
		v.local[i] = [4]float64{}
		for e := range 2 {
			for l := range size {
				v.local[i][e] += inv[l] * b[e][l]
				v.local[i][2+e] += inv[size+l] * b[e][l] / span
			}
		}
	}
}

// turning is the rate of the direction at sample i, rad/s, by the polynomial.
func (v *view) turning(i int) float64 {
	x, y, vx, vy := v.local[i][0], v.local[i][1], v.local[i][2], v.local[i][3]
	vz := (x*vx + y*vy) / math.Sqrt(math.Max(1e-6, 1-x*x-y*y))
	return math.Sqrt(vx*vx + vy*vy + vz*vz)
}

// meet finds the passes of the magnet by the coil, and how long a push may last.
func (v *view) meet(f *freeFit) {
	c := f.ball.Coil
	coil := rig.XYZ(c.AtM)
	axis := [3]float64{0, 0, 1}
	if len(c.Axis) > 0 {
		axis = unitVec(rig.XYZ(c.Axis))
	}
	n := len(v.t)
	place := make([][3]float64, n)
	away := make([]float64, n)
	for i := range n {
		place[i] = f.magnetAt([2]float64{v.local[i][0], v.local[i][1]})
		away[i] = square(minus(place[i], coil))
	}
	v.meets = nil
	v.pushed = make([]bool, n)
	busy := math.Inf(-1)
	for i := 1; i+1 < n; i++ {
		if !(away[i] <= away[i-1] && away[i] < away[i+1]) || v.t[i] < busy || v.t[i+1]-v.t[i-1] > 2*longestStep {
			continue
		}
		// The least distance lies at a parabola's vertex.
		h := 0.5 * (away[i-1] - away[i+1]) / (away[i-1] - 2*away[i] + away[i+1])
		step := (v.t[i+1] - v.t[i-1]) / 2
		m := meeting{t: v.t[i] + h*step, speed: v.turning(i), gain: 1}
		g := place[i]
		d := minus(g, coil)
		over := minus(d, times(axis, dot(d, axis)))
		m.aside, m.over = math.Sqrt(square(over)), over
		if reach := c.RadiusM.Or(c.WidthM.Or(0)); reach > 0 && (c.KickJ.Set || c.KickJ.Fit) {
			m.gain = math.Exp(-m.aside * m.aside / reach / reach)
		}
		m.until = m.t + math.Max(0.03, c.PulseS.Or(0))
		if w := c.WidthM.Or(0); w > 0 {
			way := unitVec(minus(place[i+1], place[i-1]))
			m.until = v.t[n-1]
			for k := i + 1; k < n; k++ {
				u := dot(minus(place[k], g), way) - h*step*dot(minus(place[i+1], place[i-1]), way)/(2*step)
				if math.IsNaN(u) {
					continue
				}
				if u > w || u < 0 {
					m.until, m.back = v.t[k], u < 0
					break
				}
			}
		}
		if s := c.SensedRadS; s.Set {
			u := 2.5 * math.Max(s.U, 0.02*s.V)
			m.slow, m.doubtful = m.speed < s.V-u, m.speed < s.V+u && m.speed >= s.V-u
			if m.slow {
				m.until = m.t
			}
		}
		if m.slow || m.back {
			m.gain = 0
		}
		if k := len(v.meets); k > 0 && v.meets[k-1].doubtful && v.meets[k-1].until > m.t {
			v.meets[k-1].until = m.t
		}
		if !m.slow && !m.doubtful {
			busy = m.until
		}
		v.meets = append(v.meets, m)
	}
	for _, m := range v.meets {
		if m.slow {
			continue
		}
		const frame = 1.0 / 60 // the pass lies between two pictures
		for k := range v.t {
			if v.t[k] > m.t-pad-frame && v.t[k] < m.until+pad {
				v.pushed[k] = true
			}
		}
	}
}

// cut makes the stretches of free motion.
func (v *view) cut() {
	v.free = nil
	for lo := 0; lo < len(v.t); {
		bad := func(i int) bool { return v.pushed[i] || math.IsNaN(v.local[i][0]) }
		if bad(lo) {
			lo++
			continue
		}
		hi := lo
		for hi+1 < len(v.t) && !bad(hi+1) && v.t[hi+1]-v.t[hi] < longestStep && v.t[hi+1]-v.t[lo] < 1.5 {
			hi++
		}
		if hi-lo+1 >= fewestFree {
			v.free = append(v.free, &stretch{lo: lo, hi: hi, mid: (lo + hi) / 2})
		}
		lo = hi + 1
	}
}

func dot(a, b [3]float64) float64      { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func square(a [3]float64) float64      { return dot(a, a) }
func minus(a, b [3]float64) [3]float64 { return [3]float64{a[0] - b[0], a[1] - b[1], a[2] - b[2]} }
func times(a [3]float64, s float64) [3]float64 {
	return [3]float64{a[0] * s, a[1] * s, a[2] * s}
}

func unitVec(a [3]float64) [3]float64 { return times(a, 1/math.Sqrt(square(a))) }
