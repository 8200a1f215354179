package track

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"sort"
	"strconv"
	"strings"
)

// Column is one column of the track's table.
type Column struct {
	Name    string
	Type    string // "number", "integer" or "string"
	Unit    string // "" where none applies
	Meaning string
}

// TableColumns are the columns that WriteTable writes, in order. ReadTable asks
// only for t_s, x_m and z_m.
var TableColumns = []Column{
	{"t_s", "number", "s", "middle of the exposure, seconds since the clip's first frame, slow motion undone"},
	{"bob", "string", "", "name of the bob"},
	{"x_m", "number", "m", "position in the plane of motion, to the right in the picture"},
	{"z_m", "number", "m", "position in the plane of motion, up"},
	{"u_x_m", "number", "m", "standard uncertainty of x_m from the picture alone"},
	{"u_z_m", "number", "m", "standard uncertainty of z_m from the picture alone"},
	{"u_px", "number", "px", "position in the upright picture, to the right"},
	{"v_px", "number", "px", "position in the upright picture, down"},
	{"state", "string", "", "how the bob was seen: seen, partly hidden, missing, at edge"},
	{"frame", "integer", "", "number of the frame, from 0"},
	{"cov_xx_m2", "number", "m²", "variance of x_m, the square of u_x_m"},
	{"cov_xz_m2", "number", "m²", "covariance of x_m and z_m"},
	{"cov_zz_m2", "number", "m²", "variance of z_m, the square of u_z_m"},
	{"cov_uu_px2", "number", "px²", "variance of u_px"},
	{"cov_uv_px2", "number", "px²", "covariance of u_px and v_px"},
	{"cov_vv_px2", "number", "px²", "variance of v_px"},
}

// WriteTable writes the track as CSV, one row per frame and bob, numbers as the
// shortest text that reads back exactly, what is not known as an empty cell.
// The calibration and the bobs' parts are not in the table.
func WriteTable(w io.Writer, t *Track) error {
	out := csv.NewWriter(w)
	header := make([]string, len(TableColumns))
	for i, c := range TableColumns {
		header[i] = c.Name
	}
	if err := out.Write(header); err != nil {
		return err
	}
	frames := 0
	for i := range t.Bobs {
		frames = max(frames, len(t.Bobs[i].Samples))
	}
	for k := range frames {
		for i := range t.Bobs {
			b := &t.Bobs[i]
			if k >= len(b.Samples) {
				continue
			}
			s := &b.Samples[k]
			ux, uz := s.Plane.Sigmas()
			err := out.Write([]string{
				cell(s.T), b.Name, cell(s.X), cell(s.Z), cell(ux), cell(uz), cell(s.U), cell(s.V),
				s.State.String(), strconv.Itoa(s.Frame),
				cell(s.Plane.AA), cell(s.Plane.AB), cell(s.Plane.BB),
				cell(s.Pixel.AA), cell(s.Pixel.AB), cell(s.Pixel.BB),
			})
			if err != nil {
				return err
			}
		}
	}
	out.Flush()
	return out.Error()
}

// cell writes a number as the shortest text that reads back exactly; NaN is empty.
func cell(x float64) string {
	switch {
	case math.IsNaN(x):
		return ""
	case math.IsInf(x, 1):
		return "INF" // as Frictionless tables write it
	case math.IsInf(x, -1):
		return "-INF"
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// ReadTable reads a track from CSV with a header line: the columns of
// TableColumns in any order, of which only t_s, x_m and z_m must be there.
// Without bob all rows are one bob of that name, without state every row that has a position
// was seen, without frame the rows of a bob are numbered from 0, and without
// uncertainties they are NaN: not known. name is what messages call the table.
func ReadTable(r io.Reader, name string) (*Track, error) {
	in := csv.NewReader(r)
	in.ReuseRecord = true
	header, err := in.Read()
	if errors.Is(err, io.EOF) {
		return nil, fmt.Errorf("%s is empty; a track needs a header line with t_s, x_m and z_m, and a row per frame", name)
	}
	if err != nil {
		return nil, tableError(name, err)
	}
	at := map[string]int{}
	for i, h := range header {
		h = strings.TrimSpace(strings.TrimPrefix(h, "\ufeff"))
		if _, twice := at[h]; twice {
			return nil, fmt.Errorf("%s has two columns %q; keep one", name, h)
		}
		at[h] = i
	}
	for _, need := range []string{"t_s", "x_m", "z_m"} {
		if _, ok := at[need]; !ok {
			return nil, fmt.Errorf("%s has no column %s (it has %s); a track needs t_s, x_m and z_m",
				name, need, strings.Join(header, ", "))
		}
	}
	t := &Track{BrokeAt: math.NaN()}
	index := map[string]int{}
	for {
		row, err := in.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, tableError(name, err)
		}
		line, _ := in.FieldPos(0)
		bob, s, err := sample(row, at)
		if err != nil {
			return nil, fmt.Errorf("%s, line %d: %w", name, line, err)
		}
		k, ok := index[bob]
		if !ok {
			k = len(t.Bobs)
			index[bob] = k
			t.Bobs = append(t.Bobs, Bob{Name: bob})
		}
		b := &t.Bobs[k]
		if _, given := at["frame"]; !given {
			s.Frame = len(b.Samples)
		}
		b.Samples = append(b.Samples, s)
	}
	if len(t.Bobs) == 0 {
		return nil, fmt.Errorf("%s has a header but no rows; was the clip followed to the end?", name)
	}
	for i := range t.Bobs {
		s := t.Bobs[i].Samples
		if !sort.SliceIsSorted(s, func(a, b int) bool { return s[a].T < s[b].T }) {
			return nil, fmt.Errorf("%s: the times of bob %q do not rise from row to row; sort the table by t_s", name, t.Bobs[i].Name)
		}
		for k := 1; k < len(s); k++ {
			if s[k].T == s[k-1].T {
				return nil, fmt.Errorf("%s: bob %q has two rows at %v s; keep one", name, t.Bobs[i].Name, s[k].T)
			}
		}
	}
	return t, nil
}

// sample reads one row. at holds the place of each column.
func sample(row []string, at map[string]int) (bob string, s Sample, err error) {
	number := func(column string) float64 {
		i, ok := at[column]
		if !ok {
			return math.NaN()
		}
		text := strings.TrimSpace(row[i])
		if text == "" || err != nil {
			return math.NaN()
		}
		x, bad := strconv.ParseFloat(text, 64)
		if bad != nil {
			err = fmt.Errorf("%s is %q, which is not a number; leave the cell empty where nothing is known", column, text)
		}
		return x
	}
	variance := func(column, sigma string) float64 {
		v := number(column)
		u := number(sigma)
		// The two say the same; where somebody changed only the plainer one, that holds.
		if !math.IsNaN(u) && !(math.Abs(v-u*u) <= 1e-9*u*u) {
			return u * u
		}
		return v
	}
	s = Sample{
		T: number("t_s"), X: number("x_m"), Z: number("z_m"), U: number("u_px"), V: number("v_px"),
		Plane: Cov{variance("cov_xx_m2", "u_x_m"), number("cov_xz_m2"), variance("cov_zz_m2", "u_z_m")},
		Pixel: Cov{number("cov_uu_px2"), number("cov_uv_px2"), number("cov_vv_px2")},
	}
	if math.IsNaN(s.Plane.AB) && !math.IsNaN(s.Plane.AA) && !math.IsNaN(s.Plane.BB) {
		s.Plane.AB = 0
	}
	if f := number("frame"); !math.IsNaN(f) {
		s.Frame = int(f)
	}
	if err != nil {
		return "", s, err
	}
	if math.IsNaN(s.T) || math.IsInf(s.T, 0) {
		return "", s, errors.New("t_s is empty; every row needs its time")
	}
	placed := !math.IsNaN(s.X) && !math.IsNaN(s.Z)
	s.State = Missing
	if i, ok := at["state"]; ok {
		word := strings.TrimSpace(row[i])
		if s.State, ok = ParseState(word); !ok {
			return "", s, fmt.Errorf("state is %q; it is one of %s", word, strings.Join(stateWords[:], ", "))
		}
		if s.State.Usable() && !placed {
			return "", s, fmt.Errorf("the bob is %s but x_m or z_m is empty; write missing, or the position", word)
		}
	} else if placed {
		s.State = Seen
	}
	bob = "bob"
	if i, ok := at["bob"]; ok {
		bob = row[i]
	}
	return bob, s, nil
}

func tableError(name string, err error) error {
	var bad *csv.ParseError
	if errors.As(err, &bad) {
		return fmt.Errorf("%s, line %d: %w; a track is a table in CSV, comma between the columns", name, bad.Line, bad.Err)
	}
	return fmt.Errorf("cannot read %s: %w", name, err)
}
