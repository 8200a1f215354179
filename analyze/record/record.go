// Package record reads and writes a result folder, whole or not at all. What
// comes in: a Record, everything that one measurement found, in SI units. What
// goes out: a folder that is a Frictionless Data Package (specs.frictionlessdata.io,
// version 1), so that any tool can read its tables, and back from it the same
// Record, number for number.
package record

import (
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// Record is all that one measurement found. Every field may be empty: a record
// of a track alone is a record.
type Record struct {
	Run      Run
	Headline string   // one short paragraph in plain words
	Cautions []string // about this measurement: filming, damage, missing knowledge
	Safety   []string // about the toy: magnets, needle points, batteries

	Track    *track.Track // nil when the angles came from elsewhere
	Angles   []Angles
	Findings []finding.Finding
	Fits     []finding.Fit
	Curves   []finding.Curve
	Passes   []Pass // the energy ledger

	FittedRig string // TOML, ready for simulate and for the next clip
	Still     []byte // PNG, one upright picture of the clip, in the clip's own pixels
	Figures   []Figure
	Report    []byte // HTML

	// Kept are files of the folder that are not the program's: they go along
	// when the folder is written again. Read fills it; a command may add to it.
	Kept []Kept
}

// Angles is the motion of one part. All slices have the length of T; what is
// not known is NaN.
type Angles struct {
	Part  string
	T     []float64 // s
	Angle []float64 // rad, zero where an unmagnetised part would rest
	U     []float64 // rad, standard uncertainty of Angle
	Rate  []float64 // rad/s
	URate []float64 // rad/s
}

// Pass is one row of the energy ledger: one trip of a bob through its lowest
// point. U… are standard uncertainties; what is not known is NaN.
type Pass struct {
	Part    string
	T       float64 // s
	Energy  float64 // J, at the turning point before the pass
	UEnergy float64
	Kick    float64 // J, added at the pass
	UKick   float64
	Loss    float64 // J, taken by friction from the turning point before to the one after
	ULoss   float64
}

// Figure is one drawn figure.
type Figure struct {
	Name string // file name without ending
	SVG  []byte
	PNG  []byte
}

// Kept is a file that the record carries along without reading it.
type Kept struct {
	Name string // in the folder
	Path string // where it lies now
}

// Run is the provenance of a record.
type Run struct {
	Version   string            `json:"version"` // of the program
	Started   time.Time         `json:"started"`
	Rig       Rig               `json:"rig"`
	Clip      *Clip             `json:"clip,omitempty"`
	Options   map[string]string `json:"options"`   // what the command was told, word for word
	Durations []Duration        `json:"durations"` // how long each step took
}

// Rig is the rig as it was used.
type Rig struct {
	Name string `json:"name,omitempty"`
	File string `json:"file,omitempty"` // file name without folder
	Text string `json:"toml,omitempty"` // the whole file
}

// Clip says which clip was measured.
type Clip struct {
	File   string `json:"file"` // file name without folder
	SHA256 string `json:"sha256"`
	Bytes  int64  `json:"bytes"`
	// Facts are the container's facts as track/clip states them: any JSON value.
	Facts any `json:"facts,omitempty"`
}

// Duration is how long one step took.
type Duration struct {
	Step    string  `json:"step"`
	Seconds float64 `json:"seconds"`
}

// Find returns the first finding with that key and, unless it is empty, that
// subject; nil if there is none.
func (r *Record) Find(key, subject string) *finding.Finding {
	for i := range r.Findings {
		f := &r.Findings[i]
		if f.Key == key && (subject == "" || f.Subject == subject) {
			return f
		}
	}
	return nil
}

// Took notes how long a step took, replacing what was noted of it before.
func (r *Run) Took(step string, d time.Duration) {
	for i := range r.Durations {
		if r.Durations[i].Step == step {
			r.Durations[i].Seconds = d.Seconds()
			return
		}
	}
	r.Durations = append(r.Durations, Duration{step, d.Seconds()})
}
