package report

import (
	"math"
)

// deviceTimeline shows what a device read in each sitting, where there are two or
// more.
func deviceTimeline(p *printer, f *DeviceFile, s *Sheet, style Style) {
	if len(f.Timeline) < 2 {
		return
	}
	p.line("")
	p.line("%s", style.paint("By session, "+s.KeyPhrase(f.By), bold))
	var when, n, temps, raw, corrected []string
	var values []float64
	known, warm := false, false
	for _, m := range f.Timeline {
		when, n, values = append(when, Clean(m.Sitting)), append(n, itoa(m.N)), append(values, m.Value)
		t := NotAvailable
		if isNumber(m.Temp) {
			t, warm = fixed(m.Temp, 1), true
		}
		known = known || isNumber(m.Corrected)
		temps, raw, corrected = append(temps, t), append(raw, signedMillivolts(m.Raw)), append(corrected, signedMillivolts(m.Corrected))
	}
	cells, unit := numbersAt("V", values, nil, readTo(values), func(int) string { return NotAvailable })
	g := grid{style: style, cols: []column{
		{head: "session", cells: when, wrap: 24}, {head: "n", cells: n, right: true}, {head: "value", unit: unit, cells: cells},
		{head: "temperature", unit: "°C", cells: temps, right: true, rank: 1}, {head: "change", unit: "mV", cells: raw, right: true},
	}}
	if known {
		g.cols = append(g.cols, column{head: "corrected", unit: "mV", cells: corrected, right: true})
	}
	p.grid(g)
	switch {
	case known:
		wrapped(p, "", "  ", "corrected: less what "+signedMillivolts(f.Tempco)+" mV/K explains.", style.Width)
	case warm && math.IsNaN(f.Tempco):
		wrapped(p, "", "  ", "Not corrected for temperature: give the coefficient of the part, for instance --tempco -4mV/K.", style.Width)
	}
	for _, t := range f.History {
		wrapped(p, "", "  ", Clean(Sentence(t)), style.Width)
	}
}

type momentDoc struct {
	Session   string `json:"session"`
	N         int    `json:"n"`
	Value     number `json:"value_V"`
	Temp      number `json:"temp_degC"`
	Change    number `json:"change_V"`
	Corrected number `json:"corrected_V"`
}

func timelineDocs(f *DeviceFile) rows {
	docs := rows{}
	for _, m := range f.Timeline {
		docs = append(docs, momentDoc{m.Sitting, m.N, number(m.Value), number(m.Temp), number(m.Raw), number(m.Corrected)})
	}
	return docs
}
