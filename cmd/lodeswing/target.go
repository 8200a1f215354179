package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"lodeswing/track/board"
)

// targetCommand draws the printed scale target.
func targetCommand() *cobra.Command {
	var out, paper string
	var square float64
	cmd := &cobra.Command{
		Use:   "target",
		Short: "Print a scale target",
		Long: `Draws a chequered scale target, true to size, to be printed, glued to something
flat and filmed beside the toy. From it the program takes scale, vertical, the
camera's tilt and its lens. The target's name, which is printed on it, goes into
the rig file under [scale] as target = "...". Measure the bar on the print: most
printers are off by a few parts in a thousand, and some by several per cent.`,
		Example: `  lodeswing target                                  board-9x6-20mm.pdf on A4
  lodeswing target --paper letter --out target.svg  for Letter paper, as SVG
  lodeswing target --square-mm 10                   more and smaller squares, for a near camera`,
		Args: exactly(0, "no arguments"),
		RunE: func(cmd *cobra.Command, args []string) error {
			var sheet *board.Paper
			var names []string
			for i, p := range board.Papers {
				names = append(names, p.Name)
				if strings.EqualFold(p.Name, paper) {
					sheet = &board.Papers[i]
				}
			}
			if sheet == nil {
				return wrongUse("--paper must be %s, not %q", strings.Join(names, " or "), paper)
			}
			spec, err := board.Fit(*sheet, square/1e3)
			if err != nil {
				return wrongUse("--square-mm: %w", err)
			}
			if out == "" {
				out = spec.Name() + ".pdf"
			}
			format := strings.TrimPrefix(strings.ToLower(filepath.Ext(out)), ".")
			if format != "svg" && format != "pdf" {
				return wrongUse("--out must end in .pdf or .svg, not %q", out)
			}
			if err := writeTarget(out, format, spec, *sheet); err != nil {
				return err
			}
			fmt.Fprintf(cmd.OutOrStdout(), `%s: %d × %d squares of %g mm for %s paper.
Print it at 100 %%, measure its bar with a steel rule, and write into the rig:

[scale]
target = %q
length_mm = 100.0      # what the bar measures on your print
u_length_mm = 0.2
depth_mm = 0           # how far the target is in front of (+) or behind the bob's plane
`, out, spec.Cols, spec.Rows, square, sheet.Name, spec.Name())
			return nil
		},
	}
	cmd.Flags().StringVar(&out, "out", "", "file to write, .pdf or .svg (default: the target's name and .pdf)")
	cmd.Flags().StringVar(&paper, "paper", "a4", "sheet: a4 or letter")
	cmd.Flags().Float64Var(&square, "square-mm", 20, "side of one square in mm")
	return cmd
}

// writeTarget writes the file whole or not at all.
func writeTarget(path, format string, spec board.Spec, sheet board.Paper) error {
	part, err := os.CreateTemp(filepath.Dir(path), ".target-*")
	if err != nil {
		return fmt.Errorf("the target cannot be written to %s: %w", path, err)
	}
	defer os.Remove(part.Name()) // after the renaming there is nothing left to remove
	err = spec.Draw(part, format, sheet)
	if err == nil {
		err = part.Chmod(0o644)
	}
	if err == nil {
		err = part.Sync()
	}
	if e := part.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(part.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("the target cannot be written to %s: %w", path, err)
	}
	return nil
}
