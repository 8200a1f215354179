package sweep

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// Basins is which place of rest the toy falls into from each release of a grid.
type Basins struct {
	Rests  []Rest    // the stable ones
	X, Y   []float64 // what the grid spans, rad or rad/s
	Into   []int     // index in Rests, rows of X for each Y; −1: not at rest in time
	Steps  []float64 // s until it was sure
	Done   int
	Labels [2]finding.Axis
	note   string
	marks  [2][]float64 // where the places of rest lie in the grid
}

// FallInto releases the toy from side × side places and follows each until it can
// no longer leave its place of rest: until its energy is below the lowest pass
// between places, or for at most Seconds (default 600 s). The coils are off. A
// part on a ball joint is released from rest, tilted in x and y; a single hinged
// part at an angle with a speed; of several parts the first two at their angles,
// from rest. When ctx ends early the error is its own and what is done stands.
func FallInto(ctx context.Context, r *rig.Rig, side int, opt Options) (*Basins, error) {
	m, y, err := build(r)
	if err != nil {
		return nil, err
	}
	a := &Answers{}
	if err := a.findRests(ctx, m, opt.reach()); err != nil {
		return nil, err
	}
	if a.Problem != "" {
		return nil, fmt.Errorf("%s", a.Problem)
	}
	b := &Basins{}
	barrier := math.Inf(1)
	for i := range a.Rests {
		if a.Rests[i].Stable {
			b.Rests = append(b.Rests, a.Rests[i])
		} else {
			barrier = math.Min(barrier, a.Rests[i].Energy)
		}
	}
	if len(b.Rests) == 0 {
		return nil, fmt.Errorf("the toy has no stable place of rest within ±%.3g° of hanging or standing, so nothing can be said about where it falls", opt.reach()*180/math.Pi)
	}
	if !dissipates(r) {
		return nil, fmt.Errorf("no part of the rig %q has any friction, so the toy never comes to rest: give viscous, drag or dry in [[part]] friction", r.Name)
	}
	release := b.layOut(m, side, opt.reach())
	b.Into, b.Steps = make([]int, side*side), make([]float64, side*side)
	for i := range b.Into {
		b.Into[i], b.Steps[i] = -1, math.NaN()
	}
	most := opt.Seconds
	if most <= 0 {
		most = 600
	}
	b.Done = each(ctx, side*side, opt, func(i int) bool {
		c := m.Clone()
		z := append([]float64(nil), y...)
		release(c, z, i%side, i/side)
		const chunk = 0.5
		for t := 0.0; t < most; t += chunk {
			// One place only, or too little energy to leave: it is decided.
			if len(b.Rests) == 1 || c.Energy(z).Total() < barrier {
				rests := Answers{Rests: b.Rests}
				if at := rests.creeps(c, z); at >= 0 {
					b.Into[i], b.Steps[i] = at, t
					return true
				}
			}
			if c.Run(ctx, t, z, t+chunk, toy.Options{Tol: math.Max(opt.tol(), 1e-9), Undriven: true}, nil, nil) != nil {
				return ctx.Err() == nil
			}
			c.Normalise(z)
		}
		return true
	})
	return b, ctx.Err()
}

// dissipates tells whether anything takes energy from the toy.
func dissipates(r *rig.Rig) bool {
	for i := range r.Parts {
		f := &r.Parts[i].Friction
		if f.Viscous.V > 0 || f.Drag.V > 0 || f.Dry.V > 0 {
			return true
		}
	}
	return false
}

// creeps follows the falling energy from y in small steps, which cannot leave the
// hollow that y is in, and names the place of rest at its bottom.
func (a *Answers) creeps(m *toy.Model, y []float64) int {
	z := m.Creep(y)
	best, at := 2e-3, -1
	for i := range a.Rests {
		if d := m.Apart(z, a.Rests[i].state); d < best {
			best, at = d, i
		}
	}
	return at
}

// layOut chooses what the grid spans and returns how release (i, j) is set.
func (b *Basins) layOut(m *toy.Model, side int, reach float64) func(m *toy.Model, y []float64, i, j int) {
	line := func(most float64) []float64 {
		out := make([]float64, side)
		for i := range out {
			out[i] = most * (2*(float64(i)+0.5)/float64(side) - 1)
		}
		return out
	}
	parts := m.Parts()
	tilt := func(label string) finding.Axis {
		return finding.Axis{Label: label, Unit: "rad", ShowUnit: "°", ShowFactor: 180 / math.Pi}
	}
	for k, name := range parts {
		if m.OneAxis(k) {
			continue
		}
		b.X, b.Y = line(reach), line(reach)
		b.Labels = [2]finding.Axis{tilt("tilt of " + name + " to the right"), tilt("tilt of " + name + " away from the camera")}
		b.note = name + " is let go from rest, tilted by that much."
		for _, rest := range b.Rests {
			polar, azimuth, _, _, _ := m.Ball(rest.state, k)
			b.mark(polar*math.Cos(azimuth), polar*math.Sin(azimuth))
		}
		return func(m *toy.Model, y []float64, i, j int) {
			m.SetBall(y, k, math.Hypot(b.X[i], b.Y[j]), math.Atan2(b.Y[j], b.X[i]), 0, 0, 0)
		}
	}
	b.X = line(reach)
	if len(parts) == 1 {
		// As fast as the highest of these places would make it.
		y := m.Rest()
		m.SetAngle(y, 0, 0, 1)
		inertia := 2 * m.Energy(y).Kinetic
		top, bottom := math.Inf(-1), math.Inf(1)
		for _, x := range b.X {
			m.SetAngle(y, 0, x, 0)
			e := m.Energy(y).Total()
			top, bottom = math.Max(top, e), math.Min(bottom, e)
		}
		b.Y = line(math.Sqrt(2 * (top - bottom) / inertia))
		b.Labels = [2]finding.Axis{tilt("angle of " + parts[0]), {Label: "rate at the release", Unit: "rad/s"}}
		b.note = parts[0] + " is let go at that angle, with that speed."
		for _, rest := range b.Rests {
			b.mark(rest.Angles[0], 0)
		}
		return func(m *toy.Model, y []float64, i, j int) { m.SetAngle(y, 0, b.X[i], b.Y[j]) }
	}
	b.Y = line(reach)
	b.Labels = [2]finding.Axis{tilt("angle of " + parts[0]), tilt("angle of " + parts[1])}
	b.note = parts[0] + " and " + parts[1] + " are let go from rest at those angles."
	for _, rest := range b.Rests {
		b.mark(rest.Angles[0], rest.Angles[1])
	}
	return func(m *toy.Model, y []float64, i, j int) {
		m.SetAngle(y, 0, b.X[i], 0)
		m.SetAngle(y, 1, b.Y[j], 0)
	}
}

func (b *Basins) mark(x, y float64) {
	b.marks[0], b.marks[1] = append(b.marks[0], x), append(b.marks[1], y)
}

// Curves draws the picture, with the places of rest marked, and how long the toy
// took to choose.
func (b *Basins) Curves() []finding.Curve {
	z := make([]float64, len(b.Into))
	for i, at := range b.Into {
		z[i] = float64(at + 1)
		if at < 0 {
			z[i] = math.NaN()
		}
	}
	picture := finding.Curve{
		Key: "basins", Title: "Which place of rest the toy falls into",
		Caption: b.note + " The colour is the number of the place where it comes to rest, the battery out; the rings are those places.",
		X:       b.Labels[0], Y: b.Labels[1],
		Grid: &finding.Grid{X: b.X, Y: b.Y, Z: z, Label: "place of rest", Unit: "1"},
	}
	picture.Lines = []finding.Line{{Name: "places of rest", Role: finding.Mark, X: b.marks[0], Y: b.marks[1]}}
	return []finding.Curve{picture, {
		Key: "basins-time", Title: "How long it takes until the place of rest is decided",
		Caption: b.note + " Time until the toy has too little energy to leave the place that it will rest in.",
		X:       b.Labels[0], Y: b.Labels[1],
		Grid: &finding.Grid{X: b.X, Y: b.Y, Z: b.Steps, Label: "time", Unit: "s"},
	}}
}

// Findings are the shares of the releases.
func (b *Basins) Findings(m []string) []finding.Finding {
	var out []finding.Finding
	count := make([]int, len(b.Rests)+1)
	for _, at := range b.Into {
		if at < 0 {
			at = len(b.Rests)
		}
		count[at]++
	}
	n := float64(len(b.Into))
	for i, rest := range b.Rests {
		share := float64(count[i]) / n
		f := finding.Normal("basins.share", fmt.Sprintf("place of rest %d", i+1), "Share of the releases that end there", share, math.Sqrt(share*(1-share)/n), "1", "counted over the grid; uncertainty as of as many random releases")
		f.Lo, f.Hi = math.Max(0, f.Lo), math.Min(1, f.Hi)
		text := ""
		for k, p := range m {
			text += fmt.Sprintf("%s at %.1f°, ", p, rest.Angles[k]*180/math.Pi)
		}
		f.Cautions = []string{"Place " + fmt.Sprint(i+1) + ": " + text[:max(0, len(text)-2)] + "."}
		out = append(out, f)
	}
	if c := count[len(b.Rests)]; c > 0 {
		out = append(out, finding.Finding{
			Key: "basins.undecided", Name: "Releases not decided", Kind: finding.Statement, Method: "counted over the grid",
			Text: fmt.Sprintf("%d of %d releases were not followed to their end.", c, len(b.Into)),
		})
	}
	return out
}
