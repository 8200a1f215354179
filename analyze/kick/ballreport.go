package kick

import (
	"math"

	"lodeswing/analyze/finding"
)

// coilBudget is what the kick right over the coil owes to how well the rig knows where
// the coil stands and how far it is felt: the share of a kick that a pass had hangs
// on both. Errors of the directions act like an error of the coil's place, which is
// taken as 0.5 mm each way, as of the rig's magnets.
func (l *ledger) coilBudget(kick float64) []finding.Share {
	const uPlace = 0.5e-3
	k := l.opt.Ball.Coil
	reach := k.RadiusM.Or(k.WidthM.Or(0))
	if !(reach > 0) || !(k.KickJ.Set || k.KickJ.Fit) || l.best.kicks == 0 {
		return nil
	}
	effect := func(gain func(over [3]float64) float64) float64 {
		dy := make([]float64, len(l.rows))
		for i := range l.rows {
			r := &l.rows[i]
			for _, m := range r.meets {
				if m.gain > 0 {
					dy[i] -= r.state.share() * kick * (gain(m.over) - m.gain)
				}
			}
		}
		return l.best.response(dy)[0]
	}
	place := 0.0
	for e := range 2 {
		d := effect(func(over [3]float64) float64 {
			over[e] -= uPlace
			return math.Exp(-square(over) / reach / reach)
		})
		place = math.Hypot(place, d)
	}
	u := math.Max(k.RadiusM.U, 0.01*reach)
	size := effect(func(over [3]float64) float64 { return math.Exp(-square(over) / (reach + u) / (reach + u)) })
	return []finding.Share{{Source: "the coil's place, by the rig's", U: place}, {Source: "the rig's radius of the coil", U: math.Abs(size)}}
}

// pictures says what the energies hang on beside what turns angles into them.
func (l *ledger) pictures() string {
	if l.free != nil {
		return "pictures, camera, magnets, scatter of the kicks and choice of friction"
	}
	return "pictures, scatter of the kicks and choice of friction"
}

// ballCurves draws the ledger of a part on a ball joint: gain against how far
// beside the coil the magnet passed.
func (l *ledger) ballBalance(res *Result) finding.Curve {
	c := finding.Curve{
		Key: "kick-balance", Subject: l.part(), Title: "Gain of a pass against the distance from the coil's axis",
		X: finding.Axis{Label: "distance of the pass from the coil's axis", Unit: "m", ShowUnit: "mm", ShowFactor: 1e3}, Y: finding.Axis{Label: "kick of a pass", Unit: l.unit},
		Caption: "Each point is one pass of the magnet by the coil: what its energy grew by, with the loss to friction added back, and one standard uncertainty. The line is the fitted kick, which is taken to fall off beside the coil as the rig's radius says.",
	}
	if !res.Separated {
		c.Y.Label = "kick minus loss"
		c.Caption = "Each point is one pass of the magnet by the coil: what its energy grew by, kick minus loss, with one standard uncertainty."
	}
	far := 0.0
	for _, kind := range drawnKinds {
		line := finding.Line{Name: kind.name, Role: finding.Mark}
		for i := range res.Passes {
			p, r := &res.Passes[i], &l.rows[i]
			if !kind.has(p.State) || math.IsNaN(r.aside) {
				continue
			}
			y := p.Net
			if res.Separated {
				y += p.Loss
				if p.State == Off {
					g := l.best.lossVector(r.work)
					loss, _ := l.best.of(g, g)
					y = p.Net + loss
				}
			}
			u := math.Sqrt(r.vFrom + r.vTo)
			line.X, line.Y = append(line.X, r.aside), append(line.Y, y)
			line.Lo, line.Hi = append(line.Lo, y-u), append(line.Hi, y+u)
			far = math.Max(far, r.aside)
		}
		if len(line.X) > 0 {
			c.Lines = append(c.Lines, line)
		}
	}
	if k := l.opt.Ball.Coil; res.Separated && l.best.kicks == 1 && (k.KickJ.Set || k.KickJ.Fit) {
		if reach := k.RadiusM.Or(k.WidthM.Or(0)); reach > 0 {
			model := finding.Line{Name: "kick, fitted", Role: finding.Model}
			for i := range 61 {
				x := far * float64(i) / 60
				model.X, model.Y = append(model.X, x), append(model.Y, res.Kick*math.Exp(-x*x/reach/reach))
			}
			c.Lines = append(c.Lines, model)
		}
	}
	c.Lines = append(c.Lines, finding.Line{Name: "nothing given", Role: finding.Guide, X: []float64{0, far}, Y: []float64{0, 0}})
	return c
}

// usualWork is the mean work of unit frictions over the kicked passes of the first
// clip, or over all where none was kicked.
func (l *ledger) usualWork() (w [3]float64) {
	n := 0.0
	for _, only := range []bool{true, false} {
		for i := range l.rows {
			if r := &l.rows[i]; !only || r.state == Kicked && r.clip == 0 {
				for j := range w {
					w[j] += r.work[j]
				}
				n++
			}
		}
		if n > 0 {
			break
		}
	}
	for j := range w {
		w[j] /= n
	}
	return w
}

// usualGain is the mean share of a kick right over the coil that kicked passes had.
func (l *ledger) usualGain() float64 {
	sum, n := 0.0, 0.0
	for i := range l.rows {
		if r := &l.rows[i]; r.state == Kicked && r.clip == 0 {
			sum, n = sum+r.gain, n+1
		}
	}
	return sum / math.Max(1, n)
}

// usualKick reports the mean of the kicks as filmed, which hangs little on how the
// kick falls off beside the coil.
func (l *ledger) usualKick(res *Result) {
	if !res.Separated {
		return
	}
	g := l.usualGain()
	f := l.measured("kick.mean", "Mean energy of the kicks, as the magnet passed", func(s *solution) []float64 {
		v := s.kickVector()
		v[0] *= g
		return v
	})
	res.Findings = append(res.Findings, f)
}
