package main

import (
	"runtime/debug"

	"github.com/spf13/cobra"
)

// version is set by the Makefile from the commit; "unreleased" when built by hand.
var version = "unreleased"

func rootCommand() *cobra.Command {
	root := &cobra.Command{
		Use:   "lodeswing",
		Short: "Measure magnet toys from phone clips",
		Long: `Lodeswing turns a phone clip of a magnet toy into numbers with honest error bars:
where each bob was, how the swing dies, its period, damping and spectrum, and a
report that a stranger understands.

Exit status: 0 done; 1 failed; 2 wrong use; 3 done, but the verdict is reject.`,
		Example: `  lodeswing inspect swing.mp4                    is this clip good enough, and how to film it better
  lodeswing measure swing.mp4 --rig lantern.toml the whole job, into the folder swing-result
  lodeswing film lantern --out demo              footage of a sample toy with known truth`,
		Version:       versionLine(),
		SilenceUsage:  true,
		SilenceErrors: true,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return wrongUse("there is no command %q; see lodeswing --help", args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error { return cmd.Help() },
	}
	root.SetVersionTemplate("lodeswing {{.Version}}\n")
	root.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		return wrongUse("%w; see %s --help", err, cmd.CommandPath())
	})
	root.AddCommand(
		measureCommand(),
		trackCommand(),
		analyzeCommand(),
		fitCommand(),
		plotCommand(),
		inspectCommand(),
		targetCommand(),
		filmCommand(),
		simulateCommand(),
		compareCommand(),
	)
	return root
}

func versionLine() string {
	line := version
	if info, ok := debug.ReadBuildInfo(); ok {
		line += " (" + info.GoVersion + ")"
	}
	return line
}

// exactly says which arguments a command takes, in plain words.
func exactly(n int, what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) != n {
			return wrongUse("%s takes %s, and got %d; see %s --help", cmd.CommandPath(), what, len(args), cmd.CommandPath())
		}
		return nil
	}
}
