package report

import "gatesill/fit/lot"

type guardDoc struct {
	Value float64 `json:"value"`
	Unit  string  `json:"unit"` // "V", or "u": multiples of the absolute standard uncertainty
}

type ppkDoc struct {
	Value    number   `json:"value"`
	Lower    number   `json:"lower"`
	Level    number   `json:"level"`
	N        int      `json:"n"`
	NormalP  number   `json:"normal_p"`
	Of       string   `json:"of"`
	Declined optional `json:"declined"`
}

type toleranceDoc struct {
	Low      number   `json:"low_V"`
	High     number   `json:"high_V"`
	Share    number   `json:"share"`
	Level    number   `json:"level"`
	Kind     optional `json:"kind"`
	Factor   number   `json:"factor"`
	N        int      `json:"n"`
	Of       string   `json:"of"`
	Declined optional `json:"declined"`
}

type outsideDoc struct {
	Count int    `json:"count"`
	N     int    `json:"n"`
	Upper number `json:"share_upper"`
	Level number `json:"level"`
}

type sendBackDoc struct {
	Rule   string   `json:"rule"`
	Set    string   `json:"set"`
	Broken *bool    `json:"broken"`
	By     []string `json:"by"`
}

type decisionCounts struct {
	Pass            int `json:"pass"`
	ConditionalPass int `json:"conditional_pass"`
	ConditionalFail int `json:"conditional_fail"`
	Fail            int `json:"fail"`
	None            int `json:"no_verdict"`
}

type specDoc struct {
	Quantity string         `json:"quantity"`
	Low      number         `json:"low_V"`
	High     number         `json:"high_V"`
	Guard    *guardDoc      `json:"guard"`
	GuardSet string         `json:"guard_set"` // before, after, none
	Why      optional       `json:"why"`       // no device can be judged, because ...
	Verdicts decisionCounts `json:"verdicts"`
	Ppk      ppkDoc         `json:"ppk"`
	Band     toleranceDoc   `json:"tolerance_interval"`
	Outside  outsideDoc     `json:"outside"`
	SendBack *sendBackDoc   `json:"send_back"`
}

func specDocOf(s *lot.Specification) *specDoc {
	if s == nil {
		return nil
	}
	d := &specDoc{
		Quantity: "vgsth_V", Low: number(s.Low), High: number(s.High), GuardSet: s.GuardSet, Why: optional(s.Why),
		Verdicts: decisionCounts{s.Count[lot.Pass], s.Count[lot.ConditionalPass], s.Count[lot.ConditionalFail], s.Count[lot.Fail], s.Undecided},
		Ppk:      ppkDoc{number(s.Ppk.Value), number(s.Ppk.Lower), number(s.Ppk.Level), s.Ppk.N, number(s.Ppk.NormalP), s.Ppk.Of, optional(s.Ppk.Declined)},
		Band: toleranceDoc{number(s.Band.Low), number(s.Band.High), number(s.Band.Share), number(s.Band.Level), optional(s.Band.Kind),
			number(s.Band.Factor), s.Band.N, s.Band.Of, optional(s.Band.Declined)},
		Outside: outsideDoc{s.Outside.Count, s.Outside.N, number(s.Outside.Upper), number(s.Outside.Level)},
	}
	if s.Guard.Unit != "" {
		d.Guard = &guardDoc{s.Guard.Value, s.Guard.Unit}
	}
	if s.SendBack {
		d.SendBack = &sendBackDoc{Rule: "outside-limits", Set: s.SendBackSet, By: append([]string{}, s.Broken...)}
		if s.Why == "" {
			broken := len(s.Broken) > 0
			d.SendBack.Broken = &broken
		}
	}
	return d
}

// judgementDoc is what a device has of the specification.
type judgementDoc struct {
	Verdict optional `json:"verdict"`
	Conform number   `json:"conformance_probability"`
	Guard   number   `json:"guard_V"`
	Why     optional `json:"verdict_why"`
}

func judgementDocs(s *lot.Specification) map[string]*judgementDoc {
	if s == nil {
		return nil
	}
	m := make(map[string]*judgementDoc, len(s.Devices))
	for _, j := range s.Devices {
		m[j.Name] = &judgementDoc{optional(j.Decision), number(j.Conform), number(j.Guard), optional(j.Why)}
	}
	return m
}

type originDoc struct {
	Of      string           `json:"of"`
	P       number           `json:"p"`
	Follows bool             `json:"follows"`
	Text    optional         `json:"text"`
	Groups  []originGroupDoc `json:"groups"`
}

type originGroupDoc struct {
	Name optional `json:"name"`
	Low  int      `json:"low"`
	High int      `json:"high"`
}

// splitDoc is the parting of a lot in two; the numbers are in the unit that ends By.
type splitDoc struct {
	By      string      `json:"by"`
	GapLow  number      `json:"gap_low"`
	GapHigh number      `json:"gap_high"`
	Score   number      `json:"score"`
	Bar     number      `json:"bar"`
	Basis   string      `json:"basis"`
	Also    optional    `json:"also"`
	Text    string      `json:"text"`
	Low     []string    `json:"low"`
	High    []string    `json:"high"`
	Origins []originDoc `json:"origins"`
}

func splitDocOf(s *lot.Split) *splitDoc {
	if s == nil {
		return nil
	}
	d := &splitDoc{
		By: string(s.By), GapLow: number(s.GapLow), GapHigh: number(s.GapHigh), Score: number(s.Score), Bar: number(s.Bar), Basis: lot.SplitBasis,
		Also: optional(s.SecondAlso), Text: s.Text, Low: append([]string{}, s.Low...), High: append([]string{}, s.High...), Origins: []originDoc{},
	}
	for _, o := range s.Origins {
		doc := originDoc{Of: o.Of, P: number(o.P), Follows: o.Follows, Text: optional(o.Text)}
		for _, g := range o.Groups {
			doc.Groups = append(doc.Groups, originGroupDoc{optional(g.Name), g.Low, g.High})
		}
		d.Origins = append(d.Origins, doc)
	}
	return d
}
