package main

import (
	"bufio"
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"gatesill/acquire"
	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

// faultsOf reads the faults of a simulated bench.
func faultsOf(texts []string, rehearsal bool) ([]job.Fault, error) {
	if len(texts) > 0 && !rehearsal {
		return nil, job.Usage("--rehearsal --fault "+texts[0], "--fault: only a simulated bench can have faults on order")
	}
	var out []job.Fault
	for _, t := range texts {
		f, err := job.ParseFault(t)
		if err != nil {
			return nil, err
		}
		out = append(out, f)
	}
	return out, nil
}

// faultTexts lists the faults, one a line.
func faultTexts() string {
	var t strings.Builder
	for _, k := range job.FaultKinds() {
		fmt.Fprintf(&t, "  %-12s %s\n", k.Kind, k.Text)
	}
	return t.String()
}

func sweepCmd(env *job.Env) *cobra.Command {
	var rq job.SweepRequest
	var byHand, free, drive, spot bool
	var settle, tempOf string
	var faults []string
	cmd := &cobra.Command{
		Use: "sweep LOT [DEVICE...]", Short: "Measure devices with the meters of a bench",
		Long: `Reads the meters of a bench file, leads one device after the other through a
sweep, and keeps every reading. Before the first device the bench is checked:
zeros with nothing inserted, then one known change, which shows whether each
meter sits where the bench file says.

By hand (--by-hand) the next gate voltage is said, and the point taken once all
stands still; --free follows the knob as it is turned; --drive sets a
programmable supply, which needs limits for V_GS, I_D and P_D and is guarded by
a process of its own; --spot reads V_GS at one current (--at), once it has
settled. After every sweep a point at low power is taken again.

Meters without a lead are read by you: line = "keyboard" in the bench file, and
what they show is typed, one line a point.

A session that a crash or a power cut ended goes on at the same device.

keys: space or Enter take or go on, f finish, u take the last point back, r
repeat, k skip, p put a lost prefix right, s stop, q end the session.

On the simulated bench of --rehearsal, --fault lets something go wrong, to see what
happens then: --fault silence:current@3 is 3 s after the first sweep has begun,
unplug:load@3+2 is back 2 s later, swapped:gate,current@start is there from before
the checks. Roles are those of the bench and, where it is driven, supply-gate and
supply-drain. The faults:

` + faultTexts() + `
The program warns and helps; a current limit, a series resistor and a bleed
resistor at the gate protect.`,
		Example: `  gatesill sweep bag1 --rehearsal --drive
  gatesill sweep bag1 D1 D2 D3 --bench attic.toml --by-hand
  gatesill sweep bag1 --bench attic.toml --drive --from 2.5 --to 3.6 --step 25mV
  gatesill sweep bag1 --bench jig.toml --spot --at 10mA --settle 10s
  gatesill sweep bag1 --rehearsal --drive --fault unplug:current@4`,
		Args: between(1, -1),
		RunE: func(cmd *cobra.Command, args []string) error {
			rq.Lot, rq.Devices = args[0], args[1:]
			n := 0
			for _, m := range []struct {
				on   bool
				mode acquire.Mode
			}{{byHand, acquire.ByHand}, {free, acquire.Free}, {drive, acquire.Driven}, {spot, acquire.AtSpot}} {
				if m.on {
					rq.Mode, n = m.mode, n+1
				}
			}
			if n > 1 {
				return job.Usage("leave all but one of them out", "--by-hand, --free, --drive and --spot exclude each other")
			}
			if n == 0 {
				rq.Mode = acquire.ByHand
			}
			if rq.At.IsKnown() && rq.Mode != acquire.AtSpot {
				return job.Usage("gatesill sweep LOT --spot --at 10mA", "--at: the current of a spot; a sweep goes through all currents")
			}
			if (rq.Bench == "") == !rq.Rehearsal {
				return job.Usage("--bench FILE names the bench (gatesill meters --write FILE makes one), --rehearsal needs no hardware",
					"sweep: one of --bench and --rehearsal")
			}
			var err error
			if rq.Faults, err = faultsOf(faults, rq.Rehearsal); err != nil {
				return err
			}
			if rq.FindLag && rq.Mode == acquire.Driven {
				return job.Usage("leave one of them out", "--find-lag needs a hand at the knob; where a supply sets the gate all stands still, and no lag matters")
			}
			if settle != "" && settle != "auto" {
				x, err := record.ParseNumber(settle, "s")
				if err != nil {
					return job.Usage("--settle auto or --settle 10s", "--settle: %w", err)
				}
				rq.Settle = record.Known(x)
			}
			rq.Given.TempOf = tempOf
			if tempOf == "" && rq.Given.Temp.IsKnown() {
				rq.Given.TempOf = "ambient"
			}
			rq.Input = bufio.NewReader(cmd.InOrStdin())
			rq.Keyboard, rq.Size, rq.Raw = keyboard, terminalSize, returning{cmd.ErrOrStderr()}
			return job.Sweep(cmd.Context(), env, rq)
		},
		ValidArgsFunction: lots(env, true),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.StringVar(&rq.Bench, "bench", "", "bench `FILE` with meters, supplies, circuit and limits (gatesill help bench-file)")
	fs.BoolVar(&rq.Rehearsal, "rehearsal", false, "a simulated bench: no hardware is needed, and nothing it says was measured")
	fs.BoolVar(&byHand, "by-hand", false, "in steps by hand (default)")
	fs.BoolVar(&free, "free", false, "follow the knob")
	fs.BoolVar(&drive, "drive", false, "set the gate by a programmable supply")
	fs.BoolVar(&spot, "spot", false, "V_GS at one current")
	fs.StringArrayVar(&faults, "fault", nil, "with --rehearsal: `KIND:ROLE[@SECONDS][+SECONDS]` goes wrong; may be repeated")
	num(fs, &rq.From, "from", "V", "gate voltage to begin at")
	num(fs, &rq.To, "to", "V", "gate voltage to end at")
	num(fs, &rq.Step, "step", "V", "step of the gate voltage: 25mV")
	num(fs, &rq.At, "at", "A", "current of a spot: 10mA")
	fs.StringVar(&settle, "settle", "auto", "wait before a point: `auto` until it stands still, or the same time for every device: 10s")
	num(fs, &rq.Given.Temp, "temp", "degC", "temperature: 25C")
	fs.Var(choice{&tempOf, []string{"ambient", "sink", "case"}}, "temp-of", "what has that temperature (default ambient)")
	fs.StringVar(&rq.Operator, "operator", "", "`NAME` of who measures")
	fs.StringVar(&rq.Fixture, "fixture", "", "`NAME` of the fixture")
	fs.StringVar(&rq.Session, "session", "", "`NAME` of the sitting")
	fs.BoolVar(&rq.FindLag, "find-lag", false, "with the first device, find by how much the meters lag behind the gate's: one slow ramp up and one down at low power")
	fs.StringVar(&rq.SkipChecks, "skip-checks", "", "do not check the bench first; the `REASON` is kept")
	return cmd
}
