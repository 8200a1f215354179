// Package kick keeps the energy ledger of a swing that a coil kicks: the energy
// at each turning point, what the coil gave and what friction took at each pass
// between two of them, and how far the two can be told apart.
//
// What comes in: the angle series of a hinged part (package series) and what the
// rig says of its weight, magnets and coil. What goes out: one row per pass,
// findings, a fit summary and curves. Units: seconds, radians, joules; joules per
// unit inertia, J/(kg·m²), where the rig gives neither weight nor inertia.
//
// At a turning point all energy is potential, so that its change over a pass is
// kick minus loss. The changes of all passes are fitted together by generalised
// least squares, neighbours being correlated through the turning point that they
// share. The loss is the sum of the three frictions' work along the pass; the
// kick is separate from it only where passes without a kick were filmed, or, on
// the assumption that the kick does not depend on speed, where the amplitude
// changes enough. At one amplitude nothing is separated, and nothing is claimed.
package kick

import (
	"context"
	"fmt"
	"math"
	"slices"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/series"
	"lodeswing/analyze/toy"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// Clip is one clip of the unit.
type Clip struct {
	Angle series.Angle
	// Track is what was followed; a part on a ball joint needs it beside its angle.
	Track *track.Track
	// Off: the coil was without its battery in this clip.
	Off bool
	// OffFromS and OffToS, where OffToS is above OffFromS, bound a stretch with
	// the coil off, s.
	OffFromS, OffToS float64
}

// Options says what is known of the part. OptionsFor fills it from a rig.
type Options struct {
	// NoLedger, when set, says in plain words why no ledger can be kept.
	NoLedger string
	// Weight is mass × gravity × distance of the centre of mass from the pivot,
	// N·m; Shares are its relative standard uncertainties by source. 0: unknown.
	Weight       float64
	WeightShares []finding.Share
	// Inertia about the pivot, kg·m², and its relative standard uncertainty; 0: unknown.
	Inertia, UInertia float64
	// Well, when set, is the potential energy in J against the angle (rad, to the
	// vertical), where springs or magnets act beside gravity. It needs Inertia.
	Well func(angle float64) float64
	// Ball, when set, says that the part is on a ball joint, and what it needs.
	Ball *Ball
	// Absent says which frictions the part is known not to have: viscous, air drag, dry.
	Absent [3]bool
	// Sensed is the least rate in rad/s at the lowest point that fires the coil; 0: unknown.
	Sensed float64
	// PushOver is the angle from the lowest point over which the coil pushes, rad.
	PushOver float64
	// Coil is how people call the coil that kicks.
	Coil string
	// Battery, when set, gives the charge in A·s that one kick draws at an amplitude
	// in rad, by the rig's data of winding and supply; Capacity in A·s and Supply in V
	// are the rig's.
	Battery          func(amplitude float64) (charge float64, err error)
	Capacity, Supply float64
	// Current, when above zero, is the mean current from the battery in A, as it was
	// measured, and UCurrent its relative standard uncertainty. Cell and InSeries name
	// its cells (rig.Cells).
	Current, UCurrent float64
	Cell              string
	InSeries          float64
}

// Parts names the parts that the rig's coils kick, each once.
func Parts(r *rig.Rig) []string {
	var out []string
	for i := range r.Coils {
		c := &r.Coils[i]
		part, nearest := c.Part, math.Inf(1)
		at := rig.XYZ(c.AtM)
		for j := range r.Magnets {
			m := &r.Magnets[j]
			if c.Part != "" || m.Part == "" || m.Part == rig.Base {
				continue
			}
			// Places in the parts' own axes are near enough to choose between parts.
			p := rig.XYZ(m.AtM)
			if d := math.Hypot(math.Hypot(p[0]-at[0], p[1]-at[1]), p[2]-at[2]); d < nearest {
				part, nearest = m.Part, d
			}
		}
		if part != "" && !slices.Contains(out, part) {
			out = append(out, part)
		}
	}
	return out
}

// OptionsFor takes what a rig knows of a part. clip is the rig's entry of the
// clip and may be nil.
func OptionsFor(r *rig.Rig, part string, clip *rig.Clip) Options {
	o := Options{}
	var p *rig.Part
	for i := range r.Parts {
		if r.Parts[i].Name == part {
			p = &r.Parts[i]
		}
	}
	if p == nil {
		o.NoLedger = fmt.Sprintf("the rig has no part %q", part)
		return o
	}
	switch {
	case p.Joint == "ball":
		o.ball(r, p)
	case p.Joint == "pin":
		o.NoLedger = fmt.Sprintf("%q turns on a pin: it has no lowest point to pass", part)
	case p.On != "" && p.On != rig.Base:
		o.NoLedger = fmt.Sprintf("%q sits on %q and trades energy with it", part, p.On)
	}
	for _, q := range r.Parts {
		if q.On == part {
			o.NoLedger = fmt.Sprintf("%q carries %q and trades energy with it", part, q.Name)
		}
	}
	if o.NoLedger != "" {
		return o
	}
	for i := range r.Coils {
		if k := &r.Coils[i]; k.Part == part || k.Part == "" {
			o.Coil, o.Sensed, o.Capacity, o.Supply = k.Name, k.SensedRadS.Or(0), k.CapacityAs.Or(0), k.SupplyV.Or(0)
			o.Cell, o.InSeries = k.Cell, k.InSeries.Or(1)
			if k.CurrentA.Set && k.CurrentA.V > 0 {
				o.Current, o.UCurrent = k.CurrentA.V, k.CurrentA.U/k.CurrentA.V
			}
			for _, m := range r.Magnets {
				if at := rig.XYZ(m.AtM); m.Part == part && k.WidthM.Set && math.Hypot(at[0], at[2]) > 0 {
					o.PushOver = k.WidthM.V / math.Hypot(at[0], at[2])
				}
			}
			if clip != nil && clip.SupplyV.Set {
				o.Supply = clip.SupplyV.V
			}
		}
	}
	if o.Coil == "" {
		o.Coil = "the coil"
	}
	f := p.Friction
	for j, v := range [3]rig.Value{f.Viscous, f.Drag, f.Dry} {
		o.Absent[j] = v.Known() && v.V == 0
	}
	if o.Absent == [3]bool{true, true, true} {
		o.Absent = [3]bool{}
	}
	o.weigh(r, p)
	if o.Ball == nil {
		o.Battery = charge(r, part)
	}
	if o.Ball == nil && (p.Upright || series.Pulled(r, part) != "" && bends(r, p)) {
		o.bend(r, p)
	}
	return o
}

// weigh takes weight moment and inertia from the rig.
func (o *Options) weigh(r *rig.Rig, p *rig.Part) {
	if p.Inertia.Known() && p.Inertia.V > 0 {
		o.Inertia, o.UInertia = p.Inertia.V, p.Inertia.U/p.Inertia.V
	}
	if !p.MassKg.Known() || len(p.CentreM) < 2 {
		return
	}
	c := rig.XYZ(p.CentreM)
	l := math.Hypot(c[0], c[2])
	if l == 0 {
		return
	}
	const g, uG, uCentre = 9.80665, 0.01, 0.5e-3 // CGPM 1901; the world's spread is ±0.3 %, a rig may give its own
	gravity, uGravity := r.Gravity.Or(g), uG
	if r.Gravity.Set {
		uGravity = r.Gravity.U
	}
	o.Weight = p.MassKg.V * gravity * l
	o.WeightShares = []finding.Share{
		{Source: "the rig's mass", U: p.MassKg.U / p.MassKg.V},
		{Source: "the rig's centre of mass", U: p.UCentreM.Or(uCentre) / l},
		{Source: "gravity", U: uGravity / gravity},
	}
}

// bends tells whether a spring or a base magnet bends the part's potential.
func bends(r *rig.Rig, p *rig.Part) bool {
	if s := p.Spring; s.Rate.Fit || s.Rate.V != 0 || s.Cubic.Fit || s.Cubic.V != 0 {
		return true
	}
	for _, m := range r.Magnets {
		if m.Part != p.Name {
			return true
		}
	}
	return false
}

// bend makes the potential of a part on which springs or magnets act.
func (o *Options) bend(r *rig.Rig, p *rig.Part) {
	for _, m := range r.Magnets {
		if m.Part != p.Name && m.Part != rig.Base && m.Part != "" {
			o.NoLedger = fmt.Sprintf("the magnet on %q moves and trades energy with %q", m.Part, p.Name)
			return
		}
		if !m.Moment.Known() && (m.Cylinder == nil || m.Cylinder.RemanenceT.Fit) || m.GapFit || m.GapM.Fit {
			o.NoLedger = fmt.Sprintf("the energy at a turning point hangs on the strength of the magnet %q, which the rig leaves to be fitted; match it first and measure again with the fitted rig", m.Name)
			return
		}
	}
	if s := p.Spring; s.Rate.Fit || s.Cubic.Fit || s.RestRad.Fit || o.Inertia == 0 || o.Weight == 0 {
		o.NoLedger = fmt.Sprintf("springs or magnets act on %q: the ledger needs its mass, centre, inertia and springs as numbers in the rig", p.Name)
		return
	}
	m, err := toy.New(r)
	if err != nil {
		o.NoLedger = err.Error()
		return
	}
	k, err := m.Part(p.Name)
	if err != nil {
		o.NoLedger = err.Error()
		return
	}
	y := m.Rest()
	o.Well = func(angle float64) float64 {
		m.SetAngle(y, k, angle, 0)
		return m.Energy(y).Total()
	}
}

// Pass is one row of the ledger: a trip through the lowest point. What is not
// known is NaN.
type Pass struct {
	T         float64 // s, midway between its turning points
	Clip      int     // index of the clip
	Rightward bool
	Before    float64 // J, energy at the turning point before it
	UBefore   float64
	Net       float64 // J, kick minus loss
	UNet      float64
	Amplitude float64 // rad, mean of both sides
	Speed     float64 // rad/s at the lowest point
	Kick      float64 // J
	UKick     float64
	Loss      float64 // J
	ULoss     float64
	State     State
}

// State says what the coil did at a pass.
type State uint8

// What the coil did.
const (
	Kicked State = iota
	Off          // known or found to be without its battery
	Slow         // too slow to be sensed
	Missed       // no kick, though the passes around had one
	Double       // twice the usual kick
	Odd          // neither: something else gave or took energy
)

func (s State) String() string {
	return [...]string{"kicked", "coil off", "too slow", "missed", "double", "odd"}[s]
}

// Result is what the ledger tells.
type Result struct {
	Part     string
	Unit     string // of energies: "J" or "J/(kg·m²)"
	Passes   []Pass
	Findings []finding.Finding
	Fits     []finding.Fit
	Curves   []finding.Curve
	Cautions []string
	// Separated tells whether kick and loss could be told apart, and How by what.
	Separated bool
	How       Separation
	Idle      bool // no kick was seen where one was to be expected
	// Of the middle of the kicked passes' amplitudes; J.
	Amplitude, Kick, UKick, Loss, ULoss float64
	// CovKickLoss is their covariance, J².
	CovKickLoss   float64
	Omega, UOmega float64 // of small swings, rad/s; 0 where springs or magnets act

	ledger *ledger
}

// Separation is what told kick and loss apart.
type Separation uint8

// How kick and loss were told apart.
const (
	Nothing  Separation = iota
	CoilOff             // passes with the coil off
	Between             // the free motion between the pushes
	Constant            // by the change of amplitude, if the kick does not depend on speed
	Gaps                // single passes that seem to have had no kick
)

// Analyze keeps the ledger of one part over its clips; the first is the one that
// is told about. An error is returned where no ledger can be kept, in plain words.
func Analyze(ctx context.Context, clips []Clip, opt Options) (*Result, error) {
	if len(clips) == 0 {
		return nil, fmt.Errorf("kick: there is no clip")
	}
	part := clips[0].Angle.Part
	if opt.NoLedger != "" {
		return nil, fmt.Errorf("kick: no energy ledger: %s", opt.NoLedger)
	}
	open := open
	if opt.Ball != nil {
		open = openBall
	}
	l, err := open(ctx, clips, opt)
	if err != nil {
		return nil, err
	}
	if err := l.settle(ctx); err != nil {
		return nil, err
	}
	res := &Result{Part: part, Unit: l.unit, ledger: l}
	l.report(res)
	return res, nil
}
