package meter

import (
	"encoding/hex"
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// sample is one frame and what it must be read as.
type sample struct {
	frame string // hex with blanks, or text after a '='
	value float64
	unit  string
	digit float64
	state record.PointState
	flags string // of DC AC AUTO HOLD REL MIN MAX BATT, in this order
}

func (s sample) bytes(t testing.TB) []byte {
	if text, ok := strings.CutPrefix(s.frame, "="); ok {
		return []byte(text)
	}
	b, err := hex.DecodeString(strings.ReplaceAll(s.frame, " ", ""))
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// samples by format. The basis says how far they are an outside check.
var samples = []struct {
	format, basis string
	list          []sample
}{
	{"fs9721", "frame layout from memory but for byte 1 and the length; checked for self-consistency only", []sample{
		{"17 21 3F 4F 5D 60 75 85 9B A0 B0 C0 D4 E0", 3.012, "V", 1e-3, "", "DC AUTO"},
		{"17 2F 3D 4F 5D 67 7D 83 9E A0 B0 C0 D4 E0", -0.005, "V", 1e-3, "", "DC AUTO"},
		{"17 20 35 43 5F 63 7F 8B 9F A0 B8 C0 D4 E0", 0.1999, "V", 1e-4, "", "DC AUTO"},
		{"17 25 3B 43 5E 6F 7D 82 97 A0 B8 C0 D8 E0", 0.02504, "A", 1e-5, "", "DC AUTO"},
		{"17 2F 3D 48 55 65 7B 81 9F A0 B0 C0 D8 E0", -0.123, "A", 1e-3, "", "DC AUTO"},
		{"17 20 30 47 5D 6E 78 80 90 A0 B0 C0 D4 E0", 0, "V", 0, record.Overload, "DC AUTO"},
		{"17 22 37 41 55 67 7D 8F 9D A8 B0 C0 D8 E0", 470e-6, "A", 1e-7, "", "DC AUTO"},
	}},
	{"fs9922", "from memory, checked for self-consistency only", []sample{
		{"2B 33 30 31 32 20 31 31 00 00 80 1E 0D 0A", 3.012, "V", 1e-3, "", "DC AUTO"},
		{"2D 30 30 30 35 20 31 31 00 00 80 80 0D 0A", -0.005, "V", 1e-3, "", "DC AUTO"},
		{"2B 31 39 39 39 20 34 31 00 40 80 00 0D 0A", 0.1999, "V", 1e-4, "", "DC AUTO"},
		{"2B 32 35 30 34 20 32 31 00 40 40 00 0D 0A", 0.02504, "A", 1e-5, "", "DC AUTO"},
		{"2B 34 37 30 30 20 34 10 08 80 40 00 0D 0A", 470e-6, "A", 1e-7, "", "DC"},
		{"2B 3F 30 3A 3F 20 31 31 00 00 80 3D 0D 0A", 0, "V", 0, record.Overload, "DC AUTO"},
		{"2B 30 31 32 33 20 31 12 04 00 40 00 0D 0A", 0.123, "A", 1e-3, "", "DC HOLD BATT"},
	}},
	{"es51922", "from memory, checked for self-consistency only", []sample{
		{"30 33 30 31 32 30 3B 30 30 30 3A 30 0D 0A", 3.012, "V", 1e-4, "", "DC AUTO"},
		{"30 32 31 39 39 39 3B 34 30 30 3A 30 0D 0A", -2.1999, "V", 1e-4, "", "DC AUTO"},
		{"34 31 32 33 34 35 3B 30 30 30 3A 30 0D 0A", 0.12345, "V", 1e-5, "", "DC AUTO"},
		{"30 31 32 35 30 34 3F 30 30 30 3A 30 0D 0A", 0.012504, "A", 1e-6, "", "DC AUTO"},
		{"31 32 32 30 30 30 3B 31 30 30 3A 30 0D 0A", 0, "V", 0, record.Overload, "DC AUTO"},
		{"30 30 34 37 30 30 3D 30 30 30 3A 30 0D 0A", 47e-6, "A", 1e-8, "", "DC AUTO"},
		{"30 30 31 32 33 34 30 30 30 30 38 30 0D 0A", 1.234, "A", 1e-3, "", "DC"},
	}},
	{"es519xx-4000", "tables of the serial appendix of two handheld manuals, frames composed from them", []sample{
		{"31 33 30 31 32 3B 30 30 3A 0D 0A", 3.012, "V", 1e-3, "", "DC AUTO"},
		{"31 30 30 30 35 3B 34 30 3A 0D 0A", -0.005, "V", 1e-3, "", "DC AUTO"},
		{"30 31 39 39 39 3B 30 30 3A 0D 0A", 0.1999, "V", 1e-4, "", "DC AUTO"},
		{"30 32 35 30 34 39 30 30 3A 0D 0A", 0.02504, "A", 1e-5, "", "DC AUTO"},
		{"31 34 30 30 30 3B 31 30 3A 0D 0A", 0, "V", 0, record.Overload, "DC AUTO"},
		{"30 30 31 32 33 3F 30 30 3A 0D 0A", 1.23, "A", 1e-2, "", "DC AUTO"},
	}},
	{"polled-ascii", "from memory, checked for self-consistency only", []sample{
		{"=DC  3.012   V\r", 3.012, "V", 1e-3, "", "DC"},
		{"=DC -0.005   V\r", -0.005, "V", 1e-3, "", "DC"},
		{"=DC  199.9  mV\r", 0.1999, "V", 1e-4, "", "DC"},
		{"=DC  25.04  mA\r", 0.02504, "A", 1e-5, "", "DC"},
		{"=DC  O.L     V\r", 0, "V", 0, record.Overload, "DC"},
		{"=OH  4.700kOhm\r", 4700, "ohm", 1, "", ""},
	}},
	{"stx", "layout and unit codes of several handheld manuals, frames composed from them", []sample{
		{"=\x0241340300003012\r", 3.012, "V", 1e-3, "", "DC"},
		{"=\x0241341300000005\r", -0.005, "V", 1e-3, "", "DC"},
		{"=\x0241180100001999\r", 0.1999, "V", 1e-4, "", "DC"},
		{"=\x0241370200002504\r", 0.02504, "A", 1e-5, "", "DC"},
		{"=\x0241350000000470\r", 470e-6, "A", 1e-6, "", "DC"},
		{"=\x0241360200000123\r", 1.23, "A", 1e-2, "", "DC"},
	}},
}

func (r Reading) flags() string {
	var f []string
	for _, x := range []struct {
		set  bool
		name string
	}{{r.DC, "DC"}, {r.AC, "AC"}, {r.Auto, "AUTO"}, {r.Hold, "HOLD"}, {r.Relative, "REL"}, {r.Min, "MIN"}, {r.Max, "MAX"}, {r.LowBatt, "BATT"}} {
		if x.set {
			f = append(f, x.name)
		}
	}
	return strings.Join(f, " ")
}

func decoder(t testing.TB, name string, o Options) (Format, Decoder) {
	t.Helper()
	f, ok := Find(name)
	if !ok {
		t.Fatalf("no format %q", name)
	}
	d, err := f.New(o)
	if err != nil {
		t.Fatal(err)
	}
	return f, d
}

// wants checks one reading.
func (s sample) wants(t testing.TB, what string, r Reading) {
	t.Helper()
	if r.State != s.state || s.state == "" && r.Value != s.value || s.state != "" && !math.IsNaN(r.Value) {
		t.Errorf("%s: %v %q, want %v %q", what, r.Value, r.State, s.value, s.state)
	}
	if r.Unit != s.unit || r.Digit != s.digit {
		t.Errorf("%s: unit %q digit %v, want %q %v", what, r.Unit, r.Digit, s.unit, s.digit)
	}
	if r.flags() != s.flags {
		t.Errorf("%s: flags %q, want %q", what, r.flags(), s.flags)
	}
}

func TestSamples(t *testing.T) {
	for _, group := range samples {
		f, d := decoder(t, group.format, Options{})
		for _, s := range group.list {
			b := s.bytes(t)
			if len(b) != f.Length {
				t.Fatalf("%s: sample of %d bytes", f.Name, len(b))
			}
			skip, n, rs, err := d.Scan(b, false)
			if skip != 0 || n != f.Length || err != nil || len(rs) != 1 {
				t.Errorf("%s (%s) %s: skip %d, length %d, %d readings, %v", f.Name, group.basis, s.frame, skip, n, len(rs), err)
				continue
			}
			s.wants(t, f.Name+" "+s.frame, rs[0])
			if f.Bits != 7 { // parity left in the top bit must not matter
				continue
			}
			for i := range b {
				b[i] |= 0x80
			}
			if _, n, rs, err := d.Scan(b, false); n != f.Length || err != nil {
				t.Errorf("%s %s with top bits: length %d, %v", f.Name, s.frame, n, err)
			} else {
				s.wants(t, f.Name+" with top bits "+s.frame, rs[0])
			}
		}
	}
}

// Single-bit errors that change value, unit or state and pass every check, of the
// first sample of each format. The bounds were counted with another decoder written
// for the same tables; this one must not let more pass.
func TestSingleBitErrors(t *testing.T) {
	bounds := map[string][2]int{"fs9721": {12, 112}, "fs9922": {21, 112}, "es51922": {25, 98}, "es519xx-4000": {19, 77}, "polled-ascii": {43, 98}}
	for _, group := range samples {
		f, d := decoder(t, group.format, Options{})
		for i, s := range group.list {
			good := s.bytes(t)
			_, _, want, err := d.Scan(good, false)
			if err != nil {
				t.Fatal(err)
			}
			passed, total, none := 0, 0, 0
			for at := range good {
				for bit := range f.Bits {
					b := append([]byte(nil), good...)
					b[at] ^= 1 << bit
					total++
					skip, n, rs, err := d.Scan(b, true)
					if skip != 0 || n != f.Length || err != nil {
						none++
						continue
					}
					r, w := rs[0], want[0]
					if r.Unit != w.Unit || r.State != w.State || r.State == "" && r.Value != w.Value {
						passed++
					}
				}
			}
			if i > 0 {
				t.Logf("%s sample %d: %d of %d pass, %d refused", f.Name, i+1, passed, total, none)
				continue
			}
			t.Logf("%s first sample: %d of %d pass, %d refused", f.Name, passed, total, none)
			if bound, ok := bounds[f.Name]; ok && (passed > bound[0] || total != bound[1]) {
				t.Errorf("%s: %d of %d single-bit errors pass, bound %d of %d", f.Name, passed, total, bound[0], bound[1])
			}
			if none == 0 {
				t.Errorf("%s: no error was refused", f.Name)
			}
		}
	}
}
