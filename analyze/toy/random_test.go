package toy

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/track/rig"
)

func number(x float64) rig.Value { return rig.Value{V: x, Set: true} }

// randomToy returns a rig of two to four parts on any joints, each with a
// magnet, over two magnets on the base, without friction.
func randomToy(rnd *rand.Rand) *rig.Rig {
	r := &rig.Rig{Name: "random"}
	u := func(lo, hi float64) float64 { return lo + (hi-lo)*rnd.Float64() }
	n := 2 + rnd.IntN(3)
	for i := range n {
		p := rig.Part{
			Name:    fmt.Sprintf("part %d", i),
			Joint:   []string{"hinge", "ball", "pin"}[rnd.IntN(3)],
			MassKg:  number(u(0.02, 0.1)),
			PivotM:  []float64{0.25 * float64(i), u(-0.02, 0.02), u(-0.02, 0.02)},
			CentreM: []float64{u(-0.02, 0.02), 0, u(-0.15, -0.08)},
		}
		if i > 0 && rnd.IntN(2) == 0 {
			p.On = fmt.Sprintf("part %d", rnd.IntN(i))
			p.PivotM = []float64{u(-0.02, 0.02), u(-0.02, 0.02), u(-0.2, -0.1)}
		}
		l2 := p.CentreM[0]*p.CentreM[0] + p.CentreM[2]*p.CentreM[2]
		p.Inertia = number(p.MassKg.V * l2 * u(1.05, 1.4))
		if p.Joint == "ball" {
			p.SpinInertia = number(p.MassKg.V * l2 * u(0.02, 0.2))
		} else if rnd.IntN(2) == 0 {
			p.Spring = rig.Spring{Rate: number(u(0, 0.05)), Cubic: number(u(0, 0.05)), RestRad: number(u(-0.2, 0.2))}
		}
		if p.Joint == "pin" {
			p.Flat = rnd.IntN(2) == 0
		}
		r.Parts = append(r.Parts, p)
		r.Magnets = append(r.Magnets, rig.Magnet{
			Name: fmt.Sprintf("magnet %d", i), Part: p.Name, AtM: p.CentreM,
			Axis: []float64{u(-1, 1), u(-1, 1), u(-1, 1)}, Moment: number(u(0.1, 0.6)),
		})
		r.Bobs = append(r.Bobs, rig.Bob{Name: fmt.Sprintf("bob %d", i), Part: p.Name, AtM: p.CentreM})
	}
	for i := range 2 {
		r.Magnets = append(r.Magnets, rig.Magnet{
			Name: fmt.Sprintf("base %d", i), Part: "base", AtM: []float64{u(-0.1, 0.4), u(-0.1, 0.1), u(-0.5, -0.4)},
			Axis: []float64{u(-1, 1), u(-1, 1), u(-1, 1)}, Moment: number(u(0.1, 0.6)),
		})
	}
	return r
}

// randomState is a state with every part in motion.
func randomState(m *Model, rnd *rand.Rand) []float64 {
	y := m.Rest()
	for k := range m.bodies {
		u := func(a float64) float64 { return a * (2*rnd.Float64() - 1) }
		if m.OneAxis(k) {
			m.SetAngle(y, k, u(0.8), u(2))
		} else {
			m.SetBall(y, k, 0.8*rnd.Float64(), u(math.Pi), u(2), u(2), u(5))
		}
	}
	return y
}

// Without friction the energy stays, whatever the tree, joints and magnets.
func TestEnergyOfRandomToys(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 2))
	for i := range 40 {
		m, err := New(randomToy(rnd))
		if err != nil {
			t.Fatal(err)
		}
		y := randomState(m, rnd)
		e0 := m.Energy(y)
		scale := math.Abs(e0.Kinetic) + math.Abs(e0.Gravity) + math.Abs(e0.Spring) + math.Abs(e0.Magnetic)
		o, err := m.Simulate(context.Background(), y, 3, Options{Tol: 1e-11})
		if err != nil {
			t.Errorf("toy %d: %v", i, err)
			continue
		}
		worst := 0.0
		for _, at := range []float64{0.5, 1, 2, 3} {
			o.At(at, y)
			worst = max(worst, math.Abs(m.Energy(y).Total()-e0.Total())/scale)
		}
		if worst > 1e-8 {
			t.Errorf("toy %d of %d parts: energy off by %.2g of its scale", i, len(m.bodies), worst)
		}
		t.Logf("toy %d: %d freedoms, %.2g", i, m.nv, worst)
	}
}
