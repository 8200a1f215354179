package samples

import (
	"bufio"
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"strconv"

	"lodeswing/analyze/toy"
)

// writeTruth writes one row per frame and bob: frame, t_s (the middle of the
// exposure of the bob's own row, in seconds of the toy's time since the first
// frame), bob, x_m, y_m, z_m (world), u_px, v_px (image of the centre in the
// upright picture), shown (share of its face that is in the picture and
// uncovered), part, angle_rad and rate_rad_s (of the part that it sits on; for
// a ball joint the angle from hanging).
func (t *Take) writeTruth(path string) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	buffer := bufio.NewWriter(f)
	w := csv.NewWriter(buffer)
	if err := w.Write([]string{"frame", "t_s", "bob", "x_m", "y_m", "z_m", "u_px", "v_px", "shown", "part", "angle_rad", "rate_rad_s"}); err != nil {
		return err
	}
	part := map[string]string{}
	for _, b := range t.Rig.Bobs {
		part[b.Name] = b.Part
	}
	num := func(x float64, digits int) string { return strconv.FormatFloat(x, 'f', digits, 64) }
	for i := range t.Frames {
		for _, p := range t.Scene.Truth(t.Scene.Time(i)) {
			row := []string{
				strconv.Itoa(i), num(p.T, 9), p.Name, num(p.At[0], 9), num(p.At[1], 9), num(p.At[2], 9),
				num(p.U, 5), num(p.V, 5), num(p.Shown, 3), part[p.Name], "", "",
			}
			if k := t.motion.part(part[p.Name]); k >= 0 {
				a, rate := t.motion.angle(k, p.T)
				row[10], row[11] = num(a, 9), num(rate, 9)
			}
			if err := w.Write(row); err != nil {
				return err
			}
		}
	}
	w.Flush()
	if err := w.Error(); err != nil {
		return err
	}
	if err := buffer.Flush(); err != nil {
		return err
	}
	return f.Sync()
}

// Number is one number of the model that moved the toy.
type Number struct {
	Name  string  `json:"name"`
	Value float64 `json:"value"` // SI
	Unit  string  `json:"unit"`
}

// Happened is something that happened in the film: a kick, a turning point, a pass.
type Happened struct {
	TimeS    float64 `json:"t_s"`
	What     string  `json:"what"`
	Part     string  `json:"part"`
	AngleRad float64 `json:"angle_rad"`
	RateRadS float64 `json:"rate_rad_s"`
	EnergyJ  float64 `json:"energy_J,omitempty"`
}

// Truth is what truth.json holds. All values are SI.
type Truth struct {
	Name       string     `json:"name"`
	Clip       string     `json:"clip"`
	Frames     int        `json:"frames"`
	FramesPerS float64    `json:"frames_per_s"`
	PixelsPerM float64    `json:"pixels_per_m"`
	FocalPX    float64    `json:"focal_px"`
	DistanceM  float64    `json:"distance_m"`
	ReadoutS   float64    `json:"readout_s"`
	ExposureS  float64    `json:"exposure_s"`
	RollRad    float64    `json:"roll_rad"`
	TiltRad    float64    `json:"tilt_rad"`
	Numbers    []Number   `json:"numbers"`
	Small      []Small    `json:"small_swings,omitempty"`
	Events     []Happened `json:"events,omitempty"`
}

// Small is the small swing of a part that alone moves about its rest: the
// undamped period and the damping ratio as the amplitude goes to zero, from the
// linearised equation of motion; dry friction and kicks do not enter.
type Small struct {
	Part    string  `json:"part"`
	RestRad float64 `json:"rest_rad"`
	PeriodS float64 `json:"period_s"`
	Zeta    float64 `json:"zeta"`
}

// Numbers gives the model's numbers and derived truth.
func (t *Take) Numbers(clip string) *Truth {
	c := &t.Scene.Camera
	o := &Truth{
		Name: t.Rig.Name, Clip: clip, Frames: t.Frames, FramesPerS: t.Scene.FramesPerS,
		PixelsPerM: c.PixelsPerM, FocalPX: c.FocalPX, DistanceM: c.DistanceM,
		ReadoutS: c.ReadoutS, ExposureS: c.ExposureS, RollRad: c.Roll, TiltRad: c.Tilt,
	}
	if o.FocalPX == 0 {
		o.FocalPX = c.PixelsPerM * c.DistanceM
	}
	m := t.motion.model
	for i, p := range m.Params() {
		o.Numbers = append(o.Numbers, Number{p.Name, m.Get(i), p.Unit})
	}
	parts := m.Parts()
	for _, e := range t.motion.events {
		h := Happened{TimeS: e.T, What: e.Kind.String(), EnergyJ: e.Energy}
		if e.Part >= 0 && e.Part < len(parts) {
			h.Part = parts[e.Part]
			h.AngleRad, h.RateRadS = t.motion.angle(e.Part, e.T)
		}
		o.Events = append(o.Events, h)
	}
	if m.Freedoms() == 1 {
		if s, ok := smallSwing(m.Clone()); ok {
			o.Small = append(o.Small, s)
		}
	}
	return o
}

// smallSwing linearises a toy of one freedom about the rest nearest to hanging;
// it takes m's dry friction and air drag away, which have no linear part.
func smallSwing(m *toy.Model) (s Small, ok bool) {
	for _, law := range []string{".friction.dry", ".friction.drag"} {
		if i, err := m.Index(m.Parts()[0] + law); err == nil {
			m.Set(i, 0)
		}
	}
	y, dy := m.Rest(), make([]float64, m.StateLen())
	acc := func(angle, rate float64) float64 {
		m.SetAngle(y, 0, angle, rate)
		m.Derive(y, dy)
		sign := 1.0
		if a0, _ := m.Angle(y, 0); math.Signbit(a0) != math.Signbit(angle) {
			sign = -1
		}
		return sign * dy[1]
	}
	const d = 1e-4
	rest := 0.0
	for range 50 { // Newton on the torque
		f, slope := acc(rest, 0), (acc(rest+d, 0)-acc(rest-d, 0))/(2*d)
		if slope >= 0 {
			return s, false // not a place of rest
		}
		rest -= f / slope
		if math.Abs(f/slope) < 1e-13 {
			break
		}
	}
	w2 := -(acc(rest+d, 0) - acc(rest-d, 0)) / (2 * d)
	damp := -(acc(rest, d) - acc(rest, -d)) / (2 * d)
	if w2 <= 0 {
		return s, false
	}
	w := math.Sqrt(w2)
	return Small{Part: m.Parts()[0], RestRad: rest, PeriodS: 2 * math.Pi / w, Zeta: damp / (2 * w)}, true
}

func (t *Take) writeNumbers(path, clip string) error {
	data, err := json.MarshalIndent(t.Numbers(clip), "", "  ")
	if err != nil {
		return err
	}
	return os.WriteFile(path, append(data, '\n'), 0o644)
}
