package record

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// The columns of the tables, as datapackage.json states them.
var (
	angleColumns = []track.Column{
		{Name: "t_s", Type: "number", Unit: "s", Meaning: "time since the clip's first frame"},
		{Name: "part", Type: "string", Meaning: "name of the part"},
		{Name: "angle_rad", Type: "number", Unit: "rad", Meaning: "angle, zero where an unmagnetised part would rest, positive towards +x"},
		{Name: "u_angle_rad", Type: "number", Unit: "rad", Meaning: "standard uncertainty of angle_rad"},
		{Name: "rate_rad_s", Type: "number", Unit: "rad/s", Meaning: "angular speed"},
		{Name: "u_rate_rad_s", Type: "number", Unit: "rad/s", Meaning: "standard uncertainty of rate_rad_s"},
	}
	passColumns = []track.Column{
		{Name: "t_s", Type: "number", Unit: "s", Meaning: "time at which the part passes its lowest point"},
		{Name: "part", Type: "string", Meaning: "name of the part"},
		{Name: "energy_J", Type: "number", Unit: "J", Meaning: "energy at the turning point before the pass"},
		{Name: "u_energy_J", Type: "number", Unit: "J", Meaning: "standard uncertainty of energy_J"},
		{Name: "kick_J", Type: "number", Unit: "J", Meaning: "energy that the coil added at the pass"},
		{Name: "u_kick_J", Type: "number", Unit: "J", Meaning: "standard uncertainty of kick_J"},
		{Name: "loss_J", Type: "number", Unit: "J", Meaning: "energy that friction took between the turning points around the pass"},
		{Name: "u_loss_J", Type: "number", Unit: "J", Meaning: "standard uncertainty of loss_J"},
	}
)

// curveColumns are a curve's columns; x and y in the units of its axes.
func curveColumns(c *finding.Curve) []track.Column {
	return []track.Column{
		{Name: "line", Type: "integer", Meaning: "number of the line, from 1"},
		{Name: "name", Type: "string", Meaning: "name of the line"},
		{Name: "role", Type: "string", Meaning: "data, model, residual, guide or mark"},
		{Name: "x", Type: "number", Unit: c.X.Unit, Meaning: c.X.Label},
		{Name: "y", Type: "number", Unit: c.Y.Unit, Meaning: c.Y.Label},
		{Name: "lo", Type: "number", Unit: c.Y.Unit, Meaning: "lower edge of the band around y, where there is one"},
		{Name: "hi", Type: "number", Unit: c.Y.Unit, Meaning: "upper edge of the band around y, where there is one"},
	}
}

// writeTable writes columns' names and then n rows, each filled by row.
func writeTable(w io.Writer, columns []track.Column, rows func(put func(cells ...string) error) error) error {
	out := csv.NewWriter(w)
	header := make([]string, len(columns))
	for i, c := range columns {
		header[i] = c.Name
	}
	if err := out.Write(header); err != nil {
		return err
	}
	if err := rows(func(cells ...string) error { return out.Write(cells) }); err != nil {
		return err
	}
	out.Flush()
	return out.Error()
}

func writeAngles(w io.Writer, all []Angles) error {
	return writeTable(w, angleColumns, func(put func(...string) error) error {
		for _, a := range all {
			for i, t := range a.T {
				err := put(number(t), a.Part, at(a.Angle, i), at(a.U, i), at(a.Rate, i), at(a.URate, i))
				if err != nil {
					return err
				}
			}
		}
		return nil
	})
}

func writePasses(w io.Writer, passes []Pass) error {
	return writeTable(w, passColumns, func(put func(...string) error) error {
		for _, p := range passes {
			err := put(number(p.T), p.Part, number(p.Energy), number(p.UEnergy), number(p.Kick), number(p.UKick), number(p.Loss), number(p.ULoss))
			if err != nil {
				return err
			}
		}
		return nil
	})
}

func writeCurve(w io.Writer, c *finding.Curve) error {
	return writeTable(w, curveColumns(c), func(put func(...string) error) error {
		for k, l := range c.Lines {
			for i, x := range l.X {
				err := put(strconv.Itoa(k+1), l.Name, string(l.Role), number(x), at(l.Y, i), at(l.Lo, i), at(l.Hi, i))
				if err != nil {
					return err
				}
			}
		}
		return nil
	})
}

// at is the cell of a slice that may be short or nil.
func at(xs []float64, i int) string {
	if i >= len(xs) {
		return ""
	}
	return number(xs[i])
}

// number is the shortest text that reads back exactly; NaN is empty.
func number(x float64) string {
	switch {
	case math.IsNaN(x):
		return ""
	case math.IsInf(x, 1):
		return "INF"
	case math.IsInf(x, -1):
		return "-INF"
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// row is one row of a table that is being read, its cells by column name.
type row struct {
	cells []string
	at    map[string]int
	err   error // the first cell that is not what its column wants
}

func (r *row) text(column string) string {
	if i, ok := r.at[column]; ok {
		return r.cells[i]
	}
	return ""
}

func (r *row) number(column string) float64 {
	text := strings.TrimSpace(r.text(column))
	if text == "" {
		return math.NaN()
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil && r.err == nil {
		r.err = fmt.Errorf("%s is %q, which is not a number; leave the cell empty where nothing is known", column, text)
	}
	return x
}

// readTable calls each for every row after the header, which must hold the
// needed columns.
func readTable(in io.Reader, name string, need []string, each func(*row)) error {
	table := csv.NewReader(in)
	table.ReuseRecord = true
	header, err := table.Read()
	if errors.Is(err, io.EOF) {
		return fmt.Errorf("%s is empty; it needs a header line with %s", name, strings.Join(need, ", "))
	}
	if err != nil {
		return tableError(name, err)
	}
	r := &row{at: map[string]int{}}
	for i, h := range header {
		r.at[strings.TrimSpace(strings.TrimPrefix(h, "\ufeff"))] = i
	}
	for _, column := range need {
		if _, ok := r.at[column]; !ok {
			return fmt.Errorf("%s has no column %s; it has %s", name, column, strings.Join(header, ", "))
		}
	}
	for {
		r.cells, err = table.Read()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return tableError(name, err)
		}
		each(r)
		if r.err != nil {
			line, _ := table.FieldPos(0)
			return fmt.Errorf("%s, line %d: %w", name, line, r.err)
		}
	}
}

func tableError(name string, err error) error {
	var bad *csv.ParseError
	if errors.As(err, &bad) {
		return fmt.Errorf("%s, line %d: %w", name, bad.Line, bad.Err)
	}
	return fmt.Errorf("cannot read %s: %w", name, err)
}

// ReadAngles reads an angle table: t_s and angle_rad, and where they are known
// part, u_angle_rad, rate_rad_s and u_rate_rad_s. Rows without a part belong to
// the part named here. name is what messages call the table.
func ReadAngles(in io.Reader, name, part string) ([]Angles, error) {
	var all []Angles
	index := map[string]int{}
	err := readTable(in, name, []string{"t_s", "angle_rad"}, func(r *row) {
		p := part
		if own := r.text("part"); own != "" {
			p = own
		}
		k, ok := index[p]
		if !ok {
			k = len(all)
			index[p] = k
			all = append(all, Angles{Part: p})
		}
		a := &all[k]
		t := r.number("t_s")
		if n := len(a.T); r.err == nil && (math.IsNaN(t) || math.IsInf(t, 0)) {
			r.err = errors.New("t_s is empty; every row needs its time")
		} else if r.err == nil && n > 0 && t <= a.T[n-1] {
			r.err = fmt.Errorf("the time %v s does not come after %v s; sort the table by t_s and keep one row per time", t, a.T[n-1])
		}
		a.T = append(a.T, t)
		a.Angle = append(a.Angle, r.number("angle_rad"))
		a.U = append(a.U, r.number("u_angle_rad"))
		a.Rate = append(a.Rate, r.number("rate_rad_s"))
		a.URate = append(a.URate, r.number("u_rate_rad_s"))
	})
	if err == nil && len(all) == 0 {
		err = fmt.Errorf("%s has a header but no rows", name)
	}
	return all, err
}

func readPasses(in io.Reader, name string) (passes []Pass, err error) {
	err = readTable(in, name, []string{"t_s"}, func(r *row) {
		passes = append(passes, Pass{
			Part: r.text("part"), T: r.number("t_s"), Energy: r.number("energy_J"), UEnergy: r.number("u_energy_J"),
			Kick: r.number("kick_J"), UKick: r.number("u_kick_J"), Loss: r.number("loss_J"), ULoss: r.number("u_loss_J"),
		})
	})
	return passes, err
}

// readCurve fills the lines of c.
func readCurve(in io.Reader, name string, c *finding.Curve) error {
	last := ""
	c.Lines = nil
	err := readTable(in, name, []string{"line", "role", "x", "y"}, func(r *row) {
		if n := r.text("line"); n != last || len(c.Lines) == 0 {
			last = n
			c.Lines = append(c.Lines, finding.Line{Name: r.text("name"), Role: finding.Role(r.text("role"))})
		}
		l := &c.Lines[len(c.Lines)-1]
		l.X, l.Y = append(l.X, r.number("x")), append(l.Y, r.number("y"))
		l.Lo, l.Hi = append(l.Lo, r.number("lo")), append(l.Hi, r.number("hi"))
	})
	for i := range c.Lines {
		l := &c.Lines[i]
		if unknown(l.Lo) && unknown(l.Hi) {
			l.Lo, l.Hi = nil, nil
		}
	}
	return err
}

func unknown(xs []float64) bool {
	for _, x := range xs {
		if !math.IsNaN(x) {
			return false
		}
	}
	return true
}
