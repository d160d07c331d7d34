package job

import (
	"fmt"
	"strconv"

	"gatesill/acquire/table"
	"gatesill/report"
	"gatesill/store/record"
)

// learn keeps what the behaviour of one file settled for others of its header.
func (im *importer) learn(f *table.File) {
	for _, c := range f.Dialect.Columns {
		if c.How == "behaviour" {
			if im.settled[f.Dialect.Signature] == nil {
				im.settled[f.Dialect.Signature] = map[string]string{}
			}
			im.settled[f.Dialect.Signature][c.As] = strconv.Itoa(c.Number)
		}
	}
}

// currentless refuses curves from which no current can be had: a voltage at the
// load or the drain says nothing without the resistor.
func currentless(f *table.File, sweeps []table.Sweep) error {
	for i := range sweeps {
		s := &sweeps[i]
		if s.Direction == record.Spot || s.Column(record.ID) != nil {
			continue
		}
		c := &s.Condition
		switch {
		case s.Column(record.VL) != nil && c.RL.IsKnown():
		case s.Column(record.VD) != nil && c.RL.IsKnown() && (c.VDD.IsKnown() || s.Column(record.VDD) != nil):
		case s.Column(record.VL) != nil || s.Column(record.VD) != nil:
			return &table.Error{File: f.Name, Err: fmt.Errorf("%w: no drain current in it, and none to be had from the voltage without the load resistor", table.ErrRefused),
				Hint: "--rl 10 --vdd 12V --circuit load, with the values of your bench"}
		}
	}
	return nil
}

// signs guesses from the signs of the readings what the part was not said to
// be: "" when they fit it.
func (im *importer) signs(sweeps []table.Sweep) string {
	gate, drain, n := 0, 0, 0
	for i := range sweeps {
		vg, id := sweeps[i].Values(record.VG), sweeps[i].Values(record.ID)
		for j := range min(len(vg), len(id)) {
			n++
			switch {
			case vg[j] < 0:
				gate--
			case vg[j] > 0:
				gate++
			}
			switch {
			case id[j] < 0:
				drain--
			case id[j] > 0:
				drain++
			}
		}
	}
	most := n * 8 / 10
	switch lot := Quote(im.rq.Lot); {
	case n == 0 || gate > -most:
	case drain <= -n/2 && im.part.Channel == record.NChannel:
		return "gate voltages and currents are negative, as of a p-channel part; if it is one: gatesill lot edit " + lot + " --channel p"
	case drain >= n/2 && im.part.Channel == record.NChannel && im.part.Mode == record.Enhancement:
		return "current flows at negative gate voltages, as in a depletion part; if it is one: gatesill lot edit " + lot + " --mode depletion --off-voltage=-5V, with its own off voltage"
	}
	return ""
}

// tell warns of what the reader noticed and of rows known under another name.
func (im *importer) tell(f *table.File, sweeps []table.Sweep) {
	for _, r := range f.Remarks {
		im.env.warn("%s: %s [%s]", report.Clean(f.Name), r.Text, r.Code)
	}
	noCircuit := false
	for i := range sweeps {
		s := &sweeps[i]
		noCircuit = noCircuit || s.Condition.Circuit == record.NoCircuit && s.Direction != record.Spot
		if other, ok := im.seen[s.DataHash]; ok && other != s.Device && s.Len() >= rowsAlike {
			im.env.warn("%s: device %s has the same rows as device %s [same-rows]", report.Clean(f.Name), report.Clean(s.Device), report.Clean(other))
		}
	}
	if guess := im.signs(sweeps); guess != "" {
		im.env.warn("%s: %s", report.Clean(f.Name), guess)
	}
	if noCircuit {
		im.env.warn("%s: circuit not given, so only constant-current values will be had; --circuit load, diode or fixed tells it [no-circuit]", report.Clean(f.Name))
	}
}
