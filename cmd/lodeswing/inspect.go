package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"lodeswing/cmd/internal/progress"
	"lodeswing/track/clip"
	"lodeswing/track/rig"
	"lodeswing/track/shake"
)

// inspected is what inspect prints with --json.
type inspected struct {
	Clip       *clip.Facts    `json:"clip"`
	Survey     *clip.Survey   `json:"survey"`
	Background *shake.Report  `json:"background"`
	Advice     []shake.Advice `json:"advice"`
	BrokeAtS   *float64       `json:"broke_at_s,omitempty"`
	Damage     string         `json:"damage,omitempty"`
}

func inspectCommand() *cobra.Command {
	var (
		rigPath       string
		frames        int
		asJSON, quiet bool
	)
	cmd := &cobra.Command{
		Use:   "inspect CLIP",
		Short: "Say what a clip is, and how to film it better",
		Long: `Inspect says what CLIP is (size, codec, true frame rate, lost frames, turn) and
looks at its first frames: light, noise, sharpness, exposure, whether the camera
stood still, whether a program spoiled the clip on its way. For each it says
whether it is good enough to measure, and what to do otherwise.

CLIP is a video file (mp4, mov, mkv, webm, avi) or a folder of numbered pictures,
which needs a rig that says frames_per_s. With a rig, its rate_factor is used and
its marks are watched for a base that rocks.`,
		Example: `  lodeswing inspect swing.mp4
  lodeswing inspect swing.mp4 --rig swing.toml
  lodeswing inspect swing.mp4 --frames 0 --json | jq '.advice[] | select(.state != "good")'`,
		Args: exactly(1, "one clip"),
		RunE: func(cmd *cobra.Command, args []string) error {
			if frames < 0 {
				return wrongUse("--frames must be 0 (all) or above, not %d", frames)
			}
			r := &rig.Rig{}
			if rigPath != "" {
				var err error
				if r, err = rig.Load(rigPath); err != nil {
					return err
				}
			}
			found, err := inspect(cmd.Context(), args[0], r, frames, progress.New(cmd.ErrOrStderr(), quiet || asJSON))
			if err != nil {
				return err
			}
			if asJSON {
				enc := json.NewEncoder(cmd.OutOrStdout())
				enc.SetIndent("", "  ")
				return enc.Encode(found)
			}
			return found.print(cmd.OutOrStdout())
		},
	}
	cmd.Flags().StringVar(&rigPath, "rig", "", "a rig `file`: its rate factor, frames per second and marks are used")
	cmd.Flags().IntVar(&frames, "frames", 900, "look at the first `n` frames; 0 for all")
	cmd.Flags().BoolVar(&asJSON, "json", false, "print JSON, for machines")
	cmd.Flags().BoolVarP(&quiet, "quiet", "q", false, "no progress")
	_ = cmd.MarkFlagFilename("rig", "toml") // completion only
	return cmd
}

func inspect(ctx context.Context, path string, r *rig.Rig, frames int, meter *progress.Meter) (*inspected, error) {
	facts, err := clip.Inspect(ctx, path, clip.Options{RateFactor: r.Camera.TimeRatio(), FramesPerS: r.Camera.FramesPerS.Or(0)})
	if err != nil {
		return nil, err
	}
	src, err := clip.Open(ctx, facts)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	total := len(facts.Times)
	if frames > 0 {
		total = min(total, frames)
	}
	meter.Start("looking", total, "frames")
	survey, report, err := shake.Look(ctx, src, r.Marks, frames, meter.Set)
	if err != nil {
		return nil, err
	}
	meter.End()
	found := &inspected{Clip: facts, Survey: survey, Background: report, Advice: shake.Advise(facts, survey, report)}
	if at, words := src.Damage(); words != "" && !math.IsNaN(at) {
		found.BrokeAtS, found.Damage = &at, words
	}
	return found, nil
}

// print writes what was found for people.
func (i *inspected) print(w io.Writer) error {
	f := i.Clip
	var b strings.Builder
	line := func(name, format string, a ...any) { fmt.Fprintf(&b, "  %-13s %s\n", name, fmt.Sprintf(format, a...)) }
	fmt.Fprintf(&b, "%s\n", f.Path)
	if f.Numbered {
		line("kind", "numbered pictures, %s", f.Codec)
	} else {
		line("kind", "%s in %s, %s, %.3g Mb/s", strings.TrimSpace(f.Codec+" "+f.Profile), strings.SplitN(f.Container, ",", 2)[0], f.PixelFormat, f.BitRate/1e6)
	}
	size := fmt.Sprintf("%d × %d px", f.W, f.H)
	if f.RotationDeg != 0 {
		size += fmt.Sprintf(", stored as %d × %d and turned %d° clockwise", f.StoredW, f.StoredH, f.RotationDeg)
	}
	line("picture", "%s", size)
	line("frames", "%d over %.3f s: %.4g/s in truth, %.4g/s by name", len(f.Times), f.DurationS, f.TrueRate, f.NominalRate)
	if f.CaptureFPS > 0 {
		line("phone says", "%.4g frames/s were recorded", f.CaptureFPS)
	}
	if f.Encoder != "" {
		line("written by", "%s", f.Encoder)
	}
	line("SHA-256", "%s", f.SHA256)
	if i.Survey.Frames < len(f.Times) {
		line("looked at", "the first %d frames, %.1f s", i.Survey.Frames, i.Survey.Seconds)
	}
	b.WriteString("\n")
	if i.Damage != "" {
		paragraph(&b, "damage", i.Damage)
	}
	said := ""
	for _, a := range i.Advice {
		text := a.Seen
		if a.State != shake.Good {
			text = strings.ToUpper(string(a.State[:1])) + string(a.State[1:]) + ". " + text
		}
		if a.Do != "" && !strings.Contains(text, a.Do) {
			text += " → " + a.Do
		}
		said += text
		paragraph(&b, a.Topic, text)
	}
	for _, words := range f.Warnings { // most are in the advice already, in the same words
		if !strings.Contains(said, words) {
			paragraph(&b, "caution", words)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// paragraph writes words under a name, broken at 78 columns.
func paragraph(b *strings.Builder, name, words string) {
	column := 0
	fmt.Fprintf(b, "  %-13s", name)
	for _, word := range strings.Fields(words) {
		n := len([]rune(word))
		if column > 0 && column+1+n > 62 {
			fmt.Fprintf(b, "\n  %-13s", "")
			column = 0
		}
		b.WriteString(" " + word)
		column += 1 + n
	}
	b.WriteString("\n")
}
