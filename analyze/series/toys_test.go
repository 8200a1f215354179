package series

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"testing"

	"lodeswing/analyze/toy"
	"lodeswing/samples"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// The workshop's toys, moved by the toy model, seen without a camera: the angles
// that come out are the model's own, in sign, zero and turn.
func TestWorkshopAngles(t *testing.T) {
	for _, file := range []string{"lantern", "buoys", "gull", "ferry", "vanes"} {
		r, err := rig.Load(filepath.Join("..", "..", "samples", file+".toml"))
		if err != nil {
			t.Fatal(err)
		}
		m, err := toy.New(r)
		if err != nil {
			t.Fatal(err)
		}
		y, err := m.Start()
		if err != nil {
			t.Fatal(err)
		}
		const seconds, rate, sigma = 4.0, 60.0, 1e-5
		path, err := m.Simulate(t.Context(), y, seconds, toy.Options{Tol: 1e-9})
		if err != nil {
			t.Fatal(err)
		}
		owner := samples.OwnersRig(r)
		rng := rand.New(rand.NewPCG(4, 4))
		parts := map[string]int{}
		for k, p := range m.Parts() {
			parts[p] = k
		}
		tr := &track.Track{Cal: knownCal()}
		want := map[string][]float64{}
		for _, b := range owner.Bobs {
			tb := track.Bob{Name: b.Name, Part: b.Part}
			k := parts[b.Part]
			local := rig.XYZ(b.AtM)
			for i := range int(seconds * rate) {
				s := float64(i) / rate
				path.At(s, y)
				at, turn := m.Pose(y, k)
				var p [3]float64
				for a := range 3 {
					p[a] = at[a]
					for c := range 3 {
						p[a] += turn[a][c] * local[c]
					}
				}
				tb.Samples = append(tb.Samples, track.Sample{
					Frame: i, T: s, X: p[0] + sigma*rng.NormFloat64(), Z: p[2] + sigma*rng.NormFloat64(),
					Plane: track.Cov{AA: sigma * sigma, BB: sigma * sigma}, State: track.Seen,
				})
				if len(want[b.Part]) <= i {
					q, _ := m.Angle(y, k)
					want[b.Part] = append(want[b.Part], q)
				}
			}
			tr.Bobs = append(tr.Bobs, tb)
		}
		as, err := FromTrack(tr, owner)
		if err != nil {
			t.Fatal(file, err)
		}
		for _, a := range as {
			if a.Problem != "" {
				t.Errorf("%s: %s", file, a.Problem)
				continue
			}
			w := want[a.Part]
			turns := 2 * math.Pi * math.Round((a.Angle[0]-w[0])/(2*math.Pi))
			worst := 0.0
			for i, s := range a.T {
				worst = math.Max(worst, math.Abs(a.Angle[i]-turns-w[int(math.Round(s*rate))]))
			}
			t.Logf("%s: %s by %s (%s): worst difference %.2g rad", file, a.Part, a.Bob, a.Pivot.From, worst)
			if worst > 3e-3 {
				t.Errorf("%s: the angle of %s is off by up to %g rad; it begins at %.4f, the model at %.4f", file, a.Part, worst, a.Angle[0], w[0])
			}
		}
	}
}

// A ball joint from the side: the pivot is found from the outermost part of the
// path. From above: the tilt to the right.
func TestBallJoint(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 5))
	const r, sigma = 0.28, 3e-5
	place := func(s float64) (x, y, z float64) {
		// An ellipse that precesses.
		c, d := math.Cos(0.3*s), math.Sin(0.3*s)
		a, b := 0.6*math.Cos(5.9*s), 0.35*math.Sin(5.9*s)
		p, q := c*a-d*b, d*a+c*b
		tilt := math.Hypot(p, q)
		return r * math.Sin(tilt) * p / tilt, r * math.Sin(tilt) * q / tilt, -r * math.Cos(tilt)
	}
	rg := &rig.Rig{Parts: []rig.Part{{Name: "arm", Joint: "ball"}}, Bobs: []rig.Bob{{Name: "lamp", Part: "arm", AtM: []float64{0, -r}}}}
	side := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "lamp", "arm", 1500, 1.0/60, sigma, func(s float64) (float64, float64) { x, _, z := place(s); return x, z })}}
	as, err := FromTrack(side, rg)
	if err != nil {
		t.Fatal(err)
	}
	p := as[0].Pivot
	t.Logf("from the side: pivot (%.2f ± %.2f, %.2f ± %.2f) mm", 1e3*p.X, 1e3*p.UX, 1e3*p.Z, 1e3*p.UZ)
	if math.Abs(p.X) > 3*p.UX || math.Abs(p.Z) > 3*p.UZ || p.UZ > 3e-3 || len(as[0].Cautions) == 0 {
		t.Errorf("pivot %+v, cautions %q", p, as[0].Cautions)
	}
	rg.Camera.FromAbove = true
	above := &track.Track{Cal: knownCal(), Bobs: []track.Bob{film(rng, "lamp", "arm", 1500, 1.0/60, sigma, func(s float64) (float64, float64) { x, y, _ := place(s); return x, y })}}
	as, err = FromTrack(above, rg)
	if err != nil {
		t.Fatal(err)
	}
	for i, s := range as[0].T {
		x, _, _ := place(s)
		u := as[0].UAngle[i]
		for _, sh := range as[0].Shared {
			u = math.Hypot(u, sh.D[i])
		}
		if d := math.Abs(as[0].Angle[i] - math.Asin(x/r)); d > 4*u {
			t.Fatalf("from above: tilt off by %g rad at %.2f s, uncertainty %g", d, s, u)
		}
	}
	rg.Bobs[0].AtM = nil
	if _, err := FromTrack(above, rg); err == nil {
		t.Error("from above, without the bob's distance, an angle was made up")
	}
}
