package toy

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
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
	for i := range r.Magnets {
		if rnd.IntN(3) == 0 {
			r.Magnets[i].Moment = rig.Value{}
			r.Magnets[i].Cylinder = &rig.Cylinder{
				DiameterM: number(u(0.005, 0.02)), HeightM: number(u(0.003, 0.02)), RemanenceT: number(u(0.3, 1.3)),
			}
		}
	}
	return r
}

// mirrored is the rig as a mirror in the plane x = 0 shows it. A mirror turns
// moments, which are axial vectors, the other way as well; all moments reversed
// at once change nothing, so axes may be mirrored like arrows.
func mirrored(r *rig.Rig) *rig.Rig {
	flip := func(a []float64) []float64 {
		a = append([]float64(nil), a...)
		a[0] = -a[0]
		return a
	}
	c := *r
	c.Parts = append([]rig.Part(nil), r.Parts...)
	for i := range c.Parts {
		p := &c.Parts[i]
		p.PivotM, p.CentreM = flip(p.PivotM), flip(p.CentreM)
		p.Spring.RestRad.V = -p.Spring.RestRad.V
	}
	c.Magnets = append([]rig.Magnet(nil), r.Magnets...)
	for i := range c.Magnets {
		c.Magnets[i].AtM, c.Magnets[i].Axis = flip(c.Magnets[i].AtM), flip(c.Magnets[i].Axis)
	}
	c.Bobs = append([]rig.Bob(nil), r.Bobs...)
	for i := range c.Bobs {
		c.Bobs[i].AtM = flip(c.Bobs[i].AtM)
	}
	return &c
}

// Mirror images move as mirror images.
func TestMirrorImages(t *testing.T) {
	rnd := rand.New(rand.NewPCG(7, 8))
	for i := range 20 {
		r := randomToy(rnd)
		m, n := mustNew(t, r), mustNew(t, mirrored(r))
		y := randomState(m, rnd)
		z := n.Rest()
		for k := range m.bodies {
			if m.OneAxis(k) {
				a, rate := m.Angle(y, k)
				n.SetAngle(z, k, -a, -rate)
			} else {
				polar, azimuth, polarRate, azimuthRate, spin := m.Ball(y, k)
				n.SetBall(z, k, polar, math.Pi-azimuth, polarRate, -azimuthRate, -spin)
			}
		}
		const until = 0.5
		for model, state := range map[*Model][]float64{m: y, n: z} {
			if err := model.Run(context.Background(), 0, state, until, Options{Tol: 1e-12}, nil, nil); err != nil {
				t.Fatal(err)
			}
		}
		limit := 1e-7
		for j := range r.Magnets {
			if r.Magnets[j].Cylinder != nil {
				limit = 1e-5 // the points on its faces are not laid out mirrored
			}
		}
		a, b := m.Positions(y, nil), n.Positions(z, nil)
		for j := range a {
			if off := math.Hypot(math.Hypot(a[j][0]+b[j][0], a[j][1]-b[j][1]), a[j][2]-b[j][2]); off > limit {
				t.Errorf("toy %d: bob %d is %.2g m from its mirror image", i, j, off)
			}
		}
	}
}

// Two parts on one pivot that touch nothing else keep their angular momentum:
// on ball joints without gravity all of it.
func TestMomentumOfAFreePair(t *testing.T) {
	rnd := rand.New(rand.NewPCG(9, 10))
	met := 0
	for i := range 20 {
		r := randomToy(rnd)
		r.Gravity = number(0)
		r.Parts, r.Magnets, r.Bobs = r.Parts[:2], r.Magnets[:2], nil
		for j := range r.Parts {
			p := &r.Parts[j]
			p.On, p.Joint, p.Flat, p.PivotM = "", "ball", false, []float64{0.1, 0.05, 0.2}
			p.Spring = rig.Spring{}
			p.SpinInertia = number(1e-5)
		}
		r.Parts[1].CentreM = []float64{0.12, 0, 0.1} // well away from the other
		r.Parts[1].Inertia = number(r.Parts[1].MassKg.V * 0.03)
		r.Magnets[1].AtM = r.Parts[1].CentreM
		m := mustNew(t, r)
		y := m.Rest()
		for j := range y[m.nq:] {
			y[m.nq+j] = 2 * rnd.NormFloat64()
		}
		momentum := func(y []float64) (l vec) {
			m.kinematics(y)
			for k := range m.bodies {
				in := m.bodies[k].inWorld()
				about, p := in.momentum(m.bodies[k].w, m.bodies[k].vo)
				l = l.Add(about).Sub(m.bodies[k].p.Cross(p))
			}
			return l
		}
		before := momentum(y)
		if err := m.Run(context.Background(), 0, y, 0.6, Options{Tol: 1e-11}, nil, nil); err != nil {
			if met++; !strings.Contains(err.Error(), "meet at") || met > 4 {
				t.Errorf("pair %d: %v", i, err)
			}
			continue
		}
		if off := momentum(y).Sub(before).Norm() / before.Norm(); off > 1e-8 {
			t.Errorf("pair %d: angular momentum changed by %.2g", i, off)
		}
	}
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

// The forces at rest are the gradient of the potential energy.
func TestForcesAreGradients(t *testing.T) {
	rnd := rand.New(rand.NewPCG(11, 12))
	for i := range 20 {
		m := mustNew(t, randomToy(rnd))
		y := randomState(m, rnd)
		q := make([]float64, m.nv)
		m.statics(y, q)
		d := make([]float64, m.nv)
		for j := range d {
			const h = 1e-5
			u := [2]float64{}
			for s, step := range []float64{h, -h} {
				d[j] = step
				z := append([]float64(nil), y...)
				m.move(z, d)
				u[s] = m.potential(z)
			}
			d[j] = 0
			if want := -(u[0] - u[1]) / (2 * h); math.Abs(q[j]-want) > 1e-7*(norm(q)+1e-3) {
				t.Errorf("toy %d: force %d is %.9g N·m, by differences of the energy %.9g", i, j, q[j], want)
			}
		}
	}
}

// Without friction the energy stays, whatever the tree, joints and magnets.
func TestEnergyOfRandomToys(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 2))
	met := 0 // toys whose magnets touch
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
			if met++; !strings.Contains(err.Error(), "meet at") || met > 4 {
				t.Errorf("toy %d: %v", i, err)
			}
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
