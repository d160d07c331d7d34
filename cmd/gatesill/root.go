package main

import (
	"bufio"
	"cmp"
	"context"
	"fmt"
	"os"
	"os/user"
	"runtime/debug"
	"slices"
	"strconv"
	"strings"
	"sync"
	"unicode/utf8"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gatesill/acquire/table"
	"gatesill/cmd/internal/job"
	"gatesill/report"
)

// version is set by release builds.
var version = "0.1.0"

// newRoot builds the whole command tree.
func newRoot() *cobra.Command {
	env := &job.Env{}
	var color string
	root := &cobra.Command{
		Use:   "gatesill",
		Short: "Sort, match and compare power and RF MOSFETs by gate threshold and idle bias",
		Long: `Gatesill keeps the curves of power and RF MOSFETs by lot and says for each device
at which gate voltage it turns on, which gate bias gives the idle current, which
devices stand apart from their lot, into which bin each goes, and which belong
together.

A bare number is in SI base units; prefixes and units are taken everywhere:
2.2m, 2m2, 4k7, 250uA, 50mV.`,
		Example: `  gatesill demo
  gatesill import bag1 curves.csv --circuit diode
  gatesill spread bag1
  gatesill sort bag1 --width 50mV
  gatesill match bag1 --within 10mV
  gatesill report bag1 -o bag1.html`,
		SilenceUsage: true, SilenceErrors: true, SuggestionsMinimumDistance: 2,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return unknownVerb(cmd, args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
		PersistentPreRunE: func(cmd *cobra.Command, _ []string) error {
			return fillEnv(env, cmd, color)
		},
		Version: versionText(),
	}
	root.SetVersionTemplate("gatesill {{.Version}}\n")
	root.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		return job.Usage(strings.TrimSpace("gatesill help "+strings.TrimPrefix(cmd.CommandPath(), "gatesill ")), "%w", err)
	})
	p := root.PersistentFlags()
	p.StringVar(&env.Store, "store", os.Getenv("GATESILL_STORE"), "the store's `PATH` (default: GATESILL_STORE, else the user's data folder)")
	p.BoolVar(&env.JSON, "json", false, "results as one JSON object")
	p.StringVar(&color, "color", "auto", "colour: auto, always or never")
	p.BoolVarP(&env.Quiet, "quiet", "q", false, "no talk, only results, warnings and errors")
	p.BoolVarP(&env.Verbose, "verbose", "v", false, "say which store is used and what takes time")
	p.BoolVar(&env.Yes, "yes", false, "take yes for the answer where it asks whether to go on (meters --write: write over the file)")
	root.AddCommand(
		demoCmd(env), lotCmd(env), deviceCmd(env), importCmd(env), sweepCmd(env), fitCmd(env), spreadCmd(env), sortCmd(env),
		matchCmd(env), setCmd(env), biasCmd(env), compareCmd(env), gaugeCmd(env),
		planCmd(env), reportCmd(env), exportCmd(env), metersCmd(env), backupCmd(env), versionCmd(env),
	)
	root.AddCommand(processCmds()...)
	root.SetHelpCommand(helpCmd(env))
	root.InitDefaultCompletionCmd()
	for _, c := range root.Commands() {
		if c.Name() == "completion" {
			c.Args = noSuch
			c.RunE = func(*cobra.Command, []string) error {
				return job.Usage("gatesill completion bash", "completion: name a shell: bash, zsh, fish or powershell")
			}
		}
	}
	return root
}

// unknownVerb refuses a verb that does not exist, with the nearest that does.
func unknownVerb(cmd *cobra.Command, verb string) error {
	hint := "gatesill --help lists the verbs"
	if s := cmd.SuggestionsFor(verb); len(s) > 0 {
		hint = "did you mean gatesill " + s[0] + "?"
	}
	return job.Usage(hint, "no verb %q", verb)
}

// fillEnv completes the environment from terminal and flags.
func fillEnv(env *job.Env, cmd *cobra.Command, color string) error {
	env.Out, env.Err = cmd.OutOrStdout(), cmd.ErrOrStderr()
	env.Version = versionText()
	env.Who = userName()
	outTTY, errTTY := isTerminal(env.Out), isTerminal(env.Err)
	env.Progress = errTTY
	switch color {
	case "always":
		env.Color = true
	case "never":
	case "auto":
		plain := os.Getenv("NO_COLOR") != "" || os.Getenv("TERM") == "dumb"
		env.Color = outTTY && !plain
	default:
		return job.Usage("--color auto, --color always or --color never", "--color %s: no such choice", color)
	}
	if outTTY {
		if w, _, err := term.GetSize(int(os.Stdout.Fd())); err == nil {
			env.Width = w
		}
	}
	if term.IsTerminal(int(os.Stdin.Fd())) && errTTY {
		env.Ask = ask(cmd.Context(), env)
	}
	return nil
}

// ask puts a question of the reader on the terminal until it is answered with
// one of its choices, or until the job is interrupted.
func ask(ctx context.Context, env *job.Env) func(table.Question) (string, error) {
	lines := make(chan string)
	ended := make(chan error, 1)
	start := sync.OnceFunc(func() {
		go func() {
			in := bufio.NewScanner(os.Stdin)
			for in.Scan() {
				lines <- in.Text()
			}
			ended <- in.Err()
		}()
	})
	return func(q table.Question) (string, error) {
		start()
		for {
			fmt.Fprintf(env.Err, "%s\n", report.Clean(q.Text))
			if list := report.Clean(strings.Join(q.Choices, ", ")); utf8.RuneCountInString(list) > 50 {
				fmt.Fprintf(env.Err, "[%s]\n", list) // the answer starts a line of its own
			} else if list != "" {
				fmt.Fprintf(env.Err, "[%s] ", list)
			}
			if q.Default != "" {
				fmt.Fprintf(env.Err, "(Enter: %s) ", report.Clean(q.Default))
			}
			fmt.Fprint(env.Err, "? ")
			select {
			case <-ctx.Done():
				return "", ctx.Err()
			case err := <-ended:
				if err != nil {
					return "", err
				}
				return "", job.Usage("answer with "+q.Flag, "no answer")
			case line := <-lines:
				answer := cmp.Or(strings.TrimSpace(line), q.Default)
				if slices.Contains(q.Choices, answer) || answer != "" && len(q.Choices) == 0 {
					return answer, nil
				}
				if answer == "" {
					fmt.Fprintln(env.Err, "An answer is needed.")
					continue
				}
				fmt.Fprintf(env.Err, "%q is none of these.\n", report.Clean(answer))
			}
		}
	}
}

func isTerminal(w any) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

func userName() string {
	if u, err := user.Current(); err == nil && u.Username != "" {
		return u.Username
	}
	return "unknown"
}

func versionText() string {
	if b, ok := debug.ReadBuildInfo(); ok && version == "" {
		return b.Main.Version
	}
	return version
}

func versionCmd(env *job.Env) *cobra.Command {
	return &cobra.Command{
		Use: "version", Short: "Show the program's version", Args: exactly(0),
		Example: "  gatesill version",
		RunE: func(cmd *cobra.Command, _ []string) error {
			if env.JSON {
				_, err := fmt.Fprintf(env.Out, "{\"schema\":1,\"version\":%q}\n", versionText())
				return err
			}
			_, err := fmt.Fprintf(env.Out, "gatesill %s\n", versionText())
			return err
		},
	}
}

// exactly wants n arguments, and says what they are when it gets others.
func exactly(n int) cobra.PositionalArgs { return between(n, n) }

// between wants from lo to hi arguments; hi < 0 is no upper limit.
func between(lo, hi int) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) >= lo && (hi < 0 || len(args) <= hi) {
			return nil
		}
		want := fmt.Sprintf("%d to %d", lo, hi)
		switch {
		case hi < 0:
			want = fmt.Sprintf("at least %d", lo)
		case lo == hi:
			want = strconv.Itoa(lo)
		}
		return job.Usage("usage: "+cmd.UseLine(), "%s: %d given behind it, needs %s", cmd.CommandPath(), len(args), want)
	}
}

// lots completes the name of a lot, and the names of its devices behind it.
func lots(env *job.Env, devices bool) func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
	return func(cmd *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
		ctx := cmd.Context()
		if ctx == nil {
			ctx = context.Background()
		}
		switch {
		case len(args) == 0:
			return job.Names(ctx, env, ""), cobra.ShellCompDirectiveNoFileComp
		case devices:
			return job.Names(ctx, env, args[0]), cobra.ShellCompDirectiveNoFileComp
		}
		return nil, cobra.ShellCompDirectiveDefault
	}
}
