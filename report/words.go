package report

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/store/record"
)

// KeyInfo is how one quantity is called.
type KeyInfo struct {
	Symbol string // "V_GS(th)"; what follows _ stands lower, up to the next blank
	Unit   string // SI unit without prefix, as people read it: "V", "A/V²"
	Suffix string // the unit as it ends the key: "V", "A_per_V2"
	Name   string // in words, without article
}

var keyInfos = map[fit.Key]KeyInfo{
	fit.KeyVgsth:   {"V_GS(th)", "V", "V", "threshold voltage"},
	fit.KeyVgsIdle: {"V_GS(idle)", "V", "V", "gate bias at the idle current"},
	fit.KeyVt:      {"V_T", "V", "V", "extrapolated threshold"},
	fit.KeyBeta:    {"beta", "A/V²", "A_per_V2", "gain factor"},
	fit.KeyTheta:   {"theta", "1/V", "per_V", "mobility degradation"},
	fit.KeyGmMax:   {"g_m(max)", "S", "S", "greatest transconductance"},
	fit.KeyGmIdle:  {"g_m(idle)", "S", "S", "transconductance at the idle current"},
	fit.KeyIdss:    {"I_D(off)", "A", "A", "drain leakage"},
	keySpan:        {"gate span", "V", "V", "gate span from the test current to the idle current"},
	lot.KeyCurve:   {"curve", "V", "V", "departure of the curve from what threshold and gain let expect"},
}

// keySpan is a quantity that only limits of a spread know, as is [lot.KeyCurve].
const keySpan = lot.KeySpan

// KeysIn lists the keys of a map by quantity in the order in which they are
// shown: those of fit.Keys first, then the others by name.
func KeysIn[V any](m map[fit.Key]V) []fit.Key {
	var keys, others []fit.Key
	for _, k := range fit.Keys {
		if _, ok := m[k]; ok {
			keys = append(keys, k)
		}
	}
	for k := range m {
		if !slices.Contains(fit.Keys, k) {
			others = append(others, k)
		}
	}
	slices.Sort(others)
	return append(keys, others...)
}

// KeyOf tells how a quantity is called. A key that is not known keeps its own
// name and has no unit.
func KeyOf(k fit.Key) KeyInfo {
	if info, ok := keyInfos[k]; ok {
		return info
	}
	return KeyInfo{Symbol: string(k), Name: string(k)}
}

// Wording is how a state of a device is told.
type Wording struct {
	Word     string // one or two words, for a column
	Sentence string // what it means
	Next     string // what to do next; "" when there is nothing to do
}

var wordings = map[fit.State]Wording{
	fit.Measured: {"measured",
		"The device has a value.", ""},
	fit.Above: {"above",
		"The device never reaches the current within its sweep; it counts as above every measured value.",
		"Sweep it to a higher gate voltage, within the limits of the part."},
	fit.Open: {"open",
		"No drain current flows at any gate voltage.",
		"Check clips, leads and the drain supply, then measure again; a second blank reading means an open or dead device."},
	fit.Shorted: {"shorted",
		"Drain current flows at every gate voltage; the gate does not control it.",
		"Check the clips for a bridge, then measure again; do not fit the device."},
	fit.WrongWayRound: {"wrong way round",
		"The current does not follow the gate as it does in a part of this channel.",
		"Check drain and source in the fixture, the polarity of the leads and the channel given for the part."},
	fit.Declined: {"declined",
		"There are readings, but no number that should be believed.",
		"Read the reason, then measure again with more points near the current wanted."},
	fit.Excluded: {"excluded",
		"Left out of every statistic by the user.", ""},
}

// WordsOf tells how a state is worded. An unknown or empty state means that
// nothing was measured yet.
func WordsOf(s fit.State) Wording {
	if w, ok := wordings[s]; ok {
		return w
	}
	return Wording{"not measured", "There is no sweep of the device yet.", "Measure it."}
}

// Reason tells in one sentence why a device has no value; "" for a
// measured one.
func (d Device) Reason() string {
	switch {
	case d.Excluded || d.Result.State == fit.Excluded:
		if d.Device.Why != "" {
			return "Excluded: " + d.Device.Why
		}
		return "Excluded by the user."
	case d.Result.State == fit.Measured:
		return ""
	case d.Result.Why != "":
		return d.Result.Why
	}
	return WordsOf(d.Result.State).Sentence
}

// State is the state of the device as the lot sees it: excluded wins.
func (d Device) State() fit.State {
	if d.Excluded {
		return fit.Excluded
	}
	return d.Result.State
}

// SymbolWords is the symbol of a quantity, with words before it where the symbol
// alone would be misread: the current at the off voltage is no I_DSS, which of a
// depletion part is the current at V_GS = 0.
func SymbolWords(k fit.Key) string {
	info := KeyOf(k)
	if k == fit.KeyIdss {
		return info.Name + " " + info.Symbol
	}
	return info.Symbol
}

// LeakageNote explains the symbol where it stands alone.
const LeakageNote = "I_D(off) is the drain leakage: the drain current at the off voltage."

// KeyPhrase names a quantity of this lot with its current:
// "V_GS(th) at 1 mA", "V_GS at the idle current of 250 mA".
func (s *Sheet) KeyPhrase(k fit.Key) string {
	switch k {
	case fit.KeyVgsth:
		if isNumber(s.TestCurrent) {
			return "V_GS(th) at " + FormatGiven(s.TestCurrent, "A")
		}
	case fit.KeyVgsIdle:
		return "V_GS at the idle current" + of(s.IdleCurrent)
	case fit.KeyGmIdle:
		return "g_m at the idle current" + of(s.IdleCurrent)
	case fit.KeyIdss:
		return SymbolWords(k)
	}
	return KeyOf(k).Symbol
}

func of(current float64) string {
	if !isNumber(current) {
		return ""
	}
	return " of " + FormatGiven(current, "A")
}

// SortedLine is the first line of every output about a lot: the quantity that
// sorting uses and where its current comes from.
func (s *Sheet) SortedLine() string { return s.SortedPhrase(s.SortedBy) }

// SortedPhrase says that by is the quantity sorted by, and where its current
// comes from.
func (s *Sheet) SortedPhrase(by fit.Key) string {
	text := "Sorted by " + s.KeyPhrase(by)
	if from := s.currentFrom(by); from != "" {
		text += " (" + from + ")"
	}
	return text + "."
}

func (s *Sheet) currentFrom(by fit.Key) string {
	if by != fit.KeyVgsth {
		return ""
	}
	switch s.TestBasis {
	case "part":
		return "test current of the part"
	case "--at":
		return "current given with --at"
	case "spot list":
		return "current of the spot list"
	case "default":
		return "no test current given: the default"
	}
	return Clean(s.TestBasis)
}

// Advice is what there is to say of a warning code: its meaning and what to do
// next, empty when the sheet does not explain it.
func (s *Sheet) Advice(code string) fit.CodeInfo {
	for _, c := range s.Codes {
		if c.Code == code {
			return c
		}
	}
	return fit.CodeInfo{Code: code}
}

// CircuitWords tells how the drain was fed.
func CircuitWords(c record.Circuit) string {
	switch c {
	case record.Load:
		return "load: drain fed through R_L from V_DD"
	case record.Diode:
		return "diode: drain tied to gate"
	case record.Fixed:
		return "fixed: V_DS held"
	case record.NoCircuit:
		return ""
	}
	return string(c)
}

// ConditionWords lists what is known of a condition, "R_L 10 Ω ± 1 %" and so
// on, in a fixed order; what is not known is left out.
func ConditionWords(c record.Condition) []string {
	var list []string
	add := func(label string, n record.Num, unit string) {
		if x, ok := n.Get(); ok {
			list = append(list, label+" "+FormatGiven(x, unit))
		}
	}
	if rl, ok := c.RL.Get(); ok {
		text := "R_L " + FormatGiven(rl, "Ω")
		if tol, ok := c.RLTol.Get(); ok {
			text += " ± " + FormatGiven(tol*100, "%")
		}
		list = append(list, text)
	}
	add("R_L rated", c.RLRating, "W")
	add("V_DD", c.VDD, "V")
	add("V_DS", c.VDS, "V")
	add("spot current", c.SpotCurrent, "A")
	switch c.Ammeter {
	case "":
	case "none":
		list = append(list, "no ammeter")
	default:
		list = append(list, "ammeter in the "+c.Ammeter)
	}
	add("burden", c.Burden, "Ω")
	if c.GateReturn != "" {
		list = append(list, "gate meter to "+c.GateReturn)
	}
	if c.Pulsed != "" {
		list = append(list, c.Pulsed)
	}
	add("pulse width", c.PulseWidth, "s")
	if duty, ok := c.PulseDuty.Get(); ok {
		list = append(list, "duty "+FormatGiven(duty*100, "%"))
	}
	add("pulse delay", c.PulseDelay, "s")
	add("dwell", c.Dwell, "s")
	if t, ok := c.Temp.Get(); ok {
		text := FormatGiven(t, "°C")
		if c.TempOf != "" {
			text += " " + c.TempOf
		}
		list = append(list, text)
	}
	return list
}

// AmountWords writes an amount as it was set: "50 mV", "10 %", "2 u".
func AmountWords(a record.Amount) string {
	switch a.Unit {
	case "":
		return ""
	case "u":
		return strconv.FormatFloat(a.Value, 'g', -1, 64) + " u"
	}
	return FormatGiven(a.Value, a.Unit)
}

// Sentence gives words the form of a sentence, for standing beside others: a
// capital at its head, unless the first word is a symbol, and a mark at its end.
func Sentence(words string) string {
	words = strings.TrimSpace(words)
	if words == "" {
		return ""
	}
	first, _, _ := strings.Cut(words, " ")
	if strings.Trim(first, "abcdefghijklmnopqrstuvwxyz,:") == "" {
		words = strings.ToUpper(words[:1]) + words[1:]
	}
	if !strings.ContainsAny(words[len(words)-1:], ".!?:") {
		words += "."
	}
	return words
}

// namesWords lists names, at most limit of them.
func namesWords(names []string, limit int) string {
	rest := 0
	if len(names) > limit {
		rest = len(names) - limit
		names = names[:limit]
	}
	clean := make([]string, len(names))
	for i, n := range names {
		clean[i] = Clean(n)
	}
	text := strings.Join(clean, ", ")
	if rest > 0 {
		text += fmt.Sprintf(" and %d more", rest)
	}
	return text
}

// count writes "1 device", "3 devices".
func count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}

func isNumber(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
