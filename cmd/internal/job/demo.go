package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"gatesill/acquire"
	"gatesill/acquire/rehearsal"
	"gatesill/acquire/table"
	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

// demoMark is the file by which the demo knows a folder as its own.
const demoMark = "made-by-gatesill-demo.txt"

// Demo does the whole job on two invented lots: one is measured on a simulated
// bench, the other imported from files; then spread, sort, report, export. The devices, their faults and the
// meters are invented; nothing in it was measured.
//
// A workshop builds a 30 W beacon amplifier. Lot 'spring' is what the bias
// network was designed on; lot 'autumn' came from another dealer.
func Demo(ctx context.Context, env *Env, dir string) error {
	if err := demoFolder(dir); err != nil {
		return err
	}
	env.Store, env.JSON = filepath.Join(dir, "lots.db"), false // what it shows is for people
	d := &demo{env: env, dir: dir, rng: rand.New(rand.NewPCG(7, 2026))}
	for _, step := range []func(context.Context) error{d.files, d.spring, d.autumn} {
		if err := step(ctx); err != nil {
			return err
		}
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	d.next()
	return nil
}

// demoFolder makes the folder, or empties one that an earlier demo made. It
// touches no folder with anything else in it.
func demoFolder(dir string) error {
	entries, err := os.ReadDir(dir)
	switch {
	case errors.Is(err, os.ErrNotExist):
	case err != nil:
		return failed("--out DIR names another folder", "%w", err)
	case len(entries) > 0 && !slices.ContainsFunc(entries, func(e os.DirEntry) bool { return e.Name() == demoMark }):
		return failed("--out DIR names another folder", "%s is not empty, and no earlier demo made it", dir)
	}
	for _, e := range entries {
		if err := os.RemoveAll(filepath.Join(dir, e.Name())); err != nil {
			return failed("", "%w", err)
		}
	}
	if err := os.MkdirAll(filepath.Join(dir, "curves"), 0o755); err != nil {
		return failed("--out DIR names another folder", "%w", err)
	}
	text := "Everything here was made by gatesill demo, from invented devices. It is emptied when the demo runs again.\n"
	return os.WriteFile(filepath.Join(dir, demoMark), []byte(text), 0o644)
}

// demo carries what the steps of the demo share.
type demo struct {
	env *Env
	dir string
	rng *rand.Rand
}

// say prints what happens next, as a command that can be typed.
func (d *demo) say(format string, args ...any) {
	d.env.talk("\n$ gatesill --store %s "+format, append([]any{Quote(d.env.Store)}, args...)...)
}

// demoDevice is one invented device and what is wrong with it.
type demoDevice struct {
	name  string
	model fit.Model
	leak  float64 // A from drain to source
	open  bool
}

// lot draws n devices: threshold and gain with the spread of an ordinary lot.
func (d *demo) lot(prefix string, n int, vt, sd float64) []demoDevice {
	out := make([]demoDevice, n)
	for i := range out {
		out[i] = demoDevice{name: fmt.Sprintf("%s%02d", prefix, i+1), model: fit.Model{
			Vt: vt + sd*d.rng.NormFloat64(), Beta: 3.4 * (1 + 0.04*d.rng.NormFloat64()), N: 1.6, Theta: 0.12, Lambda: 0.008,
		}}
	}
	return out
}

// The circuit of the demo's bench.
const (
	demoRL  = 15.0 // ohm
	demoVDD = 13.8 // V
)

// meter shows x as a handheld of so many counts does on its best range: noise
// of half a count, then rounding.
func (d *demo) meter(x float64, counts float64, tops ...float64) string {
	for _, top := range tops {
		step := math.Pow(10, math.Ceil(math.Log10(top/counts)-1e-9))
		shown := x + step/2*d.rng.NormFloat64()
		if math.Abs(shown) <= top || top == tops[len(tops)-1] {
			digits := max(0, int(math.Round(-math.Log10(step))))
			return fmt.Sprintf("%.*f", digits, math.Round(shown/step)*step)
		}
	}
	return ""
}

// gates are the gate voltages of one hand-turned sweep: steps of about 20 mV.
func (d *demo) gates(from, to float64) []float64 {
	var out []float64
	for v := from; v < to; v += 0.02 + 0.006*(d.rng.Float64()-0.5) {
		out = append(out, v)
	}
	return out
}

// drain gives the current of the device at a gate voltage.
func (t demoDevice) drain(vg float64) float64 {
	if t.open {
		return 0
	}
	return min(t.model.Solve(vg, demoVDD, demoRL)+t.leak, demoVDD/demoRL)
}

// files writes the curve files of lot autumn, one per device.
func (d *demo) files(context.Context) error {
	d.env.talk("Two invented lots of the invented part GX-30, 15 ohm from 13.8 V; nothing here was measured.")
	lot := d.lot("A", 30, 3.01, 0.06)
	for _, i := range []int{3, 11, 17, 26} { // another die at about the same threshold
		lot[i].model.Beta *= 0.5
	}
	lot[8].leak = 0.9e-3
	lot[20].open = true
	lot[23].model.Vt += 0.62
	for _, t := range lot {
		var b strings.Builder
		fmt.Fprintf(&b, "# device: %s\n# RL = 15 ohm, VDD = 13.8 V, 24 C ambient\nVgs (V),Id (mA),V_RL (V)\n", t.name)
		for _, vg := range d.gates(0, 0.021) {
			fmt.Fprintf(&b, "%s,%s,%s\n", d.meter(vg, 6000, 6), d.meter(1e3*t.drain(vg), 6000, 60, 600), d.meter(demoRL*t.drain(vg), 6000, 6, 60))
		}
		top := 3.95
		if t.open {
			top = 4.9 // turned on further, as nothing came
		}
		for _, vg := range d.gates(2.6, top) {
			id := t.drain(vg)
			fmt.Fprintf(&b, "%s,%s,%s\n", d.meter(vg, 6000, 6), d.meter(id*1e3, 6000, 60, 600, 6000), d.meter(id*demoRL, 6000, 6, 60))
		}
		if err := os.WriteFile(filepath.Join(d.dir, "curves", t.name+".csv"), []byte(b.String()), 0o644); err != nil {
			return err
		}
	}
	return nil
}

// springFile writes the curves of lot spring as one long table with semicolons and
// decimal commas.
func (d *demo) springFile(path string, lot []demoDevice) error {
	var long strings.Builder
	long.WriteString("# Steckbrett, 15 Ohm an 13,8 V, 24 °C\nBauteil;U_GS [V];I_D [mA];U_L [V]\n")
	for _, t := range lot {
		for _, vg := range d.gates(2.55, 3.75) {
			id := t.drain(vg)
			row := []string{t.name, d.meter(vg, 6000, 6), d.meter(id*1e3, 6000, 60, 600, 6000), d.meter(id*demoRL, 6000, 6, 60)}
			for i := 1; i < len(row); i++ {
				row[i] = strings.Replace(row[i], ".", ",", 1)
			}
			long.WriteString(strings.Join(row, ";") + "\n")
		}
	}
	return os.WriteFile(path, []byte(long.String()), 0o644)
}

// given are the conditions of the demo's bench, as flags give them.
func (d *demo) given() table.Options {
	return table.Options{Given: record.Condition{
		Circuit: record.Load, RL: record.Known(demoRL), RLTol: record.Known(0.01), VDD: record.Known(demoVDD), Temp: record.Known(24), TempOf: "ambient", Ammeter: "drain",
	}}
}

const demoFlags = "--circuit load --rl 15 --rl-tol 1% --vdd 13.8V --temp 24C --temp-of ambient --ammeter drain"

// quietly runs f without the talk that its step does not need.
func (d *demo) quietly(f func(*Env) error) error {
	quiet := *d.env
	quiet.Out, quiet.Quiet, quiet.JSON = io.Discard, true, false
	return f(&quiet)
}

func (d *demo) spring(ctx context.Context) error {
	part, test, idle := "GX-30", record.Known(10e-3), record.Known(0.25)
	lo, hi, vds := record.Known(2), record.Known(4), record.Known(13.8)
	guard := record.Amount{Value: 2, Unit: "u"}
	supplier, sampled := "first dealer", "all of the bag"
	d.say("lot add spring --part GX-30 --test-current 10mA --idle-current 250mA --test-vds 13.8V --vgsth-min 2 --vgsth-max 4 --guard 2u --supplier 'first dealer' --sampled 'all of the bag'")
	if err := LotAdd(ctx, d.env, "spring", LotEdit{Part: &part, TestCurrent: &test, IdleCurrent: &idle, TestVDS: &vds, VgsthMin: &lo, VgsthMax: &hi, Guard: &guard, Supplier: &supplier, Sampled: &sampled}); err != nil {
		return err
	}
	lot := d.lot("S", 5, 2.92, 0.055)
	if err := d.measure(ctx, lot); err != nil {
		return err
	}
	d.say("spread spring")
	if err := Spread(ctx, d.env, "spring", SheetOptions{Method: "auto"}, false); err != nil {
		return err
	}
	return d.report(ctx, "spring")
}

// measure takes lot spring through the simulated bench, in real time; where there
// are no pseudo-terminals it imports a file instead.
func (d *demo) measure(ctx context.Context, lot []demoDevice) error {
	c, err := rehearsal.Standard(rehearsal.Quick)
	if err != nil {
		return err
	}
	c.RL, c.VDD, c.Devices = demoRL, demoVDD, nil
	rq := SweepRequest{
		Lot: "spring", Mode: acquire.Driven, Rehearsal: true, Simulated: &c,
		From: record.Known(2.55), Step: record.Known(0.05), Given: record.Condition{Temp: record.Known(24), TempOf: "ambient"},
	}
	for _, t := range lot {
		rq.Devices = append(rq.Devices, t.name)
		c.Devices = append(c.Devices, rehearsal.Device{
			Name: t.name, Vt: t.model.Vt, Beta: t.model.Beta, N: t.model.N, Theta: t.model.Theta, Lambda: t.model.Lambda,
			Kappa: 4e-3, Alpha: 1.7, Rth: 1.5, Tau: 20,
		})
	}
	d.say("sweep spring %s --rehearsal --drive --from 2.55 --step 50mV --temp 24C", strings.Join(rq.Devices, " "))
	err = Sweep(ctx, d.env, rq)
	if !errors.Is(err, rehearsal.ErrNoTerminals) {
		return err
	}
	file := filepath.Join(d.dir, "curves", "spring.csv")
	d.env.talk("this system has no pseudo-terminals for a simulated bench: a file instead")
	if err := d.springFile(file, lot); err != nil {
		return err
	}
	d.say("import spring %s %s", Quote(file), demoFlags)
	return Import(ctx, d.env, ImportRequest{Lot: "spring", Files: []string{file}, Table: d.given()})
}

func (d *demo) autumn(ctx context.Context) error {
	part, supplier, sampled := "GX-30", "second dealer", "all of the bag"
	d.say("lot add autumn --part GX-30 --supplier 'second dealer' --sampled 'all of the bag'")
	if err := LotAdd(ctx, d.env, "autumn", LotEdit{Part: &part, Supplier: &supplier, Sampled: &sampled}); err != nil {
		return err
	}
	files, err := filepath.Glob(filepath.Join(d.dir, "curves", "A*.csv"))
	if err != nil {
		return err
	}
	d.say("import autumn %s %s", filepath.Join(d.dir, "curves", "A*.csv"), demoFlags)
	if err := d.quietly(func(env *Env) error {
		return Import(ctx, env, ImportRequest{Lot: "autumn", Files: files, Table: d.given()})
	}); err != nil {
		return err
	}
	d.env.talk("%d files stored", len(files))
	d.say("spread autumn")
	if err := Spread(ctx, d.env, "autumn", SheetOptions{Method: "auto"}, false); err != nil {
		return err
	}
	d.say("sort autumn --width 50mV")
	if err := Sort(ctx, d.env, "autumn", SheetOptions{Method: "auto"}, SortRequest{Width: "50mV"}); err != nil {
		return err
	}
	return d.report(ctx, "autumn")
}

func (d *demo) report(ctx context.Context, lot string) error {
	for _, out := range []struct {
		verb, file string
		write      func(string) error
	}{
		{"report", lot + ".html", func(p string) error {
			return Report(ctx, d.env, lot, p, "", SheetOptions{Method: "auto"}, CompareRequest{})
		}},
		{"export", lot + ".csv", func(p string) error { return Export(ctx, d.env, lot, p, false, SheetOptions{Method: "auto"}) }},
	} {
		path := filepath.Join(d.dir, out.file)
		d.say("%s %s -o %s", out.verb, lot, Quote(path))
		if err := out.write(path); err != nil {
			return err
		}
	}
	return nil
}

// next says what to try now.
func (d *demo) next() {
	s := Quote(d.env.Store)
	d.env.talk(`
Look at %s in a browser, then try:
  gatesill --store %s device show A09 --lot autumn
  gatesill --store %s device exclude A21 --lot autumn --reason 'open'
  gatesill --store %s sort spring --by vgsth --bins 3
  gatesill import bag1 YOUR-FILE.csv --dry-run
(go install ./cmd/gatesill puts gatesill on your path; until then type go run ./cmd/gatesill in its place.)`, report.Clean(filepath.Join(d.dir, "autumn.html")), s, s, s)
}
