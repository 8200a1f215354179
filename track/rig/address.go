package rig

import (
	"fmt"
	"reflect"
	"strings"
)

// Unit is the unit of a rig's number, in the file and in SI.
type Unit struct {
	Shown string // of the file, for people: "mm"; empty for a plain number
	SI    string // "m"; empty for a plain number
	u     fileUnit
}

// ToSI turns a number of the file's unit into SI.
func (u Unit) ToSI(x float64) float64 { return u.u.toSI(x) }

// FromSI turns an SI number into the file's unit.
func (u Unit) FromSI(x float64) float64 { return u.u.fromSI(x) }

// Number is one number of a rig with its address.
type Number struct {
	Address string // "base magnet.moment", "arm.friction.viscous", "camera.distance"
	Key     string // as the file writes it: "moment_A_m2"
	Value   *Value // in the rig itself: setting it changes the rig
	Unit    Unit
	MayFit  bool
}

// Numbers lists every number that a rig can hold, set or not, in the order of
// the file's tables. An address is the table's own name ("arm" for the part of
// that name, "camera" for [camera]) and the key without its unit. A table
// without a name goes by its kind, "coil", or "coil 2" for the second; a part's
// start is "arm.start.angle".
func (r *Rig) Numbers() []Number {
	var out []Number
	seen := map[string]bool{}
	var walk func(v reflect.Value, prefix string)
	walk = func(v reflect.Value, prefix string) {
		for _, f := range schemaOf(v.Type()) {
			fv := v.Field(f.index)
			switch {
			case f.isValue:
				a := dotted(prefix, f.stem)
				if seen[a] { // a bob and a part of one name share no quantity; a stray clash goes by the full key
					a = dotted(prefix, f.key)
				}
				seen[a] = true
				out = append(out, Number{
					Address: a, Key: f.key, Value: fv.Addr().Interface().(*Value),
					Unit: Unit{f.unit.Shown, f.unit.SI, f.unit}, MayFit: f.fit,
				})
			case fv.Kind() == reflect.Struct:
				walk(fv, dotted(prefix, f.key))
			case fv.Kind() == reflect.Pointer && !fv.IsNil():
				walk(fv.Elem(), dotted(prefix, f.key))
			case fv.Kind() == reflect.Slice && fv.Type().Elem().Kind() == reflect.Struct:
				for i := range fv.Len() {
					walk(fv.Index(i), itemName(fv.Index(i), f.key, i))
				}
			}
		}
	}
	walk(reflect.ValueOf(r).Elem(), "")
	return out
}

func dotted(prefix, word string) string {
	if prefix == "" {
		return word
	}
	return prefix + "." + word
}

func itemName(v reflect.Value, key string, i int) string {
	switch x := v.Addr().Interface().(type) {
	case *Start:
		return x.Part + ".start"
	case *Clip:
		return "clip " + x.File
	}
	if f := v.FieldByName("Name"); f.IsValid() && f.String() != "" {
		return f.String()
	}
	if i == 0 {
		return key
	}
	return fmt.Sprintf("%s %d", key, i+1)
}

// Find returns the number at an address like "base magnet.moment". The full key
// may stand in place of its short form ("base magnet.moment_A_m2"). The error
// names the nearest address.
func (r *Rig) Find(address string) (Number, error) {
	address = strings.TrimSpace(address)
	var addresses []string
	for _, n := range r.Numbers() {
		full := n.Address
		if i := strings.LastIndexByte(full, '.'); i >= 0 {
			full = full[:i+1] + n.Key
		} else {
			full = n.Key
		}
		if address == n.Address || address == full {
			return n, nil
		}
		addresses = append(addresses, n.Address)
	}
	if n, ok := nearest(address, addresses); ok {
		return Number{}, fmt.Errorf("this rig has no number %q; did you mean %q?", address, n)
	}
	owner, _, _ := strings.Cut(address, ".")
	var own []string
	for _, a := range addresses {
		if strings.HasPrefix(a, owner+".") {
			own = append(own, a)
		}
	}
	if len(own) > 0 {
		return Number{}, fmt.Errorf("this rig has no number %q; those of %q are %s", address, owner, strings.Join(own, ", "))
	}
	return Number{}, fmt.Errorf("this rig has no number %q; an address is a name and a quantity, like \"arm.inertia\"", address)
}

// Number returns the number at an address, to read or to set. The error names
// the nearest address.
func (r *Rig) Number(address string) (*Value, error) {
	n, err := r.Find(address)
	return n.Value, err
}

// SetFitted puts fitted numbers into the rig: values and covariance in SI, in
// the order of addresses. Each number gets its standard uncertainty from the
// covariance's diagonal and is no longer marked "fit"; the [fitted] block
// remembers that it was. Errors where an address is unknown or may not be
// fitted, or where shapes differ; the rig is then unchanged.
func (r *Rig) SetFitted(addresses []string, values []float64, covariance [][]float64) error {
	if len(values) != len(addresses) || len(covariance) != len(addresses) {
		return fmt.Errorf("fitted numbers: %d addresses, %d values and %d rows of covariance", len(addresses), len(values), len(covariance))
	}
	found := make([]Number, len(addresses))
	for i, a := range addresses {
		n, err := r.Find(a)
		if err != nil {
			return err
		}
		if !n.MayFit {
			return fmt.Errorf("%q may not be fitted", a)
		}
		if len(covariance[i]) != len(addresses) {
			return fmt.Errorf("fitted numbers: row %d of the covariance has %d entries", i+1, len(covariance[i]))
		}
		found[i] = n
	}
	f := Fitted{}
	for i, n := range found {
		*n.Value = Value{V: values[i], U: sqrt(covariance[i][i]), Set: true, UGiven: true}
		f.Of = append(f.Of, n.Address)
		f.Covariance = append(f.Covariance, append([]float64(nil), covariance[i]...))
	}
	for i := range r.Magnets { // at_fit would free the gap anew
		if r.Magnets[i].GapM.Set {
			r.Magnets[i].GapFit = false
		}
	}
	r.Fitted = f
	return nil
}

// FreeFitted marks the numbers of the [fitted] block as free again, starting
// from where they stand, and drops the block: a fitted.toml becomes the rig of
// a new matching.
func (r *Rig) FreeFitted() {
	for _, a := range r.Fitted.Of {
		if v, err := r.Number(a); err == nil {
			*v = Value{V: v.V, Set: true, Fit: true}
		}
	}
	r.Fitted = Fitted{}
}
