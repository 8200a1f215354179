package chaos

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/toy"
)

// OfDrivenToy computes the largest exponent of a toy whatever moves it, coils and
// dry friction included: a second motion is started beside the first at each
// fourth turning point of the part (away from the coils, so that no push is cut
// in two), followed to the next such point and brought near again (G. Benettin,
// L. Galgani and J.-M. Strelcyn, Physical Review A 14 (1976) 2338). Run.Count and
// Run.Every are not used.
func OfDrivenToy(ctx context.Context, m *toy.Model, part int, start []float64, run Run) (*Exponents, error) {
	if len(start) != m.StateLen() || !(run.Duration > 0) {
		return nil, fmt.Errorf("chaos: an exponent over %g s from a start of %d numbers cannot be had of a toy with %d", run.Duration, len(start), m.StateLen())
	}
	tol := run.Tol
	if tol <= 0 {
		tol = 1e-10
	}
	const apart = 1e-5 // of the deviation; the dense output is right to about 1e-9
	const turns = 4
	opt := toy.Options{Tol: tol, Passes: true}
	n := m.StateLen()
	y := append([]float64(nil), start...)
	if run.Transient > 0 {
		if err := m.Run(ctx, 0, y, run.Transient, toy.Options{Tol: tol}, nil, nil); err != nil {
			return nil, err
		}
	}
	d := make([]float64, n)
	for i := range d {
		d[i] = math.Cos(float64(1 + i))
	}
	var growth, spent []float64
	ref, beside := make([]float64, n), make([]float64, n)
	const stretch = 100.0 // s of the first motion that are held at a time
	for at := 0.0; at < run.Duration; at += stretch {
		motion, err := m.Simulate(ctx, y, stretch, opt)
		if err != nil {
			return nil, err
		}
		var stops []float64
		k := 0
		for _, e := range motion.Events {
			if e.Kind == toy.Turn && e.Part == part {
				if k%turns == 0 {
					stops = append(stops, e.T)
				}
				k++
			}
		}
		if len(stops) < 2 {
			return nil, fmt.Errorf("chaos: the part turns round %d times in %g s; it has come to rest", k, stretch)
		}
		for s := 0; s+1 < len(stops); s++ {
			motion.At(stops[s], ref)
			m.OntoStates(ref, d)
			length := 0.0
			for _, x := range d {
				length = math.Hypot(length, x)
			}
			for i := range d {
				d[i] *= apart / length
				beside[i] = ref[i] + d[i]
			}
			if err := m.Run(ctx, stops[s], beside, stops[s+1], toy.Options{Tol: tol}, nil, nil); err != nil {
				return nil, err
			}
			motion.At(stops[s+1], ref)
			length = 0
			for i := range d {
				d[i] = beside[i] - ref[i]
				length = math.Hypot(length, d[i])
			}
			growth, spent = append(growth, math.Log(length/apart)), append(spent, stops[s+1]-stops[s])
		}
		motion.At(stretch, y)
		m.Normalise(y)
	}
	return ofStretches(growth, spent)
}

// ofStretches averages growth over stretches of uneven length.
func ofStretches(growth, spent []float64) (*Exponents, error) {
	if len(growth) < 64 {
		return nil, fmt.Errorf("chaos: %d stretches of four turns are too few for an exponent (64 at least)", len(growth))
	}
	var g, t float64
	e := &Exponents{KaplanYorke: math.NaN()}
	for i := range growth {
		g += growth[i]
		t += spent[i]
		e.At, e.Course = append(e.At, t), append(e.Course, g/t)
	}
	l := g / t
	// Batch means of a ratio.
	const batches = 32
	part := make([]float64, batches)
	for b := range part {
		for i := b * len(growth) / batches; i < (b+1)*len(growth)/batches; i++ {
			part[b] += growth[i] - l*spent[i]
		}
	}
	_, sd := meanSD(part)
	e.L = []Value{{l, sd * math.Sqrt(batches) / t}}
	return e, nil
}
