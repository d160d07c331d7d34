package main

import (
	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

func lotCmd(env *job.Env) *cobra.Command {
	cmd := &cobra.Command{
		Use: "lot add|list|show|edit|rename", Short: "Make, list, show and change lots and their part", Args: noSuch,
		Example: `  gatesill lot add bag1 --part X530 --test-current 250uA --idle-current 250mA
  gatesill lot edit bag1 --supplier "market stall" --quantity 25
  gatesill lot show bag1`,
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	var lotEdit, lotNew lotFlags
	var reason string
	add := &cobra.Command{
		Use: "add LOT", Short: "Make a lot, and its part where that is new", Args: exactly(1),
		Example: "  gatesill lot add bag1 --part X530 --channel n --test-current 250uA --vgsth-min 2 --vgsth-max 4",
		RunE: func(cmd *cobra.Command, args []string) error {
			return job.LotAdd(cmd.Context(), env, args[0], lotNew.edit(cmd))
		},
	}
	lotNew.add(add)
	edit := &cobra.Command{
		Use: "edit LOT", Short: "Change a lot or its part; old values are kept", Args: exactly(1),
		Example: "  gatesill lot edit bag1 --idle-current 100mA --reason 'new amplifier'",
		RunE: func(cmd *cobra.Command, args []string) error {
			e := lotEdit.edit(cmd)
			if e == (job.LotEdit{}) {
				return job.Usage("gatesill help lot edit", "lot edit: nothing to change was given")
			}
			return job.LotEditJob(cmd.Context(), env, args[0], e, reason)
		},
		ValidArgsFunction: lots(env, false),
	}
	lotEdit.add(edit)
	edit.Flags().StringVar(&reason, "reason", "", "why, in `WORDS`, for the audit trail")
	rename := &cobra.Command{
		Use: "rename LOT NEW", Short: "Give a lot another name", Args: exactly(2),
		Example: "  gatesill lot rename bag1 2431",
		RunE: func(cmd *cobra.Command, args []string) error {
			return job.LotRename(cmd.Context(), env, args[0], args[1], reason)
		},
		ValidArgsFunction: lots(env, false),
	}
	rename.Flags().StringVar(&reason, "reason", "", "why, in `WORDS`, for the audit trail")
	cmd.AddCommand(add, edit, rename,
		&cobra.Command{
			Use: "list", Short: "List all lots", Args: exactly(0), Example: "  gatesill lot list",
			RunE: func(cmd *cobra.Command, _ []string) error { return job.LotList(cmd.Context(), env) },
		},
		&cobra.Command{
			Use: "show LOT", Short: "Show a lot: part, conditions, devices, files, changes", Args: exactly(1), Example: "  gatesill lot show bag1",
			RunE:              func(cmd *cobra.Command, args []string) error { return job.LotShow(cmd.Context(), env, args[0]) },
			ValidArgsFunction: lots(env, false),
		})
	return cmd
}

// noSuch refuses an unknown word behind a verb that only groups others.
func noSuch(cmd *cobra.Command, args []string) error {
	if len(args) > 0 {
		return job.Usage("usage: "+cmd.UseLine(), "%s: no %q", cmd.CommandPath(), args[0])
	}
	return nil
}

// lotFlags holds the values of the flags of `lot add` and `lot edit`.
type lotFlags struct {
	part, channel, mode                                                                                string
	off, test, testVDS, idle, vgsthMin, vgsthMax, maxVgs, maxVds, maxID, maxPD, maxTemp, rth, quantity record.Num
	supplier, dateCode, marking, sampled, sendBack, note                                               string
	margin, guard                                                                                      record.Amount
}

func (f *lotFlags) add(cmd *cobra.Command) {
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.StringVar(&f.part, "part", "", "`NAME` of the part; what follows up to --rth holds for every lot of it")
	fs.Var(choice{&f.channel, []string{"n", "p"}}, "channel", "channel of the part")
	fs.Var(choice{&f.mode, []string{"enhancement", "depletion"}}, "mode", "mode of the part")
	num(fs, &f.off, "off-voltage", "V", "gate voltage at which it is surely off")
	num(fs, &f.test, "test-current", "A", "current at which the data sheet states V_GS(th)")
	num(fs, &f.testVDS, "test-vds", "V", "drain voltage at which it does (default: drain tied to gate)")
	num(fs, &f.idle, "idle-current", "A", "idle current wanted")
	num(fs, &f.vgsthMin, "vgsth-min", "V", "lower data-sheet limit of V_GS(th)")
	num(fs, &f.vgsthMax, "vgsth-max", "V", "upper data-sheet limit of V_GS(th)")
	num(fs, &f.maxVgs, "max-vgs", "V", "greatest gate voltage allowed")
	num(fs, &f.maxVds, "max-vds", "V", "greatest drain voltage allowed")
	num(fs, &f.maxID, "max-id", "A", "greatest drain current allowed")
	num(fs, &f.maxPD, "max-pd", "W", "greatest power allowed")
	num(fs, &f.maxTemp, "max-temp", "degC", "greatest junction temperature allowed")
	num(fs, &f.rth, "rth", "K/W", "thermal resistance, junction to case")
	fs.StringVar(&f.supplier, "supplier", "", "where the lot came from")
	fs.StringVar(&f.dateCode, "date-code", "", "date code on the devices")
	fs.StringVar(&f.marking, "marking", "", "marking on the devices")
	num(fs, &f.quantity, "quantity", "", "devices in the lot, not only those measured")
	fs.StringVar(&f.sampled, "sampled", "", "how the sample was taken, in `WORDS`")
	fs.Var(clearable{amountFlag{&f.margin, []string{"V", "%", "A"}}}, "margin", "largest shift that does not matter: 50mV, 10% or 25mA of the idle current; none clears it")
	fs.Var(clearable{amountFlag{&f.guard, []string{"V", "u"}}}, "guard", "guard band at a limit: 20mV, or 2u for twice the standard uncertainty; none clears it")
	fs.Var(choice{&f.sendBack, []string{"outside-limits", "outside-margin"}}, "send-back", "your rule for sending a lot back")
	fs.StringVar(&f.note, "note", "", "anything else")
}

// edit gives what was set on the command line.
func (f *lotFlags) edit(cmd *cobra.Command) job.LotEdit {
	changed := cmd.Flags().Changed
	var e job.LotEdit
	channel, mode := record.Channel(f.channel), record.Mode(f.mode)
	pick(changed("channel"), &e.Channel, &channel)
	pick(changed("mode"), &e.Mode, &mode)
	for _, s := range []struct {
		name string
		dst  **string
		src  *string
	}{
		{"part", &e.Part, &f.part}, {"supplier", &e.Supplier, &f.supplier}, {"date-code", &e.DateCode, &f.dateCode}, {"marking", &e.Marking, &f.marking},
		{"sampled", &e.Sampled, &f.sampled}, {"send-back", &e.SendBack, &f.sendBack}, {"note", &e.Note, &f.note},
	} {
		pick(changed(s.name), s.dst, s.src)
	}
	for _, n := range []struct {
		name string
		dst  **record.Num
		src  *record.Num
	}{
		{"off-voltage", &e.OffVoltage, &f.off}, {"test-current", &e.TestCurrent, &f.test}, {"test-vds", &e.TestVDS, &f.testVDS}, {"idle-current", &e.IdleCurrent, &f.idle},
		{"vgsth-min", &e.VgsthMin, &f.vgsthMin}, {"vgsth-max", &e.VgsthMax, &f.vgsthMax}, {"max-vgs", &e.MaxVgs, &f.maxVgs}, {"max-vds", &e.MaxVds, &f.maxVds},
		{"max-id", &e.MaxID, &f.maxID}, {"max-pd", &e.MaxPD, &f.maxPD}, {"max-temp", &e.MaxTemp, &f.maxTemp}, {"rth", &e.Rth, &f.rth}, {"quantity", &e.Quantity, &f.quantity},
	} {
		pick(changed(n.name), n.dst, n.src)
	}
	pick(changed("margin"), &e.Margin, &f.margin)
	pick(changed("guard"), &e.Guard, &f.guard)
	return e
}

func pick[T any](yes bool, dst **T, src *T) {
	if yes {
		*dst = src
	}
}
