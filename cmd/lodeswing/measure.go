package main

import (
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/job"
	"lodeswing/cmd/internal/progress"
)

func measureCommand() *cobra.Command {
	var f jobFlags
	cmd := &cobra.Command{
		Use:   "measure CLIP --rig RIG",
		Short: "Do the whole job: follow, analyse, draw, report",
		Long: `Measure follows the bobs of CLIP as RIG describes them, analyses their motion and
leaves a result folder: tables, findings, figures and report.html. The folder
appears whole or not at all; a result that is already there is replaced only
when the new one is complete.

CLIP is a video file (mp4, mov, mkv, webm, avi) or a folder of numbered pictures.`,
		Example: `  lodeswing measure swing.mp4 --rig swing.toml
  lodeswing measure swing.mp4 --rig swing.toml --out unit-07 --overlay
  lodeswing measure gull.mp4 --rig gull.toml --battery-out gull-off-result
  lodeswing measure swing.mp4 --rig swing.toml --json | jq '.findings[0]'`,
		Args: exactly(1, "one clip"),
		RunE: func(cmd *cobra.Command, args []string) error {
			j, err := f.job(cmd, args[0])
			if err != nil {
				return err
			}
			rec, err := j.Measure(cmd.Context())
			if err != nil {
				return err
			}
			return f.tell(cmd, j, rec)
		},
	}
	f.add(cmd)
	addBatteryOut(cmd, &f.batteryOut)
	return cmd
}

// addBatteryOut adds the flag that names what tells friction from kick.
func addBatteryOut(cmd *cobra.Command, folder *string) {
	cmd.Flags().StringVar(folder, "battery-out", "", "the result `folder` of the same unit filmed with its battery out, which tells kick from friction")
	_ = cmd.MarkFlagDirname("battery-out") // completion only
}

// jobFlags are the flags of the commands that follow a clip.
type jobFlags struct {
	rig, out, batteryOut string
	overlay, json, quiet bool
}

func (f *jobFlags) add(cmd *cobra.Command) {
	cmd.Flags().StringVar(&f.rig, "rig", "", "the rig `file` that says what is filmed")
	cmd.Flags().StringVar(&f.out, "out", "", "the result `folder` (default: the clip's name with -result, here)")
	cmd.Flags().BoolVar(&f.overlay, "overlay", false, "also a clip that shows what was followed")
	cmd.Flags().BoolVar(&f.json, "json", false, "print the findings as JSON, for machines")
	cmd.Flags().BoolVarP(&f.quiet, "quiet", "q", false, "no progress")
	_ = cmd.MarkFlagFilename("rig", "toml") // completion only
	_ = cmd.MarkFlagDirname("out")
}

func (f *jobFlags) job(cmd *cobra.Command, clip string) (*job.Job, error) {
	if f.rig == "" {
		return nil, wrongUse("%s needs --rig FILE, which says what is filmed; the README shows one to start from", cmd.CommandPath())
	}
	out := f.out
	if out == "" {
		out = job.OutFor(clip)
	}
	return &job.Job{
		Clip: clip, RigPath: f.rig, Out: out, Overlay: f.overlay, BatteryOut: f.batteryOut, Version: version,
		Options: map[string]string{"command": cmd.Name(), "clip": filepath.Base(clip), "rig": filepath.Base(f.rig), "overlay": fmt.Sprint(f.overlay)},
		Meter:   progress.New(cmd.ErrOrStderr(), f.quiet),
	}, nil
}

// tell prints what was found: for people, or for machines with --json.
func (f *jobFlags) tell(cmd *cobra.Command, j *job.Job, rec *record.Record) error {
	out := cmd.OutOrStdout()
	if f.json {
		return record.WriteFindings(out, rec)
	}
	if rec.Headline != "" {
		fmt.Fprintln(out, rec.Headline)
	}
	for _, c := range rec.Cautions {
		fmt.Fprintln(out, "Caution:", c)
	}
	fmt.Fprintln(out, "The result is in", j.Out+"; open", filepath.Join(j.Out, "report.html"))
	return nil
}
