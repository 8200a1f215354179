package match

import (
	"context"
	"math"
	"testing"
)

func TestDebugStep(t *testing.T) {
	r := sample(t, "lantern")
	tr := simulate(t, r, take{seconds: 25, noise: 0.05, seed: 1})
	f, err := prepare([]Clip{{Track: tr}}, r, Options{Log: t.Logf})
	if err != nil {
		t.Fatal(err)
	}
	ctx := context.Background()
	if err := f.fit(ctx); err != nil {
		t.Fatal(err)
	}
	p := f.values()
	f.shootAll(ctx, p, true, true)
	s := f.solveChain(p, 0, true)
	tot, data, _ := f.merit(p)
	t.Logf("merit %g data %g gaps %g foreseen %g", tot, data, f.gaps(), s.foreseen())
	inv := invert(s.top, len(p))
	k := &f.clips[0]
	save := make([][]float64, len(k.segments))
	for i := range k.segments {
		save[i] = append([]float64(nil), k.segments[i].y...)
	}
	for j := range f.params {
		u := 0.0
		for i := range p {
			u += inv[j*len(p)+i] * inv[j*len(p)+i]
		}
		u = math.Sqrt(u)
		d := make([]float64, len(p))
		d[j] = 0.01 * u
		moves := s.states(0, d, false)
		// predicted gap
		q := append([]float64(nil), p...)
		q[j] += d[j]
		for i := range k.segments {
			copy(k.segments[i].y, save[i])
			k.model.Displace(k.segments[i].y, moves[i])
		}
		f.shootAll(ctx, q, false, false)
		tot2, data2, _ := f.merit(q)
		t.Logf("%-35s %10.3g: total %+.4g data %+.4g gaps %.3g", f.params[j].address, d[j], tot2-tot, data2-data, f.gaps())
	}
}
