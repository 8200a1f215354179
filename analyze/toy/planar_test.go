package toy

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/track/rig"
)

// randomPlanar is a random toy of one to four parts that all turn across the
// picture, with dipoles, springs, frictions and a coil in its plane.
func randomPlanar(rnd *rand.Rand) *rig.Rig {
	r := randomToy(rnd)
	u := func(lo, hi float64) float64 { return lo + (hi-lo)*rnd.Float64() }
	for i := range r.Parts {
		p := &r.Parts[i]
		if p.Joint == "ball" {
			p.Joint, p.SpinInertia = "hinge", rig.Value{}
		}
		p.Flat = false
		p.PivotM[1] = 0
		p.Friction = rig.Friction{Viscous: number(u(0, 1e-4)), Drag: number(u(0, 1e-4)), Dry: number(u(0, 1e-4))}
	}
	for i := range r.Magnets {
		g := &r.Magnets[i]
		g.AtM[1], g.Axis[1] = 0, 0
		if len(g.AtM) == 2 {
			g.AtM[1] = u(-0.2, -0.1)
		}
		g.Cylinder, g.Moment = nil, number(u(0.1, 0.6))
	}
	r.Coils = []rig.Coil{{
		AtM: []float64{u(-0.05, 0.05), u(-0.2, -0.1)}, Axis: []float64{u(-1, 1), 1},
		KickJ: number(1e-3), SensedRadS: number(0.1), WidthM: number(0.02), RadiusM: number(0.05), Eddy: number(1e-5),
	}}
	return r
}

// The short way in the plane and the general tree are two derivations of one
// motion: the same accelerations at random states of random toys, whether a coil
// pushes or not, and the same motion in the end.
func TestPlanarTwoWays(t *testing.T) {
	rnd := rand.New(rand.NewPCG(41, 1))
	trees := 0
	for toy := range 200 {
		r := randomPlanar(rnd)
		m := mustNew(t, r)
		m.prepare()
		if m.planar = m.newPlanar(); m.planar == nil {
			t.Fatalf("toy %d takes the general way", toy)
		}
		if !m.allAlone {
			trees++
		}
		c := &m.coils[0]
		a, b := make([]float64, m.StateLen()), make([]float64, m.StateLen())
		for range 5 {
			y := m.Rest()
			for i := range y {
				y[i] += 2 * rnd.NormFloat64()
			}
			m.kinematics(y)
			c.pushing = rnd.IntN(2) == 0
			c.pushFrom, c.pushDir, c.pushEnergy = m.magnets[c.magnet].r.Sub(vec{X: 0.006, Z: 0.008}), vec{X: 0.6, Z: 0.8}, 1e-3
			m.free = true
			m.derive(0, y, a)
			m.derivePlanar(0, y, b)
			size := 0.0
			for i := range a {
				size = math.Max(size, math.Abs(a[i]))
			}
			for i := range a {
				if math.Abs(a[i]-b[i]) > 1e-11*size {
					t.Fatalf("toy %d: rate %d is %.15g by the general way, %.15g by the short one", toy, i, a[i], b[i])
				}
			}
		}
	}
	if trees < 50 {
		t.Errorf("only %d of 200 toys carry parts on parts", trees)
	}
	for _, name := range []string{"ferry", "buoys", "vanes", "gull"} {
		r, err := rig.Load("../../samples/" + name + ".toml")
		if err != nil {
			t.Fatal(err)
		}
		m := mustNew(t, r)
		y, err := m.Start()
		if err != nil {
			t.Fatal(err)
		}
		z := append([]float64(nil), y...)
		var kicks [2]int
		for i, o := range []Options{{Tol: 1e-12}, {Tol: 1e-12, general: true}} {
			if err := m.Run(context.Background(), 0, [][]float64{y, z}[i], 2, o, nil, func(e Event) {
				if e.Kind == Kick {
					kicks[i]++
				}
			}); err != nil {
				t.Fatal(err)
			}
		}
		if kicks[0] != kicks[1] {
			t.Errorf("%s: %d kicks by the short way, %d by the general one", name, kicks[0], kicks[1])
		}
		for i := range y {
			if math.Abs(y[i]-z[i]) > 1e-7 {
				t.Errorf("%s: after 2 s number %d is %.12g by the short way, %.12g by the general one", name, i, y[i], z[i])
			}
		}
	}
}
