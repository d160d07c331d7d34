package main

import (
	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

// atFlag adds --at, the current at which V_GS(th) is taken.
func atFlag(cmd *cobra.Command, o *job.SheetOptions) {
	num(cmd.Flags(), &o.At, "at", "A", "test current (default: the part's, a spot list's own, else 1 mA)")
}

// fitMethods are those of the extrapolated threshold that may be asked for.
var fitMethods = []string{"auto", "current", "sqrt", "linear", "ratio", "curve"}

func fitCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	cmd := &cobra.Command{
		Use: "fit LOT [DEVICE...]", Short: "Threshold, gate bias and transconductance of each device",
		Long: `Fits the sweeps of a lot: V_GS(th) at the test current and gate bias at the idle
current by constant current, read along the device's own curve where the points
lie far apart; the threshold by a model of the transistor laid through the whole
curve (curve), or by the square-root line (sqrt), linear extrapolation (linear) or
ratio (ratio) where that is valid; transconductance, drain leakage. Signs are the
device's own. --budget shows what the uncertainties of one device are made of:
within the session, between sessions on one bench, and absolute.`,
		Example: `  gatesill fit bag1
  gatesill fit bag1 D7 --budget
  gatesill fit bag1 D7 --at 250uA --method sqrt --json`,
		Args: between(1, -1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.Devices = args[1:]
			return job.Fit(cmd.Context(), env, args[0], o)
		},
		ValidArgsFunction: lots(env, true),
	}
	o.Method = "auto"
	atFlag(cmd, &o)
	cmd.Flags().Var(choice{&o.Method, fitMethods}, "method", "of the extrapolated threshold")
	if err := cmd.RegisterFlagCompletionFunc("method", cobra.FixedCompletions(fitMethods, cobra.ShellCompDirectiveNoFileComp)); err != nil {
		panic(err) // the flag is not there
	}
	cmd.Flags().BoolVar(&o.Budget, "budget", false, "of one device: how each uncertainty comes about")
	return cmd
}

func spreadCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var limit string
	var fail bool
	cmd := &cobra.Command{
		Use: "spread LOT", Short: "What the lot has in common, and which devices stand apart",
		Long: `Shows median and spread of every quantity, and the devices that stand apart with
one sentence each: those that are broken or leak, and those outside the family by
gate voltage, by gain (gain factor, transconductance at the idle current) or by
the whole curve, where it is not what threshold and gain let expect. The default
limits depend on the size of the lot and on how many of these its devices have,
so that at most 2 % of clean lots get any false flag. Two populations are told by
a test that fewer than 1 % of lots of one population pass. Where the part has
limits, every device gets a verdict by the guard band stored with the lot (lot
edit --guard), and the lot its Ppk and tolerance interval.`,
		Example: `  gatesill spread bag1
  gatesill spread bag1 --limit 6 --fail --json`,
		Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			var err error
			if o.Limit, err = limitOf(limit); err != nil {
				return err
			}
			return job.Spread(cmd.Context(), env, args[0], o, fail)
		},
		ValidArgsFunction: lots(env, false),
	}
	atFlag(cmd, &o)
	cmd.Flags().StringVar(&limit, "limit", "auto", "flag beyond this many robust spreads: auto, or `3..20`")
	cmd.Flags().BoolVar(&fail, "fail", false, "exit code 3 when a device is flagged")
	return cmd
}

func sortCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var rq job.SortRequest
	cmd := &cobra.Command{
		Use: "sort LOT", Short: "Put the lot in bins",
		Long: `Puts the devices in bins of equal width, between edges of your own, or in a number
of bins of equal width over the range. A device closer to an edge than twice its
uncertainty stays in its bin and is marked maybe, with the bin across the edge.`,
		Example: `  gatesill sort bag1 --width 50mV
  gatesill sort bag1 --by vgs-idle --edges 2.7,2.8,2.9 --fail
  gatesill sort bag1 --bins 4`,
		Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if cmd.Flags().Changed("bins") && (rq.Bins < 1 || rq.Bins > 1000) {
				return job.Usage("--bins 4", "--bins: %d, must be from 1 to 1000", rq.Bins)
			}
			return job.Sort(cmd.Context(), env, args[0], o, rq)
		},
		ValidArgsFunction: lots(env, false),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.Var(choice{&rq.By, []string{"vgsth", "vgs-idle", "gm-idle"}}, "by", "quantity (default: gate bias at the idle current where the lot has one)")
	fs.StringVar(&rq.Width, "width", "", "width of a bin: `50mV`")
	fs.StringSliceVar(&rq.Edges, "edges", nil, "edges of the bins: `a,b,c`")
	fs.IntVar(&rq.Bins, "bins", 0, "`NUMBER` of bins")
	fs.BoolVar(&rq.Fail, "fail", false, "exit code 3 when a device is in no bin")
	atFlag(cmd, &o)
	return cmd
}

func reportCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var out, reference string
	var rq job.CompareRequest
	cmd := &cobra.Command{
		Use: "report LOT -o FILE", Short: "Write the lot as one self-contained page",
		Long: `Writes one HTML file with curves, thresholds, bins, flags, conditions and
cautions, to read, print or keep; with --compare also the comparison with a
reference lot, by the same flags as those of gatesill compare. It loads nothing from anywhere, and the same data gives the same
bytes.`,
		Example: "  gatesill report bag1 -o bag1.html\n  gatesill report 2612 -o 2612.html --compare 2431",
		Args:    exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if out == "" {
				return job.Usage("gatesill report "+job.Quote(args[0])+" -o FILE.html", "report: no output file")
			}
			if reference == "" {
				for _, name := range comparedOnly {
					if cmd.Flags().Changed(name) {
						return job.Usage("gatesill report "+job.Quote(args[0])+" -o FILE.html --compare LOT", "--%s: says how lots are compared, and --compare names none", name)
					}
				}
			}
			if err := marginGiven(cmd, &rq); err != nil {
				return err
			}
			return job.Report(cmd.Context(), env, args[0], out, reference, o, rq)
		},
		ValidArgsFunction: lots(env, false),
	}
	cmd.Flags().StringVarP(&out, "output", "o", "", "`FILE` to write, - for stdout")
	cmd.Flags().StringVar(&reference, "compare", "", "reference `LOT` to hold it against; only with it:")
	cmd.Flags().SortFlags = false
	comparedFlags(cmd.Flags(), &rq)
	if err := cmd.RegisterFlagCompletionFunc("compare", manyLots(env)); err != nil {
		panic(err) // the flag is not there
	}
	atFlag(cmd, &o)
	return cmd
}

func exportCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var out string
	var points bool
	cmd := &cobra.Command{
		Use: "export LOT -o FILE.csv|FILE.json", Short: "Write the lot for other programs",
		Long: `Writes CSV (one row a device, or with --points one row a point, which import takes
again) or JSON (everything, curves included). SI base units, full precision,
decimal point.`,
		Example: `  gatesill export bag1 -o bag1.csv
  gatesill export bag1 -o points.csv --points
  gatesill export bag1 -o bag1.json`,
		Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if out == "" {
				return job.Usage("gatesill export "+job.Quote(args[0])+" -o FILE.csv", "export: no output file")
			}
			return job.Export(cmd.Context(), env, args[0], out, points, o)
		},
		ValidArgsFunction: lots(env, false),
	}
	cmd.Flags().StringVarP(&out, "output", "o", "", "`FILE` to write, - for stdout")
	cmd.Flags().BoolVar(&points, "points", false, "CSV with one row a point")
	atFlag(cmd, &o)
	return cmd
}

func backupCmd(env *job.Env) *cobra.Command {
	return &cobra.Command{
		Use: "backup FILE", Short: "Copy the store, also while something writes to it",
		Long:    `Writes a whole and checked copy of the store to a new file; an existing file is never overwritten.`,
		Example: "  gatesill backup /media/stick/lots-2026-11.db", Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error { return job.Backup(cmd.Context(), env, args[0]) },
	}
}

func demoCmd(env *job.Env) *cobra.Command {
	var dir string
	cmd := &cobra.Command{
		Use: "demo", Short: "The whole job on two invented lots",
		Long: `Makes curve files of two invented lots, imports, fits, flags, sorts and reports
them, and leaves files, store and reports in a folder. It may be run again.`,
		Example: "  gatesill demo\n  gatesill demo --out look", Args: exactly(0),
		RunE: func(cmd *cobra.Command, _ []string) error { return job.Demo(cmd.Context(), env, dir) },
	}
	cmd.Flags().StringVar(&dir, "out", "gatesill-demo", "`DIR` to leave everything in")
	return cmd
}

// limitOf reads --limit: auto is 0.
func limitOf(text string) (float64, error) {
	if text == "auto" {
		return 0, nil
	}
	x, err := record.ParseNumber(text, "")
	if err != nil || x < 3 || x > 20 {
		return 0, job.Usage("--limit auto, or a number from 3 to 20", "--limit %s: not from 3 to 20 robust spreads", text)
	}
	return x, nil
}
