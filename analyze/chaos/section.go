package chaos

import (
	"fmt"
	"math"
)

// Crossing says which way an event goes.
type Crossing int

// The ways.
const (
	Up   Crossing = 1
	Down Crossing = -1
	Both Crossing = 0
)

// Section is what a motion is at natural events: passes (the angle crosses its
// rest), turning points (the rate crosses zero).
type Section struct {
	T      []float64   // s, of each event
	Values [][]float64 // every column at each event, one row per event
	Up     []bool      // the event's way
}

// Cut takes a section through columns sampled at times t (s, increasing) where
// column on crosses level. The time is found on the cubic through the four samples
// about the crossing (the line between two beside a gap), and the other columns
// are read there. A NaN, or a step longer than three times the usual one, is never
// crossed.
func Cut(t []float64, columns [][]float64, on int, level float64, way Crossing) (*Section, error) {
	if on < 0 || on >= len(columns) || len(t) < 4 {
		return nil, fmt.Errorf("chaos: a section on column %d of %d with %d samples cannot be taken", on, len(columns), len(t))
	}
	for k, c := range columns {
		if len(c) != len(t) {
			return nil, fmt.Errorf("chaos: column %d has %d values for %d times", k, len(c), len(t))
		}
	}
	usual := (t[len(t)-1] - t[0]) / float64(len(t)-1)
	s := &Section{}
	g := columns[on]
	before := math.NaN() // the last value off the level
	at := -1
	for i := range t {
		d := g[i] - level
		if math.IsNaN(d) || i > 0 && t[i]-t[i-1] > 3*usual {
			before = math.NaN()
		}
		if math.IsNaN(d) || d == 0 {
			continue
		}
		if before*d < 0 && (way == Both || (way == Up) == (d > 0)) {
			s.add(t, columns, on, level, at, i, 3*usual)
		}
		before, at = d, i
	}
	return s, nil
}

// add reads the columns where column on crosses level between samples a and b.
func (s *Section) add(t []float64, columns [][]float64, on int, level float64, a, b int, longest float64) {
	from, to := a, b
	// Two more samples for a cubic, when they are there.
	if b == a+1 && a > 0 && b+1 < len(t) && t[a]-t[a-1] <= longest && t[b+1]-t[b] <= longest {
		ok := true
		for _, c := range columns {
			ok = ok && !math.IsNaN(c[a-1]) && !math.IsNaN(c[b+1])
		}
		if ok {
			from, to = a-1, b+1
		}
	}
	lo, hi := t[a], t[b]
	up := columns[on][b] > level
	for range 60 {
		mid := (lo + hi) / 2
		if (through(t[from:to+1], columns[on][from:to+1], mid) > level) == up {
			hi = mid
		} else {
			lo = mid
		}
	}
	mid := (lo + hi) / 2
	row := make([]float64, len(columns))
	for k, c := range columns {
		row[k] = through(t[from:to+1], c[from:to+1], mid)
	}
	row[on] = level
	s.T, s.Values, s.Up = append(s.T, mid), append(s.Values, row), append(s.Up, up)
}

// through is the polynomial through the points at x, by Neville's scheme; of two
// points or a run of equal ones between two, a line.
func through(t, y []float64, x float64) float64 {
	if len(t) != 4 {
		n := len(t) - 1
		return y[0] + (y[n]-y[0])*(x-t[0])/(t[n]-t[0])
	}
	var p [4]float64
	copy(p[:], y)
	for k := 1; k < 4; k++ {
		for i := range 4 - k {
			p[i] = ((x-t[i+k])*p[i] + (t[i]-x)*p[i+1]) / (t[i] - t[i+k])
		}
	}
	return p[0]
}

// Column returns one column of the section.
func (s *Section) Column(k int) []float64 {
	out := make([]float64, len(s.Values))
	for i, r := range s.Values {
		out[i] = r[k]
	}
	return out
}
