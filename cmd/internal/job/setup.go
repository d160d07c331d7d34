package job

import (
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

// currents settles test current and idle current of the sheet.
func currents(s *report.Sheet, at, idle record.Num) {
	s.IdleCurrent = math.Abs(idle.Else(s.Part.IdleCurrent).Float())
	spots, gm := spotCurrents(s)
	switch {
	case at.IsKnown():
		s.TestCurrent, s.TestBasis = math.Abs(at.Float()), "--at"
	case s.Part.TestCurrent.IsKnown():
		s.TestCurrent, s.TestBasis = s.Part.TestCurrent.Float(), "part"
	case len(spots) > 0:
		s.TestCurrent, s.TestBasis = spots[0], "spot list"
	default:
		s.TestCurrent, s.TestBasis = defaultTestCurrent, "default"
	}
	switch {
	case idle.IsKnown(), s.Part.IdleCurrent.IsKnown():
	case len(gm) == 1: // a list that states g_m at a current means that as the idle current
		s.IdleCurrent = gm[0]
	case len(spots) == 2:
		s.IdleCurrent = spots[1]
	}
}

// spotCurrents gives the currents at which the spots of the lot were taken,
// ascending, and those at which their transconductance was; none when there are
// curves, or spots at more than two currents.
func spotCurrents(s *report.Sheet) (spots, gm []float64) {
	for _, d := range s.Devices {
		for _, sw := range d.Sweeps {
			if sw.Direction != record.Spot {
				return nil, nil
			}
			id, vg, g := sw.Values(record.ID), sw.Values(record.VG), sw.Values(record.GM)
			for i, x := range id {
				if math.IsNaN(x) {
					continue
				}
				if vg != nil && !math.IsNaN(vg[i]) {
					spots = withCurrent(spots, math.Abs(x))
				}
				if g != nil && !math.IsNaN(g[i]) {
					gm = withCurrent(gm, math.Abs(x))
				}
			}
		}
	}
	if len(spots) > 2 {
		spots = nil
	}
	slices.Sort(spots)
	return spots, gm
}

// withCurrent adds a current to the list unless one within a tenth is there: a
// one-resistor jig does not hold its current exactly.
func withCurrent(list []float64, x float64) []float64 {
	for _, have := range list {
		if math.Abs(have-x) <= 0.1*have {
			return list
		}
	}
	return append(list, x)
}

// curveOf hands the columns of a sweep to the fit, overload as ±Inf.
func curveOf(sw *record.Sweep) fit.Curve {
	c := fit.Curve{
		Vg: sw.Values(record.VG), Id: sw.Values(record.ID), Vl: sw.Values(record.VL),
		Vd: sw.Values(record.VD), Vdd: sw.Values(record.VDD), Gm: sw.Values(record.GM),
		VgBound: sw.Values(record.PairBound),
	}
	over := func(xs *[]float64, i int, sign int) {
		if i < len(*xs) {
			(*xs)[i] = math.Inf(sign)
		}
	}
	for _, m := range sw.Marks {
		sign := 1
		switch m.State {
		case record.Overload:
		case record.Underload:
			sign = -1
		default:
			continue
		}
		switch m.Quantity {
		case record.VG:
			over(&c.Vg, m.Index, sign)
		case record.ID:
			over(&c.Id, m.Index, sign)
		case record.VL:
			over(&c.Vl, m.Index, sign)
		case record.VD:
			over(&c.Vd, m.Index, sign)
		case record.VDD:
			over(&c.Vdd, m.Index, sign)
		}
	}
	if n := len(sw.Values(record.Settled)); n > 0 {
		c.Returned = sw.Values(record.Settled)[n-1] == record.TakenAgain
	}
	if c.Vg == nil {
		c.Vg = nans(sw.Len())
	}
	return c
}

func nans(n int) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = math.NaN()
	}
	return xs
}

// setupOf says under what a sweep was taken and what is asked of it.
func setupOf(s *report.Sheet, sw *record.Sweep, digits lastDigits) fit.Setup {
	c := sw.Condition
	return fit.Setup{
		Circuit: fit.Circuit(c.Circuit), PChannel: s.Part.Channel == record.PChannel, Depletion: s.Part.Mode == record.Depletion,
		OffV: offVoltage(s.Part),
		RL:   c.RL.Float(), RLTol: c.RLTol.Float(), Vdd: c.VDD.Float(), Vds: c.VDS.Float(), Burden: burden(sw),
		TestCurrent: s.TestCurrent, IdleCurrent: s.IdleCurrent, MaxID: s.Part.MaxID.Float(), VgsthMax: s.Part.VgsthMax.Float(),
		Gate: accuracy(sw, "gate", record.VG, digits), Current: accuracy(sw, "current", record.ID, digits), Load: accuracy(sw, "load", record.VL, digits), Drain: accuracy(sw, "drain", record.VD, digits),
		Lot: s.Shape, Spot: sw.Direction == record.Spot, Temperature: c.Temp.Float(), Budget: s.Budget,
	}
}

// offVoltage is the part's, 0 for an enhancement part of which none is known,
// NaN for such a depletion part.
func offVoltage(p record.Part) float64 {
	if p.Mode == record.Enhancement {
		return p.OffVoltage.Or(0)
	}
	return p.OffVoltage.Float()
}

func burden(sw *record.Sweep) float64 {
	if sw.Condition.Burden.IsKnown() {
		return sw.Condition.Burden.Float()
	}
	if sw.Condition.Ammeter == "none" {
		return 0
	}
	for _, m := range sw.Instruments {
		if m.Role != "current" {
			continue
		}
		for _, r := range m.Ranges {
			if r.Burden.IsKnown() {
				return r.Burden.Float()
			}
		}
	}
	return math.NaN()
}

// divisors turn the limit of an accuracy statement into a standard uncertainty
// (JCGM 100:2008 4.3.7 for a limit, 4.3.4 for a stated coverage).
var divisors = map[string]float64{"limit": math.Sqrt(3), "k=2": 2, "99 %": 2.5758293035489}

// accuracy is what is known of the meter in a role: its statement by range, else
// the last digit that was written down of its quantity, without a statement.
func accuracy(sw *record.Sweep, role string, q record.Quantity, digits lastDigits) []fit.Accuracy {
	var out []fit.Accuracy
	for _, m := range sw.Instruments {
		if m.Role != role {
			continue
		}
		div := divisors[m.Coverage]
		if div == 0 {
			div = math.Sqrt(3)
		}
		for _, r := range m.Ranges {
			out = append(out, fit.Accuracy{Top: r.Top, Percent: r.Percent, Counts: r.Counts, Resolution: r.Resolution, Noise: r.Noise.Or(0), Divisor: div})
		}
	}
	if step := digits[digitKey{sw.SourceID, q}]; len(out) == 0 && step > 0 && sw.Column(q) != nil {
		out = append(out, fit.Accuracy{Top: math.Inf(1), Resolution: step})
	}
	return out
}

// lastDigits holds the last digit in which each quantity of each source was
// written, in SI units. It is that of the whole file: spreadsheets drop trailing
// zeros, so that a single value may show fewer digits than its meter did.
type lastDigits map[digitKey]float64

type digitKey struct {
	source   string
	quantity record.Quantity
}

func lastDigitsOf(s *report.Sheet) lastDigits {
	out := lastDigits{}
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j].Sweep
			for k := range sw.Columns {
				c := &sw.Columns[k]
				key := digitKey{sw.SourceID, c.Quantity}
				if step := c.LastDigit(); step > 0 && (out[key] == 0 || step < out[key]) {
					out[key] = step
				}
			}
		}
	}
	return out
}

// overdue warns of meters whose calibration was due before a sweep was taken, or
// imported where its day is not known.
func overdue(s *report.Sheet, d *report.Device) (fit.Warning, bool) {
	imported := map[string]string{}
	for _, src := range s.Sources {
		imported[src.ID] = src.ImportedAt
	}
	for i := range d.Sweeps {
		sw := &d.Sweeps[i]
		on := day(first(sw.MeasuredAt, imported[sw.SourceID]))
		for _, m := range sw.Instruments {
			if m.Due != "" && m.Due < on {
				return fit.Warning{Code: fit.CodeOverdue, Text: "The calibration of the " + m.Role + " meter was due on " + m.Due + ", before the sweep of " + on + "."}, true
			}
		}
	}
	return fit.Warning{}, false
}
