package report_test

import (
	"bytes"
	"flag"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
	"gatesill/store/record"
)

var update = flag.Bool("update", false, "write the golden files anew")

type layout func(w io.Writer, s report.Sheet, style report.Style) error

func history(w io.Writer, s report.Sheet, style report.Style) error {
	changes := []record.Change{
		{At: "2026-05-04T10:00:00.000Z", What: "device", Field: "created"},
		{At: "2026-05-05T09:00:00.000Z", Who: "R. Example", What: "device", Field: "note", Old: "", New: "from the second tube", Reason: "found the list"},
	}
	return report.DeviceHistory(w, report.DeviceFile{Lot: s.Lot, Device: s.Devices[3], Changes: changes}, s, style)
}

func card(w io.Writer, s report.Sheet, style report.Style) error {
	if err := report.LotsTable(w, []report.LotRow{{Lot: s.Lot, Part: s.Part}}, style); err != nil {
		return err
	}
	return report.LotCard(w, report.LotRow{Lot: s.Lot, Part: s.Part}, style)
}

func files(w io.Writer, s report.Sheet, style report.Style) error {
	return report.ImportTable(w, report.ImportDoc{Lot: s.Lot.Name, Files: []report.ImportFile{
		{File: "a.csv", Fate: report.FateStored, Layout: "long", Devices: 6, Sweeps: 6, Points: 180},
		{File: s.Devices[0].Name + ".csv", Fate: report.FateRefused, Reason: "line 3: 1,234 may be 1.234 or 1234"},
		{File: "b.csv", Fate: report.FateSeen, Layout: "long", Reason: "the same readings came with a.csv"},
	}}, style)
}

var layouts = map[string]layout{
	"fit": report.FitTable, "spread": report.SpreadTable, "sort": report.SortTable, "history": history, "lots": card, "import": files, "bias": biasOf, "biasline": biasLine,
}

func show(t *testing.T, l layout, s report.Sheet, style report.Style) string {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, l(&b, s, style))
	return b.String()
}

// The layouts as people see them at 80 columns. Run with -update after a change
// that is meant, and look at the difference.
func TestLayoutsAtEightyColumns(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	s.Codes = []fit.CodeInfo{{Code: fit.CodeHeatingNotChecked, Meaning: "Nothing shows whether the device warmed up.", Next: "Sweep down as well and compare."}}
	for name, l := range layouts {
		got := show(t, l, s, report.Style{Width: 80})
		path := filepath.Join("testdata", name+"80.txt")
		if *update {
			require.NoError(t, os.MkdirAll("testdata", 0o755))
			require.NoError(t, os.WriteFile(path, []byte(got), 0o644))
		}
		want, err := os.ReadFile(path)
		require.NoError(t, err)
		require.Equal(t, string(want), got, name)
	}
}

func TestFirstLineSaysWhatIsSortedBy(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for _, l := range []layout{report.FitTable, report.SpreadTable, report.SortTable} {
		require.Equal(t, "Sorted by V_GS at the idle current of 250 mA.", strings.SplitN(show(t, l, s, report.Style{}), "\n", 2)[0])
	}
	spots := invented.Lot(invented.Options{Devices: 12, Points: 1, Spots: true})
	require.True(t, strings.HasPrefix(show(t, report.FitTable, spots, report.Style{}), "Sorted by V_GS(th) at 10 mA (current of the spot list).\n"))
}

func TestWidth(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	s.Devices[2].Name = strings.Repeat("longname ", 8) + "end"
	for name, l := range layouts {
		for _, width := range []int{60, 80, 120} {
			for _, line := range strings.Split(show(t, l, s, report.Style{Width: width}), "\n") {
				if n := utf8.RuneCountInString(line); n > width+20 || n > width && strings.Contains(line, "±") {
					t.Errorf("%s: %d columns in a line on a terminal of %d: %q", name, n, width, line)
				}
			}
		}
		wide := show(t, l, s, report.Style{})
		require.NotContains(t, wide, "No room for", name)
	}
	require.Contains(t, show(t, report.FitTable, s, report.Style{Width: 60}), "No room for: ")
}

func TestColourOnlyWhenAsked(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for name, l := range layouts {
		plain := show(t, l, s, report.Style{Width: 100})
		require.NotContains(t, plain, "\x1b", name)
		colour := show(t, l, s, report.Style{Width: 100, Color: true})
		// Colour adds nothing that the words do not say.
		stripped := colour
		for _, code := range []string{"\x1b[0m", "\x1b[1m", "\x1b[2m", "\x1b[31m", "\x1b[33m"} {
			stripped = strings.ReplaceAll(stripped, code, "")
		}
		require.Equal(t, plain, stripped, name)
	}
}

func TestHostileNamesOnTheTerminal(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	bad := "\x1b]0;owned\x07\u202ex\r\n\x9b31m"
	s.Lot.Name, s.Part.Name, s.Lot.Supplier, s.Lot.Note = bad, bad, bad, bad
	for i := range s.Devices {
		s.Devices[i].Name += bad
		s.Devices[i].Device.Why = bad
		s.Devices[i].Result.Why = bad
		s.Devices[i].Sweeps[0].SourceName = bad
		s.Devices[i].Result.Warnings = []fit.Warning{{Code: bad, Text: bad}}
	}
	for i := range s.Spread.Devices {
		s.Spread.Devices[i] = lot.Verdict{Name: s.Devices[i].Name, Flagged: true, Reasons: []lot.Reason{{Code: bad, Text: bad}}}
	}
	s.Sorting.Unsorted = append(s.Sorting.Unsorted, lot.Unsorted{Name: bad, Why: bad})
	s.Sorting.Warnings = []fit.Warning{{Code: bad, Text: bad}}
	s.Spread.Split = &lot.Split{Text: bad, Low: []string{bad}, High: []string{bad}}
	for name, l := range layouts {
		for _, width := range []int{0, 80} {
			text := show(t, l, s, report.Style{Width: width})
			for _, c := range []string{"\x1b", "\x07", "\u202e", "\r", "\u009b", "\x9b"} {
				require.NotContains(t, strings.ReplaceAll(text, "›", ""), c, "%s at %d", name, width)
			}
			require.Contains(t, text, `\x1b]0;owned`, name)
			require.True(t, utf8.ValidString(text), name)
		}
	}
}

// A number that could not be had is n/a, or above, and state and reason stand
// below, whether or not other devices of the lot have a value.
func TestWhatCouldNotBeHadHasItsReason(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	text, spread := show(t, report.FitTable, s, report.Style{}), show(t, report.SpreadTable, s, report.Style{})
	for _, d := range s.Devices {
		if d.State() == fit.Measured {
			continue
		}
		who := d.Name + " (" + report.WordsOf(d.State()).Word + "): "
		if d.State() == fit.Excluded {
			who = d.Name + ": "
		}
		require.Contains(t, text, "  "+who+report.Sentence(d.Reason()), "no reason for %s", d.State())
		require.Contains(t, spread, "  "+who+report.Sentence(d.Reason()), "no reason for %s beside the spread", d.State())
		if d.State() == fit.Above {
			require.Regexp(t, `(?m)^`+d.Name+` +above +above`, text)
		}
	}
	require.NotContains(t, text, "NaN")
	require.NotContains(t, text, "Inf")
}

// Why a file was refused has been told as an error; why one was not read again
// is told here.
func TestImportTellsReasonsOnce(t *testing.T) {
	text := show(t, files, invented.Lot(invented.Options{Devices: 1, Points: 3}), report.Style{})
	require.Contains(t, text, "D1.csv  refused")
	require.NotContains(t, text, "may be 1.234")
	require.Contains(t, text, "\n  b.csv: the same readings came with a.csv\n")
}

// The current at the off voltage is not called I_DSS, which of a depletion part
// is the current at V_GS = 0 (common data-sheet usage); programs keep their key.
func TestDrainLeakageHasItsWords(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	for name, l := range layouts {
		require.NotContains(t, show(t, l, s, report.Style{}), "I_DSS", name)
	}
	require.Contains(t, show(t, report.FitTable, s, report.Style{}), "\n"+report.LeakageNote+"\n")
	narrow := show(t, report.FitTable, s, report.Style{Width: 80})
	require.Contains(t, narrow, "drain leakage I_D(off)")
	require.NotContains(t, narrow, report.LeakageNote, "a note on a column that is not there")
	require.Contains(t, show(t, report.SpreadTable, s, report.Style{}), "\ndrain leakage I_D(off) ")
	require.Contains(t, show(t, history, s, report.Style{}), "\ndrain leakage I_D(off) 2.07 µA (n = 3), ± ")
	var b bytes.Buffer
	require.NoError(t, report.FitJSON(&b, s))
	require.Contains(t, b.String(), `"idss_A"`)
}

// Beside the uncertainty within the session stands the absolute one, where it is
// known.
func TestBothUncertainties(t *testing.T) {
	nan := math.NaN()
	for want, q := range map[string]fit.Quantity{
		"2.78013 V (n = 4), ± 0.50 mV in the session, ± 9.0 mV absolute": {Value: 2.780134, U: 0.0005, UAbsolute: 0.009, N: 4},
		"2.78013 ± 0.00050 V (n = 4)":                                    {Value: 2.780134, U: 0.0005, UAbsolute: nan, N: 4},
		"2.7801 V, ± 9.0 mV absolute":                                    {Value: 2.780134, U: nan, UAbsolute: 0.009},
		"-3.1200 V (n = 1), ± 2.9 mV in the session, ± 14 mV absolute":   {Value: -3.12, U: 0.0029, UAbsolute: 0.014, N: 1},
		"n/a": fit.None(),
	} {
		require.Equal(t, want, report.FormatWithAbsolute(q, "V"))
	}
	s := invented.Lot(invented.Options{Devices: 20, Points: 30, Seed: 1})
	require.Contains(t, show(t, history, s, report.Style{}), "V_GS(th)               2.85784 V (n = 4), ± 0.69 mV in the session, ± 8.8 mV absolute\n")
}

func TestPChannelKeepsItsSigns(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 30, Seed: 1, PChannel: true})
	require.Regexp(t, `(?m)^D01 +measured +-3\.\d+ ± 0\.0`, show(t, report.FitTable, s, report.Style{}))
}

func TestEmptySheets(t *testing.T) {
	for name, l := range map[string]layout{"fit": report.FitTable, "spread": report.SpreadTable} {
		text := show(t, l, report.Sheet{SortedBy: fit.KeyVgsth}, report.Style{Width: 80})
		require.Regexp(t, `(?m)no devices|No device`, text, name)
	}
	require.ErrorIs(t, report.SortTable(io.Discard, report.Sheet{}, report.Style{}), report.ErrNotSorted)
	require.ErrorIs(t, report.SortJSON(io.Discard, report.Sheet{}), report.ErrNotSorted)
	require.Contains(t, show(t, func(w io.Writer, _ report.Sheet, st report.Style) error { return report.LotsTable(w, nil, st) }, report.Sheet{}, report.Style{}), "No lots yet.")
}

func TestEveryStateHasItsWords(t *testing.T) {
	seen := map[string]bool{}
	for _, state := range []fit.State{fit.Measured, fit.Above, fit.Open, fit.Shorted, fit.WrongWayRound, fit.Declined, fit.Excluded, ""} {
		w := report.WordsOf(state)
		require.NotEmpty(t, w.Word)
		require.NotEmpty(t, w.Sentence)
		require.False(t, seen[w.Word], "%q twice", w.Word)
		seen[w.Word] = true
		if state != fit.Measured && state != fit.Excluded {
			require.NotEmpty(t, w.Next, "nothing to do about %q", state)
		}
	}
}

func TestSentence(t *testing.T) {
	for in, want := range map[string]string{
		"gate bias is 2.98 V, 403 mV below": "Gate bias is 2.98 V, 403 mV below.", "g_m is low": "g_m is low.", "It leaks.": "It leaks.",
		"V_T is off": "V_T is off.", "": "", "why not?": "Why not?", "3 of 4": "3 of 4.",
	} {
		require.Equal(t, want, report.Sentence(in))
	}
}

func TestEveryKeyHasItsName(t *testing.T) {
	for _, k := range fit.Keys {
		info := report.KeyOf(k)
		require.NotEmpty(t, info.Name)
		require.NotEmpty(t, info.Unit)
		require.True(t, strings.HasSuffix(string(k), "_"+info.Suffix), "%s does not end in %s", k, info.Suffix)
	}
}
