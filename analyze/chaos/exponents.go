package chaos

import (
	"context"
	"errors"
	"fmt"
	"math"

	"lodeswing/analyze/ode"
	"lodeswing/analyze/toy"
)

// Exponents are Lyapunov exponents, largest first, as long-time averages.
type Exponents struct {
	L []Value // 1/s, or 1 per iteration; nats
	// Course is the running average of the largest, one value per stretch.
	Course []float64
	At     []float64 // s or iterations, the end of each stretch
	// KaplanYorke is the Lyapunov dimension (J. L. Kaplan and J. A. Yorke, Lecture
	// Notes in Mathematics 730 (1979) 204); NaN unless enough exponents were asked
	// for.
	KaplanYorke float64
}

// Flow is an autonomous system y' = F(y) of N numbers. Tangent writes J(y)·d to
// out, with J the Jacobian of F.
type Flow struct {
	N       int
	F       func(y, dy []float64)
	Tangent func(y, d, out []float64)
}

// Run says how long exponents are averaged.
type Run struct {
	Count     int     // exponents wanted; 0: one
	Transient float64 // s or iterations left out at first
	Duration  float64 // s or iterations averaged
	Every     float64 // s between orthonormalisations, at most; 0: 0.5 s
	Tol       float64 // of the integrator; 0: 1e-9
}

// Variational computes the exponents of a flow from its variational equations,
// orthonormalising the deviations from time to time (G. Benettin, L. Galgani, A.
// Giorgilli and J.-M. Strelcyn, Meccanica 15 (1980) 9; A. Wolf et al., Physica D
// 16 (1985) 285). The uncertainty is that of the average, from how it scatters
// over stretches longer than its memory.
func Variational(ctx context.Context, f Flow, start []float64, run Run) (*Exponents, error) {
	if f.F == nil || f.Tangent == nil || len(start) != f.N {
		return nil, fmt.Errorf("chaos: a flow of %d numbers needs its equations, their tangent and a start of as many (%d)", f.N, len(start))
	}
	k := max(1, run.Count)
	if k > f.N || !(run.Duration > 0) {
		return nil, fmt.Errorf("chaos: %d exponents over %g s of a flow of %d numbers cannot be had", k, run.Duration, f.N)
	}
	n := f.N
	rhs := func(_ float64, y, dy []float64) {
		f.F(y[:n], dy[:n])
		for j := 1; j <= k; j++ {
			f.Tangent(y[:n], y[j*n:(j+1)*n], dy[j*n:(j+1)*n])
		}
	}
	return average(ctx, rhs, start, k, run, nil)
}

// OfToy computes the exponents of a toy that no coil kicks and no dry friction
// holds, from its variational equations. Its motion must not die: a toy with
// friction and no drive comes to rest, and its exponents are then those of its
// rest.
func OfToy(ctx context.Context, m *toy.Model, start []float64, run Run) (*Exponents, error) {
	k := max(1, run.Count)
	n := m.StateLen()
	if len(start) != n || k > n || !(run.Duration > 0) {
		return nil, fmt.Errorf("chaos: %d exponents over %g s from a start of %d numbers cannot be had of a toy with %d", k, run.Duration, len(start), n)
	}
	return average(ctx, m.Variational(k), start, k, run, func(y []float64) {
		for j := 1; j <= k; j++ {
			m.OntoStates(y[:n], y[j*n:(j+1)*n])
		}
		m.Normalise(y[:n])
	})
}

// average integrates a state and k deviations and averages the deviations'
// growth. tidy, when not nil, mends the state before each orthonormalisation.
func average(ctx context.Context, rhs ode.Func, start []float64, k int, run Run, tidy func(y []float64)) (*Exponents, error) {
	n := len(start)
	every := run.Every
	if every <= 0 {
		every = 0.5
	}
	tol := run.Tol
	if tol <= 0 {
		tol = 1e-9
	}
	y := make([]float64, (k+1)*n)
	copy(y, start)
	for j := range k {
		// Not along the axes, which may be invariant.
		for i := range n {
			y[(j+1)*n+i] = math.Cos(float64(1+i) * (1 + 0.7*float64(j)))
		}
	}
	growth := make([]float64, k)
	orthonormalise(y[n:], n, growth)
	// Deviations, of length 1 at first, need not be as exact as the state; those of a
	// toy hold the noise of differences, and the steps would shrink to follow it.
	tols := make([]float64, len(y))
	for i := range tols {
		tols[i] = tol
		if i >= n {
			tols[i] = max(tol, 1e-7)
		}
	}
	s := ode.New(len(y), rhs, ode.Options{RelTol: tol, AbsTols: tols})
	t := 0.0
	s.Reset(t, y)
	var rows [][]float64
	for len(rows) < int(math.Ceil(run.Duration/every)) {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		t += every
		for s.Time() < t {
			if err := s.Step(t); err != nil {
				return nil, fmt.Errorf("chaos: the motion cannot be followed past %.6g s: %w", s.Time(), err)
			}
		}
		copy(y, s.State())
		if tidy != nil {
			tidy(y)
		}
		orthonormalise(y[n:], n, growth)
		s.Reset(t, y)
		// A deviation that shrinks much between two orthonormalisations is lost in the
		// integrator's error and in the others' share: look more often.
		for _, g := range growth {
			if math.Abs(g) > 5 {
				every /= 2
				rows = rows[:0]
				run.Transient = max(run.Transient, t)
				break
			}
		}
		if t > run.Transient {
			rows = append(rows, append([]float64(nil), growth...))
		}
	}
	return summarise(rows, k, n, every)
}

// Map is an iteration x → F(x) of N numbers, with its tangent as in Flow.
type Map struct {
	N       int
	F       func(x, out []float64)
	Tangent func(x, d, out []float64)
}

// OfMap computes the exponents of a map, per iteration.
func OfMap(f Map, start []float64, run Run) (*Exponents, error) {
	k, n := max(1, run.Count), f.N
	if f.F == nil || f.Tangent == nil || len(start) != n || k > n || run.Duration < 1 {
		return nil, fmt.Errorf("chaos: %d exponents over %g iterations of a map of %d numbers from a start of %d cannot be had", k, run.Duration, n, len(start))
	}
	x, next := append([]float64(nil), start...), make([]float64, n)
	d, out := make([]float64, k*n), make([]float64, k*n)
	for i := range d {
		d[i] = math.Cos(float64(1 + i))
	}
	growth := make([]float64, k)
	orthonormalise(d, n, growth)
	var rows [][]float64
	for i := range int(run.Transient + run.Duration) {
		for j := range k {
			f.Tangent(x, d[j*n:(j+1)*n], out[j*n:(j+1)*n])
		}
		f.F(x, next)
		x, next = next, x
		d, out = out, d
		orthonormalise(d, n, growth)
		if i >= int(run.Transient) {
			rows = append(rows, append([]float64(nil), growth...))
		}
	}
	return summarise(rows, k, n, 1)
}

// orthonormalise makes the rows of d (each n long) orthonormal by Gram and
// Schmidt, twice for precision, and sets growth to the logarithms of their
// lengths before.
func orthonormalise(d []float64, n int, growth []float64) {
	for j := range growth {
		row := d[j*n : (j+1)*n]
		for range 2 {
			for i := range j {
				other := d[i*n : (i+1)*n]
				dot := 0.0
				for q, x := range row {
					dot += x * other[q]
				}
				for q := range row {
					row[q] -= dot * other[q]
				}
			}
		}
		length := 0.0
		for _, x := range row {
			length = math.Hypot(length, x)
		}
		growth[j] = math.Log(length)
		for q := range row {
			row[q] /= length
		}
	}
}

func summarise(rows [][]float64, k, n int, every float64) (*Exponents, error) {
	if len(rows) < 128 {
		return nil, errors.New("chaos: average over 128 orthonormalisations at least")
	}
	e := &Exponents{KaplanYorke: math.NaN()}
	x := make([]float64, len(rows))
	for j := range k {
		for i, r := range rows {
			x[i] = r[j] / every
			if math.IsNaN(x[i]) || math.IsInf(x[i], 0) {
				return nil, fmt.Errorf("chaos: exponent %d is lost: a deviation became %v long", j+1, math.Exp(r[j]))
			}
		}
		mean, _ := meanSD(x)
		e.L = append(e.L, Value{mean, standardError(x)})
	}
	sum := 0.0
	stretch := max(1, len(rows)/200)
	for i, r := range rows {
		sum += r[0]
		if (i+1)%stretch == 0 {
			e.At = append(e.At, float64(i+1)*every)
			e.Course = append(e.Course, sum/(float64(i+1)*every))
		}
	}
	total := 0.0
	for j, l := range e.L {
		if total+l.V < 0 {
			e.KaplanYorke = float64(j)
			if l.V < 0 {
				e.KaplanYorke += total / -l.V
			}
			break
		}
		total += l.V
		if j == n-1 {
			e.KaplanYorke = float64(n)
		}
	}
	return e, nil
}

// standardError is that of the mean of a series with memory: from the scatter of
// the means of 64 stretches, each taken to be longer than the memory ("batch
// means": G. S. Fishman, Management Science 24 (1978) 510).
func standardError(x []float64) float64 {
	const stretches = 64
	mean := make([]float64, stretches)
	for k := range mean {
		part := x[k*len(x)/stretches : (k+1)*len(x)/stretches]
		mean[k], _ = meanSD(part)
	}
	_, sd := meanSD(mean)
	return sd / math.Sqrt(stretches)
}
