package chaos

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/ode"
	"lodeswing/analyze/toy"
)

// OfDrivenToy computes the largest exponent of a toy whatever moves it, coils and
// dry friction included: a second motion is started beside the first some two
// turns apart, at moments when no coil pushes, followed to the next such moment and
// brought near again (G. Benettin, L. Galgani and J.-M. Strelcyn, Physical Review
// A 14 (1976) 2338). Run.Every is the least time between two such moments (0: 2 s);
// Run.Count is not used.
func OfDrivenToy(ctx context.Context, m *toy.Model, start []float64, run Run) (*Exponents, error) {
	n := m.StateLen()
	if len(start) != n || !(run.Duration > 0) {
		return nil, fmt.Errorf("chaos: an exponent over %g s from a start of %d numbers cannot be had of a toy with %d", run.Duration, len(start), n)
	}
	opt := toy.Options{Tol: run.Tol}
	if opt.Tol <= 0 {
		opt.Tol = 1e-10
	}
	every := run.Every
	if every <= 0 {
		every = 2
	}
	const apart = 1e-5 // of the deviation; the dense output is right to about 1e-9
	d := make([]float64, n)
	for i := range d {
		d[i] = math.Cos(float64(1 + i))
	}
	var growth, spent []float64
	ref, beside := append([]float64(nil), start...), make([]float64, n)
	const stretch = 200.0 // s of the first motion that are held at a time
	for at := 0.0; at < run.Transient+run.Duration; {
		path, stops, err := quiet(ctx, m, ref, stretch, every, opt)
		if err != nil {
			return nil, err
		}
		if len(stops) < 2 {
			return nil, fmt.Errorf("chaos: within %g s the coils push all the time; no second motion can be started beside it", stretch)
		}
		path.At(stops[0], ref)
		for s := 0; s+1 < len(stops); s++ {
			m.OntoStates(ref, d)
			rescale(d, apart)
			for i := range d {
				beside[i] = ref[i] + d[i]
			}
			if err := m.Run(ctx, stops[s], beside, stops[s+1], opt, nil, nil); err != nil {
				return nil, err
			}
			path.At(stops[s+1], ref)
			length := 0.0
			for i := range d {
				d[i] = beside[i] - ref[i]
				length = math.Hypot(length, d[i])
			}
			if at+stops[s] >= run.Transient {
				growth, spent = append(growth, math.Log(length/apart)), append(spent, stops[s+1]-stops[s])
			}
		}
		at += stops[len(stops)-1] // from there on anew, ref being there
		m.Normalise(ref)
	}
	return ofStretches(growth, spent)
}

func rescale(d []float64, to float64) {
	length := 0.0
	for _, x := range d {
		length = math.Hypot(length, x)
	}
	for i := range d {
		d[i] *= to / length
	}
}

// quiet follows a motion for a time and returns its path and moments, every apart
// or more, that lie in the middle of the longest pauses between pushes. The first
// is the start when nothing pushes at first.
func quiet(ctx context.Context, m *toy.Model, y []float64, seconds, every float64, opt toy.Options) (*ode.Path, []float64, error) {
	path := ode.NewPath(m.StateLen())
	type pause struct{ from, to float64 }
	var pauses []pause
	free := true
	from := 0.0
	z := append([]float64(nil), y...)
	step := func(s *ode.Solver) error {
		path.Add(s)
		if pushing := m.Pushing(); pushing == free {
			if pushing {
				pauses = append(pauses, pause{from, s.TimeBefore()})
			}
			from = s.Time()
			free = !pushing
		}
		return nil
	}
	if err := m.Run(ctx, 0, z, seconds, opt, step, nil); err != nil {
		return nil, nil, err
	}
	if free {
		pauses = append(pauses, pause{from, seconds})
	}
	stops := []float64{0}
	if len(pauses) == 0 {
		return path, nil, nil
	}
	for i := 0; i < len(pauses); {
		// Of the pauses that end within two waits, the longest part of one.
		lo, hi := stops[len(stops)-1]+every, stops[len(stops)-1]+2.5*every
		best, room := 0.0, 0.0
		for k := i; k < len(pauses) && pauses[k].from < hi; k++ {
			a, b := max(pauses[k].from, lo), min(pauses[k].to, hi)
			if b-a > room {
				best, room = (a+b)/2, b-a
			}
		}
		if room < 1e-3 { // none: look further on
			i++
			if i < len(pauses) && pauses[i].from >= hi {
				stops = append(stops, (pauses[i].from+pauses[i].to)/2)
			}
			continue
		}
		stops = append(stops, best)
		for i < len(pauses) && pauses[i].to <= best+every {
			i++
		}
	}
	return path, stops, nil
}

// ofStretches averages growth over stretches of uneven length.
func ofStretches(growth, spent []float64) (*Exponents, error) {
	if len(growth) < 64 {
		return nil, fmt.Errorf("chaos: %d stretches are too few for an exponent (64 at least)", len(growth))
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
