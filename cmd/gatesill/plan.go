package main

import (
	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"gatesill/cmd/internal/job"
)

func planCmd(env *job.Env) *cobra.Command {
	cmd := &cobra.Command{
		Use: "plan find|shift|same|cover|capability|accept", Short: "How many parts to measure, and what a number of them can show",
		Long: `Answers both ways: how many parts a purpose takes, or with --n what that many can
show. Values are taken for normal where it says so. --from LOT takes the standard
deviation, the size or the values from a lot in the store.`,
		Example: `  gatesill plan find --bad 20 --of 200 --n 5
  gatesill plan shift --shift 50mV --sd 80mV
  gatesill plan same --margin 50mV --sd 80mV --n 6
  gatesill plan cover --share 95% --n 40
  gatesill plan capability --ppk 1.33 --expect 1.67
  gatesill plan accept --good 1% --bad 5% -o plan.svg`,
		Args: noSuch,
		RunE: func(*cobra.Command, []string) error {
			return job.Usage("gatesill plan find, shift, same, cover, capability or accept", "plan: what for?")
		},
	}
	for _, k := range []struct {
		kind, short, long, example string
		flags                      func(fs *pflag.FlagSet, rq *job.PlanRequest)
	}{
		{
			"find", "Find bad parts: how many to look at",
			`How many parts find at least one bad one, and what may still be bad when so many
were good (exact: hypergeometric with --of, else binomial). Without --bad and --n
it shows the lengths of all-good samples. --from LOT takes its quantity for --of.`,
			"  gatesill plan find\n  gatesill plan find --bad 10% --risk 10%\n  gatesill plan find --n 22 --of 200",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				badFlag(fs, rq, "bad parts assumed: `10%` of them, or a number of those in a lot of --of")
				fs.Var(countFlag{&rq.Of, 1}, "of", "parts in the lot (default: so many that it does not matter)")
				fs.Var(shareFlag{&rq.Risk}, "risk", "of missing all bad parts (default 5%)")
				nFlag(fs, rq)
				fs.Var(countFlag{&rq.Found, 0}, "found", "bad ones among the --n measured (default 0)")
			},
		},
		{
			"shift", "See a shift between two lots",
			`How many devices of either lot see a true shift, or with --n how often that many
see it and which shifts they see at all. The comparison is that of gatesill
compare, on means without the lowest and highest fifth.`,
			"  gatesill plan shift --shift 50mV --sd 80mV\n  gatesill plan shift --sd 80mV --n 10\n  gatesill plan shift --shift 30mV --from bag1",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				num(fs, &rq.Shift, "shift", "V", "true shift that must not be missed")
				sdFlag(fs, rq)
				fs.Var(shareFlag{&rq.Risk}, "risk", "of not seeing the shift (default 20%)")
				confidenceFlag(fs, rq)
				nFlag(fs, rq)
			},
		},
		{
			"same", "Show that two lots are alike within a margin",
			`How many devices of either lot show that the shift lies within the margin: the
90 % interval of the shift within it. The margin has to be set before measuring.
--from LOT takes the standard deviation, and the margin that was set for the lot.`,
			"  gatesill plan same --margin 50mV --sd 80mV\n  gatesill plan same --margin 50mV --sd 80mV --n 6\n  gatesill plan same --margin 10% --from bag1",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				fs.Var(amountFlag{&rq.Margin, []string{"V", "%", "A"}}, "margin", "largest shift that does not matter: 50mV; of the idle current 10% or 25mA with --from")
				sdFlag(fs, rq)
				num(fs, &rq.Shift, "shift", "V", "true shift assumed (default none)")
				fs.Var(shareFlag{&rq.Risk}, "risk", "of failing to show it (default 20%)")
				nFlag(fs, rq)
			},
		},
		{
			"cover", "Limits that hold a share of a lot",
			`Tolerance intervals: how many parts until least and greatest value hold a share
of the lot, and the factors k of mean ± k sd for normal values. --from LOT gives
the intervals of its gate voltages.`,
			"  gatesill plan cover\n  gatesill plan cover --share 99% --confidence 90% --n 40\n  gatesill plan cover --from bag1",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				fs.Var(shareFlag{&rq.Share}, "share", "share of the lot to hold (default 95%)")
				confidenceFlag(fs, rq)
				nFlag(fs, rq)
			},
		},
		{
			"capability", "Prove a capability index",
			`How many parts prove a Ppk, by its lower confidence bound: with --expect how many
when that is found, with --n what they have to show. --from LOT gives the Ppk of
its V_GS(th) against the limits of the part, from 25 devices on.`,
			"  gatesill plan capability --ppk 1.33 --expect 1.67\n  gatesill plan capability --ppk 1.33 --n 50\n  gatesill plan capability --from bag1",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				num(fs, &rq.Ppk, "ppk", "", "index to be proven (default 1.33)")
				num(fs, &rq.Expect, "expect", "", "index that is expected to be found")
				confidenceFlag(fs, rq)
				nFlag(fs, rq)
				limitFlags(fs, rq)
			},
		},
		{
			"accept", "Accept lots by mean and spread of a sample",
			`A plan (n, k): accept when the mean of n parts is at least k standard deviations
away from the limit. --good and --bad say which lots should be accepted and
refused; with --n, or --n and --k, how that plan does. The operating
characteristic is drawn; -o FILE.svg writes it. --from LOT decides on that lot by
its V_GS(th) and the limits of the part.`,
			"  gatesill plan accept --good 1% --bad 5%\n  gatesill plan accept --n 30 --k 1.86 -o plan.svg\n  gatesill plan accept --good 1% --bad 10% --from bag1",
			func(fs *pflag.FlagSet, rq *job.PlanRequest) {
				fs.Var(shareFlag{&rq.Good}, "good", "share of bad parts in a lot that should be accepted")
				fs.Var(shareFlag{&rq.GoodRisk}, "good-risk", "of refusing such a lot (default 5%)")
				badFlag(fs, rq, "share of bad parts in a lot that should be refused, `5%`")
				fs.Var(shareFlag{&rq.Risk}, "risk", "of accepting such a lot (default 10%)")
				num(fs, &rq.SigmaKnown, "sigma-known", "V", "standard deviation, known beforehand")
				nFlag(fs, rq)
				num(fs, &rq.K, "k", "", "factor of a plan that is there already")
				limitFlags(fs, rq)
				fs.StringVarP(&rq.Output, "output", "o", "", "`FILE.svg` to draw the operating characteristic in, - for stdout")
				fs.BoolVar(&rq.Fail, "fail", false, "exit code 3 when the lot of --from is not accepted")
			},
		},
	} {
		var rq job.PlanRequest
		c := &cobra.Command{
			Use: k.kind, Short: k.short, Long: k.long, Example: k.example, Args: exactly(0),
			RunE: func(cmd *cobra.Command, _ []string) error { return job.Plan(cmd.Context(), env, k.kind, rq) },
		}
		c.Flags().SortFlags = false
		k.flags(c.Flags(), &rq)
		c.Flags().StringVar(&rq.From, "from", "", "`LOT` of the store to take values from")
		if err := c.RegisterFlagCompletionFunc("from", lots(env, false)); err != nil {
			panic(err) // the flag is not there
		}
		cmd.AddCommand(c)
	}
	return cmd
}

func nFlag(fs *pflag.FlagSet, rq *job.PlanRequest) {
	fs.Var(countFlag{&rq.N, 1}, "n", "parts measured: what can they show")
}

func badFlag(fs *pflag.FlagSet, rq *job.PlanRequest, usage string) {
	fs.StringVar(&rq.Bad, "bad", "", usage)
}

func sdFlag(fs *pflag.FlagSet, rq *job.PlanRequest) {
	num(fs, &rq.SD, "sd", "V", "standard deviation between devices of one lot")
}

func confidenceFlag(fs *pflag.FlagSet, rq *job.PlanRequest) {
	fs.Var(shareFlag{&rq.Confidence}, "confidence", "confidence (default 95%)")
}

func limitFlags(fs *pflag.FlagSet, rq *job.PlanRequest) {
	num(fs, &rq.LimitLow, "limit-low", "V", "lower limit for the lot of --from (default: that of the part)")
	num(fs, &rq.LimitHigh, "limit-high", "V", "upper limit for the lot of --from (default: that of the part)")
}
