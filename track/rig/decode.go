package rig

import (
	"fmt"
	"math"
	"reflect"
	"sort"
	"strconv"
	"strings"
	"time"
)

// decoder fills a Rig from plain TOML values and gathers what is wrong.
type decoder struct {
	reporter
	lines lineMap
}

// table fills the struct dst. key is the table's place in the file's line map,
// where names it for people: "[[bob]] \"lamp\"".
func (d *decoder) table(src map[string]any, dst reflect.Value, key, where string) {
	if c, ok := dst.Addr().Interface().(*Clip); ok {
		c.Battery = true
	}
	known := map[string]field{}
	for _, f := range schemaOf(dst.Type()) {
		known[f.key] = f
	}
	for _, k := range sortedKeys(src) {
		at := join(key, k)
		if f, ok := known[k]; ok {
			d.set(src[k], dst.Field(f.index), f, at, where)
			continue
		}
		if f, ok := known[strings.TrimPrefix(k, "u_")]; ok && f.isValue {
			continue // second round
		}
		d.unknown(k, dst.Type(), at, where)
	}
	for _, k := range sortedKeys(src) {
		f, ok := known[strings.TrimPrefix(k, "u_")]
		if _, own := known[k]; own || !ok || !f.isValue {
			continue
		}
		d.uncertainty(src[k], dst.Field(f.index).Addr().Interface().(*Value), f, join(key, k), where)
	}
	switch p := dst.Addr().Interface().(type) {
	case *Bob:
		if _, p.BallSet = src["ball"]; !p.BallSet {
			p.Ball = p.DiameterM.Set
		}
	case *Part:
		p.PivotFromTrack = src["pivot_mm"] == "from track"
	case *Magnet:
		p.GapM.Fit = p.GapM.Fit || p.GapFit
	}
}

func (d *decoder) unknown(k string, t reflect.Type, at, where string) {
	line := d.lines.at(at)
	if f, ok := fieldOf(t, strings.TrimPrefix(k, "u_")); ok && !f.isValue && k != f.key {
		d.say(line, "key %q: %q in %s takes no uncertainty of its own%s", k, f.key, where, readingKey(t, f))
		return
	}
	if homes := homesOf(k); len(homes) > 0 {
		d.say(line, "key %q is not known in %s; it belongs in %s", k, where, strings.Join(homes, " or "))
		return
	}
	if n, ok := nearest(k, keysOf(t)); ok {
		d.say(line, "key %q is not known in %s; did you mean %q?", k, where, n)
		return
	}
	plain := []string{}
	for _, f := range schemaOf(t) {
		plain = append(plain, f.key)
	}
	d.say(line, "key %q is not known in %s; known are %s", k, where, strings.Join(plain, ", "))
}

// readingKey says which key holds the uncertainty of a list of coordinates.
func readingKey(t reflect.Type, f field) string {
	if r, ok := fieldOf(t, f.stem+"_reading_"+f.unit.Ending); ok {
		return fmt.Sprintf("; %q says how well each coordinate is known", r.key)
	}
	return ""
}

func fieldOf(t reflect.Type, key string) (field, bool) {
	for _, f := range schemaOf(t) {
		if f.key == key {
			return f, true
		}
	}
	return field{}, false
}

// set fills one field from one TOML value.
func (d *decoder) set(v any, dst reflect.Value, f field, at, where string) {
	line := d.lines.at(at)
	wrong := func(wanted string) {
		d.say(line, "key %q in %s must be %s, not %s", f.key, where, wanted, kindWord(v))
	}
	switch p := dst.Addr().Interface().(type) {
	case *Value:
		d.number(v, p, f, line, where)
	case *string:
		s, ok := v.(string)
		if !ok {
			wrong("text in quotes")
			return
		}
		*p = s
	case *bool:
		b, ok := v.(bool)
		if !ok {
			wrong("true or false")
			return
		}
		*p = b
	case *[]float64:
		if part, ok := v.(string); ok && f.key == "pivot_mm" {
			if part != "from track" {
				d.say(line, "key %q in %s must be a place like [0, 0], or \"from track\", not %q", f.key, where, part)
				return
			}
			return // table notes it
		}
		if xs, ok := d.list(v, f, 0); ok {
			*p = xs
			return
		}
		wrong("a list of numbers like [0, -280]")
	case *[][2]float64:
		rows, ok := v.([]any)
		if !ok {
			wrong("a list of points like [[90, 40], [92, 430]]")
			return
		}
		for _, row := range rows {
			xs, ok := d.list(row, f, 2)
			if !ok {
				wrong("a list of points like [[90, 40], [92, 430]], each with two numbers")
				return
			}
			*p = append(*p, [2]float64{xs[0], xs[1]})
		}
	case *[][]float64:
		rows, ok := v.([]any)
		if !ok {
			wrong("a list of rows of numbers")
			return
		}
		for _, row := range rows {
			xs, ok := d.list(row, f, 0)
			if !ok {
				wrong("a list of rows of numbers")
				return
			}
			*p = append(*p, xs)
		}
	case *[]string:
		xs, ok := texts(v)
		if !ok {
			wrong("a list of names like [\"base magnet\"]")
			return
		}
		*p = xs
	case *[][]string:
		rows, ok := v.([]any)
		if !ok {
			wrong("a list of ties like [[\"left.moment\", \"right.moment\"]]")
			return
		}
		for _, row := range rows {
			xs, ok := texts(row)
			if !ok {
				wrong("a list of ties like [[\"left.moment\", \"right.moment\"]]")
				return
			}
			*p = append(*p, xs)
		}
	case *map[string][]float64:
		m, ok := v.(map[string]any)
		if !ok {
			wrong("a table like { \"base magnet\" = [0, -310] }")
			return
		}
		*p = map[string][]float64{}
		for _, name := range sortedKeys(m) {
			xs, ok := d.list(m[name], f, 0)
			if !ok {
				d.say(d.lines.at(join(at, name)), "%q in %s of %s must be a place like [0, -310], not %s", name, f.key, where, kindWord(m[name]))
				continue
			}
			(*p)[name] = xs
		}
	case *map[string][2]float64:
		m, ok := v.(map[string]any)
		if !ok {
			wrong("a table like { \"base magnet.moment\" = [0.5, 2] }")
			return
		}
		*p = map[string][2]float64{}
		for _, name := range sortedKeys(m) {
			xs, ok := d.list(m[name], f, 2)
			if !ok {
				d.say(d.lines.at(join(at, name)), "%q in %s of %s must be the least and the greatest number, like [0.5, 2], not %s", name, f.key, where, kindWord(m[name]))
				continue
			}
			(*p)[name] = [2]float64{xs[0], xs[1]}
		}
	default:
		d.nested(v, dst, f, at, where)
	}
}

// nested fills a table, an optional table or a list of tables.
func (d *decoder) nested(v any, dst reflect.Value, f field, at, where string) {
	line := d.lines.at(at)
	top := !strings.Contains(at, "/")
	name := f.key + " of " + where
	if top {
		name = "[" + f.key + "]"
	}
	if dst.Kind() == reflect.Slice {
		rows, ok := v.([]any)
		if !ok {
			d.say(line, "write [[%s]] in double brackets, since there may be several", f.key)
			return
		}
		for i, row := range rows {
			m, ok := row.(map[string]any)
			if !ok {
				d.say(line, "[[%s]] must be a table of keys, not %s", f.key, kindWord(row))
				continue
			}
			item := reflect.New(dst.Type().Elem()).Elem()
			label := "[[" + f.key + "]]"
			if s, ok := m["name"].(string); ok && s != "" {
				label += fmt.Sprintf(" %q", s)
			}
			d.table(m, item, join(at, strconv.Itoa(i)), label)
			dst.Set(reflect.Append(dst, item))
		}
		return
	}
	m, ok := v.(map[string]any)
	if !ok {
		if _, several := v.([]any); several && top {
			d.say(line, "write [%s] in single brackets: a rig has only one", f.key)
		} else {
			d.say(line, "key %q in %s must be a table of keys, not %s", f.key, where, kindWord(v))
		}
		return
	}
	if dst.Kind() == reflect.Pointer {
		dst.Set(reflect.New(dst.Type().Elem()))
		dst = dst.Elem()
	}
	d.table(m, dst, at, name)
}

// number fills a Value from a number, "fit" or "fit from 1.1".
func (d *decoder) number(v any, p *Value, f field, line int, where string) {
	if s, ok := v.(string); ok {
		word, from, has := strings.Cut(strings.TrimSpace(s), " from ")
		if word != "fit" {
			d.say(line, "key %q in %s must be a number%s, not the text %q", f.key, where, orFit(f), s)
			return
		}
		if !f.fit {
			d.say(line, "key %q in %s cannot be fitted: give a number", f.key, where)
			return
		}
		p.Fit = true
		if !has {
			return
		}
		x, err := strconv.ParseFloat(strings.TrimSpace(from), 64)
		if err != nil || math.IsInf(x, 0) || math.IsNaN(x) {
			d.say(line, "key %q in %s: what follows \"fit from\" must be a number, not %q", f.key, where, from)
			return
		}
		if d.inBounds(x, f, line, where) {
			p.V, p.Set = f.unit.toSI(x), true
		}
		return
	}
	x, ok := asNumber(v)
	if !ok {
		d.say(line, "key %q in %s must be a number%s, not %s", f.key, where, orFit(f), kindWord(v))
		return
	}
	if !d.inBounds(x, f, line, where) {
		return
	}
	p.V, p.Set = f.unit.toSI(x), true
	p.U = f.defaultU(p.V)
}

// largest is beyond every number of a toy, in any unit; it keeps products finite.
const largest = 1e15

func (d *decoder) inBounds(x float64, f field, line int, where string) bool {
	switch {
	case math.Abs(x) > largest:
		d.say(line, "key %q in %s is %g, which no toy has", f.key, where, x)
	case f.pos && x <= 0:
		d.say(line, "key %q in %s is %g, but must be greater than 0", f.key, where, x)
	case f.non && x < 0:
		d.say(line, "key %q in %s is %g, but must not be negative", f.key, where, x)
	default:
		return true
	}
	return false
}

func orFit(f field) string {
	if f.fit {
		return " or \"fit\""
	}
	return ""
}

// uncertainty fills U of a Value from its u_ key.
func (d *decoder) uncertainty(v any, p *Value, f field, at, where string) {
	line := d.lines.at(at)
	x, ok := asNumber(v)
	switch {
	case !ok:
		d.say(line, "key %q in %s must be a number, the standard uncertainty of %q, not %s", "u_"+f.key, where, f.key, kindWord(v))
	case x < 0 || x > largest:
		d.say(line, "key %q in %s is %g; a standard uncertainty lies between 0 and what is believable", "u_"+f.key, where, x)
	case p.Fit:
		d.say(line, "key %q in %s goes with a number, but %q is to be fitted: take the one or the other out", "u_"+f.key, where, f.key)
	case !p.Set:
		d.say(line, "key %q in %s stands alone: give %q too", "u_"+f.key, where, f.key)
	default:
		p.U, p.UGiven = f.unit.toSI(x), true
	}
}

// list reads a list of n numbers (any count for n = 0) and turns them into SI.
func (d *decoder) list(v any, f field, n int) ([]float64, bool) {
	items, ok := v.([]any)
	if !ok || (n > 0 && len(items) != n) {
		return nil, false
	}
	out := make([]float64, len(items))
	for i, it := range items {
		x, ok := asNumber(it)
		if !ok || math.Abs(x) > largest {
			return nil, false
		}
		out[i] = f.unit.toSI(x)
	}
	return out, true
}

func texts(v any) ([]string, bool) {
	items, ok := v.([]any)
	if !ok {
		return nil, false
	}
	out := make([]string, len(items))
	for i, it := range items {
		if out[i], ok = it.(string); !ok {
			return nil, false
		}
	}
	return out, true
}

// asNumber takes whole and decimal numbers, not TOML's nan and inf.
func asNumber(v any) (float64, bool) {
	switch x := v.(type) {
	case int64:
		return float64(x), true
	case float64:
		return x, !math.IsNaN(x) && !math.IsInf(x, 0)
	}
	return 0, false
}

func kindWord(v any) string {
	switch x := v.(type) {
	case string:
		return fmt.Sprintf("the text %q", x)
	case bool:
		return fmt.Sprintf("%t", x)
	case int64, float64:
		return fmt.Sprintf("the number %v", x)
	case []any:
		if len(x) == 1 {
			return "a list of one"
		}
		return fmt.Sprintf("a list of %d", len(x))
	case map[string]any:
		return "a table"
	case time.Time:
		return "a date"
	}
	return "a date or time"
}

func sortedKeys(m map[string]any) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}
