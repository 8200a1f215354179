package chaos

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
)

// ZeroOne is the outcome of the 0–1 test: K near 0 is regular, near 1 chaotic.
type ZeroOne struct {
	// K is the median over the frequencies; U is half the range of the middle half
	// of them.
	K Value
	C []float64 // frequencies, rad per sample
	// Kc is K at each frequency.
	Kc []float64
	// P and Q are the translation of the frequency nearest to the median: bounded
	// for regular motion, a random walk for chaos.
	P, Q []float64
}

// ZeroOneTest applies the 0–1 test (G. A. Gottwald and I. Melbourne, SIAM J. Applied
// Dynamical Systems 8 (2009) 129, with the oscillatory term taken out and the
// correlation method) to x, 100 frequencies between π/5 and 4π/5. The samples must
// lie about a quarter period apart or be taken once per period: a flow sampled
// finely always looks regular. At least 200 are needed, 1,000 are good; of more
// than 4,000 the first 4,000 are used. Growing noise raises K.
func ZeroOneTest(x []float64) (*ZeroOne, error) {
	if slices.ContainsFunc(x, math.IsNaN) {
		return nil, fmt.Errorf("chaos: the 0–1 test needs a series without gaps")
	}
	x = x[:min(len(x), 4000)]
	n := len(x)
	if n < 200 {
		return nil, fmt.Errorf("chaos: %d samples are too few for the 0–1 test (200 at least)", n)
	}
	mean, sd := meanSD(x)
	if sd == 0 {
		return nil, fmt.Errorf("chaos: all values are the same; nothing moves")
	}
	const count = 100
	rng := rand.New(rand.NewPCG(5, 7)) // the same frequencies each time
	z := &ZeroOne{C: make([]float64, count), Kc: make([]float64, count)}
	p, q := make([]float64, n), make([]float64, n)
	d := make([]float64, n/10)
	for k := range count {
		z.C[k] = math.Pi/5 + 3*math.Pi/5*rng.Float64()
		translate(x, mean, z.C[k], p, q)
		displacement(p, q, d)
		z.Kc[k] = rampCorrelation(d)
	}
	order := slices.Clone(z.Kc)
	slices.Sort(order)
	z.K = Value{(order[count/2-1] + order[count/2]) / 2, (order[3*count/4] - order[count/4]) / 2}
	best := 0
	for k, v := range z.Kc {
		if math.Abs(v-z.K.V) < math.Abs(z.Kc[best]-z.K.V) {
			best = k
		}
	}
	translate(x, mean, z.C[best], p, q)
	z.P, z.Q = p, q
	return z, nil
}

// translate fills p and q with the running sums of (x − mean)·cos(jc) and
// ·sin(jc). With the mean taken out the oscillatory term of the mean square
// displacement vanishes.
func translate(x []float64, mean, c float64, p, q []float64) {
	var sp, sq float64
	for j, v := range x {
		sin, cos := math.Sincos(float64(j+1) * c)
		sp += (v - mean) * cos
		sq += (v - mean) * sin
		p[j], q[j] = sp, sq
	}
}

// displacement fills d with the mean square displacement after 1 … len(d)
// samples.
func displacement(p, q, d []float64) {
	n := len(p) - len(d)
	for k := range d {
		sum := 0.0
		for j := range n {
			dp, dq := p[j+k+1]-p[j], q[j+k+1]-q[j]
			sum += dp*dp + dq*dq
		}
		d[k] = sum / float64(n)
	}
}

// rampCorrelation is the correlation of d with 1, 2, 3 …
func rampCorrelation(d []float64) float64 {
	n := float64(len(d))
	mean, _ := meanSD(d)
	mid := (n - 1) / 2
	var xy, xx, yy float64
	for k, v := range d {
		xy += (float64(k) - mid) * (v - mean)
		xx += (float64(k) - mid) * (float64(k) - mid)
		yy += (v - mean) * (v - mean)
	}
	if yy == 0 {
		return 0
	}
	return xy / math.Sqrt(xx*yy)
}
