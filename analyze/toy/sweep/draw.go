package sweep

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"

	"gonum.org/v1/gonum/mat"

	"lodeswing/track/rig"
)

// placeReading in m is the standard uncertainty of a coordinate of at_mm where
// the rig gives no at_reading_mm; track/rig states it.
const placeReading = 0.5e-3

// drawer draws rigs from the uncertainties of one.
type drawer struct {
	r      *rig.Rig
	single []string // addresses drawn on their own
	fitted []string // addresses drawn together
	root   *mat.TriDense
	places bool
}

// newDrawer prepares drawing. Fitted numbers are drawn together from their
// covariance, all others on their own; places of magnets by their reading, as
// far as a gap does not stand for them.
func newDrawer(r *rig.Rig) (*drawer, error) {
	d := &drawer{r: r, fitted: r.Fitted.Of, places: true}
	together := map[string]bool{}
	for _, a := range d.fitted {
		together[a] = true
	}
	for _, n := range r.Numbers() {
		if n.Value.Set && n.Value.U > 0 && !together[n.Address] && ofTheToy(r, n.Address) {
			d.single = append(d.single, n.Address)
		}
	}
	if k := len(d.fitted); k > 0 {
		// Eigenvectors rather than Cholesky: a fit may leave a direction without spread.
		c := mat.NewSymDense(k, nil)
		for i := range k {
			for j := i; j < k; j++ {
				c.SetSym(i, j, r.Fitted.Covariance[i][j])
			}
		}
		scale := make([]float64, k)
		for i := range k {
			if scale[i] = math.Sqrt(c.At(i, i)); scale[i] == 0 || math.IsNaN(scale[i]) {
				return nil, fmt.Errorf("the covariance in [fitted] has no spread for %q: fit the clip again", d.fitted[i])
			}
		}
		for i := range k {
			for j := i; j < k; j++ {
				c.SetSym(i, j, c.At(i, j)/(scale[i]*scale[j]))
			}
		}
		var chol mat.Cholesky
		for lift := 0.0; !chol.Factorize(c); {
			lift = math.Max(1e-12, 10*lift)
			if lift > 1e-3 {
				return nil, fmt.Errorf("the covariance in [fitted] is none: its correlations contradict each other; fit the clip again")
			}
			for i := range k {
				c.SetSym(i, i, 1+lift)
			}
		}
		var l mat.TriDense
		chol.LTo(&l)
		for i := range k {
			for j := 0; j <= i; j++ {
				l.SetTri(i, j, l.At(i, j)*scale[i])
			}
		}
		d.root = &l
	}
	return d, nil
}

// draw returns rig i of the ensemble.
func (d *drawer) draw(seed uint64, i int) *rig.Rig {
	rnd := rand.New(rand.NewPCG(seed, uint64(i)))
	r := d.r.Clone()
	set := func(address string, by float64) {
		v, err := r.Number(address)
		if err != nil {
			return // of the same rig, so it is there
		}
		x := v.V + by
		if v.V > 0 && x <= 0 && !signed(address) {
			x = v.V * 1e-3 // a drawn friction or mass stays above zero
		}
		v.V = x
	}
	for _, a := range d.single {
		v, _ := r.Number(a)
		set(a, v.U*rnd.NormFloat64())
	}
	if k := len(d.fitted); k > 0 {
		z := make([]float64, k)
		for j := range z {
			z[j] = rnd.NormFloat64()
		}
		for j, a := range d.fitted {
			by := 0.0
			for l := 0; l <= j; l++ {
				by += d.root.At(j, l) * z[l]
			}
			set(a, by)
		}
	}
	for j := range r.Magnets {
		g := &r.Magnets[j]
		u := g.UAtM.Or(placeReading)
		if g.GapM.Set {
			u = 0
		}
		if u == 0 || len(g.AtM) == 0 {
			continue
		}
		at := append([]float64(nil), g.AtM...)
		for k := range at {
			at[k] += u * rnd.NormFloat64()
		}
		g.AtM = at
	}
	return r
}

// signed tells whether a number may be below zero.
func signed(address string) bool {
	for _, s := range []string{".rest", ".cubic", ".angle", ".rate", ".azimuth", ".azimuth_rate", ".spin", ".moment", ".remanence"} {
		if strings.HasSuffix(address, s) && !strings.HasSuffix(address, ".spring.rate") {
			return true
		}
	}
	return false
}
