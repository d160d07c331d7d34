package table

import (
	"encoding/json"
	"errors"
	"strings"
	"testing"
)

// Who is told that too many rows are refused wants to see how the file was cut.
func TestTooManyRefusalsComeWithTheDialect(t *testing.T) {
	for name, c := range map[string]struct {
		text   string
		opt    Options
		layout string
	}{
		"long":   {"# c\ndevice;vg_V;id_A\nD1;2;0,1\nD1;x;0,2\nD1;4;0,4\n", Options{}, layoutLong},
		"strict": {"# c\ndevice;vg_V;id_A\n" + strings.Repeat("D1;2;0,1\n", 20) + "D1;4;x\n", Options{Strict: true}, layoutLong},
		"spot":   {"# c\ndevice;vgs_at_10mA_V\nD1;2,1\nD2;x\nD3;x\n", Options{Decimal: "comma"}, layoutSpot},
	} {
		f, err := Read("x.csv", strings.NewReader(c.text), c.opt)
		if !errors.Is(err, ErrTooMany) || f == nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		d := f.Dialect
		if d.Delimiter != "semicolon" || d.Decimal != "comma" || d.Encoding != "UTF-8" || d.Header != 2 || d.Comments != 1 || f.Layout != c.layout || len(f.Refusals) == 0 {
			t.Errorf("%s: %+v, layout %q, %+v", name, d, f.Layout, f.Refusals)
		}
		if len(d.Columns) < 2 || d.Columns[0].As != "device" || d.Columns[1].As != "vg" || d.Columns[1].Unit != "V" {
			t.Errorf("%s: %+v", name, d.Columns)
		}
	}
	text, err := json.Marshal(newReader("x", Options{}).file.Dialect)
	if err != nil || strings.Contains(string(text), "null") {
		t.Errorf("%s %v", text, err)
	}
}
