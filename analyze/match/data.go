package match

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"slices"
	"sort"

	"lodeswing/analyze/magnet"
	"lodeswing/analyze/toy"
	"lodeswing/track"
	"lodeswing/track/camera"
	"lodeswing/track/rig"
)

// observation is one bob in one frame, or one row of an angle table.
type observation struct {
	who  int     // in watched
	t    float64 // s, the clip's own time
	a, b float64 // u, v in px; x, z in m; or the angle in rad
	// The residual is w·(measured − model): two rows of a Cholesky factor of the
	// inverse covariance. Angles have one row.
	w0, w1, w2 float64
	row        float64 // share of the read-out by which t depends on it
	weight     float64 // what the robust loss leaves
}

// watched is one bob or one part's angle.
type watched struct {
	name   string
	bob    int // index in the model's bobs, −1 for an angle
	part   int // index of its part
	at     [3]float64
	radius float64
	depth  float64
}

// clipData is one clip made ready.
type clipData struct {
	name     string
	entry    *rig.Clip
	track    *track.Track
	tables   []int // not nil for angle tables
	camera   *camera.Camera
	cameraOf int // the first clip by the same camera
	model    *toy.Model
	clones   []*toy.Model // one per worker
	moved    map[string]bool
	undriven bool
	above    bool
	uClock   float64

	watched  []watched
	obs      []observation
	segments []segment
	cutAt    [2]float64 // where the toy was taken to be when these were made
	left     []interval // what is left out: a hand
	battery  *switched  // nil: the same all through the clip
	slow     []slowPass // where the motion after has no bond with the motion before
	dims     int        // rows per observation
}

// its names something of this clip alone where there are several.
func (k *clipData) its(what string) string {
	if k.name == "" {
		return what
	}
	return what + ", " + k.name
}

func (k *clipData) place(axis string) string {
	return k.its("the pivot's place in the picture, " + axis)
}

func sameCamera(a, b *clipData) bool {
	if a.track == nil || b.track == nil {
		return false
	}
	p, q := a.track.Cal, b.track.Cal
	return reflect.DeepEqual(p.Lens, q.Lens) && p.ReadoutS == q.ReadoutS && p.UScale == q.UScale && p.UVertical == q.UVertical
}

// fitter holds one matching.
type fitter struct {
	rig    *rig.Rig
	opt    Options
	clips  []clipData
	params []param
	source []Clip // as they were given
	nv     int

	rate, angle float64 // typical speed (rad/s) and size of the motion (rad)
	bind        float64 // rad, how far the ends of stretches may be apart; +Inf: they are free
	lax         float64 // rad, the gap that merit weighs as one
	tol         float64
	exact       bool // all derivatives by central differences
	// oneMotion: each stretch begins exactly where the one before it ended. A
	// regular motion is brought to its optimum so; a chaotic one cannot be.
	oneMotion bool
	scatter   float64
	widened   float64 // by which the noise was taken larger than the track says
	giveUp    float64 // a trial ends where its residuals must stay larger than this; 0: never
	chi2      float64
	unsettled bool // the last step foreseen counts as an uncertainty of its own
	converged bool
	why       string
	cautions  []string
	final     *system
	growth    float64 // 1/s, of small deviations
}

func prepare(clips []Clip, r *rig.Rig, opt Options) (*fitter, error) {
	f := &fitter{rig: r, opt: opt, source: clips, tol: 1e-9, scatter: 1, widened: 1, lax: meritBind}
	for i := range clips {
		k, err := f.clip(&clips[i], len(clips) > 1)
		if err != nil {
			return nil, err
		}
		k.cameraOf = i
		for o := range i {
			if sameCamera(&f.clips[o], k) {
				k.cameraOf = o
				break
			}
		}
		f.clips = append(f.clips, *k)
	}
	return f, f.buildParams()
}

// temperature is the clips' mean one where the rig notes any, °C.
func (f *fitter) temperature() (t, u float64, ok bool) {
	n := 0.0
	for c := range f.clips {
		if e := f.clips[c].entry; e != nil && e.TemperatureC.Set {
			t += e.TemperatureC.V
			u = math.Max(u, e.TemperatureC.U)
			n++
		}
	}
	return t / n, u, n > 0
}

// warmth is what a magnet of clip c has of its strength at the clips' mean
// temperature: 1 where the rig notes none.
func (f *fitter) warmth(c int) float64 {
	mean, _, ok := f.temperature()
	e := f.clips[c].entry
	if !ok || e == nil || !e.TemperatureC.Set {
		return 1
	}
	return magnet.At20(1, mean, "") / magnet.At20(1, e.TemperatureC.V, "")
}

// variant is the rig as one clip had it.
func variant(r *rig.Rig, e *rig.Clip) (*rig.Rig, error) {
	c := r.Clone()
	if e == nil {
		return c, nil
	}
	gone := map[string]bool{}
	for _, name := range e.Without {
		if r.FindMagnet(name) == nil && r.FindPart(name) == nil && !hasCoil(r, name) {
			return nil, fmt.Errorf("[[clip]] %q is without %q, which is no magnet, part or coil of the rig", e.File, name)
		}
		gone[name] = true
	}
	for again := true; again; { // what stands on a part goes with it
		again = false
		for _, p := range c.Parts {
			if gone[p.On] && !gone[p.Name] {
				gone[p.Name], again = true, true
			}
		}
	}
	c.Parts = slices.DeleteFunc(c.Parts, func(p rig.Part) bool { return gone[p.Name] })
	c.Bobs = slices.DeleteFunc(c.Bobs, func(b rig.Bob) bool { return gone[b.Part] })
	c.Magnets = slices.DeleteFunc(c.Magnets, func(g rig.Magnet) bool { return gone[g.Name] || gone[g.Part] })
	c.Coils = slices.DeleteFunc(c.Coils, func(k rig.Coil) bool { return gone[k.Name] || gone[k.Part] })
	c.Start = nil
	for name, at := range e.Moved {
		g := c.FindMagnet(name)
		if g == nil {
			return nil, fmt.Errorf("[[clip]] %q moves %q, which is no magnet of the rig", e.File, name)
		}
		g.AtM, g.GapM, g.GapFit = at, rig.Value{}, false
	}
	if e.SupplyV.Set {
		for i := range c.Coils {
			c.Coils[i].SupplyV = e.SupplyV
		}
	}
	return c, nil
}

func hasCoil(r *rig.Rig, name string) bool {
	return slices.ContainsFunc(r.Coils, func(c rig.Coil) bool { return c.Name == name })
}

func (f *fitter) clip(in *Clip, several bool) (*clipData, error) {
	v, err := variant(f.rig, in.Entry)
	if err != nil {
		return nil, err
	}
	k := &clipData{entry: in.Entry, track: in.Track, moved: map[string]bool{}, above: f.rig.Camera.FromAbove, dims: 2}
	if several {
		k.name = in.Name
	}
	if in.Entry != nil {
		k.undriven = !in.Entry.Battery
		for name := range in.Entry.Moved {
			k.moved[name] = true
		}
	}
	k.undriven = k.undriven || len(v.Coils) == 0
	if k.model, err = toy.New(v); err != nil {
		return nil, err
	}
	if n := k.model.Freedoms(); n > f.nv {
		f.nv = n
	}
	if in.Track != nil {
		err = k.fromTrack(v, in.Track)
	} else {
		err = k.fromAngles(in)
	}
	if err != nil {
		return nil, err
	}
	sort.SliceStable(k.obs, func(i, j int) bool { return k.obs[i].t < k.obs[j].t })
	k.leaveHeld()
	if in.Entry != nil {
		k.leaveMarked(in.Entry.PushedAtS)
	}
	if len(k.obs) < fewest {
		return nil, fmt.Errorf("hardly anything of the clip%s is left without what is held or pushed by hand", k.its(""))
	}
	return k, nil
}

// fewest is how many positions a clip must have to be matched.
const fewest = 20

func (k *clipData) fromTrack(r *rig.Rig, tr *track.Track) error {
	cal := tr.Cal
	pixels := cal
	if c, err := camera.Restore(pixels); err == nil {
		k.camera = c
	}
	k.uClock = cal.UClock
	rows := cal
	rows.ReadoutS = 1
	unit, _ := camera.Restore(rows)
	for i := range tr.Bobs {
		b := &tr.Bobs[i]
		j := slices.Index(k.model.Bobs(), b.Name)
		if j < 0 {
			continue
		}
		w := watched{name: b.Name, bob: j, at: rig.XYZ(r.Bobs[j].AtM)}
		part, err := k.model.Part(r.Bobs[j].Part)
		if err != nil {
			continue
		}
		w.part = part
		if r.Bobs[j].Ball && r.Bobs[j].DiameterM.Set {
			w.radius = r.Bobs[j].DiameterM.V / 2
		}
		w.depth = r.Bobs[j].DepthM.Or(0)
		who := len(k.watched)
		k.watched = append(k.watched, w)
		for _, s := range b.Samples {
			if !s.State.Usable() {
				continue
			}
			o := observation{who: who, t: s.T, weight: 1}
			cov := s.Pixel
			if k.camera != nil {
				o.a, o.b = s.U, s.V
				o.row = unit.RowTime(s.U, s.V)
			} else {
				o.a, o.b, cov = s.X, s.Z, s.Plane
			}
			if !(cov.AA > 0) || !(cov.BB > 0) || math.IsNaN(o.a+o.b) {
				cov = track.Cov{AA: 0.1 * 0.1, BB: 0.1 * 0.1}
				if k.camera == nil {
					cov = track.Cov{AA: 1e-8, BB: 1e-8}
				}
			}
			// Inverse Cholesky: r0 = da/σa, r1 = (db − ρ da)/σ.
			d := cov.BB - cov.AB*cov.AB/cov.AA
			if !(d > 1e-6*cov.BB) {
				d, cov.AB = cov.BB, 0
			}
			o.w0 = 1 / math.Sqrt(cov.AA)
			o.w2 = 1 / math.Sqrt(d)
			o.w1 = -cov.AB / cov.AA * o.w2
			k.obs = append(k.obs, o)
		}
	}
	if len(k.obs) < fewest {
		return fmt.Errorf("the track%s holds only %d positions of bobs that sit on parts: the matching needs more", k.its(""), len(k.obs))
	}
	return nil
}

func (k *clipData) fromAngles(in *Clip) error {
	k.dims = 1
	for i := range in.Angles {
		a := &in.Angles[i]
		part, err := k.model.Part(a.Part)
		if err != nil && len(k.model.Parts()) == 1 && len(in.Angles) == 1 {
			part, err = 0, nil // one part, one table: no name is needed
		}
		if err != nil || !k.model.OneAxis(part) {
			continue
		}
		who := len(k.watched)
		k.watched = append(k.watched, watched{name: k.model.Parts()[part], bob: -1, part: part})
		k.tables = append(k.tables, i)
		if a.UClock > k.uClock {
			k.uClock = a.UClock
		}
		for j, t := range a.T {
			u := a.UAngle[j]
			if !(u > 0) {
				continue
			}
			k.obs = append(k.obs, observation{who: who, t: t, a: a.Angle[j], w0: 1 / u, weight: 1})
		}
	}
	if len(k.obs) < fewest {
		return errors.New("the angle tables hold too few rows for the rig's parts; name the part with --part")
	}
	return nil
}
