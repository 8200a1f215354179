package magnet

import (
	"fmt"
	"math"
)

// DefaultRecoil is the relative recoil permeability taken where none is given,
// that of sintered NdFeB (common practice, no source).
const DefaultRecoil = 1.05

// Cylinder is an axially magnetised cylinder: metres, tesla. Recoil is its
// relative recoil permeability, 0 for the default.
type Cylinder struct {
	Radius, Height, Remanence, Recoil float64
}

// Check returns an error where the cylinder cannot be.
func (c Cylinder) Check() error {
	switch {
	case !(c.Radius > 0) || !(c.Height > 0):
		return fmt.Errorf("a cylinder needs a diameter and a height above zero, not %g mm and %g mm", 2e3*c.Radius, 1e3*c.Height)
	case math.IsNaN(c.Remanence) || math.Abs(c.Remanence) > 3:
		return fmt.Errorf("a remanence of %g T is beyond any magnet's: remanence_T is in tesla", c.Remanence)
	case c.Recoil != 0 && c.Recoil < 1:
		return fmt.Errorf("a recoil permeability of %g is below 1, which no magnet has", c.Recoil)
	}
	return nil
}

func (c Cylinder) recoil() float64 {
	if c.Recoil == 0 {
		return DefaultRecoil
	}
	return c.Recoil
}

// Volume in m³.
func (c Cylinder) Volume() float64 { return math.Pi * c.Radius * c.Radius * c.Height }

// Demagnetising is the axial (magnetometric) demagnetising factor of a uniformly
// magnetised cylinder, by complete elliptic integrals with k² = 1/(1+n²), n the
// ratio of height to diameter: R. I. Joseph, J. Appl. Phys. 37 (1966) 4639.
func (c Cylinder) Demagnetising() float64 {
	n := c.Height / (2 * c.Radius)
	kc := n / math.Sqrt(1+n*n)
	k, e := ellipticK(kc), ellipticE(kc)
	return 1 - 4/(3*math.Pi*n)*(math.Sqrt(1+n*n)*(n*n*k+(1-n*n)*e)-1)
}

// Magnetisation is the mean magnetisation in A/m that remanence, recoil and
// self-demagnetisation leave.
func (c Cylinder) Magnetisation() float64 {
	return c.Remanence / Mu0 / (1 + c.Demagnetising()*(c.recoil()-1))
}

// Moment is the dipole moment in A·m²: m = (B_r V/μ₀)/(1 + N(μ_rec − 1)).
func (c Cylinder) Moment() float64 { return c.Magnetisation() * c.Volume() }

// RemanenceOf is the remanence in T that a cylinder of these dimensions has when
// its moment is m (A·m²): the inverse of Moment.
func (c Cylinder) RemanenceOf(m float64) float64 {
	return m / c.Volume() * Mu0 * (1 + c.Demagnetising()*(c.recoil()-1))
}
