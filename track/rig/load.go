package rig

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"reflect"
)

// maxBytes bounds a rig file; a real one has a few kilobytes.
const maxBytes = 1 << 20

// Load reads and checks a rig file. The error is one line per problem, each
// with file, line and key.
func Load(path string) (*Rig, error) {
	f, err := os.Open(path)
	if err != nil {
		var pe *os.PathError
		if errors.As(err, &pe) {
			err = pe.Err
		}
		return nil, fmt.Errorf("the rig %s cannot be read: %w", path, err)
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxBytes+1))
	if err != nil {
		return nil, fmt.Errorf("the rig %s cannot be read: %w", path, errors.Unwrap(err))
	}
	r, err := Parse(filepath.Base(path), data)
	if err != nil {
		return nil, err
	}
	r.Path = path
	return r, nil
}

// Parse reads and checks the text of a rig; name stands for the file in errors.
// The error is a Problems.
func Parse(name string, data []byte) (*Rig, error) {
	if len(data) > maxBytes {
		return nil, Problems{{File: name, Text: "this is larger than 1 MB: it is not a rig"}}
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf")) // some editors begin a file with this mark
	tree, lines, err := readTOML(name, data)
	if err != nil {
		return nil, err
	}
	d := &decoder{reporter: reporter{file: name}, lines: lines}
	r := &Rig{Path: name}
	d.table(tree, reflect.ValueOf(r).Elem(), "", "a rig")
	if d.err() == nil { // a check of half-read data would blame the wrong thing
		c := &checker{reporter: &d.reporter, lines: lines, r: r}
		c.all()
	}
	if err := d.err(); err != nil {
		return nil, err
	}
	return r, nil
}

// CheckScale tells what the rig's [scale] lacks for measuring in a picture; a rig
// for simulation needs none. The error names the remedy.
func (r *Rig) CheckScale() error {
	say := func(text string) error { return Problem{File: filepath.Base(r.Path), Text: text} }
	s := r.Scale
	switch {
	case s.Target != "" || (s.LengthM.Set && (len(s.EndsPX) == 2 || s.MarkLook != "")):
		return nil
	case s.LengthM.Set:
		return say("[scale] gives a length but not where it is: add ends_px = [[u, v], [u, v]], or mark_look for two marks that are found by themselves")
	case len(s.EndsPX) == 2 || s.MarkLook != "":
		return say("[scale] says where a length is but not how long it is: add length_mm")
	}
	return say("there is no scale: add [scale] with length_mm and ends_px, or with target = the name of a printed target")
}

// TimeRatio is how many seconds of the clip's own time make one true second:
// slow motion times the camera clock's known error.
func (c Camera) TimeRatio() float64 {
	return c.RateFactor.Or(1) * (1 + 1e-6*c.ClockPPM.Or(0))
}

// XYZ turns a place or direction of a rig, [x, z] or [x, y, z], into x, y, z. A
// missing one is the origin.
func XYZ(v []float64) [3]float64 {
	switch len(v) {
	case 2:
		return [3]float64{v[0], 0, v[1]}
	case 3:
		return [3]float64{v[0], v[1], v[2]}
	}
	return [3]float64{}
}

// FindPart returns the part of that name, or nil.
func (r *Rig) FindPart(name string) *Part {
	for i := range r.Parts {
		if r.Parts[i].Name == name {
			return &r.Parts[i]
		}
	}
	return nil
}

// FindMagnet returns the magnet of that name, or nil.
func (r *Rig) FindMagnet(name string) *Magnet {
	for i := range r.Magnets {
		if r.Magnets[i].Name == name {
			return &r.Magnets[i]
		}
	}
	return nil
}
