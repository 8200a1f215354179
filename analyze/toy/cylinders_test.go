package toy

import (
	"context"
	"math"
	"strings"
	"testing"

	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

// At rest the lantern's cylinders push each other as two coaxial cylinders do by
// the exact formula, at every rule that the gap calls for; and the user is told
// what dipoles would have made of it.
func TestLanternOfCylinders(t *testing.T) {
	for _, distance := range []float64{0.016, 0.020, 0.024, 0.030, 0.060} {
		r := lantern()
		r.Magnets[1].AtM = []float64{0, -0.28 - distance}
		for i := range r.Magnets {
			r.Magnets[i].Moment = rig.Value{}
			r.Magnets[i].Cylinder = &rig.Cylinder{DiameterM: number(0.012), HeightM: number(0.006), RemanenceT: number(1.2)}
		}
		m := mustNew(t, r)
		m.kinematics(m.Rest())
		m.magnetForces()
		c := magnet.Cylinder{Radius: 0.006, Height: 0.006, Remanence: 1.2}
		want := magnet.CoaxialForce(c, c, distance-0.006)
		if got := m.bodies[0].extF.Z; math.Abs(got/want-1) > 1e-3 {
			t.Errorf("%g m apart: %.6f N, exactly %.6f N (rule %d)", distance, got, want, m.magnets[0].rule)
		}
		bias := m.DipoleBias()
		if len(bias) != 1 || math.Abs(bias[0].Force-magnet.DipoleBias(c, c, distance)) > 1e-3 || !bias[0].Exact {
			t.Errorf("%g m apart: bias %+v", distance, bias)
		}
	}
	// Given as dipoles, what discs of such moments would do differently is said.
	bias := mustNew(t, lantern()).DipoleBias()
	if len(bias) != 1 || bias[0].Exact || bias[0].Force > -0.1 || !strings.Contains(bias[0].Caution, "taken as dipoles") {
		t.Errorf("bias of dipoles %+v", bias)
	}
}

// A gap given in the rig sets the base magnet's distance, however the arm is
// described, and can be changed.
func TestGap(t *testing.T) {
	r := lantern()
	r.Magnets[1].GapM = number(0.035)
	m := mustNew(t, r)
	if got := m.magnets[1].r.Sub(m.magnets[0].r).Norm(); math.Abs(got-0.035) > 1e-15 {
		t.Errorf("the gap is %g", got)
	}
	i, err := m.Index("base magnet.gap")
	if err != nil {
		t.Fatal(err)
	}
	m.Set(i, 0.05)
	y := m.Rest()
	m.SetAngle(y, 0, 0.3, 0)
	a := m.Energy(y)
	r.Magnets[1].GapM, r.Magnets[1].AtM = rig.Value{}, []float64{0, -0.33}
	if b := mustNew(t, r).Energy(y); math.Abs(a.Total()-b.Total()) > 1e-15 {
		t.Errorf("energies %g and %g J", a.Total(), b.Total())
	}
}

// Every number of a rig that may be fitted, and belongs to the toy, is one of the
// model's under the same address, and changing it there and in the rig is the same.
func TestParamsAreTheRigsNumbers(t *testing.T) {
	r := lantern()
	r.Parts[0].Friction = rig.Friction{Viscous: number(1e-4), Drag: number(1e-4), Dry: number(1e-5)}
	r.Parts[0].Spring = rig.Spring{Rate: number(0.01), Cubic: number(0.01), RestRad: number(0.1)}
	r.Parts[0].Inertia = number(7e-3)
	r.Magnets[0].Moment, r.Magnets[0].Cylinder = rig.Value{}, &rig.Cylinder{DiameterM: number(0.012), HeightM: number(0.006), RemanenceT: number(1.2)}
	r.Magnets[1].GapM = number(0.03)
	r.Coils = []rig.Coil{{AtM: []float64{0, -0.3}, KickJ: number(1e-4), SensedRadS: number(0.1), Eddy: number(1e-6)}}
	m := mustNew(t, r)
	seen := 0
	for _, n := range r.Numbers() {
		if !n.MayFit || strings.HasSuffix(n.Address, "spin_inertia") || n.Address == "bob magnet.moment" || n.Address == "bob magnet.gap" {
			continue
		}
		i, err := m.Index(n.Address)
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		seen++
		if got := m.Get(i); got != n.Value.V {
			t.Errorf("%s is %g in the model, %g in the rig", n.Address, got, n.Value.V)
		}
		c := r.Clone()
		v, err := c.Number(n.Address)
		if err != nil {
			t.Fatal(err)
		}
		v.V *= 1.1
		k := m.Clone()
		k.Set(i, v.V)
		if a, b := endOf(t, k), endOf(t, mustNew(t, c)); math.Abs(a-b) > 1e-9 {
			t.Errorf("%s changed in the model ends at %.12f, in the rig at %.12f", n.Address, a, b)
		}
	}
	if seen < 10 {
		t.Errorf("only %d numbers were compared", seen)
	}
}

func endOf(t *testing.T, m *Model) float64 {
	y := m.Rest()
	m.SetAngle(y, 0, 0.5, 0)
	if err := m.Run(context.Background(), 0, y, 2, Options{Tol: 1e-10}, nil, nil); err != nil {
		t.Fatal(err)
	}
	return y[0]
}

// Turning and leaning an axis by Set is the same as giving the rig the axis so turned.
func TestAxisSlant(t *testing.T) {
	const turn, lean = 0.02, -0.03
	hung := lantern()
	hung.Parts[0].Joint, hung.Parts[0].SpinInertia = "ball", rig.Value{V: 1e-5, Set: true}
	for name, r := range map[string]*rig.Rig{"hinge": lantern(), "ball": hung, "cylinders": cylinders()} {
		m, err := New(r)
		if err != nil {
			t.Fatal(err)
		}
		magnet := &r.Magnets[1]
		for way, by := range map[string]float64{".axis.turn": turn, ".axis.lean": lean} {
			i, err := m.Index(magnet.Name + way)
			if err != nil {
				t.Fatal(err)
			}
			m.Set(i, by)
		}
		// About +y by turn, which takes z towards x; then towards y by lean: these axes
		// lie in the plane of x and z.
		a := rig.XYZ(magnet.Axis)
		x, z := a[0]*math.Cos(turn)+a[2]*math.Sin(turn), a[2]*math.Cos(turn)-a[0]*math.Sin(turn)
		magnet.Axis = []float64{x * math.Cos(lean), math.Sin(lean) * math.Hypot(x, z), z * math.Cos(lean)}
		k, err := New(r)
		if err != nil {
			t.Fatal(err)
		}
		y := k.Rest()
		k.Displace(y, []float64{0.3, 0.1, 0.2, 0.5, 0.6, 0.7}[:2*k.Freedoms()])
		d, e := make([]float64, len(y)), make([]float64, len(y))
		m.Derive(y, d)
		k.Derive(y, e)
		for i := range d {
			if math.Abs(d[i]-e[i]) > 1e-9*(1+math.Abs(e[i])) {
				t.Errorf("%s: derivative %d is %g by Set, %g by the rig", name, i, d[i], e[i])
			}
		}
	}
}

// cylinders is the lantern with discs for magnets.
func cylinders() *rig.Rig {
	r := lantern()
	for i := range r.Magnets {
		r.Magnets[i].Cylinder = &rig.Cylinder{
			DiameterM: rig.Value{V: 0.012, Set: true}, HeightM: rig.Value{V: 0.006, Set: true}, RemanenceT: rig.Value{V: 1.2, Set: true},
		}
	}
	return r
}
