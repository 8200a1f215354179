package clip_test

import (
	"context"
	"image"
	"io"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/clip/cliptest"
)

// BenchmarkRead reads a 1080p60 clip of 17 Mb/s or more: barely, and with three
// windows of 160 px copied out of each frame.
func BenchmarkRead(b *testing.B) {
	path := cliptest.Phone1080p60(b, "5")
	ctx := context.Background()
	facts, err := clip.Inspect(ctx, path, clip.Options{})
	if err != nil {
		b.Fatal(err)
	}
	for _, windows := range []int{0, 3} {
		name := "bare"
		if windows > 0 {
			name = "three windows"
		}
		b.Run(name, func(b *testing.B) {
			frames := 0
			var p clip.Patch
			for i := 0; i < b.N; i++ {
				src, err := clip.Open(ctx, facts)
				if err != nil {
					b.Skip(err)
				}
				for {
					f, err := src.Next(ctx)
					if err == io.EOF {
						break
					}
					if err != nil {
						b.Fatal(err)
					}
					for k := 0; k < windows; k++ {
						f.Patch(&p, image.Rect(400+300*k, 500, 560+300*k, 660))
					}
					frames++
				}
				src.Close()
			}
			b.ReportMetric(float64(frames)/b.Elapsed().Seconds(), "frames/s")
		})
	}
}

// BenchmarkPatch copies three windows of 160 px out of a 1080p frame.
func BenchmarkPatch(b *testing.B) {
	for _, deg := range []int{0, 90, 180, 270} {
		b.Run(map[int]string{0: "upright", 90: "90", 180: "180", 270: "270"}[deg], func(b *testing.B) {
			f := clip.NewFrame(0, 0, 1920, 1080)
			f.RotationDeg = deg
			var p clip.Patch
			for i := 0; i < b.N; i++ {
				for k := 0; k < 3; k++ {
					f.Patch(&p, image.Rect(300+200*k, 500, 460+200*k, 660))
				}
			}
		})
	}
}
