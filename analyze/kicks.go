package analyze

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/kick"
	"lodeswing/analyze/record"
	"lodeswing/analyze/series"
	"lodeswing/track/rig"
)

// kicks keeps the energy ledger of each part that a coil kicks.
func kicks(ctx context.Context, w *work) error {
	for _, part := range kick.Parts(w.rig) {
		i := slices.IndexFunc(w.angles, func(a series.Angle) bool { return a.Part == part })
		if i < 0 {
			continue // said where its angle was looked for
		}
		clips := []kick.Clip{{Angle: w.angles[i], Track: w.track}}
		if w.clip != nil {
			clips[0].Off = !w.clip.Battery
		}
		if d := w.rig.Decay; !clips[0].Off && (d.FromS.Set || d.ToS.Set) {
			a := &w.angles[i]
			clips[0].OffFromS, clips[0].OffToS = d.FromS.Or(a.T[0]), d.ToS.Or(a.T[len(a.T)-1])
		}
		if w.out != nil {
			second, err := without(w.out, part)
			if err != nil {
				w.undecided("kick.battery_out", part, "Battery-out clip", err.Error(), "loss of the same unit with the coil off")
			} else {
				clips = append(clips, kick.Clip{Angle: second, Track: w.out.Track, Off: true})
			}
		}
		opt := kick.OptionsFor(w.rig, part, w.clip)
		if opt.NoLedger != "" && w.rec.FittedRig != "" {
			// What the rig left to the matching is known by now.
			if fitted, err := rig.Parse("fitted.toml", []byte(w.rec.FittedRig)); err == nil {
				opt = kick.OptionsFor(fitted, part, w.clip)
			}
		}
		res, err := kick.Analyze(ctx, clips, opt)
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			w.undecided("kick.ledger", part, "Energy ledger", err.Error(), "balance of energy between turning points")
			continue
		}
		w.kicks = append(w.kicks, res)
		w.rec.Findings = append(w.rec.Findings, res.Findings...)
		w.rec.Fits = append(w.rec.Fits, res.Fits...)
		w.rec.Curves = append(w.rec.Curves, res.Curves...)
		w.caution(part, res.Cautions...)
		for _, p := range res.Passes {
			if p.Clip == 0 {
				w.rec.Passes = append(w.rec.Passes, record.Pass{
					Part: part, T: p.T, Energy: p.Before, UEnergy: p.UBefore, Kick: p.Kick, UKick: p.UKick, Loss: p.Loss, ULoss: p.ULoss,
				})
			}
		}
	}
	return nil
}

// without takes a part's angle from the result of its battery-out clip.
func without(out *record.Record, part string) (series.Angle, error) {
	for _, a := range out.Angles {
		if a.Part == part {
			all, err := fromTables([]record.Angles{a})
			if err != nil {
				return series.Angle{}, err
			}
			return all[0], nil
		}
	}
	return series.Angle{}, fmt.Errorf("the battery-out result holds no angle of %q", part)
}

// diagnosis says what may be the matter with the unit: by the ledger where the rig
// says what a good unit does, and by what the free decay and the matching found.
func diagnosis(_ context.Context, w *work) error {
	seen := kick.Seen{Rig: w.rig, Findings: w.rec.Findings}
	if w.track != nil {
		seen.Drift = w.track.Cal.StandDriftRatio
	}
	for _, d := range w.decays {
		z, start, end := w.rec.Find("decay.zeta", d.Part), w.rec.Find("decay.zeta_start", d.Part), w.rec.Find("decay.zeta_end", d.Part)
		if !d.Found || z == nil || start == nil || end == nil || len(d.Laws) == 0 {
			continue
		}
		seen.FreeDecay = append(seen.FreeDecay, kick.Damping{
			Part: d.Part, Omega: math.Sqrt(d.Laws[0].Omega2), Amplitude: [3]float64{d.Amplitude, d.AmplitudeStart, d.AmplitudeEnd},
			Zeta: [3]float64{z.Value, start.Value, end.Value}, U: [3]float64{z.U, start.U, end.U},
		})
	}
	causes, judged := seen.Causes()
	told := false
	for _, res := range w.kicks {
		driven := w.clip == nil || w.clip.Battery
		if ref, ok := kick.ReferenceOf(w.rig, res.Part, res); ok && driven {
			d := kick.Diagnose(res, ref)
			d.Join(causes, judged)
			w.rec.Findings = append(w.rec.Findings, d.Finding("kick.diagnosis", res.Part, "kick, loss and rate set against "+ref.From+", by Bayes's rule"))
			told = true
		}
	}
	if !told && len(judged) > 0 {
		d := kick.Judge(causes, judged)
		w.rec.Findings = append(w.rec.Findings, d.Finding("diagnosis", "", "what was found set against the rig's numbers, by Bayes's rule"))
	}
	return nil
}

// kickWords says in a sentence or two what the ledger tells of a part.
func kickWords(w *work, res *kick.Result) string {
	var b strings.Builder
	at := fmt.Sprintf(" at %.3g°", res.Amplitude/degree)
	if w.rec.Find("kick.mean", res.Part) != nil {
		at = "" // on a ball joint no amplitude says it all
	}
	k, l := w.rec.Find("kick.energy", res.Part), w.rec.Find("kick.loss", res.Part)
	switch {
	case k != nil && k.Kind == finding.Measured:
		fmt.Fprintf(&b, "The coil gives “%s” %s at each kick; friction takes %s per pass%s.", res.Part, inWords(k), inWords(l), at)
	case k != nil:
		fmt.Fprintf(&b, "A coil kicks “%s”; this clip cannot tell kick and friction apart.", res.Part)
	case l != nil && l.Kind == finding.Measured:
		fmt.Fprintf(&b, "With the coil off, friction takes %s from “%s” per pass%s.", inWords(l), res.Part, at)
	}
	if s := w.rec.Find("kick.steady_amplitude", res.Part); s != nil && s.Kind == finding.Measured {
		fmt.Fprintf(&b, " Kick and friction are equal at %s.", inWords(s))
	}
	return b.String()
}
