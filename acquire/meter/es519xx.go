package meter

import "math"

// The ES519xx chips send a digit for the range, the digits of the display, a
// character for the function, nibbles of flags, CR, LF; every byte but the last two
// is 0x30 plus a nibble. What a function's character means differs between the
// chips.

// function is what one character for the function means.
type function struct {
	unit   string
	test   string
	ranges []int // power of ten of one count, by range; nil: the scale is not known
}

// es51922Functions are from memory; the ranges of voltage and current agree with
// frames that were checked against each other, no more.
var es51922Functions = map[byte]function{
	0x3B: {unit: "V", ranges: []int{-4, -3, -2, -1, -5}},
	0x3D: {unit: "A", ranges: []int{-8, -7}},
	0x3F: {unit: "A", ranges: []int{-6, -5}},
	0x30: {unit: "A", ranges: []int{-3}},
	0x39: {unit: "A", ranges: []int{-4, -3, -2, -1}},
	0x33: {unit: "ohm", ranges: []int{-2, -1, 0, 1, 2, 3, 4}},
	0x31: {unit: "V", test: "diode", ranges: []int{-4}},
	0x35: {unit: "ohm", test: "continuity", ranges: []int{-2}},
	0x32: {unit: "Hz"},
	0x36: {unit: "F", ranges: []int{-12, -11, -10, -9, -8, -7, -6, -5}},
}

// es4000Functions: the characters and the ranges of voltage and of mA are from the
// serial appendix of two handheld manuals, the other ranges from memory.
var es4000Functions = map[byte]function{
	0x3B: {unit: "V", ranges: []int{-4, -3, -2, -1, 0}},
	0x3D: {unit: "A", ranges: []int{-7, -6}},
	0x39: {unit: "A", ranges: []int{-5, -4}},
	0x3F: {unit: "A", ranges: []int{-2}},
	0x33: {unit: "ohm", ranges: []int{-1, 0, 1, 2, 3, 4}},
	0x31: {unit: "V", test: "diode", ranges: []int{-3}},
	0x35: {unit: "ohm", test: "continuity", ranges: []int{-1}},
	0x32: {unit: "Hz"},
	0x36: {unit: "F", ranges: []int{-12, -11, -10, -9, -8, -7, -6}},
}

func newES51922(Options) (Decoder, error) {
	return fixed{n: 14, could: esCould(14), read: es51922Read}, nil
}

func newES4000(Options) (Decoder, error) {
	return fixed{n: 11, could: esCould(11), read: es4000Read}, nil
}

func esCould(n int) func([]byte) bool {
	return func(b []byte) bool {
		for i, c := range b {
			c &= 0x7F
			switch {
			case i < n-2 && c&0x70 == 0x30, i == n-2 && c == '\r', i == n-1 && c == '\n':
			default:
				return false
			}
		}
		return true
	}
}

// es51922Read: range, five digits, function, status, four option characters. The
// bits of options 1 and 2 are from memory.
func es51922Read(f []byte) (Reading, error) {
	r := Reading{Column: 1}
	b := func(k int, bit byte) bool { return f[k]>>bit&1 == 1 }
	r.Max, r.Min, r.Relative = b(8, 3) || b(9, 2), b(8, 2) || b(9, 1), b(8, 1)
	under := b(9, 3)
	r.DC, r.AC, r.Auto, r.Hold = b(10, 3), b(10, 2), b(10, 1), b(11, 1)
	err := r.es(f, f[1:6], f[6]&0x7F, f[7], es51922Functions)
	switch {
	case err != nil || !under:
	case r.Unit == "V" || r.Unit == "A": // there is no voltage too small to be shown
		return r, bad("%q: below the range in %s", f, r.Unit)
	default:
		r.over(true)
	}
	return r, err
}

// es4000Read: range, four digits, function, status, two option characters. The
// bits of option 1 are from memory. The chip does not say that it holds.
func es4000Read(f []byte) (Reading, error) {
	r := Reading{Column: 1}
	b := func(k int, bit byte) bool { return f[k]>>bit&1 == 1 }
	r.Max, r.Min = b(7, 3), b(7, 2)
	r.DC, r.AC, r.Auto = b(8, 3), b(8, 2), b(8, 1)
	if err := r.es(f, f[1:5], f[5]&0x7F, f[6], es4000Functions); err != nil {
		return r, err
	}
	if (r.Unit == "V" || r.Unit == "A") && math.Abs(r.Value) > 4000.5*r.Digit {
		return r, bad("%q: over 4000 counts", f)
	}
	return r, nil
}

// es reads what the chips have in common. Status bits: 3 a choice within the
// function, 2 minus, 1 low battery, 0 overload.
func (r *Reading) es(f, display []byte, name, status byte, functions map[byte]function) error {
	fn, ok := functions[name]
	if !ok {
		return bad("%q: function %q is not known", f, name)
	}
	m, err := digits(display)
	if err != nil {
		return err
	}
	if (r.DC || r.AC) && fn.unit != "V" && fn.unit != "A" {
		return bad("%q: %s with DC or AC", f, fn.unit)
	}
	r.Unit, r.Test, r.LowBatt = fn.unit, fn.test, status&2 != 0
	minus, place := status&4 != 0, int(f[0]&15)
	switch {
	case status&1 != 0:
		r.over(minus)
	case fn.ranges == nil: // the unit is enough to refuse it
		r.missing()
	case place >= len(fn.ranges):
		return bad("%q: range %d of %s is not known", f, place, fn.unit)
	default:
		r.count(m, minus, fn.ranges[place])
	}
	return nil
}
