package shake

import (
	"context"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// TestHandHeldPhoneFootage takes real footage from a hand-held phone
// (../shared/data/phone-clip), in which a hand pushes a weight, a caption fades
// in and black bars stand still. Three things are bolted to one bench: the
// corner of the motor's box and two clamps. Seen by a still camera they would
// stand still, so what is left of their motion after correction is the error.
// They stand up to half a metre before the wall, so a hand that shifts sideways
// moves them differently from it: a few pixels of the 43 remain.
func TestHandHeldPhoneFootage(t *testing.T) {
	path := filepath.Join("..", "..", "..", "shared", "data", "phone-clip", "weight-on-rod.mp4")
	if _, err := os.Stat(path); err != nil {
		t.Skipf("the phone clip is not beside this checkout (%s)", path)
	}
	ctx := context.Background()
	facts, err := clip.Inspect(ctx, path, clip.Options{})
	if err != nil {
		t.Skip(err) // no ffprobe
	}
	src, err := clip.Open(ctx, facts)
	if errors.Is(err, clip.ErrNoOpenCV) {
		t.Skip(err)
	}
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	w := New(facts, []rig.Mark{
		{Name: "box", On: "base", PX: []float64{592, 250}},
		{Name: "left clamp", On: "base", PX: []float64{534, 392}},
		{Name: "right clamp", On: "base", PX: []float64{694, 392}},
	}, nil)
	for {
		f, err := src.Next(ctx)
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		w.Observe(f)
	}
	r := w.Report()
	t.Logf("%d patches, lost in %d of %d, moved %.1f px, fast %.2f px, turn %.4f, zoom %.4f, warp %.2f px", r.Patches, r.Lost, r.Seen, r.MovePX, r.FastPX, r.TurnRad, r.Zoom, r.WarpPX)
	for _, c := range r.Cautions {
		t.Log(c)
	}
	if r.kind() != shaken || 50*r.Lost > r.Seen || r.MovePX < 30 {
		t.Errorf("kind %d, lost in %d of %d frames, moved %.1f px", r.kind(), r.Lost, r.Seen, r.MovePX)
	}
	for _, m := range r.Marks {
		raw, left := spread(m.U, m.V), 0.0
		var us, vs []float64
		for i := range m.T {
			u, v, ok := r.Correct(m.T[i], m.U[i], m.V[i])
			if !ok {
				t.Fatalf("no correction at %.2f s", m.T[i])
			}
			us, vs = append(us, u), append(vs, v)
		}
		left = spread(us, vs)
		t.Logf("%s: found %d times, moves %.2f px r.m.s. in the picture, %.2f px corrected", m.Name, len(m.T), raw, left)
		if len(m.T) > 100 && left > 1.5 {
			t.Errorf("%s still moves by %.2f px r.m.s. after correction", m.Name, left)
		}
	}
}

func spread(u, v []float64) float64 {
	mu, mv, sq := mean(u), mean(v), 0.0
	for i := range u {
		sq += (u[i]-mu)*(u[i]-mu) + (v[i]-mv)*(v[i]-mv)
	}
	return math.Sqrt(sq / float64(len(u)))
}
