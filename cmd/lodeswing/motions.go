package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"

	"lodeswing/analyze"
	"lodeswing/analyze/record"
	"lodeswing/plots"
)

// tellMotions tells how alike the motions of two results are and draws when one does
// what the other did.
func tellMotions(ctx context.Context, out io.Writer, a, b, path string) error {
	ending := filepath.Ext(path)
	if ending != ".svg" && ending != ".png" {
		return wrongUse("--motion draws .svg or .png, not %q", path)
	}
	var recs []*record.Record
	for _, dir := range []string{a, b} {
		if !isResult(dir) {
			return wrongUse("--motion compares two results; %s holds several or none", dir)
		}
		r, err := record.Read(dir)
		if err != nil {
			return err
		}
		recs = append(recs, r)
	}
	found, plot, err := analyze.TwoUnits(ctx, recs[0], recs[1])
	if err != nil {
		return err
	}
	for i := range found {
		f := &found[i]
		fmt.Fprintf(out, "%s: %s\n", f.Name, f.Display())
	}
	if plot == nil {
		return nil
	}
	svg, png, err := plots.Curve(plot)
	if err != nil {
		return err
	}
	data := svg
	if ending == ".png" {
		data = png
	}
	return writeWhole(path, data)
}
