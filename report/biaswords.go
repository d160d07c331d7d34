package report

import (
	"fmt"
	"io"

	"gatesill/fit"
	"gatesill/fit/bias"
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
		notes = append(notes, "Nothing is taken to flow into the gate. Tolerances at worst: every one at its end; root-sum-square: independent ones.")
	}
	if b.Plan.Now != nil && b.Plan.Now.Trimmed && len(b.Lines) == 0 {
		notes = append(notes, "trimmer: part of its travel from the end with the least gate voltage, everything else nominal.")
	}
	if t := b.Plan.Thermal; t.Assumed && (isNumber(t.ZeroGate) || len(b.Lines) > 0) {
		notes = append(notes, "The temperature of the lot is not known: 25 °C is taken.")
	}
	return notes
}

// UnitNote is what is to be said of a device in the bias sheet; "": nothing.
func (b *Bias) UnitNote(u *bias.Unit) string {
	if n := b.Plan.Now; n != nil && n.CoveredBy != "" && u.Gate.Ok() && !u.Covered && u.Counts {
		return "outside"
	}
	return Clean(u.Why)
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
