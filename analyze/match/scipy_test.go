package match

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os/exec"
	"syscall"
	"testing"

	"lodeswing/analyze/series"
	"lodeswing/analyze/toy"
)

// processor is the processor time that this process used so far, s.
func processor(tb testing.TB) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		tb.Fatal(err)
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}

// BenchmarkAgainstSciPy matches the angles of the near lantern over 20 s, from a pair
// product 5 % off, beside SciPy's least_squares over solve_ivp in one run. Both in
// processor time; what else runs on the machine matters little. SciPy frees six
// numbers, ours also inertia, weight, the magnets' places and axes and the clock.
func BenchmarkAgainstSciPy(b *testing.B) {
	python := "/usr/bin/python3"
	if err := exec.Command(python, "-c", "import scipy").Run(); err != nil {
		b.Skip("no SciPy here (Debian package python3-scipy): ", err)
	}
	r := nearRig(b)
	m, err := toy.New(r)
	if err != nil {
		b.Fatal(err)
	}
	y, err := m.Start()
	if err != nil {
		b.Fatal(err)
	}
	const noise = 1e-4 // rad, as of 0.05 px
	var times, angles []float64
	for i := range 1200 {
		times = append(times, float64(i)/60)
	}
	rnd := rand.New(rand.NewPCG(5, 5))
	if err := m.Sample(context.Background(), y, times, toy.Options{Tol: 1e-12}, func(_ int, y []float64) {
		a, _ := m.Angle(y, 0)
		angles = append(angles, a+noise*rnd.NormFloat64())
	}); err != nil {
		b.Fatal(err)
	}
	u := make([]float64, len(times))
	for i := range u {
		u[i] = noise
	}
	table := series.Angle{Part: "arm", T: times, Angle: angles, UAngle: u, UClock: 50e-6}
	truth := r.Magnets[0].Moment.V * r.Magnets[0].Moment.V
	for b.Loop() {
		began := processor(b)
		res, err := Run(context.Background(), []Clip{{Angles: []series.Angle{table}}}, wrong(r, math.Sqrt(1.05)), Options{})
		if err != nil {
			b.Fatal(err)
		}
		ours := processor(b) - began
		e := res.Estimate("lamp magnet.moment")
		b.Logf("ours: %.3f s, product %.4f ± %.4f (truth %.4f), residuals %.2f of the noise", ours, e.Value*e.Value, 2*e.Value*e.U, truth, res.Scatter)

		part := &r.Parts[0]
		job, err := json.Marshal(map[string]any{
			"t": times, "angle": angles, "noise": noise,
			"mass": part.MassKg.V, "arm": 0.28, "inertia": part.Inertia.V, "gravity": 9.80665,
			"start": []float64{1.05 * truth, 0.03, part.Friction.Viscous.V, part.Friction.Drag.V, angles[0], 0},
		})
		if err != nil {
			b.Fatal(err)
		}
		c := exec.Command(python, "testdata/straightforward.py")
		c.Stdin = bytes.NewReader(job)
		out, err := c.Output()
		if err != nil {
			b.Fatal("SciPy: ", err)
		}
		var said struct {
			Seconds, RMS float64
			P            []float64
			Evaluations  int
		}
		if err := json.Unmarshal(out, &said); err != nil {
			b.Fatal(err)
		}
		b.Logf("SciPy: %.1f s, %d evaluations, product %.4f, gap %.3f mm, residuals %.1f of the noise", said.Seconds, said.Evaluations, said.P[0], 1e3*said.P[1], said.RMS)
		b.ReportMetric(said.Seconds/ours, "SciPy/ours")
		b.ReportMetric(ours, "cpu-s")
	}
}
