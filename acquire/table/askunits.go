package table

import (
	"fmt"
	"slices"
	"strings"
)

// askUnits settles the columns that are left without a unit.
func (r *reader) askUnits(open []*column) error {
	if len(open) == 0 {
		return nil
	}
	var flags, names []string
	propose := r.likelyUnits(open)
	for _, c := range open {
		short := c.as
		if short == roleLoad {
			short = "vl"
		}
		if f := short + "=" + propose[c.as]; !slices.Contains(flags, f) {
			flags = append(flags, f)
		}
		if len(names) < 5 {
			names = append(names, c.title())
		}
	}
	hint := "--units " + strings.Join(flags, ",")
	if r.layout == layoutWide && slices.Contains(flags, "id="+propose["id"]) {
		hint += ", with vl=V or vd=V in place of id=" + propose["id"] + " where the devices' columns are voltages"
	}
	what := "column"
	if len(open) > 1 {
		what = "columns"
	}
	if r.opt.Ask == nil {
		return r.ambiguous(r.headerLine, hint, "no unit for %s %s", what, strings.Join(names, ", "))
	}
	answers := map[string]string{}
	for _, c := range open {
		dim := dimOf(c.as)
		if _, ok := answers[c.as]; !ok {
			choices := []string{dim, "m" + dim, "u" + dim}
			if dim == "A" {
				choices = append(choices, "n"+dim)
			}
			choices = firstOf(choices, propose[c.as])
			answer, err := r.ask(Question{
				Text:    fmt.Sprintf("no unit for column %s (%s): which is it?", c.title(), c.as),
				Choices: choices, Flag: "--units " + c.as + "=",
			}, r.headerLine, hint)
			if err != nil {
				return err
			}
			answers[c.as] = answer
		}
		u, _ := readUnit(answers[c.as])
		c.unit, _ = u.as(dim)
		c.hasUnit = true
	}
	return nil
}

// likelyUnits proposes a unit by the magnitude of the readings, for every
// quantity that has none. It is proposed only: 15 may be A or mA.
func (r *reader) likelyUnits(open []*column) map[string]string {
	var b buffer
	most := map[string]float64{}
	seen := min(len(open), 20) // of a wide file, some devices tell
	s := r.bodySplitter()
	for n := 0; n < maxLikely && s.next(); n++ {
		if r.marks.is(s.row) || len(s.row) > maxLine {
			continue
		}
		s.split()
		for _, c := range open[:seen] {
			if c.index >= len(s.cells) {
				continue
			}
			b.values, b.text = b.values[:0], b.text[:0]
			sc := newScale(dimOf(c.as), 0, false)
			if _, why := b.put(s.cells[c.index], r.num, &sc); why == "" {
				most[c.as] = max(most[c.as], greatest(b.values))
			}
		}
	}
	units := map[string]string{}
	for _, c := range open {
		dim := dimOf(c.as)
		units[c.as] = dim
		for _, l := range likely[c.as] {
			if most[c.as] > l.above {
				units[c.as] = l.prefix + dim
			}
		}
	}
	return units
}

const maxLikely = 100_000 // rows that are looked at for a unit to propose

// likely gives the prefix that is proposed for readings above a magnitude. The
// benches for parts that are sorted by threshold give up to some 20 A and 60 V
// (common practice, no source).
var likely = map[string][]struct {
	above  float64
	prefix string
}{
	"id":     {{20, "m"}, {20e3, "u"}, {20e6, "n"}},
	"ig":     {{0.01, "n"}},
	"vg":     {{60, "m"}, {60e3, "u"}},
	"vl":     {{1000, "m"}},
	"vd":     {{1000, "m"}},
	roleLoad: {{1000, "m"}},
	"vdd":    {{1000, "m"}},
	"gm":     {{100, "m"}},
}

// firstOf puts one of the choices first.
func firstOf(choices []string, first string) []string {
	list := []string{first}
	for _, c := range choices {
		if c != first {
			list = append(list, c)
		}
	}
	return list
}
