package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"lodeswing/analyze/compare"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/kick"
	"lodeswing/analyze/record"
	"lodeswing/plots"
	"lodeswing/track/rig"
)

func compareCommand() *cobra.Command {
	var asJSON, sameCamera, all bool
	var swapped, figure, motion string
	cmd := &cobra.Command{
		Use:   "compare A B",
		Short: "Set two results, or two groups of results, against each other",
		Long: `Compare tells for every number that both have how much B differs from A, and whether
the difference is more than the measurement. What both have in common cancels: with
the same numbers in both rigs, an error of mass, inertia, ruler or clock shifts both
alike. With --same-camera the scale and the vertical cancel too.

--swapped says that between A and B a reference part took the place of the unit's
own (cell, magnet or coil), and tells whether a weak drive's fault, or a weak pair
of magnets', was in it.

A and B are result folders, or folders that hold several: then means are compared,
with what the units of a group scatter. --motion sets the motions themselves beside each
other: how alike they are, and a plot of when one does what the other did. Where a rig notes the temperature of its
clip, magnets' moments are taken to 20 °C first.`,
		Example: `  lodeswing compare before-result after-result
  lodeswing compare old-winding new-winding --same-camera
  lodeswing compare weak-unit with-reference-cell --swapped cell
  lodeswing compare lot-may lot-june --json
  lodeswing compare before-result after-result --figure changes.svg`,
		Args: exactly(2, "two results, or folders of results"),
		RunE: func(cmd *cobra.Command, args []string) error {
			switch kick.Swapped(swapped) {
			case "", kick.Cell, kick.Magnet, kick.CoilIn:
			default:
				return wrongUse("--swapped takes cell, magnet or coil, not %q", swapped)
			}
			a, rigA, err := side(args[0])
			if err != nil {
				return err
			}
			b, rigB, err := side(args[1])
			if err != nil {
				return err
			}
			if a.Name == b.Name { // told apart by where they lie
				a.Name, b.Name = filepath.Clean(args[0]), filepath.Clean(args[1])
			}
			opt := compare.Options{SameRig: sameNumbers(append(rigA, rigB...)), SameCamera: sameCamera}
			ds, err := compare.Run(a, b, opt)
			if err != nil {
				return err
			}
			if figure != "" {
				if err := drawDifferences(figure, a.Name, b.Name, opt, ds); err != nil {
					return err
				}
			}
			if asJSON {
				return differencesJSON(cmd.OutOrStdout(), a.Name, b.Name, opt, ds)
			}
			tellDifferences(cmd.OutOrStdout(), a, b, opt, ds, all)
			if motion != "" {
				if err := tellMotions(cmd.Context(), cmd.OutOrStdout(), args[0], args[1], motion); err != nil {
					return err
				}
			}
			if swapped != "" {
				return tellSwap(cmd.OutOrStdout(), ds, kick.Swapped(swapped))
			}
			return nil
		},
	}
	cmd.Flags().BoolVar(&sameCamera, "same-camera", false, "the camera was not moved between: scale and vertical are the same")
	cmd.Flags().StringVar(&swapped, "swapped", "", "the `part` that a reference part took the place of between A and B: cell, magnet or coil")
	cmd.Flags().StringVar(&figure, "figure", "", "also draw the relative differences into this `file`, .svg or .png")
	cmd.Flags().StringVar(&motion, "motion", "", "also compare how two units move, and draw it into this `file`, .svg or .png")
	cmd.Flags().BoolVar(&all, "all", false, "also list what does not differ by more than the measurement")
	cmd.Flags().BoolVar(&asJSON, "json", false, "print the differences as JSON, for machines")
	return cmd
}

// side reads a result folder, or the results in a folder.
func side(path string) (compare.Side, []*rig.Rig, error) {
	s := compare.Side{Name: filepath.Base(filepath.Clean(path))}
	var rigs []*rig.Rig
	add := func(dir string) error {
		rec, err := record.Read(dir)
		if err != nil {
			return err
		}
		r := compare.Result{Name: filepath.Base(dir), Findings: rec.Findings, TemperatureC: math.NaN()}
		var g *rig.Rig
		if text := rec.Run.Rig.Text; text != "" {
			if g, err = rig.Parse(rec.Run.Rig.File, []byte(text)); err != nil {
				return fmt.Errorf("the rig that %s was measured with: %w", dir, err)
			}
			if t := temperature(g, rec.Run.Clip); t.Set {
				r.TemperatureC, r.UTemperatureC = t.V, t.U
			}
		}
		rigs = append(rigs, g)
		s.Results = append(s.Results, r)
		return nil
	}
	if isResult(path) {
		return s, rigs, add(path)
	}
	entries, err := os.ReadDir(path)
	if err != nil {
		return s, nil, fmt.Errorf("there is no result folder %s", path)
	}
	for _, e := range entries {
		if dir := filepath.Join(path, e.Name()); e.IsDir() && isResult(dir) {
			if err := add(dir); err != nil {
				return s, nil, err
			}
		}
	}
	if len(s.Results) == 0 {
		return s, nil, fmt.Errorf("%s is not a result folder and holds none; measure a clip first", path)
	}
	return s, rigs, nil
}

func isResult(dir string) bool {
	_, err := os.Stat(filepath.Join(dir, "datapackage.json"))
	return err == nil
}

// temperature is what the rig notes of its clip.
func temperature(r *rig.Rig, c *record.Clip) rig.Value {
	for i := range r.Clips {
		if c != nil && filepath.Base(r.Clips[i].File) == c.File {
			return r.Clips[i].TemperatureC
		}
	}
	return rig.Value{}
}

// sameNumbers tells whether all rigs give the same lengths, masses and inertias.
func sameNumbers(all []*rig.Rig) bool {
	for _, r := range all {
		if r == nil || all[0] == nil {
			return false
		}
		a, b := all[0], r
		if a.Scale.LengthM != b.Scale.LengthM || a.Gravity != b.Gravity || len(a.Parts) != len(b.Parts) {
			return false
		}
		for i := range a.Parts {
			p, q := &a.Parts[i], &b.Parts[i]
			if p.Name != q.Name || p.MassKg != q.MassKg || p.Inertia != q.Inertia || rig.XYZ(p.CentreM) != rig.XYZ(q.CentreM) {
				return false
			}
		}
	}
	return true
}

func tellDifferences(out io.Writer, a, b compare.Side, opt compare.Options, ds []compare.Difference, all bool) {
	apart := 0
	w := tabwriter.NewWriter(out, 0, 0, 2, ' ', 0)
	fmt.Fprintf(w, "\t%s\t%s\tdifference\t95 %% interval\t\n", a.Name, b.Name)
	cautions, cancelled := []string{}, false
	for i := range ds {
		d := &ds[i]
		if d.Apart {
			apart++
		}
		cancelled = cancelled || d.Apart && !d.Alone
		if !d.Apart && !all {
			continue
		}
		words := ""
		switch {
		case d.Apart && !d.Alone:
			words = "differs; only the comparison shows it"
		case d.Apart:
			words = "differs"
		}
		name := d.Name
		if d.Subject != "" {
			name = d.Subject + ": " + name
		}
		diff := finding.Normal("", "", "", d.D, d.U, d.Unit, "")
		diff.Lo, diff.Hi = d.Lo, d.Hi
		shown := diff.Display()
		value, interval := shown.String(), shown.Interval()
		if !math.IsNaN(d.Ratio) {
			r := finding.DisplayValue(100*d.Ratio, 100*d.URatio, "1")
			value += fmt.Sprintf(" (%s ± %s %%)", r.Value, r.U)
		}
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", name, finding.DisplayValue(d.A, d.UA, d.Unit), finding.DisplayValue(d.B, d.UB, d.Unit), value, interval, words)
		for _, c := range d.Cautions {
			cautions = append(cautions, name+": "+c)
		}
	}
	if apart == 0 && !all {
		fmt.Fprintf(out, "Of %d numbers none differs by more than the measurement (95 %%); --all lists them.\n", len(ds))
	} else {
		w.Flush()
		fmt.Fprintf(out, "%d of %d numbers differ by more than the measurement (95 %%); of so many, %.0f would by chance.\n", apart, len(ds), math.Ceil(0.05*float64(len(ds))))
	}
	switch {
	case opt.SameRig && opt.SameCamera:
		fmt.Fprintln(out, "Errors of the rig's masses and lengths, of the scale, the vertical and the clock shift both alike and were left out of the differences.")
	case opt.SameRig:
		fmt.Fprintln(out, "Errors of the rig's masses and lengths and of the clock shift both alike and were left out of the differences.")
	default:
		fmt.Fprintln(out, "The two rigs give different masses or lengths, so that nothing cancels from the differences.")
	}
	for _, c := range cautions {
		fmt.Fprintln(out, "Caution:", c)
	}
}

// tellSwap says whether a weak drive's fault, or a weak magnet's, was in the part that
// was swapped.
func tellSwap(out io.Writer, ds []compare.Difference, part kick.Swapped) error {
	keys := []string{"kick.energy"}
	if part == kick.Magnet { // of a toy without a coil it shows in what the magnets do to each other
		keys = append(keys, "match.product", "match.moment")
	}
	for _, key := range keys {
		for i := range ds {
			if d := &ds[i]; d.Key == key && !math.IsNaN(d.Ratio) {
				what := "kick"
				if key != "kick.energy" {
					what = strings.ToLower(d.Name[:1]) + d.Name[1:]
				}
				words, _ := kick.Swap(d.Ratio, d.URatio, part, what)
				fmt.Fprintln(out, words)
				return nil
			}
		}
	}
	return fmt.Errorf("the results do not both tell the energy of a kick, so that the swap of the %s cannot be judged; film both with ten seconds without the battery", part)
}

// drawDifferences draws the relative differences, those that differ first.
func drawDifferences(path, a, b string, opt compare.Options, ds []compare.Difference) error {
	var rows []plots.Change
	for i := range ds {
		d := &ds[i]
		if math.IsNaN(d.Ratio) || math.IsNaN(d.URatio) {
			continue
		}
		k := (d.Hi - d.D) / d.U // the factor of the 95 % interval
		c := plots.Change{Name: d.Name, Value: d.Ratio, Lo: d.Ratio - k*d.URatio, Hi: d.Ratio + k*d.URatio, Differs: d.Apart}
		if d.Subject != "" {
			c.Name = d.Subject + ": " + d.Name
		}
		alone := k * math.Hypot(d.UA*d.B/d.A, d.UB) / math.Abs(d.A)
		c.Wide = [2]float64{math.Min(c.Lo, d.Ratio-alone), math.Max(c.Hi, d.Ratio+alone)}
		rows = append(rows, c)
	}
	if len(rows) == 0 {
		return errors.New("no number of both results has a relative difference to draw")
	}
	slices.SortStableFunc(rows, func(x, y plots.Change) int {
		switch {
		case x.Differs == y.Differs:
			return 0
		case x.Differs:
			return -1
		}
		return 1
	})
	const most = 16
	caption := "Each line is the 95 % interval of how much the second result differs from the first."
	if len(rows) > most {
		rows, caption = rows[:most], caption+" Those that differ come first; the rest is in the list."
	}
	if opt.SameRig {
		caption += " Errors of the rig's masses and lengths shift both alike and were left out."
	}
	svg, png, err := plots.Differences(fmt.Sprintf("How much %s differs from %s", b, a), caption, rows)
	if err != nil {
		return fmt.Errorf("the differences cannot be drawn: %w", err)
	}
	switch strings.ToLower(filepath.Ext(path)) {
	case ".svg":
		return writeWhole(path, svg)
	case ".png":
		return writeWhole(path, png)
	}
	return wrongUse("--figure takes a file that ends in .svg or .png, not %q", path)
}

// differencesJSON writes the differences for machines; a number that is not known
// is left out.
func differencesJSON(out io.Writer, a, b string, opt compare.Options, ds []compare.Difference) error {
	type difference struct {
		Key       string          `json:"key"`
		Subject   string          `json:"subject,omitempty"`
		Name      string          `json:"name"`
		Unit      string          `json:"unit"`
		A         float64         `json:"a"`
		UA        float64         `json:"u_a"`
		B         float64         `json:"b"`
		UB        float64         `json:"u_b"`
		D         float64         `json:"difference"`
		U         float64         `json:"u"`
		Lo        float64         `json:"lo"`
		Hi        float64         `json:"hi"`
		Ratio     *float64        `json:"relative,omitempty"`
		URatio    *float64        `json:"u_relative,omitempty"`
		Apart     bool            `json:"differs"`
		Alone     bool            `json:"differs_without_cancelling"`
		At20C     bool            `json:"at_20_C,omitempty"`
		Cancelled []finding.Share `json:"cancelled,omitempty"`
		Cautions  []string        `json:"cautions,omitempty"`
	}
	var page struct {
		A           string       `json:"a"`
		B           string       `json:"b"`
		SameRig     bool         `json:"same_rig"`
		SameCamera  bool         `json:"same_camera"`
		Differences []difference `json:"differences"`
	}
	page.A, page.B, page.SameRig, page.SameCamera = a, b, opt.SameRig, opt.SameCamera
	for i := range ds {
		d := &ds[i]
		x := difference{
			d.Key, d.Subject, d.Name, d.Unit, d.A, d.UA, d.B, d.UB, d.D, d.U, d.Lo, d.Hi,
			nil, nil, d.Apart, d.Alone, d.At20C, d.Cancelled, d.Cautions,
		}
		if !math.IsNaN(d.Ratio) && !math.IsNaN(d.URatio) {
			x.Ratio, x.URatio = &d.Ratio, &d.URatio
		}
		page.Differences = append(page.Differences, x)
	}
	enc := json.NewEncoder(out)
	enc.SetIndent("", "  ")
	return enc.Encode(page)
}
