package page

import (
	"fmt"
	"html/template"
	"math"

	"gatesill/fit/bias"
	"gatesill/report"
	"gatesill/report/svg"
)

// lines shows the devices on one gate line that were asked for.
func (b *biased) lines(v *biasView) {
	for k, l := range b.Lines {
		o := lineView{Head: richf("On one gate line: %s, %s together", plural(len(l.Names), "device"), report.FormatGiven(l.Total, "A"))}
		for _, f := range b.LineFacts(l) {
			o.Says = append(o.Says, group{rich(f.Label), rich(report.Sentence(f.Value))})
		}
		if l.Cold.Err == nil {
			o.Figure, o.Table = b.line(k, l)
		}
		v.Lines = append(v.Lines, o)
	}
}

// line draws what the devices of one line carry, and puts it in a table.
func (b *biased) line(k int, l *bias.Line) (*figure, *table) {
	states := []struct {
		head string
		s    *bias.State
	}{{"cold", &l.Cold}, {"warmed up", &l.Hot}, {"without resistors", l.Bare}}
	t := &table{Caption: "What they carry", Heads: []head{{"device", false}, {"alone at idle (V)", true}}}
	list := make([]svg.Share, len(l.Names))
	for i, name := range l.Names {
		list[i] = svg.Share{Name: name, Cold: math.NaN(), Hot: math.NaN(), Bare: math.NaN()}
		value := report.NotAvailable
		if i < len(l.Gates) && l.Gates[i].Ok() {
			value = report.FormatPlain(l.Gates[i].Value, l.Gates[i].U, "")
		}
		t.Rows = append(t.Rows, []cell{nameCell(name), number(value)})
	}
	for which, st := range states {
		if st.s == nil || st.s.Err != nil || len(st.s.Devices) != len(l.Names) {
			continue
		}
		power := isNumber(st.s.Devices[0].Power) && which < 2
		t.Heads = append(t.Heads, head{rich(st.head), true})
		if power {
			t.Heads = append(t.Heads, head{"power", true})
		}
		if which == 1 {
			t.Heads = append(t.Heads, head{"device at", true})
		}
		for i, d := range st.s.Devices {
			*[]*float64{&list[i].Cold, &list[i].Hot, &list[i].Bare}[which] = d.I
			t.Rows[i] = append(t.Rows[i], number(bias.AmpWords(d.I)))
			if power {
				t.Rows[i] = append(t.Rows[i], number(report.FormatTwoDigits(d.Power, "W")))
			}
			if which == 1 {
				t.Rows[i] = append(t.Rows[i], number(fmt.Sprintf("%.0f °C", d.Temp)))
			}
		}
	}
	pic, drawn := svg.AppendLine(nil, list, svg.LineOptions{
		Frame: svg.Frame{ID: fmt.Sprintf("bias-line-%d", k+1), Title: "Currents of devices on one gate line", Desc: fmt.Sprintf("What each of %s on one gate line carries. The numbers stand in the table beside.", plural(len(l.Names), "device"))},
		Each:  l.Total / float64(max(1, len(l.Names))),
	})
	note := ""
	if drawn.Beyond > 0 {
		note = fmt.Sprintf("%s more stand in the table.", plural(drawn.Beyond, "device"))
	}
	return &figure{Label: "devices on one gate line", SVG: template.HTML(pic), Caption: rich(note)}, t
}
