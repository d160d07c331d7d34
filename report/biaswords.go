package report

import (
	"fmt"
	"io"
	"strings"

	"gatesill/fit"
	"gatesill/fit/bias"
	"gatesill/store/record"
)

// Facts are what is said of the bias of the lot, with their labels, as they stand
// in [BiasTable] above the tables.
func (b Bias) Facts() []Field {
	var list []Field
	b.Lines = nil
	biasTable(&printer{w: io.Discard, facts: &list}, b, Style{})
	return list
}

// LineFacts are what is said of devices on one gate line.
func (b Bias) LineFacts(l *bias.Line) []Field {
	var list []Field
	lineTable(&printer{w: io.Discard, facts: &list}, b, l, Style{})
	return list
}

// TakenForGranted are what was assumed, in sentences.
func (b *Bias) TakenForGranted() []string {
	var notes []string
	if n := b.Plan.Network; n != nil {
		if b.NoSupplyTol || b.NoResistorTol {
			what := "supply and resistors have"
			switch {
			case !b.NoSupplyTol:
				what = "the resistors have"
			case !b.NoResistorTol:
				what = "the supply has"
			}
			notes = append(notes, "No tolerance was given that "+what+": taken as exact (--supply-tol, --resistor-tol).")
		}
		if b.AssumedTrimmer && (n.Trimmer > 0 || b.Plan.Trim != nil) {
			notes = append(notes, fmt.Sprintf("A trimmer's value is taken as ± %.0f %% (common practice; --trimmer-tol says another).", 100*n.TrimTol))
		}
		notes = append(notes, "Nothing is taken to flow into the gate. Tolerances at worst: every one at its end; root-sum-square: independent ones. Everything holds at the V_DS of the readings.")
	}
	if b.Plan.Now != nil && b.Plan.Now.Trimmed && len(b.Lines) == 0 {
		notes = append(notes, "trimmer: part of its travel from the end with the gate voltage nearest to 0 V, everything else nominal.")
	}
	if t := b.Plan.Thermal; t.Assumed && (isNumber(t.ZeroGate) || len(b.Lines) > 0) {
		notes = append(notes, "The temperature of the lot is not known: 25 °C is taken.")
	}
	return notes
}

// UnitNotes gives what is to be said of a device in the bias sheet; "": nothing.
func (b *Bias) UnitNotes() func(u *bias.Unit) string {
	states, flagged := map[string]string{}, b.Sheet.Verdicts()
	for _, d := range b.Sheet.Devices {
		if states[d.Name] = WordsOf(d.State()).Word; d.State() == fit.Measured {
			states[d.Name] = "no value"
		}
		if d.Role == record.Control {
			states[d.Name] = "control part"
		}
	}
	return func(u *bias.Unit) string {
		note := ""
		if u.Why != "" {
			note = states[u.Name]
		}
		if n := b.Plan.Now; n != nil && n.CoveredBy != "" && u.Gate.Ok() && !u.Covered && u.Counts {
			note = "outside"
		}
		if u.Gate.Ok() && flagged[u.Name].Flagged {
			note = strings.TrimPrefix(note+", flagged", ", ")
		}
		return note
	}
}

// DrawnWords writes a current in a table: "> 1.2 A" where it is more than a curve
// tells.
func DrawnWords(i fit.Drawn) string { return drawnCell(i) }

// SettingWords writes the setting of a trimmer, with its turns where those are known.
func SettingWords(x, turns float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return settingCell(x, turns)
}

// BandWords say what a tolerance interval holds: "95 % of all parts, 95 % confidence".
func BandWords(pl *bias.Plan) string {
	return LevelWords(pl.Band.Share) + " of " + Clean(pl.Band.Of) + ", " + LevelWords(pl.Band.Level) + " confidence"
}
