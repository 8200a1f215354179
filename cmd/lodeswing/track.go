package main

import "github.com/spf13/cobra"

func trackCommand() *cobra.Command {
	var f jobFlags
	cmd := &cobra.Command{
		Use:   "track CLIP --rig RIG",
		Short: "Follow the bobs only: positions with uncertainties",
		Long: `Track follows the bobs of CLIP as RIG describes them and leaves a result folder
with track.csv and a still, ready for lodeswing analyze.`,
		Example: `  lodeswing track swing.mp4 --rig swing.toml --out swing-track
  lodeswing analyze swing-track --rig swing.toml`,
		Args: exactly(1, "one clip"),
		RunE: func(cmd *cobra.Command, args []string) error {
			j, err := f.job(cmd, args[0])
			if err != nil {
				return err
			}
			rec, err := j.Track(cmd.Context())
			if err != nil {
				return err
			}
			return f.tell(cmd, j, rec)
		},
	}
	f.add(cmd)
	return cmd
}
