package table

import (
	"bytes"
	"errors"
	"fmt"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"
	"time"
)

// Hostile files end in an error in plain words or in refused rows, within 10 s
// and 300 MB, and never in a panic.
func TestHostileFiles(t *testing.T) {
	mega := 1 << 20
	noise := make([]byte, 4*mega)
	rng := rand.New(rand.NewPCG(3, 3))
	for i := range noise {
		noise[i] = byte(rng.Uint32())
	}
	printable := make([]byte, 4*mega)
	const alphabet = " ,;\t\n\"'#.-+0123456789eEVAmu"
	for i := range printable {
		printable[i] = alphabet[rng.IntN(len(alphabet))]
	}
	rows := func(n int, row string) string { return strings.Repeat(row, n) }
	many := func(n int, f func(i int) string) string {
		var b strings.Builder
		for i := range n {
			b.WriteString(f(i))
		}
		return b.String()
	}
	for _, c := range []struct{ name, text, words string }{
		{"noise", string(noise), "binary"},
		{"printable noise", string(printable), ""},
		{"zeros behind the rows", talkBody + rows(mega, "\x00"), ""},
		{"zeros among the rows", talkBody + "D1,5,0.4\nD1,\x00,0.5\nD1,6,\x000.5\n", "too many rows refused"},
		{"one line of a megabyte of x", rows(20*mega, "x"), "no rows"},
		{"megabyte lines", talkBody + rows(8, strings.Repeat("x", 2*mega)+"\n"), "too many rows refused"},
		{"megabyte header", strings.Repeat("vg", mega) + ",id_A\n1,2\n", ""},
		{"megabyte cells", "device,vg_V,id_A\nD1,2," + strings.Repeat("1", mega/2) + "\n", "too many rows refused"},
		{"a million digits", "device,vg_V,id_A\nD1,2,0." + strings.Repeat("1", 900000) + "\n", "too many rows refused"},
		{"100,000 columns", "vg_V" + many(100000, func(i int) string { return fmt.Sprintf(",D%d", i) }) + "\n1" + rows(100000, ",1") + "\n", "at most 20000"},
		{"100,000 columns without header", rows(3, "1"+rows(100000, ",1")+"\n"), "at most 20000"},
		{"a million delimiters", rows(mega, ","), "at most 20000"},
		{"a million semicolons a line", talkBody + rows(3, rows(mega, ";")+"\n"), ""},
		{"a million devices", "device,vg_V,id_A\n" + many(mega, func(i int) string { return fmt.Sprintf("D%d,2,0.1\n", i) }), "more than 100000 devices"},
		{"a million bad names", "device,vg_V,id_A\n" + many(mega, func(i int) string { return fmt.Sprintf("D\u200b%d,2,0.1\n", i) }), "more than 100000 devices"},
		{"a million spots", "device,vgs_at_10mA_V\n" + many(mega, func(i int) string { return fmt.Sprintf("D%d,2\n", i) }), "more than 100000"},
		{"gate to and fro", "device,vg_V,id_A\n" + many(mega, func(i int) string { return fmt.Sprintf("D1,%d,0.1\n", i/3%2*5) }), ""},
		{"a quote never closed", talkBody + "\"" + rows(200000, "D1,2,0.1\n"), ""},
		{"a quote opened in every row", "device,vg_V,id_A\n" + rows(300000, "\"D1,2,0.1\n"), ""},
		{"quotes and nothing else", rows(4*mega, "\""), ""},
		{"quotes in pairs", rows(mega, "\"\"\n"), ""},
		{"1e308", "device,vg_V,id_A\nD1,2,1e308\nD1,3,-1e308\n", "too large for a reading"},
		{"1e999", "device,vg_V,id_A\nD1,2,1e999\n", "too large for a reading"},
		{"exponent of a thousand digits", "device,vg_V,id_A\nD1,2,1e" + rows(40, "9") + "\n", "too large for a reading"},
		{"terminal escapes everywhere", "\x1b[2Jdevice,\x1b[31mvg_V,id_A\x1b[0m\n\x1b[31mD1,\x1b[0m2,0.1\n", ""},
		{"formulas", "=cmd(),@vg,+id\n=1+1,=2,=3\n", ""},
		{"a million comments", rows(mega, "# VDD = 12 V; R_L = 10 Ohm\n") + talkBody, ""},
		{"a million comments behind", talkBody + rows(mega, "# device: x\n"), "-"},
		{"a million line ends", rows(4*mega, "\n"), "no rows"},
		{"a million CR", rows(4*mega, "\r"), "no rows"},
		{"a million bytes FF", rows(mega, "\xff"), ""},
		{"odd UTF-16", "\xff\xfe" + rows(100001, "a"), ""},
		{"UTF-16 of one byte", "\xff\xfe\x00\x01\x02", ""},
		{"cut in a number", talkBody + "D1,5,0.", ""},
		{"cut in a quote", talkBody + "\"D1", "too many rows refused"},
		{"cut in a row", talkBody + "D1,5", "too many rows refused"},
		{"cut in a character", talkBody + "D1\xc3", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			start := time.Now()
			f, err := Read("x.csv", strings.NewReader(c.text), Options{})
			took := time.Since(start)
			runtime.ReadMemStats(&after)
			if took > 10*time.Second {
				t.Errorf("took %s", took)
			}
			if used := (after.TotalAlloc - before.TotalAlloc) >> 20; used > 300 {
				t.Errorf("allocated %d MiB in all", used)
			}
			switch {
			case err != nil:
				checkError(t, err)
				if c.words == "-" || !strings.Contains(err.Error(), c.words) {
					t.Errorf("%.300v, want %q", err, c.words)
				}
			case c.words != "" && c.words != "-":
				t.Errorf("read, want an error with %q; %d sweeps, refused %d of %d", c.words, len(f.Sweeps), f.Refused, f.Rows)
			default:
				checkFile(t, f)
			}
		})
	}
}

// checkError checks what holds for every error: a sentinel, a place, plain
// words.
func checkError(t *testing.T, err error) {
	t.Helper()
	var e *Error
	if !errors.As(err, &e) {
		t.Fatalf("%T is no *Error: %v", err, err)
	}
	if !errors.Is(err, ErrAmbiguous) && !errors.Is(err, ErrRefused) && !errors.Is(err, ErrTooMany) {
		t.Errorf("%v wraps no error of this package", err)
	}
	if s := err.Error() + e.Hint; strings.ContainsAny(s, "\x00\x1b\n\r\x07") || len(s) > 4000 {
		t.Errorf("no plain words: %.300q (%d bytes)", s, len(s))
	}
}

func FuzzRead(f *testing.F) {
	for _, s := range []string{
		talkBody, "", "\x00", "\xff\xfeA\x00", "a,b\n\"", "sep=;\nvg;id\n1;2\n", "Vg (V),D1,D2\n1,2m,OL\n", "#;Ugs@10mA [V]\n#1;2,5\n#2;2,6\n",
		"serial;vgs_at_150mA\nA;4,322\nB;4,16\n", "Nr.\tU_GS [V]\tI_D [µA]\r\n1\t2,0\t-----\r\n", "1,234\n1,250\n", "lot,package,side,device,run,vg_V,id_A,t (s),T [°C],Vout (V),note\nL,P,A,D,1,2,1e-3,0,25,12,\"x\ny\"\n",
		"# VDD = 12 V; R_L = 4k7 5% 10W\n# device: D7\nVg Id\nV mA\n2 1\n3 OL\n4 9.9E37\n3 2\n",
	} {
		f.Add([]byte(s), uint8(0))
		f.Add([]byte(s), uint8(255))
	}
	f.Fuzz(func(t *testing.T, data []byte, flags uint8) {
		opt := Options{}
		if flags&1 != 0 {
			opt.Units = map[string]string{"vg": "V", "id": "mA", "vl": "V", "gm": "S", "vdd": "V", "ig": "nA"}
		}
		if flags&2 != 0 {
			opt.SpotCurrent = ten()
		}
		if flags&4 != 0 {
			opt.Decimal = "comma"
		}
		if flags&8 != 0 {
			opt.Map = map[string]string{"vg": "1", "id": "2"}
		}
		if flags&16 != 0 {
			opt.Map = map[string]string{"device": "1", "vg": "2", "id": "3"}
		}
		if flags&32 != 0 {
			opt.Ask = func(q Question) (string, error) {
				if len(q.Choices) == 0 {
					return "10mA", nil
				}
				return q.Choices[len(data)%len(q.Choices)], nil
			}
		}
		opt.PChannel = flags&64 != 0
		if flags&128 != 0 {
			opt.Delimiter = ","
		}
		file, err := Read("x.csv", bytes.NewReader(data), opt)
		if err != nil {
			checkError(t, err)
			return
		}
		checkFile(t, file)
	})
}

func FuzzCell(f *testing.F) {
	for _, s := range []string{"1", "-0.5", "1,234.5", "2m2", "250 µA", "OL", "9.9E37", "1e308", "\u2212\u221e", "1.5E-3", "0.0001234", "12345678901234567", "1e-400", "5.", ".5", "007"} {
		f.Add([]byte(s), int8(-3), false)
		f.Add([]byte(s), int8(0), true)
	}
	f.Fuzz(func(t *testing.T, cell []byte, exp int8, comma bool) {
		n := numeral{mark: '.', group: ','}
		if comma {
			n = numeral{mark: ','}
		}
		s := newScale("A", int(exp)%16, false)
		b := buffer{text: []byte("[")}
		st, why := b.put(cell, n, &s)
		if why != "" {
			if len(b.values) != 0 || len(b.text) != 1 || st != "" {
				t.Fatalf("%q refused, but left %q %v", cell, b.text, b.values)
			}
			if strings.ContainsAny(why, "\x00\x1b\n") {
				t.Fatalf("%q: reason %q", cell, why)
			}
			return
		}
		b.close()
		checkOneCell(t, cell, b, string(st))
	})
}
