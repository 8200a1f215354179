package record

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// Read reads a result folder back. The record holds the numbers that were
// written, bit for bit. A folder that is not a result, that was written by a
// newer program, or in which a listed file is missing or broken is an error
// that names the file; only figures and report may be missing, since they can be
// drawn again.
func Read(dir string) (*Record, error) {
	info, err := os.Stat(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no folder %s", dir)
	}
	if err != nil {
		return nil, cannot("read "+dir, err)
	}
	if !info.IsDir() {
		return nil, fmt.Errorf("%s is a file, not a result folder", dir)
	}
	root, err := os.OpenRoot(dir) // a list that points outside the folder reads nothing
	if err != nil {
		return nil, cannot("open "+dir, err)
	}
	defer root.Close()
	fsys := root.FS()
	p, ours, err := readPack(fsys)
	if err != nil {
		return nil, cannot("read "+filepath.Join(dir, packName), err)
	}
	if !ours {
		return nil, fmt.Errorf("%s is not a result folder: it has no %s that lodeswing wrote", dir, packName)
	}
	if p.Lodeswing.Format > format {
		return nil, fmt.Errorf("%s was written by a newer lodeswing (%s, format %d; this one reads %d); update the program",
			dir, p.Lodeswing.Version, p.Lodeswing.Format, format)
	}
	rec := &Record{}
	for _, res := range p.Resources {
		if res.Kept {
			rec.Kept = append(rec.Kept, Kept{res.Path, filepath.Join(dir, filepath.FromSlash(res.Path))})
		}
	}
	var run ran
	figures := map[string]int{}
	for _, res := range p.Resources {
		if res.Kept {
			continue
		}
		data, err := fs.ReadFile(fsys, res.Path)
		if errors.Is(err, fs.ErrNotExist) && drawn(res.Path) {
			continue
		}
		if errors.Is(err, fs.ErrNotExist) {
			return nil, fmt.Errorf("%s is damaged: %s is on its list but not there; measure or analyze again", dir, res.Path)
		}
		if err != nil {
			return nil, cannot("read "+filepath.Join(dir, res.Path), err)
		}
		name := filepath.Join(dir, filepath.FromSlash(res.Path))
		if err := rec.take(res, name, data, &run, figures); err != nil {
			return nil, err
		}
	}
	rec.Run = run.Run
	if rec.Track != nil {
		if run.Track == nil {
			return nil, fmt.Errorf("%s is damaged: run.json says nothing about the track; measure the clip again", dir)
		}
		run.Track.give(rec.Track)
	}
	return rec, nil
}

// drawn tells whether a file can be drawn again from the others.
func drawn(path string) bool { return path == "report.html" || strings.HasPrefix(path, "figures/") }

// take takes one file of the folder into the record.
func (r *Record) take(res resource, name string, data []byte, run *ran, figures map[string]int) (err error) {
	in := bytes.NewReader(data)
	switch {
	case res.Path == "track.csv":
		r.Track, err = track.ReadTable(in, name)
	case res.Path == "angles.csv":
		r.Angles, err = ReadAngles(in, name, "")
	case res.Path == "ledger.csv":
		r.Passes, err = readPasses(in, name)
	case res.Path == "findings.json":
		var f found
		if err := decode(data, &f); err != nil {
			return fmt.Errorf("%s is damaged: %w", name, err)
		}
		r.Headline, r.Cautions, r.Safety, r.Findings, r.Fits = f.Headline, f.Cautions, f.Safety, f.Findings, f.Fits
	case res.Path == "run.json":
		if err := decode(data, run); err != nil {
			return fmt.Errorf("%s is damaged: %w", name, err)
		}
	case res.Path == "fitted.toml":
		r.FittedRig = string(data)
	case res.Path == "still.png":
		r.Still = data
	case res.Path == "report.html":
		r.Report = data
	case res.Curve != nil:
		h := res.Curve
		c := finding.Curve{Key: h.Key, Subject: h.Subject, Title: h.Title, Caption: h.Caption, X: h.X, Y: h.Y}
		err = readCurve(in, name, &c)
		r.Curves = append(r.Curves, c)
	case res.Cells != nil:
		var g *finding.Grid
		if g, err = readGrid(in, name, res.Cells); err == nil && len(r.Curves) > 0 {
			r.Curves[len(r.Curves)-1].Grid = g
		}
	case strings.HasPrefix(res.Path, "figures/"):
		base := strings.TrimSuffix(path.Base(res.Path), path.Ext(res.Path))
		k, ok := figures[base]
		if !ok {
			k = len(r.Figures)
			figures[base] = k
			r.Figures = append(r.Figures, Figure{Name: base})
		}
		if path.Ext(res.Path) == ".svg" {
			r.Figures[k].SVG = data
		} else {
			r.Figures[k].PNG = data
		}
	}
	return err
}

// give adds to a track what its table does not hold, and puts the bobs in the
// order in which they were followed.
func (t *tracked) give(tr *track.Track) {
	tr.Cal, tr.Cautions, tr.BrokeAt, tr.BrokeBy = t.Calibration, t.Cautions, t.BrokeAt, t.BrokeBy
	bobs := make([]track.Bob, 0, len(tr.Bobs))
	for _, b := range t.Bobs {
		if have := tr.Find(b.Name); have != nil {
			have.Part = b.Part
			bobs = append(bobs, *have)
		}
	}
	for _, b := range tr.Bobs { // a bob that somebody added to the table by hand
		known := false
		for _, k := range t.Bobs {
			known = known || k.Name == b.Name
		}
		if !known {
			bobs = append(bobs, b)
		}
	}
	tr.Bobs = bobs
}
