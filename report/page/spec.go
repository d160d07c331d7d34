package page

import (
	"html/template"
	"strconv"

	"gatesill/fit/lot"
	"gatesill/report"
)

// specView is the lot against the limits of its data sheet.
type specView struct {
	Lines    []group
	Verdicts *table
	Notes    []template.HTML
}

// meanings says what each decision means.
var meanings = map[lot.Decision]string{
	lot.Pass:            "inside the limits by the guard band or more",
	lot.ConditionalPass: "inside the limits, by less than the guard band",
	lot.ConditionalFail: "outside the limits, by no more than the guard band",
	lot.Fail:            "outside the limits by more than the guard band",
}

func (v *view) specification(k *known) {
	sp := k.Spec
	if sp == nil {
		return
	}
	out := &specView{}
	for _, f := range k.SpecFields() {
		out.Lines = append(out.Lines, group{rich(f.Label), rich(report.Sentence(f.Value))})
	}
	if sp.Why == "" {
		t := &table{Caption: "Verdicts", Heads: []head{{"verdict", false}, {"devices", true}, {"means", false}}}
		for _, d := range lot.Decisions {
			if sp.Guard.Value == 0 && (d == lot.ConditionalPass || d == lot.ConditionalFail) {
				continue
			}
			t.Rows = append(t.Rows, []cell{{Text: rich(string(d)), Head: true}, number(strconv.Itoa(sp.Count[d])), text(meanings[d])})
		}
		if sp.Undecided > 0 {
			t.Rows = append(t.Rows, []cell{{Text: "none", Head: true}, number(strconv.Itoa(sp.Undecided)), text("not judged; why stands above")})
		}
		out.Verdicts = t
		out.Notes = append(out.Notes,
			rich("The value of a device and its absolute standard uncertainty decide; the probability that it conforms is that of a normal distribution about the value. Decisions after JCGM 106:2012 and, with their four words, ILAC-G8:09/2019."))
	}
	if sp.Why == "" || sp.Outside.N > 0 {
		out.Notes = append(out.Notes,
			rich("Ppk is the distance of the mean from the nearer limit in units of three standard deviations; its one-sided lower limit is the result. It is declined below 25 devices, in two populations and where the Anderson-Darling test finds the lot far from normal (p below 0.01). The tolerance interval and the share outside hold for parts of which these devices are a random sample."))
	}
	v.Spec = out
}

// judgements gives the verdict on each device by name; nil where none has one.
func (k *known) judgements() map[string]lot.Judgement {
	if k.Spec == nil || k.Spec.Why != "" {
		return nil
	}
	m := map[string]lot.Judgement{}
	for _, j := range k.Spec.Devices {
		m[j.Name] = j
	}
	return m
}

// verdictCell shows the verdict on a device.
func verdictCell(j lot.Judgement) deviceCell {
	mark := map[lot.Decision]string{lot.Pass: "", lot.ConditionalPass: "○ ", lot.ConditionalFail: "◇ ", lot.Fail: "✕ "}[j.Decision]
	if j.Decision == lot.Undecided {
		return orDash("")
	}
	c := deviceCell{Text: plain(string(j.Decision))}
	if mark != "" {
		c.Text = `<span class="mark" aria-hidden="true">` + plain(mark) + "</span>" + c.Text
	}
	if words := report.ConformWords(j.Conform); words != report.NotAvailable {
		c.Text += template.HTML(" <small>" + string(rich(words)) + "</small>")
	}
	return c
}
