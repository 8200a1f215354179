package samples

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"lodeswing/samples/film"
	"lodeswing/track/rig"
)

// Colours of the bench, grey levels.
var (
	wallColour  = film.RGB{198, 196, 189}
	benchTop    = film.RGB{164, 137, 104}
	benchFront  = film.RGB{112, 88, 64}
	standColour = film.RGB{92, 96, 104}
	rodColour   = film.RGB{138, 140, 146}
	steelColour = film.RGB{168, 171, 178}
	coilColour  = film.RGB{128, 78, 46}
	markColour  = film.RGB{32, 32, 34}
	stickColour = film.RGB{232, 228, 214}
)

// set is a scene being built around a rig.
type set struct {
	r     *rig.Rig
	o     *motion
	s     *film.Scene
	until float64
	bench float64 // m, height of the bench's top
	left  float64 // m, how far the toy reaches to the left and right
	right float64
}

// tilted tells that the camera looks down so much that the bench is the backdrop.
func (b *set) tilted() bool { return b.s.Camera.Tilt > 15*math.Pi/180 }

// scene builds the film's scene of a rig and its motion over until seconds.
func scene(r *rig.Rig, o *motion, until float64) (*film.Scene, error) {
	f := &r.Film
	b := &set{r: r, o: o, until: until, s: &film.Scene{}}
	s := b.s
	s.Camera = camera(r)
	s.FramesPerS = f.FramesPerS.Or(60)
	s.Seed = uint64(f.Seed.Or(1))
	s.Sharpening = f.Sharpening.Or(0)
	// Two thirds of the noise come from reading the sensor out, the rest from the
	// light itself, at middle grey.
	n := f.Noise.Or(0)
	s.Noise = film.Noise{Read: n * math.Sqrt(2.0/3), Shot: n * n / 3 / 128}
	s.Wall = film.Wall{
		Level: wallColour, Y: 0.12, Texture: f.Texture.Or(0),
		GradU: f.Uneven.Or(0), GradV: -0.7 * f.Uneven.Or(0), Vignette: min(0.01*f.Uneven.Or(0), 0.3),
	}
	s.Light = film.Light{From: film.Vec{-0.45, -1, 0.9}, Shadow: f.Shadow.Or(0)}
	if err := b.bobs(); err != nil {
		return nil, err
	}
	b.room()
	b.parts()
	b.fixed()
	b.ruler()
	b.plumb()
	if f.Clutter {
		b.clutter()
	}
	return s, nil
}

// camera is the film's camera, as the rig describes it.
func camera(r *rig.Rig) film.Camera {
	f := &r.Film
	c := film.Camera{
		Width: int(f.WidthPX.Or(1280)), Height: int(f.HeightPX.Or(720)),
		PixelsPerM: f.PixelsPerM.Or(1700), DistanceM: r.Camera.DistanceM.Or(1.2),
		Tilt: r.Camera.TiltRad.Or(0), Roll: f.RollRad.Or(0),
		Turned:   int(math.Round(f.TurnedRad.V * 180 / math.Pi)),
		ReadoutS: r.Camera.ReadoutS.Or(0), ExposureS: r.Camera.ExposureS.Or(0), BlurPX: f.Blur.Or(0.8),
	}
	if r.Camera.FromAbove && !r.Camera.TiltRad.Set {
		c.Tilt = math.Pi / 2
	}
	c.FocalPX = r.Camera.FocalPX.Or(0)
	if f.CentreM != nil {
		c.LookAt = film.Vec(rig.XYZ(f.CentreM))
	}
	if k := r.Camera.Lens; len(k) > 0 {
		c.K1 = k[0]
		if len(k) > 1 {
			c.K2 = k[1]
		}
	}
	return c
}

// colour reads "#rrggbb" or gives what a look stands for.
func colour(b *rig.Bob) film.RGB {
	switch {
	case b.Look == "dark":
		return film.RGB{34, 34, 38}
	case b.Look == "light":
		return film.RGB{244, 243, 238}
	case b.Look != "":
		return film.RGB{120, 96, 80}
	}
	return hex(b.Colour)
}

// hex reads "#rrggbb", whose form the rig's reader has checked.
func hex(s string) (c film.RGB) {
	x, err := strconv.ParseUint(strings.TrimPrefix(s, "#"), 16, 32)
	if err != nil {
		return film.RGB{128, 128, 128}
	}
	return film.RGB{float64(x >> 16 & 255), float64(x >> 8 & 255), float64(x & 255)}
}

func (b *set) bobs() error {
	for i := range b.r.Bobs {
		k := &b.r.Bobs[i]
		if !k.DiameterM.Set {
			return fmt.Errorf("[[bob]] %q has no diameter_mm: the film maker must know how large to draw it", k.Name)
		}
		at := rig.XYZ(k.AtM)
		gloss := 0.0
		if b.r.Film.Glossy {
			gloss = 0.7
		}
		b.s.Bobs = append(b.s.Bobs, film.Bob{
			Name: k.Name, Colour: colour(k), DiameterM: k.DiameterM.V, Gloss: gloss,
			Flat: k.BallSet && !k.Ball, At: b.o.point(b.o.part(k.Part), at),
		})
	}
	return nil
}

// room finds how much space the toy takes and sets the bench under it.
func (b *set) room() {
	low := math.Inf(1)
	for _, k := range b.s.Bobs {
		for t := 0.0; t < b.until; t += 0.02 {
			p := k.At(t)
			b.left, b.right = min(b.left, p[0]-k.DiameterM/2), max(b.right, p[0]+k.DiameterM/2)
			low = min(low, p[2]-k.DiameterM/2)
		}
	}
	low -= 0.012
	for i := range b.r.Magnets {
		if m := &b.r.Magnets[i]; b.o.part(m.Part) < 0 {
			low = min(low, rig.XYZ(m.AtM)[2]-0.008)
		}
	}
	for i := range b.r.Coils {
		if z := rig.XYZ(b.r.Coils[i].AtM)[2]; z < low+0.03 {
			low = min(low, z-0.008)
		}
	}
	for i := range b.r.Parts {
		if p := &b.r.Parts[i]; p.Upright && b.o.part(p.On) < 0 {
			low = min(low, rig.XYZ(p.PivotM)[2]-0.012)
		}
	}
	b.bench = low
	s := b.s
	if b.tilted() {
		s.Wall.Table, s.Wall.Z, s.Wall.Level = true, low, film.RGB{186, 176, 160}
		return
	}
	wide, wall, edge := 4.0, s.Wall.Y, -min(0.1, s.Camera.DistanceM/2)
	s.Plates = append(
		s.Plates,
		film.Plate{Ground: true, Colour: benchTop, Corners: []film.Vec{{-wide, wall, low}, {wide, wall, low}, {wide, edge, low}, {-wide, edge, low}}},
		film.Plate{Ground: true, Colour: benchFront, Corners: []film.Vec{{-wide, edge, low}, {wide, edge, low}, {wide, edge, low - 4}, {-wide, edge, low - 4}}},
	)
}

func still(p film.Vec) func(float64) film.Vec { return func(float64) film.Vec { return p } }

// rod draws a fixed bar.
func (b *set) rod(c film.RGB, d float64, p, q film.Vec) {
	b.s.Rods = append(b.s.Rods, film.Rod{Colour: c, DiameterM: d, From: still(p), To: still(q), Still: true})
}

// spokes are the places of part k to which a bar leads from its pivot.
func (b *set) spokes(name string) [][3]float64 {
	var out [][3]float64
	add := func(at [3]float64) {
		if !slices.Contains(out, at) && math.Hypot(math.Hypot(at[0], at[1]), at[2]) > 2e-3 {
			out = append(out, at)
		}
	}
	for i := range b.r.Bobs {
		if b.r.Bobs[i].Part == name {
			add(rig.XYZ(b.r.Bobs[i].AtM))
		}
	}
	for i := range b.r.Magnets {
		if m := &b.r.Magnets[i]; m.Part == name && !b.inBob(m) {
			add(rig.XYZ(m.AtM))
		}
	}
	for i := range b.r.Parts {
		if b.r.Parts[i].On == name {
			add(rig.XYZ(b.r.Parts[i].PivotM))
		}
	}
	// The farthest first: what lies on the way to it needs no bar of its own.
	slices.SortFunc(out, func(p, q [3]float64) int { return cmp.Compare(norm(q), norm(p)) })
	var keep [][3]float64
	for _, p := range out {
		covered := false
		for _, q := range keep {
			cos := (p[0]*q[0] + p[1]*q[1] + p[2]*q[2]) / (norm(p) * norm(q))
			covered = covered || cos > 0.9999
		}
		if !covered {
			keep = append(keep, p)
		}
	}
	return keep
}

func norm(p [3]float64) float64 { return math.Sqrt(p[0]*p[0] + p[1]*p[1] + p[2]*p[2]) }

// parts draws what moves: bars from each pivot, magnets, hubs; and the stands.
func (b *set) parts() {
	for i := range b.r.Parts {
		p := &b.r.Parts[i]
		k := b.o.part(p.Name)
		for _, at := range b.spokes(p.Name) {
			// A bar ends inside what it carries and lies just behind it.
			end := at
			for _, bob := range b.r.Bobs {
				if bob.Part == p.Name && rig.XYZ(bob.AtM) == at {
					cut := 1 - 0.9*bob.DiameterM.V/2/norm(at)
					end = [3]float64{at[0] * cut, at[1] * cut, at[2] * cut}
				}
			}
			b.s.Rods = append(b.s.Rods, film.Rod{
				Colour: rodColour, DiameterM: 3.5e-3,
				From: b.o.point(k, [3]float64{0, 0.002, 0}), To: b.o.point(k, [3]float64{end[0], end[1] + 0.002, end[2]}),
			})
		}
		hub := film.Bob{
			Colour: standColour, DiameterM: 8e-3, At: b.o.point(k, [3]float64{0, -0.003, 0}), Flat: true,
			Unmarked: true, NoShadow: true,
		}
		if b.o.part(p.On) < 0 {
			hub.Still, hub.At = true, still(film.Vec(rig.XYZ(p.PivotM)))
			b.stand(p)
		}
		b.s.Bobs = append(b.s.Bobs, hub)
	}
	for i := range b.r.Magnets {
		m := &b.r.Magnets[i]
		at := rig.XYZ(m.AtM)
		if k := b.o.part(m.Part); k >= 0 && !b.inBob(m) {
			b.s.Bobs = append(b.s.Bobs, film.Bob{
				Colour: steelColour, DiameterM: magnetWidth(m), At: b.o.point(k, at), Unmarked: true,
			})
		}
	}
}

// inBob tells that a magnet is hidden inside a bob of its part.
func (b *set) inBob(m *rig.Magnet) bool {
	p := rig.XYZ(m.AtM)
	for _, k := range b.r.Bobs {
		q := rig.XYZ(k.AtM)
		if k.Part == m.Part && norm([3]float64{p[0] - q[0], p[1] - q[1], p[2] - q[2]}) < k.DiameterM.V/2 {
			return true
		}
	}
	return false
}

func magnetWidth(m *rig.Magnet) float64 {
	if m.Cylinder != nil {
		return m.Cylinder.DiameterM.V
	}
	return 0.010
}

// stand holds a pivot: a foot under a standing part, a gallows over a hanging
// one, a post behind a pin.
func (b *set) stand(p *rig.Part) {
	at := film.Vec(rig.XYZ(p.PivotM))
	switch {
	case p.Upright:
		b.s.Plates = append(b.s.Plates, box(at[0]-0.014, at[0]+0.014, b.bench, at[2]-0.002, at[1], standColour)...)
	case p.Joint == "pin":
		b.rod(standColour, 0.010, film.Vec{at[0], at[1] + 0.02, at[2]}, film.Vec{at[0], at[1] + 0.02, b.bench})
	default:
		x := b.left - 0.045
		if p.Joint == "ball" && b.tilted() {
			return
		}
		b.rod(standColour, 0.012, film.Vec{x, 0.05, b.bench}, film.Vec{x, 0.05, at[2] + 0.012})
		b.rod(standColour, 0.010, film.Vec{x, 0.05, at[2] + 0.012}, film.Vec{at[0] + 0.012, 0.02, at[2] + 0.012})
		b.rod(standColour, 0.006, film.Vec{at[0], 0.02, at[2] + 0.012}, film.Vec{at[0], 0.01, at[2]})
	}
}

// box is an upright block's front.
func box(x0, x1, z0, z1, y float64, c film.RGB) []film.Plate {
	top := film.RGB{min(c[0]*1.25, 255), min(c[1]*1.25, 255), min(c[2]*1.25, 255)}
	const deep = 0.03
	return []film.Plate{
		{Colour: top, Corners: []film.Vec{{x0, y - deep/2, z1}, {x1, y - deep/2, z1}, {x1, y + deep/2, z1}, {x0, y + deep/2, z1}}},
		{Colour: c, Corners: []film.Vec{{x0, y - deep/2, z0}, {x1, y - deep/2, z0}, {x1, y - deep/2, z1}, {x0, y - deep/2, z1}}},
	}
}

// fixed draws the base's magnets and the coils.
func (b *set) fixed() {
	for i := range b.r.Magnets {
		m := &b.r.Magnets[i]
		if b.o.part(m.Part) >= 0 {
			continue
		}
		at, w := film.Vec(rig.XYZ(m.AtM)), magnetWidth(m)/2
		if m.Cylinder == nil {
			w = 0.006
		}
		if foot := at[2] - 0.003; b.bench < foot {
			b.puck(film.Vec{at[0], at[1], foot}, w+0.006, foot-b.bench, standColour)
		}
		b.puck(film.Vec{at[0], at[1], at[2] + 0.003}, w, 0.006, steelColour)
	}
	for i := range b.r.Coils {
		k := &b.r.Coils[i]
		at, r := film.Vec(rig.XYZ(k.AtM)), k.RadiusM.Or(0.012)
		b.puck(at, r, 0.006, coilColour)
		b.s.Bobs = append(b.s.Bobs, film.Bob{ // its core
			Colour: film.RGB{70, 62, 56}, DiameterM: 0.7 * r, Flat: true, Normal: film.Vec{0, 0, 1}, Still: true, Plain: true,
			At: still(film.Vec{at[0], at[1] - 2e-4, at[2]}),
		})
		if at[2] > b.bench+0.05 { // held from behind
			b.rod(standColour, 0.008, film.Vec{at[0], 0.05, 0.012}, film.Vec{at[0], 0.05, at[2] - 0.003})
			b.rod(standColour, 0.006, film.Vec{at[0], 0.05, at[2] - 0.003}, film.Vec{at[0], 0.008, at[2] - 0.003})
		}
	}
}

// puck is a low cylinder that stands upright, its top's middle at top.
func (b *set) puck(top film.Vec, r, height float64, c film.RGB) {
	lower := film.Vec{top[0], top[1], top[2] - height}
	dark := film.RGB{c[0] * 0.72, c[1] * 0.72, c[2] * 0.72}
	disc := film.Bob{DiameterM: 2 * r, Flat: true, Normal: film.Vec{0, 0, 1}, Still: true, Plain: true}
	disc.Colour, disc.At = dark, still(lower)
	b.s.Bobs = append(b.s.Bobs, disc)
	b.s.Plates = append(b.s.Plates, film.Plate{Colour: dark, Corners: []film.Vec{
		{top[0] - r, top[1], lower[2]}, {top[0] + r, top[1], lower[2]}, {top[0] + r, top[1], top[2]}, {top[0] - r, top[1], top[2]},
	}})
	disc.Colour, disc.At = c, still(film.Vec{top[0], top[1] - 1e-4, top[2]})
	b.s.Bobs = append(b.s.Bobs, disc)
}
