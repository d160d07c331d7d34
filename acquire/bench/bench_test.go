package bench

import (
	"errors"
	"os"
	"path/filepath"
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
	require.Len(t, b.Meters, 2)
	g := b.Meters[0]
	require.Equal(t, "2027-03-02", g.Due)
	require.Equal(t, []record.RangeAccuracy{{Top: 6, Percent: 0.5, Counts: 2, Resolution: 1e-3, Noise: record.Known(0.3e-3)}}, g.Ranges)
	require.Equal(t, "limit", b.Meters[1].Coverage)
	require.Equal(t, 0.6, b.Meters[1].Ranges[0].Top)
	require.Equal(t, record.Known(1), b.Meters[1].Ranges[0].Burden)
	require.Equal(t, "2400 8N1", b.Lines[0].Settings)
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
	check("nmae = 'x'\n", `1: unknown key "nmae"`)
	check("name = 'x'\n[circuit]\nkind = 'load'\nrt = 3\n", `4: unknown key "circuit.rt"`)
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
	require.Contains(t, err.Error(), "b.toml:1: unknown key")
}

func FuzzParse(f *testing.F) {
	f.Add([]byte(Example))
	f.Add([]byte("[[meter]]\nrole='gate'\n[[meter.range]]\ntop='6 V'\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		b, err := Parse(text)
		if err != nil {
			if strings.TrimSpace(err.Error()) == "" || errors.Is(err, os.ErrNotExist) {
				t.Errorf("error without words: %v", err)
			}
			return
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
