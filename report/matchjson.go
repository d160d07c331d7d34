package report

import (
	"io"
	"math"

	"gatesill/fit"
	"gatesill/fit/match"
)

type setDoc struct {
	Set       int       `json:"set"`
	ID        optional  `json:"id"`
	Name      optional  `json:"name"`
	Devices   []string  `json:"devices"`
	Lots      []string  `json:"lots,omitempty"` // of the devices, where there are several lots
	Spread    number    `json:"spread_V"`
	Spreads   []number  `json:"spreads"` // by criterion: V, or a share
	Distance  number    `json:"mismatch_V"`
	Within    bool      `json:"within"`
	Alike     bool      `json:"alike"`
	Limit     number    `json:"alike_limit_V"`
	Imbalance number    `json:"imbalance_A"`
	Share     number    `json:"imbalance_share"`
	Gate      number    `json:"gate_V"`
	Currents  []number  `json:"currents_A"`
	Hottest   optional  `json:"hottest"`
	Power     number    `json:"hottest_W"`
	Basis     optional  `json:"currents_from"`
	Values    []rowDoc  `json:"values"`
	Inside    []sideDoc `json:"inside_packages,omitempty"`
	Repair    *mendDoc  `json:"repair"`
}

// rowDoc is what one device of a set had, in the order of "by".
type rowDoc []number

type sideDoc struct {
	Package   string `json:"package"`
	Lot       string `json:"lot"`
	Spread    number `json:"spread_V"`
	Imbalance number `json:"imbalance_A"`
}

type mendDoc struct {
	Trim      []number `json:"gate_above_least_V"`
	Resistors []number `json:"source_resistors_ohm"`
	Text      string   `json:"text"`
}

type boundDoc struct {
	Kind  optional `json:"kind"`
	Total number   `json:"total_V"`
	Worst number   `json:"worst_V"`
	Sets  int      `json:"sets"`
	Gap   number   `json:"gap"`
	Proof optional `json:"proof"`
}

type tradeDoc struct {
	Within    number `json:"within_V"`
	Sets      int    `json:"sets"`
	Exact     bool   `json:"exact"`
	Total     number `json:"total_V"`
	Mean      number `json:"mean_V"`
	Left      int    `json:"left_over"`
	Imbalance number `json:"imbalance_A"`
}

type leftDoc struct {
	Device string   `json:"device"`
	Lot    string   `json:"lot"`
	Out    bool     `json:"not_given_out"`
	Set    optional `json:"in_set"`
	Why    string   `json:"why"`
}

type moreDoc struct {
	Devices int    `json:"more_devices"`
	Sets    number `json:"more_sets"`
	Low     number `json:"more_sets_low"`
	High    number `json:"more_sets_high"`
	Runs    int    `json:"runs"`
	Exact   bool   `json:"exact"`
	Text    string `json:"text"`
}

type criterionDoc struct {
	Quantity string `json:"quantity"`
	Within   number `json:"within"` // V, or a share of a gain; null: no limit
	Weight   number `json:"weight"`
}

func numbersDoc(x []float64) []number {
	out := make([]number, len(x))
	for i, v := range x {
		out[i] = number(v)
	}
	return out
}

func positive(x float64) number {
	if x > 0 {
		return number(x)
	}
	return number(math.NaN())
}

func criterionDocs(by []match.Criterion) []criterionDoc {
	docs := []criterionDoc{}
	for _, c := range by {
		docs = append(docs, criterionDoc{string(c.Key), positive(c.Within), positive(c.Weight)})
	}
	return docs
}

func (m *Matched) setDocOf(s *match.Set) setDoc {
	sh := &s.Sharing
	d := setDoc{
		Set: s.Number, ID: optional(m.Locked[s.Number].ID), Name: optional(m.Locked[s.Number].Name), Devices: []string{},
		Spread: number(s.Spread), Spreads: numbersDoc(s.Spreads), Distance: number(s.Distance), Within: s.Within, Alike: s.Alike, Limit: number(s.Limit),
		Imbalance: number(sh.Imbalance), Share: number(sh.Share), Gate: number(sh.Gate), Currents: numbersDoc(sh.Currents), Power: number(sh.Power), Basis: optional(sh.Basis), Values: []rowDoc{},
	}
	if sh.Hottest >= 0 && sh.Hottest < len(s.Devices) {
		d.Hottest = optional(s.Devices[sh.Hottest].Name)
	}
	many := manyLots(m.Members)
	for _, p := range s.Devices {
		d.Devices = append(d.Devices, p.Name)
		d.Values = append(d.Values, rowDoc(numbersDoc(p.Values)))
		if many {
			d.Lots = append(d.Lots, p.Lot)
		}
	}
	for _, in := range s.Inside {
		d.Inside = append(d.Inside, sideDoc{in.Package, in.Lot, number(in.Spread), number(in.Sharing.Imbalance)})
	}
	if s.Repair.Text != "" {
		d.Repair = &mendDoc{numbersDoc(s.Repair.Trim), numbersDoc(s.Repair.Resistors), s.Repair.Text}
	}
	return d
}

// MatchJSON writes what `match --json` gives.
func MatchJSON(w io.Writer, m Matched) error {
	sets, left, why, trade, more, lots, near := rows{}, []string{}, rows{}, rows{}, rows{}, []string{}, rows{}
	for i := range m.Near {
		d := m.setDocOf(&m.Near[i])
		d.ID, d.Name = "", ""
		near = append(near, d)
	}
	for i := range m.Sets {
		sets = append(sets, m.setDocOf(&m.Sets[i]))
	}
	for _, l := range m.LeftOver {
		left = append(left, l.Name)
		why = append(why, leftDoc{l.Name, l.Lot, l.Out, optional(l.Locked), l.Why})
	}
	for _, t := range m.tradeRows() {
		trade = append(trade, tradeDoc{number(t.Within), t.Sets, t.Exact, number(t.Total), number(t.Mean), t.Left, number(t.Imbalance)})
	}
	for _, x := range m.More {
		more = append(more, moreDoc{x.Devices, number(x.Sets), number(x.Low), number(x.High), x.Runs, x.Exact, x.Text})
	}
	for _, s := range m.Sheets {
		lots = append(lots, s.Lot.Name)
	}
	b := m.Bound
	return writeObject(w, member{"schema", Schema}, member{"lots", lots}, member{"at_A", number(m.at())},
		member{"size", m.Size}, member{"aim", string(m.Aim)}, member{"by", criterionDocs(m.By)}, member{"currents_A", numbersDoc(m.Currents)},
		member{"complementary", m.Complementary}, member{"source_resistor_ohm", number(m.SourceOhms)}, member{"vds_V", number(m.Vds)},
		member{"sets", sets}, member{"left_over", left}, member{"left_over_why", why}, member{"near_misses", near}, member{"total_V", number(m.Total)}, member{"worst_V", number(m.Worst)},
		member{"bound", boundDoc{optional(b.Kind), number(b.Total), number(b.Worst), b.Sets, number(b.Gap), optional(b.Proof)}},
		member{"trade_off", trade}, member{"more", more}, member{"interrupted", m.Cut}, member{"ended_by_time_limit", m.TimeEnded}, member{"text", m.Text}, member{"warnings", append([]fit.Warning{}, m.warnings()...)})
}

// at is the current matched at: of one device at idle, or that of V_GS(th).
func (m *Matched) at() float64 {
	if len(m.By) > 0 && m.By[0].Key == fit.KeyVgsth {
		return m.Sheets[0].TestCurrent
	}
	return m.At
}

type partnerDoc struct {
	Place     int      `json:"place"` // null-like 0: it cannot be given
	Device    string   `json:"device"`
	Lot       string   `json:"lot"`
	DateCode  optional `json:"date_code"`
	Spreads   []number `json:"spreads"`
	Distance  number   `json:"mismatch_V"`
	Within    bool     `json:"within"`
	Alike     bool     `json:"alike"`
	Imbalance number   `json:"imbalance_A"`
	Share     number   `json:"imbalance_share"`
	Set       optional `json:"id"`
	Refused   optional `json:"refused"`
}

// PartnersJSON writes what `match --partner-for --json` gives.
func PartnersJSON(w io.Writer, p Partners) error {
	list, refused := rows{}, rows{}
	place := 0
	for _, x := range p.Partners {
		d := partnerDoc{
			Device: x.Name, Lot: x.Lot, DateCode: optional(x.DateCode), Spreads: numbersDoc(x.Spreads), Distance: number(x.Distance), Within: x.Within, Alike: x.Alike,
			Imbalance: number(x.Sharing.Imbalance), Share: number(x.Sharing.Share), Refused: optional(x.Refused),
		}
		if x.Refused == "" {
			place++
			d.Place = place
			d.Set = optional(p.Locked[place].ID)
		}
		list = append(list, d)
	}
	type lotDoc struct {
		Lot string `json:"lot"`
		Why string `json:"why"`
	}
	for _, r := range p.Refused {
		refused = append(refused, lotDoc(r))
	}
	return writeObject(w, member{"schema", Schema}, member{"partner_for", p.File.Device.Name}, member{"lot", p.Sheet.Lot.Name}, member{"in_set", optional(p.InSet)},
		member{"at_A", number(p.At)}, member{"by", criterionDocs(p.By)}, member{"history", timelineDocs(&p.File)},
		member{"partners", list}, member{"lots_refused", refused}, member{"warnings", append([]fit.Warning{}, p.Notes...)})
}
