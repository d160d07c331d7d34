package main

import (
	"github.com/spf13/cobra"

	"gatesill/acquire/keeper"
	"gatesill/acquire/rehearsal"
	"gatesill/cmd/internal/job"
)

// processCmds are the hidden verbs by which the program starts itself for what
// must live in a process of its own.
func processCmds() []*cobra.Command {
	verb := func(name, short string, run func(*cobra.Command) int) *cobra.Command {
		return &cobra.Command{
			Use: name, Short: short, Hidden: true, Args: exactly(0),
			RunE: func(cmd *cobra.Command, _ []string) error {
				if code := run(cmd); code != job.ExitDone {
					return &job.Failure{Code: code}
				}
				return nil
			},
		}
	}
	return []*cobra.Command{
		verb(job.KeeperVerb, "Guard driven supplies (started by gatesill sweep)", func(cmd *cobra.Command) int {
			return keeper.Main(cmd.InOrStdin(), cmd.OutOrStdout())
		}),
		verb(job.RehearsalVerb, "Simulate a bench (started by --rehearsal)", func(cmd *cobra.Command) int {
			return rehearsal.Main(cmd.InOrStdin(), cmd.OutOrStdout())
		}),
	}
}
