package rehearsal

import (
	"bytes"
	"fmt"

	"gatesill/acquire/meter"
	"gatesill/store/record"
)

// frames is how an instrument says what it shows.
type frames struct {
	name     string
	settings string // usual ones of the line
	ask      string // "" it speaks by itself
	scpi     bool
	twice    bool
}

func framesOf(m Meter) (frames, error) {
	f, ok := meter.Find(m.Speaks)
	if !ok {
		return frames{}, fmt.Errorf("%w: meter %s speaks %q, must be one of %s", ErrConfig, m.Role, m.Speaks, meter.Names())
	}
	out := frames{name: f.Name, settings: f.Settings, ask: f.Ask, twice: f.Twice, scpi: f.Name == "scpi"}
	if out.settings == "" {
		out.settings = "115200 8N1"
	}
	return out, nil
}

// check says what in the channels of a line the format cannot say: a range, more
// counts than it has digits, or several values.
func (f *frames) check(list []*channel) error {
	var all []shown
	for _, c := range list {
		for _, top := range c.Tops {
			if _, err := f.encode([]shown{{value: top, digit: top / c.Counts, unit: units[c.Role]}}); err != nil {
				return fmt.Errorf("%w: meter %s, range %g %s of %g counts: %w", ErrConfig, c.Role, top, units[c.Role], c.Counts, err)
			}
		}
		all = append(all, shown{digit: c.Tops[0] / c.Counts, unit: units[c.Role]})
	}
	if _, err := f.encode(all); err != nil {
		return fmt.Errorf("%w: line %s: %w", ErrConfig, list[0].lineName(), err)
	}
	return nil
}

// encode writes the frame or reply for what is shown. Columns of text have no units:
// that is how a small program on a microcontroller prints them.
func (f *frames) encode(list []shown) ([]byte, error) {
	out := make([]meter.Shown, len(list))
	for i, s := range list {
		out[i] = meter.Shown{Value: s.value, Unit: s.unit, Digit: s.digit, Auto: s.auto && f.name != "text", Hold: s.hold}
		if f.name == "text" && len(list) > 1 {
			out[i].Unit = ""
		}
		switch {
		case s.over && s.value < 0:
			out[i].State = record.Underload
		case s.over:
			out[i].State = record.Overload
		}
	}
	return meter.Encode(f.name, out...)
}

// reply is what is shown as an answer within an SCPI message; without a number when
// it cannot be said.
func (f *frames) reply(list []shown) string {
	b, err := f.encode(list)
	if err != nil {
		return "+9.91000000E+37"
	}
	return string(bytes.TrimRight(b, "\r\n"))
}
