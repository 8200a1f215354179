package record

import (
	"fmt"
	"io"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// gridHead is a curve's grid without its cells, which are in a table of their
// own: one row per cell, row by row of Y. It follows the curve's own resource.
type gridHead struct {
	Label   string `json:"label"`
	Unit    string `json:"unit"`
	Log     bool   `json:"log,omitempty"`
	Columns int    `json:"columns"` // cells along x
}

// gridContent is the resource that holds the cells of c.
func gridContent(c *finding.Curve) content {
	g := c.Grid
	columns := []track.Column{
		{Name: "x", Type: "number", Unit: c.X.Unit, Meaning: c.X.Label + ", middle of the cell"},
		{Name: "y", Type: "number", Unit: c.Y.Unit, Meaning: c.Y.Label + ", middle of the cell"},
		{Name: "z", Type: "number", Unit: g.Unit, Meaning: g.Label},
	}
	return content{
		resource: resource{
			Path: "curves/" + FileName(c.Key, c.Subject) + "-cells.csv", Title: c.Title + ": cells",
			Description: "One row per cell of the picture, row by row.", Schema: schemaOf(columns),
			Cells: &gridHead{g.Label, g.Unit, g.Log, len(g.X)},
		},
		write: func(w io.Writer) error {
			return writeTable(w, columns, func(put func(...string) error) error {
				for i, z := range g.Z {
					if err := put(number(g.X[i%len(g.X)]), number(g.Y[i/len(g.X)]), number(z)); err != nil {
						return err
					}
				}
				return nil
			})
		},
	}
}

// readGrid reads the cells that gridContent wrote.
func readGrid(in io.Reader, name string, h *gridHead) (*finding.Grid, error) {
	g := &finding.Grid{Label: h.Label, Unit: h.Unit, Log: h.Log}
	err := readTable(in, name, []string{"x", "y", "z"}, func(r *row) {
		n := len(g.Z)
		if n < h.Columns {
			g.X = append(g.X, r.number("x"))
		}
		if h.Columns > 0 && n%h.Columns == 0 {
			g.Y = append(g.Y, r.number("y"))
		}
		g.Z = append(g.Z, r.number("z"))
	})
	if err == nil && (h.Columns < 1 || len(g.X) != h.Columns || len(g.Z) != len(g.X)*len(g.Y)) {
		err = fmt.Errorf("%s is damaged: %d cells are no whole rows of %d; make the result again", name, len(g.Z), h.Columns)
	}
	return g, err
}
