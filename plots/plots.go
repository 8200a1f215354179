// Package plots draws a record: figures as SVG and PNG, and the report, one
// HTML file that needs no network. What comes in: a record.Record in SI units.
// What goes out: pictures and pages in the units that people read. It computes
// nothing that the record does not hold; it only picks units, rounds, and thins
// what is too dense to be seen.
package plots

import (
	"context"
	"fmt"
	"slices"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
)

// Draw draws every figure and the report of a record and puts them into it, in
// place of what was there.
func Draw(ctx context.Context, r *record.Record) error {
	drawings, err := compose(r)
	if err != nil {
		return err
	}
	figures := make([]record.Figure, 0, len(drawings))
	shown := make([]figureShown, 0, len(drawings))
	for _, d := range drawings {
		if err := ctx.Err(); err != nil {
			return err
		}
		svg, err := d.svg()
		if err != nil {
			return fmt.Errorf("cannot draw the figure %s: %w", d.name, err)
		}
		png, err := d.png()
		if err != nil {
			return fmt.Errorf("cannot draw the figure %s: %w", d.name, err)
		}
		figures = append(figures, record.Figure{Name: d.name, SVG: svg, PNG: png})
		shown = append(shown, d.shown(svg))
	}
	page, err := report(r, shown)
	if err != nil {
		return fmt.Errorf("cannot write the report: %w", err)
	}
	r.Figures, r.Report = figures, page
	return nil
}

// Curve draws one curve as SVG and PNG.
func Curve(c *finding.Curve) (svg, png []byte, err error) {
	d := curveDrawing([]*finding.Curve{c})
	if svg, err = d.svg(); err != nil {
		return nil, nil, err
	}
	png, err = d.png()
	return svg, png, err
}

// stacks are the curves that belong in one figure, one above the other: where a
// record holds both for the same subject, the second is drawn as a lower panel
// of the first.
var stacks = []struct{ upper, lower string }{
	{"decay-fit", "decay-residuals"},
	{"match-fit", "match-residuals"},
}

// bySubject puts drawings of the same part next to each other, parts in the order
// in which they first come.
func bySubject(all []drawing) {
	order := map[string]int{}
	for _, d := range all {
		if _, ok := order[d.subject]; !ok {
			order[d.subject] = len(order)
		}
	}
	slices.SortStableFunc(all, func(a, b drawing) int { return order[a.subject] - order[b.subject] })
}

// compose lists a record's drawings in the order in which the report shows
// them: where the bobs went, then part by part the curves in the order of the
// analyses.
func compose(r *record.Record) ([]drawing, error) {
	var all []drawing
	if d, ok, err := pathDrawing(r); err != nil {
		return nil, err
	} else if ok {
		all = append(all, d)
	}
	below := map[int]int{} // curve -> the curve drawn below it
	isBelow := map[int]bool{}
	for _, s := range stacks {
		for i := range r.Curves {
			for j := range r.Curves {
				u, l := &r.Curves[i], &r.Curves[j]
				if u.Key == s.upper && l.Key == s.lower && u.Subject == l.Subject && !isBelow[j] {
					if _, taken := below[i]; !taken {
						below[i], isBelow[j] = j, true
					}
				}
			}
		}
	}
	for i := range r.Curves {
		if isBelow[i] {
			continue
		}
		panels := []*finding.Curve{&r.Curves[i]}
		if j, ok := below[i]; ok {
			panels = append(panels, &r.Curves[j])
		}
		all = append(all, curveDrawing(panels))
	}
	bySubject(all)
	names := map[string]int{}
	for i := range all {
		name := all[i].name
		names[name]++
		if n := names[name]; n > 1 {
			all[i].name = fmt.Sprintf("%s-%d", name, n)
		}
	}
	return all, nil
}
