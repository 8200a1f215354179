package film

import (
	"math"
	"math/rand/v2"
)

// grain turns finished levels into bytes: sensor noise, then rounding. Its
// normal numbers come from a fixed pool that is entered at a new random place
// for every row of every frame.
type grain struct {
	pool []int16    // standard normal × 4096, mean 0 and variance 1 over the pool
	gain [256]int32 // σ in levels × 64, by grey level
	none bool
	seed uint64
}

const poolSize = 1 << 18

func newGrain(s *Scene) *grain {
	g := &grain{seed: s.Seed, none: s.Noise.Read == 0 && s.Noise.Shot == 0}
	if g.none {
		return g
	}
	for i := range g.gain {
		g.gain[i] = int32(math.Round(64 * math.Sqrt(s.Noise.Read*s.Noise.Read+s.Noise.Shot*float64(i))))
	}
	rnd := rand.New(rand.NewPCG(s.Seed, 0x6772_6169_6e))
	x := make([]float64, poolSize)
	var mean, square float64
	for i := range x {
		x[i] = rnd.NormFloat64()
		mean += x[i] / poolSize
	}
	for _, v := range x {
		square += (v - mean) * (v - mean) / poolSize
	}
	g.pool = make([]int16, poolSize)
	for i, v := range x {
		g.pool[i] = int16(math.Round(min(max((v-mean)/math.Sqrt(square)*4096, -32768), 32767)))
	}
	return g
}

func (g *grain) develop(src []uint16, dst []byte, width int, t float64) {
	if g.none {
		for i, x := range src {
			dst[i] = byte(min((uint32(x)+64)>>7, 255))
		}
		return
	}
	rnd := rand.New(rand.NewPCG(g.seed, math.Float64bits(t)))
	n := 3 * width
	for o := 0; o < len(src); o += n {
		row := src[o : o+n]
		to := dst[o : o+n][:len(row)]
		at := rnd.IntN(poolSize - n)
		pool := g.pool[at : at+n][:len(row)]
		for i, x := range row {
			// levels × 128: pool 4096, gain 64, so 4096·64/128 = 2048.
			y := (int32(x) + (int32(pool[i])*g.gain[uint8(x>>7)]+1024)>>11 + 64) >> 7
			if uint32(y) > 255 {
				y = min(max(y, 0), 255)
			}
			to[i] = byte(y)
		}
	}
}

// texture is the wall's fixed pattern: white noise smoothed by a Gaussian, with
// the scene's r.m.s.; nil when there is none.
func texture(s *Scene, w, h int) []float32 {
	if s.Wall.Texture == 0 {
		return nil
	}
	sd := s.Wall.GrainPX
	if sd == 0 {
		sd = 1.5
	}
	rnd := rand.New(rand.NewPCG(s.Seed, 0x7761_6c6c))
	a := make([]float32, w*h)
	for i := range a {
		a[i] = float32(rnd.NormFloat64())
	}
	r := int(math.Ceil(3.5 * sd))
	k := make([]float32, 2*r+1)
	for i := range k {
		k[i] = float32(math.Exp(-float64((i-r)*(i-r)) / (2 * sd * sd)))
	}
	b := make([]float32, w*h)
	for y := range h { // wrapped round at the edges, so that all of it is alike
		for x := range w {
			var q float32
			for i, t := range k {
				q += t * a[y*w+(x+i-r+w)%w]
			}
			b[y*w+x] = q
		}
	}
	var sum, square float64
	for y := range h {
		row := a[y*w : (y+1)*w]
		clear(row)
		for i, t := range k {
			from := b[((y+i-r+h)%h)*w:][:w]
			for x := range row {
				row[x] += t * from[x]
			}
		}
		for _, q := range row {
			sum += float64(q)
			square += float64(q) * float64(q)
		}
	}
	n := float64(w * h)
	mean := sum / n
	f := s.Wall.Texture / math.Sqrt(square/n-mean*mean)
	for i := range a {
		a[i] = float32((float64(a[i]) - mean) * f)
	}
	return a
}
