package meter

import "strings"

// polled-ascii: asked with D a meter answers two letters for the function, seven
// characters of number, four of unit, CR. From memory.
func newPolled(Options) (Decoder, error) {
	return fixed{n: 14, could: polledCould, read: polledRead}, nil
}

func polledCould(b []byte) bool {
	for i, c := range b {
		c &= 0x7F
		ok := false
		switch {
		case i < 2:
			ok = c >= 'A' && c <= 'Z'
		case i < 9:
			ok = c >= '0' && c <= '9' || strings.IndexByte(" +-.OL", c) >= 0
		case i < 13:
			ok = c >= ' ' && c < 0x7F
		default:
			ok = c == '\r'
		}
		if !ok {
			return false
		}
	}
	return true
}

// polledUnits are the units that go with each function; a frame with a bit turned
// over seldom has two that agree.
var polledUnits = map[string]string{"DC": "V A", "AC": "V A", "OH": "ohm", "DI": "V", "CA": "F", "FR": "Hz", "TE": "degC"}

func polledRead(f []byte) (Reading, error) {
	var t [14]byte
	for i, c := range f {
		t[i] = c & 0x7F
	}
	name, number, unit := string(t[:2]), strings.Trim(string(t[2:9]), " "), strings.Trim(string(t[9:13]), " ")
	r := Reading{Column: 1, DC: name == "DC", AC: name == "AC"}
	u, ok := readUnit(unit)
	if !ok || u.unit == "" {
		return r, bad("%q: unit %q is not known", t, unit)
	}
	if allowed, ok := polledUnits[name]; !ok || !strings.Contains(" "+allowed+" ", " "+u.unit+" ") {
		return r, bad("%q: function %q with %s", t, name, u.unit)
	}
	r.Unit = u.unit
	if name == "DI" {
		r.Test = "diode"
	}
	minus := strings.HasPrefix(number, "-")
	switch strings.ReplaceAll(strings.TrimLeft(number, "+-"), ".", "") {
	case "OL", "0L", "L":
		r.over(minus)
		return r, nil
	}
	// The number stands against the unit or the sign; blanks within are no number.
	d, rest, ok := readDecimal(number, '.')
	if !ok || rest != "" {
		return r, bad("%q: %q is no number", t, number)
	}
	return r, d.into(&r, u.exp)
}
