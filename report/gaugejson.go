package report

import (
	"io"
	"math"

	"gatesill/fit"
	"gatesill/fit/gauge"
)

// estimateDoc is a number with its 95 % interval.
type estimateDoc struct {
	Value number `json:"value_V"`
	Low   number `json:"low_V"`
	High  number `json:"high_V"`
	DF    number `json:"df"`
}

func estimateDocOf(e gauge.Estimate) estimateDoc {
	return estimateDoc{number(e.Value), number(e.Low), number(e.High), number(e.DF)}
}

type repeatabilityDoc struct {
	estimateDoc
	Devices    int    `json:"devices"`
	Measurings int    `json:"measurings"`
	Basis      string `json:"basis"`
	Enough     bool   `json:"enough"`
}

func repeatabilityDocOf(r gauge.Repeatability) repeatabilityDoc {
	return repeatabilityDoc{estimateDocOf(r.Estimate), r.Devices, r.Measurings, r.Basis, r.Enough()}
}

type levelDoc struct {
	Level string `json:"level"`
	N     int    `json:"n"`
	Off   number `json:"off_mean_V"`
}

type factorDoc struct {
	Factor string `json:"factor"`
	estimateDoc
	P      number     `json:"p"`
	Levels []levelDoc `json:"levels"`
	With   optional   `json:"not_told_from"`
}

type againDoc struct {
	Device string `json:"device"`
	Place  int    `json:"place"`
	Change number `json:"change_V"`
	Limit  number `json:"limit_V"`
	Beyond bool   `json:"beyond"`
}

type driftDoc struct {
	Session    string    `json:"session"`
	Measurings int       `json:"measurings"`
	Devices    int       `json:"devices"`
	By         string    `json:"by"`
	PerPlace   number    `json:"per_place_V"`
	Low        number    `json:"low_V"`
	High       number    `json:"high_V"`
	Over       number    `json:"over_session_V"`
	Rest       number    `json:"repeatability_without_V"`
	P          number    `json:"p"`
	PAdjusted  number    `json:"p_adjusted"`
	Seen       bool      `json:"seen"`
	First      *againDoc `json:"first_again"`
}

type pointDoc struct {
	When    string `json:"when"`
	Value   number `json:"value_V"`
	Range   number `json:"moved_V"`
	Outside bool   `json:"outside"`
}

type chartDoc struct {
	Device      string     `json:"device"`
	By          string     `json:"point_is"`
	Corrected   bool       `json:"temperature_corrected"`
	Centre      number     `json:"mean_V"`
	Low         number     `json:"low_V"`
	High        number     `json:"high_V"`
	RangeHigh   number     `json:"moved_high_V"`
	Provisional bool       `json:"provisional"`
	Trend       number     `json:"trend_per_point_V"`
	TrendP      number     `json:"trend_p"`
	Points      []pointDoc `json:"points"`
}

type occasionDoc struct {
	When string `json:"when"`
	Low  number `json:"temp_low_degC"`
	Top  number `json:"temp_high_degC"`
}

type movedDoc struct {
	Device    string `json:"device"`
	First     number `json:"first_V"`
	Last      number `json:"last_V"`
	Raw       number `json:"change_V"`
	Corrected number `json:"corrected_V"`
	Own       number `json:"own_V"`
	Changed   bool   `json:"changed"`
}

type historyDoc struct {
	From       occasionDoc `json:"from"`
	To         occasionDoc `json:"to"`
	Raw        estimateDoc `json:"median_change"`
	Corrected  estimateDoc `json:"median_corrected"`
	Tempco     number      `json:"tempco_V_per_K"`
	FromDiffs  number      `json:"repeatability_from_differences_V"`
	Sigma      number      `json:"sigma_V"`
	SigmaBasis optional    `json:"sigma_basis"`
	LimitOne   number      `json:"limit_one_V"`
	Limit      number      `json:"limit_V"`
	Moved      bool        `json:"all_moved"`
	Changed    []string    `json:"changed"`
	Devices    []movedDoc  `json:"devices"`
}

// GaugeJSON writes what `gauge --json` gives.
func GaugeJSON(w io.Writer, s Sheet, g Gauge) error {
	st := &g.Study
	factors, drifts, charts, history := rows{}, rows{}, rows{}, rows{}
	for _, f := range st.Factors {
		doc := factorDoc{Factor: f.Name, estimateDoc: estimateDocOf(f.SD), P: number(f.P), Levels: []levelDoc{}, With: optional(f.With)}
		for _, l := range f.Levels {
			doc.Levels = append(doc.Levels, levelDoc{l.Name, l.Measurings, number(l.Off)})
		}
		factors = append(factors, doc)
	}
	for i := range g.Drifts {
		drifts = append(drifts, driftDocOf(&g.Drifts[i]))
	}
	for i := range g.Charts {
		charts = append(charts, chartDocOf(&g.Charts[i]))
	}
	for i := range g.History {
		history = append(history, historyDocOf(&g.History[i]))
	}
	categories := any(st.Categories)
	if st.Categories < 0 {
		categories = nil
	}
	current := s.TestCurrent
	if g.By == fit.KeyVgsIdle {
		current = s.IdleCurrent
	}
	return writeObject(w,
		member{"schema", Schema}, member{"lot", s.Lot.Name}, member{"quantity", string(g.By)}, member{"at_A", number(current)},
		member{"repeatability", repeatabilityDocOf(st.Repeatability)},
		member{"left_out", append([]string{}, st.Odd...)},
		member{"more_devices_needed", st.MoreDevices}, member{"more_repeats_needed", st.MoreRepeats},
		member{"reproducibility", factors},
		member{"difference_that_counts_V", number(st.Repeatability.Counts())}, member{"difference_95_V", number(st.Repeatability.Counts95())},
		member{"smallest_honest_width_V", number(st.Repeatability.Width())},
		member{"lot_sd", estimateDocOf(st.Lot)},
		member{"share_of_spread", struct {
			Value number `json:"value"`
			Low   number `json:"low"`
			High  number `json:"high"`
			With  number `json:"with_factors"`
		}{number(st.Share.Value), number(st.Share.Low), number(st.Share.High), number(st.SharedBy)}},
		member{"categories", categories},
		member{"order", struct {
			Random *bool    `json:"random"`
			Text   optional `json:"text"`
		}{randomness(st.Order), optional(st.Order.Text)}},
		member{"used", usedDoc(g.Used)},
		member{"drift", drifts}, member{"control", charts}, member{"history", history},
		member{"warnings", rowsOf(append([]fit.Warning{}, g.Warnings...))})
}

// usedDoc is the repeatability that other values are held against; null where
// none is known.
func usedDoc(r gauge.Repeatability) any {
	if math.IsNaN(r.Value) {
		return nil
	}
	return repeatabilityDocOf(r)
}

func randomness(o gauge.Order) *bool {
	if !o.Known {
		return nil
	}
	return &o.Random
}

func driftDocOf(d *gauge.Drift) driftDoc {
	doc := driftDoc{
		Session: d.Sitting, Measurings: d.Measurings, Devices: d.Devices, By: "values in order", PerPlace: number(d.PerPlace.Value),
		Low: number(d.PerPlace.Low), High: number(d.PerPlace.High), Over: number(d.Over), Rest: number(d.Rest), P: number(d.P), PAdjusted: number(d.PAdjusted), Seen: d.Seen(),
	}
	if d.Again {
		doc.By = "devices put in again"
	}
	if f := d.First; f != nil {
		doc.First = &againDoc{f.Device, f.Place, number(f.Change), number(f.Limit), f.Beyond}
	}
	return doc
}

func chartDocOf(c *gauge.Chart) chartDoc {
	doc := chartDoc{
		Device: c.Device, By: c.By, Corrected: c.Corrected, Centre: number(c.Centre), Low: number(c.Low), High: number(c.High),
		RangeHigh: number(c.RangeHigh), Provisional: c.Provisional, Trend: number(c.Trend.Value), TrendP: number(c.TrendP), Points: []pointDoc{},
	}
	for _, p := range c.Points {
		doc.Points = append(doc.Points, pointDoc{p.Label, number(p.Value), number(p.Range), p.Outside})
	}
	return doc
}

func historyDocOf(h *gauge.History) historyDoc {
	doc := historyDoc{
		From: occasionDoc{h.From.Name, number(h.From.TempLow), number(h.From.TempTop)}, To: occasionDoc{h.To.Name, number(h.To.TempLow), number(h.To.TempTop)},
		Raw: estimateDocOf(h.Raw), Corrected: estimateDocOf(h.Corrected), Tempco: number(h.Tempco), FromDiffs: number(h.FromDiffs),
		Sigma: number(h.Sigma), SigmaBasis: optional(h.SigmaBasis), LimitOne: number(h.LimitOne), Limit: number(h.Limit), Moved: h.Moved(),
		Changed: append([]string{}, h.ChangedDevices()...), Devices: []movedDoc{},
	}
	for _, c := range h.Changes {
		doc.Devices = append(doc.Devices, movedDoc{c.Device, number(c.First), number(c.Last), number(c.Raw), number(c.Corrected), number(c.Own), c.Changed})
	}
	return doc
}

// heldMembers are the repeatability that u holds, for the object of another verb;
// none where none is known.
func heldMembers(s *Sheet, by fit.Key) []member {
	r, ok := s.Repeatability[by]
	if !ok {
		return nil
	}
	return []member{{"repeatability", repeatabilityDocOf(r)}}
}
