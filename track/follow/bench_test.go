package follow

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os/exec"
	"path/filepath"
	"syscall"
	"testing"
	"time"

	"lodeswing/samples/film"
	"lodeswing/track/clip"
)

// loopS is after how many seconds everything in threeBobs is where it was.
const loopS = 4.0

// threeBobs is a 1080p60 scene with three balls on rods, each about 50 px across.
func threeBobs() *film.Scene {
	s := &film.Scene{
		Camera:     film.Camera{Width: 1920, Height: 1080, PixelsPerM: 2200, DistanceM: 1.5, LookAt: film.Vec{0, 0, -0.12}, ExposureS: 0.004},
		Wall:       film.Wall{Level: film.RGB{185, 183, 180}, Texture: 6, Y: 0.2},
		Light:      film.Light{Shadow: 0.3},
		Noise:      film.Noise{Read: 4},
		FramesPerS: 60, Seed: 3,
	}
	for i, c := range []film.RGB{{170, 40, 35}, {40, 80, 170}, {45, 130, 60}} {
		at := swing(-0.25+0.25*float64(i), 0, 0.2, 0.35, 2*math.Pi*float64(3+i)/loopS, float64(i))
		x := -0.25 + 0.25*float64(i)
		s.Bobs = append(s.Bobs, film.Bob{Name: fmt.Sprint("bob", i+1), Colour: c, DiameterM: 0.022, At: at})
		s.Rods = append(s.Rods, film.Rod{Colour: film.RGB{120, 120, 125}, DiameterM: 0.002, From: func(float64) film.Vec { return film.Vec{x, 0, 0} }, To: at})
	}
	return s
}

const threeRig = `
name = "Three"
[camera]
readout_ms = 0
vertical = "picture"
distance_mm = 1500
[scale]
length_mm = 100
ends_px = [[849.5, 539.5], [1069.5, 539.5]]
origin_px = [959.5, 275.5]
[[bob]]
name = "bob1"
colour = "#aa2823"
diameter_mm = 22
[[bob]]
name = "bob2"
colour = "#2850aa"
diameter_mm = 22
[[bob]]
name = "bob3"
colour = "#2d823c"
diameter_mm = 22
`

// cpu is the processor time used so far, by all threads: on a machine that others
// use as well, its ratio says more than the clock's.
func cpu() time.Duration {
	var r syscall.Rusage
	_ = syscall.Getrusage(syscall.RUSAGE_SELF, &r) // cannot fail for the own process
	return time.Duration(r.Utime.Nano() + r.Stime.Nano())
}

// BenchmarkFollow follows three bobs through a 1080p60 clip of at least 17 Mb/s
// and reports frames/s beside the rate at which the same clip is merely read,
// taken in turns within one run. The clip is as long as those that users film, 16 s:
// the scene's four seconds, whose motion closes on itself, four times.
func BenchmarkFollow(b *testing.B) {
	ctx := context.Background()
	once, path := filepath.Join(b.TempDir(), "once.mp4"), filepath.Join(b.TempDir(), "three.mp4")
	s := threeBobs()
	if err := s.Encode(ctx, once, int(loopS*s.FramesPerS), film.Encoding{MegabitPerS: 18}, nil); err != nil {
		b.Fatal(err)
	}
	if out, err := exec.Command("ffmpeg", "-v", "error", "-stream_loop", "3", "-i", once, "-c", "copy", path).CombinedOutput(); err != nil {
		b.Fatalf("ffmpeg: %v: %s", err, out)
	}
	facts, err := clip.Inspect(ctx, path, clip.Options{})
	if err != nil {
		b.Fatal(err)
	}
	r, cam := solve(b, threeRig, facts.W, facts.H)
	open := func() clip.Source {
		src, err := clip.Open(ctx, facts)
		if err != nil {
			b.Skipf("skipped: %v", err)
		}
		return src
	}
	best := map[string]float64{}
	var ratios, cpuRatios []float64
	for b.Loop() {
		read := func() float64 {
			src := open()
			defer src.Close()
			begun := time.Now()
			n := 0
			for {
				_, err := src.Next(ctx)
				if errors.Is(err, io.EOF) {
					break
				}
				if err != nil {
					b.Fatal(err)
				}
				n++
			}
			return float64(n) / time.Since(begun).Seconds()
		}
		follow := func() float64 {
			src := open()
			defer src.Close()
			begun := time.Now()
			tr, err := Follow(ctx, src, r, cam, Options{})
			if err != nil {
				b.Fatal(err)
			}
			return float64(len(tr.Bobs[0].Samples)) / time.Since(begun).Seconds()
		}
		c0 := cpu()
		x := read()
		c1 := cpu()
		y := follow()
		cpuRatios = append(cpuRatios, float64(c1-c0)/float64(cpu()-c1))
		best["read"], best["follow"] = math.Max(best["read"], x), math.Max(best["follow"], y)
		ratios = append(ratios, y/x)
	}
	b.ReportMetric(best["read"], "read-frames/s")
	b.ReportMetric(best["follow"], "follow-frames/s")
	b.ReportMetric(median(ratios), "ratio")
	b.ReportMetric(median(cpuRatios), "cpu-ratio")
	b.ReportMetric(facts.BitRate/1e6, "Mb/s")
}
