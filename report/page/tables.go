package page

import (
	"fmt"
	"html/template"
	"math"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
)

func text(words string) cell    { return cell{Text: rich(words)} }
func nameCell(name string) cell { return cell{Text: plain(name), Head: true} }
func number(words string) cell {
	return cell{Text: rich(words), Right: true, None: words == report.NotAvailable}
}

func optional(words string) cell {
	if words == "" {
		return cell{Text: report.NotGiven, None: true}
	}
	return text(words)
}

func (v *view) spread(k *known) {
	t := &table{
		Caption: "Spread of the lot",
		Heads: []head{{"quantity", false}, {"unit", false}, {"n", true}, {"above", true}, {"median", true}, {"robust sd", true},
			{"mean", true}, {"± (mean)", true}, {"sd", true}, {"least", true}, {"greatest", true}},
	}
	for _, key := range fit.Keys {
		m, ok := k.Spread.Summary[key]
		if !ok || m.N == 0 && m.Above == 0 {
			continue
		}
		sc, se, step := report.SummaryScale(key, m), report.StandardError(m), report.SummaryDigits(m)
		num := func(x float64) cell { return number(sc.FormatNumber(x, step, 0)) }
		plain := func(x float64) cell { return number(sc.FormatNumber(x, se, 0)) }
		t.Rows = append(t.Rows, []cell{
			{Text: rich(k.KeyPhrase(key)), Head: true}, text(sc.Unit(report.KeyOf(key).Unit)), number(strconv.Itoa(m.N)), number(strconv.Itoa(m.Above)),
			num(m.Median), num(m.RobustSD), plain(m.Mean), plain(se), plain(m.SD), num(m.Min), num(m.Max),
		})
	}
	if len(t.Rows) > 0 {
		note := "± (mean) is the standard uncertainty of the mean, sd/√n. Devices above the range count as above every value in medians."
		if k.Spread.Estimator != "" {
			note = "Robust estimator: " + report.Sentence(k.Spread.Estimator) + " " + note
		}
		t.Note = rich(note)
		v.Spread = t
	}
	if sp := k.Spread.Split; sp != nil {
		symbol, unit := report.KeyOf(sp.By).Symbol, report.KeyOf(sp.By).Unit
		v.Groups = []group{
			{richf("Lower group, %s, %s up to %s", plural(len(sp.Low), "device"), symbol, report.FormatPlain(sp.GapLow, math.NaN(), unit)), foldNames(sp.Low)},
			{richf("Upper group, %s, %s from %s", plural(len(sp.High), "device"), symbol, report.FormatPlain(sp.GapHigh, math.NaN(), unit)), foldNames(sp.High)},
		}
		for _, o := range sp.Origins {
			v.Groups = append(v.Groups, group{richf("By %s", o.Of), rich(report.OriginWords(o))})
		}
		v.GroupNote = richf("The evidence for two groups is %.3g, and %.3g is needed: %s.", sp.Score, sp.Bar, lot.SplitBasis)
	}
	l := &table{Caption: "Limits behind the flags", Heads: []head{{"quantity", false}, {"unit", false}, {"low", true}, {"high", true}, {"× robust sd", true}, {"basis", false}}}
	for _, key := range report.KeysIn(k.Spread.Limits) {
		lim := k.Spread.Limits[key]
		low, high, unit := report.LimitTexts(key, k.Spread.Summary[key], lim)
		width := report.NotAvailable
		if isNumber(lim.K) {
			width = "± " + strconv.FormatFloat(lim.K, 'g', 3, 64)
		}
		l.Rows = append(l.Rows, []cell{
			{Text: rich(k.KeyPhrase(key)), Head: true}, text(unit), number(low), number(high), number(width), text(lim.Basis),
		})
	}
	if len(l.Rows) > 0 {
		v.Limits = l
	}
}

func (v *view) bins(k *known) {
	srt := k.Sorting
	if srt == nil {
		return
	}
	sc := report.BinScale(srt)
	unit := sc.Unit(report.KeyOf(srt.By).Unit)
	t := &table{Class: "bins", Caption: richf("Bins by %s", k.KeyPhrase(srt.By)), Heads: []head{{"bin", false}, {richf("from (%s)", unit), true}, {richf("below (%s)", unit), true}, {"devices", true}, {"which", false}}}
	for _, b := range report.BinRows(srt) {
		var names []string
		for _, d := range b.Devices {
			name := report.Clean(d.Name)
			if d.Maybe != "" {
				name += " (or " + report.Clean(d.Maybe) + ")"
			}
			names = append(names, name)
		}
		list := cell{Text: foldNames(names)}
		if len(names) == 0 {
			list = cell{Text: "none", None: true}
		}
		t.Rows = append(t.Rows, []cell{nameCell(b.Name), number(report.EdgeText(srt, sc, b.Low)), number(report.EdgeText(srt, sc, b.High)), number(b.Count()), list})
	}
	note := "How narrow a bin may be is not known, because no uncertainty of the readings is known."
	if isNumber(srt.SmallestWidth) && srt.SmallestWidth > 0 {
		note = fmt.Sprintf("A bin narrower than %s would sort noise (4 standard uncertainties of a device).", report.FormatTwoDigits(srt.SmallestWidth, report.KeyOf(srt.By).Unit))
	}
	t.Note = rich(note + " A device within 2 standard uncertainties of an edge names the bin across it as well.")
	v.Bins = t
	for _, g := range report.GroupNames(k.Unsorted()) {
		why := rich(report.Sentence(g.Text))
		if len(g.Names) > mostNames {
			v.Unsorted = append(v.Unsorted, group{richf("%d devices", len(g.Names)), why + " " + foldNames(g.Names)})
			continue
		}
		v.Unsorted = append(v.Unsorted, group{"<bdi>" + plain(strings.Join(g.Names, ", ")) + "</bdi>", why})
	}
}

// Longer lists of names are folded, with the first few in sight.
const (
	mostNames = 40
	headNames = 30
)

// foldNames lists names; a long list shows its first and keeps the others one
// click away. Printed it is whole where the browser can open it.
func foldNames(names []string) template.HTML {
	if len(names) <= mostNames {
		return plain(strings.Join(names, ", "))
	}
	return plain(strings.Join(names[:headNames], ", ")) +
		template.HTML(fmt.Sprintf(` <details class="more"><summary>and %d more</summary>`, len(names)-headNames)) +
		plain(strings.Join(names[headNames:], ", ")) + "</details>"
}

func (v *view) flags(k *known) {
	for _, vd := range k.Spread.Devices {
		if !vd.Flagged {
			continue
		}
		n := named{Name: report.Clean(vd.Name)}
		for _, r := range vd.Reasons {
			text := rich(k.ReasonText(r))
			if r.Code == fit.CodeTwoPopulations && k.Spread.Split != nil {
				// The advice stands with the groups.
			} else if next := k.Advice(r.Code).Next; next != "" {
				text += " " + rich(next)
			} else if next := stateNext(r.Code); next != "" {
				text += " " + rich(next)
			}
			n.Texts = append(n.Texts, text)
			n.Codes = append(n.Codes, report.Clean(r.Code))
		}
		v.Flags = append(v.Flags, n)
	}
	for _, d := range k.Doubts() {
		n := named{Name: report.Clean(d.Name)}
		for _, text := range d.Texts {
			n.Texts = append(n.Texts, rich(text))
		}
		v.Doubts = append(v.Doubts, n)
	}
	v.FlagCount = fmt.Sprintf("%s of %d", none(len(v.Flags)), len(k.Spread.Devices))
}

// stateNext tells what to do about a flag that is a state.
func stateNext(code string) string {
	switch s := fit.State(code); s {
	case fit.Open, fit.Shorted, fit.WrongWayRound:
		return report.WordsOf(s).Next
	}
	return ""
}

// maxLeftOut bounds the table of points left out.
const maxLeftOut = 1000

func (v *view) leftOut(k *known) {
	t := &table{Caption: "Points left out of a fit", Heads: []head{{"device", false}, {"sweep", true}, {"point", true}, {"source line", true}, {rich("V_GS (V)"), true}, {rich("I_D (A)"), true}, {"why", false}}}
	total := 0
	at := func(x []float64, i int) cell {
		if i < 0 || i >= len(x) || math.IsNaN(x[i]) {
			return cell{Text: "none", Right: true, None: true}
		}
		if math.IsInf(x[i], 0) {
			return cell{Text: "beyond the range", Right: true, None: true}
		}
		return number(strconv.FormatFloat(x[i], 'g', 6, 64))
	}
	for i := range k.Devices {
		d := &k.Devices[i]
		for j := range d.Sweeps {
			sw := &d.Sweeps[j]
			id := currents(sw)
			for _, l := range sw.Result.LeftOut {
				if total++; total > maxLeftOut {
					continue
				}
				line := cell{Text: "–", Right: true, None: true}
				if n := sw.Line(l.Index); n > 0 {
					line = number(strconv.Itoa(n))
				}
				t.Rows = append(t.Rows, []cell{nameCell(d.Name), number(strconv.Itoa(j + 1)), number(strconv.Itoa(l.Index + 1)), line, at(sw.Curve.Vg, l.Index), at(id, l.Index), {Text: rich(report.Sentence(l.Text)) + " (" + plain(l.Code) + ")"}})
			}
		}
	}
	if total == 0 {
		return
	}
	if total > maxLeftOut {
		t.Note = richf("The first %d of %d; all of them stand in the JSON export of the lot.", maxLeftOut, total)
	}
	v.LeftOut = t
}
