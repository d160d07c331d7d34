package report

import (
	"fmt"
	"io"
	"math"
	"strings"

	"gatesill/fit/plan"
)

// PlanTable writes the answer of a plan for people: what was asked and the number
// first, then what else it rests on.
func PlanTable(w io.Writer, a plan.Answer, style Style) error {
	p := &planPrinter{printer{w: w}, style}
	switch a := a.(type) {
	case *plan.Find:
		p.find(a)
	case *plan.Shift:
		p.shift(a)
	case *plan.Same:
		p.same(a)
	case *plan.Cover:
		p.cover(a)
	case *plan.Capability:
		p.capability(a)
	case *plan.Accept:
		p.accept(a)
	default:
		return fmt.Errorf("plan %q: no layout", a.Kind())
	}
	return p.err
}

type planPrinter struct {
	printer
	style Style
}

// say writes a sentence or more, wrapped.
func (p *planPrinter) say(format string, args ...any) {
	wrapped(&p.printer, "", "", Clean(fmt.Sprintf(format, args...)), p.style.Width)
}

// answer writes the sentence that was asked for.
func (p *planPrinter) answer(format string, args ...any) {
	for _, l := range wrap(Clean(fmt.Sprintf(format, args...)), p.style.Width, 0, 0) {
		p.line("%s", p.style.paint(l, bold))
	}
}

// table writes columns of equal length, right-aligned, below each other.
func (p *planPrinter) table(cols ...column) {
	p.line("")
	for i := range cols {
		cols[i].right = true
	}
	p.grid(grid{p.style, cols})
}

// Chance writes a probability in percent with two digits, and more where it comes
// near to 100 %.
func Chance(x float64) string {
	switch {
	case math.IsNaN(x):
		return NotAvailable
	case x > 0.9995 && x < 1:
		return "more than 99.9 %"
	case x > 0.9945 && x < 1:
		return fmt.Sprintf("%.1f %%", 100*x)
	case x < 0.0005 && x > 0:
		return "less than 0.1 %"
	case x < 0.0995 && x > 0:
		return fmt.Sprintf("%.2g %%", 100*x)
	}
	return fmt.Sprintf("%.0f %%", 100*x)
}

// share writes a share that was given, or one that is compared with such.
// Only all of it is 100 %.
func share(x float64) string {
	for digits := 3; digits < 10; digits++ {
		if text := fmt.Sprintf("%.*g", digits, 100*x); x >= 1 || text != "100" {
			return text + " %"
		}
	}
	return "more than 99.9999999 %"
}

// given writes a voltage that was given, or that followed from what was.
func given(x float64) string {
	if text := FormatGiven(x, "V"); len(text) <= 9 {
		return text
	}
	return about(x)
}

// about writes a voltage that was computed, with two or three digits.
func about(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	s := ScaleOf("V", x)
	return withUnit(s.FormatNumber(x, math.Abs(x)/9, 0), s.Unit("V"))
}

func (p *planPrinter) find(f *plan.Find) {
	where := "Where " + share(f.Bad) + " are bad"
	if f.BadCount > 0 {
		where = fmt.Sprintf("With %d bad of %d (%s)", f.BadCount, f.Of, share(f.Bad))
	}
	risk := 1 - f.Confidence
	switch {
	case f.N > 0 && f.Needed > 0:
		p.answer("%s, %s measured find at least one %s of the time; %s of the time they miss them all.", where, count(f.N, "part"), Chance(f.Finds), Chance(1-f.Finds))
		p.say("For a risk of %s of missing them all measure %d.", share(risk), f.Needed)
	case f.Needed > 0:
		p.answer("%s, measure %d to find at least one, at a risk of %s of missing them all.", where, f.Needed, share(risk))
		if f.BadCount > 0 {
			p.say("Should all %d be good, fewer than %d of %d are bad, at %s confidence.", f.Needed, f.BadCount, f.Of, share(f.Confidence))
		} else {
			p.say("Should all %d be good, less than %s are bad, at %s confidence.", f.Needed, share(f.Bad), share(f.Confidence))
		}
	case f.N == 0:
		p.zeroTable(f)
		return
	}
	if f.N > 0 {
		p.possible(f)
	}
	if f.Of == 0 {
		p.line("")
		p.say("For a lot of a known size --of makes it exact: fewer parts are needed.")
	}
}

func (p *planPrinter) possible(f *plan.Find) {
	found := fmt.Sprintf("With all %d good", f.N)
	if f.N == 1 {
		found = "With the one part good"
	}
	if f.Found > 0 {
		found = fmt.Sprintf("With %d bad among %d", f.Found, f.N)
	}
	if f.Needed > 0 {
		p.line("")
	}
	p.say("%s, there may still be:", found)
	conf, most := column{head: "confidence"}, column{head: "bad at most"}
	for _, x := range f.Possible {
		conf.cells = append(conf.cells, share(x.Confidence))
		if x.Count >= 0 {
			most.cells = append(most.cells, fmt.Sprintf("%d of %d (%s)", x.Count, f.Of, Chance(x.Share)))
		} else {
			most.cells = append(most.cells, Chance(x.Share))
		}
	}
	p.table(conf, most)
}

func (p *planPrinter) zeroTable(f *plan.Find) {
	what := "less than a share is bad"
	if f.Of > 0 {
		what = fmt.Sprintf("fewer than so many of %d are bad", f.Of)
	}
	p.answer("How many parts, all good, show that %s:", what)
	bad := column{head: "bad"}
	cols := make([]column, len(plan.ZeroConfidences))
	for i, c := range plan.ZeroConfidences {
		cols[i].head = "at " + share(c)
	}
	for _, r := range f.Sizes {
		if r.Count > 0 {
			bad.cells = append(bad.cells, fmt.Sprintf("%d (%s)", r.Count, share(r.Bad)))
		} else {
			bad.cells = append(bad.cells, share(r.Bad))
		}
		for i, n := range r.N {
			cols[i].cells = append(cols[i].cells, itoa(n))
		}
	}
	p.table(append([]column{bad}, cols...)...)
	if f.Of == 0 {
		p.line("")
		p.say("For one bad share: --bad 10%%. For a lot of a known size: --of 200.")
	}
}

// spreadWords says which standard deviation was planned with.
func spreadWords(sd float64, l plan.Lot) string {
	if l.Name != "" {
		return fmt.Sprintf("sd %s of %s from %s of %s", about(sd), l.Of, count(l.N, "device"), l.Name)
	}
	return "sd " + given(sd)
}

func (p *planPrinter) shift(s *plan.Shift) {
	sd := spreadWords(s.SD, s.Lot)
	seen := math.NaN()
	if s.N > 0 {
		seen = s.Power
	}
	if isNumber(seen) {
		p.answer("%d of either lot see a shift of %s %s of the time (%s, at %s confidence).", s.N, given(s.Shift), Chance(s.Power), sd, share(s.Confidence))
	}
	switch {
	case s.TooMany:
		p.answer("A shift of %s would need more than a million devices of either lot (%s).", given(s.Shift), sd)
	case s.Needed > 0 && s.N > 0:
		p.say("For %s (a risk of missing it of %s) measure %d of either lot.", share(1-s.Risk), share(s.Risk), s.Needed)
	case s.Needed > 0:
		p.answer("To see a shift of %s, measure %d of either lot.", given(s.Shift), s.Needed)
		p.say("With %s it is then seen %s of the time (risk of missing it %s) at %s confidence.", sd, share(1-s.Risk), share(s.Risk), share(s.Confidence))
	}
	if s.Lot.N < fewForSD {
		p.uncertain(s.Lot, s.SDHigh, s.NeededHigh, s.Needed)
	}
	p.reaches("smallest shift seen", s.N, s.Smallest, sd, s.Needed == 0)
	p.trimming(s.NeededT, s.Needed, s.N, s.PowerT)
	if s.Lot.N >= fewForSD {
		p.uncertain(s.Lot, s.SDHigh, s.NeededHigh, s.Needed)
	}
}

// reaches is a table of what n devices can do; alone where nothing stands above.
func (p *planPrinter) reaches(what string, n int, list []plan.Reach, sd string, alone bool) {
	if len(list) == 0 {
		return
	}
	if alone {
		p.answer("What %d of either lot can do (%s):", n, sd)
	} else {
		p.line("")
		p.say("What %d of either lot can do (%s):", n, sd)
	}
	chance, v := column{head: "of the time"}, column{head: what}
	for _, r := range list {
		chance.cells = append(chance.cells, share(r.Chance))
		v.cells = append(v.cells, about(r.V))
	}
	p.table(chance, v)
}

// trimming says what the robust comparison costs: how many plain means would
// take, and what n would do by them.
func (p *planPrinter) trimming(plain, needed, n int, chance float64) {
	text := "Lots are compared without the lowest and highest fifth of each, so that single devices far off do not mislead; all values are taken for normal."
	var by []string
	if needed > plain && plain > 0 {
		by = append(by, fmt.Sprintf("%d would do", plain))
	}
	if n > 0 && isNumber(chance) {
		by = append(by, fmt.Sprintf("%d do it %s of the time", n, Chance(chance)))
	}
	if len(by) > 0 {
		text += " By plain means " + strings.Join(by, ", and ") + "."
	}
	p.line("")
	p.say("%s", text)
}

// fewForSD is the number of devices below which that their standard deviation is known
// badly is said right behind the answer: of ten the upper bound is 1.5 times the sd.
const fewForSD = 10

// uncertain says how far the standard deviation of a lot can be trusted.
func (p *planPrinter) uncertain(l plan.Lot, high float64, neededHigh, needed int) {
	if !isNumber(high) || needed == 0 {
		return
	}
	n := "more than a million"
	if neededHigh > 0 {
		n = itoa(neededHigh)
	}
	if l.N < fewForSD {
		p.say("Caution: from only %s the sd is known badly. It may be up to %s (90 %% confidence); then %s are needed.", count(l.N, "device"), about(high), n)
		return
	}
	p.say("The sd of %s may be up to %s (90 %% confidence); then %s are needed.", count(l.N, "device"), about(high), n)
}

func (p *planPrinter) same(s *plan.Same) {
	sd := spreadWords(s.SD, s.Lot)
	margin := given(s.Margin)
	truth := "if there is no shift at all"
	if s.Shift != 0 {
		truth = "if the true shift is " + given(s.Shift)
	}
	switch {
	case s.Hopeless && s.N > 0:
		p.answer("%d of either lot cannot show that the shift is within ±%s (%s): %s they would %s of the time.", s.Few, margin, sd, truth, Chance(s.Chance))
	case s.N > 0:
		p.answer("%d of either lot show that the shift is within ±%s %s of the time, %s (%s).", s.N, margin, Chance(s.Chance), truth, sd)
	}
	switch {
	case s.TooMany:
		p.answer("To show that the shift is within ±%s would need more than a million devices of either lot (%s).", margin, sd)
	case s.N > 0:
		p.say("For %s (a risk of failing of %s) measure %d of either lot.", share(1-s.Risk), share(s.Risk), s.Needed)
	default:
		p.answer("To show that two lots are alike within ±%s, measure %d of either lot.", margin, s.Needed)
		p.say("With %s it is then shown %s of the time (risk of failing %s), %s. The %s interval of the shift has to lie within the margin.", sd, share(1-s.Risk), share(s.Risk), truth, share(s.Level))
		if s.Hopeless {
			p.say("As few as %d of either lot would show it only %s of the time.", s.Few, Chance(s.Chance))
		}
	}
	if s.Lot.N < fewForSD {
		p.uncertain(s.Lot, s.SDHigh, s.NeededHigh, s.Needed)
	}
	p.reaches("smallest margin shown", s.N, s.Smallest, sd, false)
	p.trimming(s.NeededT, s.Needed, s.N, s.ChanceT)
	if s.Lot.N >= fewForSD {
		p.uncertain(s.Lot, s.SDHigh, s.NeededHigh, s.Needed)
	}
}
