package main

import (
	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
)

func gaugeCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var rq job.GaugeRequest
	cmd := &cobra.Command{
		Use: "gauge LOT", Short: "What the bench can tell apart, and which devices changed since",
		Long: `Shows from devices put in again how well the bench repeats: the smallest
difference between two devices that counts, the smallest honest bin, operators and
fixtures apart, drift along a session, control parts, and what became of devices
measured at several dates, as read and with --tempco. Put in again is what comes
twice in one session: one of import --session NAME, operator and fixture, on one day.
Once five devices or more have been put in again ten times in all, sort, spread and what follows hold it in
every u. Ten devices, three times each, in the random order of --rounds 3, are best.`,
		Example: `  gatesill gauge bag1 --rounds 3
  gatesill import bag1 again.csv --operator anna
  gatesill gauge bag1
  gatesill gauge bag1 --by vgs-idle --tempco -4mV/K --json`,
		Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			fs := cmd.Flags()
			if fs.Changed("parts") && rq.Rounds == 0 {
				return job.Usage("--rounds 3 --parts 10", "--parts: only with --rounds")
			}
			return job.Gauge(cmd.Context(), env, args[0], o, rq)
		},
		ValidArgsFunction: lots(env, false),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.Var(choice{&rq.By, []string{"vgsth", "vgs-idle"}}, "by", "gate voltage (default: at the idle current where the lot has one)")
	num(fs, &rq.Tempco, "tempco", "V/K", "temperature coefficient of that gate voltage: -4mV/K")
	num(fs, &rq.Repeatability, "repeatability", "V", "standard deviation of a device put in again, known from elsewhere")
	fs.Var(wholeFlag{&rq.Rounds, 1, 100}, "rounds", "only write a random order to measure in, for this `NUMBER` of rounds")
	fs.Var(wholeFlag{&rq.Parts, 2, 0}, "parts", "`NUMBER` of devices in that order (default 10)")
	atFlag(cmd, &o)
	return cmd
}
