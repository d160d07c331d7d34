package table

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"gatesill/store/record"
)

// What stands in a cell, in a column of that unit, and what is kept of it.
func TestCells(t *testing.T) {
	for _, c := range []struct {
		cell  string
		unit  string
		want  string // JSON, or "" for a refusal
		state record.PointState
	}{
		{"2.2", "V", "2.2", ""},
		{"9.10", "V", "9.10", ""},
		{" 9.10 ", "V", "9.10", ""},
		{"+2.2", "V", "2.2", ""},
		{"-0.5", "V", "-0.5", ""},
		{"\u22120.5", "V", "-0.5", ""},
		{".5", "V", "0.5", ""},
		{"-.5", "V", "-0.5", ""},
		{"5.", "V", "5", ""},
		{"007", "V", "7", ""},
		{"00.70", "V", "0.70", ""},
		{"0", "A", "0", ""},
		{"-0", "A", "-0", ""},
		{"0.000", "mA", "0.000e-3", ""},
		{"2.2", "mA", "2.2e-3", ""},
		{"250", "uA", "250e-6", ""},
		{"250", "µA", "250e-6", ""},
		{"250", "\u03bcA", "250e-6", ""},
		{"1.5E-3", "A", "1.5E-3", ""},
		{"1.5E-03", "A", "1.5E-03", ""},
		{"+1.5E+0", "V", "1.5", ""},
		{"1.5e-3", "mA", "1.5e-6", ""},
		{"1.5e3", "mA", "1.5", ""},
		{"12345678901234567890", "V", "", ""},
		{"0.12345678901234567890", "V", "0.12345678901234567890", ""},
		{"1.0000000000000002", "V", "1.0000000000000002", ""},
		{"1234567.89012345678", "V", "1234567.89012345678", ""},
		// Units in the cells.
		{"2.2 mA", "A", "2.2e-3", ""},
		{"2.2 mA", "mA", "2.2e-3", ""},
		{"2.2m", "A", "2.2e-3", ""},
		{"2m2", "A", "2.2e-3", ""},
		{"2m2A", "A", "2.2e-3", ""},
		{"250uA", "A", "250e-6", ""},
		{"250 µA", "A", "250e-6", ""},
		{"250 \u03bcA", "A", "250e-6", ""},
		{"250u", "A", "250e-6", ""},
		{"3.1V", "V", "3.1", ""},
		{"3.1 Volt", "V", "3.1", ""},
		{"2.2 V", "A", "", ""},
		{"2.2 x", "A", "", ""},
		{"2.2m", "mA", "", ""}, // prefix here and in the header
		{"2 2", "A", "", ""},
		{"1..2", "A", "", ""},
		{"1.2.3", "A", "", ""},
		{"e5", "A", "", ""},
		{"0x10", "A", "", ""},
		{"1e", "A", "", ""},
		{"--5", "A", "", ""},
		{"1,5", "A", "", ""},
		{"bad", "A", "", ""},
		{"12abc", "A", "", ""},
		{"1e308", "V", "", ""},
		{"1e999", "V", "", ""},
		{"-1e999999999999", "V", "", ""},
		{"1e-999", "V", "1e-999", ""},
		{strings.Repeat("9", 1000), "V", "", ""},
		{"0." + strings.Repeat("1", 100), "V", "", ""},
		// Above the range.
		{"OL", "V", "null", record.Overload},
		{"ol", "V", "null", record.Overload},
		{" O.L ", "V", "null", record.Overload},
		{"O.L.", "V", "null", record.Overload},
		{".OL", "V", "null", record.Overload},
		{"0L", "V", "null", record.Overload},
		{"0.L", "V", "null", record.Overload},
		{".0L", "V", "null", record.Overload},
		{"+OL", "V", "null", record.Overload},
		{">OL", "V", "null", record.Overload},
		{"OL mA", "A", "null", record.Overload},
		{"OVLD", "V", "null", record.Overload},
		{"OVL", "V", "null", record.Overload},
		{"Over", "V", "null", record.Overload},
		{"OVERLOAD", "V", "null", record.Overload},
		{"overflow", "V", "null", record.Overload},
		{"over range", "V", "null", record.Overload},
		{"OFL", "V", "null", record.Overload},
		{"inf", "V", "null", record.Overload},
		{"+Inf", "V", "null", record.Overload},
		{"Infinity", "V", "null", record.Overload},
		{"\u221e", "V", "null", record.Overload},
		{"9.9E37", "V", "null", record.Overload},
		{"9.9e+37", "mA", "null", record.Overload},
		{"+9.90000000E+37", "V", "null", record.Overload},
		{"99000000000000000000000000000000000000", "V", "null", record.Overload},
		// Below the range.
		{"-OL", "V", "null", record.Underload},
		{"- O.L", "V", "null", record.Underload},
		{"-inf", "V", "null", record.Underload},
		{"\u2212\u221e", "V", "null", record.Underload},
		{"-9.9E37", "V", "null", record.Underload},
		{"UNDER", "V", "null", record.Underload},
		{"UL", "V", "null", record.Underload},
		// Nothing there.
		{"", "V", "null", record.Missing},
		{"  ", "V", "null", record.Missing},
		{"\u00a0", "V", "null", record.Missing},
		{"-", "V", "null", record.Missing},
		{"--", "V", "null", record.Missing},
		{"-----", "V", "null", record.Missing},
		{"- - -", "V", "null", record.Missing},
		{"\u2014", "V", "null", record.Missing},
		{"NaN", "V", "null", record.Missing},
		{"n/a", "V", "null", record.Missing},
		{"N.A.", "V", "null", record.Missing},
		{"NULL", "V", "null", record.Missing},
		{"none", "V", "null", record.Missing},
		{"no reading", "V", "null", record.Missing},
		{"#N/A", "V", "null", record.Missing},
		{"#DIV/0!", "V", "null", record.Missing},
		{"?", "V", "null", record.Missing},
		{"9.91E37", "V", "null", record.Missing},
		{"+9.91000000E+37", "V", "null", record.Missing},
	} {
		u, ok := readUnit(c.unit)
		if !ok {
			t.Fatalf("unit %q", c.unit)
		}
		s := newScale(u.dim, u.exp, false)
		b := buffer{text: []byte("[")}
		st, why := b.put([]byte(c.cell), numeral{mark: '.'}, &s)
		if c.want == "" {
			if why == "" {
				t.Errorf("%q in %s: read as %s %s, want a refusal", c.cell, c.unit, b.text, st)
			} else if len(b.text) != 1 || len(b.values) != 0 {
				t.Errorf("%q: refused, but left %q", c.cell, b.text)
			}
			continue
		}
		if got := strings.Trim(string(b.text), "[,"); got != c.want || st != c.state || why != "" {
			t.Errorf("%q in %s: %s %q (%s), want %s %q", c.cell, c.unit, got, st, why, c.want, c.state)
			continue
		}
		if c.want != "null" {
			x, err := strconv.ParseFloat(c.want, 64)
			if err != nil || b.values[0] != x || math.Signbit(x) != math.Signbit(b.values[0]) {
				t.Errorf("%q: value %g, text reads as %g %v", c.cell, b.values[0], x, err)
			}
		}
	}
}

func TestDecimalCommaCells(t *testing.T) {
	s := newScale("A", -3, false)
	for cell, want := range map[string]string{"2,20": "2.20e-3", "-,5": "-0.5e-3", "1,5E-3": "1.5e-6", "007,5": "7.5e-3", "2,2 µA": "2.2e-6"} {
		b := buffer{text: []byte("[")}
		if _, why := b.put([]byte(cell), numeral{mark: ','}, &s); why != "" || strings.Trim(string(b.text), "[,") != want {
			t.Errorf("%q: %s (%s), want %s", cell, b.text, why, want)
		}
	}
	b := buffer{text: []byte("[")}
	if _, why := b.put([]byte("2.2"), numeral{mark: ','}, &s); !strings.Contains(why, "another decimal mark") {
		t.Errorf("2.2 among commas: %q", why)
	}
}

// The fast way and the general way must give the same number, the one nearest
// to the decimal: strconv is the reference.
func TestFastNumbersAreExact(t *testing.T) {
	s := newScale("V", 0, false)
	for _, exp := range []int{0, -3, -6, -9, 3} {
		s = newScale("V", exp, false)
		for _, cell := range []string{"0.1", "2.675", "4.35", "1.005", "123456.789012345", "0.000001", "99999999.9999999", "3", "5e-7", "7.25E2"} {
			b := buffer{text: []byte("[")}
			if st, why := b.put([]byte(cell), numeral{mark: '.'}, &s); st != "" || why != "" {
				t.Fatal(cell, st, why)
			}
			text := strings.Trim(string(b.text), "[,")
			want, err := strconv.ParseFloat(text, 64)
			if err != nil || b.values[0] != want {
				t.Errorf("%s e%d: %v, strconv reads %s as %v", cell, exp, b.values[0], text, want)
			}
		}
	}
}

func TestDropTakesTheLastEntryOff(t *testing.T) {
	s := newScale("V", -3, false)
	b := buffer{text: []byte("[")}
	for _, c := range []string{"1", "OL", "2.5"} {
		b.put([]byte(c), numeral{mark: '.'}, &s)
	}
	b.drop()
	if string(b.text) != "[1e-3,null," || len(b.values) != 2 {
		t.Errorf("%s %v", b.text, b.values)
	}
	b.drop()
	b.drop()
	if string(b.text) != "[" || len(b.values) != 0 {
		t.Errorf("%s %v", b.text, b.values)
	}
}

func TestStatesAreNeverRefused(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,-----\nD1,OL,0.2\nD1,4,n/a\nD1,5,9.9E37\nD1,6,-OL\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,null,4,5,6] id_a[null,0.2,null,null,null] 0:id_a=missing(-----) 1:vg_v=overload(OL) 2:id_a=missing(n/a) 3:id_a=overload(9.9E37) 4:id_a=underload(-OL)")
	if f.Refused != 0 || f.States != 5 || f.Points != 5 {
		t.Errorf("%d refused, %d states, %d points", f.Refused, f.States, f.Points)
	}
}

func TestUnitsInTheCells(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg,id\nD1,2.0V,2.2m\nD1,2500 mV,250 µA\nD1,3.0,1.5E-3\nD1,3.5V,2m2\n", Options{})
	checkShow(t, f, "D1 up vg_v[2.0,2500e-3,3.0,3.5] id_a[2.2e-3,250e-6,1.5E-3,2.2e-3]")
	if f.Dialect.Columns[1].Unit != "in the cells" {
		t.Errorf("%+v", f.Dialect.Columns)
	}
}
