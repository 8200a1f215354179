package kick

import (
	"context"
	"fmt"
	"math"

	"lodeswing/track/rig"
)

// A part on a ball joint has no turning points in common with its picture. Its
// energy is taken instead from the free motion between two pushes: the toy's own
// equations, with the coil off, are laid through the positions of each such stretch
// (free.go), and the energy in the middle of it is a point of the ledger. What the
// rig leaves open or unsure (magnets, their places, friction, camera, the pivot in
// the picture) is free in all stretches together.

// Ball is what the ledger of a part on a ball joint needs beside Options.
type Ball struct {
	Rig  *rig.Rig
	Coil *rig.Coil
	Name string // of the sensed magnet
	Bob  int    // index in the rig
}

// ball checks whether a rig allows the ledger of a part on a ball joint.
func (o *Options) ball(r *rig.Rig, p *rig.Part) {
	no := func(text string, args ...any) { o.NoLedger = fmt.Sprintf(text, args...) }
	switch {
	case len(r.Parts) > 1:
		no("%q swings on a ball joint and the toy has other moving parts, with which it trades energy", p.Name)
		return
	case !p.MassKg.Known() || len(p.CentreM) < 2 || !(p.Inertia.Set && p.Inertia.V > 0):
		no("%q swings on a ball joint: its ledger needs mass_g, centre_mm and inertia_g_mm2 as numbers in the rig", p.Name)
		return
	}
	b := &Ball{Rig: r, Bob: -1}
	n := 0
	for i := range r.Coils {
		if k := &r.Coils[i]; k.Part == p.Name || k.Part == "" {
			b.Coil = k
			n++
		}
	}
	if n != 1 {
		no("%d coils act on %q: their kicks cannot be told apart", n, p.Name)
		return
	}
	nearest := math.Inf(1)
	c := rig.XYZ(b.Coil.AtM)
	for i := range r.Magnets {
		g := &r.Magnets[i]
		if g.Part == p.Name {
			at := rig.XYZ(g.AtM)
			if d := math.Hypot(math.Hypot(at[0]-c[0], at[1]-c[1]), at[2]-c[2]); d < nearest {
				nearest, b.Name = d, g.Name
			}
		}
	}
	if b.Name == "" {
		no("no magnet sits on %q that the coil could push", p.Name)
		return
	}
	for i := range r.Bobs {
		if r.Bobs[i].Part == p.Name && len(r.Bobs[i].AtM) >= 2 && b.Bob < 0 {
			b.Bob = i
		}
	}
	if b.Bob < 0 {
		no("no bob with at_mm sits on %q, so that its direction cannot be had from the picture", p.Name)
		return
	}
	o.Ball = b
}

// openBall is open for a part on a ball joint.
func openBall(ctx context.Context, clips []Clip, opt Options) (*ledger, error) {
	l := &ledger{opt: opt, clips: clips, unit: "J", plain: viscous, weight: opt.Weight, inertia: opt.Inertia, shares: opt.WeightShares}
	for i := range clips {
		if clips[i].Track == nil {
			return nil, fmt.Errorf("kick: %q swings on a ball joint: its ledger needs the track of its clip, not a table of angles", clips[i].Angle.Part)
		}
	}
	f, err := newFreeFit(opt.Ball, clips[0].Angle.Part)
	if err != nil {
		return nil, fmt.Errorf("kick: %w", err)
	}
	l.free = f
	for i := range clips {
		v, err := newView(i, &clips[i], opt.Ball)
		if err != nil {
			return nil, fmt.Errorf("kick: %w", err)
		}
		f.views = append(f.views, v)
		l.turns, l.rest, l.uRest, l.noise = append(l.turns, nil), append(l.rest, 0), append(l.uRest, 1e-9), append(l.noise, 1)
	}
	f.look(clips)
	cut := func() error {
		for _, v := range f.views {
			if err := v.directions(f); err != nil {
				return fmt.Errorf("kick: %w", err)
			}
			v.meet(f)
			v.cut()
		}
		return nil
	}
	if err := cut(); err != nil {
		return nil, err
	}
	// The first solution puts the pivot where it is; then the passes are right.
	if err := f.approach(ctx); err != nil {
		return nil, err
	}
	if err := cut(); err != nil {
		return nil, err
	}
	if err := f.solve(ctx, 30); err != nil {
		return nil, err
	}
	// A stretch in which a hand pushed is none of free motion.
	for range 3 {
		if !f.dropTouched() {
			break
		}
		if err := f.solve(ctx, 30); err != nil {
			return nil, err
		}
	}
	l.enterBall()
	if len(l.rows) < leastPasses {
		return nil, fmt.Errorf("kick: only %d passes of %q by the coil lie between stretches of free motion that were seen; film at least %d in one go", len(l.rows), clips[0].Angle.Part, leastPasses)
	}
	return l, nil
}

// enterBall makes the rows: one from each stretch of free motion to the next.
func (l *ledger) enterBall() {
	f := l.free
	old := l.rows
	l.rows = nil
	f.common = make([][]float64, len(f.root))
	lowest := math.Inf(1)
	for _, v := range f.views {
		lowest = math.Min(lowest, f.lowest(v))
	}
	for _, v := range f.views {
		c := &l.clips[v.clip]
		for k := 1; k < len(v.free); k++ {
			a, b := v.free[k-1], v.free[k]
			gap, meet, doubtful := 0.0, (*meeting)(nil), false
			for i := a.mid; i < b.mid; i++ {
				gap = math.Max(gap, v.t[i+1]-v.t[i])
			}
			if gap > 2*longestStep {
				continue
			}
			r := row{
				clip: v.clip, joined: len(l.rows) > 0 && l.rows[len(l.rows)-1].last == a, last: b,
				before: a.energy - lowest, after: b.energy - lowest, span: v.t[b.mid] - v.t[a.mid],
				side: 1, state: Slow, fixed: true, aside: math.NaN(),
			}
			for j := range v.meets {
				m := &v.meets[j]
				if m.t < v.t[a.mid] || m.t > v.t[b.mid] {
					continue
				}
				if meet == nil || m.gain > meet.gain {
					meet = m
				}
				r.gain += m.gain
				r.meets = append(r.meets, m)
				doubtful = doubtful || m.doubtful && m.gain > 0.05
				if !m.slow {
					r.state, r.fixed = Kicked, false
				}
			}
			for _, t := range v.hands {
				doubtful = doubtful || t > v.t[a.mid] && t < v.t[b.mid]
			}
			r.t = (v.t[a.mid] + v.t[b.mid]) / 2
			if meet != nil {
				r.t, r.speed, r.aside = meet.t, meet.speed, meet.aside
			}
			if r.gain < 1e-3 {
				r.state, r.fixed = Slow, true
			}
			if doubtful {
				r.state, r.fixed = Odd, true
			}
			if c.Off || c.OffToS > c.OffFromS && r.t > c.OffFromS && r.t < c.OffToS {
				r.state, r.fixed = Off, true
			}
			r.vFrom, r.vTo = a.variance*sq(l.noise[v.clip]), b.variance*sq(l.noise[v.clip])
			for i := a.mid; i < b.mid; i++ {
				// Trapezium rule over the samples.
				d := (v.t[i+1] - v.t[i]) / 2
				for _, w := range [2]float64{v.rate[i], v.rate[i+1]} {
					r.work[0] += d * w * w
					r.work[1] += d * w * w * w
					r.work[2] += d * w
				}
				r.amp += (v.polar[i] + v.polar[i+1]) / 2 / float64(b.mid-a.mid)
			}
			for e := range f.root {
				f.common[e] = append(f.common[e], b.common[e]-a.common[e])
			}
			l.rows = append(l.rows, r)
		}
	}
	if len(old) == len(l.rows) {
		for i := range old {
			l.rows[i].state, l.rows[i].fixed = old[i].state, old[i].fixed
		}
	}
}

// blunt takes errors of neighbouring pictures that are alike into account: they hide
// in each stretch's own unknowns, and show only in how its energies scatter. The
// pictures then count for less against what the rig says.
func (l *ledger) blunt(ctx context.Context) error {
	for range 2 {
		alike := false
		for _, v := range l.free.views {
			if n := l.noise[v.clip]; n > 1.2 {
				alike = true
				for i := range v.white {
					for e := range 3 {
						v.white[i][e] /= n
					}
				}
				l.noise[v.clip] = 1
			}
		}
		if !alike {
			return nil
		}
		if err := l.free.solve(ctx, 30); err != nil {
			return err
		}
		l.measureNoise()
	}
	return nil
}
