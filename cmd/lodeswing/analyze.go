package main

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lodeswing/analyze"
	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/job"
	"lodeswing/cmd/internal/progress"
	"lodeswing/plots"
	"lodeswing/track"
	"lodeswing/track/rig"
)

func analyzeCommand() *cobra.Command {
	var a again
	var f jobFlags
	cmd := &cobra.Command{
		Use:   "analyze TABLE|RESULT [--rig RIG]",
		Short: "Analyse a track or an angle table again, without the clip",
		Long: `Analyze runs the analyses on positions or angles that are already there, and leaves
a result folder with tables, findings, figures and report.html.

RESULT is a result folder: it is analysed again, with its own rig or the one that
--rig names, and replaced when the new one is complete.
TABLE is a CSV file with a header line:
  a track, with t_s, x_m, z_m and, where known, bob, u_x_m, u_z_m, state; or
  angles, with t_s, angle_rad and, where known, part, u_angle_rad.
Times are seconds, rising; an empty cell is a gap.`,
		Example: `  lodeswing analyze swing-result --rig better.toml
  lodeswing analyze track.csv --rig swing.toml --out unit-07
  lodeswing analyze encoder.csv --part arm`,
		Args: exactly(1, "one table or result folder"),
		RunE: func(cmd *cobra.Command, args []string) error {
			a.meter = progress.New(cmd.ErrOrStderr(), f.quiet)
			a.rigPath = f.rig
			rec, out, err := a.analyze(cmd.Context(), args[0], f.out)
			if err != nil {
				return err
			}
			return f.tell(cmd, &job.Job{Out: out}, rec)
		},
	}
	cmd.Flags().StringVar(&f.rig, "rig", "", "the rig `file` that says what was filmed (default: the result's own)")
	cmd.Flags().StringVar(&f.out, "out", "", "the result `folder` (default: the result itself, or the table's name with -result, here)")
	cmd.Flags().StringVar(&a.part, "part", "", "the `name` of the part whose angles a table holds that names none")
	cmd.Flags().BoolVar(&f.json, "json", false, "print the findings as JSON, for machines")
	cmd.Flags().BoolVarP(&f.quiet, "quiet", "q", false, "no progress")
	addBatteryOut(cmd, &a.batteryOut)
	_ = cmd.MarkFlagFilename("rig", "toml") // completion only
	_ = cmd.MarkFlagDirname("out")
	return cmd
}

// again analyses what was measured before.
type again struct {
	rigPath, part string
	batteryOut    string
	meter         *progress.Meter
}

// input is what a table or a result folder holds.
type input struct {
	old    record.Record // provenance, still and kept files of a result folder
	track  *track.Track
	tables []record.Angles
	out    string
}

func (a *again) analyze(ctx context.Context, path, out string) (*record.Record, string, error) {
	in, err := a.read(path)
	if err != nil {
		return nil, "", err
	}
	if out == "" {
		out = in.out
	}
	if err := record.CheckTarget(out); err != nil {
		return nil, "", err
	}
	r, err := a.rig(&in.old.Run)
	if err != nil {
		return nil, "", err
	}
	if in.track != nil && in.old.Run.Version == "" {
		bare(in.track, r)
	}
	run := in.old.Run
	run.Version = version
	if run.Started.IsZero() {
		run.Started = time.Now().UTC().Truncate(time.Second)
	}
	if run.Options == nil {
		run.Options = map[string]string{}
	}
	run.Options["analyzed"] = filepath.Base(filepath.Clean(path))
	a.meter.Start("analysing", 0, "")
	opt := analyze.Options{Run: run, Still: in.old.Still}
	if a.batteryOut != "" {
		if opt.BatteryOut, err = record.Read(a.batteryOut); err != nil {
			return nil, "", fmt.Errorf("the battery-out result: %w", err)
		}
	}
	var rec *record.Record
	if in.track != nil {
		rec, err = analyze.Run(ctx, in.track, r, opt)
	} else {
		rec, err = analyze.RunAngles(ctx, in.tables, r, opt)
	}
	if err != nil {
		return nil, "", err
	}
	a.meter.End()
	rec.Kept = in.old.Kept
	return rec, out, drawAndWrite(ctx, rec, out, a.meter)
}

func drawAndWrite(ctx context.Context, rec *record.Record, out string, meter *progress.Meter) error {
	meter.Start("drawing", 0, "")
	began := time.Now()
	if err := plots.Draw(ctx, rec); err != nil {
		return err
	}
	rec.Run.Took("draw", time.Since(began))
	meter.End()
	return record.Write(ctx, out, rec)
}

// read reads a result folder or a table.
func (a *again) read(path string) (*input, error) {
	info, err := os.Stat(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no table or folder %s", path)
	}
	if err != nil {
		return nil, fmt.Errorf("cannot read %s: %w", path, err)
	}
	if info.IsDir() {
		old, err := record.Read(path)
		if err != nil {
			return nil, err
		}
		in := &input{old: *old, track: old.Track, out: path}
		if in.track == nil {
			in.tables = old.Angles
		}
		if in.track == nil && len(in.tables) == 0 {
			return nil, fmt.Errorf("%s holds neither a track nor angles, so there is nothing to analyse; measure the clip again", path)
		}
		return in, nil
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("cannot read %s: %w", path, err)
	}
	defer f.Close()
	b := bufio.NewReader(f)
	head, _ := b.Peek(4096) // a shorter file is no error here
	line, _, _ := bytes.Cut(head, []byte("\n"))
	columns := strings.FieldsFunc(string(line), func(r rune) bool { return strings.ContainsRune(", \"\r\ufeff", r) })
	name := filepath.Base(path)
	in := &input{out: job.OutFor(path)}
	switch {
	case slices.Contains(columns, "angle_rad"):
		part := a.part
		if part == "" {
			part = strings.TrimSuffix(name, filepath.Ext(name))
		}
		in.tables, err = record.ReadAngles(b, name, part)
	case slices.Contains(columns, "x_m"), slices.Contains(columns, "z_m"):
		in.track, err = track.ReadTable(b, name)
	default:
		err = fmt.Errorf("%s is neither a track (t_s, x_m, z_m) nor an angle table (t_s, angle_rad); give it such a header line", name)
	}
	return in, err
}

// rig reads the rig that the user names, or the one that the result was made with.
func (a *again) rig(run *record.Run) (*rig.Rig, error) {
	if a.rigPath == "" {
		if run.Rig.Text == "" {
			return nil, nil
		}
		return rig.Parse(run.Rig.File, []byte(run.Rig.Text))
	}
	r, err := rig.Load(a.rigPath)
	if err != nil {
		return nil, err
	}
	text, err := os.ReadFile(a.rigPath)
	if err != nil {
		return nil, fmt.Errorf("cannot read the rig %s: %w", a.rigPath, err)
	}
	run.Rig = record.Rig{Name: r.Name, File: filepath.Base(a.rigPath), Text: string(text)}
	return r, nil
}

// usualClock is the relative standard uncertainty of a camera's clock that
// nobody compared (DEVELOPERS.md names where it is from).
const usualClock = 50e-6

// bare adds to a track that came as a table alone what the table cannot say.
func bare(t *track.Track, r *rig.Rig) {
	t.Cal.UClock, t.Cal.RateFactor = usualClock, 1
	if r != nil {
		for i := range t.Bobs {
			for _, b := range r.Bobs {
				if b.Name == t.Bobs[i].Name {
					t.Bobs[i].Part = b.Part
				}
			}
		}
		if l := r.Scale.LengthM; l.Set && l.V > 0 && l.U > 0 {
			t.Cal.UScale = l.U / l.V
			t.Cal.ScaleFrom = "the table's own, as good as the rig's length"
			t.Cal.ScaleShares = []track.Share{{Source: "the rig's length", U: t.Cal.UScale}}
		}
	}
	if t.Cal.UScale == 0 {
		t.Cautions = append(t.Cautions, "The table does not say how well its lengths are known: their uncertainties hold the picture's noise alone.")
	}
	t.Cautions = append(t.Cautions, "The table does not say how the vertical was found: its z axis was taken as it is.")
}
