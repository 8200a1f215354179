package analyze

import (
	"context"
	"fmt"

	"lodeswing/analyze/claim"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/kick"
)

// claims answers the statements of an exhibit's label.
func claims(_ context.Context, w *work) error {
	in := claim.Input{Angles: w.angles, Decays: w.decays, Findings: w.rec.Findings}
	if w.clip == nil || w.clip.Battery {
		in.Driven = kick.Parts(w.rig)
	}
	answers, curves := claim.Answers(w.rig.Claims, in)
	for i, a := range answers {
		text := fmt.Sprintf("%s. %s", a.Verdict, a.Why)
		if a.Next != "" {
			text += " " + a.Next
		}
		w.rec.Findings = append(w.rec.Findings, finding.Finding{
			Key: fmt.Sprintf("claim.%d", i+1), Subject: "the label", Name: a.Label, Kind: finding.Statement, Unit: "1", Text: text,
			Method: "the clip's own swings against the label",
		})
	}
	w.rec.Curves = append(w.rec.Curves, curves...)
	return nil
}
