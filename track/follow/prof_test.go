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

func BenchmarkOwnWork(b *testing.B) {
	s := threeBobs()
	const n = 80
	f := newFilmed(s, n)
	f.facts.PixelFormat = "yuv420p"
	var fr []*clip.Frame
	for range n {
		x, _ := f.Next(context.Background())
		fr = append(fr, x.Clone())
	}
	r, cam := solve(b, threeRig, 1920, 1080)
	b.ResetTimer()
	for b.Loop() {
		c := &canned{filmed: f, frames: fr}
		if _, err := Follow(context.Background(), c, r, cam, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
