package record

import (
	"io"
	"math"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// JSON has no NaN and no infinity: null and, as in Frictionless tables, "INF"
// and "-INF" stand for them, both ways.
var numbers = json.JoinOptions(
	json.WithMarshalers(json.MarshalToFunc(func(out *jsontext.Encoder, x float64) error {
		switch {
		case math.IsNaN(x):
			return out.WriteToken(jsontext.Null)
		case math.IsInf(x, 1):
			return out.WriteToken(jsontext.String("INF"))
		case math.IsInf(x, -1):
			return out.WriteToken(jsontext.String("-INF"))
		}
		return json.SkipFunc
	})),
	json.WithUnmarshalers(json.UnmarshalFromFunc(func(in *jsontext.Decoder, x *float64) error {
		switch in.PeekKind() {
		case 'n':
			*x = math.NaN()
			_, err := in.ReadToken()
			return err
		case '"':
			token, err := in.ReadToken()
			if err != nil {
				return err
			}
			switch token.String() {
			case "INF":
				*x = math.Inf(1)
			case "-INF":
				*x = math.Inf(-1)
			default:
				return &json.SemanticError{JSONKind: '"'}
			}
			return nil
		}
		return json.SkipFunc
	})),
)

func encode(w io.Writer, v any) error {
	if err := json.MarshalWrite(w, v, numbers, jsontext.WithIndent("  "),
		json.Deterministic(true), jsontext.AllowInvalidUTF8(true)); err != nil {
		return err
	}
	_, err := w.Write([]byte("\n"))
	return err
}

func decode(data []byte, v any) error { return json.Unmarshal(data, v, numbers) }

// found is findings.json.
type found struct {
	Headline string            `json:"headline,omitempty"`
	Cautions []string          `json:"cautions"`
	Safety   []string          `json:"safety,omitempty"`
	Findings []finding.Finding `json:"findings"`
	Fits     []finding.Fit     `json:"fits"`
}

// WriteFindings writes what findings.json holds: the findings and, for each
// fit, what was free, held and not separable. Values are SI; null stands for
// what is not known.
func WriteFindings(w io.Writer, r *Record) error {
	return encode(w, found{r.Headline, r.Cautions, r.Safety, r.Findings, r.Fits})
}

// ran is run.json.
type ran struct {
	Run
	Track *tracked `json:"track,omitempty"`
}

// tracked is what a track holds beside its table.
type tracked struct {
	Bobs        []trackedBob      `json:"bobs"`
	Calibration track.Calibration `json:"calibration"`
	Cautions    []string          `json:"cautions"`
	BrokeAt     float64           `json:"broke_at_s"` // null when whole
	BrokeBy     string            `json:"broke_by,omitempty"`
}

type trackedBob struct {
	Name string `json:"name"`
	Part string `json:"part,omitempty"`
}

func beside(t *track.Track) *tracked {
	if t == nil {
		return nil
	}
	out := &tracked{Calibration: t.Cal, Cautions: t.Cautions, BrokeAt: t.BrokeAt, BrokeBy: t.BrokeBy}
	for _, b := range t.Bobs {
		out.Bobs = append(out.Bobs, trackedBob{b.Name, b.Part})
	}
	return out
}
