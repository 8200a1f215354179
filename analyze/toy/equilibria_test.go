package toy

import (
	"context"
	"fmt"
	"math"
	"testing"

	"lodeswing/track/rig"
)

// row is n equal pendulums in a row, 30 mm apart, magnets in their bobs pointing
// down so that neighbours repel, light enough to be linear.
func row(n int, moment float64) *rig.Rig {
	r := &rig.Rig{Name: "row", Gravity: number(9.81)}
	for i := range n {
		p := fmt.Sprintf("p%d", i)
		r.Parts = append(r.Parts, rig.Part{
			Name: p, Joint: "hinge", PivotM: []float64{0.1 * float64(i), 0}, CentreM: []float64{0, -0.2}, MassKg: number(0.05),
		})
		r.Magnets = append(r.Magnets, rig.Magnet{Name: "m" + p, Part: p, AtM: []float64{0, -0.2}, Axis: []float64{0, -1}, Moment: number(moment)})
	}
	return r
}

// Two equal pendulums whose magnets repel side by side: by symmetry one mode
// swings in step and one against, and a swing of one alone wanders to the other
// and back with the beat of the two. Closed forms about hanging: for dipoles m at
// distance d, both along z and at equal height,
// U = μ₀m²/(4π) [1/ρ³ − 3 h²/ρ⁵], so with small angles a, b, lever l:
// ∂²U/∂x² = 12 μ₀m²/(4π d⁵), ∂²U/∂h² = −9 μ₀m²/(4π d⁵) along the line h.
// The pair's forces do not vanish at rest, so the check is made on the energy's
// own second derivatives at the place where both stand still.
func TestTwoCoupledPendulums(t *testing.T) {
	m := mustNew(t, row(2, 0.6))
	e, ok := m.RestNear(m.Rest())
	if !ok || !e.Stable {
		t.Fatalf("no stable rest near hanging: %+v", e)
	}
	a0, _ := m.Angle(e.State, 0)
	b0, _ := m.Angle(e.State, 1)
	if a0 >= 0 || math.Abs(a0+b0) > 1e-9 {
		t.Fatalf("repelling bobs rest at %g and %g, not apart and alike", a0, b0)
	}
	// U(a, b) in closed form, and its curvatures along a+b and a−b by differences of it.
	const l, g, mass, d = 0.2, 9.81, 0.05, 0.1
	k := 4e-7 * math.Pi / (4 * math.Pi) * 0.6 * 0.6 * 1.25663706212e-6 / (4e-7 * math.Pi)
	u := func(a, b float64) float64 {
		x := d + l*(math.Sin(b)-math.Sin(a))
		z := l * (math.Cos(a) - math.Cos(b))
		r2 := x*x + z*z
		r := math.Sqrt(r2)
		// moments along (sin, −cos) of each
		mm := math.Cos(a - b)
		m1 := (math.Sin(a)*x - math.Cos(a)*z) / r
		m2 := (math.Sin(b)*x - math.Cos(b)*z) / r
		return -mass*g*l*(math.Cos(a)+math.Cos(b)) + k/(r2*r)*(mm-3*m1*m2)
	}
	const h = 1e-3
	second := func(sa, sb float64) float64 { // fourth-order difference
		f := func(s float64) float64 { return u(a0+s*sa, b0+s*sb) }
		return (-f(2*h) + 16*f(h) - 30*f(0) + 16*f(-h) - f(-2*h)) / (12 * h * h)
	}
	inertia := mass * l * l
	want := []float64{math.Sqrt(second(1, 1)/(2*inertia)) / (2 * math.Pi), math.Sqrt(second(1, -1)/(2*inertia)) / (2 * math.Pi)}
	modes := m.Modes(e.State)
	for i := range want {
		if math.Abs(modes[i].Frequency/want[i]-1) > 1e-7 {
			t.Errorf("mode %d at %.9f Hz, want %.9f Hz", i, modes[i].Frequency, want[i])
		}
	}
	if s := modes[0].Shape; math.Abs(s[0]-s[1]) > 1e-6 {
		t.Errorf("the slow mode's shape is %v, not in step", s)
	}
	// The beat: all energy is with the other pendulum after half a beat.
	y := append([]float64(nil), e.State...)
	const small = 1e-4
	m.SetAngle(y, 0, a0+small, 0)
	beat := 1 / (want[1] - want[0])
	o := simulate(t, m, y, beat, Options{Tol: 1e-12})
	most := func(part int, from, to float64) float64 {
		biggest := 0.0
		rest := []float64{a0, b0}[part]
		for at := from; at < to; at += 0.01 {
			o.At(at, y)
			a, _ := m.Angle(y, part)
			biggest = math.Max(biggest, math.Abs(a-rest))
		}
		return biggest
	}
	period := 1 / want[0]
	if own, other := most(0, beat/2-period/2, beat/2+period/2), most(1, beat/2-period/2, beat/2+period/2); own > 0.2*small || math.Abs(other/small-1) > 0.01 {
		t.Errorf("after half a beat the first swings %.3g of its start and the other %.3g", own/small, other/small)
	}
}

// Three in a row, to first order in the coupling. For two dipoles m at distance d,
// both along z and tilted by small angles a and b on levers l,
// U = μ₀m²/(4πd³) [6(l/d)²(b−a)² − (a−b)²/2 − 3ab], so that
// p = ∂²U/∂a² = μ₀m²/(4πd³) (12(l/d)² − 1), c = ∂²U/∂a∂b = −μ₀m²/(4πd³) (12(l/d)² + 2).
// The matrix [[p+p', c, c'], [c, 2p, c], [c', c, p+p']], dashes for the distance
// 2d, has the modes (1, 0, −1) with p + p' − c', and (1, x, 1) with those of the
// matrix [[p+p'+c', √2 c], [√2 c, 2p]].
func TestThreeInARow(t *testing.T) {
	const l, d, moment, mass, g = 0.2, 0.1, 0.02, 0.05, 9.81
	m := mustNew(t, row(3, moment))
	e, ok := m.RestNear(m.Rest())
	if !ok {
		t.Fatal("no rest near hanging")
	}
	modes := m.Modes(e.State)
	if s := modes[1].Shape; math.Abs(s[0]+s[2]) > 1e-6 || math.Abs(s[1]) > 1e-6 {
		t.Errorf("the middle mode has shape %v, not (1, 0, -1)", s)
	}
	pc := func(d float64) (p, c float64) {
		k := 1.25663706212e-6 / (4 * math.Pi) * moment * moment / (d * d * d)
		return k * (12*l*l/(d*d) - 1), -k * (12*l*l/(d*d) + 2)
	}
	p, c := pc(d)
	p2, c2 := pc(2 * d)
	mean, half := (p+p2+c2+2*p)/2, (p+p2+c2-2*p)/2
	root := math.Sqrt(half*half + 2*c*c)
	want := []float64{mean - root, p + p2 - c2, mean + root}
	for i := range want {
		w := 2 * math.Pi * modes[i].Frequency
		got := w*w*mass*l*l - mass*g*l
		if math.Abs(got-want[i]) > 2e-3*want[2] {
			t.Errorf("mode %d: magnetic stiffness %.6g N·m/rad, want %.6g", i, got, want[i])
		}
	}
}

// Standing stems in a row, the middle head 20 mm lower than its neighbours. Side by
// side at one height the neighbours' push holds a head in the middle; from below
// (h over distance d beyond 0.39, where ∂²U/∂x² ∝ 12 − 81(h/d)² + 12(h/d)⁴ of two
// upright dipoles turns negative) it drives it to either side: in the tight row the
// middle one has two places of rest, left and right, in the wide row one.
func TestMiddleBuoyHasTwoRests(t *testing.T) {
	for d, want := range map[float64]int{0.04: 2, 0.08: 1} {
		if got := stableRests(t, d); got != want {
			t.Errorf("spacing %g m: %d stable places of rest, want %d", d, got, want)
		}
	}
}

func stableRests(t *testing.T, d float64) int {
	r := &rig.Rig{Name: "buoys"}
	for i := range 3 {
		p := fmt.Sprintf("buoy %d", i)
		r.Parts = append(r.Parts, rig.Part{
			Name: p, Joint: "hinge", Upright: true, PivotM: []float64{d * float64(i), []float64{0, -0.02, 0}[i]}, CentreM: []float64{0, -0.08},
			MassKg: number(0.01), Spring: rig.Spring{Rate: number([]float64{1, 0.02, 1}[i])},
		})
		r.Magnets = append(r.Magnets, rig.Magnet{Name: "m" + p, Part: p, AtM: []float64{0, -0.08}, Axis: []float64{0, -1}, Moment: number(0.6)})
	}
	m := mustNew(t, r)
	found, err := m.Equilibria(context.Background(), 1.2)
	if err != nil {
		t.Fatal(err)
	}
	stable := 0
	for _, e := range found {
		a, _ := m.Angle(e.State, 0)
		b, _ := m.Angle(e.State, 1)
		c, _ := m.Angle(e.State, 2)
		if !e.Stable {
			continue
		}
		if d < 0.06 && math.Abs(b) < 0.2 {
			t.Errorf("spacing %g m: the middle one rests at %g rad", d, b)
		}
		t.Logf("spacing %g m: rest at %.3f %.3f %.3f rad, energy %.6f J", d, a, b, c, e.Energy)
		stable++
	}
	return stable
}

// A viscous pendulum's small-motion damping ratio is c/(2√(I·mgl)).
func TestModeDamping(t *testing.T) {
	r := pendulum()
	r.Parts[0].Friction.Viscous = number(2e-4)
	m := mustNew(t, r)
	modes := m.Modes(m.Rest())
	inertia, k := 0.1*0.25*0.25, 0.1*9.81*0.25
	if want := 2e-4 / (2 * math.Sqrt(inertia*k)); math.Abs(modes[0].Zeta/want-1) > 1e-6 {
		t.Errorf("damping ratio %g, want %g", modes[0].Zeta, want)
	}
	if want := math.Sqrt(k/inertia) / (2 * math.Pi); math.Abs(modes[0].Frequency/want-1) > 1e-8 {
		t.Errorf("frequency %g, want %g", modes[0].Frequency, want)
	}
}
