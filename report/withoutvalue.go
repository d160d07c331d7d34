package report

import (
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/lot"
)

// shownNames is the most names of a group that the terminal lists.
const shownNames = 40

// NameGroup is several devices of which the same is to be said.
type NameGroup struct {
	Names []string
	Text  string
}

// GroupNames gathers names by their text, in order of the first of each.
func GroupNames(list []lot.Unsorted) []NameGroup {
	var groups []NameGroup
	at := map[string]int{}
	for _, u := range list {
		i, ok := at[u.Why]
		if !ok {
			i = len(groups)
			at[u.Why] = i
			groups = append(groups, NameGroup{Text: u.Why})
		}
		groups[i].Names = append(groups[i].Names, u.Name)
	}
	return groups
}

// notMeasured says of every device without a value its state and why it has
// none, devices with the same reason together.
func notMeasured(p *printer, s Sheet, style Style) {
	said := false
	for _, state := range []fit.State{fit.Above, fit.Open, fit.Shorted, fit.WrongWayRound, fit.Declined, fit.Excluded, ""} {
		var list []lot.Unsorted
		for _, d := range s.Devices {
			if d.State() == state {
				list = append(list, lot.Unsorted{Name: d.Name, Why: Clean(Sentence(d.Reason()))})
			}
		}
		if len(list) == 0 {
			continue
		}
		if !said {
			said = true
			p.line("")
			p.line("%s", style.paint("Without a value", bold))
		}
		words := WordsOf(state)
		for _, g := range GroupNames(list) {
			who := namesWords(g.Names, shownNames)
			if !strings.HasPrefix(strings.ToLower(g.Text), words.Word) { // the word once is enough
				who += " (" + words.Word + ")"
			}
			wrapped(p, "  ", "    ", who+": "+g.Text, style.Width)
		}
		if words.Next != "" {
			wrapped(p, "    next: ", "    ", words.Next, style.Width)
		}
	}
}

// beyondState leaves out the warnings that say no more than the state of the
// device, which is told elsewhere with its reason.
func beyondState(d *Device) []fit.Warning {
	code, ok := stateCodes[d.State()]
	if !ok {
		return d.Result.Warnings
	}
	return slices.DeleteFunc(slices.Clone(d.Result.Warnings), func(w fit.Warning) bool { return w.Code == code })
}
