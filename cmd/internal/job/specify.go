package job

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// specify holds the lot against the limits of its data sheet, by the rules that are
// stored with it.
func specify(s *report.Sheet) {
	l := &s.Lot
	s.Spec = lot.SpecOf(lotDevices(s), lot.SpecOptions{
		Min: s.Part.VgsthMin.Float(), Max: s.Part.VgsthMax.Float(),
		PChannel: s.Part.Channel == record.PChannel, Depletion: s.Part.Mode == record.Depletion,
		Guard: lot.Guard(l.Guard), GuardSet: ruleSet(s, l.Guard.Unit != "", s.GuardSetAt),
		SendBack: l.SendBack == "outside-limits", SendBackSet: ruleSet(s, l.SendBack != "", s.SendBackSetAt),
		Populations: s.Spread.Populations,
	})
}

// ruleSet tells whether a rule of the lot was set before its first reading.
func ruleSet(s *report.Sheet, given bool, at string) string {
	switch {
	case !given:
		return lot.RuleNone
	case setBefore(s, at):
		return lot.RuleBefore
	}
	return lot.RuleAfter
}

// rulesSetAt finds in the audit trail when the two rules of a lot were set last, of
// which the lot itself has one time for both, and the idle current of its part.
func rulesSetAt(tx *store.Tx, s *report.Sheet) error {
	trail, err := tx.Changes("lot", s.Lot.ID)
	if err != nil {
		return err
	}
	s.GuardSetAt, s.SendBackSetAt = s.Lot.DecidedAt, s.Lot.DecidedAt
	for _, rule := range []struct {
		at     *string
		fields []string
	}{{&s.GuardSetAt, []string{"guard", "guard_unit"}}, {&s.SendBackSetAt, []string{"send_back"}}} {
		for _, c := range trail {
			if c.Field == "created" || slices.Contains(rule.fields, c.Field) {
				*rule.at = c.At
			}
		}
	}
	part, err := tx.Changes("part", s.Part.ID)
	for _, c := range part {
		if c.Field == "created" || c.Field == "idle_current_a" {
			s.IdleSetAt = c.At
		}
	}
	return err
}

// Voltages and currents count as those of the data sheet within these shares of
// them: V_GS(th) follows V_DS by some millivolts a volt (common practice, no source),
// and the current is computed, not read.
const (
	likeVDS     = 0.1
	likeCurrent = 1e-3
)

// sheetCurrent reports whether V_GS(th) was taken at the part's test current, or the
// part has none.
func sheetCurrent(s *report.Sheet) bool {
	test, ok := s.Part.TestCurrent.Get()
	return !ok || math.Abs(s.TestCurrent-test) <= likeCurrent*test
}

// unlikeSheet says why the V_GS(th) of a device cannot be held against the limits of
// the data sheet, which hold at one test current and with V_DS given or, where none
// is, with the drain tied to the gate; "" when it can.
func unlikeSheet(s *report.Sheet, d *report.Device) string {
	if !s.Part.VgsthMin.IsKnown() && !s.Part.VgsthMax.IsKnown() {
		return ""
	}
	test, ok := s.Part.TestCurrent.Get()
	if !ok {
		return "the part has no test current that its limits hold at (lot edit --test-current)"
	}
	if !sheetCurrent(s) {
		return fmt.Sprintf("V_GS(th) was taken at %s, the limits hold at %s", report.FormatGiven(s.TestCurrent, "A"), report.FormatGiven(test, "A"))
	}
	for i := range d.Sweeps {
		sw := &d.Sweeps[i]
		if sw.Excluded || sw.Result.State == fit.Excluded {
			continue
		}
		if text := unlikeDrain(&sw.Condition, s.Part.TestVDS, test); text != "" {
			return text
		}
	}
	return ""
}

// unlikeDrain compares the drain voltage of a sweep at the test current with that of
// the data sheet.
func unlikeDrain(c *record.Condition, want record.Num, test float64) string {
	limits := "the limits hold with the drain tied to the gate (lot edit --test-vds says otherwise)"
	if want.IsKnown() {
		limits = "the limits hold at V_DS = " + report.FormatGiven(want.Float(), "V")
	}
	vds, how := math.NaN(), ""
	switch c.Circuit {
	case record.NoCircuit:
		return "the circuit of the readings was not given, and " + limits
	case record.Diode:
		if !want.IsKnown() {
			return ""
		}
		return "measured with the drain tied to the gate, and " + limits
	case record.Fixed:
		vds, how = math.Abs(c.VDS.Float()), "measured at V_DS = %s"
	case record.Load:
		vds, how = math.Abs(c.VDD.Float())-test*c.RL.Or(0), "measured with R_L, at V_DS near %s"
	}
	if math.IsNaN(vds) {
		return "V_DS of the readings was not given, and " + limits
	}
	if w := math.Abs(want.Float()); math.Abs(vds-w) <= likeVDS*w {
		return ""
	}
	return fmt.Sprintf(how, report.FormatTwoDigits(vds, "V")) + ", and " + limits
}

// reached is the greatest gate voltage that a device was given in the direction that
// turns it on, 0 where none is known.
func reached(s *report.Sheet, d *report.Device) float64 {
	most := 0.0
	for i := range d.Sweeps {
		if d.Sweeps[i].Excluded {
			continue
		}
		for _, v := range d.Sweeps[i].Curve.Vg {
			if v *= s.Part.Sign(); v > most && !math.IsInf(v, 0) {
				most = v
			}
		}
	}
	return most
}
