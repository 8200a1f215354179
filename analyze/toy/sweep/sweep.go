// Package sweep asks a toy's model what would be. What comes in: a rig, which
// numbers of it to vary over which values, or a grid of releases. What goes out:
// the motion as a track, answers (period, amplitude, places of rest, regime) with
// the uncertainty that the rig's own numbers give them, and curves for figures
// and tables. SI units; values of a swept number are in the rig's unit only where
// they are parsed. All processors are used; a cancelled context keeps what is
// done.
package sweep

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"strconv"
	"strings"
	"sync"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// Options sets how a toy is asked. The zero value is useful.
type Options struct {
	Seconds  float64 // of motion; default the film's duration_s, else 30
	Tol      float64 // of the integrator; default 1e-9
	Undriven bool    // battery taken out
	// Ensemble is how many toys are drawn from the rig's uncertainties to put
	// intervals on the answers; 0: none.
	Ensemble int
	Seed     uint64
	Reach    float64 // rad; places of rest and releases are sought within ±Reach, default 1.2
	// Start is called with the number of motions to come, Progress with how many
	// are done; either may be nil.
	Start    func(total int)
	Progress func(done int)
}

func (o Options) seconds(r *rig.Rig) float64 {
	if o.Seconds > 0 {
		return o.Seconds
	}
	return r.Film.DurationS.Or(30)
}

func (o Options) reach() float64 {
	if o.Reach > 0 {
		return o.Reach
	}
	return 1.2
}

func (o Options) tol() float64 {
	if o.Tol > 0 {
		return o.Tol
	}
	return 1e-9
}

// each runs do(0) to do(n−1) on all processors and tells progress. It stops
// handing out work when ctx ends and returns how many were done: do says whether
// it came to its end.
func each(ctx context.Context, n int, opt Options, do func(i int) bool) int {
	if opt.Start != nil {
		opt.Start(n)
	}
	var (
		mu   sync.Mutex
		next int
		done int
		wait sync.WaitGroup
	)
	for range min(runtime.GOMAXPROCS(0), n) {
		wait.Go(func() {
			for {
				mu.Lock()
				i := next
				next++
				mu.Unlock()
				if i >= n || ctx.Err() != nil {
					return
				}
				if !do(i) {
					continue
				}
				mu.Lock()
				done++
				if opt.Progress != nil {
					opt.Progress(done)
				}
				mu.Unlock()
			}
		})
	}
	wait.Wait()
	return done
}

// Range is one swept quantity: one or several numbers of the rig that take the
// same values together.
type Range struct {
	Text      string   // as the user wrote it, for messages
	Addresses []string // of rig.Numbers
	Unit      string   // of the rig's file, for people
	SI        string
	Shown     []float64 // the values, in the rig's unit
	Values    []float64 // in SI
}

// ParseRange reads "base magnet.moment=0.8:1.2:41" (from, to, number of values),
// "arm.mass=70" (one value) or "a.moment, b.moment=0.8:1.2:41" (together), in the
// units of the rig's file. The error names what is wrong and the nearest address.
func ParseRange(r *rig.Rig, text string) (Range, error) {
	out := Range{Text: text}
	names, values, ok := cutLast(text, '=')
	if !ok {
		return out, fmt.Errorf("%q is no range: write an address, = and from:to:number, like 'base magnet.moment=0.8:1.2:41'", text)
	}
	var first rig.Number
	for i, name := range strings.Split(names, ",") {
		n, err := r.Find(strings.TrimSpace(name))
		if err != nil {
			return out, err
		}
		if i == 0 {
			first = n
		} else if n.Unit.SI != first.Unit.SI {
			return out, fmt.Errorf("%q and %q cannot be varied together: the one is in %s, the other in %s", first.Address, n.Address, unitWord(first.Unit.SI), unitWord(n.Unit.SI))
		}
		if !ofTheToy(r, n.Address) {
			return out, fmt.Errorf("%q is no number of the toy: what moves are parts, magnets, coils and their start", n.Address)
		}
		out.Addresses = append(out.Addresses, n.Address)
	}
	out.Unit, out.SI = first.Unit.Shown, first.Unit.SI
	words := strings.Split(values, ":")
	var x [3]float64
	for i, w := range words {
		v, err := strconv.ParseFloat(strings.TrimSpace(w), 64)
		if i > 2 || err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			return out, fmt.Errorf("%q: after = stand from:to:number, like 0.8:1.2:41, or one value, not %q", text, values)
		}
		x[i] = v
	}
	switch len(words) {
	case 1:
		out.Shown = []float64{x[0]}
	case 3:
		n := int(x[2])
		if float64(n) != x[2] || n < 2 || n > 10000 {
			return out, fmt.Errorf("%q: the number of values must be a whole number from 2 to 10000, not %s", text, strings.TrimSpace(words[2]))
		}
		for i := range n {
			out.Shown = append(out.Shown, x[0]+(x[1]-x[0])*float64(i)/float64(n-1))
		}
	default:
		return out, fmt.Errorf("%q: after = stand from:to:number, like 0.8:1.2:41, or one value, not %q", text, values)
	}
	for _, v := range out.Shown {
		out.Values = append(out.Values, first.Unit.ToSI(v))
	}
	return out, nil
}

func cutLast(s string, sep byte) (before, after string, ok bool) {
	i := strings.LastIndexByte(s, sep)
	if i < 0 {
		return s, "", false
	}
	return s[:i], s[i+1:], true
}

func unitWord(u string) string {
	if u == "" {
		return "no unit"
	}
	return u
}

// Name is the range's addresses for people.
func (g Range) Name() string { return strings.Join(g.Addresses, " and ") }

// ofTheToy tells whether an address belongs to what the model moves.
func ofTheToy(r *rig.Rig, address string) bool {
	if address == "gravity" {
		return true
	}
	owner, _, ok := cutLast(address, '.')
	for ok {
		for i := range r.Parts {
			if r.Parts[i].Name == owner {
				return true
			}
		}
		if r.FindMagnet(owner) != nil {
			return true
		}
		for i := range r.Coils {
			if owner == coilName(r, i) {
				return true
			}
		}
		owner, _, ok = cutLast(owner, '.')
	}
	return false
}

// coilName is how rig.Numbers calls coil i.
func coilName(r *rig.Rig, i int) string {
	switch {
	case r.Coils[i].Name != "":
		return r.Coils[i].Name
	case i == 0:
		return "coil"
	}
	return fmt.Sprintf("coil %d", i+1)
}

// With returns the rig with the numbers of a range set to its value i.
func (g Range) With(r *rig.Rig, i int) (*rig.Rig, error) {
	c := r.Clone()
	for _, a := range g.Addresses {
		v, err := c.Number(a)
		if err != nil {
			return nil, err
		}
		*v = rig.Value{V: g.Values[i], Set: true}
	}
	return c, nil
}

// Assumed says in plain words which numbers the rig leaves open and what was
// taken for them.
func Assumed(r *rig.Rig) []string {
	var out []string
	for _, n := range r.Numbers() {
		if n.Value.Set || !n.Value.Fit || !ofTheToy(r, n.Address) {
			continue
		}
		taken := ""
		switch {
		case strings.HasSuffix(n.Address, ".moment"):
			taken = "1 A·m²"
		case strings.HasSuffix(n.Address, ".remanence"):
			taken = "1.2 T"
		case strings.HasSuffix(n.Address, ".inertia"):
			taken = "that of a point or ball"
		case strings.HasSuffix(n.Address, ".gap"):
			taken = "the distance that at_mm gives"
		default:
			taken = "0"
		}
		out = append(out, fmt.Sprintf("The rig leaves %s to a fit: %s was taken. Give a number, or simulate a fitted.toml.", n.Address, taken))
	}
	return out
}

// build makes a model and its start.
func build(r *rig.Rig) (*toy.Model, []float64, error) {
	m, err := toy.New(r)
	if err != nil {
		return nil, nil, err
	}
	y, err := m.Start()
	return m, y, err
}
