package rig

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
)

func sqrt(x float64) float64 { return math.Sqrt(math.Max(x, 0)) }

// Marshal writes the rig as a rig file, in the units of its keys: what Parse
// reads back is the same rig. Numbers take the shortest decimal that does so.
func (r *Rig) Marshal() []byte {
	var b bytes.Buffer
	w := writer{&b, r}
	w.table(reflect.ValueOf(r).Elem(), "", "")
	return b.Bytes()
}

// Write writes the rig to w.
func (r *Rig) Write(w io.Writer) error {
	_, err := w.Write(r.Marshal())
	return err
}

// Save writes the rig to a file, whole or not at all.
func (r *Rig) Save(path string) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+"-*")
	if err != nil {
		return fmt.Errorf("the rig cannot be written to %s: %w", path, err)
	}
	_, err = f.Write(r.Marshal())
	if err == nil {
		err = f.Chmod(0o644)
	}
	if err == nil {
		err = f.Sync()
	}
	if e := f.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		os.Remove(f.Name())
		return fmt.Errorf("the rig cannot be written to %s: %w", path, err)
	}
	return nil
}

// Clone returns a copy that shares nothing with r.
func (r *Rig) Clone() *Rig {
	c := deepCopy(reflect.ValueOf(*r)).Interface().(Rig)
	return &c
}

func deepCopy(v reflect.Value) reflect.Value {
	out := reflect.New(v.Type()).Elem()
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			out.Field(i).Set(deepCopy(v.Field(i)))
		}
	case reflect.Slice:
		if !v.IsNil() {
			out.Set(reflect.MakeSlice(v.Type(), v.Len(), v.Len()))
			for i := range v.Len() {
				out.Index(i).Set(deepCopy(v.Index(i)))
			}
		}
	case reflect.Map:
		if !v.IsNil() {
			out.Set(reflect.MakeMap(v.Type()))
			for it := v.MapRange(); it.Next(); {
				out.SetMapIndex(it.Key(), deepCopy(it.Value()))
			}
		}
	case reflect.Pointer:
		if !v.IsNil() {
			out.Set(reflect.New(v.Type().Elem()))
			out.Elem().Set(deepCopy(v.Elem()))
		}
	default:
		out.Set(v)
	}
	return out
}

// writer writes tables: plain keys first, then inline tables, then tables.
type writer struct {
	b *bytes.Buffer
	r *Rig
}

// table writes one table under its header; the root has none.
func (w writer) table(v reflect.Value, header, name string) {
	lines := w.keys(v)
	if header != "" {
		if len(lines) == 0 && !strings.HasPrefix(header, "[[") {
			return
		}
		fmt.Fprintf(w.b, "\n%s\n", header)
	}
	for _, l := range lines {
		fmt.Fprintln(w.b, l)
	}
	if name != "" {
		return // tables inside tables are inline
	}
	for _, f := range schemaOf(v.Type()) {
		fv := v.Field(f.index)
		switch {
		case f.isValue:
		case fv.Kind() == reflect.Struct:
			w.table(fv, "["+f.key+"]", f.key)
		case fv.Kind() == reflect.Slice && fv.Type().Elem().Kind() == reflect.Struct:
			for i := range fv.Len() {
				w.table(fv.Index(i), "[["+f.key+"]]", f.key)
			}
		}
	}
}

// keys writes the keys of a table that are set, "key = value".
func (w writer) keys(v reflect.Value) []string {
	var out []string
	add := func(key, text string) { out = append(out, tomlKey(key)+" = "+text) }
	nested := v.Type() != reflect.TypeFor[Rig]()
	for _, f := range schemaOf(v.Type()) {
		switch x := v.Field(f.index).Addr().Interface().(type) {
		case *Value:
			if f.key == "gap_mm" && x.Fit && !x.Set && v.Addr().Interface().(*Magnet).GapFit {
				continue // at_fit says it
			}
			switch {
			case x.Fit && x.Set:
				add(f.key, strconv.Quote("fit from "+f.unit.text(x.V)))
			case x.Fit:
				add(f.key, `"fit"`)
			case x.Set:
				add(f.key, f.unit.text(x.V))
				if x.UGiven || x.U != f.defaultU(x.V) {
					add("u_"+f.key, f.unit.text(x.U))
				}
			}
		case *string:
			if *x != "" {
				add(f.key, tomlString(*x))
			}
		case *bool:
			switch p := v.Addr().Interface().(type) {
			case *Clip:
				if !p.Battery {
					add(f.key, "false")
				}
			case *Bob:
				if p.BallSet {
					add(f.key, strconv.FormatBool(*x))
				}
			default:
				if *x {
					add(f.key, "true")
				}
			}
		case *[]float64:
			if p, ok := v.Addr().Interface().(*Part); ok && f.key == "pivot_mm" && p.PivotFromTrack {
				add(f.key, `"from track"`)
			} else if *x != nil {
				add(f.key, listText(*x, f.unit))
			}
		case *[][2]float64:
			if *x != nil {
				rows := make([]string, len(*x))
				for i, p := range *x {
					rows[i] = listText(p[:], f.unit)
				}
				add(f.key, "["+strings.Join(rows, ", ")+"]")
			}
		case *[][]float64:
			if *x != nil {
				add(f.key, w.covariance(*x))
			}
		case *[]string:
			if *x != nil {
				add(f.key, textList(*x))
			}
		case *[][]string:
			if *x != nil {
				rows := make([]string, len(*x))
				for i, p := range *x {
					rows[i] = textList(p)
				}
				add(f.key, "["+strings.Join(rows, ", ")+"]")
			}
		case *map[string][]float64:
			if *x != nil {
				var rows []string
				for _, k := range sortedNames(*x) {
					rows = append(rows, tomlKey(k)+" = "+listText((*x)[k], f.unit))
				}
				add(f.key, "{ "+strings.Join(rows, ", ")+" }")
			}
		case *map[string][2]float64:
			if *x != nil {
				add(f.key, w.bounds(*x))
			}
		default:
			fv := v.Field(f.index)
			if fv.Kind() == reflect.Pointer {
				if fv.IsNil() {
					continue
				}
				fv = fv.Elem()
			} else if !nested || fv.Kind() != reflect.Struct {
				continue // a table with a header of its own
			}
			if inner := w.keys(fv); len(inner) > 0 {
				add(f.key, "{ "+strings.Join(inner, ", ")+" }")
			}
		}
	}
	return out
}

func (w writer) bounds(m map[string][2]float64) string {
	names := map[string]any{}
	for k := range m {
		names[k] = nil
	}
	var rows []string
	for _, k := range sortedKeys(names) {
		u := fileUnit{Mul: 1, Div: 1}
		if n, err := w.r.Find(k); err == nil {
			u = n.Unit.u
		}
		b := m[k]
		rows = append(rows, tomlKey(k)+" = "+listText(b[:], u))
	}
	return "{ " + strings.Join(rows, ", ") + " }"
}

// covariance writes the [fitted] covariance in the units of its numbers.
func (w writer) covariance(m [][]float64) string {
	units := make([]fileUnit, len(m))
	for i := range m {
		units[i] = fileUnit{Mul: 1, Div: 1}
		if i < len(w.r.Fitted.Of) {
			if n, err := w.r.Find(w.r.Fitted.Of[i]); err == nil {
				units[i] = n.Unit.u
			}
		}
	}
	var b strings.Builder
	b.WriteString("[\n")
	for i, row := range m {
		b.WriteString("  [")
		for j, x := range row {
			if j > 0 {
				b.WriteString(", ")
			}
			y := x
			if j < len(units) {
				y = units[i].fromSI(units[j].fromSI(x))
			}
			b.WriteString(tomlFloat(strconv.FormatFloat(y, 'g', -1, 64)))
		}
		b.WriteString("],\n")
	}
	b.WriteString("]")
	return b.String()
}

func listText(xs []float64, u fileUnit) string {
	out := make([]string, len(xs))
	for i, x := range xs {
		out[i] = u.text(x)
	}
	return "[" + strings.Join(out, ", ") + "]"
}

func textList(xs []string) string {
	out := make([]string, len(xs))
	for i, x := range xs {
		out[i] = tomlString(x)
	}
	return "[" + strings.Join(out, ", ") + "]"
}

// tomlString quotes a text as a TOML basic string.
func tomlString(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r == '\n':
			b.WriteString(`\n`)
		case r == '\t':
			b.WriteString(`\t`)
		case r < 0x20 || r == 0x7f:
			fmt.Fprintf(&b, `\u%04X`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

func tomlKey(k string) string {
	if k == "" {
		return `""`
	}
	for _, r := range k {
		if !(r == '_' || r == '-' || (r >= 'a' && r <= 'z') || (r >= 'A' && r <= 'Z') || (r >= '0' && r <= '9')) {
			return tomlString(k)
		}
	}
	return k
}
