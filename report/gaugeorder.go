package report

import (
	"fmt"
	"io"
)

// GaugeOrder is an order in which devices are to be measured.
type GaugeOrder struct {
	Lot    string
	Seed   uint64 // of the lot's name
	Of     int    // devices in the lot
	Rounds [][]string
}

// GaugeOrderText writes the order for people, one line a round.
func GaugeOrderText(w io.Writer, o GaugeOrder, style Style) error {
	p := &printer{w: w}
	n := 0
	if len(o.Rounds) > 0 {
		n = len(o.Rounds[0])
	}
	wrapped(p, "", "  ", fmt.Sprintf("Measure in this order, taking each device out in between; %d of the lot's %d devices, drawn with seed %d.", n, o.Of, o.Seed), style.Width)
	for i, r := range o.Rounds {
		wrapped(p, fmt.Sprintf("round %d: ", i+1), "  ", namesWords(r, len(r)), style.Width)
	}
	return p.err
}

// GaugeOrderJSON writes the order for programs.
func GaugeOrderJSON(w io.Writer, o GaugeOrder) error {
	rounds := rows{}
	for _, r := range o.Rounds {
		rounds = append(rounds, r)
	}
	return writeObject(w, member{"schema", Schema}, member{"lot", o.Lot}, member{"seed", fmt.Sprint(o.Seed)}, member{"rounds", rounds})
}
