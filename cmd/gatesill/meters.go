package main

import (
	"os"
	"time"

	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
)

func metersCmd(env *job.Env) *cobra.Command {
	var rq job.MetersRequest
	var faults []string
	cmd := &cobra.Command{
		Use: "meters", Short: "Show what is plugged in and what the meters of a bench say",
		Long: `Without a bench file: lists the USB serial adapters and USB instruments that are
plugged in, under names that stay the same after a restart, and says where the
right to open one is missing and what helps. Nothing is opened for that.

With --bench: opens the lines of the bench and shows for each meter what it says,
how often, how old it is, and whether it can be taken. On a terminal the picture is
live until a key is pressed; elsewhere one table is written in the end, or with
--json one object a line for each meter. It ends in exit code 4 when a meter says
nothing.

With --write: asks which meter is on which line, for the circuit and for the
limits, and writes a bench file.`,
		Example: `  gatesill meters
  gatesill meters --write attic.toml
  gatesill meters --bench attic.toml
  gatesill meters --bench attic.toml --for 10s --json
  gatesill meters --rehearsal
  gatesill meters --rehearsal --fault overload:current@1`,
		Args: exactly(0),
		RunE: func(cmd *cobra.Command, _ []string) error {
			if cmd.Flags().Changed("for") && rq.For <= 0 {
				return job.Usage("--for 5s", "--for %v: how long is to be listened must be above 0", rq.For)
			}
			var err error
			if rq.Faults, err = faultsOf(faults, rq.Rehearsal); err != nil {
				return err
			}
			if isTerminal(env.Out) && os.Getenv("TERM") != "dumb" {
				rq.Keyboard, rq.Size, rq.Draw = keyboard, terminalSize, env.Err
			}
			return job.Meters(cmd.Context(), env, rq)
		},
	}
	f := cmd.Flags()
	f.StringVar(&rq.Bench, "bench", "", "bench `FILE`: meters, lines, circuit (gatesill help bench-file)")
	f.StringVar(&rq.Write, "write", "", "bench `FILE` to be written from answers")
	f.BoolVar(&rq.Rehearsal, "rehearsal", false, "show a bench that does not exist; every value is invented")
	f.StringArrayVar(&faults, "fault", nil, "with --rehearsal: `KIND:ROLE[@SECONDS][+SECONDS]` goes wrong (gatesill help sweep lists the kinds)")
	f.DurationVar(&rq.For, "for", time.Duration(0), "how long to listen, such as 5s (default: until a key on a terminal, else 3s)")
	return cmd
}
