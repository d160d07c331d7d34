package job

import (
	"context"
	"errors"
	"io"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/bias"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/page"
	"gatesill/store/record"
)

// BiasRequest is what is asked of the bias of a lot. Numbers that were not given are
// unknown.
type BiasRequest struct {
	Idle        record.Num // A; unknown: the part's
	Supply      record.Num // V
	SupplyTol   record.Num // relative
	Top         record.Num // ohm
	Bottom      record.Num
	Trimmer     record.Num
	TrimmerIn   string     // "gate", "bottom"
	ResistorTol record.Num // relative
	TrimmerTol  record.Num
	GateLow     record.Num // V, reach of a trimmer known in volts only
	GateHigh    record.Num
	IdleTol     record.Num // relative
	Turns       record.Num
	Series      []string
	Beta        record.Num // A/V²
	Tempco      record.Num // V/K
	Width       string     // of the bins
	Reference   string     // lot; "": none

	Parallel []string   // devices on one line, joined by commas, one text a line
	Total    record.Num // A, of a line; unknown: the idle current of each
	Source   record.Num // ohm, in each source
	VDS      record.Num // V
	Rth      record.Num // K/W; unknown: the part's
	Sink     record.Num // °C

	Page string // file for the page of the bias; "": none
}

// usualTrimmerTol is the tolerance of a trimmer that was not given (common practice, no
// source). It is said where it is used.
const usualTrimmerTol = 0.1

// Bias shows the gate bias of a lot and what a network makes of it.
func Bias(ctx context.Context, env *Env, name string, o SheetOptions, rq BiasRequest) error {
	if err := rq.check(name); err != nil {
		return err
	}
	if rq.Page == "-" && env.JSON {
		return Usage("--output FILE.html", "--output -: stdout takes one thing at a time")
	}
	o.Idle = rq.Idle
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	if !(s.IdleCurrent > 0) {
		return failed("--idle 250mA, or gatesill lot edit "+Quote(name)+" --idle-current 250mA", "lot %q has no idle current", name)
	}
	b := report.Bias{Sheet: &s}
	if w, ok := unlike(&s); ok {
		b.Warnings = append(b.Warnings, w)
	}
	opt, err := rq.options(env, &s, &b)
	if err != nil {
		return err
	}
	if b.Plan, err = rq.plan(&s, opt); err != nil {
		return err
	}
	if len(rq.Parallel) > 0 {
		for _, list := range rq.Parallel {
			l, err := rq.line(&s, b.Plan, strings.Split(list, ","))
			if err != nil {
				return err
			}
			b.Lines = append(b.Lines, l)
		}
	} else {
		b.Extremes = b.Plan.ExtremeLine(rq.lineOptions(&s, b.Plan, 0))
	}
	if err := rq.bins(env, &s, b.Plan); err != nil {
		return err
	}
	if rq.Reference != "" {
		if err := rq.against(ctx, env, &s, &b, o, opt); err != nil {
			return err
		}
	}
	if err := env.sheetPage(rq.Page, "the gate bias", func(w io.Writer) error { return page.WriteBias(w, b) }); err != nil {
		return err
	}
	if env.JSON {
		env.tellWarnings(b.Warnings)
		return report.BiasJSON(env.Out, b)
	}
	if rq.Page == "-" {
		return nil
	}
	return report.BiasTable(env.Out, b, env.style())
}

// check says what is wrong with the request before anything is read.
func (rq *BiasRequest) check(name string) error {
	if x, ok := rq.Idle.Get(); ok && !(x > 0) {
		return Usage("--idle 250mA", "--idle: a current of %g A, must be above 0 (a magnitude, also for a p-channel part)", x)
	}
	for _, f := range []struct {
		flag string
		x    record.Num
		unit string
	}{
		{"--top", rq.Top, "Ω"}, {"--bottom", rq.Bottom, "Ω"}, {"--trimmer", rq.Trimmer, "Ω"}, {"--total", rq.Total, "A"},
		{"--rth", rq.Rth, "K/W"}, {"--beta", rq.Beta, "A/V²"}, {"--turns", rq.Turns, ""},
	} {
		if x, ok := f.x.Get(); ok && !(x > 0) {
			return Usage("gatesill help bias", "%s: %s, must be above 0", f.flag, strings.TrimSpace(report.FormatGiven(x, f.unit)))
		}
	}
	if x, ok := rq.Source.Get(); ok && x < 0 {
		return Usage("--source-resistor 0.1", "--source-resistor: %g Ω, must be 0 or above", x)
	}
	if t, ok := rq.Tempco.Get(); ok && math.Abs(t) > greatestTempco {
		return Usage("--tempco -4mV/K", "--tempco: %g V/K is more than any gate voltage moves; -4 mV/K is written -4mV/K", t)
	}
	parts := rq.Top.IsKnown() || rq.Bottom.IsKnown() || rq.Trimmer.IsKnown()
	low, high := rq.GateLow.IsKnown(), rq.GateHigh.IsKnown()
	switch {
	case low != high:
		return Usage("--gate-low 2.90V --gate-high 3.25V", "--gate-low and --gate-high belong together: the reach of a trimmer has two ends")
	case low && parts:
		return Usage("leave out either the resistors or the reach", "the reach of a trimmer is given in volts and as resistors")
	case low && !(rq.GateLow.Float() < rq.GateHigh.Float()):
		return Usage("--gate-low 2.90V --gate-high 3.25V", "--gate-low: %g V, must be below --gate-high %g V", rq.GateLow.Float(), rq.GateHigh.Float())
	case parts && !rq.Supply.IsKnown():
		return Usage("for instance --supply 8V", "bias: a divider needs its supply")
	case rq.Trimmer.IsKnown() && !rq.Top.IsKnown() && !rq.Bottom.IsKnown():
		return Usage("--bottom 1.2k, or --top", "--trimmer: a trimmer alone is no divider")
	case rq.Supply.IsKnown() && !parts:
		return Usage("--bottom 1.2k says how large the divider is to be; the top resistor is then chosen", "--supply: no resistor of the divider is given")
	case rq.TrimmerIn == bias.InBottom && !rq.Trimmer.IsKnown():
		return Usage("--trimmer 500", "--trimmer-in bottom: no trimmer is given")
	}
	for _, list := range rq.Parallel {
		if !strings.Contains(list, ",") {
			return Usage("--parallel D1,D2", "--parallel %s: a line has two devices or more", list)
		}
	}
	if len(rq.Parallel) == 0 && (rq.Total.IsKnown() || rq.Sink.IsKnown()) {
		return Usage("gatesill bias "+Quote(name)+" --parallel D1,D2 --total 500mA", "--total and --sink are of devices on one line: which?")
	}
	if rq.Reference == name && name != "" {
		return Usage("name two different lots", "lot %q: held against itself", name)
	}
	return nil
}

// options turns the request into choices for the plan; what was assumed becomes a warning of b.
func (rq *BiasRequest) options(env *Env, s *report.Sheet, b *report.Bias) (bias.Options, error) {
	opt := bias.Options{Idle: s.IdleCurrent, Beta: rq.Beta.Float(), Turns: rq.Turns.Or(0), IdleTol: rq.IdleTol.Or(0), Temp: valueTemperature(s)}
	for _, name := range rq.Series {
		x, err := bias.SeriesNamed(name)
		if err != nil {
			return opt, Usage("--series E12, E24, E48, E96 or E192", "--series: %w", err)
		}
		if !slices.Contains(opt.Series, x) {
			opt.Series = append(opt.Series, x)
		}
	}
	if rq.GateLow.IsKnown() {
		opt.Reach = &bias.Range{Low: rq.GateLow.Float(), High: rq.GateHigh.Float()}
	}
	if rq.Supply.IsKnown() && (rq.Top.IsKnown() || rq.Bottom.IsKnown()) {
		n := bias.Network{
			Supply: rq.Supply.Float(), SupplyTol: rq.SupplyTol.Or(0), Top: rq.Top.Float(), Bottom: rq.Bottom.Float(),
			Trimmer: rq.Trimmer.Or(0), Tol: rq.ResistorTol.Or(0), TrimTol: rq.TrimmerTol.Or(usualTrimmerTol),
		}
		if n.Trimmer > 0 {
			n.In = first(rq.TrimmerIn, bias.AtGate)
		}
		opt.Network = &n
		b.AssumedTrimmer = !rq.TrimmerTol.IsKnown()
		b.NoSupplyTol, b.NoResistorTol = !rq.SupplyTol.IsKnown(), !rq.ResistorTol.IsKnown()
	}
	pchannel := s.Part.Channel == record.PChannel
	if t, ok := rq.Tempco.Get(); ok {
		if pchannel && t < 0 {
			env.warn("gate voltages of a p-channel part are negative and fall in magnitude as it warms up: their slope is above 0, as in --tempco 4mV/K")
		}
		opt.Tempco = bias.NoTempco()
		opt.Tempco.Value, opt.Tempco.Basis = t, bias.TempcoGiven
	} else {
		opt.Tempco = bias.TempcoOf(warmed(s))
	}
	return opt, nil
}

// warmed collects gate voltage and temperature of every sweep, by device.
func warmed(s *report.Sheet) (out [][]bias.TempPoint) {
	for i := range s.Devices {
		var list []bias.TempPoint
		if d := &s.Devices[i]; !d.Excluded {
			for j := range d.Sweeps {
				sw := &d.Sweeps[j]
				if t, ok := sweepTemperature(sw); ok && sw.Result.State != fit.Excluded && sw.Result.VgsIdle.Ok() {
					list = append(list, bias.TempPoint{Temp: t, Gate: sw.Result.VgsIdle.Value})
				}
			}
		}
		out = append(out, list)
	}
	return out
}

// valueTemperature is the temperature behind the gate voltages of the lot, °C: of each
// device that of the sweep whose value is nearest to the device's, for where sweeps
// were taken at several temperatures one of them stands for it. NaN: not known.
func valueTemperature(s *report.Sheet) float64 {
	var all []float64
	for i, list := range warmed(s) {
		at, off := math.NaN(), math.Inf(1)
		for _, q := range list {
			if d := math.Abs(q.Gate - s.Devices[i].Result.VgsIdle.Value); d < off {
				at, off = q.Temp, d
			}
		}
		if !math.IsNaN(at) {
			all = append(all, at)
		}
	}
	return median(all)
}

func biasLot(s *report.Sheet) bias.Lot {
	return bias.Lot{Name: s.Lot.Name, PChannel: s.Part.Channel == record.PChannel, Populations: max(1, s.Spread.Populations), Devices: lotDevices(s)}
}

// plan lays out one lot, its refusals in words with a hint.
func (rq *BiasRequest) plan(s *report.Sheet, opt bias.Options) (*bias.Plan, error) {
	p, err := bias.Of(biasLot(s), opt)
	name := Quote(s.Lot.Name)
	switch {
	case err == nil:
		return p, nil
	case errors.Is(err, bias.ErrNone):
		return nil, failed("gatesill fit "+name+" shows what there is; readings at or beyond the idle current are needed",
			"lot %q: no device has a gate voltage at %s", s.Lot.Name, report.FormatGiven(s.IdleCurrent, "A"))
	case errors.Is(err, bias.ErrSupply):
		hint := "a supply above the gate voltage, for instance --supply 8V"
		if biasLot(s).PChannel || s.Part.Mode == record.Depletion {
			hint = "voltages are against the source: negative gate voltages need a negative supply, for instance --supply -8V"
		}
		return nil, failed(hint, "lot %q: %w", s.Lot.Name, err)
	case errors.Is(err, bias.ErrNetwork), errors.Is(err, bias.ErrTolerance):
		return nil, Usage("gatesill help bias", "%w", err)
	}
	return nil, failed("", "lot %q: %w", s.Lot.Name, err)
}

// bins sorts the lot as the verb does and chooses a resistor for each bin.
func (rq *BiasRequest) bins(env *Env, s *report.Sheet, p *bias.Plan) error {
	if p.Network == nil {
		return nil
	}
	opt, err := sortOptions(env, s, SortRequest{By: "vgs-idle", Width: rq.Width})
	if err != nil {
		return err
	}
	sorting, err := lot.SortInto(lotDevices(s), opt)
	if err != nil {
		return Usage("gatesill help bias", "%w", err)
	}
	p.ForBins(sorting.Bins)
	return nil
}

// against holds the lot against the reference lot, whose network it would be put in.
func (rq *BiasRequest) against(ctx context.Context, env *Env, s *report.Sheet, b *report.Bias, o SheetOptions, opt bias.Options) error {
	ref, err := env.candidateSheet(ctx, s, rq.Reference, o)
	if err != nil {
		return err
	}
	alike, err := alikeParts(&ref, s)
	if err != nil {
		return err
	}
	differ, doubts := unlikeLots(&ref, s, fit.KeyVgsIdle, false)
	if differ != nil {
		return differ.failure(&ref, s)
	}
	opt.Temp = valueTemperature(&ref)
	plan, err := rq.plan(&ref, opt)
	if err != nil {
		return err
	}
	b.Reference, b.Change = plan, bias.Against(plan, b.Plan)
	b.Warnings = append(append(b.Warnings, alike...), doubts...)
	return nil
}

// lineOptions are the conditions of a line of n devices; 0: of two at the ends of the lot.
func (rq *BiasRequest) lineOptions(s *report.Sheet, p *bias.Plan, n int) bias.LineOptions {
	return bias.LineOptions{
		Total: rq.Total.Or(float64(n) * p.Idle), Source: rq.Source.Or(0),
		VDS: math.Abs(rq.VDS.Float()), Rth: rq.Rth.Else(s.Part.Rth).Float(), Sink: rq.Sink.Float(), Temp: p.Thermal.Temp, Tempco: p.Tempco.Value,
	}
}

// line solves the named devices on one gate line.
func (rq *BiasRequest) line(s *report.Sheet, p *bias.Plan, names []string) (*bias.Line, error) {
	var members []bias.Member
	for i, n := range names {
		n = strings.TrimSpace(n)
		k := slices.IndexFunc(s.Devices, func(d report.Device) bool { return d.Name == n })
		switch {
		case k < 0:
			return nil, failed("gatesill lot show "+Quote(s.Lot.Name)+" lists its devices", "--parallel: device %q is not in lot %q", n, s.Lot.Name)
		case slices.ContainsFunc(names[:i], func(other string) bool { return strings.TrimSpace(other) == n }):
			return nil, Usage("name each device once", "--parallel: device %q is named twice", n)
		}
		d := &s.Devices[k]
		if st := d.State(); st != fit.Measured {
			return nil, failed("gatesill device show "+Quote(n)+" --lot "+Quote(s.Lot.Name)+" says why", "--parallel: device %q is %s", n, report.WordsOf(st).Word)
		}
		members = append(members, bias.Member{Name: n, Result: &d.Result})
	}
	l, err := bias.LineOf(members, p.Idle, p.Beta, s.Part.Channel == record.PChannel, rq.lineOptions(s, p, len(names)))
	if errors.Is(err, bias.ErrLine) {
		return nil, failed("--beta 3.8 gives a gain factor for devices whose curves were not measured", "--parallel: %w", err)
	}
	return l, err
}
