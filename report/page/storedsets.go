package page

import (
	"strconv"

	"gatesill/report"
	"gatesill/store/record"
)

// storedSets lists the sets that were stored with a device of the lot. Released ones
// are counted only: their devices are free again.
func (v *view) storedSets(k *known) {
	t := &table{Class: "words", Caption: "Sets with a device of this lot", Heads: []head{{"set", false}, {"state", false}, {"devices", false}, {"lots", false}, {"matched by", false}, {"at", true}, {"spread (mV)", true}, {"made", false}}}
	released := 0
	for i := range k.Sheet.Sets {
		s := &k.Sheet.Sets[i]
		if s.State == record.Released {
			released++
			continue
		}
		w := report.StoredSetOf(s)
		at := w.At
		if at == "" {
			at = report.NotAvailable
		}
		t.Rows = append(t.Rows, []cell{nameCell(w.Name), text(w.State), {Text: plain(w.Devices)}, {Text: plain(w.Lots)}, text(w.MatchedBy), number(at), number(w.Spread), text(w.Made)})
	}
	if len(t.Rows) == 0 {
		return
	}
	note := "Their devices are given out to nobody else. Spread: greatest less least of the first quantity, when the set was made."
	if released > 0 {
		note += " Not listed: " + strconv.Itoa(released) + " that were released."
	}
	t.Note = rich(note)
	v.Sets = t
}
