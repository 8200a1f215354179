// Package analyze runs the analyses on a track. What comes in: a track.Track,
// or angle tables, and the rig that says what was filmed. What goes out: a
// record.Record with series, findings, fits and curves, in SI units. It opens
// no clip and draws nothing.
//
// An analysis that fails becomes a finding that says why; the record is not lost
// over it. The analyses stand in one table, in the order in which they run; each
// may use what those before it found.
package analyze

import (
	"context"
	"fmt"
	"path/filepath"
	"runtime/debug"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"lodeswing/analyze/chaos"
	"lodeswing/analyze/decay"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/kick"
	"lodeswing/analyze/record"
	"lodeswing/analyze/series"
	"lodeswing/track"
	"lodeswing/track/rig"
)

// Options says how to run the analyses. The zero value runs them all.
type Options struct {
	// Run is the provenance so far; the record begins with it. The clip's file
	// name in it tells which entry of the rig's [[clip]] list was filmed.
	Run record.Run
	// Still is one picture of the clip as PNG, for the record.
	Still []byte
	// BatteryOut, when set, is the result of a clip of the same unit whose coil was
	// without its battery: it tells what friction alone takes.
	BatteryOut *record.Record
	// Step, when set, is called with each analysis's name before it runs.
	Step func(name string)
}

// analyses are what Run does, in order. To hang in another one, add a line.
var analyses = []analysis{
	{"angles", "series.angles", "Angle", angles},
	{"free decay", "decay.free_decay", "Free decay", decays},
	{"spectrum", "spectrum.lines", "Spectral lines", spectra},
	{"modes", "modes.modes", "Modes", together},
	{"regime", "regime", "How it behaves", regime},
	{"recurrence", "recurrence.plot", "Recurrence plot", recurring},
	{"matching", "match.fit", "Model matched to the motion", matching},
	{"model's future", "chaos.model_exponent", "Largest exponent of the model", foretelling},
	{"kicks", "kick.ledger", "Energy ledger", kicks},
	{"diagnosis", "diagnosis", "Diagnosis", diagnosis},
	{"claims", "claim.answers", "Claims", claims},
}

type analysis struct {
	step string // in messages and in the record's durations
	key  string // of the finding that says that it failed
	name string
	run  func(context.Context, *work) error
}

// work is what the analyses share.
type work struct {
	track  *track.Track // nil when the angles came from a table
	tables []record.Angles
	rig    *rig.Rig
	clip   *rig.Clip // the rig's entry for this clip; nil when it has none
	rec    *record.Record

	angles []series.Angle // one per part that gave an angle
	decays []*decay.Result
	kicks  []*kick.Result
	whole  *wholeMotion   // of all parts; nil when it could not be told
	regime *chaos.Regime  // nil as well then
	fitted *rig.Rig       // the rig with what the matching found; nil when it found nothing
	out    *record.Record // of the battery-out clip; nil when there is none
}

// Run analyses a track. r may be nil: the track is then taken as bobs that each
// swing from a hinge. An error is returned only when ctx ends or there is
// nothing to analyse; an analysis that fails is a finding in the record.
func Run(ctx context.Context, tr *track.Track, r *rig.Rig, opt Options) (*record.Record, error) {
	if tr == nil || len(tr.Bobs) == 0 {
		return nil, fmt.Errorf("the track holds no bob, so there is nothing to analyse")
	}
	return run(ctx, &work{track: tr, rig: r}, opt)
}

// RunAngles analyses angle tables, such as an encoder's, of one or more parts.
// r may be nil: nothing is then known of the parts.
func RunAngles(ctx context.Context, tables []record.Angles, r *rig.Rig, opt Options) (*record.Record, error) {
	if len(tables) == 0 {
		return nil, fmt.Errorf("there is no angle table, so there is nothing to analyse")
	}
	return run(ctx, &work{tables: tables, rig: r}, opt)
}

func run(ctx context.Context, w *work, opt Options) (*record.Record, error) {
	if w.rig == nil {
		w.rig = &rig.Rig{}
	}
	w.out = opt.BatteryOut
	w.rec = &record.Record{Run: opt.Run, Track: w.track, Still: opt.Still, Safety: safety(w.rig)}
	if w.rec.Run.Rig.Name == "" {
		w.rec.Run.Rig.Name = w.rig.Name
	}
	if c := w.rec.Run.Clip; c != nil {
		w.clip = clipOf(w.rig, c.File)
	}
	if w.track != nil {
		w.rec.Cautions = append(w.rec.Cautions, w.track.Cautions...)
	}
	for _, a := range analyses {
		if opt.Step != nil {
			opt.Step(a.step)
		}
		began := time.Now()
		err := a.guarded(ctx, w)
		if e := ctx.Err(); e != nil {
			return nil, e
		}
		w.rec.Run.Took(a.step, time.Since(began))
		if err != nil {
			w.undecided(a.key, "", a.name, err.Error(), "this analysis failed")
		}
	}
	w.rec.Cautions = distinct(w.rec.Cautions)
	w.rec.Headline = headline(w)
	return w.rec, nil
}

// guarded turns a defect of one analysis into an error, so that the others' work
// is not lost with it.
func (a analysis) guarded(ctx context.Context, w *work) (err error) {
	defer func() {
		if p := recover(); p != nil {
			at := ""
			for line := range strings.Lines(string(debug.Stack())) {
				if strings.Contains(line, "/analyze/") && strings.Contains(line, ".go:") && !strings.Contains(line, "/analyze/analyze.go:") {
					at = " at " + filepath.Base(strings.Fields(line)[0])
					break
				}
			}
			err = fmt.Errorf("a defect in the program stopped it (%v%s); please report it with the rig and the track", p, at)
		}
	}()
	return a.run(ctx, w)
}

// clipOf finds the rig's entry for a clip by its file name.
func clipOf(r *rig.Rig, file string) *rig.Clip {
	for i := range r.Clips {
		if filepath.Base(r.Clips[i].File) == filepath.Base(file) {
			return &r.Clips[i]
		}
	}
	return nil
}

// undecided notes that something could not be found, and why.
func (w *work) undecided(key, subject, name, why, method string) {
	w.rec.Findings = append(w.rec.Findings, finding.Finding{
		Key: key, Subject: subject, Name: name, Kind: finding.Undecided, Unit: "1", Text: sentence(why), Method: method,
	})
}

// caution notes a caution about one subject among several.
func (w *work) caution(subject string, sentences ...string) {
	for _, s := range sentences {
		if len(w.angles) > 1 && subject != "" && !strings.Contains(s, subject) {
			s = "“" + subject + "”: " + s
		}
		w.rec.Cautions = append(w.rec.Cautions, s)
	}
}

// sentence begins with a capital and ends with a full stop; the name of the
// package that an error begins with is left out.
func sentence(s string) string {
	if word, rest, ok := strings.Cut(s, ": "); ok && !strings.ContainsAny(word, " \"“") && strings.ToLower(word) == word {
		s = rest
	}
	first, n := utf8.DecodeRuneInString(s)
	if n > 0 {
		s = string(unicode.ToUpper(first)) + s[n:]
	}
	if s != "" && !strings.ContainsAny(s[len(s)-1:], ".!?") {
		s += "."
	}
	return s
}

func distinct(sentences []string) []string {
	seen := map[string]bool{}
	var out []string
	for _, s := range sentences {
		if !seen[s] {
			seen[s] = true
			out = append(out, s)
		}
	}
	return out
}
