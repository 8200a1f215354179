package main

import (
	"fmt"
	"path/filepath"

	"github.com/pelletier/go-toml/v2"
	"github.com/spf13/cobra"

	"lodeswing/analyze/record"
	"lodeswing/cmd/internal/progress"
	"lodeswing/plots"
)

func plotCommand() *cobra.Command {
	var (
		out, page, words string
		quiet, print     bool
	)
	cmd := &cobra.Command{
		Use:   "plot RESULT",
		Short: "Draw a result's figures and report again",
		Long: `Plot draws the figures (SVG and PNG) and report.html of a result folder from the
numbers that it holds; nothing is computed anew. The folder is replaced when the
new one is complete.

--visitor writes a page for visitors instead: one large figure, a picture cut to the
toy, and plain words, for a screen or for paper. To change its words, print them with
--print-words, edit the file and give it back with --words.`,
		Example: `  lodeswing plot swing-result
  lodeswing plot gull-result --visitor gull.html
  lodeswing plot gull-result --print-words > words.toml
  lodeswing plot gull-result --visitor gull.html --words words.toml
  lodeswing plot swing-result --out for-the-visitor`,
		Args: exactly(1, "one result folder"),
		RunE: func(cmd *cobra.Command, args []string) error {
			if words != "" && page == "" {
				return wrongUse("--words says what the visitor's page says; give --visitor FILE as well")
			}
			if page != "" || print {
				rec, err := record.Read(args[0])
				if err != nil {
					return err
				}
				if print {
					return toml.NewEncoder(cmd.OutOrStdout()).Encode(plots.VisitorWords(rec))
				}
				if err := visitor(rec, page, words); err != nil {
					return err
				}
				fmt.Fprintf(cmd.OutOrStdout(), "The visitor's page is %s\n", page)
				return nil
			}
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
	cmd.Flags().StringVar(&page, "visitor", "", "write a visitor's page to this `file` (.html) instead")
	cmd.Flags().StringVar(&words, "words", "", "the `file` that holds the visitor's page's words")
	cmd.Flags().BoolVar(&print, "print-words", false, "print the visitor's page's words, to be edited, and do nothing else")
	cmd.Flags().BoolVarP(&quiet, "quiet", "q", false, "no progress")
	_ = cmd.MarkFlagDirname("out") // completion only
	return cmd
}
