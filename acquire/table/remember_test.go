package table

import "testing"

func remembered(m map[string]string) func(string) (map[string]string, bool) {
	return func(string) (map[string]string, bool) { return m, true }
}

const asEarlier = "columns as settled earlier for this header by --map"

// A slip in --map, made once, must not swap the columns of every later file.
func TestHeadersWithUnitBeatWhatIsRemembered(t *testing.T) {
	text := "Vgs (V),Id (mA)\n2,0.1\n3,0.2\n4,0.4\n"
	want := "D1 up vg_v[2,3,4] id_a[0.1e-3,0.2e-3,0.4e-3]"
	for _, m := range []map[string]string{
		{"vg": "2", "id": "1"}, {"vg": "Id (mA)"}, {"vl": "1"}, {"vg": "1", "id": "2"}, {"device": "1"}, {"ignore": "2"},
	} {
		f := mustRead(t, "D1.csv", text, Options{Remembered: remembered(m)})
		checkShow(t, f, want)
		if hasNote(f, asEarlier) || f.Dialect.Columns[0].How != "header" {
			t.Errorf("%v: %q %+v", m, f.Dialect.Notes, f.Dialect.Columns)
		}
	}
}

func TestRememberedServesWhereTheHeaderLeavesItOpen(t *testing.T) {
	for _, c := range []struct {
		text string
		m    map[string]string
		opt  Options
		want string
	}{
		{"a1,b1\n2,0.1\n3,0.2\n4,0.4\n", map[string]string{"vg": "1", "id": "2"}, Options{Units: map[string]string{"vg": "V", "id": "A"}}, "D1 up vg_v[2,3,4] id_a[0.1,0.2,0.4]"},
		{"Vg (V),Ugs (V),Id (A)\n2,3,0.1\n3,4,0.2\n4,5,0.4\n", map[string]string{"vg": "2"}, Options{}, "D1 up vg_v[3,4,5] id_a[0.1,0.2,0.4]"},
		{"Vg (V),Load (V)\n2,1\n3,2\n4,3\n", map[string]string{"vd": "2"}, Options{}, "D1 up vg_v[2,3,4] vd_v[1,2,3]"},
	} {
		opt := c.opt
		opt.Remembered = remembered(c.m)
		f := mustRead(t, "D1.csv", c.text, opt)
		checkShow(t, f, c.want)
		if !hasNote(f, asEarlier) {
			t.Errorf("%q: %q", c.text, f.Dialect.Notes)
		}
	}
	// In a unit that cannot be that quantity it does not serve.
	f := mustRead(t, "D1.csv", "Vg (V),Id (A),other (V)\n2,0.1,7\n3,0.2,7\n4,0.4,7\n", Options{Remembered: remembered(map[string]string{"id": "3"})})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[0.1,0.2,0.4]")
}

func TestMapAgainstTheUnitOfTheHeader(t *testing.T) {
	text := "Vgs (V),Id (mA)\n2,0.1\n3,0.2\n4,0.4\n"
	swapped := map[string]string{"vg": "2", "id": "1"}
	wantError(t, "D1.csv", text, Options{Map: swapped}, ErrAmbiguous, `column 1 "Vgs (V)" is to be read as id, but its header says V`, "--map id=2, or --units id=A")
	wantError(t, "D1.csv", text, Options{Map: map[string]string{"vg": "2"}}, ErrAmbiguous, `column 2 "Id (mA)" is to be read as vg, but its header says mA`, "--map vg=1, or --units vg=V")
	wantError(t, "D1.csv", "x,y\nV,A\n2,0.1\n3,0.2\n", Options{Map: swapped}, ErrAmbiguous, "its header says V", "--units id=A")
	f := mustRead(t, "D1.csv", text, Options{Map: swapped, Units: map[string]string{"vg": "V", "ids": "mA"}})
	checkShow(t, f, "D1 up vg_v[0.1,0.2,0.4] id_a[2e-3,3e-3,4e-3]")
	if !hasRemark(f, CodeFlagWins, `"Id (mA)" is headed in mA and read as vg in V`) || !hasRemark(f, CodeFlagWins, "read as id in mA") {
		t.Errorf("%+v", f.Remarks)
	}
}
