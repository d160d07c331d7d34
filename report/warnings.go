package report

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// inWarnings are the names of quantities as the sentences about a lot have
// them, before the colon of what they say.
var inWarnings = regexp.MustCompile(`(V_GS\(th\)|gate bias at the idle current|extrapolated threshold|gain factor|mobility degradation|` +
	`largest transconductance|transconductance at the idle current|drain leakage|gate span from the test current to the idle current|the whole curve): `)

// haveValue is the one number in which such sentences of one lot may differ and
// still be told together.
var haveValue = regexp.MustCompile(`(\d+) devices have a value`)

const slot = "\x00"

// JoinWarnings makes one sentence of warnings of one code that say the same of
// several quantities: "too few to judge one another by V_GS(th) and gain
// factor: ...". Where they give different numbers of devices with a value, the
// least and the greatest are told. Other warnings stay as they are; the order
// is that of the first of each.
func JoinWarnings(list []fit.Warning) []fit.Warning {
	type joined struct {
		code, frame string
		names       []string
		least, most int
		whole       string
	}
	var groups []*joined
	for _, w := range list {
		g := &joined{code: w.Code, frame: w.Text, whole: w.Text}
		if at := inWarnings.FindStringSubmatchIndex(w.Text); at != nil && !strings.Contains(w.Text, slot) {
			g.names = []string{w.Text[at[2]:at[3]]}
			g.frame = w.Text[:at[2]] + slot + w.Text[at[3]:]
			if m := haveValue.FindStringSubmatch(g.frame); m != nil {
				g.least, _ = strconv.Atoi(m[1])
				g.most = g.least
				g.frame = strings.Replace(g.frame, m[0], slot+slot, 1)
			}
		}
		i := slices.IndexFunc(groups, func(o *joined) bool { return o.code == g.code && o.frame == g.frame })
		if i < 0 {
			groups = append(groups, g)
			continue
		}
		o := groups[i]
		for _, n := range g.names {
			if !slices.Contains(o.names, n) {
				o.names = append(o.names, n)
			}
		}
		o.least, o.most = min(o.least, g.least), max(o.most, g.most)
	}
	var out []fit.Warning
	for _, g := range groups {
		text := g.whole
		if len(g.names) > 1 {
			text = g.frame
			devices := strconv.Itoa(g.most)
			if g.least != g.most {
				devices = fmt.Sprintf("%d to %d", g.least, g.most)
			}
			text = strings.Replace(text, slot+slot, devices+" devices have a value", 1)
			text = strings.Replace(text, slot, andList(g.names), 1)
			text = strings.ReplaceAll(text, "standing apart in it", "standing apart in them")
		}
		out = append(out, fit.Warning{Code: g.code, Text: text})
	}
	return out
}

// andList writes "a", "a and b", "a, b and c".
func andList(names []string) string {
	if len(names) < 2 {
		return strings.Join(names, "")
	}
	return strings.Join(names[:len(names)-1], ", ") + " and " + names[len(names)-1]
}

// lotWarnings writes warnings of the lot as a whole, the advice behind the last
// of each code.
func lotWarnings(p *printer, s Sheet, list []fit.Warning, style Style) {
	list = JoinWarnings(list)
	for i, w := range list {
		wrapped(p, "", "  ", fmt.Sprintf("%s (%s)", Clean(Sentence(w.Text)), Clean(w.Code)), style.Width)
		again := slices.ContainsFunc(list[i+1:], func(o fit.Warning) bool { return o.Code == w.Code })
		if next := s.Advice(w.Code).Next; next != "" && !again {
			wrapped(p, "  next: ", "  ", Clean(next), style.Width)
		}
	}
}

// intoGroup parts the sentence that puts a device with the smaller of two
// groups from what the groups are.
const intoGroup = " puts it with the smaller of two groups: "

// ReasonText tells why a device is flagged. What the two groups of a parted lot
// are is told once for the lot, not with each device.
func (s *Sheet) ReasonText(r lot.Reason) string {
	if r.Code == fit.CodeTwoPopulations && s.Spread.Split != nil {
		if what, _, ok := strings.Cut(r.Text, intoGroup); ok {
			return Sentence("in the smaller group with " + what)
		}
	}
	return Sentence(r.Text)
}
