package page

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/report"
	"gatesill/store/record"
)

// compared is the section on the comparison with a reference lot.
type compared struct {
	Reference string
	Class     string // of the verdict
	Shape     string // beside its word
	Verdict   string
	Sentence  template.HTML
	Beside    template.HTML // which counts where tests differ; "": they do not
	Tiles     []tile
	Alerts    []alert // what weighs on the verdict itself
	Notes     []alert
	Interval  *figure
	Steps     *figure
	Curves    *curvesFigure
	NoCurves  template.HTML
	Shift     *figure
	Says      []group // what was done and what it comes to, in sentences
	Counts    *table
	Secondary *table
	Options   *table
	Pairs     *table
	Folded    bool // the pairs are many
	Unpaired  []group
	Facts     []field // what the reference's numbers were made from
	Taken     *table  // conditions of both lots
	Meters    *table  // of the reference
}

// verdicts are told by word and shape, the frame of each drawn in its own way.
var verdicts = map[compare.Verdict]struct{ word, shape, class string }{
	compare.InsideMargin:  {"Inside the margin", "✓", "inside"},
	compare.OutsideMargin: {"Outside the margin", "✕", "outside"},
	compare.Differs:       {"The lots differ", "≠", "outside"},
	compare.NoDifference:  {"No difference seen", "○", "unseen"},
	compare.TooFew:        {"Too few to tell", "?", "few"},
}

// pair is the comparison with what several parts of its section look up.
type pair struct {
	*known
	c      *compare.Comparison
	ref    *report.Sheet
	lots   [2]*report.Sheet // reference, this one
	unit   string
	scale  report.Scale
	step   float64 // by which shifts are told apart: decides their digits
	margin bool
	from   string // where the margin comes from
}

func newPair(k *known) *pair {
	c := &k.Compared.Comparison
	p := &pair{known: k, c: c, ref: k.Compared.Reference, unit: report.KeyOf(c.Quantity).Unit, margin: isNumber(c.Margin) && c.Margin > 0, from: k.Compared.MarginFrom}
	if p.ref == nil {
		p.ref = &report.Sheet{}
	}
	p.lots = [2]*report.Sheet{p.ref, k.Sheet}
	p.step = (c.High - c.Low) / 4
	p.scale = report.ScaleOf(p.unit, largest(c.Shift, c.Low, c.High, c.Margin))
	return p
}

// largest is the greatest size among numbers, 0 when there is none.
func largest(list ...float64) float64 {
	m := 0.0
	for _, x := range list {
		if isNumber(x) {
			m = math.Max(m, math.Abs(x))
		}
	}
	return m
}

// bare writes a shift with its sign and without its unit.
func (p *pair) bare(x float64) string {
	return plus(p.scale.FormatNumber(x, p.step, 0))
}

// plus puts a plus before a number that is above 0 as it is written.
func plus(text string) string {
	if text == report.NotAvailable || strings.HasPrefix(text, "-") || strings.Trim(text, "0.") == "" {
		return text
	}
	return "+" + text
}

func (p *pair) shift(x float64) string {
	if !isNumber(x) {
		return report.NotAvailable
	}
	return p.bare(x) + " " + p.scale.Unit(p.unit)
}

func (p *pair) interval(low, high float64) string {
	if !isNumber(low) || !isNumber(high) {
		return report.NotAvailable
	}
	return p.bare(low) + " to " + p.shift(high)
}

// plusMinus writes the margin: "± 50 mV".
func (p *pair) plusMinus() string { return "± " + report.FormatPlain(p.c.Margin, math.NaN(), p.unit) }

// percent writes a level: 0.95 is "95 %".
func percent(x float64) string {
	if !isNumber(x) {
		return report.NotAvailable
	}
	return report.LevelWords(x)
}

// numbersOf is "n = 38 and 36", the reference first.
func (p *pair) numbersOf() string {
	return fmt.Sprintf("n = %d of the reference, %d of this lot", p.c.Counts[0].WithValue, p.c.Counts[1].WithValue)
}

func (v *view) compared(k *known) {
	if k.Compared == nil {
		return
	}
	p := newPair(k)
	w, ok := verdicts[p.c.Verdict]
	if !ok {
		w.word, w.shape, w.class = report.Sentence(report.Clean(string(p.c.Verdict))), "?", "few"
	}
	d := &compared{Reference: report.Clean(p.c.Reference), Class: w.class, Shape: w.shape, Verdict: w.word, Sentence: rich(report.Sentence(k.Compared.Reason()))}
	if p.c.Paired != nil && p.c.Verdict == compare.Differs {
		d.Verdict = "The readings differ" // of the same devices: nothing is said of lots
	}
	if p.c.Beside != "" {
		d.Beside = rich(report.Sentence(p.c.Beside))
	}
	lead := "Compared with lot " + p.c.Reference + ": " + string(p.c.Verdict)
	if isNumber(p.c.Shift) {
		lead += fmt.Sprintf(", shift %s (%s interval %s)", p.shift(p.c.Shift), percent(p.c.Level), p.interval(p.c.Low, p.c.High))
	}
	v.Lead = append(v.Lead, rich(lead+"."))
	p.tiles(d)
	p.alerts(d)
	p.figures(d)
	p.says(d)
	p.tables(d)
	p.pairs(d)
	p.made(d)
	v.Compared = d
}

func (p *pair) tiles(d *compared) {
	c := p.c
	d.Tiles = append(d.Tiles, tile{"shift of this lot", p.shift(c.Shift), richf("%s interval %s; n = %d and %d", percent(c.Level), p.interval(c.Low, c.High), c.Counts[0].WithValue, c.Counts[1].WithValue)})
	switch {
	case p.margin:
		d.Tiles = append(d.Tiles, tile{"margin", p.plusMinus(), richf("%s; 90 %% interval %s", p.whenSet(), p.interval(c.MarginLow, c.MarginHigh))})
	default:
		d.Tiles = append(d.Tiles, tile{"margin", "none", "whether a shift matters is not judged"})
	}
	d.Tiles = append(d.Tiles, tile{"not excluded", p.size(c.NotExcluded), richf("largest shift that the %s interval holds", percent(c.Level))})
	ratio := report.NotAvailable
	note := template.HTML("no spread of both lots")
	if isNumber(c.Spread.Value) {
		ratio = strconv.FormatFloat(c.Spread.Value, 'f', 2, 64)
		note = "this lot over the reference"
		if isNumber(c.Spread.Low) && isNumber(c.Spread.High) {
			note = richf("this lot over the reference; %s interval %.2f to %.2f", percent(c.Level), c.Spread.Low, c.Spread.High)
		}
	}
	d.Tiles = append(d.Tiles, tile{"spread ratio", ratio, note})
}

// size is a shift without its sign.
func (p *pair) size(x float64) string {
	if !isNumber(x) {
		return report.NotAvailable
	}
	return p.scale.FormatNumber(math.Abs(x), p.step, 0) + " " + p.scale.Unit(p.unit)
}

// whenSet tells in a few words when the margin was set.
func (p *pair) whenSet() string {
	switch p.c.MarginSet {
	case compare.Before:
		return "set before the first reading"
	case compare.After:
		return "set after readings were known"
	}
	return "when it was set is not known"
}

// marginTime is when the margin in use was stored, "" when it was not: it may
// have been given for this comparison only.
func (p *pair) marginTime() string {
	for _, s := range []*report.Sheet{p.lots[1], p.lots[0]} {
		m := s.Lot.Margin
		if m.IsZero() || m.Unit == "V" && math.Abs(m.Value-p.c.Margin) > 1e-9*p.c.Margin {
			continue
		}
		return s.Lot.MarginSetAt
	}
	return ""
}

func (p *pair) alerts(d *compared) {
	if p.margin && p.c.MarginSet == compare.After {
		d.Alerts = append(d.Alerts, alert{
			Text: "The margin was set after readings of this lot were known. A margin chosen with the numbers in sight can be made to fit them.",
			Next: "Let a lot that was measured after the margin was set confirm the verdict."})
	}
	own := slices.DeleteFunc(slices.Clone(p.c.Warnings), func(w fit.Warning) bool { // stands with the result
		return w.Code == fit.CodeTwoPopulations && p.lots[1].Spread.Split != nil && strings.Contains(w.Text, p.lots[1].Spread.Split.Text)
	})
	for _, w := range report.JoinWarnings(own) {
		d.Notes = append(d.Notes, alert{Text: rich(report.Sentence(w.Text)), Next: rich(p.Advice(w.Code).Next)})
	}
}

// says puts what was done and what it comes to in sentences.
func (p *pair) says(d *compared) {
	c := p.c
	say := func(head, format string, args ...any) {
		if text := strings.TrimSpace(fmt.Sprintf(format, args...)); text != "" {
			d.Says = append(d.Says, group{rich(head), rich(text)})
		}
	}
	sign := ""
	if p.negative() {
		sign = " Gate voltages of this part are below 0: a shift below 0 means that this lot needs more of it."
	}
	say("compared by", "%s. Shifts are this lot less the reference.%s", p.KeyPhrase(c.Quantity), sign)
	if isNumber(c.Shift) {
		text := fmt.Sprintf("%s, %s interval %s (%s)", p.shift(c.Shift), percent(c.Level), p.interval(c.Low, c.High), p.numbersOf())
		if c.Test != "" {
			text += ". By " + c.Test
			if isNumber(c.DF) {
				text += ", " + degrees(c.DF) + " degrees of freedom"
			}
			if isNumber(c.P) {
				text += ", p " + equals(report.ProbabilityWords(c.P))
			}
		}
		say("shift", "%s.", text)
	} else {
		say("shift", "None could be had (%s).", p.numbersOf())
	}
	if isNumber(c.Raw) {
		say("before correction", "%s, before %s.", p.shift(c.Raw), p.takenOff())
	}
	p.rule(say)
	p.risk(say)
	p.common(say)
	if isNumber(c.Spread.Value) {
		text := fmt.Sprintf("The spread of this lot is %.2f times that of the reference", c.Spread.Value)
		if isNumber(c.Spread.Low) && isNumber(c.Spread.High) {
			text += fmt.Sprintf(" (%s interval %.2f to %.2f; %s)", percent(c.Level), c.Spread.Low, c.Spread.High, p.numbersOf())
		}
		if c.SpreadTest != "" {
			text += ", by " + c.SpreadTest
		}
		say("spread", "%s. Equal spreads have the ratio 1.", text)
	}
	if b := c.Curves; b != nil {
		say("whole curves", "%s", report.Sentence(b.Text))
	}
	p.gain(say)
	p.populations(say)
	if q := c.Paired; q != nil {
		text := fmt.Sprintf("By serial, %s. %s", plural(q.Pairs, "pair"), report.Sentence(q.Why))
		if isNumber(q.SD) {
			if isNumber(q.Own.Value) {
				own, low, high, unit := report.ShiftTexts(q.Own.Value, q.Own.Low, q.Own.High, p.unit)
				text += fmt.Sprintf(" The pairs alone, with nothing taken off and without the error common to a lot: %s %s, %s interval %s to %s %s.", own, unit, percent(c.Level), low, high, unit)
			}
			text += fmt.Sprintf(" The differences scatter by %s (1 sd, n = %d).", report.FormatTwoDigits(q.SD, p.unit), q.Pairs)
		}
		say("pairing", "%s", text)
	} else {
		say("pairing", "None: the devices of the two lots are taken as different ones.")
	}
}

// degrees writes degrees of freedom with three digits, large ones whole.
func degrees(df float64) string {
	if df >= 100 && df < 1e15 {
		return strconv.FormatFloat(df, 'f', 0, 64)
	}
	return strconv.FormatFloat(df, 'g', 3, 64)
}

// equals puts a sign of equality before a number that has no sign of its own.
func equals(number string) string {
	if number == report.NotAvailable {
		return number
	}
	return "= " + number
}

// takenOff says what parts the shift as read from the shift told.
func (p *pair) takenOff() string {
	var parts []string
	if o := p.c.Common.Offset; o != 0 && isNumber(o) {
		parts = append(parts, p.shift(o)+" was taken off for the control parts")
	}
	if t := p.c.ForTemp; t != 0 && isNumber(t) {
		parts = append(parts, p.shift(t)+" was taken off for the temperatures of the lots")
	}
	if len(parts) == 0 {
		return "what control parts and temperature explain was taken off"
	}
	return strings.Join(parts, " and ")
}

// rule says by which margin and how the verdict follows.
func (p *pair) rule(say func(head, format string, args ...any)) {
	c := p.c
	if !p.margin {
		say("margin", "None is set: whether the lots differ can be said, whether a difference matters cannot.")
		say("decision rule", "The lots differ when the %s interval of the shift leaves 0 out; otherwise no difference is seen, which does not say that there is none. With fewer than 3 values on a side nothing is told.", percent(c.Level))
		return
	}
	at := ""
	if t := p.marginTime(); t != "" && p.from == "" {
		at = ", set " + report.Clean(t)
	}
	switch c.MarginSet {
	case compare.Before:
		at += ", before the first reading of this lot"
	case compare.After:
		at += ", after readings of this lot were known"
	default:
		at += ", when with respect to the readings is not known"
	}
	say("margin", "%s%s: the largest shift that does not matter. %s", p.plusMinus(), at, report.Sentence(p.from))
	say("decision rule", "The 90 %% interval of the shift is held against the margin: wholly inside it, the lot is inside the margin; wholly outside, it is outside; else the devices are too few to tell. Here it is %s.", p.interval(c.MarginLow, c.MarginHigh))
}

// risk says how often the rule errs and what a comparison of this size can see.
func (p *pair) risk(say func(head, format string, args ...any)) {
	c := p.c
	if p.margin {
		say("risk", "A lot whose true shift lies just at the margin is called inside it in about 5 of 100 comparisons, and outside it in about 5 of 100. Nothing is computed from the shift that was seen.")
	} else if c.Level > 0 && c.Level < 1 {
		say("risk", "Two lots without any difference are said to differ in about %.3g of 100 comparisons. How often a true difference is missed depends on its size; nothing is computed from the shift that was seen.", 100*(1-c.Level))
	}
	text := ""
	if isNumber(c.NotExcluded) {
		text = fmt.Sprintf("The largest shift that these devices do not exclude is %s (%s interval; %s). ", p.size(c.NotExcluded), percent(c.Level), p.numbersOf())
	}
	if c.More > 0 {
		text += fmt.Sprintf("About %d devices of each lot would tell. ", c.More)
	}
	if c.MoreText != "" {
		text += report.Sentence(c.MoreText) + " "
	}
	say("what this could see", "%sHow many devices show a shift of a given size, or that lots are alike within a margin, is planned before measuring with gatesill plan shift and gatesill plan same.", text)
}

// common tells of the error that whole lots share.
func (p *pair) common(say func(head, format string, args ...any)) {
	m := p.c.Common
	text := "Not known, and not in the interval: what the meters and the session add to all devices of a lot alike cannot be told from a shift of the lot. "
	if isNumber(m.U) {
		text = fmt.Sprintf("%s (standard uncertainty of the shift, in the interval). ", report.FormatTwoDigits(m.U, p.unit))
	}
	if m.Basis != "" {
		text += report.Sentence("basis: "+m.Basis) + " "
	}
	if m.Controls > 0 {
		text += fmt.Sprintf("%s both lots together", ties(m.Controls))
		if m.Offset != 0 && isNumber(m.Offset) {
			text += fmt.Sprintf("; %s was taken off the shift for them", report.FormatPlain(m.Offset, m.OffsetU, p.unit))
		}
		text += "."
	}
	say("error common to a lot", "%s", text)
}

func ties(n int) string {
	if n == 1 {
		return "1 control part ties"
	}
	return strconv.Itoa(n) + " control parts tie"
}

// gain tells of the drive strength, in the comparison's own sentence.
func (p *pair) gain(say func(head, format string, args ...any)) {
	g := p.c.Gain
	if g == nil {
		return
	}
	head, how := "gain", "not adjusted for the threshold"
	if g.Adjusted {
		head, how = "gain at equal threshold", "adjusted by the common slope of gain on threshold"
	}
	text := report.Sentence(g.Text)
	if text == "" {
		text = report.Sentence(fmt.Sprintf("%s %s", report.KeyOf(g.Key).Name, report.ShiftWords(g.Percent.Value, g.Percent.Low, g.Percent.High, "%")))
	}
	say(head, "%s By the %s, n = %d and %d, %s, p %s.", text, report.KeyOf(g.Key).Name, g.N[0], g.N[1], how, equals(report.ProbabilityWords(g.P)))
}

func (p *pair) populations(say func(head, format string, args ...any)) {
	var parts []string
	for i, s := range p.lots {
		text := [...]string{"Reference: ", "This lot: "}[i]
		switch sp := s.Spread.Split; {
		case s.Spread.Populations > 1 && i == 1:
			text += "two, see the result"
		case s.Spread.Populations > 1 && sp != nil && sp.Text != "":
			text += "two; " + strings.TrimSuffix(report.Clean(sp.Text), ".")
		case s.Spread.Populations > 1:
			text += strconv.Itoa(s.Spread.Populations)
		case s.Spread.Populations == 1:
			text += "one"
		default:
			text += "not looked for"
		}
		parts = append(parts, text)
	}
	say("populations", "%s", report.Sentence(strings.Join(parts, ". ")))
}

// negative reports whether more gate voltage is more negative.
func (p *pair) negative() bool { return p.Part.Channel == record.PChannel && p.unit == "V" }

// value is the quantity compared of a device that takes part; NaN when it has
// none.
func (p *pair) value(d *report.Device) float64 {
	if q := d.Result.At(p.c.Quantity); q != nil && q.Ok() && d.State() == fit.Measured {
		return q.Value
	}
	return math.NaN()
}
