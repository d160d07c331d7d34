package table

import (
	"errors"
	"fmt"
	"strings"
	"testing"
)

const spotHead = "Prüfling;Vgs bei 10 mA (V)\n"

func TestFootOfASpreadsheetIsNoDevice(t *testing.T) {
	f := mustRead(t, "x.csv", spotHead+"A1;3,1\nA2;3,2\nA3;3,3\nMittelwert;3,2\nStAbw;0,1\nMINIMUM;3,1\nMax.;3,3\n", Options{Decimal: "comma"})
	checkShow(t, f, "A1 spot vg_v[3.1] id_a[10e-3]\nA2 spot vg_v[3.2] id_a[10e-3]\nA3 spot vg_v[3.3] id_a[10e-3]")
	if f.Refused != 4 || f.Rows != 7 || f.Points != 3 || f.Refusals[0].Line != 5 || f.Refusals[0].Reason != summaryReason || f.Refusals[0].Text != "Mittelwert;3,2" {
		t.Errorf("%d of %d refused: %+v", f.Refused, f.Rows, f.Refusals)
	}
	if _, err := Read("x.csv", strings.NewReader(spotHead+"A1;3,1\nA2;3,2\nMean;3,2\n"), Options{Strict: true, Decimal: "comma"}); !errors.Is(err, ErrTooMany) {
		t.Errorf("strict: %v", err)
	}
}

func TestSummaryRowsOfATableOfPoints(t *testing.T) {
	body := "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.4\n"
	want := "D1 up vg_v[2,3,4] id_a[0.1,0.2,0.4]"
	f := mustRead(t, "x.csv", body+"average,3,0.23\nstd,,OL\ncount,3\n", Options{})
	checkShow(t, f, want)
	if f.Refused != 3 || f.States != 0 {
		t.Errorf("%d refused, %d states, %+v", f.Refused, f.States, f.Refusals)
	}
	for i, r := range f.Refusals {
		if r.Line != 5+i {
			t.Errorf("refusals out of order: %+v", f.Refusals)
		}
	}
	// Three rows of one name are a device.
	f = mustRead(t, "x.csv", body+"sum,2,0.1\nsum,3,0.2\nsum,4,0.4\n", Options{})
	if len(f.Sweeps) != 2 || f.Sweeps[1].Device != "sum" || f.Refused != 0 {
		t.Errorf("%s %+v", show(f), f.Refusals)
	}
}

func TestSummaryWordsThatNameDevices(t *testing.T) {
	for _, text := range []string{
		"dut,vgs_at_10mA_V\nmin,3.1\nmax,3.2\n",                                   // no other names
		"dut,vgs_at_10mA_V\nl,3.1\nm,3.2\nn,3.3\no,3.4\n",                         // letters
		"dut,vgs_at_10mA_V\nmax 1,3.1\nmeanwhile,3.2\nsummer,3.3\n",               // no summary words
		"dut,vgs_at_10mA_V\nD1,3.1\nmedian,3.2\nmedian,3.3\nmedian,3.3\nD2,3.1\n", // three times
	} {
		f := mustRead(t, "x.csv", text, Options{})
		if f.Refused != 0 || f.Points != strings.Count(text, "\n")-1 {
			t.Errorf("%q: %s %+v", text, show(f), f.Refusals)
		}
	}
}

// Summary rows in the midst of a list count towards the fifth that fails it, as
// any refused row does.
func TestSummaryRowsInTheMidstCount(t *testing.T) {
	text := "dut,vgs_at_10mA_V\nD1,3.1\nmean,3.1\nD2,3.2\n"
	wantError(t, "x.csv", text, Options{}, ErrTooMany, "1 of 3 rows refused: line 3: "+summaryReason, "")
	text = "dut,vgs_at_10mA_V\n"
	for i := range 9 {
		text += fmt.Sprintf("D%d,3.%d\n", i, i)
	}
	f := mustRead(t, "x.csv", text+"mean,3.1\nD9,3.2\n", Options{})
	if len(f.Sweeps) != 10 || f.Refused != 1 || f.Refusals[0].Line != 11 {
		t.Errorf("%s %+v", show(f), f.Refusals)
	}
	// Rows that are refused for more than their name are told as before.
	bad := "D1,3.1\nD2,x\nD3,3.2\nmean,3.2\nsum\n"
	wantError(t, "x.csv", "dut,vgs_at_10mA_V\n"+bad, Options{}, ErrTooMany, "3 of 5 rows refused: line 3", "")
}
