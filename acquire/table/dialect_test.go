package table

import (
	"strings"
	"testing"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"
)

const (
	sweepPoint = "D1 up vg_v[2.0,2.5,3.0] id_a[0.10e-3,0.9e-3,2.2e-3]"
)

// Every dialect of one small table must give the same sweep.
func TestDialects(t *testing.T) {
	for _, c := range []struct{ name, text, delimiter, decimal string }{
		{"comma", "device,vg (V),id (mA)\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"semicolon", "device;vg (V);id (mA)\nD1;2.0;0.10\nD1;2.5;0.9\nD1;3.0;2.2\n", "semicolon", "point"},
		{"semicolon and decimal comma", "device;vg (V);id (mA)\nD1;2,0;0,10\nD1;2,5;0,9\nD1;3,0;2,2\n", "semicolon", "comma"},
		{"tab", "device\tvg (V)\tid (mA)\nD1\t2.0\t0.10\nD1\t2.5\t0.9\nD1\t3.0\t2.2\n", "tab", "point"},
		{"tab and decimal comma", "device\tvg (V)\tid (mA)\nD1\t2,0\t0,10\nD1\t2,5\t0,9\nD1\t3,0\t2,2\n", "tab", "comma"},
		{"pipe", "device|vg (V)|id (mA)\nD1|2.0|0.10\nD1|2.5|0.9\nD1|3.0|2.2\n", "pipe", "point"},
		{"pipe with blanks", "device | vg (V) | id (mA)\nD1 | 2.0 | 0.10\nD1 | 2.5 | 0.9\nD1 | 3.0 | 2.2\n", "pipe", "point"},
		{"blanks", "device vg(V) id(mA)\nD1  2.0   0.10\nD1  2.5   0.9\n  D1  3.0   2.2  \n", "blank", "point"},
		{"blanks and tabs", "device \t vg(V)   id(mA)\nD1\t 2.0   0.10\nD1  2.5 \t 0.9\nD1  3.0   2.2\n", "blank", "point"},
		{"blanks and decimal comma", "device vg_V id_mA\nD1 2,0 0,10\nD1 2,5 0,9\nD1 3,0 2,2\n", "blank", "comma"},
		{"blanks in the header, too", "device   vg (V)   id (mA)\nD1  2.0   0.10\nD1  2.5   0.9\nD1  3.0   2.2\n", "blank", "point"},
		{"one blank each", "device vg (V) id (mA)\nD1 2.0 0.10\nD1 2.5 0.9\nD1 3.0 2.2\n", "blank", "point"},
		{"blanks and a commented header", "# device   gate voltage (V)   drain current (mA)\nD1 2.0 0.10\nD1 2.5 0.9\nD1 3.0 2.2\n", "blank", "point"},
		{"comma with blanks", "device, vg (V), id (mA)\nD1, 2.0, 0.10\nD1, 2.5, 0.9\nD1, 3.0, 2.2\n", "comma", "point"},
		{"quoted", "\"device\",\"vg (V)\",\"id (mA)\"\n\"D1\",\"2.0\",\"0.10\"\n\"D1\",\"2.5\",\"0.9\"\n\"D1\",\"3.0\",\"2.2\"\n", "comma", "point"},
		{"quoted decimal commas", "device,vg (V),id (mA)\nD1,\"2,0\",\"0,10\"\nD1,\"2,5\",\"0,9\"\nD1,\"3,0\",\"2,2\"\n", "comma", "comma"},
		{"line end in a quoted header", "device,\"vg\n(V)\",\"id\r\n(mA)\"\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"CRLF", "device,vg (V),id (mA)\r\nD1,2.0,0.10\r\nD1,2.5,0.9\r\nD1,3.0,2.2\r\n", "comma", "point"},
		{"CR", "device,vg (V),id (mA)\rD1,2.0,0.10\rD1,2.5,0.9\rD1,3.0,2.2\r", "comma", "point"},
		{"CR with quotes", "device,\"vg (V)\",id (mA)\rD1,\"2.0\",0.10\rD1,2.5,0.9\rD1,3.0,\"2.2\"\r", "comma", "point"},
		{"no line end at the end", "device,vg (V),id (mA)\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2", "comma", "point"},
		{"end mark of old systems", "device,vg (V),id (mA)\r\nD1,2.0,0.10\r\nD1,2.5,0.9\r\nD1,3.0,2.2\r\n\x1a", "comma", "point"},
		{"byte order mark", "\xef\xbb\xbfdevice,vg (V),id (mA)\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"declared delimiter", "sep=;\ndevice;vg (V);id (mA)\nD1;2,0;0,10\nD1;2,5;0,9\nD1;3,0;2,2\n", "semicolon", "comma"},
		{"comments of all kinds", "# bench 3\n; bench 3\n% bench 3\n// bench 3\n! bench 3\n' bench 3\ndevice,vg (V),id (mA)\n# in between\nD1,2.0,0.10\n// in between\nD1,2.5,0.9\nD1,3.0,2.2\n# end\n", "comma", "point"},
		{"header behind a comment mark", "# made by hand\n# device vg(V) id(mA)\nD1 2.0 0.10\nD1 2.5 0.9\nD1 3.0 2.2\n", "blank", "point"},
		{"talk above the table", "Transfer curves\nOperator,Ada\nVDD,12\n\ndevice,vg (V),id (mA)\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"talk above the table, filled up", "Operator;Ada;;\nVDD;12;V;\n;;;\ndevice;vg (V);id (mA);\nD1;2,0;0,10;\nD1;2,5;0,9;\nD1;3,0;2,2;\n", "semicolon", "comma"},
		{"empty column at the end", "device,vg (V),id (mA),\nD1,2.0,0.10,\nD1,2.5,0.9,\nD1,3.0,2.2,\n", "comma", "point"},
		{"rows of nothing", "device,vg (V),id (mA)\n,,\nD1,2.0,0.10\n  \nD1,2.5,0.9\n,,\nD1,3.0,2.2\n", "comma", "point"},
		{"unit line", "device,vg,id\n,V,mA\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"unit line in brackets", "device,vg,id\n[-],[V],[mA]\nD1,2.0,0.10\nD1,2.5,0.9\nD1,3.0,2.2\n", "comma", "point"},
		{"header repeated", "device,vg (V),id (mA)\nD1,2.0,0.10\nD1,2.5,0.9\ndevice,vg (V),id (mA)\nD1,3.0,2.2\n", "comma", "point"},
	} {
		t.Run(c.name, func(t *testing.T) {
			f := mustRead(t, "x.csv", c.text, Options{})
			checkShow(t, f, sweepPoint)
			if f.Dialect.Delimiter != c.delimiter || f.Dialect.Decimal != c.decimal {
				t.Errorf("delimiter %s, decimal %s; want %s, %s", f.Dialect.Delimiter, f.Dialect.Decimal, c.delimiter, c.decimal)
			}
			if f.Rows != 3 || f.Refused != 0 {
				t.Errorf("%d rows, refused %+v", f.Rows, f.Refusals)
			}
		})
	}
}

func TestEncodings(t *testing.T) {
	text := "Prüfling;U_GS [V];I_D [µA]\nD°1;2,0;100\nD°1;2,5;900\nD°1;3,0;2200\n"
	encode := func(f func() ([]byte, error)) string {
		b, err := f()
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	le := unicode.UTF16(unicode.LittleEndian, unicode.IgnoreBOM).NewEncoder()
	be := unicode.UTF16(unicode.BigEndian, unicode.IgnoreBOM).NewEncoder()
	cp := charmap.Windows1252.NewEncoder()
	utf16le := encode(func() ([]byte, error) { return le.Bytes([]byte(text)) })
	utf16be := encode(func() ([]byte, error) { return be.Bytes([]byte(text)) })
	ansi := encode(func() ([]byte, error) { return cp.Bytes([]byte(text)) })
	for _, c := range []struct{ name, text, option, want string }{
		{"UTF-8", text, "", "UTF-8"},
		{"UTF-8 with mark", "\xef\xbb\xbf" + text, "", "UTF-8 with byte order mark"},
		{"UTF-16 LE with mark", "\xff\xfe" + utf16le, "", "UTF-16 LE"},
		{"UTF-16 LE", utf16le, "", "UTF-16 LE"},
		{"UTF-16 BE with mark", "\xfe\xff" + utf16be, "", "UTF-16 BE"},
		{"UTF-16 BE", utf16be, "", "UTF-16 BE"},
		{"Windows-1252", ansi, "", "Windows-1252"},
		{"UTF-16 said", utf16le, "utf-16", "UTF-16 LE"},
		{"Windows-1252 said", ansi, "windows-1252", "Windows-1252"},
		{"UTF-8 said", text, "UTF-8", "UTF-8"},
	} {
		t.Run(c.name, func(t *testing.T) {
			f := mustRead(t, "x.csv", c.text, Options{Encoding: c.option})
			checkShow(t, f, "D°1 up vg_v[2.0,2.5,3.0] id_a[100e-6,900e-6,2200e-6]")
			if f.Dialect.Encoding != c.want {
				t.Errorf("encoding %s, want %s", f.Dialect.Encoding, c.want)
			}
		})
	}
	wantError(t, "x.csv", text, Options{Encoding: "klingon"}, ErrRefused, "is not known", "")
}

func TestQuotedFields(t *testing.T) {
	f := mustRead(t, "x.csv", "device,note,vgs_at_10mA_V\n\"a \"\"b\"\", c\",\"two\nlines\",2.5\nplain,\"x\"\"\",2.6\n 5\" disc ,,2.7\n", Options{})
	checkShow(t, f, `
a "b", c spot vg_v[2.5] id_a[10e-3]
plain spot vg_v[2.6] id_a[10e-3]
5" disc spot vg_v[2.7] id_a[10e-3]`)
	if f.Sweeps[0].Note != `two\nlines` || f.Sweeps[1].Note != `x"` {
		t.Errorf("notes %q %q", f.Sweeps[0].Note, f.Sweeps[1].Note)
	}
	if f.Sweeps[1].Line(0) != 4 || f.Sweeps[2].Line(0) != 5 {
		t.Errorf("lines %d %d, want 4 and 5", f.Sweeps[1].Line(0), f.Sweeps[2].Line(0))
	}
}

// The row right below the header is no exception.
func TestUnclosedQuoteBelowTheHeaderIsRefusedWithItsPlace(t *testing.T) {
	text := "device,vg_V,id_A\n\n\"D1,2.8,0.001\nD1,2.9,0.01\nD1,3.0,0.02\nD1,3.1,0.05\nD1,3.2,0.08\nD1,3.3,0.1\n"
	f, err := Read("t.csv", strings.NewReader(text), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if f.Rows != 6 || f.Refused != 1 || f.Refusals[0].Line != 3 || f.Points != 5 {
		t.Errorf("rows %d, refused %d %+v, points %d", f.Rows, f.Refused, f.Refusals, f.Points)
	}
}

func TestUnclosedQuoteRefusesItsRowOnly(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vgs_at_10mA_V\nA,2\nB,2\nC,2\nD,2\n\"E,2\nF,2\nG,2\n", Options{})
	if len(f.Sweeps) != 6 || f.Refused != 1 || f.Refusals[0].Line != 6 || !strings.Contains(f.Refusals[0].Reason, "never closed") {
		t.Errorf("%d sweeps, %+v", len(f.Sweeps), f.Refusals)
	}
}

func TestDelimiterByFlag(t *testing.T) {
	text := "device~vgs_at_10mA_V\nA~2.5\n"
	checkShow(t, mustRead(t, "x.csv", text, Options{Delimiter: "~"}), "A spot vg_v[2.5] id_a[10e-3]")
	checkShow(t, mustRead(t, "x.csv", "device;vgs_at_10mA_V\nA,1;2.5\n", Options{Delimiter: "semicolon"}), "A,1 spot vg_v[2.5] id_a[10e-3]")
	wantError(t, "x.csv", text, Options{Delimiter: "nonsense"}, ErrRefused, "is not known", "")
	wantError(t, "x.csv", text, Options{Delimiter: "."}, ErrRefused, "is not known", "")
}

func TestDevicesThatLookLikeComments(t *testing.T) {
	checkShow(t, mustRead(t, "x.csv", "#;Ugs@10mA [V]\n#1;2,5\n#2;2,6\n#3;2,7\n", Options{}), `
#1 spot vg_v[2.5] id_a[10e-3]
#2 spot vg_v[2.6] id_a[10e-3]
#3 spot vg_v[2.7] id_a[10e-3]`)
}

func TestDecimalMarkOnceForTheFile(t *testing.T) {
	head := "dut\tvgs_at_10mA_V\n"
	read := func(rows string, opt Options) *File { return mustRead(t, "x.csv", head+rows, opt) }
	checkShow(t, read("A\t1,234\nB\t1,24\n", Options{}), "A spot vg_v[1.234] id_a[10e-3]\nB spot vg_v[1.24] id_a[10e-3]")
	checkShow(t, read("A\t1,234\nB\t0,250\n", Options{}), "A spot vg_v[1.234] id_a[10e-3]\nB spot vg_v[0.250] id_a[10e-3]")
	checkShow(t, read("A\t9.10\nB\t1.234\n", Options{}), "A spot vg_v[9.10] id_a[10e-3]\nB spot vg_v[1.234] id_a[10e-3]")
}

func TestDecimalMarkAmbiguous(t *testing.T) {
	text := "dut\tvgs_at_10mA_V\nA\t1,234\nB\t1,345\n"
	wantError(t, "x.csv", text, Options{}, ErrAmbiguous, "1,234 may be 1.234 or 1234", "--decimal comma")
	checkShow(t, mustRead(t, "x.csv", text, Options{Decimal: "comma"}), "A spot vg_v[1.234] id_a[10e-3]\nB spot vg_v[1.345] id_a[10e-3]")
	checkShow(t, mustRead(t, "x.csv", text, Options{Decimal: "point"}), "A spot vg_v[1234] id_a[10e-3]\nB spot vg_v[1345] id_a[10e-3]")
	asked := Question{}
	f := mustRead(t, "x.csv", text, Options{Ask: func(q Question) (string, error) { asked = q; return "comma", nil }})
	checkShow(t, f, "A spot vg_v[1.234] id_a[10e-3]\nB spot vg_v[1.345] id_a[10e-3]")
	if asked.Flag != "--decimal" || len(asked.Choices) != 2 {
		t.Errorf("asked %+v", asked)
	}
	wantError(t, "x.csv", text, Options{Ask: func(Question) (string, error) { return "perhaps", nil }}, ErrAmbiguous, "none of the choices", "--decimal")
	wantError(t, "x.csv", text, Options{Decimal: "dot"}, ErrRefused, "is not known", "")
	wantError(t, "x.csv", "dut\tvgs_at_10mA_V\nA\t1,25\nB\t1.25\n", Options{}, ErrAmbiguous, "some numbers have a decimal comma", "--decimal")

	// The rest of a long file settles what its head leaves open.
	long := "dut\tvgs_at_10mA_V\n" + strings.Repeat("A\t1,234\n", 3*sampleRows)
	wantError(t, "x.csv", long, Options{}, ErrAmbiguous, "1,234", "--decimal")
	f = mustRead(t, "x.csv", long+"B\t1,5\n", Options{})
	if f.Dialect.Decimal != "comma" {
		t.Errorf("decimal %s", f.Dialect.Decimal)
	}

	// Semicolon and decimal comma go together, and that is said.
	f = mustRead(t, "x.csv", "dut;vgs_at_10mA_V\nA;1,234\n", Options{})
	if f.Dialect.Decimal != "comma" || !hasNote(f, "decimal comma") {
		t.Errorf("%+v", f.Dialect)
	}
}

func TestOneColumnOfThousands(t *testing.T) {
	text := "1,234\n1,250\n1,300\n"
	wantError(t, "x.csv", text, Options{}, ErrAmbiguous, "the number 1.234, the number 1234, or two columns", "--delimiter comma")
	wantError(t, "x.csv", text, Options{Decimal: "comma", SpotCurrent: ten()}, ErrAmbiguous, "no unit for column 1", "--units vg=V")
	var asked []Question
	_, err := Read("x.csv", strings.NewReader(text), Options{Ask: func(q Question) (string, error) {
		asked = append(asked, q)
		return q.Choices[2], nil
	}})
	if len(asked) == 0 || len(asked[0].Choices) != 3 || err == nil {
		t.Errorf("asked %+v, %v", asked, err)
	}
}

func TestCommaAsDelimiterAndDecimalMarkIsRefused(t *testing.T) {
	wantError(t, "x.csv", "device,vg_V,id_A\nD1,2,0,0,1\nD1,2,5,0,9\nD1,3,0,1,2\n", Options{}, ErrRefused, "delimiter and decimal mark at once", "")
}

func TestNumbersWithThousands(t *testing.T) {
	f := mustRead(t, "x.csv", "dut;vgs_at_10mA_mV\nA;1.234,5\nB;987,0\nC;2.345,0\n", Options{})
	checkShow(t, f, "A spot vg_v[1234.5e-3] id_a[10e-3]\nB spot vg_v[987.0e-3] id_a[10e-3]\nC spot vg_v[2345.0e-3] id_a[10e-3]")
	f = mustRead(t, "x.csv", "dut;vgs_at_10mA_mV\nA;1\u00a0234,5\nB;987,0\nC;2\u202f345,0\n", Options{})
	checkShow(t, f, "A spot vg_v[1234.5e-3] id_a[10e-3]\nB spot vg_v[987.0e-3] id_a[10e-3]\nC spot vg_v[2345.0e-3] id_a[10e-3]")
	// One cell with another mark is refused, not guessed.
	f = mustRead(t, "x.csv", "dut;vgs_at_10mA_V\nA;2,71\nB;2,72\nC;2,73\nD;2,74\nE;2,75\nF;2.760\n", Options{})
	if f.Refused != 1 || f.Refusals[0].Line != 7 || !strings.Contains(f.Refusals[0].Reason, "another decimal mark") {
		t.Errorf("%+v", f.Refusals)
	}
}
