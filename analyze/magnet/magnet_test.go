package magnet

import (
	"math"
	"math/rand/v2"
	"testing"
)

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > rel*math.Abs(want) {
		t.Errorf("%s is %.10g, want %.10g", what, got, want)
	}
}

func randomVec(rnd *rand.Rand) Vec {
	return Vec{rnd.NormFloat64(), rnd.NormFloat64(), rnd.NormFloat64()}
}

// Two coaxial dipoles: F = 3μ₀m₁m₂/(2πd⁴), e.g. J. D. Jackson, "Classical
// Electrodynamics", from the energy of section 5.7.
func TestCoaxialDipoles(t *testing.T) {
	const m1, m2, d = 0.7, 1.1, 0.043
	_, f, t1, t2 := DipolePair(Vec{Z: m1}, Vec{Z: m2}, Vec{Z: d})
	near(t, "the force", -f.Z, 3*Mu0*m1*m2/(2*math.Pi*d*d*d*d), 1e-12)
	if t1.Norm()+t2.Norm()+math.Hypot(f.X, f.Y) > 1e-15 {
		t.Errorf("torques %v %v and force %v across the axis", t1, t2, f)
	}
	// Side by side and parallel: half of that, pushing.
	_, f, _, _ = DipolePair(Vec{Z: m1}, Vec{Z: m2}, Vec{X: d})
	near(t, "the force side by side", f.X, 3*Mu0*m1*m2/(4*math.Pi*d*d*d*d), 1e-12)
}

// turn rotates v by the small angle a.
func turn(v, a Vec) Vec {
	angle := a.Norm()
	k := a.Unit()
	s, c := math.Sincos(angle)
	return v.Scale(c).Add(k.Cross(v).Scale(s)).Add(k.Scale(k.Dot(v) * (1 - c)))
}

// Forces and torques are gradients of the energy: central differences over
// shifts and turns of the second body, for dipoles, charges and both mixed.
func TestGradients(t *testing.T) {
	rnd := rand.New(rand.NewPCG(3, 4))
	c := Cylinder{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}
	d := Cylinder{Radius: 5e-3, Height: 10e-3, Remanence: 1.3}
	axes := []Vec{{X: 1}, {Y: 1}, {Z: 1}}
	for range 20 {
		m1, m2 := randomVec(rnd), randomVec(rnd)
		r := randomVec(rnd).Unit().Scale(0.025 + 0.02*rnd.Float64())
		shift := randomVec(rnd).Scale(0.1)
		first := c.Charges(m1.Unit(), Degree7)
		for i := range first {
			first[i].At = first[i].At.Add(shift)
		}
		second := func(move, by Vec) []Charge { // d in its place, moved, and turned about its centre
			out := d.Charges(m2.Unit(), Degree7)
			for i := range out {
				out[i].At = turn(out[i].At, by).Add(shift).Add(r).Add(move)
			}
			return out
		}
		for name, f := range map[string]struct {
			energy        func(move, by Vec) float64
			force, torque Vec // about the second's centre
		}{
			"dipoles": func() (x struct {
				energy        func(move, by Vec) float64
				force, torque Vec
			},
			) {
				x.energy = func(move, by Vec) float64 { return DipoleEnergy(m1, turn(m2, by), r.Add(move)) }
				_, x.force, _, x.torque = DipolePair(m1, m2, r)
				return x
			}(),
			"charges": func() (x struct {
				energy        func(move, by Vec) float64
				force, torque Vec
			},
			) {
				x.energy = func(move, by Vec) float64 { e, _, _ := ChargesPair(first, second(move, by)); return e }
				_, x.force, x.torque = ChargesPair(first, second(Vec{}, Vec{}))
				x.torque = x.torque.Sub(shift.Add(r).Cross(x.force))
				return x
			}(),
			"mixed": func() (x struct {
				energy        func(move, by Vec) float64
				force, torque Vec
			},
			) {
				x.energy = func(move, by Vec) float64 {
					e, _, _ := ChargesDipole(first, turn(m2, by), shift.Add(r).Add(move))
					return e
				}
				_, x.force, x.torque = ChargesDipole(first, m2, shift.Add(r))
				x.torque = x.torque.Sub(shift.Add(r).Cross(x.force))
				return x
			}(),
		} {
			const hx, ha = 1e-6, 1e-5
			for _, a := range axes {
				fd := -(f.energy(a.Scale(hx), Vec{}) - f.energy(a.Scale(-hx), Vec{})) / (2 * hx)
				td := -(f.energy(Vec{}, a.Scale(ha)) - f.energy(Vec{}, a.Scale(-ha))) / (2 * ha)
				if math.Abs(fd-f.force.Dot(a)) > 1e-6*f.force.Norm() {
					t.Errorf("%s: force along %v is %g, by differences %g", name, a, f.force.Dot(a), fd)
				}
				if math.Abs(td-f.torque.Dot(a)) > 1e-6*(f.torque.Norm()+1e-3*f.force.Norm()) {
					t.Errorf("%s: torque about %v is %g, by differences %g", name, a, f.torque.Dot(a), td)
				}
			}
		}
		// Action and reaction about the origin, dipoles.
		_, f, t1, t2 := DipolePair(m1, m2, r)
		if sum := t1.Add(t2).Add(r.Cross(f)); sum.Norm() > 1e-12*(t1.Norm()+t2.Norm()) {
			t.Errorf("torques of a pair do not cancel: %v", sum)
		}
	}
}

// On the axis the exact field is the closed form of every textbook, and off the
// axis that of finely cut charges.
func TestFieldOfACylinder(t *testing.T) {
	c := Cylinder{Radius: 6e-3, Height: 4e-3, Remanence: 1.25, Recoil: 1.05}
	for _, z := range []float64{3e-3, 5e-3, 0.01, 0.05, -0.004} {
		near(t, "the field on the axis", c.Field(Vec{Z: z}).Z, c.AxialField(z), 1e-12)
	}
	charges := c.Charges(Vec{Z: 1}, Degree19)
	for _, p := range []Vec{{X: 0.02, Z: 0.005}, {X: 0.003, Y: 0.004, Z: 0.012}, {X: -0.006, Z: 0.015}, {Y: 0.03}} {
		var b Vec
		for _, q := range charges {
			d := p.Sub(q.At)
			r := d.Norm()
			b = b.Add(d.Scale(Mu0 / (4 * math.Pi) * q.Q / (r * r * r)))
		}
		if got := c.Field(p); got.Sub(b).Norm() > 1e-6*b.Norm() {
			t.Errorf("field at %v is %v, by charges %v", p, got, b)
		}
	}
	far := Vec{X: 0.3, Y: 0.1, Z: 0.4}
	if got, want := c.Field(far), DipoleField(Vec{Z: c.Moment()}, far); got.Sub(want).Norm() > 1e-3*want.Norm() {
		t.Errorf("far field %v, dipole %v", got, want)
	}
}

// D. Vokoun, M. Beleggia, L. Heller, P. Šittner, "Magnetostatic interactions and
// forces between cylindrical permanent magnets", J. Magn. Magn. Mater. 321 (2009)
// 3758: F = π μ₀ M² R² ∫ J₁²(kR)/k (1 − e^{−kh})² e^{−kg} dk for two alike, gap g.
func vokoun(c Cylinder, gap float64) float64 {
	m := c.Magnetisation()
	f := func(k float64) float64 {
		j, e := math.J1(k*c.Radius), 1-math.Exp(-k*c.Height)
		return j * j / k * e * e * math.Exp(-k*gap)
	}
	sum, panels := 0.0, 4000
	end := 40 / gap
	for i := range panels {
		sum += gauss(f, end*(float64(i)+1e-12)/float64(panels), end*float64(i+1)/float64(panels))
	}
	return math.Pi * Mu0 * m * m * c.Radius * c.Radius * sum
}

func TestCoaxialCylinders(t *testing.T) {
	for _, c := range []Cylinder{
		{Radius: 6e-3, Height: 6e-3, Remanence: 1.2},
		{Radius: 10e-3, Height: 2e-3, Remanence: 0.4, Recoil: 1.1},
		{Radius: 2e-3, Height: 15e-3, Remanence: 1.3},
	} {
		for _, gap := range []float64{0.5e-3, 2e-3, 10e-3, 40e-3} {
			near(t, "the force of two alike", CoaxialForce(c, c, gap), vokoun(c, gap), 2e-7)
		}
	}
	// Of unlike ones, each feels what the other does.
	c, d := Cylinder{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}, Cylinder{Radius: 9e-3, Height: 3e-3, Remanence: 0.9}
	near(t, "the force of two unlike", CoaxialForce(c, d, 3e-3), CoaxialForce(d, c, 3e-3), 1e-9)
}

// Two 12 × 6 mm discs, 30 mm from centre to centre, push 12 % less than their
// dipoles would, 60 mm apart 3.3 % (by Vokoun's formula, computed with SciPy:
// 0.877289, 0.967337).
func TestDipoleBias(t *testing.T) {
	c := Cylinder{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}
	near(t, "the ratio at 30 mm", 1+DipoleBias(c, c, 0.030), 0.8772890, 1e-6)
	near(t, "the ratio at 60 mm", 1+DipoleBias(c, c, 0.060), 0.9673373, 1e-6)
}

// RuleFor keeps its word for discs and rods, however they lie to each other.
func TestRuleFor(t *testing.T) {
	rnd := rand.New(rand.NewPCG(5, 5))
	for _, c := range []Cylinder{{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}, {Radius: 6e-3, Height: 2e-3, Remanence: 1.2}, {Radius: 3e-3, Height: 12e-3, Remanence: 1.2}} {
		for _, ratio := range []float64{3.51, 4.21, 5, 7.01, 12} {
			rule := RuleFor(ratio, 1)
			for range 20 {
				u, v := randomVec(rnd).Unit(), randomVec(rnd).Unit()
				r := randomVec(rnd).Unit().Scale(ratio * c.Reach())
				force := func(rule Rule) Vec {
					a, b := c.Charges(u, rule), c.Charges(v, rule)
					for i := range b {
						b[i].At = b[i].At.Add(r)
					}
					_, f, _ := ChargesPair(a, b)
					return f
				}
				got, want := force(rule), force(Degree19)
				dipoles := 3 * Mu0 * c.Moment() * c.Moment() / (4 * math.Pi * math.Pow(r.Norm(), 4))
				if off := got.Sub(want).Norm() / dipoles; off > 3e-4 {
					t.Errorf("%+v at %g reaches: rule %d is off by %.1e", c, ratio, rule, off)
				}
			}
		}
		for _, gap := range []float64{1.01, 1.5, 2.21, 3} {
			for _, aside := range []float64{0, 0.5, 1} {
				r := Vec{X: aside * c.Radius, Z: gap*c.Radius + c.Height}
				force := func(rule Rule) Vec {
					a, b := c.Charges(Vec{Z: 1}, rule), c.Charges(Vec{Z: 1}, rule)
					for i := range b {
						b[i].At = b[i].At.Add(r)
					}
					_, f, _ := ChargesPair(a, b)
					return f
				}
				rule := RuleFor(1, gap)
				got, want := force(rule), force(Degree19)
				if off := got.Sub(want).Norm() / want.Norm(); off > 3e-4 {
					t.Errorf("%+v at a gap of %g radii, %g aside: rule %d is off by %.1e", c, gap, aside, rule, off)
				}
			}
		}
	}
	// The finest against the exact force on the axis, down to half a radius.
	c := Cylinder{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}
	for _, gap := range []float64{3e-3, 6e-3} {
		a, b := c.Charges(Vec{Z: 1}, Degree19), c.Charges(Vec{Z: 1}, Degree19)
		for i := range b {
			b[i].At.Z += gap + c.Height
		}
		_, f, _ := ChargesPair(a, b)
		near(t, "the finest rule's force", -f.Z, CoaxialForce(c, c, gap), 3e-4)
	}
}

// The rules integrate what they claim: ∫ x^i y^j over the unit disc.
func TestRules(t *testing.T) {
	for r, degree := range map[Rule]int{Degree7: 7, Degree11: 11, Degree19: 19} {
		for i := 0; i <= degree; i++ {
			for j := 0; i+j <= degree; j++ {
				got := 0.0
				for _, p := range r.disc() {
					got += p.w * math.Pow(p.x, float64(i)) * math.Pow(p.y, float64(j))
				}
				want := 0.0
				if i%2 == 0 && j%2 == 0 {
					g := func(n int) float64 { return math.Gamma(float64(n+1) / 2) }
					want = 2 * g(i) * g(j) / math.Gamma(float64(i+j+2)/2) / float64(i+j+2) / math.Pi
				}
				if math.Abs(got-want) > 1e-13 {
					t.Errorf("rule of degree %d: x^%d y^%d gives %g, want %g", degree, i, j, got, want)
				}
			}
		}
	}
}

// Magnetometric demagnetising factors of cylinders of susceptibility 0: D.-X.
// Chen, J. A. Brug, R. B. Goldfarb, IEEE Trans. Magn. 27 (1991) 3601, table I,
// from memory: 0.3116 at height = diameter. Thin and long limits by theory.
func TestDemagnetising(t *testing.T) {
	n := func(heightOverDiameter float64) float64 {
		return Cylinder{Radius: 0.5, Height: heightOverDiameter}.Demagnetising()
	}
	if got := n(1); math.Abs(got-0.3116) > 5e-5 {
		t.Errorf("N(1) = %.5f, want 0.3116", got)
	}
	near(t, "N of a long rod", n(100), 4/(3*math.Pi*100), 0.01)
	if got := n(1e-3); got < 0.99 || got > 1 {
		t.Errorf("N of a thin plate = %g", got)
	}
	c := Cylinder{Radius: 6e-3, Height: 6e-3, Remanence: 1.2}
	near(t, "the remanence and back", c.RemanenceOf(c.Moment()), 1.2, 1e-14)
	// 2-3 % for usual discs at recoil 1.05.
	if got := 1.2 / Mu0 * c.Volume() / c.Moment(); got < 1.02 || got > 1.03 {
		t.Errorf("self-demagnetisation of a usual disc is %g", got-1)
	}
}

func TestGrades(t *testing.T) {
	if g, inside := NearestGrade(1.19, "NdFeB"); g.Name != "N35" || !inside {
		t.Errorf("1.19 T is %+v, inside %v", g, inside)
	}
	if g, inside := NearestGrade(0.30, ""); g.Material != "hard ferrite" || inside {
		t.Errorf("0.30 T is %+v, inside %v", g, inside)
	}
	near(t, "a warm magnet at 20 °C", At20(1.188, 28.333, "NdFeB"), 1.2, 1e-4)
}

// A 5 × 5 mm disc of N35 is far beyond the limit (toys' small parts of about
// 70 to 400 kG²mm² led to the rule), and a thin 2 × 0.5 mm ferrite far below.
func TestFluxIndex(t *testing.T) {
	strong := Cylinder{Radius: 2.5e-3, Height: 5e-3, Remanence: 1.19}.FluxIndex()
	weak := Cylinder{Radius: 1e-3, Height: 0.5e-3, Remanence: 0.38}.FluxIndex()
	if strong < 3*FluxIndexLimit || strong > 10*FluxIndexLimit || weak > 0.1*FluxIndexLimit {
		t.Errorf("flux indices %.1f and %.1f kG²mm²", strong*1e8, weak*1e8)
	}
}

// What cannot be is refused in plain words.
func TestCheck(t *testing.T) {
	for _, c := range []Cylinder{{Radius: 0, Height: 1}, {Radius: 1, Height: -1}, {Radius: 1, Height: 1, Remanence: 12}, {Radius: 1, Height: 1, Recoil: 0.5}} {
		if c.Check() == nil {
			t.Errorf("%+v passes", c)
		}
	}
}

// On the axis μ₀a²/(2(a²+z²)^{3/2}); elsewhere the law of Biot and Savart summed
// over 2,000 pieces, which converges exponentially for a circle.
func TestLoopField(t *testing.T) {
	const a = 0.012
	axis := Vec{0.3, -0.5, 0.9}.Unit()
	for _, z := range []float64{0, 0.004, -0.03} {
		got := LoopField(a, axis, axis.Scale(z)).Dot(axis)
		near(t, "the field on the axis", got, Mu0*a*a/(2*math.Pow(a*a+z*z, 1.5)), 1e-12)
	}
	u := axis.Cross(Vec{X: 1}).Unit()
	v := axis.Cross(u)
	rnd := rand.New(rand.NewPCG(6, 6))
	for range 20 {
		p := randomVec(rnd).Scale(0.015)
		var b Vec
		const n = 2000
		for i := range n {
			s, c := math.Sincos(2 * math.Pi * float64(i) / n)
			at, dl := u.Scale(a*c).Add(v.Scale(a*s)), v.Scale(c).Sub(u.Scale(s)).Scale(2*math.Pi*a/n)
			d := p.Sub(at)
			b = b.Add(dl.Cross(d).Scale(Mu0 / (4 * math.Pi) / math.Pow(d.Norm(), 3)))
		}
		if got := LoopField(a, axis, p); got.Sub(b).Norm() > 1e-9*b.Norm() {
			t.Errorf("field at %v is %v, by Biot and Savart %v", p, got, b)
		}
	}
}
