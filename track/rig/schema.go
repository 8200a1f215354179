package rig

import (
	"reflect"
	"strconv"
	"strings"
	"sync"
)

// field is one key that a table of the rig may hold, as its struct tag says.
type field struct {
	key      string
	stem     string // key without its unit
	unit     fileUnit
	index    int
	u, relU  float64 // default standard uncertainty: file's unit, share of the value
	fit      bool    // may be "fit"
	pos, non bool    // must be > 0, ≥ 0
	isValue  bool
}

var valueType = reflect.TypeFor[Value]()

var schemas sync.Map // reflect.Type -> []field

// schemaOf reads the keys of a struct from its tags.
func schemaOf(t reflect.Type) []field {
	if s, ok := schemas.Load(t); ok {
		return s.([]field)
	}
	var fields []field
	for i := range t.NumField() {
		tag := t.Field(i).Tag.Get("rig")
		if tag == "-" || tag == "" {
			continue
		}
		words := strings.Split(tag, ",")
		f := field{key: words[0], index: i, isValue: t.Field(i).Type == valueType}
		f.stem, f.unit = unitOf(f.key)
		for _, w := range words[1:] {
			name, num, _ := strings.Cut(w, "=")
			x, _ := strconv.ParseFloat(num, 64)
			switch name {
			case "u":
				f.u = x
			case "rel_u":
				f.relU = x
			case "fit":
				f.fit = true
			case "pos":
				f.pos = true
			case "nonneg":
				f.non = true
			}
		}
		fields = append(fields, f)
	}
	schemas.Store(t, fields)
	return fields
}

// defaultU is the stated default standard uncertainty in SI of the SI value v.
func (f field) defaultU(v float64) float64 {
	if f.relU > 0 {
		return f.relU * max(v, -v)
	}
	return f.unit.toSI(f.u)
}

// keysOf lists the keys that a table of this type may hold, u_ keys included.
func keysOf(t reflect.Type) []string {
	var keys []string
	for _, f := range schemaOf(t) {
		keys = append(keys, f.key)
		if f.isValue {
			keys = append(keys, "u_"+f.key)
		}
	}
	return keys
}

// homesOf lists the tables in which a key is known, as a file writes them.
func homesOf(key string) []string {
	var homes []string
	var walk func(t reflect.Type, name string)
	walk = func(t reflect.Type, name string) {
		for _, f := range schemaOf(t) {
			if name != "" && (f.key == key || (f.isValue && "u_"+f.key == key)) {
				homes = append(homes, name)
			}
			ft, open, shut := t.Field(f.index).Type, "[", "]"
			if ft.Kind() == reflect.Pointer {
				ft = ft.Elem()
			}
			if ft.Kind() == reflect.Slice && ft.Elem().Kind() == reflect.Struct {
				ft, open, shut = ft.Elem(), "[[", "]]"
			}
			if ft.Kind() == reflect.Struct && ft != valueType {
				if name != "" {
					walk(ft, f.key+" of "+name)
				} else {
					walk(ft, open+f.key+shut)
				}
			}
		}
	}
	walk(reflect.TypeFor[Rig](), "")
	return homes
}
