// Package rig holds the rig: one TOML file that says what is filmed, as plain
// data. What comes in: a rig file in the units that its keys name (millimetres,
// grams, degrees, milliseconds). What goes out: a Rig in SI units, every number
// with its standard uncertainty. It imports nothing of ours.
package rig

// Value is one number of a rig in SI units. U is its standard uncertainty:
// the rig's own u_key where it gives one, else the stated default of that key,
// never zero for a number that was given by hand (a number whose default is a
// share of its value and that is given as 0 says that there is none of it).
// A number that is free in the matching has U = 0.
type Value struct {
	V, U   float64
	Set    bool // the rig gives a number
	UGiven bool // the rig gives u_key
	Fit    bool // the rig says "fit": free in the matching; V is then a start, if Set
}

// Known tells whether the rig gives a number that may be used as it stands.
func (v Value) Known() bool { return v.Set && !v.Fit }

// Or returns the value if it is set and otherwise x.
func (v Value) Or(x float64) float64 {
	if v.Set {
		return v.V
	}
	return x
}

// Rig is a rig file. The tags name the keys; a key's ending names the unit of
// the file, and the field holds SI. A field of type Value takes `key = number`,
// `key = "fit"` or `key = "fit from 1.1"` where its tag allows it, and
// `u_key = number`. In a tag, u= is the default standard uncertainty in the
// file's unit, rel_u= the same as a share of the value; pos and nonneg bound the
// number. u=0 marks a setting or an exact count.
type Rig struct {
	Path    string   `rig:"-"` // where it was read from, for messages
	Name    string   `rig:"name"`
	Camera  Camera   `rig:"camera"`
	Scale   Scale    `rig:"scale"`
	Bobs    []Bob    `rig:"bob"`
	Parts   []Part   `rig:"part"`
	Magnets []Magnet `rig:"magnet"`
	Coils   []Coil   `rig:"coil"`
	Marks   []Mark   `rig:"mark"`
	Clips   []Clip   `rig:"clip"`
	Claims  []Claim  `rig:"claim"`
	Decay   Decay    `rig:"decay"`
	Fit     Fit      `rig:"fit"`
	Start   []Start  `rig:"start"`
	Film    Film     `rig:"film"`
	Fitted  Fitted   `rig:"fitted"`
	// Gravity is the local acceleration of free fall in m/s².
	Gravity Value `rig:"gravity_m_s2,u=0.01,pos"`
}

// Camera says how the clip was taken.
type Camera struct {
	ReadoutS   Value        `rig:"readout_ms,u=1"`             // rolling shutter, top row to bottom row
	ExposureS  Value        `rig:"exposure_ms,u=1,pos"`        // one frame's exposure, if known
	RateFactor Value        `rig:"rate_factor,u=0,pos"`        // recorded frames/s over played frames/s
	FramesPerS Value        `rig:"frames_per_s,u=0,pos"`       // numbered pictures only
	ClockPPM   Value        `rig:"clock_ppm,u=50"`             // the camera clock's known error, + when it runs fast
	DistanceM  Value        `rig:"distance_mm,rel_u=0.02,pos"` // lens to plane of motion
	PlumbPX    [][2]float64 `rig:"plumb_px"`                   // two or more points of a true vertical, upright picture
	PlumbUPX   Value        `rig:"plumb_reading_px,u=0,pos"`   // how well a plumb point was read (default 0.7 px)
	FocalPX    Value        `rig:"focal_px,rel_u=0.02,pos"`    // focal length in pixels, if known
	Lens       []float64    `rig:"lens"`                       // radial distortion k1, k2 of the lens, if known
	Vertical   string       `rig:"vertical"`                   // "" (plumb line or target) | "rest" (a clip with no magnet or spring acting) | "picture"
	TiltRad    Value        `rig:"tilt_deg,u=1"`               // camera looks down by this angle
	FromAbove  bool         `rig:"from_above"`                 // camera looks down on the toy from above
}

// Scale says how pixels become metres.
type Scale struct {
	LengthM  Value        `rig:"length_mm,u=0.5,pos"`     // a known length
	DepthM   Value        `rig:"depth_mm,u=1"`            // this far in front of (+) or behind the plane of motion
	EndsPX   [][2]float64 `rig:"ends_px"`                 // its two ends in the upright picture
	EndsUPX  Value        `rig:"ends_reading_px,u=0,pos"` // how well an end was read (default 0.5 px)
	Target   string       `rig:"target"`                  // name of a printed target in the picture, as `lodeswing target` names it
	MarkLook string       `rig:"mark_look"`               // "dark" | "light" | a colour: find two round marks, LengthM apart, by itself
	OriginPX []float64    `rig:"origin_px"`               // pixel of the plane's origin; default: first pivot, or the picture's centre
}

// Bob is one thing to follow.
type Bob struct {
	Name      string    `rig:"name"`
	Colour    string    `rig:"colour"` // "#rrggbb"
	Look      string    `rig:"look"`   // "dark" | "light" | "moving"
	DiameterM Value     `rig:"diameter_mm,rel_u=0.02,pos"`
	Part      string    `rig:"part"`     // the part that it sits on
	AtM       []float64 `rig:"at_mm"`    // where, in the part's own axes: [x, z] or [x, y, z]
	StartPX   []float64 `rig:"start_px"` // where it is in the first frame, if it must be told
	Ball      bool      `rig:"ball"`     // a sphere (default true when it has a diameter); false: a flat disc
	BallSet   bool      `rig:"-"`
	DepthM    Value     `rig:"depth_mm,u=1"` // in front of (+) the plane of motion
}

// Part is one rigid part of the toy.
type Part struct {
	Name           string    `rig:"name"`
	On             string    `rig:"on"`       // the part it is hinged to; "" is the base
	Joint          string    `rig:"joint"`    // "hinge" | "ball" | "pin"
	Upright        bool      `rig:"upright"`  // standing part: its rest is up, on a spring stem
	Flat           bool      `rig:"flat"`     // a pin about z: the toy lies flat
	PivotM         []float64 `rig:"pivot_mm"` // in the axes of the part it is on: [x, z] or [x, y, z]
	PivotFromTrack bool      `rig:"-"`        // pivot_mm = "from track"
	MassKg         Value     `rig:"mass_g,rel_u=0.005,pos"`
	UPivotM        Value     `rig:"pivot_reading_mm,u=0,pos"`              // standard uncertainty of each coordinate of pivot_mm (default 0.5 mm)
	CentreM        []float64 `rig:"centre_mm"`                             // centre of mass in its own axes, hanging
	UCentreM       Value     `rig:"centre_reading_mm,u=0,pos"`             // standard uncertainty of each coordinate of centre_mm (default 0.5 mm)
	Inertia        Value     `rig:"inertia_g_mm2,rel_u=0.01,fit,pos"`      // about the pivot, hinge or pin axis; ball: about a transverse axis through the pivot
	SpinInertia    Value     `rig:"spin_inertia_g_mm2,rel_u=0.02,fit,pos"` // ball: about its own long axis
	Friction       Friction  `rig:"friction"`
	Spring         Spring    `rig:"spring"`
}

// Friction is a joint's friction: torque −Viscous·ω − Drag·|ω|ω − Dry·sgn ω.
type Friction struct {
	Viscous Value `rig:"viscous,rel_u=0.1,fit,nonneg"` // N·m·s/rad
	Drag    Value `rig:"drag,rel_u=0.1,fit,nonneg"`    // N·m·s²/rad²
	Dry     Value `rig:"dry,rel_u=0.1,fit,nonneg"`     // N·m
}

// Spring is a torsion spring at the joint: torque −Rate·δ − Cubic·δ³, δ = angle − Rest.
type Spring struct {
	Rate    Value `rig:"rate_mN_m,rel_u=0.02,fit,nonneg"` // N·m/rad
	Cubic   Value `rig:"cubic_mN_m,rel_u=0.05,fit"`       // N·m/rad³
	RestRad Value `rig:"rest_deg,u=0.5,fit"`
}

// Magnet is one magnet on a part or on the base. Axis is in the part's axes
// (world axes for the base), [x, z] or [x, y, z], and points from south to north.
type Magnet struct {
	Name   string    `rig:"name"`
	Part   string    `rig:"part"` // "base" for one that does not move
	AtM    []float64 `rig:"at_mm"`
	UAtM   Value     `rig:"at_reading_mm,u=0,pos"` // standard uncertainty of each coordinate of at_mm (default 0.5 mm)
	GapFit bool      `rig:"at_fit"`                // the magnet's distance is free in the matching; the same as gap_mm = "fit"
	// GapM, for a base magnet, is the distance of its centre from that of the
	// nearest moving magnet, both at rest. Where it is set, the magnet stands at
	// that distance in the direction that at_mm gives; where it is not, at_mm holds.
	GapM     Value     `rig:"gap_mm,u=0.5,fit,pos"`
	Axis     []float64 `rig:"axis"`
	UAxisRad Value     `rig:"axis_reading_deg,u=0,pos"` // standard uncertainty of the direction of axis, each way (default 1°)
	Moment   Value     `rig:"moment_A_m2,rel_u=0.05,fit"`
	Cylinder *Cylinder `rig:"cylinder"`
}

// Cylinder is an axially magnetised cylinder.
type Cylinder struct {
	DiameterM  Value `rig:"diameter_mm,u=0.05,pos"`
	HeightM    Value `rig:"height_mm,u=0.05,pos"`
	RemanenceT Value `rig:"remanence_T,rel_u=0.03,fit,pos"`
	Recoil     Value `rig:"recoil,u=0.02,pos"` // relative recoil permeability, default 1.05
}

// Coil is a kicker. Either KickJ per pass is given, or the winding and supply
// from which a pulse follows.
type Coil struct {
	Name       string    `rig:"name"`
	Part       string    `rig:"part"` // the part that carries the sensed magnet; default: the nearest
	AtM        []float64 `rig:"at_mm"`
	Axis       []float64 `rig:"axis"`                          // default [0, 1]
	KickJ      Value     `rig:"kick_mJ,rel_u=0.05,fit,nonneg"` // energy per pass
	SensedRadS Value     `rig:"sensed_rad_s,rel_u=0.1,nonneg"` // least angular speed that fires it
	WidthM     Value     `rig:"width_mm,rel_u=0.1,pos"`        // over which the push acts
	Turns      Value     `rig:"turns,u=1,pos"`
	RadiusM    Value     `rig:"radius_mm,u=0.5,pos"`
	Ohm        Value     `rig:"resistance_ohm,rel_u=0.02,pos"`
	SupplyV    Value     `rig:"supply_V,u=0.05,nonneg"`
	PulseS     Value     `rig:"pulse_ms,rel_u=0.05,pos"`
	TriggerV   Value     `rig:"trigger_V,rel_u=0.1,nonneg"`       // induced voltage that fires it
	CapacityAs Value     `rig:"capacity_mAh,rel_u=0.1,pos"`       // of the battery; A·s
	Cell       string    `rig:"cell"`                             // its cells, by one of the usual names in Cells, where capacity_mAh is not known
	InSeries   Value     `rig:"cells,u=0,pos"`                    // default 1
	CurrentA   Value     `rig:"current_mA,rel_u=0.05,pos"`        // mean current from the battery while the toy runs, if it was measured
	Eddy       Value     `rig:"eddy_uN_m_s,rel_u=0.1,fit,nonneg"` // local eddy-current drag right over it, N·m·s
}

// Cells are the names that a coil's cell may have.
var Cells = []string{"9 V block", "AA", "AAA", "C", "D", "CR2032", "LR44"}

// Mark is a fixed mark to be watched: one on the stand and one on the base show
// whether the base rocks.
type Mark struct {
	Name string    `rig:"name"`
	On   string    `rig:"on"` // "stand" | "base"
	PX   []float64 `rig:"px"`
}

// Clip is one of several clips of one unit and what differed in it.
type Clip struct {
	File         string               `rig:"file"`
	Battery      bool                 `rig:"battery"` // default true
	Without      []string             `rig:"without"`
	Moved        map[string][]float64 `rig:"moved_mm"` // name of a magnet -> its at_mm in this clip
	SupplyV      Value                `rig:"supply_V,u=0.05,nonneg"`
	TemperatureC Value                `rig:"temperature_C,u=1"`
	PushedAtS    []float64            `rig:"pushed_at_s"`
}

// Claim is a statement on an exhibit's label. Exactly one key is set.
type Claim struct {
	Label               string `rig:"label"` // the label's own words
	RunsForS            Value  `rig:"runs_for_min,u=0,pos"`
	HandsOverWithinS    Value  `rig:"hands_over_within_s,u=0,pos"`
	NeverSettles        bool   `rig:"never_settles"`
	AmplitudeAtLeastRad Value  `rig:"amplitude_at_least_deg,u=0,pos"`
	PeriodS             Value  `rig:"period_s,u=0,pos"`
}

// Decay says which stretch is the free decay, where the program shall not find
// it by itself.
type Decay struct {
	FromS Value `rig:"from_s,u=0,nonneg"`
	ToS   Value `rig:"to_s,u=0,nonneg"`
}

// Fit says how the matching is bound.
type Fit struct {
	Equal  [][]string            `rig:"equal"`  // ties, "name.quantity"
	Bounds map[string][2]float64 `rig:"bounds"` // "name.quantity" -> least and greatest, SI here, the rig's units in the file
}

// Fitted is in a fitted.toml only: which numbers were fitted, and their
// covariance. Such a number stands in its own place with its u_key; a new
// matching takes it as free again, from there.
type Fitted struct {
	Of         []string    `rig:"of"`         // addresses, "name.quantity"
	Covariance [][]float64 `rig:"covariance"` // SI here, the rig's units in the file
}

// Start is a part's state when a simulation or a film begins.
type Start struct {
	Part            string `rig:"part"`
	AngleRad        Value  `rig:"angle_deg,u=0"`   // hinge, pin: from its rest; ball: polar angle from hanging
	AzimuthRad      Value  `rig:"azimuth_deg,u=0"` // ball: direction of the tilt, from +x towards +y
	RateRadS        Value  `rig:"rate_deg_s,u=0"`  // hinge, pin; ball: rate of the polar angle
	AzimuthRateRadS Value  `rig:"azimuth_rate_deg_s,u=0"`
	SpinRadS        Value  `rig:"spin_deg_s,u=0"` // ball: about its own axis
}

// Film says how the film maker renders this toy.
type Film struct {
	WidthPX      Value     `rig:"width_px,u=0,pos"`
	HeightPX     Value     `rig:"height_px,u=0,pos"`
	FramesPerS   Value     `rig:"frames_per_s,u=0,pos"`
	DurationS    Value     `rig:"duration_s,u=0,pos"`
	PixelsPerM   Value     `rig:"pixels_per_mm,u=0,pos"` // in the plane of motion; px/m
	CentreM      []float64 `rig:"centre_mm"`             // point of the plane that the camera looks at
	Noise        Value     `rig:"noise,u=0,nonneg"`      // sensor noise, grey levels r.m.s.
	Texture      Value     `rig:"texture,u=0,nonneg"`    // wall's texture, grey levels r.m.s.
	MegabitPerS  Value     `rig:"megabit_per_s,u=0,pos"`
	Seed         Value     `rig:"seed,u=0,nonneg"`
	VariableRate bool      `rig:"variable_rate"`
	Clutter      bool      `rig:"clutter"`
	Glossy       bool      `rig:"glossy"`
	Sharpening   Value     `rig:"sharpening,u=0,nonneg"` // a phone's halo, 0 none … 1 strong
	Blur         Value     `rig:"blur_px,u=0,nonneg"`    // the lens's Gaussian blur, px; default 0.8
	Shadow       Value     `rig:"shadow,u=0,nonneg"`     // 0 none … 1: share of the light that a bob's shadow takes away
	Uneven       Value     `rig:"uneven,u=0,nonneg"`     // grey levels by which the wall's brightness varies over the picture
	RollRad      Value     `rig:"roll_deg,u=0"`          // the phone is held this far from level; the content turns clockwise
	TurnedRad    Value     `rig:"turned_deg,u=0"`        // rotation flag: 90, 180 or 270 for a clip stored turned
	HEVC         bool      `rig:"hevc"`
}
