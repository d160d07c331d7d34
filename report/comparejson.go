package report

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"

	"gatesill/fit"
	"gatesill/fit/compare"
)

// ErrNotCompared is returned where a sheet without a comparison is to be laid out
// as one.
var ErrNotCompared = errors.New("the lot has not been compared")

type countsDoc struct {
	N         int `json:"n"`
	WithValue int `json:"with_value"`
	Above     int `json:"above"`
	Flagged   int `json:"flagged"`
	Aside     int `json:"set_aside"`
	Without   int `json:"without_value"`
	Control   int `json:"control"`
}

type intervalDoc struct {
	Value number `json:"value"`
	Low   number `json:"low"`
	High  number `json:"high"`
}

func intervalDocOf(i compare.Interval) intervalDoc {
	return intervalDoc{number(i.Value), number(i.Low), number(i.High)}
}

// pairDoc holds one number of the reference lot and one of the other.
type pairDoc struct {
	Reference number `json:"reference"`
	Candidate number `json:"candidate"`
}

type secondaryDoc struct {
	Test      string      `json:"test"`
	Statistic number      `json:"statistic"`
	P         number      `json:"p"`
	PAdjusted number      `json:"p_adjusted"`
	Shift     intervalDoc `json:"shift_V"` // nulls: the test has none
	// Ratio is that of the variances, candidate over reference; absent: the test has none.
	Ratio *intervalDoc `json:"variance_ratio,omitempty"`
}

type optionDoc struct {
	Option string   `json:"option"`
	Text   string   `json:"text"`
	Rule   optional `json:"rule"`
}

type commonDoc struct {
	U        number   `json:"u_V"`
	Basis    optional `json:"basis"`
	Controls int      `json:"control_parts"`
	Offset   number   `json:"offset_V"`
	OffsetU  number   `json:"offset_u_V"`
}

type pairedDoc struct {
	Pairs         int         `json:"pairs"`
	Why           optional    `json:"why"`
	SD            number      `json:"sd_V"`
	Own           intervalDoc `json:"own_shift_V"`
	OnlyReference []string    `json:"only_reference"`
	OnlyCandidate []string    `json:"only_candidate"`
}

type bandPointDoc struct {
	I         number `json:"current_A"`
	Shift     number `json:"shift_V"`
	Low       number `json:"low_V"`
	High      number `json:"high_V"`
	Reference int    `json:"n_reference"`
	Candidate int    `json:"n_candidate"`
}

type bandDoc struct {
	Level   number         `json:"level"`
	Differs bool           `json:"differs"`
	Text    optional       `json:"text"`
	Points  []bandPointDoc `json:"points"`
}

type gainDoc struct {
	Quantity fit.Key     `json:"quantity"`
	Percent  intervalDoc `json:"percent"`
	P        number      `json:"p"`
	Adjusted bool        `json:"at_equal_threshold"`
	N        [2]int      `json:"n"`
	Text     optional    `json:"text"`
}

type noteDoc struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

func none(x float64) float64 {
	if x == 0 {
		return math.NaN()
	}
	return x
}

// compareMembers are the keys of one comparison, those that scripts are promised
// first.
func compareMembers(s *Sheet) []member {
	c := s.Compared
	counts := func(k compare.Counts) countsDoc { return countsDoc(k) }
	secondary, options := []secondaryDoc{}, []optionDoc{}
	for _, t := range c.Secondary {
		doc := secondaryDoc{Test: t.Test, Statistic: number(t.Statistic), P: number(t.P), PAdjusted: number(t.PAdjusted), Shift: intervalDocOf(t.Shift)}
		if t.Ratio != (compare.Interval{}) {
			ratio := intervalDocOf(t.Ratio)
			doc.Ratio = &ratio
		}
		secondary = append(secondary, doc)
	}
	for _, o := range c.Options {
		options = append(options, optionDoc{o.Name, o.Text, optional(o.Rule)})
	}
	set := c.MarginSet
	if set == "" {
		set = compare.None
	}
	return []member{
		{"reference", c.Reference.Lot.Name}, {"candidate", s.Lot.Name}, {"quantity", string(c.Quantity)}, {"test", optional(c.Test)},
		{"shift_V", number(c.Shift)}, {"ci_low_V", number(c.Low)}, {"ci_high_V", number(c.High)}, {"level", number(c.Level)},
		{"margin_ci_low_V", number(c.MarginLow)}, {"margin_ci_high_V", number(c.MarginHigh)}, {"margin_level", marginLevel},
		{"verdict", string(c.Verdict)}, {"margin_V", number(c.Margin)}, {"margin_set", set},
		{"not_excluded_V", number(c.NotExcluded)}, {"more_parts_needed", number(none(float64(c.More)))},
		{"spread_ratio", intervalDocOf(c.Spread)}, {"secondary", secondary},
		{"counts", map[string]countsDoc{"reference": counts(c.Counts[0]), "candidate": counts(c.Counts[1])}},
		{"options", options},

		{"sentence", c.Sentence}, {"p", number(c.P)}, {"df", number(c.DF)}, {"raw_shift_V", number(c.Raw)}, {"taken_off_for_temperature_V", number(c.ForTemp)}, {"taken_off_for_temperature_u_V", number(c.TempU)}, {"margin_from", optional(c.MarginFrom)}, {"more_parts_why", optional(c.MoreText)}, {"which_counts", optional(c.Beside)},
		{"centre_V", pairDoc{number(c.Centre[0]), number(c.Centre[1])}}, {"sd_V", pairDoc{number(c.SD[0]), number(c.SD[1])}}, {"spread_test", optional(c.SpreadTest)},
		{"common_error", commonDoc{number(c.Common.U), optional(c.Common.Basis), c.Common.Controls, number(c.Common.Offset), number(c.Common.OffsetU)}},
		{"paired", pairedDocOf(c.Paired)}, {"curves", bandDocOf(c.Curves)}, {"gain", gainDocOf(c.Gain)},
		{"current_A", number(c.Reference.currentOf(c.Quantity))}, {"warnings", noteDocs(c.Warnings)},
	}
}

// currentOf is the current at which a quantity of this lot was taken, A; NaN for one
// without.
func (s *Sheet) currentOf(k fit.Key) float64 {
	switch k {
	case fit.KeyVgsth:
		return s.TestCurrent
	case fit.KeyVgsIdle, fit.KeyGmIdle:
		return s.IdleCurrent
	}
	return math.NaN()
}

func pairedDocOf(p *compare.Paired) *pairedDoc {
	if p == nil {
		return nil
	}
	return &pairedDoc{p.Pairs, optional(p.Why), number(p.SD), intervalDocOf(p.Own), list(p.OnlyRef), list(p.OnlyNew)}
}

func list(names []string) []string { return append([]string{}, names...) }

func bandDocOf(b *compare.Band) *bandDoc {
	if b == nil {
		return nil
	}
	doc := &bandDoc{Level: number(b.Level), Differs: b.Differs, Text: optional(b.Text), Points: []bandPointDoc{}}
	for _, q := range b.Points {
		doc.Points = append(doc.Points, bandPointDoc{number(q.I), number(q.Shift), number(q.Low), number(q.High), q.Reference, q.Candidate})
	}
	return doc
}

func gainDocOf(g *compare.Gain) *gainDoc {
	if g == nil {
		return nil
	}
	return &gainDoc{g.Key, intervalDocOf(g.Percent), number(g.P), g.Adjusted, g.N, optional(g.Text)}
}

func noteDocs(ws []fit.Warning) []noteDoc {
	docs := []noteDoc{}
	for _, w := range ws {
		docs = append(docs, noteDoc(w))
	}
	return docs
}

// membersDoc is an object with its members in their order.
type membersDoc []member

func (d membersDoc) MarshalJSON() ([]byte, error) {
	var b bytes.Buffer
	err := writeObject(&b, d...)
	return b.Bytes(), err
}

type trendLotDoc struct {
	Lot      string   `json:"lot"`
	At       optional `json:"measured_at"`
	DateCode optional `json:"date_code"`
	N        int      `json:"n"`
	Centre   number   `json:"centre_V"`
	U        number   `json:"u_V"`
	SD       number   `json:"sd_V"`
	Outside  bool     `json:"outside"`
}

type lotPairDoc struct {
	A         string `json:"a"`
	B         string `json:"b"`
	Shift     number `json:"shift_V"`
	Low       number `json:"low_V"`
	High      number `json:"high_V"`
	P         number `json:"p"`
	PAdjusted number `json:"p_adjusted"`
}

type trendDoc struct {
	Quantity    fit.Key       `json:"quantity"`
	Lots        []trendLotDoc `json:"lots"`
	Untimed     bool          `json:"order_not_known"`
	Centre      number        `json:"centre_V"`
	Low         number        `json:"low_V"`
	High        number        `json:"high_V"`
	Provisional bool          `json:"provisional"`
	Pairs       []lotPairDoc  `json:"pairs"`
	Text        []string      `json:"text"`
}

func trendDocOf(t *compare.Trend) trendDoc {
	doc := trendDoc{Quantity: t.By, Lots: []trendLotDoc{}, Untimed: t.Untimed, Centre: number(t.Centre), Low: number(t.Low), High: number(t.High),
		Provisional: t.Provisional, Pairs: []lotPairDoc{}, Text: list(t.Text)}
	for _, l := range t.Lots {
		doc.Lots = append(doc.Lots, trendLotDoc{l.Name, optional(l.At), optional(l.DateCode), l.N, number(l.Centre), number(l.U), number(l.SD), l.Outside})
	}
	for _, q := range t.Pairs {
		doc.Pairs = append(doc.Pairs, lotPairDoc{q.A, q.B, number(q.Shift), number(q.Low), number(q.High), number(q.P), number(q.PAdjusted)})
	}
	return doc
}

// CompareJSON writes what `compare --json` gives: one comparison, or with several
// lots all of them and the run of lots.
func CompareJSON(w io.Writer, c ComparedLots) error {
	for i := range c.Candidates {
		if c.Candidates[i].Compared == nil {
			return fmt.Errorf("lot %q: %w", c.Candidates[i].Lot.Name, ErrNotCompared)
		}
	}
	if len(c.Candidates) == 1 {
		return writeObject(w, append([]member{{"schema", Schema}}, compareMembers(&c.Candidates[0])...)...)
	}
	docs := rows{}
	for i := range c.Candidates {
		docs = append(docs, membersDoc(append([]member{{"schema", Schema}}, compareMembers(&c.Candidates[i])...)))
	}
	all := []member{{"schema", Schema}, {"reference", c.Reference.Lot.Name}, {"comparisons", docs}}
	if c.Trend != nil {
		all = append(all, member{"trend", trendDocOf(c.Trend)})
	}
	return writeObject(w, all...)
}
