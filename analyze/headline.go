package analyze

import (
	"fmt"
	"math"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track/rig"
)

// headline sums a record up in a few plain sentences.
func headline(w *work) string {
	var out []string
	for _, d := range w.decays {
		if d.Found {
			out = append(out, decayWords(w, d.Part, d.Decided, d.Law))
		}
	}
	for _, k := range w.kicks {
		if words := kickWords(w, k); words != "" {
			out = append(out, words)
		}
	}
	if f := w.rec.Find("regime", ""); f != nil && f.Kind == finding.Statement && len(out) == 0 {
		out = append(out, f.Text)
	}
	out = append(out, magnetWords(w.rec)...)
	out = append(out, frequencies(w)...)
	if len(out) == 0 {
		if w.track != nil {
			n := 0
			for i := range w.track.Bobs {
				n += len(w.track.Bobs[i].Usable())
			}
			return fmt.Sprintf("%d positions were measured, but no period or damping could be read from them; the findings say why.", n)
		}
		return "No period or damping could be read from this table; the findings say why."
	}
	return strings.Join(out, " ")
}

// magnetWords says how strong the magnets are: each moment that is known, or
// else the product of a pair.
func magnetWords(rec *record.Record) []string {
	var out []string
	for _, key := range []string{"match.moment", "match.product"} {
		for i := range rec.Findings {
			f := &rec.Findings[i]
			if f.Key != key || f.Kind != finding.Measured {
				continue
			}
			if key == "match.moment" {
				out = append(out, fmt.Sprintf("The moment of %s is %s.", f.Subject, inWords(f)))
			} else {
				out = append(out, fmt.Sprintf("The moments of %s multiply to %s.", f.Subject, inWords(f)))
			}
		}
		if len(out) > 0 {
			return out
		}
	}
	return out
}

// frequencies says how fast the parts move that no free decay explains, and why
// none does.
func frequencies(w *work) []string {
	var moves, whys []string
	for i := range w.angles {
		part := w.angles[i].Part
		if w.decaysFreely(part) {
			continue
		}
		for n := 1; n <= mostLines; n++ {
			if f := w.rec.Find(fmt.Sprintf("spectrum.line%d.frequency", n), part); f != nil {
				moves = append(moves, fmt.Sprintf("“%s” mainly at %s", part, inWords(f)))
				break
			}
		}
		if why := whyNot(w, part); why != "" {
			whys = append(whys, why)
		}
	}
	if len(moves) == 0 {
		return nil
	}
	const most = 6
	if n := len(moves); n > most {
		moves = append(moves[:most], fmt.Sprintf("%d more parts as the findings say", n-most))
	}
	out := []string{strings.Join(moves, "; ") + "."}
	out[0] = strings.Replace(out[0], "” mainly at", "” moves mainly at", 1)
	switch whys = distinct(whys); {
	case len(whys) == 1:
		out = append(out, "No free decay could be read: "+whys[0]+".")
	case len(whys) > 1:
		out = append(out, "No free decays could be read from this clip; the findings say why.")
	}
	return out
}

func decayWords(w *work, part string, decided bool, law string) string {
	var b strings.Builder
	if f := w.rec.Find("decay.period_zero", part); f != nil && f.Kind == finding.Measured {
		fmt.Fprintf(&b, "“%s” swings once every %s in small swings.", part, inWords(f))
	} else if f := w.rec.Find("decay.period_at", part); f != nil && f.Kind == finding.Measured {
		at := strings.TrimPrefix(f.Name, "Period at ")
		fmt.Fprintf(&b, "“%s” swings once every %s at %s.", part, inWords(f), at)
	}
	if f := w.rec.Find("decay.log_decrement", part); f != nil && f.Kind == finding.Measured {
		loss, u := 1-math.Exp(-f.Value), f.U*math.Exp(-f.Value)
		at := ""
		if _, after, ok := strings.Cut(f.Name, " at an amplitude of "); ok {
			at = ", at an amplitude of " + after
		}
		shown := finding.DisplayValue(100*loss, 100*u, "1")
		fmt.Fprintf(&b, " Left alone it loses %s %% (± %s) of its swing each time%s", shown.Value, shown.U, at)
		if q := w.rec.Find("decay.q", part); q != nil && q.Kind == finding.Measured {
			fmt.Fprintf(&b, ", a quality factor Q of %s", inWords(q))
		}
		b.WriteString(".")
	}
	f := w.rec.Find("decay.law", part)
	switch {
	case decided && f != nil && len(f.Cautions) > 0:
		fmt.Fprintf(&b, " Of the frictions tried, %s comes nearest, but does not explain all.", law)
	case decided:
		fmt.Fprintf(&b, " The friction is %s.", law)
	default:
		b.WriteString(" Which friction it is could not be decided.")
	}
	return strings.TrimSpace(b.String())
}

// inWords writes a finding as "1.0634 s (± 0.0001 s)".
func inWords(f *finding.Finding) string {
	s := f.Display()
	unit := ""
	if s.Unit != "" {
		unit = " " + s.Unit
	}
	if s.U == "" || s.Power != 0 {
		return s.String()
	}
	return fmt.Sprintf("%s%s (± %s%s)", s.Value, unit, s.U, unit)
}

func whyNot(w *work, part string) string {
	f := w.rec.Find("decay.free_decay", part)
	if f == nil || f.Text == "" {
		return ""
	}
	why := strings.TrimSuffix(f.Text, ".")
	for _, known := range []string{"Not looked for: ", "No free decay was found: "} {
		why = strings.TrimPrefix(why, known)
	}
	return why
}

// safety is the usual cautions about what the rig says the toy is made of.
func safety(r *rig.Rig) []string {
	var out []string
	if len(r.Magnets) > 0 {
		out = append(out,
			"Strong magnets must not be swallowed: two of them can close on the bowel. Keep them from small children, and from people with medical implants such as pacemakers and defibrillators. They pinch fingers and shatter when they meet.",
			"Whether a toy with magnets may be sold is for an accredited laboratory to say, under local law.")
	}
	if len(r.Coils) > 0 {
		out = append(out,
			"Button cells and 9 V blocks must be out of children's reach: a swallowed cell burns within hours. Get medical help at once.",
			"A kicked swing often hangs on needle points: they are sharp.")
	}
	return out
}
