package page

import (
	"fmt"
	"html/template"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store/record"
)

// view is what the layout shows, all of it already in words.
type view struct {
	Policy string
	Style  template.CSS
	Script template.JS

	Lot, Part  string
	Lead       []template.HTML // the summary, one sentence each
	Tiles      []tile
	Alerts     []alert
	Compared   *compared // nil: not compared with another lot
	Trend      *trend    // nil: no run of lots was given
	Curves     *curvesFigure
	NoCurves   string // why there are none
	Strip      *figure
	Spread     *table
	Limits     *table
	Groups     []group // the two populations, where there are two
	GroupNote  template.HTML
	Spec       *specView // nil: the part has no limits
	Bins       *table
	Unsorted   []group // in no bin, by reason
	Sets       *table  // stored ones with a device of the lot; nil: none
	Devices    deviceTable
	Flags      []named
	FlagCount  string
	Doubts     []named // devices whose sweeps disagree
	LeftOut    *table
	Remarks    []remark
	Conditions *table
	Meters     *table
	Sessions   *table
	Sources    *table
	Budget     *table
	About      []field
	PartFacts  []field
	LotFacts   []field
	Rules      []template.HTML
	Cautions   []template.HTML
	Hash       string
	Version    string
	Latest     string
}

type tile struct {
	Label template.HTML
	Value string
	Note  template.HTML
}

type alert struct {
	Text template.HTML
	Next template.HTML
}

type field struct {
	Label template.HTML
	Value template.HTML
	Given bool
	Pen   bool // to be filled in by hand on paper when it was not given
}

// named is a device with sentences.
type named struct {
	Name  string
	Texts []template.HTML
	Codes []string
}

// group is several devices of which one thing is said.
type group struct {
	Head template.HTML
	Text template.HTML
}

// remark is one warning with the devices it holds for.
type remark struct {
	Code    string
	Who     string
	Meaning template.HTML
	Next    template.HTML
	Names   template.HTML // "" when it holds for all
}

func newRemark(g report.RemarkGroup) remark {
	r := remark{Code: report.Clean(g.Code), Who: "every measured device", Meaning: rich(report.Sentence(g.Meaning)), Next: rich(g.Next)}
	if !g.All {
		r.Who, r.Names = plural(len(g.Devices), "device"), foldNames(g.Devices)
	}
	return r
}

type cell struct {
	Text  template.HTML
	Head  bool // names its row
	Right bool
	None  bool // stands for something that is not there
}

type table struct {
	Class   string
	Caption template.HTML
	Heads   []head
	Rows    [][]cell
	Note    template.HTML
}

type head struct {
	Text  template.HTML
	Right bool
}

// symbols lowers what a trade symbol writes lower.
var symbols = strings.NewReplacer(
	"V_GS(th)", "V<sub>GS(th)</sub>", "V_GS(idle)", "V<sub>GS(idle)</sub>", "V_GS", "V<sub>GS</sub>",
	"V_DS", "V<sub>DS</sub>", "V_DD", "V<sub>DD</sub>", "V_T", "V<sub>T</sub>",
	"g_m(idle)", "g<sub>m(idle)</sub>", "g_m(max)", "g<sub>m(max)</sub>", "g_m", "g<sub>m</sub>",
	"I_D(off)", "I<sub>D(off)</sub>", "I_D", "I<sub>D</sub>", "R_L", "R<sub>L</sub>", "P_D", "P<sub>D</sub>", "R_th", "R<sub>th</sub>",
)

var beforeUnit = regexp.MustCompile(`([0-9)]) ((?:[fpnµmkMG]?(?:V|A|S|Ω|W|s|A/V²)|1/V|K/W|°C|%)\b|%|°C)`)

// stamp finds times as they are stored; they are shown with a blank, and neither
// they nor dates are broken.
var (
	stamp = regexp.MustCompile(`\b(\d{4}-\d\d-\d\d)T(\d\d:\d\d:\d\d)(?:\.000)?Z`)
	date  = regexp.MustCompile(`\b\d{4}-\d\d-\d\d(?: \d\d:\d\d:\d\d UTC)?`)
)

// rich turns words into markup: escaped, symbols set as the trade sets them, a
// number kept on the line of its unit.
func rich(words string) template.HTML {
	text := template.HTMLEscapeString(report.Clean(words))
	text = symbols.Replace(text)
	text = strings.ReplaceAll(text, "n = ", "n\u00a0=\u00a0")
	text = stamp.ReplaceAllString(text, "$1 $2 UTC")
	text = date.ReplaceAllString(text, `<span class="nw">$0</span>`)
	return template.HTML(beforeUnit.ReplaceAllString(text, "$1\u00a0$2"))
}

func richf(format string, args ...any) template.HTML { return rich(fmt.Sprintf(format, args...)) }

// plain is a name or another text of the user's: escaped and no more.
func plain(text string) template.HTML {
	return template.HTML(template.HTMLEscapeString(report.Clean(text)))
}

func given(text string) template.HTML {
	if text == "" {
		return report.NotGiven
	}
	return rich(text)
}

func newView(s *report.Sheet) *view {
	v := &view{
		Lot: report.Clean(s.Lot.Name), Part: report.Clean(s.Part.Name),
		Hash: report.Clean(s.Hash), Version: report.Clean(s.Version), Latest: report.Clean(s.Latest),
	}
	k := newKnown(s)
	v.summary(k)
	v.compared(k)
	v.trend(k)
	v.figures(k)
	v.spread(k)
	v.bins(k)
	v.storedSets(k)
	v.specification(k)
	v.devices(k)
	v.flags(k)
	v.leftOut(k)
	for _, g := range s.RemarkGroups() {
		v.Remarks = append(v.Remarks, newRemark(g))
	}
	v.circumstances(k)
	v.facts(k)
	v.rules(k)
	v.Cautions = cautions(s.Part)
	return v
}

// known is the sheet with what several parts of the page look up in it.
type known struct {
	*report.Sheet
	by         fit.Key // quantity that is sorted by
	flagged    map[string][]string
	bin, maybe map[string]string
	counts     report.Counts
}

func newKnown(s *report.Sheet) *known {
	k := &known{Sheet: s, by: s.SortedBy, flagged: map[string][]string{}, counts: s.Counts()}
	if s.Sorting != nil {
		k.by = s.Sorting.By
	}
	if k.by == "" {
		k.by = fit.KeyVgsth
	}
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			codes := []string{}
			for _, r := range v.Reasons {
				codes = append(codes, r.Code)
			}
			k.flagged[v.Name] = codes
		}
	}
	k.bin, k.maybe = s.BinOf()
	return k
}

// flag tells in a few words why a device is flagged, "" when it is not.
func (k *known) flag(name string) string {
	codes, ok := k.flagged[name]
	if !ok {
		return ""
	}
	if len(codes) == 0 {
		return "flagged"
	}
	return strings.ReplaceAll(strings.Join(codes, ", "), "-", " ")
}

func (v *view) summary(k *known) {
	unit := report.KeyOf(k.by).Unit
	m, has := k.Spread.Summary[k.by]
	c := k.counts
	part := ""
	if k.Part.Name != "" {
		part = " of " + k.Part.Name
	}
	v.Lead = append(v.Lead, richf("Lot %s%s: %s known, %d with a value, %s flagged.", k.Sheet.Lot.Name, part, plural(c.Devices, "device"), c.Measured, none(c.Flagged)))
	v.Lead = append(v.Lead, rich(k.SortedPhrase(k.by)))
	if has && m.N > 0 {
		sc, step := report.SummaryScale(k.by, m), report.SummaryDigits(m)
		num := func(x float64) string { return sc.FormatNumber(x, step, 0) + " " + sc.Unit(unit) }
		text := fmt.Sprintf("The median is %s", num(m.Median))
		if !math.IsNaN(m.RobustSD) {
			text += fmt.Sprintf(" with a robust standard deviation of %s", report.FormatTwoDigits(m.RobustSD, unit))
		}
		text += fmt.Sprintf(" (n = %d)", m.N)
		if m.N > 1 {
			text += fmt.Sprintf("; the values go from %s to %s", num(m.Min), num(m.Max))
		}
		v.Lead = append(v.Lead, rich(text+"."))
		v.Tiles = append(v.Tiles,
			tile{"devices", strconv.Itoa(c.Devices), richf("%d with a value", c.Measured)},
			tile{"flagged", strconv.Itoa(c.Flagged), richf("of %d", len(k.Spread.Devices))},
			tile{"median", num(m.Median), rich(k.KeyPhrase(k.by))},
			tile{"robust spread", report.FormatTwoDigits(m.RobustSD, unit), richf("1 sd, n = %d", m.N)})
	} else {
		v.Lead = append(v.Lead, richf("No device has a value of %s.", k.KeyPhrase(k.by)))
	}
	if k.Sorting != nil {
		filled := 0
		for _, b := range k.Sorting.Bins {
			if len(b.Devices) > 0 {
				filled++
			}
		}
		v.Lead = append(v.Lead, richf("They fill %d of %s.", filled, plural(len(k.Sorting.Bins), "bin")))
	}
	if n := c.State[fit.Above]; n > 0 {
		verb := "reaches"
		if n > 1 {
			verb = "reach"
		}
		v.Lead = append(v.Lead, richf("%s never %s the current and %s as above every value.", plural(n, "device"), verb, map[bool]string{true: "counts", false: "count"}[n == 1]))
	}
	v.alerts(k)
}

func (v *view) alerts(k *known) {
	if sp := k.Spread.Split; sp != nil {
		text := report.Sentence(sp.Text)
		if !strings.HasPrefix(text, "Two populations") {
			text = "Two populations. " + text
		}
		v.Alerts = append(v.Alerts, alert{Text: rich(text), Next: rich(k.Advice(fit.CodeTwoPopulations).Next)})
	}
	warnings := slices.Clone(k.Spread.Warnings)
	if k.Sorting != nil {
		for _, w := range k.Sorting.Warnings {
			if !slices.Contains(warnings, w) {
				warnings = append(warnings, w)
			}
		}
	}
	if sp := k.Spread.Split; sp != nil {
		warnings = slices.DeleteFunc(warnings, func(w fit.Warning) bool { return w.Text == sp.Text })
	}
	for _, w := range report.JoinWarnings(warnings) {
		a := alert{Text: rich(report.Sentence(w.Text)), Next: rich(k.Advice(w.Code).Next)}
		if w.Code == fit.CodeTwoPopulations && k.Spread.Split != nil {
			a.Next = "" // stands with the groups
		}
		v.Alerts = append(v.Alerts, a)
	}
	for _, m := range instruments(k.Sheet) {
		if m.overdue != "" {
			v.Alerts = append(v.Alerts, alert{
				Text: richf("The calibration of the %s meter (%s) was due on %s and had run out when it was used on %s.", m.Role, meterName(m.Instrument), m.Due, m.overdue),
				Next: "Have it calibrated, and judge by its result whether these readings can stand."})
		}
	}
}

func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}

func none(n int) string {
	if n == 0 {
		return "none"
	}
	return strconv.Itoa(n)
}

// meter is one instrument as it was used in this lot.
type meter struct {
	record.Instrument
	sweeps  int
	overdue string // day on which it was used after its due date, "" if never
}

// instruments lists the meters behind the sweeps, each once, in order of their
// first use.
func instruments(s *report.Sheet) []meter {
	var list []meter
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			sw := &s.Devices[i].Sweeps[j]
			for _, m := range sw.Instruments {
				n := slices.IndexFunc(list, func(x meter) bool { return sameMeter(x.Instrument, m) })
				if n < 0 {
					n = len(list)
					list = append(list, meter{Instrument: m})
				}
				list[n].sweeps++
				// Dates in the ISO form compare as texts.
				if day := firstDay(sw.MeasuredAt); m.Due != "" && day > m.Due && list[n].overdue == "" {
					list[n].overdue = day
				}
			}
		}
	}
	return list
}

// sameMeter reports whether two instruments are shown alike.
func sameMeter(a, b record.Instrument) bool {
	return a.Role == b.Role && a.Name == b.Name && a.Serial == b.Serial && a.Coverage == b.Coverage &&
		a.Calibrated == b.Calibrated && a.Due == b.Due && slices.Equal(a.Ranges, b.Ranges)
}

var isoDay = regexp.MustCompile(`^\d{4}-\d\d-\d\d`)

func firstDay(stamp string) string { return isoDay.FindString(stamp) }

func meterName(m record.Instrument) string {
	switch {
	case m.Name != "" && m.Serial != "":
		return m.Name + ", serial " + m.Serial
	case m.Serial != "":
		return "serial " + m.Serial
	case m.Name != "":
		return m.Name
	}
	return "name " + report.NotGiven
}
