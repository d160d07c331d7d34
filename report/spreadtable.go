package report

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// SpreadTable writes the spread of a lot for people: one line a quantity with
// its n, the limits behind the flags, then every flagged device with its
// reasons in sentences.
func SpreadTable(w io.Writer, s Sheet, style Style) error {
	p := &printer{w: w}
	by := s.Spread.SortedBy
	if by == "" {
		by = s.SortedBy
	}
	p.line("%s", s.SortedPhrase(by))
	repeatabilityLine(p, s, by, style)
	keys := spreadKeys(s.Spread)
	if len(keys) == 0 {
		p.line("No device of the lot has a value: there is no spread to show.")
		specBlock(p, s, style)
		notMeasured(p, s, style)
		lotWarnings(p, s, s.Spread.Warnings, style)
		return p.err
	}
	p.line("")
	dropped := p.grid(summaryGrid(s, keys, style))
	if len(s.Spread.Limits) > 0 {
		p.line("")
		p.grid(limitGrid(s, style))
	}
	p.line("")
	if len(dropped) > 0 {
		wrapped(p, "", "  ", "No room for: "+strings.Join(dropped, ", ")+". A wider terminal or --json shows them.", style.Width)
	}
	if s.Spread.Estimator != "" {
		text := "Robust sd: 1.4826 × MAD, which a few odd devices cannot widen (gatesill help robust)."
		if anyAbove(s.Spread) {
			text += " Devices that never reach the current count as above every value in medians."
		}
		wrapped(p, "", "", text, style.Width)
	}
	warnings := s.Spread.Warnings
	if sp := s.Spread.Split; sp != nil {
		warnings = slices.DeleteFunc(slices.Clone(warnings), func(w fit.Warning) bool { return w.Text == sp.Text })
		wrapped(p, "", "  ", Clean(Sentence(sp.Text)), style.Width)
		wrapped(p, "  lower: ", "    ", namesWords(sp.Low, 40), style.Width)
		wrapped(p, "  upper: ", "    ", namesWords(sp.High, 40), style.Width)
		for _, o := range sp.Origins {
			wrapped(p, "  by "+o.Of+": ", "    ", Clean(OriginWords(o)), style.Width)
		}
	}
	lotWarnings(p, s, warnings, style)
	flags(p, s, style)
	specBlock(p, s, style)
	doubts(p, s, style)
	notMeasured(p, s, style)
	return p.err
}

// anyAbove reports whether a device never reached the current of a summary.
func anyAbove(sp lot.Spread) bool {
	for _, m := range sp.Summary {
		if m.Above > 0 {
			return true
		}
	}
	return false
}

// spreadKeys are the quantities with a summary, in the order of fit.Keys.
func spreadKeys(sp lot.Spread) []fit.Key {
	var keys []fit.Key
	for _, k := range fit.Keys {
		if m, ok := sp.Summary[k]; ok && (m.N > 0 || m.Above > 0) {
			keys = append(keys, k)
		}
	}
	return keys
}

// StandardError is the standard uncertainty of the mean of a summary, sd/√n;
// NaN where it cannot be had. It decides the digits of mean and sd.
func StandardError(m lot.Summary) float64 {
	if m.N < 2 || !(m.SD > 0) {
		return math.NaN()
	}
	return m.SD / math.Sqrt(float64(m.N))
}

// SummaryDigits is the uncertainty that decides the digits of median, robust
// sd, least and greatest: the smaller of sd/√n and robust sd/√n, so that one
// value far off does not take the digits from all others. NaN where neither can
// be had.
func SummaryDigits(m lot.Summary) float64 {
	se := StandardError(m)
	if m.N < 2 || !(m.RobustSD > 0) {
		return se
	}
	robust := m.RobustSD / math.Sqrt(float64(m.N))
	if se < robust {
		return se
	}
	return robust
}

// SummaryScale is the prefix for all numbers of one summary: that of the median,
// or of the robust sd where the median lies within it. Mean and greatest value,
// which one value far off moves, have a say only where there is no median.
func SummaryScale(k fit.Key, m lot.Summary) Scale {
	size := math.Abs(m.Median)
	if m.RobustSD > size {
		size = m.RobustSD
	}
	if size > 0 && isNumber(size) {
		return ScaleOf(KeyOf(k).Unit, size)
	}
	return ScaleOf(KeyOf(k).Unit, m.Mean, m.Max)
}

// limitScale is the prefix for limits: that of the summary beside them, or
// their own where there is none.
func limitScale(k fit.Key, m lot.Summary, l lot.Limit) Scale {
	if m.N > 0 {
		return SummaryScale(k, m)
	}
	return ScaleOf(KeyOf(k).Unit, l.Low, l.High)
}

// LimitTexts writes the two limits of a quantity with the digits of the spread
// beside them, and the unit with its prefix.
func LimitTexts(k fit.Key, m lot.Summary, l lot.Limit) (low, high, unit string) {
	sc := limitScale(k, m, l)
	se := SummaryDigits(m)
	if !isNumber(se) {
		se = (l.High - l.Low) / 8 // no spread to go by: two digits of a quarter of half the range
	}
	return sc.FormatNumber(l.Low, se, 0), sc.FormatNumber(l.High, se, 0), sc.Unit(KeyOf(k).Unit)
}

func summaryGrid(s Sheet, keys []fit.Key, style Style) grid {
	heads := []string{"n", "above", "median", "robust sd", "mean", "± (mean)", "sd", "least", "greatest"}
	cells := make([][]string, len(heads))
	var names, units []string
	for _, k := range keys {
		m := s.Spread.Summary[k]
		sc := SummaryScale(k, m)
		se := StandardError(m)
		step := SummaryDigits(m)
		num := func(x float64) string { return sc.FormatNumber(x, step, 0) }
		plain := func(x float64) string { return sc.FormatNumber(x, se, 0) }
		seText := NotAvailable
		if d, ok := DecimalsFor(sc.Of(se)); ok {
			seText = fixed(sc.Of(se), d)
		}
		names = append(names, s.KeyPhrase(k))
		units = append(units, sc.Unit(KeyOf(k).Unit))
		for i, text := range []string{
			strconv.Itoa(m.N), strconv.Itoa(m.Above), num(m.Median), num(m.RobustSD), plain(m.Mean), seText, plain(m.SD), num(m.Min), num(m.Max),
		} {
			cells[i] = append(cells[i], text)
		}
	}
	// Each line is one quantity with its own unit: the prefix holds for the line.
	g := grid{style: style, cols: []column{{head: "quantity", cells: names, wrap: 20}, {head: "unit", cells: units}}}
	ranks := []int{0, 0, 0, 0, 1, 1, 2, 3, 3}
	for i, h := range heads {
		g.cols = append(g.cols, column{head: h, cells: cells[i], right: true, rank: ranks[i]})
	}
	return g
}

func limitGrid(s Sheet, style Style) grid {
	var names, units, lows, highs, ks, bases []string
	for _, k := range KeysIn(s.Spread.Limits) {
		l := s.Spread.Limits[k]
		m := s.Spread.Summary[k]
		low, high, unit := LimitTexts(k, m, l)
		names, units = append(names, KeyOf(k).Symbol), append(units, unit)
		lows, highs = append(lows, low), append(highs, high)
		ks = append(ks, kWords(l.K))
		bases = append(bases, Clean(l.Basis))
	}
	return grid{style: style, cols: []column{
		{head: "flagged outside", cells: names}, {head: "unit", cells: units},
		{head: "low", cells: lows, right: true}, {head: "high", cells: highs, right: true},
		{head: "× robust sd", cells: ks, right: true}, {head: "basis", cells: bases},
	}}
}

func kWords(k float64) string {
	if !isNumber(k) {
		return NotAvailable
	}
	return "± " + strconv.FormatFloat(k, 'g', 3, 64)
}

// flags lists the flagged devices with their reasons.
func flags(p *printer, s Sheet, style Style) {
	total, flagged := len(s.Spread.Devices), 0
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			flagged++
		}
	}
	p.line("")
	if flagged == 0 {
		p.line("No device is flagged (of %d).", total)
		return
	}
	p.line("%s", style.paint(fmt.Sprintf("Flagged: %d of %d", flagged, total), bold))
	for _, v := range s.Spread.Devices {
		if !v.Flagged {
			continue
		}
		name := Clean(v.Name)
		for _, r := range v.Reasons {
			wrapped(p, "  "+style.paint(name, red)+": ", "    ", fmt.Sprintf("%s (%s)", Clean(s.ReasonText(r)), Clean(r.Code)), style.Width)
		}
		if len(v.Reasons) == 0 {
			p.line("  %s", style.paint(name, red))
		}
	}
}

// OriginWords tells how the groups of a split lie to date codes or tubes, and whether
// they follow them.
func OriginWords(o lot.Origin) string {
	const most = 6
	var parts []string
	for i, g := range o.Groups {
		if i == most {
			parts = append(parts, fmt.Sprintf("and %d more", len(o.Groups)-most))
			break
		}
		name := g.Name
		if name == "" {
			name = NotGiven
		}
		parts = append(parts, fmt.Sprintf("%s has %d lower, %d upper", name, g.Low, g.High))
	}
	text := strings.Join(parts, "; ")
	switch {
	case o.Follows:
		return text + fmt.Sprintf(": the groups follow the %s (p = %.2g for so good an agreement by chance)", o.Of, o.P)
	case isNumber(o.P):
		return text + fmt.Sprintf(": not shown to go with the groups (p = %.2g)", o.P)
	}
	return text
}
