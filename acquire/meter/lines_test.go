package meter

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// said writes readings briefly: value, unit, state, digit, flags.
func said(rs []Reading) string {
	var parts []string
	for i, r := range rs {
		p := fmt.Sprintf("%g%s", r.Value, r.Unit)
		if r.State != "" {
			p = string(r.State) + r.Unit
			if !math.IsNaN(r.Value) {
				p += " with a number"
			}
		} else if r.Digit != 0 {
			p += fmt.Sprintf("/%g", r.Digit)
		}
		if f := r.flags(); f != "" {
			p += " " + f
		}
		if r.Column != i+1 {
			p += " in the wrong column"
		}
		parts = append(parts, p)
	}
	return strings.Join(parts, "; ")
}

func TestTextLines(t *testing.T) {
	unit := Options{Unit: "V,mA,V"}
	comma := Options{Unit: "V,A", Decimal: "comma"}
	for _, c := range []struct {
		o    Options
		line string
		want string // "!" and a part of the error, or the readings
	}{
		{Options{}, "3.012", "3.012/0.001"},
		{Options{}, "-3.012 V", "-3.012V/0.001"},
		{Options{}, "- 3.012 V", "-3.012V/0.001"},
		{Options{}, "+3.012V DC AUTO", "3.012V/0.001 DC AUTO"},
		{Options{}, "DC 3.012 V HOLD", "3.012V/0.001 DC HOLD"},
		{Options{}, "3.012 VDC", "3.012V/0.001 DC"},
		{Options{}, "12.1 mVac", "0.0121V/0.0001 AC"},
		{Options{}, "250.3 mA", "0.2503A/0.0001"},
		{Options{}, "250.3m A", "!neither"},
		{Options{}, "250.3 \u00b5A", "0.0002503A/1e-07"},
		{Options{}, "250.3 \xb5A", "0.0002503A/1e-07"},
		{Options{}, "25.1 \u00b0C", "25.1degC/0.1"},
		{Options{}, "25.1 \xb0C", "25.1degC/0.1"},
		{Options{}, "4.7 kOhm", "4700ohm/100"},
		{Options{}, "10.0 nF", "1e-08F/1e-10"},
		{Options{}, "12 nA", "1.2e-08A/1e-09"},
		{Options{}, "50.0 %", "50%/0.1"},
		{unit, "3.012,250.3,10.02", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "3.012, 250.3, 10.02,", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "3.012 250.3 10.02", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "3.012\t250.3\t10.02", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "3.012;250.3;10.02", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "vg=3.012 id=250.3 vl=10.02", "3.012V/0.001; 0.2503A/0.0001; 10.02V/0.01"},
		{unit, "vg = 3.012, id: 250.3uA", "3.012V/0.001; 0.0002503A/1e-07"},
		{unit, "3.012 V, 0.25 A, 1 k", "3.012V/0.001; 0.25A/0.01; 1000V/1000"},
		{unit, "3.012 V 0.25 A", "3.012V/0.001; 0.25A/0.01"},
		{unit, "3.012,,10.02", "3.012V/0.001; missingA; 10.02V/0.01"},
		{unit, "OL,O.L,-OL", "overloadV; overloadA; underloadV"},
		{unit, "inf nan ----", "overloadV; missingA; missingV"},
		{unit, "OL mA, .OL", "overloadA; overloadA"},
		{unit, "9.9E37,-9.90000000E+37,9.91E37", "overloadV; underloadA; missingV"},
		{unit, "1.5e-3,2.5E2", "0.0015V; 0.25A"},
		{unit, "-0.000", "0V/0.001"},
		{comma, "3,012;0,2503", "3.012V/0.001; 0.2503A/0.0001"},
		{comma, "3,012 0,2503", "3.012V/0.001; 0.2503A/0.0001"},
		{comma, "3,012 V, 0,2503 A", "!neither"},
		{comma, "1.234,5", "!"},
		{comma, "3.012", "!"},
		{Options{}, "3,012", "!decimal comma"},
		{Options{}, "3,012,0,250", "!decimal comma"},
		{Options{}, "3,012;0,250", "!"},
		{Options{Separator: "comma"}, "3,012", "3/1; 12/1"},
		{Options{Separator: "|"}, "3.1|4", "3.1/0.1; 4/1"},
		{Options{Separator: ";"}, "3.1 4.2;5", "!two numbers"},
		{Options{}, "vg,id,vl", "!"},
		{Options{}, "3.012 V V", "!neither"},
		{Options{}, "3.012.5", "!"},
		{Options{}, "0x12", "!"},
		{Options{}, "12:30:05 3.1", "!neither"},
		{Options{}, "vg=", "!without a number"},
		{Options{}, "V", "!"},
		{Options{}, "3.0\x00", "!"},
		{Options{}, "-", "!sign"},
		{Options{}, "1e999", "!"},
	} {
		_, d := decoder(t, "text", c.o)
		_, n, rs, err := d.Scan([]byte(c.line+"\n"), false)
		got := said(rs)
		if err != nil {
			got = "!" + err.Error()
		}
		if n == 0 {
			got = "no frame"
		}
		if w, bad := strings.CutPrefix(c.want, "!"); bad {
			if !errors.Is(err, ErrFrame) || !strings.Contains(got, w) {
				t.Errorf("%+v %q: %s, want an error with %q", c.o, c.line, got, w)
			}
		} else if got != c.want {
			t.Errorf("%+v %q:\n got %s\nwant %s", c.o, c.line, got, c.want)
		}
	}
}

func TestSCPIReplies(t *testing.T) {
	for _, c := range []struct {
		o      Options
		stream string
		want   []string
	}{
		{Options{}, "+3.01200000E+00\r\n", []string{"3.012"}},
		{Options{Unit: "V"}, "3\n3.012\r-1e-3\r\n\r\n\n", []string{"3V/1", "3.012V/0.001", "-0.001V"}},
		{Options{Unit: "V,A"}, " +1.0E+0 , 2.5 \n", []string{"1V; 2.5A/0.1"}},
		{Options{Unit: "V,mA"}, "1.0E+0,2.5\n", []string{"1V; 0.0025A/0.0001"}},
		{Options{}, "+9.90000000E+37\n-9.9E37\n9.91E37\n+9.91000000E+37\n9.9e+37\n", []string{"overload", "underload", "missing", "missing", "overload"}},
		{Options{}, "INF\nNINF\nNAN\n", []string{"overload", "underload", "missing"}},
		{Options{Question: "READ?"}, "READ?\r\n3.0\r\nread?\r\n3.1\r\n", []string{"3/0.1", "3.1/0.1"}},
		{Options{}, "READ?\n", []string{`!"READ?"`}},
		{Options{}, "-113,\"Undefined header\"\n3.0\n", []string{`!Undefined header`, "3/0.1"}},
		{Options{}, "3.0 V\n", []string{`!no number`}},
		{Options{}, ",3.0\n", []string{`!no number`}},
		{Options{}, "8.9E37\n", []string{"8.9e+37"}},
	} {
		_, d := decoder(t, "scpi", c.o)
		buf := []byte(c.stream)
		var got []string
		for {
			skip, n, rs, err := d.Scan(buf, false)
			buf = buf[skip+n:]
			if n == 0 {
				break
			}
			if err != nil {
				if !errors.Is(err, ErrFrame) {
					t.Errorf("%v does not wrap ErrFrame", err)
				}
				got = append(got, "!"+err.Error())
			} else {
				got = append(got, said(rs))
			}
		}
		ok := len(got) == len(c.want)
		for i := 0; ok && i < len(got); i++ {
			w, bad := strings.CutPrefix(c.want[i], "!")
			ok = got[i] == c.want[i] || bad && got[i][0] == '!' && strings.Contains(strings.ReplaceAll(got[i], `\`, ""), w)
		}
		if !ok {
			t.Errorf("%q:\n got %q\nwant %q", c.stream, got, c.want)
		}
	}
}

func TestOptionsAreChecked(t *testing.T) {
	for _, o := range []Options{{Unit: "volts per hour"}, {Unit: "m"}, {Decimal: "dot"}, {Separator: "ab"}, {Separator: "1"}, {Separator: ",", Decimal: "comma"}} {
		f, _ := Find("text")
		if _, err := f.New(o); !errors.Is(err, ErrOption) {
			t.Errorf("%+v: %v", o, err)
		}
	}
}

// An overlong line is dropped to its end, however it is cut.
func TestOverlongLine(t *testing.T) {
	stream := []byte(strings.Repeat("1", 5000) + "\n3.0\n")
	for _, step := range []int{1, 7, 999, 1001, 1002, len(stream)} {
		_, d := decoder(t, "text", Options{})
		var chunks [][]byte
		for rest := stream; len(rest) > 0; {
			n := min(step, len(rest))
			chunks, rest = append(chunks, rest[:n]), rest[n:]
		}
		list := scanAll(t, d, chunks)
		if len(list) != 1 || list[0].at != 5001 {
			t.Errorf("step %d: %v", step, list)
		}
	}
}

func TestRefusal(t *testing.T) {
	for _, c := range []struct {
		r          Reading
		unit, want string
	}{
		{Reading{Unit: "V"}, "V", ""},
		{Reading{}, "V", ""},
		{Reading{Unit: "V"}, "", ""},
		{Reading{Unit: "V", LowBatt: true, Auto: true, DC: true}, "V", ""},
		{Reading{Unit: "V", State: record.Overload}, "V", ""},
		{Reading{Unit: "V", State: record.Overload}, "A", "wrong unit: V, wanted A"},
		{Reading{Unit: "ohm", Hold: true}, "V", "wrong unit: ohm, wanted V"},
		{Reading{Unit: "V", Test: "diode"}, "V", "diode test"},
		{Reading{Unit: "V", AC: true}, "V", "AC"},
		{Reading{Unit: "V", AC: true, DC: true}, "V", "AC"},
		{Reading{Unit: "V", Hold: true}, "V", "held"},
		{Reading{Unit: "V", Relative: true}, "V", "relative"},
		{Reading{Unit: "V", Min: true}, "V", "minimum"},
		{Reading{Unit: "V", Max: true}, "V", "maximum"},
	} {
		if got := c.r.Refusal(c.unit); got != c.want {
			t.Errorf("%+v for %q: %q, want %q", c.r, c.unit, got, c.want)
		}
	}
}

func TestFormatsAreListed(t *testing.T) {
	for _, f := range Formats {
		g, ok := Find(f.Name)
		if !ok || g.Name != f.Name || f.New == nil || f.Text == "" || f.Bits == 0 || f.Lines != (f.Length == 0) {
			t.Errorf("%+v", f)
		}
		if !strings.Contains(Help(), f.Name+" ") || !strings.Contains(Names(), f.Name) {
			t.Errorf("%s is not in the help", f.Name)
		}
	}
	if _, ok := Find(""); ok {
		t.Error("a format without a name")
	}
}
