package match

import (
	"math"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/magnet"
	"lodeswing/track/rig"
)

// Magnets given as cylinders: remanence, grade and flux index come from the fit. IEC
// 60404-8-1 and the trade put N35 at 1.17 to 1.22 T.
func TestCylindersTellTheirGrade(t *testing.T) {
	r := sample(t, "lantern")
	set := func(x, u float64) rig.Value { return rig.Value{V: x, U: u, Set: true} }
	for i := range r.Magnets {
		g := &r.Magnets[i]
		g.Moment = rig.Value{}
		g.Cylinder = &rig.Cylinder{DiameterM: set(0.012, 5e-5), HeightM: set(0.006, 5e-5), RemanenceT: rig.Value{V: 1.2, Set: true, Fit: true}}
	}
	r.Fit.Equal = [][]string{{"lamp magnet.cylinder.remanence", "base magnet.cylinder.remanence"}}
	tr := simulate(t, r, take{seconds: 12, noise: 0.05, seed: 51})
	nominal := r.Clone()
	for i := range nominal.Magnets {
		nominal.Magnets[i].Cylinder.RemanenceT.V = 1.3 // what the maker ordered
	}
	res := run(t, nominal, Clip{Track: tr})
	check(t, r, res)
	b := find(res, "match.remanence")
	if b == nil || b.Kind != finding.Measured || math.Abs(b.Value-1.2) > 3*b.U {
		t.Fatalf("remanence %+v, truth 1.2 T", b)
	}
	if g := find(res, "match.grade"); g == nil || !strings.Contains(g.Text, "N35") {
		t.Errorf("grade: %+v", g)
	}
	c := magnet.Cylinder{Radius: 0.006, Height: 0.006, Remanence: 1.2, Recoil: magnet.DefaultRecoil}
	x := find(res, "match.flux_index")
	if x == nil || math.Abs(x.Value-c.FluxIndex()) > 3*x.U || len(x.Cautions) == 0 || !strings.Contains(x.Cautions[0], "never a certificate") {
		t.Errorf("flux index %+v, truth %g T²m²", x, c.FluxIndex())
	}
	// 1.2 T are 7.7 % below 1.3 T.
	if d := find(res, "match.moment_deviation"); d == nil || d.Unit != "%" || math.Abs(d.Value+7.69) > 3*d.U {
		t.Errorf("deviation: %+v", d)
	}
	if p := find(res, "match.product"); p == nil || strings.Contains(strings.Join(p.Cautions, " "), "dipoles") {
		t.Errorf("cylinders are called dipoles: %+v", p)
	}
}
