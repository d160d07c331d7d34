package main

import (
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
)

// matchBy are the quantities that devices are matched by.
var matchBy = []string{"vgs-idle", "vgsth", "gm-idle", "curve"}

func matchCmd(env *job.Env) *cobra.Command {
	var rq job.MatchRequest
	cmd := &cobra.Command{
		Use: "match LOT...", Short: "Put devices in pairs, fours or sets of any size that carry the same current",
		Long: `Puts devices in sets that idle equally on one gate line, says what their
difference means in milliamperes, and how far from the best possible the choice
is. With --within as many sets as the tolerance allows, without it as many as
there are devices for. By default it matches by what the lot is sorted by;
quantities after the first are limits, or with --weights enter the distance.

Several lots must be of one part, or of an n-channel and a p-channel part, which
are then matched one to one; lots not measured alike are refused. Devices that are
in a locked set, damaged, excluded, control parts, or had not settled are not given
out, and are listed with the reason. --lock stores sets of this very result, so
that their devices are given out to nobody else. --partner-for ranks the lots
named, or all of its part, as partners for one device: the survivor of a pair.`,
		Example: `  gatesill match bag1 --within 10mV
  gatesill match bag1 --size 4 --within 10mV --at 150mA --gm 1.2S --source-resistor 0.22
  gatesill match bag1 --within 30mV,5% --by vgs-idle,gm-idle --lock 1,3 --unit 'amplifier 7'
  gatesill match bag1 --by curve --currents 50mA..1A --aim worst
  gatesill match --partner-for D7`,
		Args:              between(0, -1),
		RunE:              func(cmd *cobra.Command, args []string) error { return job.Match(cmd.Context(), env, args, rq) },
		ValidArgsFunction: manyLots(env),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.IntVar(&rq.Size, "size", 2, "`NUMBER` of devices in a set")
	fs.StringSliceVar(&rq.Within, "within", nil, "greatest difference in a set, by quantity: `10mV[,5%]`")
	fs.StringSliceVar(&rq.By, "by", nil, "quantities, the leading one first: `vgs-idle,gm-idle`, vgsth or curve")
	num(fs, &rq.At, "at", "A", "idle current of one device (default: the part's, a spot list's own)")
	fs.StringSliceVar(&rq.Weights, "weights", nil, "how much each quantity counts, its tolerance as the unit: `1,0.5`")
	fs.StringVar(&rq.Currents, "currents", "", "where curves are compared: `50mA..1A` (default: where most devices have them)")
	fs.Var(choice{&rq.Aim, []string{"most", "total", "worst"}}, "aim", "most sets (default with --within), least sum of differences, or least worst")
	fs.IntVar(&rq.Sets, "sets", 0, "the best `NUMBER` of sets only")
	num(fs, &rq.SourceResistor, "source-resistor", "ohm", "in each source")
	num(fs, &rq.Gm, "gm", "S", "transconductance at the idle current, of devices whose readings tell none")
	num(fs, &rq.Vds, "vds", "V", "drain voltage in use, for the power (default: that of the readings)")
	num(fs, &rq.TimeLimit, "time-limit", "s", "of the search for larger sets by several quantities (default 30s)")
	fs.StringVar(&rq.Partner, "partner-for", "", "rank the stock as partners for this `DEVICE` (or LOT/DEVICE)")
	fs.StringSliceVar(&rq.Lock, "lock", nil, "store these sets: `1,3`, or all; with --partner-for the partner in that place")
	fs.StringVar(&rq.Unit, "unit", "", "what locked sets are for, in `WORDS`")
	fs.StringVar(&rq.Labels, "labels", "", "also write lines for labels (serial, gate voltage, set) to `FILE`")
	fs.StringVarP(&rq.Page, "output", "o", "", "also write the sets as one HTML page to print: `FILE.html`")
	complete := func(flag string, f cobra.CompletionFunc) {
		if err := cmd.RegisterFlagCompletionFunc(flag, f); err != nil {
			panic(err) // the flag is not there
		}
	}
	complete("by", listCompletion(matchBy))
	complete("partner-for", func(c *cobra.Command, _ []string, _ string) ([]string, cobra.ShellCompDirective) {
		var out []string
		for _, l := range job.Names(c.Context(), env, "") {
			for _, d := range job.Names(c.Context(), env, l) {
				out = append(out, l+"/"+d)
			}
		}
		return out, cobra.ShellCompDirectiveNoFileComp
	})
	return cmd
}

// listCompletion completes the last of several words with commas between them.
func listCompletion(words []string) cobra.CompletionFunc {
	return func(_ *cobra.Command, _ []string, typed string) ([]string, cobra.ShellCompDirective) {
		head := ""
		if i := strings.LastIndexByte(typed, ','); i >= 0 {
			head = typed[:i+1]
		}
		have := strings.Split(head, ",")
		var out []string
		for _, w := range words {
			if !slices.Contains(have, w) {
				out = append(out, head+w)
			}
		}
		return out, cobra.ShellCompDirectiveNoFileComp
	}
}

func setCmd(env *job.Env) *cobra.Command {
	cmd := &cobra.Command{
		Use: "set list|show|lock|release", Short: "List, show, use and release sets that were locked", Args: noSuch,
		Long: `A set that gatesill match --lock stored is reserved; set lock says in which unit it
was built in; set release gives its devices free again. Sets stay on record with
what their devices read when they were made. SET is a name, a number, or the
beginning of an id.`,
		Example: `  gatesill set list
  gatesill set lock S3 --unit 'amplifier 7'
  gatesill set release S3 --reason 'D7 failed in the final test'`,
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	sets := func(c *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
		if len(args) > 0 {
			return nil, cobra.ShellCompDirectiveNoFileComp
		}
		return job.SetNames(c.Context(), env), cobra.ShellCompDirectiveNoFileComp
	}
	var lot, labels, unit, useReason, reason string
	list := &cobra.Command{
		Use: "list", Short: "List sets with their devices and what became of them", Args: exactly(0), Example: "  gatesill set list --lot bag1",
		RunE: func(cmd *cobra.Command, _ []string) error { return job.SetList(cmd.Context(), env, lot) },
	}
	list.Flags().StringVar(&lot, "lot", "", "only those with a device of this `LOT`")
	if err := list.RegisterFlagCompletionFunc("lot", lots(env, false)); err != nil {
		panic(err) // the flag is not there
	}
	show := &cobra.Command{
		Use: "show SET", Short: "Show a set: its devices then and now, and its history", Args: exactly(1), Example: "  gatesill set show S3\n  gatesill set show 3 --labels -",
		RunE:              func(cmd *cobra.Command, a []string) error { return job.SetShow(cmd.Context(), env, a[0], labels) },
		ValidArgsFunction: sets,
	}
	show.Flags().StringVar(&labels, "labels", "", "write lines for labels (serial, gate voltage, set) to `FILE` instead, - for stdout")
	use := &cobra.Command{
		Use: "lock SET", Short: "Say in which unit a reserved set was built in", Args: exactly(1), Example: "  gatesill set lock S3 --unit 'amplifier 7'",
		RunE: func(cmd *cobra.Command, a []string) error {
			return job.SetUse(cmd.Context(), env, a[0], unit, useReason)
		},
		ValidArgsFunction: sets,
	}
	use.Flags().StringVar(&unit, "unit", "", "the unit, in `WORDS` (default: what it was reserved for)")
	use.Flags().StringVar(&useReason, "reason", "", "why, in `WORDS`, for the audit trail")
	release := &cobra.Command{
		Use: "release SET", Short: "Give the devices of a set free again (needs --reason)", Args: exactly(1), Example: "  gatesill set release S3 --reason 'D7 failed'",
		RunE:              func(cmd *cobra.Command, a []string) error { return job.SetRelease(cmd.Context(), env, a[0], reason) },
		ValidArgsFunction: sets,
	}
	release.Flags().StringVar(&reason, "reason", "", "why, in `WORDS`, for the audit trail")
	cmd.AddCommand(list, show, use, release)
	return cmd
}
