package meter

// stx: STX, version, number of the display, two characters for the unit, polarity,
// number of decimals, eight digits, CR. Seen in several handheld manuals, with the
// codes of direct voltage and current; that of temperature is from memory. A frame
// of the second display is column 2.
func newSTX(Options) (Decoder, error) {
	return fixed{n: 16, could: stxCould, read: stxRead}, nil
}

func stxCould(b []byte) bool {
	for i, c := range b {
		ok := false
		switch {
		case i == 0:
			ok = c == 0x02
		case i == 2 || i == 6:
			ok = c >= '0' && c <= '9'
		case i == 5:
			ok = c == '0' || c == '1'
		case i == 15:
			ok = c == '\r'
		default:
			ok = c >= ' ' && c < 0x7F
		}
		if !ok {
			return false
		}
	}
	return true
}

var stxUnits = map[string]written{
	"34": {unit: "V", dc: true},
	"18": {unit: "V", exp: -3, dc: true},
	"36": {unit: "A", dc: true},
	"37": {unit: "A", exp: -3, dc: true},
	"35": {unit: "A", exp: -6, dc: true},
	"01": {unit: "degC"},
}

func stxRead(f []byte) (Reading, error) {
	r := Reading{Column: max(1, int(f[2]-'0'))}
	u, ok := stxUnits[string(f[3:5])]
	if !ok {
		return r, bad("%q: unit code %q is not known", f, f[3:5])
	}
	m, err := digits(f[7:15])
	if err != nil {
		return r, err
	}
	decimals := int(f[6] - '0')
	if decimals > 7 {
		return r, bad("%q: %d decimals of 8 digits", f, decimals)
	}
	r.Unit, r.DC = u.unit, u.dc
	r.count(m, f[5] == '1', u.exp-decimals)
	return r, nil
}
