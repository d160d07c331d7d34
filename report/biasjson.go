package report

import (
	"io"
	"math"

	"gatesill/fit"
	"gatesill/fit/bias"
	"gatesill/fit/lot"
)

// notHad is written as null.
var notHad = number(math.NaN())

type biasBandDoc struct {
	Low      number   `json:"low_V"`
	High     number   `json:"high_V"`
	Share    number   `json:"share"`
	Level    number   `json:"level"`
	Kind     optional `json:"kind"`
	Factor   number   `json:"factor"`
	N        int      `json:"n"`
	Of       optional `json:"of"`
	Declined optional `json:"declined"`
}

func biasBandDocOf(t *lot.ToleranceBand) biasBandDoc {
	return biasBandDoc{number(t.Low), number(t.High), number(t.Share), number(t.Level), optional(t.Kind), number(t.Factor), t.N, optional(t.Of), optional(t.Declined)}
}

type biasCoveredDoc struct {
	Count   int      `json:"count"`
	Of      int      `json:"of"`
	Upper   number   `json:"share_outside_upper"`
	Level   number   `json:"level"`
	Outside []string `json:"outside"`
}

func biasCoveredDocOf(c bias.Covered) *biasCoveredDoc {
	return &biasCoveredDoc{c.Count, c.Of, number(c.Upper), 0.95, list(c.Outside)}
}

// biasDrawnDoc is a current; beyond is +1 where it is more than that, -1 where it is less, because
// the curve ends there.
type biasDrawnDoc struct {
	I      number `json:"value_A"`
	Beyond int    `json:"beyond"`
}

func biasDrawnDocOf(d fit.Drawn) biasDrawnDoc { return biasDrawnDoc{number(d.I), d.Beyond} }

type biasSpreadDoc struct {
	Gate    number       `json:"gate_V"`
	Least   biasDrawnDoc `json:"least"`
	Median  biasDrawnDoc `json:"median"`
	Most    biasDrawnDoc `json:"greatest"`
	Known   int          `json:"known"`
	Unknown int          `json:"unknown"`
	By      []string     `json:"by"`
}

func biasSpreadDocOf(s bias.Spread) biasSpreadDoc {
	return biasSpreadDoc{number(s.Gate), biasDrawnDocOf(s.Least), biasDrawnDocOf(s.Median), biasDrawnDocOf(s.Most), s.Known, s.Unknown, list(s.By)}
}

type biasChoiceDoc struct {
	Top      number       `json:"top_ohm"`
	Bottom   number       `json:"bottom_ohm"`
	Gate     number       `json:"gate_V"`
	IdleLow  number       `json:"idle_low_A"`
	IdleHigh number       `json:"idle_high_A"`
	Series   bias.Series  `json:"series"`
	Change   string       `json:"change"`
	Off      number       `json:"off_V"`
	Trimmer  number       `json:"trimmer_ohm"`
	Least    biasDrawnDoc `json:"idle_least"`
	Most     biasDrawnDoc `json:"idle_greatest"`
}

// biasChoiceDocOf gives null for a current beyond the end of a curve; where the end
// is stands in idle_least and idle_greatest.
func biasChoiceDocOf(c *bias.Choice) biasChoiceDoc {
	d := biasChoiceDoc{number(c.Network.Top), number(c.Network.Bottom), number(c.Gate), number(c.Idle.Least.I), number(c.Idle.Most.I), c.Series, c.Change,
		number(c.Off), number(c.Network.Trimmer), biasDrawnDocOf(c.Idle.Least), biasDrawnDocOf(c.Idle.Most)}
	if c.Idle.Least.Beyond != 0 {
		d.IdleLow = notHad
	}
	if c.Idle.Most.Beyond != 0 {
		d.IdleHigh = notHad
	}
	return d
}

type biasDeviceDoc struct {
	Device  string       `json:"device"`
	Vgs     fit.Quantity `json:"vgs_idle_V"`
	Trimmer number       `json:"trimmer"`
	Covered any          `json:"covered"` // null: nothing to be covered by, or no value
	Idle    biasDrawnDoc `json:"idle"`
	Why     optional     `json:"why"`
}

type biasPartDoc struct {
	Name  string `json:"name"`
	Volts number `json:"plus_minus_V"`
}

type biasNowDoc struct {
	Middle     number        `json:"gate_V"`
	ReachLow   number        `json:"reach_low_V"`
	ReachHigh  number        `json:"reach_high_V"`
	WorstLow   number        `json:"worst_low_V"`
	WorstHigh  number        `json:"worst_high_V"`
	RSS        number        `json:"root_sum_square_V"`
	SureLow    number        `json:"every_board_low_V"`
	SureHigh   number        `json:"every_board_high_V"`
	Parts      []biasPartDoc `json:"tolerances"`
	Idle       biasSpreadDoc `json:"idle"`
	WorstLeast biasDrawnDoc  `json:"idle_worst_least"`
	WorstMost  biasDrawnDoc  `json:"idle_worst_greatest"`
	Share      number        `json:"variance_share_of_tolerances"`
	Dominant   optional      `json:"dominated_by"`
}

func biasNowDocOf(n *bias.Now) *biasNowDoc {
	if n == nil {
		return nil
	}
	d := &biasNowDoc{Middle: number(n.Middle), ReachLow: number(n.Reach.Low), ReachHigh: number(n.Reach.High), WorstLow: number(n.Tolerated.Low), WorstHigh: number(n.Tolerated.High),
		RSS: number(n.RSS), SureLow: number(n.Sure.Low), SureHigh: number(n.Sure.High), Parts: []biasPartDoc{}, Idle: biasSpreadDocOf(n.Idle),
		WorstLeast: biasDrawnDocOf(n.Worst.Least), WorstMost: biasDrawnDocOf(n.Worst.Most), Share: number(n.Share), Dominant: optional(n.Dominant)}
	if n.Sure.Low > n.Sure.High {
		d.SureLow, d.SureHigh = notHad, notHad
	}
	for _, q := range n.Parts {
		d.Parts = append(d.Parts, biasPartDoc{q.Name, number(q.Volts)})
	}
	return d
}

type biasThermalDoc struct {
	Tempco      number   `json:"tempco_V_per_K"`
	Basis       optional `json:"basis"`
	N           int      `json:"n"`
	From        number   `json:"from_C"`
	To          number   `json:"to_C"`
	Temp        number   `json:"at_C"`
	Assumed     bool     `json:"at_C_assumed"`
	Typical     number   `json:"typical_V_per_K"`
	TypicalLow  number   `json:"typical_low_V_per_K"`
	TypicalHigh number   `json:"typical_high_V_per_K"`
	ZeroGate    number   `json:"zero_point_V"`
	ZeroCurrent number   `json:"zero_point_A"`
	Rises       any      `json:"rises_with_heat"`
	Rate        number   `json:"rate_per_K"`
}

func biasThermalDocOf(t *bias.Thermal) biasThermalDoc {
	d := biasThermalDoc{number(t.Value), optional(t.Basis), t.N, number(t.From), number(t.To), number(t.Temp), t.Assumed,
		number(t.Typical), number(t.TypicalLow), number(t.TypicalHigh), number(t.ZeroGate), number(t.ZeroCurrent), nil, number(t.Rate)}
	if isNumber(t.ZeroGate) {
		d.Rises = t.Rises
	}
	return d
}

type biasBinDoc struct {
	Bin     string   `json:"bin"`
	Low     number   `json:"low_V"`
	High    number   `json:"high_V"`
	Devices []string `json:"devices"`
	biasChoiceDoc
}

type biasTrimDoc struct {
	Found    bool     `json:"found"`
	Trimmer  number   `json:"trimmer_ohm"`
	Top      number   `json:"top_ohm"`
	Bottom   number   `json:"bottom_ohm"`
	Series   optional `json:"series"`
	In       optional `json:"trimmer_in"`
	SureLow  number   `json:"every_board_low_V"`
	SureHigh number   `json:"every_board_high_V"`
	From     number   `json:"used_from"`
	To       number   `json:"used_to"`
}

func biasTrimDocOf(t *bias.Trim) *biasTrimDoc {
	switch {
	case t == nil:
		return nil
	case !t.Found:
		n := notHad
		return &biasTrimDoc{false, n, n, n, "", "", n, n, n, n}
	}
	m := t.Network
	return &biasTrimDoc{true, number(m.Trimmer), number(m.Top), number(m.Bottom), optional(t.Series), optional(m.In), number(t.Sure.Low), number(t.Sure.High), number(t.From), number(t.To)}
}

type biasOnDoc struct {
	Device string `json:"device"`
	I      number `json:"idle_A"`
	Below  number `json:"less_than_A"`
	Power  number `json:"power_W"`
	Temp   number `json:"temperature_C"`
}

type biasStateDoc struct {
	Gate    number      `json:"gate_V"`
	Total   number      `json:"total_A"`
	Trimmer number      `json:"trimmer"`
	Devices []biasOnDoc `json:"devices"`
	Trouble optional    `json:"trouble"`
}

type biasLineDoc struct {
	Devices []string      `json:"devices"`
	Total   number        `json:"total_A"`
	Source  number        `json:"source_resistor_ohm"`
	Cold    *biasStateDoc `json:"cold"`
	Hot     *biasStateDoc `json:"warmed_up"`
	Kept    *biasStateDoc `json:"gate_kept"`
	Bare    *biasStateDoc `json:"without_resistors"`
}

func biasLineDocOf(b *Bias, l *bias.Line) *biasLineDoc {
	if l == nil {
		return nil
	}
	state := func(s *bias.State) *biasStateDoc {
		if s == nil || s.Err == nil && s.Devices == nil {
			return nil
		}
		if s.Err != nil {
			n := notHad
			return &biasStateDoc{n, n, n, []biasOnDoc{}, optional(stateTrouble(s.Err))}
		}
		d := &biasStateDoc{Gate: number(s.Gate), Total: number(s.Total), Trimmer: notHad}
		if n := b.Plan.Network; n != nil {
			if x := n.Setting(s.Gate); x >= 0 && x <= 1 {
				d.Trimmer = number(x)
			}
		}
		for k, q := range s.Devices {
			on := biasOnDoc{l.Names[k], number(q.Told.I), notHad, number(q.Power), number(q.Temp)}
			if q.Told.Beyond < 0 {
				on.I, on.Below = notHad, number(q.Told.I)
			}
			d.Devices = append(d.Devices, on)
		}
		return d
	}
	return &biasLineDoc{l.Names, number(l.LineOptions.Total), number(l.Source), state(&l.Cold), state(&l.Hot), state(&l.Kept), state(l.Bare)}
}

type biasChangeDoc struct {
	Reference string          `json:"reference"`
	Shift     number          `json:"shift_V"`
	Gate      number          `json:"old_gate_V"`
	AtOld     number          `json:"idle_at_old_gate_A"`
	Covered   *biasCoveredDoc `json:"reference_covered"`
	Text      []string        `json:"text"`
}

// BiasJSON writes what `bias --json` gives: one object. idle_low_A and idle_high_A
// of a choice are those of the devices at its nominal gate voltage; a trimmer is a
// part of its travel, 0 to 1.
func BiasJSON(w io.Writer, b Bias) error {
	p := b.Plan
	choices, devices, bins, lines := rows{}, rows{}, rows{}, rows{}
	for i := range p.Choices {
		choices = append(choices, biasChoiceDocOf(&p.Choices[i]))
	}
	for i := range p.Units {
		u := &p.Units[i]
		d := biasDeviceDoc{u.Name, u.Gate, number(u.Setting), nil, biasDrawnDocOf(u.At), optional(u.Why)}
		if p.Now != nil && p.Now.CoveredBy != "" && u.Gate.Ok() {
			d.Covered = u.Covered
		}
		devices = append(devices, d)
	}
	for i := range p.Bins {
		c := &p.Bins[i]
		bins = append(bins, biasBinDoc{c.Bin, number(c.Low), number(c.High), c.Devices, biasChoiceDocOf(&c.Choice)})
	}
	for _, l := range b.Lines {
		lines = append(lines, biasLineDocOf(&b, l))
	}
	var covered, always *biasCoveredDoc
	if n := p.Now; n != nil && n.CoveredBy != "" {
		covered = biasCoveredDocOf(n.Covered)
		if n.Trimmed && !n.Given {
			always = biasCoveredDocOf(n.Always)
		}
	}
	var change *biasChangeDoc
	if c := b.Change; c != nil {
		change = &biasChangeDoc{c.Reference, number(c.Shift), number(c.OldGate), number(c.AtOld), nil, c.Text}
		if r := b.Reference.Now; r != nil && r.CoveredBy != "" {
			change.Covered = biasCoveredDocOf(r.Covered)
		}
	}
	return writeObject(w,
		member{"schema", Schema}, member{"lot", p.Lot}, member{"idle_A", number(p.Idle)}, member{"centre_V", number(p.Centre)}, member{"centre_is", p.By},
		member{"n", p.N}, member{"above", p.Above}, member{"sd_V", number(p.SD)},
		member{"tolerance_interval", biasBandDocOf(&p.Band)}, member{"temperature", biasThermalDocOf(&p.Thermal)},
		member{"covered", covered}, member{"covered_by_every_board", always}, member{"network", biasNowDocOf(p.Now)},
		member{"choices", choices}, member{"trimmer_for_lot", biasTrimDocOf(p.Trim)}, member{"bins", bins}, member{"devices", devices},
		member{"extremes_on_one_line", biasLineDocOf(&b, b.Extremes)}, member{"lines", lines}, member{"against", change}, member{"ways", list(p.Ways())},
		member{"warnings", append([]fit.Warning{}, b.Warnings...)})
}
