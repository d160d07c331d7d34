package job

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

// difference is one condition in which two lots are unlike.
type difference struct {
	what      string // "circuit"
	ref, cand string // in words
	hint      string // what to do about it
}

type differences []difference

// failure refuses lots that were not measured alike, with what differs.
func (ds differences) failure(ref, cand *report.Sheet) error {
	var words []string
	for _, d := range ds {
		words = append(words, fmt.Sprintf("%s %s against %s", d.what, d.ref, d.cand))
	}
	return failed(ds[0].hint, "lots %q and %q were not measured alike: %s; a shift would be the bench's as well", ref.Lot.Name, cand.Lot.Name, strings.Join(words, "; "))
}

// otherDrain is the share by which drain voltages may differ. With a drain current
// that rises by 1 to 2 % per volt it is some 2 mV of gate voltage at 10 V
// (judgement).
const otherDrain = 0.05

// otherTemp is the difference of temperature that is worth a word: 1 to 4 mV at the
// slopes of [fit.UsualSlope].
const otherTemp = 0.5 // K

// unlikeLots says in what two lots were not measured alike so that their gate
// voltages may not be compared: circuit, drain voltage, dc or pulsed, currents of
// spots, temperature. The definition of the threshold is the same by construction,
// gate voltage at one current, read from both lots by the same fit. Warnings tell
// what is not known, and other meter ranges: their offsets and gains differ within
// the accuracy statements, which the common error of the lots holds.
func unlikeLots(ref, cand *report.Sheet, by fit.Key, corrected bool) (out differences, warnings []fit.Warning) {
	r, c := seenOf(ref, by), seenOf(cand, by)
	warn := func(code, format string, args ...any) {
		warnings = append(warnings, fit.Warning{Code: code, Text: fmt.Sprintf(format, args...)})
	}
	for _, s := range []*report.Sheet{ref, cand} {
		if w, ok := unlike(s); ok {
			warn(w.Code, "lot %s: %s", s.Lot.Name, w.Text)
		}
	}
	again := "gatesill sweep measures one of them again as the other was"
	switch {
	case !slices.Equal(r.circuits, c.circuits):
		hint := again
		for _, s := range []struct {
			sheet *report.Sheet
			seen  seen
		}{{ref, r}, {cand, c}} {
			if slices.Equal(s.seen.circuits, []string{""}) {
				hint = "gatesill import " + Quote(s.sheet.Lot.Name) + " FILE --circuit load|diode|fixed --again says how it was measured"
			}
		}
		out = append(out, difference{"circuit", circuitList(r.circuits), circuitList(c.circuits), hint})
	case slices.Equal(r.circuits, []string{""}):
		warn(fit.CodeNoCircuit, "the circuit is given for neither lot: that both were measured in the same one is taken for granted")
	}
	for _, circuit := range r.circuits {
		a, b := r.drain[circuit], c.drain[circuit]
		if slices.Contains(c.circuits, circuit) && math.Abs(a-b) > otherDrain*max(a, b) {
			out = append(out, difference{"V_DS", report.FormatTwoDigits(a, "V"), report.FormatTwoDigits(b, "V"), again})
		} else if slices.Contains(c.circuits, circuit) && math.IsNaN(a) != math.IsNaN(b) {
			word := func(x float64) string {
				if math.IsNaN(x) {
					return "not given"
				}
				return report.FormatTwoDigits(x, "V")
			}
			out = append(out, difference{"V_DS", word(a), word(b), "gatesill import LOT FILE --vds or --vdd with --rl, --again gives what is missing"})
		}
	}
	switch both := len(r.kinds) > 0 && len(c.kinds) > 0; {
	case both && !slices.Equal(r.kinds, c.kinds):
		out = append(out, difference{"current", strings.Join(r.kinds, " and "), strings.Join(c.kinds, " and "), again})
	case !both && slices.Contains(append(r.kinds, c.kinds...), "pulsed"):
		warn(fit.CodeUnlikeConditions, "one lot was measured pulsed, and of the other that is not known: a device warms up under a steady current")
	}
	if len(r.spots) > 0 && len(c.spots) > 0 && !slices.ContainsFunc(r.spots, func(x float64) bool { return len(withCurrent(c.spots, x)) == len(c.spots) }) {
		out = append(out, difference{"spot current", currentList(r.spots), currentList(c.spots), again})
	}
	switch d := c.temp - r.temp; {
	case math.IsNaN(r.temp) != math.IsNaN(c.temp):
		name := ref.Lot.Name
		if math.IsNaN(c.temp) {
			name = cand.Lot.Name
		}
		warn(fit.CodeUnlikeConditions, "the temperature of lot %s is not known, so that what it shifts is not known either", name)
	case math.Abs(d) > warmer && !corrected:
		out = append(out, difference{"temperature", degrees(r.temp), degrees(c.temp), "--tempco -4mV/K takes a slope that you know off the shift"})
	case math.Abs(d) > otherTemp && !corrected:
		warn(fit.CodeUnlikeConditions, "lot %s was %.2g K %s: at some %s that alone shifts it by %.1g to %.2g mV; --tempco takes it off",
			cand.Lot.Name, math.Abs(d), map[bool]string{true: "warmer", false: "colder"}[d > 0], fit.UsualSlope, 1e3*fit.UsualSlopeLow*math.Abs(d), 1e3*fit.UsualSlopeHigh*math.Abs(d))
	}
	if r.tempOf != "" && c.tempOf != "" && r.tempOf != c.tempOf {
		warn(fit.CodeUnlikeConditions, "the temperature is that of the %s in lot %s and of the %s in lot %s", r.tempOf, ref.Lot.Name, c.tempOf, cand.Lot.Name)
	}
	if r.gateTop > 0 && c.gateTop > 0 && r.gateTop != c.gateTop {
		warn(fit.CodeRangeEdge, "the gate voltage was read on the range to %s in lot %s and to %s in lot %s: their gains and offsets may differ within the accuracy statement",
			report.FormatGiven(r.gateTop, "V"), ref.Lot.Name, report.FormatGiven(c.gateTop, "V"), cand.Lot.Name)
	}
	return out, warnings
}

// seen is what the sweeps of a lot that count were taken under.
type seen struct {
	circuits []string           // each once, sorted; "" not given
	drain    map[string]float64 // V, median magnitude of V_DS at the current compared at, by circuit; NaN: not given, or not held
	kinds    []string           // "dc", "pulsed"; those not known left out
	spots    []float64          // A; nil: curves
	temp     float64            // °C; NaN: not known
	tempOf   string             // "" not known, or several
	gateTop  float64            // V, range of the gate meter behind most readings; 0: not known
}

func seenOf(s *report.Sheet, by fit.Key) seen {
	out := seen{drain: map[string]float64{}, temp: lotTemperature(s)}
	out.spots, _ = spotCurrents(s)
	at := s.TestCurrent
	if by == fit.KeyVgsIdle {
		at = s.IdleCurrent
	}
	drain, tops := map[string][]float64{}, map[float64]int{}
	var of []string
	counted(s, func(sw *report.Sweep) {
		c := &sw.Condition
		circuit := string(c.Circuit)
		out.circuits = append(out.circuits, circuit)
		if c.Pulsed != "" {
			out.kinds = append(out.kinds, c.Pulsed)
		}
		if c.TempOf != "" {
			of = append(of, c.TempOf)
		}
		if v := drainAt(sw, at); !math.IsNaN(v) {
			drain[circuit] = append(drain[circuit], v)
		}
		read := sw.Result.ReadTest
		if by == fit.KeyVgsIdle {
			read = sw.Result.ReadIdle
		}
		if t := read.Gate.Top; t > 0 && !math.IsInf(t, 0) {
			tops[t]++
		}
	})
	out.circuits, out.kinds, of = each(out.circuits), each(out.kinds), each(of)
	if len(of) == 1 {
		out.tempOf = of[0]
	}
	for _, c := range out.circuits {
		out.drain[c] = median(drain[c])
	}
	for t, n := range tops {
		if best := tops[out.gateTop]; n > best || n == best && t < out.gateTop {
			out.gateTop = t
		}
	}
	return out
}

// drainAt is the magnitude of V_DS at a current as far as the conditions tell: the
// voltage held, given or read, or what R_L leaves of V_DD. NaN where they do not, and with the
// drain tied to the gate.
func drainAt(sw *report.Sweep, current float64) float64 {
	c := &sw.Condition
	read := func(given record.Num, q record.Quantity) float64 {
		if x, ok := given.Get(); ok {
			return math.Abs(x)
		}
		return math.Abs(median(slices.DeleteFunc(slices.Clone(sw.Values(q)), math.IsNaN)))
	}
	switch c.Circuit {
	case record.Fixed:
		return read(c.VDS, record.VD)
	case record.Load:
		return read(c.VDD, record.VDD) - current*c.RL.Float()
	}
	return math.NaN()
}

// each lists what occurs, once and sorted.
func each(words []string) []string {
	slices.Sort(words)
	return slices.Compact(words)
}

func circuitList(circuits []string) string {
	words := make([]string, len(circuits))
	for i, c := range circuits {
		words[i] = first(c, "not given")
	}
	return strings.Join(words, " and ")
}

func currentList(list []float64) string {
	words := make([]string, len(list))
	for i, x := range list {
		words[i] = report.FormatGiven(x, "A")
	}
	return strings.Join(words, " and ")
}

func degrees(t float64) string {
	if math.IsNaN(t) {
		return "not known"
	}
	return report.FormatGiven(math.Round(t*10)/10, "°C")
}
