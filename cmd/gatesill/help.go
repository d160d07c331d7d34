package main

import (
	"errors"
	"fmt"
	"strconv"

	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
)

// topics are the help texts that belong to no verb.
var topics = []struct {
	name, short string
	show        func(*job.Env) error
}{
	{"codes", "what each warning and flag code means", job.HelpCodes},
	{"robust", "how spread is told without the odd ones, and why", job.HelpRobust},
	{"bench-file", "a bench file with every key", job.HelpBench},
	{"exit-codes", "what the exit codes mean", helpExit},
}

func helpCmd(env *job.Env) *cobra.Command {
	cmd := &cobra.Command{
		Use: "help [codes|CODE|robust|bench-file|exit-codes|VERB]", Short: "Help on a verb, a warning code or a topic",
		Example: "  gatesill help import\n  gatesill help codes\n  gatesill help two-populations",
		RunE: func(cmd *cobra.Command, args []string) error {
			root := cmd.Root()
			if len(args) == 0 {
				return root.Help()
			}
			for _, t := range topics {
				if t.name == args[0] {
					return t.show(env)
				}
			}
			if found, err := job.HelpCode(env, args[0]); found {
				return err
			}
			c, rest, err := root.Find(args)
			if err != nil || c == root || len(rest) > 0 {
				return unknownVerb(root, args[0])
			}
			c.InitDefaultHelpFlag()
			return c.Help()
		},
		ValidArgsFunction: func(cmd *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
			var out []string
			for _, t := range topics {
				out = append(out, t.name)
			}
			for _, c := range cmd.Root().Commands() {
				out = append(out, c.Name())
			}
			return out, cobra.ShellCompDirectiveNoFileComp
		},
	}
	return cmd
}

func helpExit(env *job.Env) error {
	var err error
	for _, c := range []struct {
		code int
		text string
	}{
		{job.ExitDone, "done, also when a fit declined to give a number"},
		{job.ExitFailed, "something went wrong: a file refused or ambiguous, no such lot, no space"},
		{job.ExitUsage, "used wrongly"},
		{job.ExitNo, "the answer is no, and --fail asked for that"},
		{job.ExitInstrument, "trouble with an instrument or a port"},
		{job.ExitInterrupted, "interrupted"},
	} {
		_, e := fmt.Fprintf(env.Out, "%4s  %s\n", strconv.Itoa(c.code), c.text)
		err = errors.Join(err, e)
	}
	return err
}
