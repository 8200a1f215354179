package shake

import (
	"math"
	"math/rand"

	"lodeswing/track/clip"
	"lodeswing/track/rig"
)

// scene is a made-up bench seen by a moving camera: a wall with soft spots,
// marks, and a dark bob that swings before it. Everything is a smooth function
// of the place, so pictures at any sub-pixel shift are exact.
type scene struct {
	w, h     int
	spots    [][4]float64 // u, v, height, radius
	noise    float64
	unmarked bool // no mark on the stand
	rng      *rand.Rand
	// motion of the camera, of the base's mark, and warping, at time t
	camera func(t float64) similarity
	rock   func(t float64) (u, v float64)
	warp   func(t, v float64) float64
	bob    func(t float64) (u, v float64)
}

func newScene(w, h, spots int, seed int64) *scene {
	s := &scene{w: w, h: h, noise: 2, rng: rand.New(rand.NewSource(seed))}
	for range spots {
		s.spots = append(s.spots, [4]float64{
			s.rng.Float64() * float64(w), s.rng.Float64() * float64(h),
			(s.rng.Float64() - 0.5) * 120, 2.5 + 4*s.rng.Float64(),
		})
	}
	return s
}

var (
	standMark = rig.Mark{Name: "post", On: "stand", PX: []float64{60, 60}}
	baseMark  = rig.Mark{Name: "foot", On: "base", PX: []float64{200, 240}}
)

// grain is normal noise of standard deviation 1.
var grain = func() []float64 {
	rng := rand.New(rand.NewSource(99))
	x := make([]float64, 1<<17)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	return x
}()

func (s *scene) frame(index int, t float64) *clip.Frame {
	plane := make([]float64, s.w*s.h)
	for i := range plane {
		plane[i] = 150
	}
	var cam similarity
	if s.camera != nil {
		cam = s.camera(t)
	}
	mx, my := float64(s.w-1)/2, float64(s.h-1)/2
	add := func(u, v, height, radius float64) {
		du, dv := cam.at(u-mx, v-my)
		u, v = u+du, v+dv
		if s.warp != nil {
			u += s.warp(t, v)
		}
		r := int(4*radius) + 1
		for y := max(int(v)-r, 0); y <= min(int(v)+r, s.h-1); y++ {
			for x := max(int(u)-r, 0); x <= min(int(u)+r, s.w-1); x++ {
				d := ((float64(x)-u)*(float64(x)-u) + (float64(y)-v)*(float64(y)-v)) / (2 * radius * radius)
				if d < 9 {
					plane[y*s.w+x] += height * math.Exp(-d)
				}
			}
		}
	}
	for _, p := range s.spots {
		add(p[0], p[1], p[2], p[3])
	}
	if !s.unmarked {
		add(standMark.PX[0], standMark.PX[1], -110, 3)
	}
	bu, bv := baseMark.PX[0], baseMark.PX[1]
	if s.rock != nil {
		du, dv := s.rock(t)
		bu, bv = bu+du, bv+dv
	}
	add(bu, bv, -110, 3)
	if s.bob != nil {
		u, v := s.bob(t)
		for y := max(int(v)-28, 0); y < min(int(v)+28, s.h); y++ {
			for x := max(int(u)-28, 0); x < min(int(u)+28, s.w); x++ {
				d := math.Hypot(float64(x)-u, float64(y)-v)
				k := 1 / (1 + math.Exp((d-18)/0.7))
				plane[y*s.w+x] = plane[y*s.w+x]*(1-k) + 30*k
			}
		}
	}
	f := clip.NewFrame(index, t, s.w, s.h)
	// Noise from a long table, read from a place drawn anew for each row.
	for y := 0; y < s.h; y++ {
		noise := grain[s.rng.Intn(len(grain)-3*s.w):]
		for x := 0; x < s.w; x++ {
			g := plane[y*s.w+x] + 0.5
			for c := 0; c < 3; c++ {
				f.Pix[3*(y*s.w+x)+c] = byte(max(0, min(255, g+s.noise*noise[3*x+c])))
			}
		}
	}
	return f
}

// watch films the scene for the given time at 30 frames/s and watches it.
func (s *scene) watch(seconds float64, marks ...rig.Mark) (*Report, *clip.Facts) {
	facts := &clip.Facts{W: s.w, H: s.h, StoredW: s.w, StoredH: s.h, TrueRate: 30}
	for i := 0; float64(i)/30 < seconds; i++ {
		facts.Times = append(facts.Times, float64(i)/30)
	}
	w := New(facts, marks, nil)
	for i, t := range facts.Times {
		if w.Wants(i) {
			w.Observe(s.frame(i, t))
		}
	}
	return w.Report(), facts
}

func swinging(t float64) (u, v float64) {
	a := 0.8 * math.Sin(2*math.Pi*1.1*t)
	return 200 + 120*math.Sin(a), 40 + 120*math.Cos(a)
}

func (s *scene) marks(stand bool) []rig.Mark {
	if stand {
		return []rig.Mark{standMark}
	}
	return nil
}

func rigMark(name string, px ...float64) rig.Mark { return rig.Mark{Name: name, On: "base", PX: px} }
