package link

import (
	"math"

	"lodeswing/track"
)

// Filter predicts one bob: a Kalman filter per axis for position, speed and
// acceleration, driven by white jerk (constant acceleration between frames; Y.
// Bar-Shalom, X. R. Li & T. Kirubarajan, Estimation with Applications to
// Tracking and Navigation, 2001, section 6.2.3). The jerk's strength follows
// how well the predictions came true, so that a magnet's kick is met after a
// frame or two and a quiet swing is predicted closely.
type Filter struct {
	T    float64 // of the state, s
	axis [2]axis
	jerk float64 // spectral density, px²/s⁵
	n    int     // sightings so far
	step float64 // the last time between sightings, s
	// late is by how much sightings have lately run ahead of the model over one step,
	// px: a turning force is always followed a little late, and evenly so.
	late [2]float64
}

// axis is the state of one axis: position, speed, acceleration.
type axis struct {
	x [3]float64
	p [3][3]float64
}

// Prediction is where a bob is expected.
type Prediction struct {
	U, V   float64
	Cov    track.Cov // px², of the position
	DU, DV float64   // px/s
	USpeed float64   // px/s, per axis
}

// Sigma is the larger standard uncertainty of the position.
func (p *Prediction) Sigma() float64 { return math.Sqrt(math.Max(p.Cov.AA, p.Cov.BB)) }

// Speed is in px/s.
func (p *Prediction) Speed() float64 { return math.Hypot(p.DU, p.DV) }

// NewFilter starts at a first sighting at time t. reach is the greatest speed
// that a bob of this size is expected to have, px/s.
func NewFilter(t, u, v float64, c track.Cov, reach float64) *Filter {
	f := &Filter{T: t, n: 1}
	// A bob that moves at reach and turns round within a tenth of a second.
	acc := reach / 0.1
	f.jerk = acc * acc
	for i := range f.axis {
		a := &f.axis[i]
		a.x[0] = [2]float64{u, v}[i]
		a.p[0][0] = [2]float64{c.AA, c.BB}[i]
		a.p[1][1] = reach * reach / 4
		a.p[2][2] = acc * acc / 4
	}
	return f
}

// Sightings returns how many have been taken in.
func (f *Filter) Sightings() int { return f.n }

// Acceleration returns the state's, px/s².
func (f *Filter) Acceleration() (au, av float64) { return f.axis[0].x[2], f.axis[1].x[2] }

// Predict says where the bob is expected at time t, without changing f.
func (f *Filter) Predict(t float64) Prediction {
	a, b := f.axis[0], f.axis[1]
	a.advance(t-f.T, f.jerk)
	b.advance(t-f.T, f.jerk)
	u, v := a.x[0], b.x[0]
	if d := t - f.T; d > 0 && d < 1.5*f.step {
		u += f.late[0]
		v += f.late[1]
	}
	return Prediction{
		U: u, V: v, DU: a.x[1], DV: b.x[1],
		Cov:    track.Cov{AA: a.p[0][0], BB: b.p[0][0]},
		USpeed: math.Sqrt(math.Max(a.p[1][1], b.p[1][1])),
	}
}

// Cost is the squared distance of a sighting from its prediction in standard
// deviations (Mahalanobis), for gates and for Assign. floor is added to each
// standard deviation squared, px².
func (p *Prediction) Cost(u, v float64, c track.Cov, floor float64) float64 {
	du, dv := u-p.U, v-p.V
	return du*du/(p.Cov.AA+c.AA+floor) + dv*dv/(p.Cov.BB+c.BB+floor)
}

// Update takes in a sighting at time t with covariance c.
func (f *Filter) Update(t, u, v float64, c track.Cov) {
	dt := t - f.T
	f.T = t
	z, r := [2]float64{u, v}, [2]float64{c.AA, c.BB}
	before := f.axis
	predict := func() (nis float64) {
		f.axis = before
		for i := range f.axis {
			a := &f.axis[i]
			a.advance(dt, f.jerk)
			e := z[i] - a.x[0]
			nis += e * e / (a.p[0][0] + r[i])
		}
		return nis
	}
	nis := predict()
	// What could not have been expected (a kick, a hand) was a jump of the speed, and
	// a force that goes on: let both be as uncertain as explains it.
	if nis > surprise && dt > 0 && f.n > 2 {
		for i := range before {
			e := z[i] - f.axis[i].x[0]
			before[i].p[1][1] += 2 * e * e / (dt * dt)
			before[i].p[2][2] += 0.5 * e * e / (dt * dt * dt * dt)
		}
		nis = predict()
		f.late = [2]float64{}
	} else {
		for i := range f.axis {
			f.late[i] += 0.35 * (z[i] - f.axis[i].x[0] - f.late[i])
		}
	}
	for i := range f.axis {
		f.axis[i].update(z[i], r[i])
	}
	f.step = dt
	f.n++
	if f.n > 3 && dt > 0 {
		// A normalised innovation of 1 per axis is what a right jerk gives.
		f.jerk *= math.Exp(0.15 * (math.Min(nis/2, 4) - 1))
		f.jerk = math.Min(math.Max(f.jerk, 1), 1e16)
	}
}

// surprise is the normalised innovation, both axes together, beyond which
// something has happened to the bob.
const surprise = 16.0

// advance moves the state on by dt.
func (a *axis) advance(dt, q float64) {
	if dt == 0 {
		return
	}
	h := dt * dt / 2
	a.x[0] += dt*a.x[1] + h*a.x[2]
	a.x[1] += dt * a.x[2]
	p := a.p
	// F·P
	for j := range 3 {
		p[0][j] += dt*p[1][j] + h*p[2][j]
		p[1][j] += dt * p[2][j]
	}
	// ·Fᵀ
	for i := range 3 {
		p[i][0] += dt*p[i][1] + h*p[i][2]
		p[i][1] += dt * p[i][2]
	}
	d := math.Abs(dt)
	d2 := d * d
	d3 := d2 * d
	p[0][0] += q * d3 * d2 / 20
	p[0][1] += q * d2 * d2 / 8
	p[1][0] += q * d2 * d2 / 8
	p[0][2] += q * d3 / 6
	p[2][0] += q * d3 / 6
	p[1][1] += q * d3 / 3
	p[1][2] += q * d2 / 2
	p[2][1] += q * d2 / 2
	p[2][2] += q * d
	a.p = p
}

// update takes in a position z of variance r.
func (a *axis) update(z, r float64) {
	s := a.p[0][0] + r
	e := z - a.x[0]
	var k [3]float64
	for i := range k {
		k[i] = a.p[i][0] / s
		a.x[i] += k[i] * e
	}
	row := a.p[0]
	for i := range 3 {
		for j := range 3 {
			a.p[i][j] -= k[i] * row[j]
		}
	}
	// Rounding must not spoil the symmetry over thousands of frames.
	for i := range 3 {
		for j := range i {
			m := (a.p[i][j] + a.p[j][i]) / 2
			a.p[i][j], a.p[j][i] = m, m
		}
	}
}
