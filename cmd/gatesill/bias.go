package main

import (
	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
)

func biasCmd(env *job.Env) *cobra.Command {
	var o job.SheetOptions
	var rq job.BiasRequest
	cmd := &cobra.Command{
		Use: "bias LOT", Short: "Gate bias for an idle current: dividers, trimmers, devices on one line",
		Long: `Shows the gate voltage of each device at the idle current, what a divider gives,
how much of the lot that serves, and which resistors would serve it better.

  8 V --[ top ]--+-- gate          8 V --[ top ]--[ trimmer ]--[ bottom ]-- 0 V
                 |                                     |
                 +--[ bottom ]-- 0 V                   +-- gate (wiper)

With --trimmer-in bottom the trimmer is a variable resistor between bottom and 0 V.
Voltages are against the source, negative ones with a negative supply. With --top or
--bottom alone the other one is chosen. --parallel D1,D2 shows what devices on one
gate line share of a total current; it may be given several times.`,
		Example: `  gatesill bias 2612 --idle 250mA
  gatesill bias 2612 --idle 250mA --supply 8V --supply-tol 4% --top 1.96k --bottom 1.2k
  gatesill bias 2612 --idle 250mA --gate-low 2.90V --gate-high 3.25V --reference 2431
  gatesill bias amps --parallel P01,P02 --source-resistor 0.1 --vds 28V --total 500mA`,
		Args: exactly(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return job.Bias(cmd.Context(), env, args[0], o, rq)
		},
		ValidArgsFunction: lots(env, false),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	num(fs, &rq.Idle, "idle", "A", "idle current wanted (default: the part's)")
	num(fs, &rq.Supply, "supply", "V", "supply of the divider")
	fs.Var(shareFlag{&rq.SupplyTol}, "supply-tol", "tolerance of the supply: 4%")
	num(fs, &rq.Top, "top", "ohm", "resistor from supply to gate")
	num(fs, &rq.Bottom, "bottom", "ohm", "resistor from gate to 0 V")
	num(fs, &rq.Trimmer, "trimmer", "ohm", "trimmer from end to end")
	fs.Var(choice{&rq.TrimmerIn, []string{"gate", "bottom"}}, "trimmer-in", "wiper on the gate between top and bottom (default), or in series with bottom")
	fs.Var(shareFlag{&rq.ResistorTol}, "resistor-tol", "tolerance of top and bottom: 1%")
	fs.Var(shareFlag{&rq.TrimmerTol}, "trimmer-tol", "tolerance of the trimmer (default 10%)")
	num(fs, &rq.Turns, "turns", "", "turns of the trimmer from end to end, for its settings")
	num(fs, &rq.GateLow, "gate-low", "V", "reach of a trimmer known in volts: its lower end")
	num(fs, &rq.GateHigh, "gate-high", "V", "and its upper end")
	fs.Var(shareFlag{&rq.IdleTol}, "idle-tol", "how far the idle current may be off with a fixed divider: 20%")
	fs.StringSliceVar(&rq.Series, "series", nil, "of the resistors: `E12,E24,E48,E96,E192` (default E24,E96)")
	fs.StringVar(&rq.Width, "width", "", "width of the bins, as in sort: `50mV`")
	fs.StringVar(&rq.Reference, "reference", "", "`LOT` that the network was made for")
	num(fs, &rq.Beta, "beta", "A/V2", "gain factor of devices whose curves were not measured")
	num(fs, &rq.Tempco, "tempco", "V/K", "change of the gate voltage with temperature: -4mV/K")
	fs.StringArrayVar(&rq.Parallel, "parallel", nil, "devices on one gate line: `D1,D2,...`")
	num(fs, &rq.Total, "total", "A", "current of the line (default: the idle current of each)")
	num(fs, &rq.Source, "source-resistor", "ohm", "in each source")
	num(fs, &rq.VDS, "vds", "V", "drain voltage, for the dissipation")
	num(fs, &rq.Rth, "rth", "K/W", "from each device to the heat sink (default: the part's, to its case)")
	num(fs, &rq.Sink, "sink", "degC", "heat sink when warm (default: the temperature of the readings)")
	fs.StringVarP(&rq.Page, "output", "o", "", "also write it as one HTML page to print: `FILE.html`")
	if err := cmd.RegisterFlagCompletionFunc("reference", lots(env, false)); err != nil {
		panic(err) // the flag is not there
	}
	return cmd
}
