package table

import (
	"strings"
	"testing"

	"gatesill/store/record"
)

func TestDatesAreReadOnceForTheFile(t *testing.T) {
	check := func(want, note string, dates ...string) {
		t.Helper()
		text := "device,vgs_at_10mA_V,date\n"
		for i, d := range dates {
			text += "D" + string(rune('1'+i)) + ",2.9" + string(rune('1'+i)) + ",\"" + d + "\"\n"
		}
		f, err := Read("t.csv", strings.NewReader(text), Options{})
		if err != nil {
			t.Fatalf("%v: %v", dates, err)
		}
		got := f.Sweeps[0].MeasuredAt
		if got != want {
			t.Errorf("%v: measured at %q, want %q", dates, got, want)
		}
		for i := range f.Sweeps {
			if err := record.CheckStampOrDate("time", f.Sweeps[i].MeasuredAt); err != nil {
				t.Error(err)
			}
			if f.Sweeps[i].Date != dates[i] {
				t.Errorf("date text %q, want %q", f.Sweeps[i].Date, dates[i])
			}
		}
		if has := strings.Contains(strings.Join(f.Dialect.Notes, "\n"), "YYYY-MM-DD"); has != (note != "") {
			t.Errorf("%v: notes %q", dates, f.Dialect.Notes)
		}
	}
	check("2026-05-20", "", "2026-05-20", "2026-05-21")
	check("2026-05-20", "", "2026-05-20 14:30", "2026-05-21 09:00")
	check("2026-05-20T12:30:00.000Z", "", "2026-05-20T14:30:00+02:00")
	check("2026-05-03", "", "3.5.2026", "21.5.2026")
	check("2026-05-03", "", "03/05/2026", "21/05/2026") // the 21st settles it
	check("2026-03-05", "", "03/05/2026", "05/21/2026")
	check("2026-05-05", "", "05/05/2026")
	check("", "left out", "03/05/2026", "04/05/2026") // day or month first
	check("2026-05-20", "", "20 May 2026", "1 June 2026")
	check("", "left out", "yesterday")
	check("", "left out", "2026-05-20", "20.5.2026") // two forms in one file
}
