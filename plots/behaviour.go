package plots

import (
	"slices"
	"strings"

	"lodeswing/analyze/finding"
)

// behaviour is the report's section on how the toy behaves.
type behaviour struct {
	Line     string   // the regime in one line
	Meaning  string   // of its first words
	Evidence []string // what it rests on
	Cautions []string
	Method   string
	Groups   []group        // beats, exchange of energy, tests for chaos
	Figures  []figureOnPage // what everybody may want to see
	Measures []group        // of recurrence
	Details  []figureOnPage // how they were obtained
	Plot     bool           // there is a recurrence plot
	Chaos    bool           // there is a curve of parting moments
}

// meanings say what the words of a regime mean; the longer beginning first.
var meanings = []struct{ begins, means string }{
	{"At rest", "Nothing moves by more than the measurement itself scatters."},
	{"Decaying", "Each swing is a little smaller than the one before and follows from it: the motion is regular, and friction takes it down."},
	{"Growing", "Each swing is a little larger than the one before and follows from it: something drives it, and it has not yet reached its full swing."},
	{"Steady", "One swing, or one course of several swings, comes again and again: what drives the toy and what slows it are in balance."},
	{"Beating", "The swing of each part waxes and wanes at an even pace, because two or more regular swings of nearly the same pace run at once; where parts are coupled, energy goes from one to another and back. It looks lively, and is as regular as a clock."},
	{"Quasi-periodic", "Several regular swings of different pace run at once. Together they never repeat exactly, yet each can be foretold for as long as one likes."},
	{"Irregular and decaying", "The toy does not go through the same motion twice, and it runs down. What dies cannot go on being chaotic, so it is not called that, however wildly it darts about at first."},
	{"Irregular at first", "It darts about, and then falls into step: what drives it and how it moves come to match, and from then on one course comes again and again. A push can set it free again. A toy that may fall into step at any time is chaotic only for a while."},
	{"Irregular, but not chaotic", "The motion is uneven, but this toy is so simple that it cannot be chaotic."},
	{"Irregular", "Swings do not follow from those before them in any simple way. That may be chaos, many swings at once, or something that pushes from outside: this clip alone does not tell which."},
	{"Chaotic", "The toy goes by fixed rules, and nothing is left to chance, yet it cannot be foretold for long: two moments that look the same go different ways soon after, because the smallest difference between them grows and grows."},
}

func meaning(line string) string {
	best := ""
	words := ""
	for _, m := range meanings {
		if strings.HasPrefix(line, m.begins) && len(m.begins) > len(best) {
			best, words = m.begins, m.means
		}
	}
	return words
}

// ofBehaviour are the figures of the section, in its order; those from lag on are
// details.
var ofBehaviour = []string{"recurrence", "modes-energy", "section", "divergence", "recurrence_course", "spectrogram", "recurrence_cross", "zero_one", "recurrence_lag", "dimension", "delay", "false_neighbours"}

const firstDetail = "recurrence_lag"

// tellsBehaviour tells whether a finding belongs into the section.
func tellsBehaviour(key string) bool {
	for _, p := range []string{"regime", "chaos.", "recurrence.", "modes.beat", "modes.energy", "modes.coupling"} {
		if strings.HasPrefix(key, p) {
			return true
		}
	}
	return false
}

// apart takes what tells of the behaviour out of findings and figures; its figures are
// numbered from first on. The section is nil where no regime was told.
func apart(all []finding.Finding, figures []figureShown, first int) (b *behaviour, others []finding.Finding, rest []figureShown) {
	var own []finding.Finding
	for _, f := range all {
		if tellsBehaviour(f.Key) {
			own = append(own, f)
		} else {
			others = append(others, f)
		}
	}
	regime := slices.IndexFunc(own, func(f finding.Finding) bool { return f.Key == "regime" && f.Kind == finding.Statement })
	if regime < 0 {
		return nil, all, figures
	}
	f := own[regime]
	b = &behaviour{Line: whole(f.Text), Meaning: meaning(f.Text), Evidence: each(f.Evidence, whole), Cautions: each(f.Cautions, whole), Method: f.Method}
	var tests, measures []finding.Finding
	for i, f := range own {
		switch {
		case i == regime:
		case strings.HasPrefix(f.Key, "recurrence."):
			measures = append(measures, f)
		default:
			tests = append(tests, f)
		}
	}
	b.Groups, _ = groups(tests)
	b.Measures, _ = groups(measures)
	number := first
	detail := false
	for _, key := range ofBehaviour {
		detail = detail || key == firstDetail
		for _, s := range figures {
			if s.Key != key {
				continue
			}
			p := s.onPage(number)
			number++
			if detail {
				b.Details = append(b.Details, p)
			} else {
				b.Figures = append(b.Figures, p)
			}
			b.Plot = b.Plot || key == "recurrence"
			b.Chaos = b.Chaos || key == "divergence"
		}
	}
	for _, s := range figures {
		if !slices.Contains(ofBehaviour, s.Key) {
			rest = append(rest, s)
		}
	}
	return b, others, rest
}
