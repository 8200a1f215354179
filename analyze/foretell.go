package analyze

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/match"
	"lodeswing/analyze/toy"
)

const (
	// modelRun is how long the model is run on, s, and modelLead what is left out at
	// first.
	modelRun  = 400.0
	modelLead = 20.0
	// foretellTime is how long a measurement waits for that.
	foretellTime = 12 * time.Second
)

// foretelling runs the model of a driven toy on from where the clip began, once the
// rig's numbers are known (given or matched), and tells how fast near starts part. A
// toy that nothing drives comes to rest, and there is nothing to tell.
func foretelling(ctx context.Context, w *work) error {
	if w.regime == nil || w.fitted == nil && match.Asks(w.rig) {
		return nil
	}
	r := w.rig
	if w.fitted != nil {
		r = w.fitted
	}
	filmed, err := match.Filmed(r, w.clip)
	if err != nil || len(filmed.Coils) == 0 || match.Asks(filmed) {
		return nil // undriven, or not known well enough, as other findings say
	}
	filmed.Start = r.Start
	m, err := toy.New(filmed)
	if err != nil {
		return err
	}
	start, err := w.beginning(m)
	if err != nil {
		return nil // no start is known; the clip's own motion tells its regime
	}
	const name, method = "Largest exponent of the model", "the model with the rig's or the matched numbers, run on from the clip's start for 400 s; growth of a small difference (Benettin, Galgani & Strelcyn 1976)"
	limited, stop := context.WithTimeout(ctx, foretellTime)
	defer stop()
	e, err := chaos.OfDrivenToy(limited, m, start, chaos.Run{Transient: modelLead, Duration: modelRun, Tol: 1e-9})
	switch {
	case ctx.Err() != nil:
		return ctx.Err()
	case limited.Err() != nil:
		w.undecided("chaos.model_exponent", w.onlyPart(), name, fmt.Sprintf("the model could not be run on for %.0f s within %.0f s", modelRun, foretellTime.Seconds()), method)
		return nil
	case err != nil:
		w.undecided("chaos.model_exponent", w.onlyPart(), name, err.Error(), method)
		return nil
	}
	l, until := chaoticPart(e)
	f := finding.Normal("chaos.model_exponent", w.onlyPart(), name, l.V, l.U, "1/s", method)
	f.Cautions = []string{"Of the model with just these numbers: its uncertainty is that of the average, not of the numbers."}
	if until > 0 {
		f.Cautions = append(f.Cautions, fmt.Sprintf("Over the first %.0f s, in which the model is chaotic; then it falls into step. When it does is a matter of chance.", until))
	}
	w.rec.Findings = append(w.rec.Findings, f)
	if regime := w.rec.Find("regime", w.onlyPart()); regime != nil && regime.Kind == finding.Statement {
		w.weigh(regime, l)
	}
	return nil
}

// chaoticPart is the largest exponent, and, where growth ends before the run does (the
// motion falls into step), the time until then and the exponent up to it; until is 0
// where it does not.
func chaoticPart(e *chaos.Exponents) (l chaos.Value, until float64) {
	const parts = 16
	end := e.At[len(e.At)-1]
	var rate, at []float64
	last, lastGrowth := 0.0, 0.0
	for i, t := range e.At {
		if t < end*float64(len(rate)+1)/parts {
			continue
		}
		growth := e.Course[i] * t
		rate, at = append(rate, (growth-lastGrowth)/(t-last)), append(at, t)
		last, lastGrowth = t, growth
	}
	n := len(rate)
	for n > 0 && rate[n-1] < 0.25*slices.Max(rate) {
		n--
	}
	if len(rate) < parts/2 || n < 3 || n > len(rate)-3 { // always the same, or the end of it not sure
		return e.L[0], 0
	}
	_, sd := meanAndScatter(rate[:n])
	return chaos.Value{V: mean(rate[:n]), U: sd / math.Sqrt(float64(n-1))}, at[n-1]
}

// weigh sets what the model foretells beside what the clip shows.
func (w *work) weigh(regime *finding.Finding, l chaos.Value) {
	shown := finding.DisplayValue(l.V, l.U, "1/s")
	rate := fmt.Sprintf("(%s ± %s) per s", shown.Value, shown.U)
	irregular := w.regime.Kind == chaos.Chaotic || w.regime.Kind == chaos.Irregular
	switch chaotic := l.V > 4*l.U && l.V*w.regime.PeriodS > 0.02; {
	case chaotic && irregular:
		regime.Evidence = append(regime.Evidence, fmt.Sprintf("The toy's model, run on for %.0f s, is chaotic: a small difference grows at a rate of %s.", modelRun, rate))
		if w.regime.Kind == chaos.Irregular {
			regime.Text += fmt.Sprintf(" Its model is chaotic: an error of prediction grows tenfold in %.2g s.", math.Ln10/l.V)
		}
	case chaotic:
		regime.Cautions = append(regime.Cautions, fmt.Sprintf("Later it may become chaotic: the toy's model, run on for %.0f s, does (a small difference grows at a rate of %s). A longer clip would show it.", modelRun, rate))
	case irregular:
		regime.Evidence = append(regime.Evidence, fmt.Sprintf("The toy's model, run on for %.0f s, shows no lasting chaos: a small difference changes at a rate of %s.", modelRun, rate))
	case w.regime.Kind == chaos.IrregularDecaying || w.regime.Kind == chaos.IntoStep:
		regime.Evidence = append(regime.Evidence, fmt.Sprintf("The toy's model, run on for %.0f s, is regular in the long run.", modelRun))
	default:
		regime.Evidence = append(regime.Evidence, fmt.Sprintf("The toy's model, run on for %.0f s, is regular as well.", modelRun))
	}
}

// beginning is the model's state at the clip's start: as the rig's or the matched
// starts have it, else as the parts' angles and rates were measured.
func (w *work) beginning(m *toy.Model) ([]float64, error) {
	y, err := m.Start()
	if err != nil {
		return nil, err
	}
	if w.fitted != nil || len(w.rig.Start) > 0 {
		return y, nil
	}
	for i := range w.angles {
		a := &w.angles[i]
		k, err := m.Part(a.Part)
		if err != nil {
			return nil, err
		}
		if a.Joint == "ball" {
			return nil, errors.New("one angle does not tell the state of a ball joint")
		}
		m.SetAngle(y, k, a.Angle[0], a.Rate[0])
	}
	if len(w.angles) < len(m.Parts()) {
		return nil, errors.New("a part was not measured")
	}
	return y, nil
}
