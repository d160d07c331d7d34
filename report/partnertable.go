package report

import (
	"fmt"
	"io"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/match"
)

// shownPartners is how many partners the terminal lists; --json has all.
const shownPartners = 12

// PartnersTable writes the stock as partners for one device, for people: what the
// device reads and has read, then the partners, the best first, then what cannot be
// given and which lots were not searched.
func PartnersTable(w io.Writer, x Partners, style Style) error {
	p := &printer{w: w}
	d := &x.File.Device
	wrapped(p, "", "", fmt.Sprintf("Partners for %s of lot %s, by %s.", Clean(d.Name), Clean(x.Sheet.Lot.Name), criteriaWords(x.Sheet, x.By, nil)), style.Width)
	if x.InSet != "" {
		wrapped(p, "", "", fmt.Sprintf("%s is in set %s.", Clean(d.Name), Clean(x.InSet)), style.Width)
	}
	p.line("")
	for _, c := range x.By {
		key := valueKey(c)
		if q := d.Result.At(key); q.Ok() {
			wrapped(p, fmt.Sprintf("%-22s ", KeyOf(key).Symbol), "    ", FormatWithAbsolute(*q, KeyOf(key).Unit), style.Width)
		}
	}
	if at := lastMeasured(d); at != "" {
		p.line("%-22s %s", "measured", at)
	}
	deviceTimeline(p, &x.File, x.Sheet, style)
	var given []match.Partner
	var refused []lot.Unsorted
	for _, m := range x.Partners {
		if m.Refused == "" {
			given = append(given, m)
		} else {
			refused = append(refused, lot.Unsorted{Name: Clean(m.Lot) + "/" + Clean(m.Name), Why: Clean(m.Refused)})
		}
	}
	p.line("")
	if len(given) == 0 {
		p.line("%s", style.paint("No partner in the stock that was searched.", bold))
	} else {
		rest := len(given) - shownPartners
		if rest > 0 {
			given = given[:shownPartners]
		}
		p.grid(partnerGrid(&x, given, style))
		if rest > 0 {
			p.line("and %d more (--json)", rest)
		}
		p.line("")
		wrapped(p, "", "  ", "apart: by how much the two differ. imbalance: between the two on one gate line. alike: they differ by no more than 2·√2 standard uncertainties.", style.Width)
		if b := given[0].Sharing.Basis; b != "" {
			wrapped(p, "", "  ", "Currents: "+Clean(strings.TrimSuffix(b, "."))+".", style.Width)
		}
	}
	if len(refused) > 0 {
		p.line("")
		p.line("%s", style.paint(fmt.Sprintf("Not given out: %d", len(refused)), bold))
		for _, g := range GroupNames(refused) {
			wrapped(p, "  ", "    ", namesWords(g.Names, shownNames)+": "+Sentence(g.Text), style.Width)
		}
	}
	if len(x.Refused) > 0 {
		p.line("")
		p.line("%s", style.paint(fmt.Sprintf("Lots not searched: %d", len(x.Refused)), bold))
		for _, r := range x.Refused {
			wrapped(p, "  ", "    ", Clean(r.Lot)+": "+Clean(Sentence(r.Why)), style.Width)
		}
	}
	if len(x.Notes) > 0 {
		p.line("")
		lotWarnings(p, *x.Sheet, x.Notes, style)
	}
	return p.err
}

// lastMeasured is when a device was measured last; "" where no sweep says.
func lastMeasured(d *Device) string {
	at := ""
	for _, s := range d.Sweeps {
		at = max(at, s.MeasuredAt)
	}
	return Clean(at)
}

func partnerGrid(x *Partners, list []match.Partner, style Style) grid {
	n := len(list)
	place, names, lots, codes, alike, within := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	imbalance, share := make([]float64, n), make([]float64, n)
	values := make([]string, n)
	claimed, tolerance := false, false
	for _, c := range x.By {
		tolerance = tolerance || c.Within > 0
	}
	for i, m := range list {
		place[i], names[i], lots[i], codes[i] = itoa(i+1), Clean(m.Name), Clean(m.Lot), Clean(m.DateCode)
		if s, ok := x.Locked[i+1]; ok {
			place[i] += " = " + Clean(s.Name)
		}
		alike[i] = "no"
		if m.Alike {
			alike[i] = "yes"
		}
		if within[i] = "beyond"; m.Within {
			within[i] = "within"
		}
		imbalance[i], share[i] = m.Sharing.Imbalance, m.Sharing.Share
		claimed = claimed || isNumber(m.Sharing.Imbalance)
		values[i] = NotAvailable
		if v, u, _ := lot.Read(&x.Members[m.Member].Result, valueKey(x.By[0])); isNumber(v) {
			values[i] = fixed(v, valueDecimals(v, u, x.Step))
		}
	}
	g := grid{style: style, cols: []column{
		{head: "", cells: place, right: len(x.Locked) == 0}, {head: "device", cells: names}, {head: "lot", cells: lots, wrap: 16}, {head: "date code", cells: codes, rank: 1},
		{head: KeyOf(valueKey(x.By[0])).Symbol, unit: "V", cells: values, right: true},
	}}
	for c, crit := range x.By {
		v := make([]float64, n)
		for i, m := range list {
			v[i] = m.Spreads[c]
		}
		if isGain(crit.Key) {
			g.cols = append(g.cols, column{head: "gain apart", unit: "%", cells: percents(v), right: true})
			continue
		}
		g.cols = append(g.cols, column{head: "apart", unit: "mV", cells: spreadCells(v), right: true})
	}
	if claimed {
		g.cols = append(g.cols, sizeColumn("imbalance", "A", imbalance), column{head: "of idle", unit: "%", cells: percents(share), right: true})
	}
	g.cols = append(g.cols, column{head: "alike", cells: alike})
	if tolerance {
		g.cols = append(g.cols, column{head: "tolerance", cells: within})
	}
	return g
}

// valueKey is what stands beside a device for a criterion: of a curve the gate bias
// at the idle current.
func valueKey(c match.Criterion) fit.Key {
	if c.Key == match.KeyCurve {
		return fit.KeyVgsIdle
	}
	return c.Key
}
