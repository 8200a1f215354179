package main

import (
	"encoding/json"
	"fmt"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"lodeswing/cmd/internal/progress"
	"lodeswing/samples"
)

func filmCommand() *cobra.Command {
	var (
		out            string
		opt            samples.Options
		list, asJSON   bool
		quiet          bool
		printTheSample bool
		pushDeg        float64
	)
	cmd := &cobra.Command{
		Use:   "film RIG",
		Short: "Render footage of a toy with known truth",
		Long: `Film moves the toy that RIG describes by its own model and renders the clip that a
phone would have taken, with noise, rolling shutter, blur and H.264. RIG is a rig
file with [film] and [[start]], or the name of a sample.

The folder then holds the clip, the rig as its owner would write it, truth.csv
(where every bob was in every frame, in metres and pixels) and truth.json (every
number of the model): all of them, or nothing.

Samples: ` + strings.Join(samples.Names(), ", ") + `.
All samples are toys of the invented Saltmarsh Toyworks.`,
		Example: `  lodeswing film lantern --out demo            the demo's clip
  lodeswing film lantern --clean --seconds 5   no noise, no loss, five seconds
  lodeswing film lantern --print > mine.toml   a sample's rig, to start one's own from
  lodeswing film mine.toml --out mine`,
		Args: func(cmd *cobra.Command, args []string) error {
			if list {
				return nil
			}
			return exactly(1, "one rig file or sample name")(cmd, args)
		},
		ValidArgsFunction: func(cmd *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
			if len(args) > 0 {
				return nil, cobra.ShellCompDirectiveNoFileComp
			}
			return samples.Names(), cobra.ShellCompDirectiveDefault
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if list {
				fmt.Fprintln(cmd.OutOrStdout(), strings.Join(samples.Names(), "\n"))
				return nil
			}
			if printTheSample {
				text, err := samples.Text(args[0])
				if err != nil {
					return err
				}
				_, err = cmd.OutOrStdout().Write(text)
				return err
			}
			if cmd.Flags().Changed("seconds") && !(opt.DurationS > 0) {
				return wrongUse("--seconds must be above zero, not %g", opt.DurationS)
			}
			if opt.OffFromS < 0 || opt.PushAtS < 0 {
				return wrongUse("--coil-off-from and --push-at are times in the film: they must not be below zero")
			}
			opt.PushRadS = pushDeg * math.Pi / 180
			r, err := samples.Open(args[0])
			if err != nil {
				return err
			}
			if out == "" {
				out = samples.Stem(r) + "-film"
			}
			meter := progress.New(cmd.ErrOrStderr(), quiet)
			opt.Start = func(frames int) { meter.Start("filming "+r.Name, frames, "frames") }
			opt.Progress = meter.Set
			made, err := samples.Film(cmd.Context(), r, out, opt)
			if err != nil {
				return err
			}
			meter.End()
			if asJSON {
				return json.NewEncoder(cmd.OutOrStdout()).Encode(made)
			}
			fmt.Fprintf(cmd.OutOrStdout(), "%s: %d frames; rig %s, truth %s and %s\n", made.Clip, made.Frames, made.Rig, made.Truth, made.Numbers)
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&out, "out", "", "folder for the film (default: RIG-film)")
	f.BoolVar(&opt.Clean, "clean", false, "no noise, texture, shadow, clutter or halo, and no loss in encoding")
	f.BoolVar(&opt.Undriven, "coil-off", false, "with the battery taken out")
	f.Float64Var(&opt.OffFromS, "coil-off-from", 0, "take the battery out after so many `seconds`")
	f.Float64Var(&opt.PushAtS, "push-at", 0, "a hand pushes the first part after so many `seconds`")
	f.Float64Var(&pushDeg, "push-deg-s", 60, "how much faster that makes it, degrees per second")
	f.Float64Var(&opt.DurationS, "seconds", 0, "length of the film (default: the rig's duration_s)")
	f.BoolVar(&list, "list", false, "list the samples")
	f.BoolVar(&printTheSample, "print", false, "print the sample's rig and film nothing")
	f.BoolVar(&asJSON, "json", false, "print the files' names as JSON")
	f.BoolVar(&quiet, "quiet", false, "show no progress")
	return cmd
}
