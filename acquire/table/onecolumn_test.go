package table

import (
	"errors"
	"maps"
	"strings"
	"testing"

	"gatesill/store/record"
)

const numberedNote = "numbered by their rows"

// A list of gate voltages, one below the other, is what a meter and an evening
// leave.
func TestOneColumnOfSpots(t *testing.T) {
	volts := map[string]string{"vg": "V"}
	want := "1 spot vg_v[3.01] id_a[0.01]\n2 spot vg_v[3.12] id_a[0.01]\n3 spot vg_v[2.98] id_a[0.01]"
	for name, text := range map[string]string{
		"no header":     "3.01\n3.12\n2.98\n",
		"decimal comma": "3,01\n3,12\n2,98\n",
		"both":          "Vgs\n3,01\n3,12\n2,98\n",
		"header":        "Vgs\n3.01\n3.12\n2.98\n",
		"unit":          "Vgs (V)\n3.01\n3.12\n2.98\n",
		"in the cells":  "3.01 V\n3.12 V\n2.98 V\n",
		"comments":      "# bag of 3\n3.01\n3.12\n2.98",
		"millivolts":    "Vgs\n3010\n3120\n2980\n",
	} {
		opt := Options{SpotCurrent: ten(), Units: volts}
		wanted := want
		if name == "millivolts" {
			opt.Units = map[string]string{"vg": "mV"}
			wanted = strings.NewReplacer("3.01", "3010e-3", "3.12", "3120e-3", "2.98", "2980e-3").Replace(want)
		}
		t.Run(name, func(t *testing.T) {
			f := mustRead(t, "list.txt", text, opt)
			checkShow(t, f, wanted)
			if !hasNote(f, numberedNote) || f.Layout != layoutSpot {
				t.Errorf("%s %q", f.Layout, f.Dialect.Notes)
			}
		})
	}
	f := mustRead(t, "list.txt", "vgs_at_10mA_V\n3.01\n3.12\nbroken\n2.98\n3.0\n3.0\n", Options{})
	checkShow(t, f, "1 spot vg_v[3.01] id_a[10e-3]\n2 spot vg_v[3.12] id_a[10e-3]\n4 spot vg_v[2.98] id_a[10e-3]\n5 spot vg_v[3.0] id_a[10e-3]\n6 spot vg_v[3.0] id_a[10e-3]")
	f = mustRead(t, "D7.txt", "vgs_at_10mA_V\n3.01\n", Options{})
	checkShow(t, f, "D7 spot vg_v[3.01] id_a[10e-3]")
	f = mustRead(t, "-", "vgs_at_10mA_V\n3.01\n", Options{})
	checkShow(t, f, "1 spot vg_v[3.01] id_a[10e-3]")
}

// Who types what the hint says never sees the same hint again, and ends with
// the file read.
func TestHintsLeadToTheEnd(t *testing.T) {
	for name, text := range map[string]string{
		"one column":              "3.01\n3.12\n2.98\n3.05\n",
		"one column, comma":       "3,01\n3,12\n2,98\n3,05\n",
		"one column, no zero":     "3,11\n3,12\n2,98\n3,15\n",
		"one column, thousandths": "3,011\n3,112\n2,984\n",
		"one column, header":      "Vgs\n3.01\n3.12\n2.98\n",
		"one column, odd header":  "Werte\n3.01\n3.12\n2.98\n",
		"two columns":             "1;3.01\n2;3.12\n3;2.98\n",
		"two columns, header":     "device;Vgs\nA;3.01\nB;3.12\n",
		"two columns, odd header": "foo;bar\nA;3.01\nB;3.12\n",
		"texts":                   "A;3.01\nB;3.12\nC;3.12\n",
		"sweep":                   "D1,2,0.1\nD1,3,0.2\nD1,4,0.4\n",
		"swapped":                 "Vgs (V),Id (mA)\n2,1\n3,2\n4,3\n",
		"no units":                "vg,id\n2,1\n3,20\n4,998\n",
	} {
		t.Run(name, func(t *testing.T) {
			opt := Options{Map: map[string]string{}, Units: map[string]string{}}
			if name == "swapped" {
				opt.Map = map[string]string{"vg": "2"}
			}
			seen := map[string]bool{}
			for {
				f, err := Read("list.txt", strings.NewReader(text), opt)
				if err == nil {
					if f.Points == 0 {
						t.Error("nothing read")
					}
					return
				}
				hint := hintOf(err)
				if !errors.Is(err, ErrAmbiguous) || hint == "" || seen[hint] {
					t.Fatalf("%v; hint %q, seen before: %v", err, hint, seen)
				}
				seen[hint] = true
				typeHint(t, &opt, hint)
			}
		})
	}
}

// typeHint takes the flags of a hint, up to the first 'or', into the options.
func typeHint(t *testing.T, opt *Options, hint string) {
	t.Helper()
	hint, _, _ = strings.Cut(hint, " or ")
	hint, _, _ = strings.Cut(hint, " for ")
	hint, _, _ = strings.Cut(hint, " (")
	hint, _, _ = strings.Cut(strings.TrimSuffix(hint, ","), ", with")
	words := strings.Fields(strings.TrimSuffix(strings.TrimSpace(hint), ","))
	for i := 0; i+1 < len(words); i += 2 {
		pairs := map[string]string{}
		for _, p := range strings.Split(words[i+1], ",") {
			if k, v, ok := strings.Cut(p, "="); ok {
				pairs[k] = v
			}
		}
		switch words[i] {
		case "--spot-current":
			x, err := record.ParseNumber(words[i+1], "A")
			if err != nil {
				t.Fatal(err)
			}
			opt.SpotCurrent = record.Known(x)
		case "--decimal":
			opt.Decimal = words[i+1]
		case "--map":
			maps.Copy(opt.Map, pairs)
		case "--units":
			maps.Copy(opt.Units, pairs)
		default:
			t.Fatalf("hint %q", hint)
		}
	}
}
