package plots

import (
	"slices"
	"strings"

	"lodeswing/analyze/finding"
)

// matched is the report's section on the model matched to the motion.
type matched struct {
	Line     string // whether the model fits
	Notes    []string
	Verdicts []finding.Verdict
	Groups   []group
	HasU     bool
	Figures  []figureOnPage
	Budgets  []budget
}

// ofMatching are the figures of the section, in its order.
var ofMatching = []string{"match-fit", "match-residuals", "match-force", "match-torque", "match-loss"}

// notes are the findings of a matching that are told before its numbers.
var notes = []string{"match.cause", "match.left_out", "match.coil_off"}

// matching takes what the matching found out of findings and figures; its figures are
// numbered from first on. The section is nil where nothing was matched.
func matching(all []finding.Finding, fits []finding.Fit, figures []figureShown, first int) (m *matched, others []finding.Finding, rest []figureShown) {
	fit := slices.IndexFunc(all, func(f finding.Finding) bool { return f.Key == "match.residuals" })
	if fit < 0 {
		return nil, all, figures
	}
	m = &matched{Line: whole(all[fit].Text)}
	var own []finding.Finding
	for i, f := range all {
		switch {
		case i == fit:
		case slices.Contains(notes, f.Key):
			note := f.Text
			if f.Key != "match.cause" {
				note = f.Name + ". " + note
			}
			if f.Subject != "" {
				note = f.Subject + ": " + note
			}
			m.Notes = append(m.Notes, whole(note))
		case strings.HasPrefix(f.Key, "match."):
			own = append(own, f)
		default:
			others = append(others, f)
		}
	}
	m.Groups, m.HasU = groups(own)
	m.Budgets = budgets(own)
	for i := range fits {
		if fits[i].Key == "match.fit" {
			for _, v := range fits[i].Verdicts {
				m.Verdicts = append(m.Verdicts, finding.Verdict{Name: v.Name, Told: whole(capital(v.Told)), Why: whole(sentence(v.Why)), Help: whole(sentence(v.Help))})
			}
		}
	}
	for _, key := range ofMatching {
		for _, s := range figures {
			if s.Key == key {
				m.Figures = append(m.Figures, s.onPage(first+len(m.Figures)))
			}
		}
	}
	for _, s := range figures {
		if !slices.Contains(ofMatching, s.Key) {
			rest = append(rest, s)
		}
	}
	return m, others, rest
}

func capital(s string) string {
	if s == "" {
		return s
	}
	r := []rune(s)
	return strings.ToUpper(string(r[:1])) + string(r[1:])
}

// sentence makes a sentence of a phrase.
func sentence(s string) string {
	if s == "" {
		return s
	}
	return capital(strings.TrimSuffix(s, ".")) + "."
}
