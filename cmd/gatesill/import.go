package main

import (
	"fmt"
	"maps"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

func importCmd(env *job.Env) *cobra.Command {
	var rq job.ImportRequest
	var columns, units, logs, times []string
	var circuit, ammeter, tempOf, channel string
	g := &rq.Table.Given
	cmd := &cobra.Command{
		Use: "import LOT FILE...", Short: "Read curves or spot lists from files into a lot",
		Long: `Reads CSV and other text tables into a lot: one long table with a device column,
one gate column with a column per device, one file per device, or a list of V_GS
at one current. Delimiter, decimal mark, units and columns are found once per
file and printed; what stays open is a question on a terminal, and in a script
the file is refused with a hint. Each file is stored whole or not at all. - is
stdin.

Without --circuit only constant-current values can be had.
A file with a lot column gives LOT its own rows.

With --meter-logs no FILE is named: logs that were recorded meter by meter are
brought to one time and made into curves. Their clocks may differ, and what the
readings tell of that is corrected and printed. A file of notes with times
("10:02:03 device D7 in", "10:09 removed") says which device was measured when;
without one it is --device NAME, or the devices are numbered where the gate comes
back to off.`,
		Example: `  gatesill import bag1 curves.csv --circuit load --rl 10 --vdd 12V
  gatesill import bag1 D*.csv --circuit diode --temp 25C --bench attic.toml
  gatesill import bag2 list.csv --spot-current 10mA --units vg=V
  gatesill import bag3 odd.txt --map vg=2,id=U_R --decimal comma --dry-run
  gatesill import bag4 --meter-logs gate=vg.csv,current=id.csv,load=vl.txt,notes=notes.txt \
    --circuit load --rl 10 --vdd 12V`,
		Args: between(1, -1),
		RunE: func(cmd *cobra.Command, args []string) error {
			rq.Lot, rq.Files, rq.Stdin = args[0], args[1:], cmd.InOrStdin()
			g.Circuit, g.Ammeter, g.TempOf, rq.Channel = record.Circuit(circuit), ammeter, tempOf, record.Channel(channel)
			rq.Table.SpotCurrent = g.SpotCurrent
			if d := rq.Table.Delimiter; d != "" && !slices.Contains(delimiters, d) && utf8.RuneCountInString(d) != 1 {
				return job.Usage("--delimiter semicolon", "--delimiter %s: neither one of %s nor a single sign", d, strings.Join(delimiters, ", "))
			}
			if x, ok := g.Temp.Get(); ok && x < -273.15 {
				return job.Usage("--temp 25C", "--temp: %g degC is below the absolute zero", x)
			}
			var err error
			if rq.Table.Map, err = pairs("map", "vg=COLUMN,id=COLUMN", columns, aColumn); err != nil {
				return err
			}
			if rq.Table.Units, err = pairs("units", "vg=V,id=mA", units, aColumn); err != nil {
				return err
			}
			if err := checkUnits(rq.Table.Units); err != nil {
				return err
			}
			if x, ok := g.RL.Get(); ok && x <= 0 {
				return job.Usage("--rl 10", "--rl: %g ohm, must be above 0", x)
			}
			if rq.MeterLogs, err = pairs("meter-logs", "gate=FILE,current=FILE,load=FILE,notes=FILE", logs, aRole); err != nil {
				return err
			}
			if rq.LogTimes, err = pairs("log-times", "current=elapsed", times, aRole); err != nil {
				return err
			}
			if err := checkLogs(&rq); err != nil {
				return err
			}
			return job.Import(cmd.Context(), env, rq)
		},
		ValidArgsFunction: lots(env, false),
	}
	fs := cmd.Flags()
	fs.SortFlags = false
	fs.Var(choice{&circuit, []string{"load", "diode", "fixed"}}, "circuit", "drain fed through R_L, tied to the gate, or held")
	num(fs, &g.RL, "rl", "ohm", "load resistor")
	fs.Var(shareFlag{&g.RLTol}, "rl-tol", "tolerance of the load resistor: 1%")
	num(fs, &g.VDD, "vdd", "V", "supply voltage")
	num(fs, &g.VDS, "vds", "V", "drain voltage, where it is held")
	num(fs, &g.Temp, "temp", "degC", "temperature: 25C")
	fs.Var(choice{&tempOf, []string{"ambient", "sink", "case"}}, "temp-of", "what has that temperature")
	fs.Var(choice{&ammeter, []string{"drain", "source", "none"}}, "ammeter", "where the ammeter sits")
	fs.StringSliceVar(&columns, "map", nil, "columns by header or number: `vg=COLUMN,id=COLUMN,device=COLUMN`")
	fs.StringSliceVar(&units, "units", nil, "units of columns: `vg=V,id=mA`")
	fs.Var(choice{&rq.Table.Decimal, []string{"point", "comma"}}, "decimal", "decimal mark")
	fs.StringVar(&rq.Table.Delimiter, "delimiter", "", "comma, semicolon, tab, pipe, blank or the `SIGN` itself")
	fs.Var(choice{&rq.Table.Encoding, []string{"utf-8", "utf-16", "windows-1252"}}, "encoding", "text encoding")
	num(fs, &g.SpotCurrent, "spot-current", "A", "current of a list of V_GS: 10mA")
	fs.StringVar(&rq.Table.LotColumn, "lot-column", "", "column that names the lot: only the rows of LOT are taken")
	fs.Var(choice{&channel, []string{"n", "p"}}, "channel", "channel of the lot's part")
	fs.StringVar(&rq.Operator, "operator", "", "`NAME` of who measured")
	fs.StringVar(&rq.Fixture, "fixture", "", "`NAME` of the fixture")
	fs.StringVar(&rq.Session, "session", "", "`NAME` of the sitting")
	fs.StringVar(&rq.Bench, "bench", "", "bench `FILE` with meters, accuracy and circuit (gatesill help bench-file)")
	fs.StringSliceVar(&logs, "meter-logs", nil, "logs of single meters, instead of files: `gate=FILE,current=FILE,load=FILE,drain=FILE,notes=FILE`")
	fs.StringVar(&rq.Device, "device", "", "`NAME` of the one device in the meter logs")
	fs.StringSliceVar(&times, "log-times", nil, "what times of a log are: `current=elapsed`, =clock, when elapsed 0 was, or the role whose clock counts")
	fs.StringVar(&rq.LogZone, "log-zone", "", "`ZONE` of times without one in the meter logs: +02:00")
	fs.StringVar(&rq.LogDate, "log-date", "", "`DATE` of the first time of day in the meter logs: YYYY-MM-DD")
	fs.BoolVar(&rq.Table.Strict, "strict", false, "refuse a file with any row refused")
	fs.BoolVar(&rq.DryRun, "dry-run", false, "only tell what would be read")
	fs.BoolVar(&rq.Again, "again", false, "read a file again that was imported before")
	return cmd
}

// delimiters are the names that --delimiter takes.
var delimiters = []string{"comma", "semicolon", "tab", "pipe", "blank"}

// quantities are the columns of numbers by their names in --map and --units,
// with their units; vgs and vds are taken for vg and vd.
var quantities = map[string]string{
	"vg": "V", "vgs": "V", "id": "A", "vl": "V", "vd": "V", "vds": "V", "vdd": "V", "ig": "A", "gm": "S", "temp": "degC", "t": "s", "rl": "ohm",
}

// texts are the columns of other things by their names in --map.
var texts = []string{
	"device", "lot", "package", "side", "date", "operator", "fixture", "date-code", "marking", "tube", "note", "sweep", "ignore",
}

// checkUnits wants units of the quantity they are given for.
func checkUnits(units map[string]string) error {
	for name, unit := range units {
		want, ok := quantities[name]
		if !ok {
			return job.Usage("--units vg=V,id=mA", "--units: %q is no quantity; there are %s", name, strings.Join(slices.Sorted(maps.Keys(quantities)), ", "))
		}
		if _, written, err := record.SplitUnit(unit, want); err != nil || !written {
			return job.Usage("--units vg=V,id=mA", "--units: %s=%s: want a unit of %s", name, unit, want)
		}
	}
	return nil
}

// aColumn says what is wrong with the name of a column.
func aColumn(name string) string {
	if _, number := quantities[name]; number || slices.Contains(texts, name) {
		return ""
	}
	return fmt.Sprintf("nothing is called %q; there are %s and %s", name, strings.Join(slices.Sorted(maps.Keys(quantities)), ", "), strings.Join(texts, ", "))
}

// pairs reads name=value words of a flag; wrong says what is wrong with a name.
func pairs(flag, example string, words []string, wrong func(name string) string) (map[string]string, error) {
	if len(words) == 0 {
		return nil, nil
	}
	out := map[string]string{}
	for _, w := range words {
		k, v, ok := strings.Cut(w, "=")
		k, v = strings.ToLower(strings.TrimSpace(k)), strings.TrimSpace(v)
		if !ok || k == "" || v == "" {
			return nil, job.Usage("--"+flag+" "+example, "--%s: %q is not of the form NAME=VALUE", flag, w)
		}
		if why := wrong(k); why != "" {
			return nil, job.Usage("--"+flag+" "+example, "--%s: %s", flag, why)
		}
		if _, twice := out[k]; twice {
			return nil, job.Usage("--"+flag+" "+example, "--%s: %s is given twice", flag, k)
		}
		out[k] = v
	}
	return out, nil
}
