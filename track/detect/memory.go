package detect

import "math"

// memory is one quantity that changes slowly from frame to frame, such as the
// light on a bob: a scalar Kalman filter with a random walk whose step follows
// from how well what was remembered came true. Held fast, such quantities leave
// a smeared outline only one place to be; let go, they imitate a shift.
type memory struct {
	mean, u float64 // value and standard uncertainty
	walk    float64 // its change from one frame to the next, one standard deviation
}

const (
	leastWalk = 0.003 // levels per frame
	mostWalk  = 20.0
)

// before is the standard uncertainty of the next frame's value.
func (q *memory) before() float64 { return math.Hypot(q.u, q.walk) }

// learn takes in the value that a fit found with what was remembered as its
// prior, and the value's standard uncertainty.
func (q *memory) learn(value, u float64) {
	b := q.before()
	d := value - q.mean
	// What was learnt moves the value by d, of variance b² − u² if all is well.
	if v := b*b - u*u; v > 1e-9*b*b {
		switch n := d * d / v; {
		case n > 9:
			q.walk = math.Max(q.walk, math.Abs(d)/3)
		default:
			q.walk *= math.Exp(0.15 * (n - 1))
		}
		q.walk = math.Min(math.Max(q.walk, leastWalk), mostWalk)
	}
	q.mean, q.u = value, math.Min(u, b)
}

// pass lets a frame go by in which nothing was learnt.
func (q *memory) pass() { q.u = math.Min(q.before(), 80) }
