package match

import (
	"context"
	"math"
	"strings"
	"testing"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// handled is a motion in which a hand takes part: it holds the toy, trembling, in its
// first pose until free, and pushes part 0 with an acceleration from push on for 0.25 s.
type handled struct {
	free, push, by float64
	tap            float64 // rad/s, by which part 0 is made faster at once at push
	undrivenFrom   float64 // the battery is taken out here; 0: never
}

// path computes the motion of a rig's toy with that hand.
func (h handled) path(t testing.TB, r *rig.Rig, seconds float64) func(at float64, state []float64) {
	t.Helper()
	m, err := toy.New(r)
	if err != nil {
		t.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		t.Fatal(err)
	}
	type piece struct {
		from float64
		path *toy.Motion
	}
	var all []piece
	now := h.free
	first := append([]float64(nil), y...)
	on := func(until float64) {
		if until <= now {
			return
		}
		for now < until {
			end := until
			off := h.undrivenFrom > 0 && now >= h.undrivenFrom
			if h.undrivenFrom > now {
				end = math.Min(end, h.undrivenFrom)
			}
			p, err := m.Simulate(context.Background(), y, end-now, toy.Options{Tol: 1e-11, Undriven: off})
			if err != nil {
				t.Fatal(err)
			}
			all = append(all, piece{now, p})
			p.At(end-now, y)
			now = end
		}
	}
	if h.by != 0 {
		on(h.push)
		const steps, lasts = 50, 0.25
		d := make([]float64, 2*m.Freedoms())
		for i := range steps {
			d[m.Freedoms()] = h.by * lasts / steps * math.Sin(math.Pi*(float64(i)+0.5)/steps)
			m.Displace(y, d)
			on(h.push + lasts*float64(i+1)/steps)
		}
	}
	if h.tap != 0 {
		on(h.push)
		d := make([]float64, 2*m.Freedoms())
		d[m.Freedoms()] = h.tap
		m.Displace(y, d)
	}
	on(seconds + 1)
	return func(at float64, state []float64) {
		if at < h.free {
			copy(state, first)
			d := make([]float64, 2*m.Freedoms())
			d[0] = 1e-3*math.Sin(2*math.Pi*3.1*(at-h.free)) + 5e-4*math.Sin(2*math.Pi*8.3*(at-h.free)) // a hand trembles
			m.Displace(state, d)
			return
		}
		i := len(all) - 1
		for i > 0 && all[i].from > at {
			i--
		}
		all[i].path.At(at-all[i].from, state)
	}
}

// A hand that holds the toy at first, and pushes it later, is recognised, left out
// and told; what is left gives the numbers.
func TestHandIsLeftOut(t *testing.T) {
	r := sample(t, "lantern")
	for _, c := range []struct {
		name string
		hand handled
		want int
	}{
		{"held", handled{free: 1.5}, 1},
		{"pushed", handled{push: 6, by: 4}, 1},
		{"tapped between two stretches", handled{push: 6.0045, tap: 0.2}, 1},
		{"tapped", handled{push: 6.1, tap: 0.2}, 1},
		{"held and touched", handled{free: 2, push: 7.3, by: -0.6}, 2},
	} {
		t.Run(c.name, func(t *testing.T) {
			tr := simulate(t, r, take{seconds: 14, noise: 0.05, seed: 21, path: c.hand.path(t, r, 14)})
			res := run(t, wrong(r, 1.3), Clip{Track: tr})
			check(t, r, res)
			n := 0
			for _, f := range res.Findings {
				if f.Key == "match.left_out" {
					t.Log(f.Text)
					n++
				}
			}
			if n != c.want {
				t.Errorf("%d times are left out, %d were handled", n, c.want)
			}
			if p := find(res, "match.product"); p == nil || p.Kind != "" || !strings.Contains(find(res, "match.residuals").Text, "The model fits") {
				t.Errorf("the rest does not give the product: %+v; %s", p, find(res, "match.residuals").Text)
			}
		})
	}
}

// A clip in which a hand makes the toy faster, and later the battery is taken out:
// kicks up to there, a free decay after.
func TestBatteryTakenOutIsSeen(t *testing.T) {
	r := sample(t, "gull")
	tr := simulate(t, r, take{seconds: 14, noise: 0.05, seed: 22, path: handled{push: 3.03, tap: 0.7, undrivenFrom: 8}.path(t, r, 14)})
	res := run(t, wrong(r, 1.3), Clip{Track: tr})
	check(t, r, res)
	f := find(res, "match.coil_off")
	if f == nil || !strings.Contains(f.Text, "after") {
		t.Fatalf("the coil's going off is not told: %+v", f)
	}
	t.Log(f.Text)
	if f := find(res, "match.left_out"); f == nil || !strings.Contains(f.Text, "From 2.") && !strings.Contains(f.Text, "From 3.") {
		t.Errorf("the hand at 3 s is not told: %+v", f)
	}
	if res.Scatter > clearMisfit {
		t.Errorf("residuals %.2f times the noise", res.Scatter)
	}
	// Nothing of the kind in a clip that is kicked all through.
	if f := find(run(t, r, Clip{Track: simulate(t, r, take{seconds: 8, noise: 0.05, seed: 23})}), "match.coil_off"); f != nil {
		t.Errorf("kicked all through, and told: %s", f.Text)
	}
}
