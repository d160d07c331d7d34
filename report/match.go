package report

import (
	"fmt"
	"strings"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/store/record"
)

// Matched is lots whose devices were put in sets, ready to be laid out.
type Matched struct {
	Sheets []*Sheet // in the order asked for
	match.Matching
	Members []match.Member     // as they were handed to the matching
	Locked  map[int]record.Set // the sets that were stored, by their number in the matching
	Near    []match.Set        // left-over devices that nearly go together, the nearest first
	More    []match.More
	Gm      float64       // S, given for devices whose curves tell none; NaN: none was given
	Notes   []fit.Warning // besides those of the matching
	Cut     bool          // interrupted: better sets may be had
	// SourceOhms is the resistor in each source, ohm; 0: none.
	SourceOhms float64
	// TimeEnded: the search was ended by its time limit, so that another run may find,
	// and number, other sets.
	TimeEnded bool
	Vds       float64 // V, for the dissipation; NaN: not known
	VdsFrom   string  // where it comes from, in words
}

// Partners is the stock as partners for one device, ready to be laid out.
type Partners struct {
	File     DeviceFile // the device with its history
	Sheet    *Sheet     // its lot
	By       []match.Criterion
	At       float64 // A; NaN: not known
	Step     float64 // V, display step; 0: not known
	Members  []match.Member
	Partners []match.Partner // the best first, those that cannot be given last
	Refused  []RefusedLot
	Notes    []fit.Warning
	InSet    string             // set that the device itself is in; "": none
	Locked   map[int]record.Set // pairs that were stored, by the partner's place from 1
}

// RefusedLot is a lot that was not searched.
type RefusedLot struct {
	Lot string
	Why string // one clause
}

// sizeWords names sets of one size: "pairs", "sets of 4".
func sizeWords(n int) string {
	if n == 2 {
		return "pairs"
	}
	return fmt.Sprintf("sets of %d", n)
}

// aimWords says what the sets were chosen for.
func aimWords(m *match.Matching) string {
	what := sizeWords(m.Size)
	switch m.Aim {
	case match.Most:
		return "as many " + what + " as possible, and of those choices the one with the least sum of spreads"
	case match.Worst:
		return "as many " + what + " as there are devices for, the worst of them as good as possible"
	case match.Best:
		return fmt.Sprintf("the best %d %s, by the least sum of spreads", len(m.Sets), what)
	}
	return "as many " + what + " as there are devices for, the least sum of spreads"
}

// criterionWords names a quantity that was matched by, with its tolerance.
func criterionWords(s *Sheet, c match.Criterion, currents []float64) string {
	text := s.KeyPhrase(c.Key)
	if c.Key == match.KeyCurve {
		text = "the transfer curve"
		if n := len(currents); n > 0 {
			text += " from " + FormatGiven(currents[0], "A") + " to " + FormatGiven(currents[n-1], "A")
		}
	}
	if c.Within > 0 {
		text += " within " + toleranceWords(c)
	}
	return text
}

func isGain(k fit.Key) bool { return k == fit.KeyGmIdle || k == fit.KeyGmMax || k == fit.KeyBeta }

func toleranceWords(c match.Criterion) string {
	if isGain(c.Key) {
		return FormatGiven(100*c.Within, "%")
	}
	return FormatGiven(c.Within, "V")
}

// MatchLine is the first line of a matching: the quantity and the aim.
func (m *Matched) MatchLine() string {
	return "Matched by " + criteriaWords(m.Sheets[0], m.By, m.Currents) + ": " + aimWords(&m.Matching) + "."
}

func criteriaWords(s *Sheet, by []match.Criterion, currents []float64) string {
	var words []string
	for _, c := range by {
		words = append(words, criterionWords(s, c, currents))
	}
	return andList(words)
}

// manyLots reports whether devices need the name of their lot beside them.
func manyLots(members []match.Member) bool {
	for _, m := range members {
		if m.Lot != members[0].Lot {
			return true
		}
	}
	return false
}

// deviceName names a device, with its lot where there are several.
func deviceName(lot, name string, many bool) string {
	if many {
		return Clean(lot) + "/" + Clean(name)
	}
	return Clean(name)
}

// setLabel is the number of a set in the matching, with its name where it was
// stored.
func (m *Matched) setLabel(number int) string {
	if s, ok := m.Locked[number]; ok {
		return itoa(number) + " = " + Clean(s.Name)
	}
	return itoa(number)
}

// CriterionOf writes a criterion of a stored set in words.
func CriterionOf(c record.Criterion) string {
	key := fit.Key(c.Quantity)
	text := KeyOf(key).Symbol
	if key == match.KeyCurve {
		text = "transfer curve"
	}
	if w, ok := c.Within.Get(); ok {
		text += " within " + toleranceWords(match.Criterion{Key: key, Within: w})
	}
	return text
}

// SetStateWords tells what became of a set: "reserved for amplifier 7", "used in
// amplifier 7", "released".
func SetStateWords(s *record.Set) string {
	switch {
	case s.State == record.Reserved && s.Unit != "":
		return "reserved for " + Clean(s.Unit)
	case s.State == record.Used:
		return "used in " + Clean(s.Unit)
	}
	return string(s.State)
}

// SetWords names a set with what became of it: "S4 (used in amplifier 7)".
func SetWords(s *record.Set) string {
	return strings.TrimSpace(Clean(s.Name) + " (" + SetStateWords(s) + ")")
}

// warnings are those of the matching and of what it was made from.
func (m *Matched) warnings() []fit.Warning {
	return append(append([]fit.Warning{}, m.Notes...), m.Warnings...)
}
