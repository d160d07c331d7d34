package lot

import (
	"fmt"
	"math"
	"strconv"

	"gatesill/fit"
)

// names of the quantities in sentences.
var names = map[fit.Key]string{
	fit.KeyVgsth:   "V_GS(th)",
	fit.KeyVgsIdle: "gate bias at the idle current",
	fit.KeyVt:      "extrapolated threshold",
	fit.KeyBeta:    "gain factor",
	fit.KeyTheta:   "mobility degradation",
	fit.KeyGmMax:   "largest transconductance",
	fit.KeyGmIdle:  "transconductance at the idle current",
	fit.KeyIdss:    "drain leakage",
	KeySpan:        "gate span from the test current to the idle current",
}

// NameOf is the quantity as it stands in a sentence.
func NameOf(k fit.Key) string {
	if n, ok := names[k]; ok {
		return n
	}
	if isCurve(k) {
		return "the whole curve"
	}
	return string(k)
}

// show writes a value of a quantity with its unit.
func show(k fit.Key, v float64) string {
	switch k {
	case fit.KeyBeta:
		return engineering(v, "A/V²")
	case fit.KeyGmMax, fit.KeyGmIdle:
		return engineering(v, "S")
	case fit.KeyIdss:
		return engineering(v, "A")
	case fit.KeyTheta:
		return short(v) + " 1/V"
	case KeySpan:
		return millivolts(v)
	case fit.KeyVgsth, fit.KeyVgsIdle, fit.KeyVt:
		return volts(v)
	}
	return short(v)
}

func volts(v float64) string { return fmt.Sprintf("%.3f V", v) }

// millivolts writes a difference of voltages.
func millivolts(v float64) string {
	mv := v * 1e3
	if math.Abs(mv) < 9.95 {
		return fmt.Sprintf("%.1f mV", mv)
	}
	return fmt.Sprintf("%.0f mV", mv)
}

// short writes three significant digits.
func short(v float64) string {
	e := strconv.FormatFloat(v, 'e', 2, 64) // rounds first: 99.99 has the digits of 100
	r, err := strconv.ParseFloat(e, 64)
	if err != nil {
		return e
	}
	switch a := math.Abs(r); {
	case a >= 100 && a < 1e9:
		return fmt.Sprintf("%.0f", r)
	case a >= 10 && a < 100:
		return fmt.Sprintf("%.1f", r)
	case a >= 1 && a < 10:
		return fmt.Sprintf("%.2f", r)
	}
	return strconv.FormatFloat(r, 'g', 3, 64)
}

// engineering writes three digits with a prefix.
func engineering(v float64, unit string) string {
	a := math.Abs(v)
	for _, p := range []struct {
		from   float64
		prefix string
	}{{1, ""}, {1e-3, "m"}, {1e-6, "µ"}, {1e-9, "n"}, {1e-12, "p"}} {
		if a >= p.from*0.9995 && a < 1e6 {
			return short(v/p.from) + " " + p.prefix + unit
		}
	}
	return strconv.FormatFloat(v, 'g', 3, 64) + " " + unit
}

// percent writes a fraction.
func percent(f float64) string {
	if p := 100 * f; math.Abs(p) < 9.95 {
		return fmt.Sprintf("%.1f %%", p)
	}
	return fmt.Sprintf("%.0f %%", 100*f)
}

// offSentence says how far device i lies from its family and what that is
// compared with.
func offSentence(c *column, b *band, i int, whose, basis string) string {
	v, mid := c.v[i], c.raw(b.mid)
	way := "above"
	if c.x[i] < b.mid {
		way = "below"
	}
	var off, spread string
	if c.log {
		v = math.Abs(v)
		off, spread = percent(math.Abs(v/mid-1)), percent(b.sd)
	} else {
		off, spread = millivolts(math.Abs(v-mid)), millivolts(b.sd)
		if c.sign < 0 {
			way = "from" // above and below would mislead with negative voltages
		}
	}
	text := fmt.Sprintf("%s is %s, %s %s %s median of %s", NameOf(c.key), show(c.key, v), off, way, whose, show(c.key, mid))
	far := math.Abs(b.distance(c, i))
	if far <= b.k {
		l := b.limit(c)
		return fmt.Sprintf("%s: outside %s to %s, where the others of a lot like this lie", text, show(c.key, l.Low), show(c.key, l.High))
	}
	return fmt.Sprintf("%s: %s %s of %s, beyond the limit of %s", text, short(far), basis, spread, short(b.k))
}

// sentence tells of two groups in one lot.
func (g *twoGroups) sentence() string {
	c := g.col
	text := fmt.Sprintf("two populations by %s: %s and %s with a gap of %s between them", NameOf(c.key),
		groupWords(c, g.lower), groupWords(c, g.upper), gapWords(c, g.parts))
	if g.also != nil {
		text += fmt.Sprintf(", and %s parts them in the same way", NameOf(g.also.key))
	}
	text += fmt.Sprintf(" (evidence %s, where %s is needed: fewer than 1 %% of lots of one population have as much)", short(g.parts.score), short(g.bar))
	return text + "; this is not evidence of origin: stop, ask the source, measure all devices"
}

// groupWords are the size of a group and its range.
func groupWords(c *column, in []bool) string {
	n, low, high := 0, math.Inf(1), math.Inf(-1)
	for i, yes := range in {
		if yes {
			v := c.v[i]
			if c.log {
				v = math.Abs(v)
			}
			n++
			low, high = min(low, v), max(high, v)
		}
	}
	return fmt.Sprintf("%d devices at %s to %s", n, show(c.key, low), show(c.key, high))
}

func gapWords(c *column, p parting) string {
	if c.log && c.key != KeySpan {
		return percent(math.Exp(p.above-p.below) - 1)
	}
	return millivolts(math.Abs(c.raw(p.above) - c.raw(p.below)))
}

// estimatorWords names the robust spread and says why it is used.
func estimatorWords(n int) string {
	switch {
	case n < 3:
		return robustSpread
	case n <= 10:
		return robustSpread + "; " + blindRule(n)
	}
	return robustSpread + "; " + robustReason
}

const (
	robustSpread = "robust spread = 1.4826 × MAD, the median distance from the median, which a few odd devices cannot widen (and not below what the readings themselves are uncertain by)"
	robustReason = "an odd device widens the ordinary standard deviation and hides itself in it; limits suppose a lot spread like a normal distribution, one with heavier tails gets more flags"
)

// blindRule says what a rule by ordinary standard deviations cannot see in n devices.
func blindRule(n int) string {
	return fmt.Sprintf("a plain 3-sigma rule is blind here, because with %d devices none can lie more than %.2f ordinary standard deviations from the mean",
		n, float64(n-1)/math.Sqrt(float64(n)))
}

// RobustWords explains the robust spread, a sentence each.
func RobustWords() []string {
	return []string{
		robustSpread, robustReason,
		fmt.Sprintf("a plain 3-sigma rule is blind among few: of 10 devices none can lie more than %.2f ordinary standard deviations from the mean", 9/math.Sqrt(10)),
		"devices that never reach the current count as above every value in medians",
	}
}
