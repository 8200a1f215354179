package plots

import (
	"bytes"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
)

// The report tells the regime in a section of its own: the line, what its words mean,
// what it rests on, how to read the recurrence plot, the figures, the measures; and
// nothing of it twice.
func TestReportTellsTheRegime(t *testing.T) {
	r := swing()
	r.Findings = append(r.Findings,
		finding.Finding{Key: "regime", Subject: "arm", Name: "Regime", Unit: "1", Kind: finding.Statement, Text: "Irregular, but not chaotic: one part on one hinge that no coil drives cannot be chaotic. Confidence 90 %.", Evidence: []string{"It passed its middle 40 times."}, Method: "turning points"},
		finding.Normal("recurrence.determinism", "arm", "Determinism DET", 0.83, 0.04, "1", "share"),
	)
	r.Curves = append(r.Curves,
		finding.Curve{Key: "recurrence", Subject: "arm", Title: "Recurrence plot", Caption: "Dark: alike.", X: finding.Axis{Label: "time", Unit: "s"}, Y: finding.Axis{Label: "time", Unit: "s"}, Grid: &finding.Grid{X: []float64{0, 1, 2}, Y: []float64{0, 1, 2}, Z: []float64{1, 0, 0.4, 0, 1, 0, 0.4, 0, 1}, Label: "share", Unit: "1"}},
		finding.Curve{Key: "delay", Subject: "arm", Title: "Choice of the delay", X: finding.Axis{Label: "delay", Unit: "s"}, Y: finding.Axis{Label: "information", Unit: "1"}, Lines: []finding.Line{{Name: "information", Role: finding.Data, X: []float64{0, 1, 2}, Y: []float64{2, 1, 1.5}}}},
	)
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	page := string(r.Report)
	at := -1
	for _, want := range []string{"What was found", "How it behaves", "Irregular, but not chaotic", "so simple that it cannot be chaotic", "It passed its middle 40 times.", "How to read a recurrence plot", "Figure 1.", "in numbers", "Determinism DET", "Figure 2.", ">Figures<", "Figure 3."} {
		i := strings.Index(page, want)
		if i < at || i < 0 {
			t.Errorf("%q stands at %d, after %d", want, i, at)
		}
		at = i
	}
	for _, once := range []string{"Determinism DET", "It passed its middle", ">How it behaves<", "<b>Figure 1.</b>"} {
		if n := strings.Count(page, once); n != 1 {
			t.Errorf("%q stands %d times in the report", once, n)
		}
	}
	if bytes.Contains(r.Report, []byte("How nearly equal moments part")) {
		t.Error("tells of a curve that is not there")
	}
}
