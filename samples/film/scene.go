// Package film renders footage of a moving toy with known truth. What comes in:
// a Scene (camera, wall, light, bobs and other drawn things whose positions are
// functions of time). What goes out: frames as 8-bit BGR bytes of the upright
// picture, an encoded clip, and for every frame and bob the true place of its
// centre in metres and in pixels.
//
// Units: metres, seconds, radians; pixels for pictures; grey levels (0–255) for
// brightness. World axes: x to the right in the picture, y away from the camera,
// z up. Pixel centres lie at whole numbers: u right, v down, the first pixel's
// centre at (0, 0).
//
// How a pixel gets its value. Every moving thing is sampled on a grid finer than
// the pixels, each sample averaged over its own cell by the distance to the
// outline; samples of several instants within the exposure are averaged; the
// result is convolved with the lens's Gaussian blur and the pixel's square
// aperture, then laid over the wall. A ball's outline is the exact one of a
// sphere seen through a pinhole (an ellipse), so its middle is not the image of
// the ball's centre; the truth is the image of the centre. Brightness is linear
// (no gamma): it is the picture that is modelled, not the sensor behind it.
package film

import (
	"math"
	"sync"
)

// Vec is a point or direction in the world: x right, y away, z up (m).
type Vec [3]float64

// RGB is a colour in grey levels 0–255.
type RGB [3]float64

// Camera says how the world becomes a picture. The camera looks at LookAt along
// the direction that Pan, Tilt and Roll give; with all three zero it looks along
// +y. Zero values: an orthographic camera must give PixelsPerM, a pinhole one
// DistanceM and either PixelsPerM (at LookAt's depth) or FocalPX.
type Camera struct {
	Width, Height int     // px
	PixelsPerM    float64 // px/m at LookAt
	DistanceM     float64 // lens to LookAt; 0: orthographic (no perspective)
	FocalPX       float64 // px; 0: PixelsPerM × DistanceM
	LookAt        Vec     // m; appears at the principal point
	Tilt          float64 // rad; the camera looks down by this angle (π/2: from straight above, +y is up in the picture)
	Pan           float64 // rad; the camera stands to the left and looks to the right by this angle
	Roll          float64 // rad; the picture's content turns clockwise by this angle
	K1, K2        float64 // radial distortion in normalised coordinates: r_d = r(1 + K1 r² + K2 r⁴) (Brown 1966); pinhole only
	CentrePX      *[2]float64
	// Turned is how far the stored picture must be turned clockwise to be upright:
	// 0, 90, 180 or 270 degrees. Width, Height and everything else here are the
	// upright picture's; the sensor's rows, and so the rolling shutter, turn along.
	Turned int
	// ReadoutS is the rolling shutter's time from the sensor's first row to its
	// last: the exposure of row v of h has its middle at the frame's time +
	// ReadoutS·(v/(h−1) − ½).
	ReadoutS  float64
	ExposureS float64 // one row's exposure; 0: an instant
	BlurPX    float64 // standard deviation of the lens's Gaussian blur, px; 0: 0.8. The pixel's aperture comes on top.
}

// Wall is what stands behind everything: levels are those of its middle.
type Wall struct {
	Level    RGB     // grey levels
	GradU    float64 // grey levels from the left edge to the right edge
	GradV    float64 // grey levels from the top edge to the bottom edge
	Texture  float64 // grey levels r.m.s. of a fixed pattern
	GrainPX  float64 // the pattern's correlation length, px (standard deviation of its smoothing); 0: 1.5
	Vignette float64 // part of the light lost in the corners, 0 … 1
	// Where shadows fall: on the upright wall at depth Y (m) or, with Table, on the
	// level table top at height Z (m).
	Y     float64
	Table bool
	Z     float64
}

// Light is one distant lamp and light from everywhere.
type Light struct {
	From    Vec     // direction towards the lamp; zero: from the upper left, in front
	Ambient float64 // share of a colour that needs no lamp; with Diffuse both zero: 0.55 and 0.45
	Diffuse float64
	Shadow  float64 // 0 … 1: part of the wall's light that a bob takes away; 0: no shadows
	Soft    float64 // m; half width of the shadow's soft edge; 0: 6 mm
}

// Bob is a followed thing with a known centre.
type Bob struct {
	Name      string
	Colour    RGB
	DiameterM float64
	At        func(t float64) Vec // centre, m
	Flat      bool                // a disc facing Normal instead of a ball
	Normal    Vec                 // of a flat bob; zero: (0, −1, 0), facing the camera
	Plain     bool                // no shading: the colour everywhere
	Gloss     float64             // 0 matt … 1 a polished ball with a bright highlight
	NoShadow  bool
	Unmarked  bool // drawn, but not in the truth
	Still     bool // drawn once, behind everything that moves; casts no shadow, not in the truth
}

// Rod is a round bar between two points; it is shaded, not followed. A moving one
// is sorted among the bobs by the depth of To, a still one by its middle's.
type Rod struct {
	Colour    RGB
	DiameterM float64
	From, To  func(t float64) Vec
	Still     bool // From and To do not depend on time: drawn once, behind everything that moves
	Plain     bool
	Front     bool // drawn over all bobs, whatever its depth
}

// Plate is a fixed flat convex polygon, drawn behind everything that moves.
type Plate struct {
	Colour  RGB
	Corners []Vec
	Ground  bool // lies behind all else, whatever its depth; in the order given
}

// Decal is a fixed flat picture: a rectangle with Centre, half sizes along the
// directions Right and Up (unit vectors). Paint gives the colour at (a, b), metres
// from the centre along Right and Up, and how opaque it is (0 … 1).
type Decal struct {
	Centre, Right, Up Vec
	HalfW, HalfH      float64
	Paint             func(a, b float64) (c RGB, opaque float64)
}

// Noise is the sensor's: variance = Read² + Shot·level, grey levels.
type Noise struct {
	Read float64
	Shot float64
}

// Scene is everything that is filmed. It must not change after its first use;
// it may be rendered from several goroutines at once.
type Scene struct {
	Camera Camera
	Wall   Wall
	Light  Light
	Bobs   []Bob
	Rods   []Rod
	Plates []Plate
	Decals []Decal
	Noise  Noise
	// Sharpening is a phone's halo: share of the detail above 1.2 px that is
	// added once more, 0 … 1.
	Sharpening float64
	FramesPerS float64 // recorded frames per second; Frame needs it
	Seed       uint64
	// Times, when not nil, are the frames' times in seconds (variable rate).
	Times []float64

	placed, drawn sync.Once
	ready         *stage
}

// Frame is one rendered frame: Pix has 3 bytes (blue, green, red) per pixel,
// Stride bytes per row; T is the frame's time in seconds.
type Frame struct {
	Index         int
	T             float64
	Width, Height int
	Stride        int
	Pix           []byte
}

// Point is the truth about one bob in one frame.
type Point struct {
	Name string
	T    float64 // s, the middle of the exposure of the row on which the centre lies
	At   Vec     // m, at T
	U, V float64 // px, the image of the centre
	// Shown is the share of the bob's face that is inside the picture and not
	// covered by another bob, at T.
	Shown float64
}

// Time is frame i's time: the middle of the exposure of its middle row.
func (s *Scene) Time(i int) float64 {
	if s.Times != nil {
		return s.Times[i]
	}
	return float64(i) / s.FramesPerS
}

// Frame renders frame i into a new buffer.
func (s *Scene) Frame(i int) Frame {
	c := &s.Camera
	f := Frame{Index: i, T: s.Time(i), Width: c.Width, Height: c.Height, Stride: 3 * c.Width}
	f.Pix = make([]byte, f.Stride*f.Height)
	s.Render(f.T, f.Pix)
	return f
}

// Truth says where every marked bob is in the frame of time t.
func (s *Scene) Truth(t float64) []Point {
	st := s.place()
	var out []Point
	for i := range s.Bobs {
		b := &s.Bobs[i]
		if b.Unmarked || b.Still {
			continue
		}
		p := Point{Name: b.Name}
		p.T, p.At, p.U, p.V = st.centre(b, t)
		p.U, p.V = st.cam.upright(p.U, p.V)
		p.Shown = st.shown(i, p)
		out = append(out, p)
	}
	return out
}

// centre gives when and where b's centre is seen, u and v in the stored picture.
// It solves T = t + row time of v(T): the row's delay depends on where the
// bob is, and where it is depends on the delay. The iteration contracts by the
// ratio of the bob's speed to that of the shutter, so it ends after a few steps.
func (st *stage) centre(b *Bob, t float64) (tt float64, at Vec, u, v float64) {
	tt = t
	for range 50 {
		at = b.At(tt)
		u, v = st.cam.project(at)
		next := t + st.rowTime(v)
		if math.Abs(next-tt) < 1e-12 {
			break
		}
		tt = next
	}
	return tt, at, u, v
}

// rowTime is the delay of the stored picture's row v after the frame's time.
func (st *stage) rowTime(v float64) float64 {
	c := &st.scene.Camera
	if c.ReadoutS == 0 || st.cam.h < 2 {
		return 0
	}
	return c.ReadoutS * (v/float64(st.cam.h-1) - 0.5)
}

// shown samples the bob's face on a sunflower pattern and counts the points that
// lie in the picture and on no nearer bob.
func (st *stage) shown(i int, p Point) float64 {
	const n = 300
	b := &st.scene.Bobs[i]
	c := st.cam.toCamera(p.At)
	r := b.DiameterM / 2
	count := 0
	for k := range n {
		rho := r * math.Sqrt((float64(k)+0.5)/n)
		phi := float64(k) * math.Pi * (3 - math.Sqrt(5))
		q := Vec{c[0] + rho*math.Cos(phi), c[1] + rho*math.Sin(phi), c[2]}
		x, y := st.cam.flatten(q)
		u, v := st.cam.lens(x, y)
		if u < -0.5 || v < -0.5 || u > float64(st.cam.w)-0.5 || v > float64(st.cam.h)-0.5 {
			continue
		}
		hidden := false
		for j := range st.scene.Bobs {
			o := &st.scene.Bobs[j]
			if j == i || o.Still {
				continue
			}
			oc := st.cam.toCamera(o.At(p.T))
			if oc[2] < c[2] && st.cam.offRay(oc, x, y) < o.DiameterM/2 {
				hidden = true
				break
			}
		}
		if !hidden {
			count++
		}
	}
	return float64(count) / n
}
