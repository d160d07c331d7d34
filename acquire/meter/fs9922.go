package meter

// fs9922 reads what the FS9922-DMM3/4 chips send: sign, four ASCII digits, blank,
// place of the point, four bytes of flags, bar graph, CR, LF. The flags are binary,
// so CR and LF may stand among them. From memory.
func newFS9922(Options) (Decoder, error) {
	return fixed{n: 14, could: fs9922Could, read: fs9922Read}, nil
}

func fs9922Could(b []byte) bool {
	for i, c := range b {
		ok := true
		switch i {
		case 0:
			ok = c == '+' || c == '-'
		case 1, 2, 3, 4:
			ok = c&0xF0 == 0x30
		case 5:
			ok = c == ' '
		case 6:
			ok = c == '0' || c == '1' || c == '2' || c == '4'
		case 12:
			ok = c == '\r'
		case 13:
			ok = c == '\n'
		}
		if !ok {
			return false
		}
	}
	return true
}

func fs9922Read(f []byte) (Reading, error) {
	b := func(k int, bit byte) bool { return f[k]>>bit&1 == 1 }
	r := Reading{Column: 1, Auto: b(7, 5), DC: b(7, 4), AC: b(7, 3), Relative: b(7, 2), Hold: b(7, 1),
		Max: b(8, 5), Min: b(8, 4), LowBatt: b(8, 2)}
	minus := f[0] == '-'

	exp, prefixes := ones([]flag[int]{{b(8, 1), -9}, {b(9, 7), -6}, {b(9, 6), -3}, {b(9, 5), 3}, {b(9, 4), 6}})
	unit, n := ones([]flag[string]{{b(10, 7), "V"}, {b(10, 6), "A"}, {b(10, 5), "ohm"}, {b(10, 4), "hFE"}, {b(10, 3), "Hz"},
		{b(10, 2), "F"}, {b(10, 1), "degC"}, {b(10, 0), "degF"}, {b(9, 1), "%"}})
	if err := oneScale(f, prefixes, n); err != nil {
		return r, err
	}
	r.Unit = unit
	switch {
	case b(9, 2):
		r.Test = "diode"
	case b(9, 3):
		r.Test = "continuity"
	}
	if string(f[1:5]) == "?0:?" {
		r.over(minus)
		return r, nil
	}
	m, err := digits(f[1:5])
	if err != nil {
		return r, err
	}
	decimals := 0
	switch f[6] {
	case '1':
		decimals = 3
	case '2':
		decimals = 2
	case '4':
		decimals = 1
	}
	r.count(m, minus, exp-decimals)
	return r, nil
}
