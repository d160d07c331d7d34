package report

import (
	"fmt"
	"strings"

	"gatesill/fit"
)

// codesOfDoubt are the warnings by which the sweeps of one device contradict
// one another, or a sweep itself.
var codesOfDoubt = []string{fit.CodeSweepsDisagree, fit.CodeHeating, fit.CodeGateHistory, fit.CodeOscillation}

// Doubt is a device whose sweeps disagree.
type Doubt struct {
	Name  string
	Texts []string // one sentence a code, its code behind it
}

// Doubts lists the devices whose sweeps disagree, heat up or look like
// oscillation, in the order of the lot; excluded devices are in no statistic
// and not listed. Of several warnings with one code the first is told and the
// others are counted.
func (s *Sheet) Doubts() []Doubt {
	var list []Doubt
	for i := range s.Devices {
		d := &s.Devices[i]
		if d.State() == fit.Excluded {
			continue
		}
		t := Doubt{Name: d.Name}
		for _, code := range codesOfDoubt {
			if text := firstOf(d.Result.Warnings, code); text != "" {
				t.Texts = append(t.Texts, text)
			}
		}
		if len(t.Texts) > 0 {
			list = append(list, t)
		}
	}
	return list
}

// firstOf tells the first warning of a code and how many more there are.
func firstOf(list []fit.Warning, code string) string {
	text, more := "", -1
	for _, w := range list {
		if w.Code != code {
			continue
		}
		if more++; more == 0 {
			text = Sentence(w.Text)
		}
	}
	switch {
	case more < 0:
		return ""
	case more == 0:
		return strings.TrimSpace(fmt.Sprintf("%s (%s)", text, code))
	}
	return strings.TrimSpace(fmt.Sprintf("%s (%s, and %d more)", text, code, more))
}

// doubts lists the devices whose sweeps disagree: their values stand in the
// table above like those of the others.
func doubts(p *printer, s Sheet, style Style) {
	list := s.Doubts()
	if len(list) == 0 {
		return
	}
	p.line("")
	p.line("%s", style.paint(fmt.Sprintf("Sweeps disagree: %d of %d", len(list), len(s.Devices)), bold))
	for _, d := range list {
		wrapped(p, "  ", "    ", Clean(d.Name)+": "+Clean(strings.Join(d.Texts, " ")), style.Width)
	}
}
