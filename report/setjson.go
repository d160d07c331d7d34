package report

import (
	"io"

	"gatesill/store/record"
)

type storedSetDoc struct {
	Set            string             `json:"set"`
	Number         int                `json:"number"`
	ID             string             `json:"id"`
	State          string             `json:"state"`
	Unit           optional           `json:"unit"`
	Reason         optional           `json:"reason"`
	At             record.Num         `json:"at_A"`
	SourceResistor record.Num         `json:"source_resistor_ohm"`
	Spread         record.Num         `json:"spread_V"`
	By             []record.Criterion `json:"by"`
	Made           string             `json:"made"`
	MadeBy         string             `json:"made_by"`
	Devices        []memberDoc        `json:"devices"`
}

type memberDoc struct {
	Device   string                  `json:"device"`
	Lot      string                  `json:"lot"`
	Readings map[string]record.Value `json:"readings"` // when the set was made
	Now      *number                 `json:"now,omitempty"`
}

func storedSetDocOf(s *record.Set) storedSetDoc {
	d := storedSetDoc{
		s.Name, s.Number, s.ID, string(s.State), optional(s.Unit), optional(s.Reason), s.At, s.SourceResistor, s.Spread, append([]record.Criterion{}, s.By...), s.CreatedAt, s.CreatedBy, []memberDoc{},
	}
	for _, m := range s.Members {
		d.Devices = append(d.Devices, memberDoc{m.Device, m.Lot, m.Readings, nil})
	}
	return d
}

func storedSetDocs(sets []record.Set) rows {
	docs := rows{}
	for i := range sets {
		docs = append(docs, storedSetDocOf(&sets[i]))
	}
	return docs
}

// SetsJSON writes what `set list --json` gives.
func SetsJSON(w io.Writer, sets []record.Set) error {
	return writeObject(w, member{"schema", Schema}, member{"sets", storedSetDocs(sets)})
}

// SetJSON writes what `set show --json` gives; "now" is the quantity of "now_quantity"
// as it is known now.
func SetJSON(w io.Writer, f SetFile) error {
	doc := storedSetDocOf(&f.Set)
	key := LeadingKey(&f.Set)
	for i := range doc.Devices {
		_, _, now := f.thenNow(i, key)
		x := number(now)
		doc.Devices[i].Now = &x
	}
	changes := rows{}
	for _, c := range f.Changes {
		changes = append(changes, changeDocOf(c))
	}
	_, now := f.spreads()
	return writeObject(w, member{"schema", Schema}, member{"set", doc}, member{"now_quantity", string(key)}, member{"spread_now_V", number(now)}, member{"changes", changes})
}
