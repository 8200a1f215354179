package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"lodeswing/analyze"
	"lodeswing/analyze/finding"
	"lodeswing/analyze/match"
	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/progress"
)

func fitCommand() *cobra.Command {
	var a again
	var f jobFlags
	var verbose bool
	cmd := &cobra.Command{
		Use:   "fit RESULT|TABLE... [--rig RIG]",
		Short: "Match a toy's model to measured motion: how strong are the magnets",
		Long: `Fit finds the numbers that the rig marks "fit" (moments, springs, friction, kicks)
from motion that was measured before, and leaves a result folder: the numbers with
their 95 % intervals and what each uncertainty is made of, what the clips cannot
tell and what would, measured against model, and fitted.toml for simulate and for
the next fit.

RESULT is a result folder of measure or track; TABLE is a track or angle table as
analyze takes it. Several of one unit are fitted together and say more than one;
the rig's [[clip]] entries, found by the clips' file names, say what differed
(without = ["base magnet"], battery = false, moved_mm, supply_V, temperature_C).`,
		Example: `  lodeswing fit swing-result
  lodeswing fit swing-result --rig better.toml --out swing-fit
  lodeswing fit wide-result narrow-result --rig lantern.toml
  lodeswing fit encoder.csv --rig pendulum.toml --part arm`,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				return wrongUse("%s takes at least one result folder or table; see %s --help", cmd.CommandPath(), cmd.CommandPath())
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			a.meter = progress.New(cmd.ErrOrStderr(), f.quiet)
			a.rigPath = f.rig
			say := match.Options{}
			if verbose {
				say.Log = func(format string, v ...any) { fmt.Fprintf(cmd.ErrOrStderr(), format+"\n", v...) }
			}
			rec, out, err := a.fit(cmd.Context(), args, f.out, say)
			if err != nil {
				return err
			}
			if f.json {
				return record.WriteFindings(cmd.OutOrStdout(), rec)
			}
			return tellFit(cmd.OutOrStdout(), rec, out)
		},
	}
	cmd.Flags().StringVar(&f.rig, "rig", "", "the rig `file` (default: the first result's own)")
	cmd.Flags().StringVar(&f.out, "out", "", "the result `folder` (default: the first input's name with -fit, here)")
	cmd.Flags().StringVar(&a.part, "part", "", "the `name` of the part whose angles a table holds that names none")
	cmd.Flags().BoolVar(&f.json, "json", false, "print the findings as JSON, for machines")
	cmd.Flags().BoolVarP(&f.quiet, "quiet", "q", false, "no progress")
	cmd.Flags().BoolVarP(&verbose, "verbose", "v", false, "say how the search goes")
	_ = cmd.MarkFlagFilename("rig", "toml") // completion only
	_ = cmd.MarkFlagDirname("out")
	return cmd
}

func (a *again) fit(ctx context.Context, paths []string, out string, say match.Options) (*record.Record, string, error) {
	var inputs []analyze.Input
	var first *input
	for _, path := range paths {
		in, err := a.read(path)
		if err != nil {
			return nil, "", err
		}
		if first == nil {
			first = in
		}
		name := filepath.Base(filepath.Clean(path))
		file := name
		if c := in.old.Run.Clip; c != nil {
			file = c.File
		}
		inputs = append(inputs, analyze.Input{Name: name, File: file, Track: in.track, Tables: in.tables})
	}
	if out == "" {
		base := filepath.Base(filepath.Clean(paths[0]))
		out = strings.TrimSuffix(strings.TrimSuffix(base, filepath.Ext(base)), "-result") + "-fit"
	}
	if err := record.CheckTarget(out); err != nil {
		return nil, "", err
	}
	run := first.old.Run
	bareTrack := run.Version == ""
	r, err := a.rig(&run)
	if err != nil {
		return nil, "", err
	}
	if bareTrack {
		for i := range inputs {
			if inputs[i].Track != nil {
				bare(inputs[i].Track, r)
			}
		}
	}
	run.Version = version
	if run.Started.IsZero() {
		run.Started = time.Now().UTC().Truncate(time.Second)
	}
	run.Options = map[string]string{"command": "fit"}
	for i, p := range paths {
		run.Options[fmt.Sprintf("input %d", i+1)] = filepath.Base(filepath.Clean(p))
	}
	a.meter.Start("matching", 0, "")
	began := time.Now()
	rec, err := analyze.FitClips(ctx, inputs, r, analyze.Options{Run: run, Still: first.old.Still}, say)
	if err != nil {
		return nil, "", err
	}
	rec.Run.Took("match", time.Since(began))
	a.meter.End()
	return rec, out, drawAndWrite(ctx, rec, out, a.meter)
}

func tellFit(w io.Writer, rec *record.Record, out string) error {
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	for i := range rec.Findings {
		f := &rec.Findings[i]
		name := f.Name
		if f.Subject != "" {
			name += ", " + f.Subject
		}
		switch f.Kind {
		case finding.Statement, finding.Undecided:
			fmt.Fprintf(t, "%s\t%s\n", name, f.Text)
		case finding.UpperLimit:
			fmt.Fprintf(t, "%s\tat most %s %s\n", name, f.Display().Hi, f.Display().Unit)
		default:
			shown := f.Display()
			fmt.Fprintf(t, "%s\t%s\t%s\n", name, shown, shown.Interval())
		}
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, c := range rec.Cautions {
		fmt.Fprintln(w, "Caution:", c)
	}
	fmt.Fprintln(w, "The result is in", out+"; open", filepath.Join(out, "report.html"))
	return nil
}
