package samples

import (
	"context"
	"fmt"
	"math"

	"lodeswing/analyze/toy"
	"lodeswing/samples/film"
	"lodeswing/track/rig"
)

// gridS is the step at which points of a motion are kept; between them a cubic
// runs. Its error is below 1e-9 m for anything slower than 100 rad/s.
const gridS = 0.5e-3

// motion is a toy's computed motion, as the places of chosen points and as angles.
type motion struct {
	model  *toy.Model
	poses  [][]pose // by part, by grid step
	angles [][][2]float64
	events []toy.Event
	n      int
}

type pose struct {
	at   [3]float64
	turn [3][3]float64
}

// move computes the motion that the rig's parts, magnets, coils and start give,
// from 0 to until seconds, with the battery taken out and a push where opt says so.
func move(ctx context.Context, r *rig.Rig, until float64, opt Options) (*motion, error) {
	m, err := toy.New(r)
	if err != nil {
		return nil, err
	}
	y, err := m.Start()
	if err != nil {
		return nil, err
	}
	parts := len(m.Parts())
	o := &motion{model: m, n: int(math.Ceil(until/gridS)) + 4}
	o.poses, o.angles = make([][]pose, parts), make([][][2]float64, parts)
	end := float64(o.n) * gridS
	cuts := []float64{0}
	for _, t := range []float64{min(opt.OffFromS, opt.PushAtS), max(opt.OffFromS, opt.PushAtS)} {
		if t > cuts[len(cuts)-1] && t < end {
			cuts = append(cuts, t)
		}
	}
	var path *toy.Motion
	var from float64
	next := 0
	for i := range o.n {
		t := float64(i) * gridS
		if next < len(cuts) && t >= cuts[next] {
			to := end
			if next+1 < len(cuts) {
				to = cuts[next+1]
			}
			if path != nil {
				path.At(cuts[next]-from, y)
			}
			from = cuts[next]
			next++
			if from > 0 && from == opt.PushAtS {
				d := make([]float64, 2*m.Freedoms())
				d[m.Freedoms()] = opt.PushRadS
				m.Displace(y, d)
			}
			off := opt.Undriven || opt.OffFromS > 0 && from >= opt.OffFromS
			if path, err = m.Simulate(ctx, y, to-from, toy.Options{Tol: 1e-10, Undriven: off, Passes: true}); err != nil {
				return nil, fmt.Errorf("the motion of %q cannot be computed: %w", r.Name, err)
			}
			for _, e := range path.Events {
				e.T += from
				o.events = append(o.events, e)
			}
		}
		path.At(t-from, y)
		for k := range parts {
			var p pose
			p.at, p.turn = m.Pose(y, k)
			o.poses[k] = append(o.poses[k], p)
			a, rate := m.Angle(y, k)
			o.angles[k] = append(o.angles[k], [2]float64{a, rate})
		}
	}
	return o, nil
}

// weights gives the grid step before t and the cubic's weights of the four
// steps around it (Lagrange). Before 0 the toy is held at its start.
func (o *motion) weights(t float64) (i int, w [4]float64) {
	x := min(max(t/gridS, 0), float64(o.n-3))
	i = min(max(int(x)-1, 0), o.n-4)
	x -= float64(i)
	w = [4]float64{
		-(x - 1) * (x - 2) * (x - 3) / 6, x * (x - 2) * (x - 3) / 2,
		-x * (x - 1) * (x - 3) / 2, x * (x - 1) * (x - 2) / 6,
	}
	return i, w
}

// point follows a point that sits on part k at local, m in the part's own axes;
// k −1 is the base.
func (o *motion) point(k int, local [3]float64) func(t float64) film.Vec {
	if k < 0 {
		return func(float64) film.Vec { return film.Vec(local) }
	}
	grid := make([]film.Vec, o.n)
	for i, p := range o.poses[k] {
		for e := range 3 {
			grid[i][e] = p.at[e] + p.turn[e][0]*local[0] + p.turn[e][1]*local[1] + p.turn[e][2]*local[2]
		}
	}
	return func(t float64) film.Vec {
		i, w := o.weights(t)
		var v film.Vec
		for j, c := range w {
			for e := range 3 {
				v[e] += c * grid[i+j][e]
			}
		}
		return v
	}
}

// angle is part k's shown angle and rate at t, rad and rad/s.
func (o *motion) angle(k int, t float64) (a, rate float64) {
	i, w := o.weights(t)
	for j, c := range w {
		a += c * o.angles[k][i+j][0]
		rate += c * o.angles[k][i+j][1]
	}
	return a, rate
}

// part is the index of a part by its name, −1 for the base.
func (o *motion) part(name string) int {
	if name == "" || name == rig.Base {
		return -1
	}
	k, err := o.model.Part(name)
	if err != nil {
		return -1
	}
	return k
}
