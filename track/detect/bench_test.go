package detect

import (
	"math/rand/v2"
	"syscall"
	"testing"
	"time"
)

// cpu is the processor time used so far: on a busy machine the clock on the wall
// says little.
func cpu() time.Duration {
	var r syscall.Rusage
	_ = syscall.Getrusage(syscall.RUSAGE_SELF, &r) // cannot fail for the own process
	return time.Duration(r.Utime.Nano() + r.Stime.Nano())
}

func BenchmarkFit(b *testing.B) {
	for _, c := range []struct {
		name string
		r, l float64
	}{{"40px", 20, 0}, {"40px smear 4", 20, 4}, {"40px smear 12", 20, 12}, {"40px smear 40", 20, 40}, {"60px", 30, 0}} {
		b.Run(c.name, func(b *testing.B) {
			rng := rand.New(rand.NewPCG(3, 3))
			w := int(2*c.r+c.l) + 24
			s := scene{w: w, h: w, u: float64(w)/2 + 0.3, v: float64(w)/2 - 0.2, r: c.r, bob: 80, wall: 180, blur: 0.8, noise: 5, smear: [2]float64{c.l, 0.1 * c.l}}
			p := s.render(rng)
			f := NewFitter(grey, c.r, 0.1, rect(s))
			f.frames = 101
			g := Guess{U: s.u + 0.1, V: s.v - 0.1, UPos: 0.1, SmearU: c.l, SmearV: 0.1 * c.l, USmear: 0.3}
			steps := 0
			was := cpu()
			for b.Loop() {
				f.frames = 101
				steps += f.Fit(p, nil, g, nil, false).Steps
			}
			b.ReportMetric(float64((cpu()-was).Microseconds())/float64(b.N), "cpu-µs")
			b.ReportMetric(float64(steps)/float64(b.N), "steps")
			b.ReportMetric(float64(len(f.px)), "px")
		})
	}
}
