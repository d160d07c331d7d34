package replay

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/acquire/table"
	"gatesill/store/record"
)

func readText(t *testing.T, role, text string, opt Options) (*Log, error) {
	t.Helper()
	x, err := table.TextOf("log.csv", []byte(text), opt.Table)
	if err != nil {
		return nil, err
	}
	return readLog(x, "log.csv", role, opt)
}

// show writes times from the first and values.
func show(l *Log) string {
	var s []string
	for _, e := range l.Entries {
		v := string(e.State)
		if x, ok := e.Value.Get(); ok {
			v = fmt.Sprintf("%.6g", x)
		}
		if e.Refused != "" {
			v = "(" + e.Refused + ")"
		}
		s = append(s, fmt.Sprintf("%.3f %s", e.At-l.Entries[0].At, v))
	}
	return strings.Join(s, "; ")
}

func TestForms(t *testing.T) {
	const two = "0.000 3.012; 0.250 3.013; 0.500 3.112"
	for _, c := range []struct {
		name, role, text string
		form             Form
		want             string
		opt              Options
	}{
		{name: "zone", role: "gate", form: Zoned, want: two, text: "time,V\n2026-05-20T10:00:00.000+02:00,3.012\n2026-05-20T10:00:00.250+02:00,3.013\n2026-05-20T10:00:00.500+02:00,3.112\n"},
		{name: "Z", role: "gate", form: Zoned, want: two, text: "2026-05-20 10:00:00Z;3,012 V\n2026-05-20 10:00:00.25Z;3,013 V\n2026-05-20 10:00:00.5Z;3,112 V\n"},
		{name: "no zone", role: "gate", form: Local, want: two, text: "time\tgate (mV)\n2026-05-20 10:00:00,000\t3012\n2026-05-20 10:00:00,250\t3013\n2026-05-20 10:00:00,500\t3112\n"},
		{name: "date and time apart", role: "gate", form: Local, want: two, text: "Date,Time,Value,Unit\n20.05.2026,10:00:00.000,3.012,V\n20.05.2026,10:00:00.250,3013,mV\n20.05.2026,10:00:00.500,3.112,V\n"},
		{name: "slashes, the day tells", role: "gate", form: Local, want: two, text: "time,V\n05/20/2026 10:00:00.000,3.012\n05/20/2026 10:00:00.250,3.013\n05/20/2026 10:00:00.500,3.112\n"},
		{name: "Unix ms", role: "gate", form: UnixMS, want: two, text: "1779264000000,3.012V\n1779264000250,3.013V\n1779264000500,3.112V\n"},
		{name: "Unix s", role: "gate", form: UnixS, want: two, text: "1779264000.0 3.012 V\n1779264000.25 3.013 V\n1779264000.5 3.112 V\n"},
		{name: "time of day", role: "gate", form: TimeOfDay, want: two, text: "10:00:00.000 3.012 V\n10:00:00.250 3.013 V\n10:00:00.500 3.112 V\n"},
		{name: "decimal comma in lines", role: "gate", form: TimeOfDay, want: two, text: "10:00:00,000 3,012 V\n10:00:00,250 3,013 V\n10:00:00,500 3,112 V\n"},
		{name: "twelve hours", role: "gate", form: TimeOfDay, want: "0.000 3.012; 1.000 3.013", text: "time,V\n12:59:59 PM,3.012\n1:00:00 PM,3.013\n"},
		{name: "midnight", role: "gate", form: TimeOfDay, want: two, text: "23:59:59.750,3.012 V\n00:00:00.000,3.013 V\n00:00:00.250,3.112 V\n"},
		{name: "year's end", role: "gate", form: Local, want: two, text: "time,V\n2026-12-31 23:59:59.750,3.012\n2027-01-01 00:00:00.000,3.013\n2027-01-01 00:00:00.250,3.112\n"},
		{name: "clock put back", role: "gate", form: Local, want: two, text: "time,V\n2026-10-25 02:59:59.750,3.012\n2026-10-25 02:00:00.000,3.013\n2026-10-25 02:00:00.250,3.112\n"},
		{name: "elapsed", role: "gate", form: Elapsed, want: two, text: "t (s),V\n0.00,3.012\n0.25,3.013\n0.50,3.112\n"},
		{name: "elapsed ms", role: "gate", form: Elapsed, want: two, text: "time (ms),V\n0,3.012\n250,3.013\n500,3.112\n"},
		{name: "elapsed without header", role: "gate", form: Elapsed, want: two, text: "0.00;3.012 V\n0.25;3.013 V\n0.50;3.112 V\n"},
		{name: "elapsed h:m:s by header", role: "gate", form: ElapsedHMS, want: two, text: "elapsed,V\n0:00:05.00,3.012\n0:00:05.25,3.013\n0:00:05.50,3.112\n"},
		{name: "elapsed h:m:s by flag", role: "gate", form: ElapsedHMS, want: two, opt: Options{Times: map[string]string{"gate": "elapsed"}}, text: "time,V\n0:00:05.00,3.012\n0:00:05.25,3.013\n0:00:05.50,3.112\n"},
		{name: "elapsed beyond a day", role: "gate", form: ElapsedHMS, want: "0.000 3.012; 1.000 3.013", text: "time,V\n23:59:59,3.012\n24:00:00,3.013\n"},
		{name: "lost zeros of the fraction", role: "gate", form: TimeOfDay, want: "0.000 3.012; 0.245 3.013; 0.490 3.014; 0.735 3.1", text: "10:00:00.5,3.012 V\n10:00:00.250,3.013 V\n10:00:00.495,3.014 V\n10:00:00.740,3.100 V\n"},
		{name: "zeros at the end left out", role: "gate", form: TimeOfDay, want: "0.000 3.012; 0.205 3.013; 0.410 3.112", text: "10:00:00.3,3.012 V\n10:00:00.505,3.013 V\n10:00:00.71,3.112 V\n"},
		{name: "several to a second", role: "gate", form: TimeOfDay, want: "0.000 3.012; 0.500 3.013; 1.250 3.112", text: "10:00:00,3.012 V\n10:00:00,3.013 V\n10:00:01,3.112 V\n"},
		{name: "overload and nothing", role: "current", form: Elapsed, want: "0.000 0.012; 0.500 overload; 1.000 missing; 1.500 overload", text: "0.0;12 mA\n0.5;O.L mA\n1.0;---\n1.5;9.9E37\n"},
		{name: "held, AC, another unit", role: "gate", form: Elapsed, want: "0.000 3.012; 1.000 (held); 2.000 (an AC reading); 3.000 (in kΩ); 4.000 3.013; 5.000 3.014", text: "t,value,unit,mode\n0,3.012,V,AUTO\n1,3.012,V,AUTO HOLD\n2,3.012,VAC,AUTO\n3,3.012,kOhm,AUTO\n4,3013,mVDC,AUTO\n5,3.014,V,\n"},
		{name: "an index beside", role: "gate", form: Local, want: two, text: "No.,Time,Reading,Unit\n1,2026-05-20 10:00:00.000,3.012,V\n2,2026-05-20 10:00:00.250,3.013,V\n3,2026-05-20 10:00:00.500,3.112,V\n"},
		{name: "units below the header", role: "gate", form: Elapsed, want: two, text: "time,reading\ns,V\n0.00,3.012\n0.25,3.013\n0.50,3.112\n"},
		{name: "byte order mark and CRLF", role: "gate", form: Elapsed, want: two, text: "\xef\xbb\xbf# logger\r\ntime,V\r\n0.00,3.012\r\n0.25,3.013\r\n0.50,3.112\r\n"},
		{name: "--map and --units", role: "load", form: Elapsed, want: two, opt: Options{Table: table.Options{Map: map[string]string{"t": "1", "vl": "b"}, Units: map[string]string{"vl": "mV"}}}, text: "a,c,b\n0.00,7,3012\n0.25,9,3013\n0.50,4,3112\n"},
	} {
		t.Run(c.name, func(t *testing.T) {
			l, err := readText(t, c.role, c.text, c.opt)
			if err != nil {
				t.Fatal(err)
			}
			if got := show(l); got != c.want || l.Found.Form != c.form || l.Refused != 0 {
				t.Errorf("%s, %s, refused %+v\nwant %s, %s", l.Found.Form, got, l.Refusals, c.form, c.want)
			}
		})
	}
}

func TestRefusedLogs(t *testing.T) {
	for _, c := range []struct {
		name, role, text string
		is               error
		line             int
		says, hint       string
	}{
		{"time goes back", "gate", "time,V\n10:00:00,3.0\n10:00:02,3.0\n10:00:01,3.0\n10:00:03,3.0\n", table.ErrRefused, 4, "the time goes back by 1 s", "cut the file"},
		{"logger restarted", "gate", "t,V\n0.0,3.0\n0.5,3.0\n0.1,3.0\n0.3,3.0\n", table.ErrRefused, 4, "goes back by 400 ms", "started again"},
		{"day or month", "gate", "time,V\n05/06/2026 10:00:00,3.0\n05/06/2026 10:00:01,3.0\n", table.ErrAmbiguous, 2, "day or the month first", "YYYY-MM-DD"},
		{"clock or elapsed", "gate", "time,V\n0:00:05,3.0\n0:00:06,3.0\n", table.ErrAmbiguous, 2, "time of day, or count", "--log-times gate=clock or --log-times gate=elapsed"},
		{"no unit", "current", "time,reading\n10:00:00,3.0\n10:00:01,3.0\n", table.ErrAmbiguous, 1, "no unit", "--units id=A or --units id=mA"},
		{"another meter", "gate", "10:00:00 12.5 mA\n10:00:01 12.5 mA\n", table.ErrRefused, 1, "it reads A", "--meter-logs current="},
		{"two columns of readings", "gate", "time,a,b\n10:00:00,3.0,4.0\n10:00:01,3.1,4.0\n", table.ErrAmbiguous, 1, "2 columns", "--map vg=2 or --map vg=3"},
		{"rows counted", "gate", "1 3.0\n2 3.1\n3 3.1\n", table.ErrRefused, 1, "no column is certain to hold times", "--map t="},
		{"no log", "gate", "this is no table\nat all\n", table.ErrRefused, 0, "no row has a time and a reading", "lines TIME VALUE UNIT"},
		{"rubbish", "gate", "10:00:00 3.0 V\n10:00:01 x V\n10:00:02 y V\n10:00:03 3.0 V\n", table.ErrTooMany, 2, "2 of 4 rows refused", ""},
		{"decimal marks mixed", "gate", "10:00:00;3.02;V\n10:00:01;3,02;V\n10:00:02;3.03;V\n", table.ErrAmbiguous, 0, "some numbers have a decimal comma", "--decimal"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := readText(t, c.role, c.text, Options{})
			var e *table.Error
			if !errors.Is(err, c.is) || !errors.As(err, &e) || e.Line != c.line || !strings.Contains(err.Error(), c.says) || !strings.Contains(e.Hint, c.hint) {
				t.Errorf("%v, hint %+v", err, e)
			}
		})
	}
}

// One bad row among many is refused with its place, and the others are read.
func TestOneBadRow(t *testing.T) {
	text := "time,V\n"
	for i := range 20 {
		v := "3.01"
		if i == 7 {
			v = "oops"
		}
		text += fmt.Sprintf("10:00:%02d,%s\n", i, v)
	}
	l, err := readText(t, "gate", text, Options{})
	if err != nil || len(l.Entries) != 19 || l.Refused != 1 || l.Refusals[0].Line != 9 {
		t.Errorf("%+v, %v", l, err)
	}
	if _, err := readText(t, "gate", text, Options{Table: table.Options{Strict: true}}); !errors.Is(err, table.ErrTooMany) {
		t.Errorf("strict: %v", err)
	}
}

// An hour that is missing in one log and not in the other is the clock that was put
// forward; missing in both it may be a pause.
func TestClockPutForward(t *testing.T) {
	local, utc := "time,V\n", "time,A\n"
	for i := range 60 {
		at := 3600 + 60*59 + i*2 // 01:59:00 and on
		if at >= 2*3600 {
			at += 3600
		}
		local += fmt.Sprintf("2026-03-29 %02d:%02d:%02d,%.3f\n", at/3600, at/60%60, at%60, 3+0.001*float64(i))
		u := 60*59 + i*2
		utc += fmt.Sprintf("2026-03-29T%02d:%02d:%02dZ,%.3f\n", u/3600, u/60%60, u%60, 0.1+0.001*float64(i))
	}
	opt := Options{Zone: "+01:00"}
	gate, err := readText(t, "gate", local, opt)
	if err != nil {
		t.Fatal(err)
	}
	current, err := readText(t, "current", utc, opt)
	if err != nil {
		t.Fatal(err)
	}
	s, err := Join([]*Log{gate, current}, nil, nil, opt)
	if err != nil {
		t.Fatal(err)
	}
	if d := gate.to() - current.to(); math.Abs(d) > 0.1 || s.Started != "2026-03-29T00:59:00.000Z" || !strings.Contains(strings.Join(gate.Found.Notes, " "), "put forward") {
		t.Errorf("ends %g s apart, start %s, notes %q", d, s.Started, gate.Found.Notes)
	}
}

// What reads itself as a time must give entries whose times never go back and are
// numbers, whatever the bytes; and readings that the store takes.
func FuzzLog(f *testing.F) {
	for _, s := range []string{
		"time,V\n10:00:00.5,3.012\n10:00:01,O.L\n", "0.0;3,01 V\n0.5;3,02 V\n", "1779264000000 3.0 V\n1779264000250 3.1 mV\n",
		"20.05.2026\t23:59:59\t3.0\tV\n21.05.2026\t00:00:00\t3.1\tV\n", "elapsed,mA\n0:01.5,2\n0:02.5,3\n", "2026-10-25 02:59:59,1 V\n2026-10-25 02:00:00,1 V\n",
		"99:59:59.999999999 1V\n9999:00:00 2V\n", "1:1:60,1V\n", "t,V\n1e308,1\n2e308,2\n", "10:00:00:000 \"1\nV\" 3 V\n",
	} {
		f.Add([]byte(s), byte(0))
	}
	f.Fuzz(func(t *testing.T, raw []byte, flags byte) {
		opt := Options{Table: table.Options{MaxBytes: 1 << 20}}
		if flags&1 != 0 {
			opt.Table.Units = map[string]string{"vg": "V", "id": "mA"}
		}
		if flags&2 != 0 {
			opt.Times = map[string]string{"gate": "elapsed", "current": "2026-05-20T10:00:00"}
		}
		role := "gate"
		if flags&4 != 0 {
			role = "current"
		}
		x, err := table.TextOf("log.csv", raw, opt.Table)
		if err != nil {
			return
		}
		l, err := readLog(x, "log.csv", role, opt)
		if err != nil {
			var e *table.Error
			if !errors.As(err, &e) {
				t.Errorf("%v has no place", err)
			}
			return
		}
		last := math.Inf(-1)
		for i := range l.Entries {
			e := &l.Entries[i]
			if err := e.Reading.Validate(); err != nil && e.Refused == "" {
				t.Error(err)
			}
			if !(e.At >= last) || math.IsInf(e.At, 0) {
				t.Fatalf("line %d: %g after %g", e.Line, e.At, last)
			}
			last = e.At
		}
		other := &Log{Role: "drain", Path: "other", Found: Found{Form: Elapsed}, Entries: []Entry{
			{Reading: record.Reading{Role: "drain", Meter: "m", At: 0, Value: record.Known(1)}}, {Reading: record.Reading{Role: "drain", Meter: "m", At: 10, Value: record.Known(2)}}}}
		if _, err := Join([]*Log{l, other}, nil, nil, opt); err == nil && role != "gate" {
			t.Error("joined without a gate")
		}
	})
}

func FuzzNotes(f *testing.F) {
	for _, s := range []string{"10:02:03 device B in socket\n10:09 removed\n", "2026-05-20T10:00:00Z;D7\n", "12.5 Bauteil Nr. 7 drin\n13 raus\n", "# x\ntime,note\n1:00:00 PM D7 out, D8 in\n", "10:00 device \xff in\n"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		x, err := table.TextOf("notes.txt", raw, table.Options{MaxBytes: 1 << 20})
		if err != nil {
			return
		}
		_, notes, err := readNotes(x, "notes.txt", Options{})
		if err != nil {
			var e *table.Error
			if !errors.As(err, &e) {
				t.Errorf("%v has no place", err)
			}
			return
		}
		for i, n := range notes {
			if n.In != "" {
				if err := record.CheckName("device", n.In); err != nil {
					t.Error(err)
				}
			}
			if i > 0 && !(n.At >= notes[i-1].At) {
				t.Errorf("line %d: the time goes back", n.Line)
			}
		}
	})
}
