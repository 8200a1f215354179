package ode

import (
	"fmt"
	"math"
)

// Direction says which zero crossings of an event's function count.
type Direction int8

// The directions.
const (
	Falling Direction = -1
	Both    Direction = 0
	Rising  Direction = 1
)

// Event is a function whose zeros are wanted.
type Event struct {
	G         func(t float64, y []float64) float64
	Direction Direction
	// Terminal stops Advance at the event, so that the caller can change state
	// or equations and Reset.
	Terminal bool
	// Inside is how many points within each step are looked at as well as its
	// end, so that two crossings within one step are not missed. 0 costs least.
	Inside int
}

// Hit is one event that happened.
type Hit struct {
	Event  int // index in the events given to Advance
	T      float64
	Rising bool // the function went from negative to positive
}

type eventState struct {
	started bool
	before  []float64 // sign-carrying value at the start of the step, per event
	fired   []bool    // ended the last step: its value there is zero but for rounding
	hits    []Hit
	y       []float64
}

// Advance takes one step as Step does and looks for events in it. It returns
// the hits in their order in time; the slice is valid until the next call. A
// terminal event shortens the step to end at it; it, and what falls on the very
// same instant, are then the last hits. The same events must be given from one
// Reset to the next.
func (s *Solver) Advance(tEnd float64, events []Event) ([]Hit, error) {
	ev := &s.ev
	ev.hits = ev.hits[:0]
	if len(ev.before) != len(events) {
		ev.before = make([]float64, len(events))
		ev.fired = make([]bool, len(events))
		ev.y = make([]float64, s.n)
	}
	fresh := !ev.started
	if fresh {
		for i := range events {
			ev.before[i] = events[i].G(s.t, s.y)
		}
	}
	if err := s.Step(tEnd); err != nil {
		return nil, err
	}
	if !s.haveStep {
		return nil, nil // already there
	}
	t0, t1 := s.tOld, s.t
	if fresh {
		// A value that is zero at the start has the sign that it takes next.
		for i := range events {
			if ev.fired[i] || ev.before[i] == 0 {
				s.At(t0+1e-4*(t1-t0), ev.y)
				ev.before[i] = events[i].G(t0+1e-4*(t1-t0), ev.y)
				ev.fired[i] = false
			}
		}
		ev.started = true
	}
	for i := range events {
		e := &events[i]
		ga, ta := ev.before[i], t0
		for j := 1; j <= e.Inside+1; j++ {
			tb := t0 + (t1-t0)*float64(j)/float64(e.Inside+1)
			y := s.y
			if j == e.Inside+1 {
				tb = t1
			} else {
				s.At(tb, ev.y)
				y = ev.y
			}
			gb := e.G(tb, y)
			if (ga < 0) != (gb < 0) && ga != 0 && wanted(e.Direction, gb > ga) {
				t, err := s.locate(e, ta, ga, tb, gb)
				if err != nil {
					return nil, err
				}
				ev.hits = append(ev.hits, Hit{Event: i, T: t, Rising: gb > ga})
			}
			ga, ta = gb, tb
		}
		ev.before[i] = ga
	}
	if len(ev.hits) == 0 {
		return ev.hits, nil
	}
	forward := t1 > t0
	hits := ev.hits // insertion sort: a handful at most, nothing allocated
	for i := 1; i < len(hits); i++ {
		for j := i; j > 0 && hits[j].T != hits[j-1].T && (hits[j].T < hits[j-1].T) == forward; j-- {
			hits[j], hits[j-1] = hits[j-1], hits[j]
		}
	}
	for i, hit := range hits {
		if !events[hit.Event].Terminal {
			continue
		}
		last := i
		for last+1 < len(hits) && hits[last+1].T == hit.T {
			last++
		}
		ev.hits = hits[:last+1]
		for j := 0; j <= last; j++ {
			if hits[j].T == hit.T {
				ev.fired[hits[j].Event] = true
			}
		}
		ev.started = false
		if hit.T != s.t {
			s.shorten(hit.T)
		}
		break
	}
	return ev.hits, nil
}

func wanted(d Direction, rising bool) bool {
	return d == Both || (d == Rising) == rising
}

// locate finds the zero of e between ta and tb on the dense output, by the
// Illinois variant of regula falsi with bisection as a guard.
func (s *Solver) locate(e *Event, ta, ga, tb, gb float64) (float64, error) {
	if gb == 0 {
		return tb, nil
	}
	tol := 4e-16 * math.Max(math.Abs(ta), math.Abs(tb))
	side := 0
	for k := 0; k < 100 && math.Abs(tb-ta) > tol; k++ {
		t := tb - gb*(tb-ta)/(gb-ga)
		if k%8 == 7 || !between(t, ta, tb) {
			t = ta + (tb-ta)/2
			if t == ta || t == tb {
				break
			}
		}
		s.At(t, s.ev.y)
		g := e.G(t, s.ev.y)
		if math.IsNaN(g) {
			return 0, fmt.Errorf("an event's function gives no number at t = %g", t)
		}
		if g == 0 {
			return t, nil
		}
		if (g < 0) == (gb < 0) {
			tb, gb = t, g
			if side == 1 {
				ga /= 2
			}
			side = 1
		} else {
			ta, ga = t, g
			if side == -1 {
				gb /= 2
			}
			side = -1
		}
	}
	return tb, nil
}

func between(t, a, b float64) bool {
	if a > b {
		a, b = b, a
	}
	return t > a && t < b
}
