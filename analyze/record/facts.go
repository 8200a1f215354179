package record

import (
	"fmt"
	"sort"
	"strconv"
	"strings"

	"github.com/go-json-experiment/json"
)

// Fact is one line of a clip's facts, for people.
type Fact struct{ Name, Value string }

// List turns the clip's facts, whatever JSON value they are, into lines: names
// from the keys, with the unit that a key ends in; what is empty is left out.
func (c *Clip) List() []Fact {
	data, err := json.Marshal(c.Facts, numbers)
	if err != nil {
		return nil
	}
	var v any
	if err := decode(data, &v); err != nil {
		return nil
	}
	var out []Fact
	flatten("", v, &out)
	return out
}

// keyUnits are the endings of keys that name a unit.
var keyUnits = []struct{ ending, unit string }{
	{"_per_s", "/s"}, {"_px", "px"}, {"_deg", "°"}, {"_ms", "ms"}, {"_s", "s"}, {"_hz", "Hz"}, {"_m", "m"},
}

func flatten(name string, v any, out *[]Fact) {
	unit := ""
	words := name
	for _, k := range keyUnits {
		if rest, ok := strings.CutSuffix(name, k.ending); ok {
			words, unit = rest, k.unit
			break
		}
	}
	words = strings.ReplaceAll(words, "_", " ")
	add := func(text string) {
		if text == "" {
			return
		}
		switch unit {
		case "":
		case "°", "/s":
			text += unit
		default:
			text += " " + unit
		}
		*out = append(*out, Fact{words, text})
	}
	switch v := v.(type) {
	case map[string]any:
		keys := make([]string, 0, len(v))
		for k := range v {
			keys = append(keys, k)
		}
		sort.Strings(keys)
		for _, k := range keys {
			under := k
			if name != "" {
				under = name + ": " + k
			}
			flatten(under, v[k], out)
		}
	case []any:
		var texts []string
		for _, e := range v {
			switch e := e.(type) {
			case map[string]any, []any:
				add(fmt.Sprintf("%d entries", len(v))) // single entries are in run.json
				return
			default:
				texts = append(texts, scalar(e))
			}
		}
		add(strings.Join(texts, "; "))
	default:
		add(scalar(v))
	}
}

func scalar(v any) string {
	switch v := v.(type) {
	case nil:
		return ""
	case bool:
		if v {
			return "yes"
		}
		return "no"
	case float64:
		if v < 1e-12 && v > -1e-12 {
			v = 0 // rounding's dust
		}
		return strconv.FormatFloat(v, 'g', 7, 64)
	}
	return fmt.Sprint(v)
}
