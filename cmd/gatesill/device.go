package main

import (
	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

func deviceCmd(env *job.Env) *cobra.Command {
	var lot, reason string
	var tempco record.Num
	cmd := &cobra.Command{
		Use: "device show|exclude|include|rename|note|role", Short: "Show and change single devices", Args: noSuch,
		Example: `  gatesill device show D7 --lot bag1
  gatesill device exclude D7 --lot bag1 --reason "leg broken off"`,
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	pf := cmd.PersistentFlags()
	pf.StringVar(&lot, "lot", "", "the device's `LOT` (needed when several lots have such a device)")
	pf.StringVar(&reason, "reason", "", "why, in `WORDS`, for the audit trail")
	devices := func(c *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
		if len(args) > 0 || lot == "" {
			return nil, cobra.ShellCompDirectiveNoFileComp
		}
		return job.Names(c.Context(), env, lot), cobra.ShellCompDirectiveNoFileComp
	}
	verb := func(use, short, example string, n int, run func(*cobra.Command, []string) error) {
		cmd.AddCommand(&cobra.Command{Use: use, Short: short, Example: "  " + example, Args: exactly(n), RunE: run, ValidArgsFunction: devices})
	}
	change := func(cmd *cobra.Command, name string, f func(*record.Device)) error {
		return job.DeviceChange(cmd.Context(), env, lot, name, reason, f)
	}
	verb("show DEVICE", "History and audit trail of a device", "gatesill device show D7 --lot bag1 --tempco -4mV/K", 1,
		func(cmd *cobra.Command, a []string) error {
			return job.DeviceShow(cmd.Context(), env, lot, a[0], tempco)
		})
	num(cmd.Commands()[0].Flags(), &tempco, "tempco", "V/K", "temperature coefficient of the gate voltage, for what it read in other sessions: -4mV/K")
	verb("exclude DEVICE", "Leave a device out of every statistic (needs --reason)", "gatesill device exclude D7 --lot bag1 --reason 'leg broken off'", 1,
		func(cmd *cobra.Command, a []string) error {
			if reason == "" {
				return job.Usage("--reason 'leg broken off'", "a device is left out only with a reason")
			}
			return change(cmd, a[0], func(d *record.Device) { d.Excluded, d.Why = true, reason })
		})
	verb("include DEVICE", "Let an excluded device count again", "gatesill device include D7 --lot bag1", 1,
		func(cmd *cobra.Command, a []string) error {
			return change(cmd, a[0], func(d *record.Device) { d.Excluded, d.Why = false, "" })
		})
	verb("rename DEVICE NEW", "Give a device another name", "gatesill device rename D7 D17 --lot bag1", 2,
		func(cmd *cobra.Command, a []string) error {
			return change(cmd, a[0], func(d *record.Device) { d.Name = a[1] })
		})
	verb("note DEVICE TEXT", "Write a note to a device", "gatesill device note D7 'marking skewed' --lot bag1", 2,
		func(cmd *cobra.Command, a []string) error {
			return change(cmd, a[0], func(d *record.Device) { d.Note = a[1] })
		})
	verb("role DEVICE control|sample", "Keep a device as a control part, or as one of the lot", "gatesill device role K1 control --lot bag1", 2,
		func(cmd *cobra.Command, a []string) error {
			return change(cmd, a[0], func(d *record.Device) { d.Role = record.Role(a[1]) })
		})
	return cmd
}
