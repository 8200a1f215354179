package match

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"lodeswing/analyze/toy"
	"lodeswing/samples"
	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/rig"
)

var long = flag.Bool("long", false, "also the long Monte Carlo runs")

// take says how a clip is simulated.
type take struct {
	seconds float64
	noise   float64 // px
	seed    uint64
	plane   bool // a track without its camera
	clip    *rig.Clip
	start   []rig.Start
	// lens draws the camera, its shutter and its clock from their uncertainties.
	lens *rand.Rand
	path func(t float64, state []float64) // the motion; nil: as the model moves
}

// simulate makes the track of a rig's toy: its own motion, the camera of the rig
// as it stands, rolling shutter, noise.
func simulate(t testing.TB, r *rig.Rig, o take) *track.Track {
	t.Helper()
	v, err := variant(r, o.clip)
	if err != nil {
		t.Fatal(err)
	}
	m, err := toy.New(v)
	if err != nil {
		t.Fatal(err)
	}
	start := o.start
	if start == nil {
		start = r.Start
	}
	y, err := m.StartFrom(start)
	if err != nil {
		t.Fatal(err)
	}
	c := r.Clone()
	if c.Scale.MarkLook != "" { // marks that nobody looks for here
		c.Scale.MarkLook = ""
		c.Scale.EndsPX = [][2]float64{{500, 300}, {500 + 1000*c.Scale.LengthM.V*c.Film.PixelsPerM.V/1000, 300}}
	}
	w, h := int(r.Film.WidthPX.Or(1280)), int(r.Film.HeightPX.Or(720))
	cam, err := camera.New(c, w, h, nil)
	if err != nil {
		t.Fatal(err)
	}
	cal := cam.Calibration()
	if o.plane {
		cal.Lens = track.Pinhole{}
	}
	film, clock, row := cam, 1.0, 1.0
	if o.lens != nil {
		by := make([]float64, len(cal.Lens.Unsure))
		for i := range by {
			by[i] = o.lens.NormFloat64()
		}
		film = cam.Moved(by)
		clock = 1 + cal.UClock*o.lens.NormFloat64()
		if cal.ReadoutS > 0 {
			row = 1 + cal.UReadoutS/cal.ReadoutS*o.lens.NormFloat64()
		}
	}
	rate := r.Film.FramesPerS.Or(60)
	n := int(o.seconds * rate)
	path, err := m.Simulate(context.Background(), y, o.seconds+1, toy.Options{Tol: 1e-11, Undriven: o.clip != nil && !o.clip.Battery})
	if err != nil {
		t.Fatal(err)
	}
	where := o.path
	if where == nil {
		where = func(t float64, state []float64) { path.At(t, state) }
	}
	// What stands in the picture's middle is the track's origin, as in a clip.
	middle := [3]float64{}
	if c := rig.XYZ(r.Film.CentreM); len(r.Film.CentreM) > 0 && len(r.Scale.OriginPX) == 0 {
		middle = c
		if r.Camera.FromAbove { // the plane is at its own height there
			middle[2] = 0
		}
	}
	rnd := rand.New(rand.NewPCG(o.seed, 1))
	tr := &track.Track{Cal: cal, BrokeAt: math.NaN()}
	var pos [][3]float64
	state := m.Rest()
	for b, name := range m.Bobs() {
		q := v.Bobs[b]
		radius := 0.0
		if q.Ball && q.DiameterM.Set {
			radius = q.DiameterM.V / 2
		}
		bob := track.Bob{Name: name, Part: q.Part}
		for i := range n {
			at := float64(i)/rate + cal.ReadoutS/2
			var u, w float64
			tt := at
			for range 4 {
				where(clock*(at+row*(tt-at)), state)
				pos = m.Positions(state, pos)
				u, w = film.BobToPixel(pos[b][0]-middle[0], pos[b][1]-middle[1]-q.DepthM.Or(0), pos[b][2]-middle[2], radius)
				tt = at + cam.RowTime(u, w)
			}
			s := track.Sample{Frame: i, T: tt, State: track.Seen}
			s.U, s.V = u+o.noise*rnd.NormFloat64(), w+o.noise*rnd.NormFloat64()
			s.Pixel = track.Cov{AA: o.noise * o.noise, BB: o.noise * o.noise}
			var j [2][2]float64
			s.X, s.Z, j = cam.BobToPlane(s.U, s.V, radius, q.DepthM.Or(0))
			s.Plane = s.Pixel.Through(j)
			bob.Samples = append(bob.Samples, s)
		}
		tr.Bobs = append(tr.Bobs, bob)
	}
	return tr
}

func sample(t testing.TB, name string) *rig.Rig {
	t.Helper()
	r, err := samples.Open(name)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// wrong returns the rig with every start of what is to be fitted multiplied.
func wrong(r *rig.Rig, factor float64) *rig.Rig {
	c := r.Clone()
	for _, n := range c.Numbers() {
		if n.Value.Fit {
			n.Value.V *= factor
		}
	}
	return c
}

func check(t *testing.T, r *rig.Rig, res *Result) {
	t.Helper()
	for _, e := range res.Estimates {
		n, err := r.Find(e.Address)
		if err != nil || !n.Value.Set {
			t.Logf("%-40s %12.6g ± %.2g %s", e.Address, e.Value, e.U, e.Unit)
			continue
		}
		off := (e.Value - n.Value.V) / e.U
		t.Logf("%-40s %12.6g ± %.2g (pictures %.2g) %s, truth %.6g, off %.2f u", e.Address, e.Value, e.U, e.UPicture, e.Unit, n.Value.V, off)
		if e.Asked && !(math.Abs(off) < 3) {
			t.Errorf("%s: off by %.1f standard uncertainties", e.Address, off)
		}
	}
}

// Every toy of the workshop: numbers asked for within 3 standard uncertainties of
// the truth, the pictures' share of a moment within 2 % (95 %). The vanes and the
// ferry are in chaotic motion; the coil pushes the beacon a third of the time.
func TestToys(t *testing.T) {
	seconds := map[string]float64{"lantern": 12, "gull": 12, "lantern-ball": 8, "buoys": 8, "vanes": 4, "beacon": 8, "ferry": 4}
	if *long {
		seconds = map[string]float64{"lantern": 30, "gull": 30, "lantern-ball": 30, "buoys": 30, "vanes": 25, "beacon": 30, "ferry": 30}
	}
	for name, s := range seconds {
		t.Run(name, func(t *testing.T) {
			r := sample(t, name)
			tr := simulate(t, r, take{seconds: s, noise: 0.05, seed: 1})
			began := time.Now()
			res := run(t, r, Clip{Track: tr})
			t.Logf("%s, %.0f s of film, in %v", name, s, time.Since(began))
			check(t, r, res)
			if !res.Converged {
				t.Errorf("it did not settle: %s", res.Fits[0].Why)
			}
			for i, e := range res.Estimates {
				if e.Asked && strings.HasSuffix(e.Address, ".moment") && *long && 1.96*e.UPicture > 0.02*e.Value {
					t.Errorf("%s: the pictures' share is ±%.1f %%", e.Address, 196*res.Estimates[i].UPicture/e.Value)
				}
			}
		})
	}
}

// A 30 s clip of each toy, from starts half as large again: seconds of processor time,
// which two idle cores share, beside the seconds that passed.
func BenchmarkThirtySeconds(b *testing.B) {
	for _, name := range []string{"lantern", "gull", "lantern-ball", "buoys", "vanes", "beacon", "ferry"} {
		b.Run(name, func(b *testing.B) {
			r := sample(b, name)
			tr := simulate(b, r, take{seconds: 30, noise: 0.05, seed: 1})
			began, n := processor(b), 0
			for b.Loop() {
				if _, err := Run(context.Background(), []Clip{{Track: tr}}, wrong(r, 1.5), Options{}); err != nil {
					b.Fatal(err)
				}
				n++
			}
			b.ReportMetric((processor(b)-began)/float64(n), "cpu-s")
		})
	}
}

// Starts wrong by three, of all that is asked for, lead to the same optimum.
func TestWrongStarts(t *testing.T) {
	seconds := map[string]float64{"lantern": 15, "gull": 8, "lantern-ball": 6, "buoys": 6, "vanes": 3, "beacon": 6, "ferry": 3}
	if *long {
		seconds = map[string]float64{"lantern": 30, "gull": 30, "lantern-ball": 30, "buoys": 30, "vanes": 25, "beacon": 30, "ferry": 30}
	}
	for name, s := range seconds {
		t.Run(name, func(t *testing.T) {
			r := sample(t, name)
			tr := simulate(t, r, take{seconds: s, noise: 0.05, seed: 1})
			var first *Result
			for _, factor := range []float64{1, 3, 1.0 / 3} {
				res := run(t, wrong(r, factor), Clip{Track: tr})
				check(t, r, res)
				if first == nil {
					first = res
				}
				for i, e := range res.Estimates {
					if o := first.Estimates[i]; e.Asked && math.Abs(e.Value-o.Value) > 0.1*o.U {
						t.Errorf("%s from %.2f × its start: %.6g, else %.6g ± %.2g", e.Address, factor, e.Value, o.Value, o.U)
					}
				}
			}
		})
	}
}
