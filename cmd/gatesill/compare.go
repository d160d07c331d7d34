package main

import (
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

func compareCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var rq job.CompareRequest
	var level string
	cmd := &cobra.Command{
		Use: "compare REFERENCE CANDIDATE...", Short: "Lot against reference lot: by how much the gate voltage has shifted",
		Long: `Shows by how much the gate voltage of a lot has shifted against a reference lot,
with its interval and a verdict. With a margin, the largest shift that does not
matter, the 90 % interval decides: inside, outside, or too few to tell. Without
one the 95 % interval does: differs, or no difference seen, with the largest shift
that is not excluded. Fewer than 3 devices with a value on a side are too few.

The margin is --margin, else that of the lot, else that of the reference lot
(gatesill lot edit LOT --margin 50mV). Only a stored one that is older than the
lot's first reading counts as set before. 10% and 25mA are of the idle current.

Lots of different parts, or not measured alike, are refused. Several lots are
also laid out in time.`,
		Example: `  gatesill compare 2431 2612 --margin 50mV
  gatesill compare 2431 2612 --by vgsth --fail --json
  gatesill compare may november --paired --tempco -4mV/K
  gatesill compare 2431 2502 2520 2612`,
		Args: between(2, -1),
		RunE: func(cmd *cobra.Command, args []string) error {
			var err error
			if rq.Level, err = levelOf(level); err != nil {
				return err
			}
			if err := marginGiven(cmd, &rq); err != nil {
				return err
			}
			return job.Compare(cmd.Context(), env, args[0], args[1:], o, rq)
		},
		ValidArgsFunction: manyLots(env),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	num(fs, &o.At, "at", "A", "compare at this current (of V_GS(th), or with --by vgs-idle of the idle current)")
	fs.StringVar(&level, "level", "95", "of the interval, in `%`, 50 to 99.9")
	comparedFlags(fs, &rq)
	fs.BoolVar(&rq.Fail, "fail", false, "exit code 3 when a lot differs or is outside the margin")
	return cmd
}

// comparedFlags are how lots are compared, here and in a report.
func comparedFlags(fs *pflag.FlagSet, rq *job.CompareRequest) {
	fs.Var(choice{&rq.By, []string{"vgs-idle", "vgsth"}}, "by", "quantity (default: gate bias at the idle current where the lots have it)")
	fs.Var(amountFlag{&rq.Margin, []string{"V", "%", "A"}}, "margin", "largest shift that does not matter: 50mV, 10% or 25mA of the idle current")
	fs.BoolVar(&rq.Paired, "paired", false, "the same devices measured twice: pair them by serial")
	fs.BoolVar(&rq.Unpaired, "unpaired", false, "never pair them (default: where serials and values go together)")
	num(fs, &rq.Tempco, "tempco", "V/K", "slope of the gate voltage, taken off between lots of known temperatures: -4mV/K")
	num(fs, &rq.TempcoU, "tempco-u", "V/K", "standard uncertainty of that slope (default: 20 % of it)")
	num(fs, &rq.Beta, "beta", "A/V2", "gain factor of lots whose curves were not measured")
}

// comparedOnly are those flags: they need a lot to compare with.
var comparedOnly = []string{"by", "margin", "paired", "unpaired", "tempco", "beta"}

// marginGiven refuses an empty --margin.
func marginGiven(cmd *cobra.Command, rq *job.CompareRequest) error {
	if f := cmd.Flags().Lookup("margin"); f.Changed && rq.Margin.Unit == "" {
		return job.Usage("--margin 50mV", "--margin: no margin given")
	}
	return nil
}

// levelOf reads --level: a number of percent.
func levelOf(text string) (float64, error) {
	x, err := record.ParseNumber(strings.TrimSuffix(strings.TrimSpace(text), "%"), "")
	if err != nil || x == 0 {
		return 0, job.Usage("--level 95", "--level %s: must be from 50 to 99.9 %%", text)
	}
	return x, nil
}

// manyLots completes names of lots that are not named yet.
func manyLots(env *job.Env) func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
	one := lots(env, false)
	return func(cmd *cobra.Command, args []string, word string) ([]string, cobra.ShellCompDirective) {
		names, how := one(cmd, nil, word)
		return slices.DeleteFunc(names, func(n string) bool { return slices.Contains(args, n) }), how
	}
}
