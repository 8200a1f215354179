package clip

import (
	"math"
	"sort"
)

// Survey is what a look at a clip's pixels tells about how it was filmed. A
// number that could not be seen is NaN, or absent in JSON.
type Survey struct {
	Frames  int     `json:"frames"` // looked at
	Seconds float64 `json:"seconds"`

	Brightness float64 `json:"brightness"`  // mean grey level, 0–255
	OverShare  float64 `json:"over_share"`  // share of pixels that are blown out
	UnderShare float64 `json:"under_share"` // share of pixels that are black
	Noise      float64 `json:"noise"`       // grey levels r.m.s., between frames where nothing moves
	Flicker    float64 `json:"flicker"`     // relative r.m.s. change of brightness from frame to frame

	EdgePX  float64 `json:"edge_px,omitempty"` // standard deviation of the blur of the sharpest still edges, pixels
	SpeedPX float64 `json:"speed_px_per_frame,omitempty"`

	// ExposureS is one frame's exposure, from how much longer edges get the
	// faster they move; NaN when nothing moved fast enough to tell.
	ExposureS    *float64 `json:"exposure_s,omitempty"`
	UExposureS   float64  `json:"u_exposure_s,omitempty"`
	ExposureLess bool     `json:"exposure_less,omitempty"` // ExposureS is only an upper limit
	BlurPX       float64  `json:"blur_px,omitempty"`       // exposure × the fastest motion seen

	Repeats int  `json:"repeated_frames"` // frames that show the one before again while things move
	Bars    Bars `json:"bars"`
}

// Bars are black bars about the picture, in pixels of the upright picture.
type Bars struct{ Left, Right, Top, Bottom int }

// Any tells whether there are bars at all.
func (b Bars) Any() bool { return b.Left+b.Right+b.Top+b.Bottom > 0 }

// Surveyor looks at the frames of a clip, one after the other.
type Surveyor struct {
	facts  *Facts
	frames int
	lastT  float64

	step       int // the thin grid takes every step-th pixel both ways
	gw, gh     int
	now, prior []uint8  // thin grids of grey values
	dark       [4][]int // black grid columns and rows at left, right, top, bottom, in some frames
	over, under, total,
	sum float64
	bright []float64
	moving []int // per frame: grid pixels that changed
	same   []bool
	still  [64]int // differences of grid pixels between frames, for the noise

	edges edgeFinder
}

// NewSurveyor returns a Surveyor for the clip.
func NewSurveyor(facts *Facts) *Surveyor {
	return &Surveyor{facts: facts, step: max(1, min(facts.W, facts.H)/270)}
}

// Observe looks at a frame. Frames come in order and none is left out, since
// motion between neighbours is looked at.
func (s *Surveyor) Observe(f *Frame) {
	if s.now == nil {
		s.gw, s.gh = (f.W+s.step-1)/s.step, (f.H+s.step-1)/s.step
		s.now, s.prior = make([]uint8, s.gw*s.gh), make([]uint8, s.gw*s.gh)
	}
	s.now, s.prior = s.prior, s.now
	s.thin(f)
	if s.frames > 0 {
		s.difference()
	}
	if s.frames%10 == 0 {
		s.darkSides()
	}
	s.edges.observe(f, s.facts.TrueRate)
	s.frames++
	s.lastT = f.T
}

// thin takes the grid from the stored picture, whichever way up it is.
func (s *Surveyor) thin(f *Frame) {
	i, sum := 0, 0
	for y := 0; y < f.H; y += s.step {
		row := f.Pix[y*f.Stride:]
		for x := 0; x < f.W; x += s.step {
			q := row[3*x : 3*x+3 : 3*x+3]
			b, g, r := int(q[0]), int(q[1]), int(q[2])
			grey := (b + 2*g + r) / 4
			if grey >= 250 {
				s.over++
			} else if grey <= 4 {
				s.under++
			}
			s.now[i] = uint8(grey)
			sum += grey
			i++
		}
	}
	s.total += float64(i)
	s.sum += float64(sum)
	s.bright = append(s.bright, float64(sum)/float64(i))
}

func (s *Surveyor) difference() {
	changed, largest := 0, 0
	for i, a := range s.now {
		d := int(a) - int(s.prior[i])
		if d < 0 {
			d = -d
		}
		if d > 12 {
			changed++
		}
		largest = max(largest, d)
		if a > 8 && a < 247 { // clipped pixels have no noise
			s.still[min(d, len(s.still)-1)]++
		}
	}
	s.moving = append(s.moving, changed)
	s.same = append(s.same, largest <= 2)
}

// Survey sums up what was seen so far.
func (s *Surveyor) Survey() *Survey {
	v := &Survey{Frames: s.frames, Seconds: s.lastT}
	if s.frames == 0 {
		return v
	}
	v.Brightness = s.sum / s.total
	v.OverShare, v.UnderShare = s.over/s.total, s.under/s.total
	v.Noise = s.noise()
	v.Flicker = flicker(s.bright)
	for i, same := range s.same {
		// A frame that changes nothing between two that change a lot is a copy.
		if same && i > 0 && i+1 < len(s.moving) && s.moving[i-1] >= 8 && s.moving[i+1] >= 8 {
			v.Repeats++
		}
	}
	v.Bars = s.bars()
	if v.Bars.Any() { // they are no part of the picture's light
		w, h := float64(s.facts.W), float64(s.facts.H)
		inside := (1 - float64(v.Bars.Left+v.Bars.Right)/w) * (1 - float64(v.Bars.Top+v.Bars.Bottom)/h)
		v.Brightness /= inside
		v.OverShare /= inside
		v.UnderShare = math.Max(0, v.UnderShare-(1-inside)) / inside
	}
	v.EdgePX, v.SpeedPX = s.edges.sharpness(), s.edges.fastest()
	if e, u, less, ok := s.edges.exposure(); ok {
		v.ExposureS, v.UExposureS, v.ExposureLess = &e, u, less
		if !less && s.facts.TrueRate > 0 {
			v.BlurPX = v.SpeedPX * e * s.facts.TrueRate
		}
	}
	return v
}

// noise is from the median of the differences between frames, which moving
// things do not reach.
func (s *Surveyor) noise() float64 {
	n := 0
	for _, k := range s.still {
		n += k
	}
	if p := float64(s.still[0]) / float64(max(n, 1)); p > 0.5 {
		// Most differences round to nothing: from the share p that does.
		return 0.5 / (math.Sqrt2 * math.Erfinv(math.Min(p, 0.9999))) / math.Sqrt2
	}
	seen := 0
	for d, k := range s.still {
		if 2*(seen+k) >= n && k > 0 {
			at := float64(d) - 0.5 + (float64(n)/2-float64(seen))/float64(k)
			return at / 0.6745 / math.Sqrt2
		}
		seen += k
	}
	return 0
}

// flicker is the relative r.m.s. of brightness against its neighbours' mean.
func flicker(b []float64) float64 {
	if len(b) < 8 {
		return 0
	}
	d := make([]float64, 0, len(b))
	for i := 1; i+1 < len(b); i++ {
		if b[i] > 1 {
			d = append(d, math.Abs(b[i]-(b[i-1]+b[i+1])/2)/b[i])
		}
	}
	if len(d) == 0 {
		return 0
	}
	return median(d) / 0.6745 * math.Sqrt(2.0/3)
}

// darkSides counts the black columns and rows about the latest frame.
func (s *Surveyor) darkSides() {
	dark := func(first, n, step int) bool {
		for i := 0; i < n; i++ {
			if s.now[first+i*step] > 26 {
				return false
			}
		}
		return true
	}
	count := func(n int, isDark func(k int) bool) int {
		k := 0
		for k < n/2 && isDark(k) {
			k++
		}
		return k
	}
	column := func(k int) bool { return dark(k, s.gh, s.gw) }
	row := func(k int) bool { return dark(k*s.gw, s.gw, 1) }
	for side, n := range [4]int{
		count(s.gw, column), count(s.gw, func(k int) bool { return column(s.gw - 1 - k) }),
		count(s.gh, row), count(s.gh, func(k int) bool { return row(s.gh - 1 - k) }),
	} {
		s.dark[side] = append(s.dark[side], n)
	}
}

// bars gives the black bars that most frames have; a caption may lie in them now
// and then.
func (s *Surveyor) bars() Bars {
	var side [4]int
	for i, d := range s.dark {
		x := make([]float64, len(d))
		for k, n := range d {
			x[k] = float64(n)
		}
		n := s.gw
		if i >= 2 {
			n = s.gh
		}
		if m := int(median(x)); m*50 >= n { // less is a dark edge, no bar
			side[i] = m * s.step
		}
	}
	l, r, t, b := side[0], side[1], side[2], side[3]
	// Bars come in pairs; one alone is a dark thing at the picture's edge.
	if l == 0 || r == 0 {
		l, r = 0, 0
	}
	if t == 0 || b == 0 {
		t, b = 0, 0
	}
	switch s.facts.RotationDeg {
	case 90:
		return Bars{Left: b, Right: t, Top: l, Bottom: r}
	case 180:
		return Bars{Left: r, Right: l, Top: b, Bottom: t}
	case 270:
		return Bars{Left: t, Right: b, Top: r, Bottom: l}
	}
	return Bars{l, r, t, b}
}

// quantile returns the q-quantile of x, NaN when it is empty; x is sorted.
func quantile(x []float64, q float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	sort.Float64s(x)
	return x[min(int(q*float64(len(x))), len(x)-1)]
}
