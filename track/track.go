// Package track holds the Track: where every bob was, when, and how well that
// is known. What comes in: positions from track/follow or a table on disk.
// What goes out: the same, for analysis. Units: seconds, metres in the plane of
// motion (x to the right in the picture, z up, origin at the scale's origin
// until a pivot is known), pixels of the upright picture (u right, v down).
package track

import "math"

// State says how a bob was seen in one frame.
type State uint8

// The states of a sample. Only Seen and PartlyHidden samples hold a position.
const (
	Missing      State = iota // not found in this frame
	Seen                      // found whole
	PartlyHidden              // found, but part of its outline was covered or fitted badly
	AtEdge                    // touches the picture's edge: a position is given, but it is not to be fitted
)

var stateWords = [...]string{"missing", "seen", "partly hidden", "at edge"}

// String gives the word that the track table uses.
func (s State) String() string {
	if int(s) < len(stateWords) {
		return stateWords[s]
	}
	return "unknown"
}

// ParseState is the inverse of String; ok is false for a word it does not know.
func ParseState(word string) (s State, ok bool) {
	for i, w := range stateWords {
		if w == word {
			return State(i), true
		}
	}
	return Missing, false
}

// Usable tells whether a sample in this state has a position fit for fitting.
func (s State) Usable() bool { return s == Seen || s == PartlyHidden }

// Cov is a symmetric 2×2 covariance of a pair (a, b).
type Cov struct{ AA, AB, BB float64 }

// Through returns J·c·Jᵀ for the 2×2 matrix J, row by row.
func (c Cov) Through(j [2][2]float64) Cov {
	a, b, d, e := j[0][0], j[0][1], j[1][0], j[1][1]
	return Cov{
		AA: a*a*c.AA + 2*a*b*c.AB + b*b*c.BB,
		AB: a*d*c.AA + (a*e+b*d)*c.AB + b*e*c.BB,
		BB: d*d*c.AA + 2*d*e*c.AB + e*e*c.BB,
	}
}

// Sigmas returns the two standard uncertainties.
func (c Cov) Sigmas() (a, b float64) { return math.Sqrt(c.AA), math.Sqrt(c.BB) }

// Sample is one bob in one frame. T is the middle of the exposure of the bob's
// own rows, in seconds since the clip's first frame, slow motion undone. X and Z
// are metres in the plane of motion, Plane their covariance from the picture
// alone (the camera's and ruler's share is in the Calibration, since it is
// common to all samples). U, V and Pixel are the same in pixels. Positions of
// Missing samples are NaN.
type Sample struct {
	Frame int
	T     float64
	X, Z  float64
	Plane Cov // m²
	U, V  float64
	Pixel Cov // px²
	State State
}

// Bob is one followed bob. All bobs of a track have one sample per frame, in
// the order of frames.
type Bob struct {
	Name string
	Part string // the rig's part that it sits on; empty when it names none
	// RadiusPX is the usual radius of its outline in the picture, px; 0 when
	// unknown (the track's table does not keep it).
	RadiusPX float64
	Samples  []Sample
}

// Usable returns the samples that have a position fit for fitting.
func (b *Bob) Usable() []Sample {
	out := make([]Sample, 0, len(b.Samples))
	for _, s := range b.Samples {
		if s.State.Usable() {
			out = append(out, s)
		}
	}
	return out
}

// Calibration is what is common to all samples of a track: how pixels became
// metres and how well that is known. Standard uncertainties; zero only where a
// quantity does not arise, never for "unknown".
type Calibration struct {
	MetresPerPixel  float64 `json:"metres_per_pixel"` // near the picture's centre, for people and for plots
	UScale          float64 `json:"u_scale_rel"`      // relative, of every length
	ScaleFrom       string  `json:"scale_from"`       // plain words: where the scale came from
	VerticalFrom    string  `json:"vertical_from"`    // plain words; empty when nothing gave the vertical and the picture's own upright was taken
	UVertical       float64 `json:"u_vertical_rad"`   // rad, of the direction of z
	VerticalKnown   bool    `json:"vertical_known"`   // false: z is merely the picture's upright
	UClock          float64 `json:"u_clock_rel"`      // relative, of every duration (50e-6 unless known)
	DistanceM       float64 `json:"distance_m"`       // lens to plane of motion; 0 when unknown
	ReadoutS        float64 `json:"readout_s"`        // top row to bottom row
	UReadoutS       float64 `json:"u_readout_s"`
	ExposureS       float64 `json:"exposure_s"`  // as far as it was seen; 0 when not
	OriginU         float64 `json:"origin_u_px"` // pixel position of x = z = 0
	OriginV         float64 `json:"origin_v_px"`
	PictureW        int     `json:"picture_width_px"` // upright picture, pixels
	PictureH        int     `json:"picture_height_px"`
	RateFactor      float64 `json:"rate_factor"`
	LensCorrected   bool    `json:"lens_corrected"`
	TiltCorrected   bool    `json:"tilt_corrected"`
	ScaleShares     []Share `json:"scale_shares_rel"`  // what UScale is made of, relative
	StandDriftRatio float64 `json:"stand_drift_ratio"` // motion of the base over the bob's motion, 0 when not measured
	Lens            Pinhole `json:"pinhole"`           // what track/camera needs to project again
}

// Pinhole is a camera as track/camera solved it: a pinhole with radial
// distortion, x_d = x(1 + K1·r² + K2·r⁴) in focal lengths from the picture's
// middle. Turn holds the camera's axes (right, down, ahead) as rows in world
// axes, Eye the lens's place in metres. The plane of motion is y = 0, or, seen
// from above, z = PlaneZ.
type Pinhole struct {
	FocalPX   float64    `json:"focal_px"`
	K1        float64    `json:"k1"`
	K2        float64    `json:"k2"`
	Turn      [9]float64 `json:"turn"`
	Eye       [3]float64 `json:"eye_m"`
	FromAbove bool       `json:"from_above"`
	PlaneZ    float64    `json:"plane_z_m"`
	Assumed   bool       `json:"assumed"` // nothing told the distance: FocalPX is that of a usual phone
	Unsure    []Unsure   `json:"unsure,omitempty"`
}

// Unsure is one independent source of uncertainty of a Pinhole. By is what one
// standard uncertainty of it changes: FocalPX (relative), K1, K2, a turn about the
// camera's own right, down and ahead (rad), Eye (m).
type Unsure struct {
	Source string     `json:"source"`
	By     [9]float64 `json:"by"`
}

// Share is one contribution to an uncertainty, in the unit of that uncertainty.
type Share struct {
	Source string  `json:"source"`
	U      float64 `json:"u"`
}

// Track is what following a clip yields.
type Track struct {
	Bobs     []Bob
	Cal      Calibration
	Cautions []string // plain sentences: what was wrong with the clip or the filming
	// BrokeAt is the time in seconds at which a damaged clip ended; NaN when whole.
	BrokeAt float64
	BrokeBy string // plain words about the damage
}

// Find returns the bob of that name, or nil.
func (t *Track) Find(name string) *Bob {
	for i := range t.Bobs {
		if t.Bobs[i].Name == name {
			return &t.Bobs[i]
		}
	}
	return nil
}
