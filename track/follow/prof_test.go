package follow

import (
	"context"
	"io"
	"testing"

	"lodeswing/track/clip"
)

type canned struct {
	*filmed
	frames []*clip.Frame
	k      int
}

func (c *canned) Next(ctx context.Context) (*clip.Frame, error) {
	if c.k >= len(c.frames) {
		return nil, io.EOF
	}
	c.k++
	return c.frames[c.k-1], nil
}

// BenchmarkOwnWork is what following costs beside decoding: processor time of the
// start, and of each further frame, with three bobs.
func BenchmarkOwnWork(b *testing.B) {
	s := threeBobs()
	const n = 100
	f := newFilmed(s, n)
	f.facts.PixelFormat = "yuv420p"
	var fr []*clip.Frame
	for range n {
		x, _ := f.Next(context.Background())
		fr = append(fr, x.Clone())
	}
	r, cam := solve(b, threeRig, 1920, 1080)
	run := func(n int) float64 {
		c0 := cpu()
		if _, err := Follow(context.Background(), &canned{filmed: f, frames: fr[:n]}, r, cam, Options{}); err != nil {
			b.Fatal(err)
		}
		return (cpu() - c0).Seconds()
	}
	var first, all []float64
	for b.Loop() {
		first = append(first, run(20))
		all = append(all, run(n))
	}
	b.ReportMetric(1e3*(median(all)-median(first))/(n-20), "cpu-ms/frame")
	b.ReportMetric(1e3*median(first), "cpu-ms/first20")
}
