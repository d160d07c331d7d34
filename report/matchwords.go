package report

import (
	"fmt"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/match"
	"gatesill/store/record"
)

// The lines of [MatchTable] that a page shows as well; "" where there is nothing to
// say. ToleranceLine says what the tolerance means in milliamperes.
func (m *Matched) ToleranceLine() string { return m.toleranceLine() }

// BoundLine says how good the sets are and what that rests on.
func (m *Matched) BoundLine() string { return m.boundWords() }

// ColumnsLine explains the columns of the table of sets.
func (m *Matched) ColumnsLine() string { return m.setsNote() }

// BasisLine says what the currents rest on, or why there are none.
func (m *Matched) BasisLine() string { return m.sharingBasis() }

// RepairLine says what makes a set equal at the idle current; "": nothing to repair.
func (m *Matched) RepairLine(s *match.Set) string { return repairWords(s, m.At, m.SourceOhms) }

// TradeRows are the rows of the trade-off with the answer itself among them.
func (m *Matched) TradeRows() []match.TradeOff { return m.tradeRows() }

// HasTolerance reports whether any tolerance was asked for.
func (m *Matched) HasTolerance() bool { return m.hasTolerance() }

// Names gives how devices are named: with their lot where there are several.
func (m *Matched) Names() func(lot, name string) string {
	many := len(m.Members) > 0 && manyLots(m.Members)
	return func(lot, name string) string { return deviceName(lot, name, many) }
}

// NameOfSet is the name of a set that was stored, else its number.
func (m *Matched) NameOfSet(number int) string {
	if s, ok := m.Locked[number]; ok {
		return Clean(s.Name)
	}
	return itoa(number)
}

// SetColumn is how a set is named in tables: "3", "3 = S12".
func (m *Matched) SetColumn(number int) string { return m.setLabel(number) }

// ValuesOf writes the values of a device, the first criterion first, without units.
func (m *Matched) ValuesOf() func(match.Placed) string { return m.valueWriter() }

// ValueUnits are their units.
func (m *Matched) ValueUnits() string { return m.valueUnits() }

// SpreadWords writes a difference of gate voltages in millivolts, without the unit.
func SpreadWords(v float64) string { return spreadText(v) }

// SpreadColumn writes differences of gate voltages in millivolts, all with a tenth
// where one needs it.
func SpreadColumn(x []float64) []string { return spreadCells(x) }

// PercentColumn writes shares in percent, without the unit.
func PercentColumn(x []float64) []string { return percents(x) }

// SizeColumn writes sizes with two or three digits under one prefix, and gives the
// unit with it.
func SizeColumn(unit string, x []float64) (cells []string, with string) {
	c := sizeColumn("", unit, x)
	return c.cells, c.unit
}

// AlikeWord says whether the devices of a set can be told apart.
func AlikeWord(s *match.Set) string { return alikeWord(s.Alike, s.Limit) }

// IsGain reports whether devices are held against each other by ratio in a quantity.
func IsGain(k fit.Key) bool { return isGain(k) }

// LeftNames gives the devices in no set with the reason, those that took part apart
// from those that were not given out.
func (m *Matched) LeftNames() (free, out []NameGroup) {
	var lists [2][]lot.Unsorted
	names := m.Names()
	for _, l := range m.LeftOver {
		k := 0
		if l.Out {
			k = 1
		}
		lists[k] = append(lists[k], lot.Unsorted{Name: names(l.Lot, l.Name), Why: Clean(l.Why)})
	}
	return GroupNames(lists[0]), GroupNames(lists[1])
}

// AllWarnings are those of the matching and of what it was made from.
func (m *Matched) AllWarnings() []fit.Warning { return m.warnings() }

// StoredSet is a stored set in words.
type StoredSet struct {
	Name, State, Devices, Lots string
	MatchedBy                  string
	At                         string // ""; not known
	Spread                     string // mV
	Made                       string // day
}

// StoredSetOf puts a stored set in words.
func StoredSetOf(s *record.Set) StoredSet {
	var by []string
	for _, c := range s.By {
		by = append(by, CriterionOf(c))
	}
	return StoredSet{
		Name: Clean(s.Name), State: SetStateWords(s), Devices: memberNames(s), Lots: Clean(strings.Join(lotsOf(s), ", ")),
		MatchedBy: andList(by), At: numText(s.At, "A"), Spread: spreadText(s.Spread.Float()), Made: day(s.CreatedAt),
	}
}

// Title names the lots of a matching: "Lot 2612", "Lots 2612 and 2613".
func (m *Matched) Title() string {
	var names []string
	for _, s := range m.Sheets {
		if n := Clean(s.Lot.Name); !slices.Contains(names, n) {
			names = append(names, n)
		}
	}
	if len(names) == 1 {
		return "Lot " + names[0]
	}
	return fmt.Sprintf("Lots %s", andList(names))
}
