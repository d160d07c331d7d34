package bench

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func TestExample(t *testing.T) {
	b, err := Parse([]byte(Example))
	require.NoError(t, err)
	require.Equal(t, "attic bench", b.Name)
	require.Equal(t, record.Load, b.Given.Circuit)
	require.Equal(t, record.Known(10), b.Given.RL)
	require.Equal(t, record.Known(0.01), b.Given.RLTol)
	require.Equal(t, "dc", b.Given.Pulsed)
	require.False(t, b.Given.PulseWidth.IsKnown())
	require.Equal(t, record.Known(10), b.Limits.PD)
	require.Equal(t, record.Known(100e3), b.Bleed)
	require.Equal(t, record.Known(100), b.Limits.Temp)
	require.Len(t, b.Meters, 4)
	require.Len(t, b.Lines, 4)
	g := b.Meters[0]
	require.Equal(t, "2027-03-02", g.Due)
	require.Equal(t, []record.RangeAccuracy{{Top: 6, Percent: 0.5, Counts: 2, Resolution: 1e-3, Noise: record.Known(0.3e-3)}}, g.Ranges)
	require.Equal(t, "limit", b.Meters[1].Coverage)
	require.Equal(t, 1.0, b.Meters[1].Ranges[0].Top)
	require.Equal(t, record.Known(0.1), b.Meters[1].Ranges[0].Burden)
	require.Equal(t, "2400 8N1", b.Lines[0].Settings)
	require.Equal(t, record.Known(0.03), b.Lines[0].LagU)
	require.Equal(t, []string{"*CLS", "CONF:CURR:DC 1"}, b.Lines[1].Setup)
	require.Equal(t, record.Known(0.25), b.Lines[1].Every)
	// Meters on one line know the same of it.
	a, c := b.Lines[2], b.Lines[3]
	require.Equal(t, "text", c.Speaks)
	require.Equal(t, ";", c.Separator)
	require.Equal(t, "comma", c.Decimal)
	require.Equal(t, []any{1, 2, "mV", "degC"}, []any{a.Column, c.Column, a.Unit, c.Unit})
	require.Len(t, b.Supplies, 2)
	require.Equal(t, record.Known(12), b.Supplies[1].Voltage)
	require.Equal(t, 2, b.Supplies[1].Output)
	require.Equal(t, "OFF 2", b.Supplies[1].Commands["off"])
	require.NoError(t, b.Live())
	require.Len(t, b.Overdue("2027-03-03"), 2)
	require.Empty(t, b.Overdue("2027-03-02"))
}

func TestRefused(t *testing.T) {
	check := func(text, want string) {
		t.Helper()
		_, err := Parse([]byte(text))
		require.Error(t, err)
		require.Contains(t, err.Error(), want)
	}
	check("nmae = 'x'\n", `1: column 1: unknown key "nmae"`)
	check("name = 'x'\n[circuit]\nkind = 'load'\nrt = 3\n", `4: column 1: unknown key "circuit.rt"`)
	check("name = \n", "1: column")
	check("[circuit]\nrl = '10 V'\n", "circuit: rl")
	check("[circuit]\nrl = 0\n", "above 0")
	check("[circuit]\nkind = 'drain'\n", "must be one of load, diode, fixed")
	check("[[meter]]\nrole = 'gaet'\n", "meter 1: role")
	check("[[meter]]\nrole = 'gate'\n[[meter]]\nrole = 'gate'\n", "is meter 1 already")
	check("[[meter]]\nrole = 'gate'\ndue = '1.2.2026'\n", "want YYYY-MM-DD")
	check("[[meter]]\nrole = 'gate'\n[[meter.range]]\ntop = 6\ncounts = 2\n", "counts without a resolution")
	check("[[meter]]\nrole = 'gate'\n[[meter.range]]\ntop = 6\npercent = -1\n", "negative")
	check("[[meter]]\nrole = 'gate'\n[[meter.range]]\ntop = 6\n[[meter.range]]\ntop = 0.6\n", "must ascend")
	check("[[meter]]\nrole = 'gate'\n[[meter.range]]\ntop = nan\n", "is not a number")
}

// TestPlaces: every complaint says line and column of what it is about, or of
// the table that something is missing in.
func TestPlaces(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"[[meter]]\nrole = 'gate'\n\n[[meter]]\nrole = 'current'\n  [[meter.range]]\n  top = 1\n\tburden = '3 V'\n", `8: column 2: meter 2 (current): range 1: burden: `},
		{"[[meter]]\nrole = 'gate'\nµ = 1\n", "3: column 1: invalid character"},
		{"meter = [{role = 'gate', name = 'µµµ', every = 0}]\n", "1: column 40: meter 1 (gate): every: 0 s, must be above 0"},
		{"meter = [\n {role = 'gate'},\n {role = 'gate'},\n]\n", "3: column 3: meter 2 (gate): role: "},
		{"circuit.rl = '5 V'\n", "1: column 9: circuit: rl: "},
		{"[circuit]\nkind = 'load'\n  rl = -1\n", "3: column 3: circuit: rl: -1 ohm, must be above 0"},
		{"\n [[meter]]\nname = 'x'\n", `2: column 4: meter 1: role: "", must be one of gate, current`},
		{"[[meter]]\nrole = 'gate'\nspeaks = 'morse'\n", `3: column 1: meter 1 (gate): speaks: "morse" is no known format; known are `},
		{"[[meter]]\nrole = 'gate'\ncolumn = 'two'\n", "3: column 10: "},
		{"[[meter]]\nrole = 'gate'\ncolumn = 0\n", "3: column 1: meter 1 (gate): column: 0, columns are counted from 1"},
		{"[[meter]]\nrole = 'gate'\nunit = 'mA'\n", `3: column 1: meter 1 (gate): unit: "mA" is no unit of what a gate meter reads, want V`},
		{"[[meter]]\nrole = 'gate'\nseparator = ','\ndecimal = 'comma'\n", "3: column 1: meter 1 (gate): separator: "},
		{"[[meter]]\nrole = 'gate'\ncalibrated = 2026-02-01\ndue = 2026-01-01\n", "4: column 1: meter 1 (gate): due: 2026-01-01 is before"},
		{"[limits]\nvgs = -1\n", "2: column 1: limits: vgs: -1 V, must be above 0"},
		{"[limits]\ntemp = '100 V'\n", "2: column 1: limits: temp: "},
		{"[circuit]\nbleed = 0\n", "2: column 1: circuit: bleed: 0 ohm, must be above 0"},
		{"[[supply]]\ndrives = 'grid'\nline = 'x'\n", `2: column 1: supply 1: drives: "grid", must be one of gate, drain`},
		{"[[supply]]\ndrives = 'gate'\n", "1: column 3: supply 1 (gate): line: missing"},
		{"[[supply]]\ndrives = 'drain'\nline = 'x'\n", "1: column 3: supply 1 (drain): voltage: missing"},
		{"[[supply]]\ndrives = 'drain'\nline = 'x'\nvoltage = 0\n", "4: column 1: supply 1 (drain): voltage: 0 V"},
		{"[[supply]]\ndrives = 'gate'\nline = 'x'\nvoltage = 3\n", "4: column 1: supply 1 (gate): voltage: only for the drain"},
		{"[[supply]]\ndrives = 'gate'\nline = 'x'\n[supply.commands]\nfire = 'x'\n", "5: column 1: supply 1 (gate): commands: fire: no such command"},
		{"[[supply]]\ndrives = 'gate'\nline = 'x'\n[[supply]]\ndrives = 'drain'\nline = 'x'\nvoltage = 1\n", "4: column 3: supply 2 (drain): output: output 0 on this line is supply 1 already"},
		{"[[supply]]\ndrives = 'gate'\nline = 'x'\n[[supply]]\ndrives = 'gate'\nline = 'y'\n", "5: column 1: supply 2 (gate): drives: "},
		{"[[meter]]\nrole='gate'\nline='x'\n[[supply]]\ndrives = 'gate'\nline = 'x'\n", `6: column 1: supply 1 (gate): line: "x" is the line of meter 1`},
		{"[[meter]]\nrole='gate'\nline='x'\nsettings='2400 8N1'\n[[meter]]\nrole='load'\nline='x'\ncolumn=2\nsettings='9600 8N1'\n", `9: column 1: meter 2 (load): settings: "9600 8N1", but meter 1 on the same line has "2400 8N1"`},
		{"[[meter]]\nrole='gate'\nline='x'\nspeaks='text'\n[[meter]]\nrole='load'\nline='x'\n", `5: column 3: meter 2 (load): column: column 1 of this line is meter 1 already`},
		{"[[meter]]\nrole='gate'\nsettings='2400 9N1'\n", "3: column 1: meter 1 (gate): settings: "},
		{"[[supply]]\ndrives='gate'\nline='x'\nsettings='fast'\n", "4: column 1: supply 1 (gate): settings: "},
		{"[[meter]]\nrole='gate'\nspeaks='fs9721'\ncolumn=2\n", "4: column 1: meter 1 (gate): column: 2, but fs9721 says one value"},
		{"[[meter]]\nrole='gate'\nspeaks='fs9721'\nevery=2\n", "4: column 1: meter 1 (gate): every: without ask"},
	} {
		_, err := Parse([]byte(c.text))
		if err == nil || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%q: %v, want %s", c.text, err, c.want)
		}
	}
	// Of several complaints the one that comes first in the file.
	_, err := Parse([]byte("[[meter]]\nrole = 'gate'\ndue = 'x'\n[circuit]\nrl = 'y'\n"))
	require.ErrorContains(t, err, "3: column 1: meter 1 (gate): due")
	_, err = Parse([]byte("\xef\xbb\xbfname = 1\n"))
	require.ErrorContains(t, err, "1: column 8: ")
}

func TestLive(t *testing.T) {
	for text, want := range map[string]string{
		"name = 'x'\n":                                "1: column 1: no meter has a line",
		"[[meter]]\nrole = 'gate'\n":                  "no meter has a line",
		"[[meter]]\nrole = 'gate'\nline = 'x'\n":      "1: column 3: meter 1 (gate): speaks: missing",
		"[[meter]]\nrole = 'gate'\nspeaks = 'text'\n": "1: column 3: meter 1 (gate): line: missing",
	} {
		b, err := Parse([]byte(text))
		require.NoError(t, err)
		require.ErrorContains(t, b.Live(), want)
	}
}

func TestCautions(t *testing.T) {
	said := func(text string) string {
		t.Helper()
		b, err := Parse([]byte(text))
		require.NoError(t, err)
		return strings.Join(b.Cautions(), "\n")
	}
	const load = "[circuit]\nkind='load'\nrl=10\nvdd=12\n"
	for _, c := range []struct{ text, want string }{
		{load + "[[meter]]\nrole='load'\nname='h'\nisolated=false\n", `load meter "h" sits across the load resistor`},
		{load + "[[meter]]\nrole='load'\n", "not said to be isolated"},
		{load + "[[meter]]\nrole='load'\nisolated=true\n", ""},
		{load + "[[meter]]\nrole='current'\nisolated=false\n", "in the drain lead"},
		{load + "ammeter='source'\n[[meter]]\nrole='current'\nisolated=false\n", ""},
		{load + "ammeter='source'\n[[meter]]\nrole='drain'\nisolated=false\n", "burden of the ammeter"},
		{load + "ammeter='source'\n[[meter]]\nrole='gate'\nisolated=false\n", "burden of the ammeter"},
		{load + "ammeter='source'\ngate_return='ground'\n[[meter]]\nrole='gate'\nisolated=false\n", ""},
		{load + "[[meter]]\nrole='drain'\nisolated=false\n[[meter]]\nrole='gate'\nisolated=false\n", ""},
		{load + "rl_rating='5 W'\n", "14.4 W into the load resistor, which is rated 5 W"},
		{load + "rl_rating='50 W'\n", ""},
		{load + "[limits]\npd=3\n", "takes 3.6 W, above the bench's limit of 3 W"},
		{load + "[limits]\nvds=10\n", "12 V is above"},
		{load + "[[supply]]\ndrives='drain'\nline='x'\nvoltage=13\n", "gives 13 V when it is on, but"},
		{"[[supply]]\ndrives='gate'\nline='x'\nswapped=true\n", "swapped"},
		{"[[meter]]\nrole='gate'\nline='/dev/ttyUSB0'\n", "passing name"},
		{"[[meter]]\nrole='gate'\nline='/dev/serial/by-id/usb-ttyUSB0'\n", ""},
		{"[[supply]]\ndrives='gate'\nline='x'\nswapped=true\nisolated=true\n", ""},
	} {
		got := said(c.text)
		if c.want == "" && got != "" || !strings.Contains(got, c.want) {
			t.Errorf("%q: said %q, want %q", c.text, got, c.want)
		}
	}
	b, err := Parse([]byte("[limits]\nvgs=25\nid=1\n"))
	require.NoError(t, err)
	p := record.NewPart("P1")
	p.MaxVgs, p.MaxID = record.Known(20), record.Known(1)
	require.Equal(t, []string{"the bench's limit for V_GS of 25 V is above the 20 V that P1 stands"}, b.Against(p))
}

func TestReadFile(t *testing.T) {
	dir := t.TempDir()
	_, err := ReadFile(dir)
	require.ErrorIs(t, err, ErrBench)
	_, err = ReadFile(filepath.Join(dir, "absent.toml"))
	require.ErrorIs(t, err, os.ErrNotExist)
	p := filepath.Join(dir, "b.toml")
	require.NoError(t, os.WriteFile(p, []byte("x = 1\n"), 0o644))
	_, err = ReadFile(p)
	require.ErrorIs(t, err, ErrBench)
	require.Contains(t, err.Error(), "b.toml:1: column 1: unknown key")
}

func FuzzParse(f *testing.F) {
	f.Add([]byte(Example))
	f.Add([]byte("[[meter]]\nrole='gate'\n[[meter.range]]\ntop='6 V'\n"))
	f.Add([]byte("meter=[{role='gate',line='x',speaks='text'},{role='load',line='x',column=2}]\nsupply=[{drives='drain',line='y',voltage=1}]\n"))
	f.Add([]byte("[circuit]\nrl=0\n"))
	begins := regexp.MustCompile(`^[1-9]\d*: column [1-9]\d*: .`)
	f.Fuzz(func(t *testing.T, text []byte) {
		b, err := Parse(text)
		if err != nil {
			if !begins.MatchString(err.Error()) {
				t.Errorf("error without place or words: %v", err)
			}
			return
		}
		if len(b.Lines) != len(b.Meters) {
			t.Errorf("%d lines, %d meters", len(b.Lines), len(b.Meters))
		}
		b.Cautions()
		if err := b.Live(); err != nil && !begins.MatchString(err.Error()) {
			t.Errorf("error without place: %v", err)
		}
		for _, s := range b.Supplies {
			if s.Path == "" || s.Drives == "drain" && !s.Voltage.IsKnown() {
				t.Errorf("supply %+v taken", s)
			}
		}
		for _, m := range b.Meters {
			for i, r := range m.Ranges {
				if !(r.Top > 0) || r.Percent < 0 || (i > 0 && r.Top < m.Ranges[i-1].Top) {
					t.Errorf("range %+v taken", r)
				}
			}
		}
	})
}
