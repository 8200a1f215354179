package main

import (
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/progress"
)

func plotCommand() *cobra.Command {
	var (
		out   string
		quiet bool
	)
	cmd := &cobra.Command{
		Use:   "plot RESULT",
		Short: "Draw a result's figures and report again",
		Long: `Plot draws the figures (SVG and PNG) and report.html of a result folder from the
numbers that it holds; nothing is computed anew. The folder is replaced when the
new one is complete.`,
		Example: `  lodeswing plot swing-result
  lodeswing plot swing-result --out for-the-visitor`,
		Args: exactly(1, "one result folder"),
		RunE: func(cmd *cobra.Command, args []string) error {
			if out == "" {
				out = args[0]
			}
			if err := record.CheckTarget(out); err != nil {
				return err
			}
			rec, err := record.Read(args[0])
			if err != nil {
				return err
			}
			if err := drawAndWrite(cmd.Context(), rec, out, progress.New(cmd.ErrOrStderr(), quiet)); err != nil {
				return err
			}
			fmt.Fprintf(cmd.OutOrStdout(), "%d figures are in %s, the report is %s\n", len(rec.Figures), filepath.Join(out, "figures"), filepath.Join(out, "report.html"))
			return nil
		},
	}
	cmd.Flags().StringVar(&out, "out", "", "the result `folder` (default: the result itself)")
	cmd.Flags().BoolVarP(&quiet, "quiet", "q", false, "no progress")
	_ = cmd.MarkFlagDirname("out") // completion only
	return cmd
}
