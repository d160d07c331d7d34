package screen

import (
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/jedib0t/go-pretty/v6/text"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

var update = flag.Bool("update", false, "write the golden files anew")

// sweep is a picture with everything in it. Its numbers are invented.
func sweep() Model {
	m := Model{
		Title: "sweep  lot bag1  device D7", Status: "7 of 25",
		Instruction: "turn the gate up to 3.15 V",
		Waiting:     6.4, Wait: 10,
		Values: []Value{
			{Role: "gate", Label: "handheld 1", Text: "3.104", Unit: "V", Age: 0.2},
			{Role: "current", Label: "handheld 2", Text: "52.31", Unit: "mA", Age: 0.3},
			{Role: "load", Label: "handheld 3", Text: "0.523", Unit: "V", Age: 2.4, Stale: true},
			{Role: "temperature", Label: "probe", Text: "31.2", Unit: "°C", Age: 0.6},
		},
		Power:   Power{Watts: 0.6, Limit: 5},
		Notices: []Notice{{Text: "the load meter has said nothing for 2.4 s; the point waits for it"}},
		Lines:   []string{"steps 50 mV from 2.5 V to 3.6 V", "space accepts, u takes back, q ends"},
	}
	const beta, vt = 1.9, 2.9
	for i := range 16 {
		x := 2.5 + 0.07*float64(i)
		mid := 1e-6 + beta/2*math.Pow(max(x-vt, 0), 2) + 1e-3*math.Exp(min(x-vt, 0)/0.05)
		m.Plot.Fan.X = append(m.Plot.Fan.X, x)
		m.Plot.Fan.Mid = append(m.Plot.Fan.Mid, mid)
		m.Plot.Fan.Low = append(m.Plot.Fan.Low, mid*0.6)
		m.Plot.Fan.High = append(m.Plot.Fan.High, mid*1.5)
	}
	for i := range 9 {
		x := 2.5 + 0.075*float64(i)
		m.Plot.Points = append(m.Plot.Points, XY{x, 1e-6 + beta/2*math.Pow(max(x-2.87, 0), 2) + 0.9e-3*math.Exp(min(x-2.87, 0)/0.05), i%3 == 1})
	}
	return m
}

func drawn(t testing.TB, m Model, w, h int, colour bool) string {
	t.Helper()
	var b strings.Builder
	require.NoError(t, Draw(&b, m, w, h, colour))
	return b.String() + "\n"
}

// The pictures as people see them. Run with -update after a change, and look.
func TestPictures(t *testing.T) {
	log := sweep()
	log.Plot.Log = true
	start := Model{
		Title: "meters  bench attic", Instruction: "press q to end",
		Values: []Value{{Role: "gate", Label: "handheld 1", Age: math.NaN(), Note: "line lost"}, {Role: "current", Text: Over, Unit: "A", Age: 0.1, Note: "over range"}},
	}
	stop := sweep()
	stop.Power.Watts, stop.Instruction = 5.2, "turn the gate down now"
	stop.Notices = []Notice{{Stop: true, Text: "5.2 W in the device, the limit is 5 W"}}
	for name, c := range map[string]struct {
		m    Model
		w, h int
	}{
		"linear80x24": {sweep(), 80, 24}, "linear120x40": {sweep(), 120, 40}, "linear60x24": {sweep(), 60, 24},
		"log80x24": {log, 80, 24}, "log120x40": {log, 120, 40}, "start80x24": {start, 80, 24}, "stop80x24": {stop, 80, 24}, "small40x8": {sweep(), 40, 8},
	} {
		t.Run(name, func(t *testing.T) {
			got := drawn(t, c.m, c.w, c.h, false)
			file := filepath.Join("testdata", name+".txt")
			if *update {
				require.NoError(t, os.WriteFile(file, []byte(got), 0o644))
			}
			want, err := os.ReadFile(file)
			require.NoError(t, err)
			require.Equal(t, string(want), got)
		})
	}
}

var codesOf = regexp.MustCompile("\x1b\\[[0-9;]*m")

// TestColourAddsNothing: without its codes the coloured picture is the plain one,
// so that nothing is said by colour alone.
func TestColourAddsNothing(t *testing.T) {
	with := drawn(t, sweep(), 100, 30, true)
	require.NotEqual(t, with, codesOf.ReplaceAllString(with, ""), "no colour at all")
	require.Equal(t, drawn(t, sweep(), 100, 30, false), codesOf.ReplaceAllString(with, ""))
	require.NotContains(t, drawn(t, sweep(), 100, 30, false), "\x1b")
}

// TestDigitsKeepTheirPlaces: neither the reading, nor a sign, nor a longer note
// moves the digits of this value or of the one beside it.
func TestDigitsKeepTheirPlaces(t *testing.T) {
	column := func(a, b string, note string) int {
		m := Model{Values: []Value{{Role: "gate", Text: a, Unit: "V", Note: note}, {Role: "current", Text: b, Unit: "mA"}}}
		lines := strings.Split(drawn(t, m, 80, 24, false), "\n")
		return utf8.RuneCountInString(lines[0][:strings.Index(lines[0], "CURRENT")])
	}
	want := column("3.104", "52.31", "")
	for _, c := range [][3]string{{"0.000", "52.31", ""}, {"-3.104", "52.31", ""}, {"9.999", "-12.34", "a rather long note about this"}} {
		require.Equal(t, want, column(c[0], c[1], c[2]), c)
	}
}

// TestFits: no picture is ever larger than the screen, whatever the names are,
// and no character in them moves the cursor.
func TestFits(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		word := rapid.OneOf(rapid.StringN(0, 30, -1), rapid.SampledFrom([]string{
			"", "\x1b[2J\x1b[Hgone", "a\nb\rc\td", "\u202eevil", "電圧計の名前です長い長い", "e\u0301e\u0301", "3.104", "-0.000", Over, "\xff\xfe", strings.Repeat("long ", 40),
		}))
		number := rapid.OneOf(rapid.Float64(), rapid.Float64Range(-10, 10), rapid.SampledFrom([]float64{0, math.NaN(), math.Inf(1), math.Inf(-1), 1e-300, math.MaxFloat64}))
		numbers := rapid.SliceOfN(number, 0, 6)
		m := Model{
			Title: word.Draw(t, "title"), Status: word.Draw(t, "status"), Instruction: word.Draw(t, "instruction"),
			Waiting: number.Draw(t, "waiting"), Wait: number.Draw(t, "wait"), Power: Power{number.Draw(t, "power"), number.Draw(t, "limit")},
			Lines: rapid.SliceOfN(word, 0, 5).Draw(t, "lines"),
			Plot:  Plot{Fan: Fan{numbers.Draw(t, "x"), numbers.Draw(t, "low"), numbers.Draw(t, "mid"), numbers.Draw(t, "high")}, Log: rapid.Bool().Draw(t, "log")},
		}
		for range rapid.IntRange(0, 6).Draw(t, "values") {
			m.Values = append(m.Values, Value{word.Draw(t, "role"), word.Draw(t, "label"), word.Draw(t, "text"), word.Draw(t, "unit"), number.Draw(t, "age"), rapid.Bool().Draw(t, "stale"), word.Draw(t, "note")})
		}
		for range rapid.IntRange(0, 3).Draw(t, "notices") {
			m.Notices = append(m.Notices, Notice{rapid.Bool().Draw(t, "stop"), word.Draw(t, "notice")})
		}
		for range rapid.IntRange(0, 8).Draw(t, "points") {
			m.Plot.Points = append(m.Plot.Points, XY{number.Draw(t, "px"), number.Draw(t, "py"), rapid.Bool().Draw(t, "open")})
		}
		width, height := rapid.IntRange(1, 140).Draw(t, "width"), rapid.IntRange(1, 50).Draw(t, "height")
		var b strings.Builder
		if err := Draw(&b, m, width, height, false); err != nil {
			t.Fatal(err)
		}
		lines := strings.Split(b.String(), "\n")
		if len(lines) > height {
			t.Fatalf("%d lines in %d", len(lines), height)
		}
		for _, l := range lines {
			// Measured by another hand than the one that drew. It counts some
			// characters of no width of their own as wide, so the drawing's own
			// measure judges where the text is not of one kind.
			if plainText(l) && text.StringWidthWithoutEscSequences(l) > width || textWidth(l) > width {
				t.Fatalf("%d columns in %d: %q", text.StringWidthWithoutEscSequences(l), width, l)
			}
			if strings.ContainsAny(l, "\x1b\r\t\u202e") || !utf8.ValidString(l) {
				t.Fatalf("not clean: %q", l)
			}
		}
		if l := Line(m); strings.ContainsAny(l, "\x1b\n\r\u202e") {
			t.Fatalf("not clean: %q", l)
		}
	})
}

// plainText tells whether a line holds nothing but ASCII, the drawing's own signs
// and East Asian text, on which all measures of width agree.
func plainText(l string) bool {
	for _, r := range l {
		if r > 0x7e && !(r >= 0x2800 && r <= 0x28ff) && !(r >= 0x3040 && r <= 0x9fff) && !strings.ContainsRune("█░│┤└─┴…", r) {
			return false
		}
	}
	return true
}

func TestFixed(t *testing.T) {
	for _, c := range []struct {
		x, digit   float64
		unit, want string
	}{
		{3.012, 1e-3, "V", "3.012 V"}, {0, 1e-3, "V", "0.000 V"}, {-0.0001, 1e-3, "V", "0.000 V"}, {0.0123, 1e-4, "V", "0.0123 V"}, {12.02, 1e-2, "V", "12.02 V"},
		{0.2503, 1e-4, "A", "250.3 mA"}, {0.0009, 1e-4, "A", "0.9 mA"}, {1.234, 1e-3, "A", "1.234 A"}, {4.7e-5, 1e-8, "A", "47.00 µA"}, {470e-6, 1e-6, "A", "0.470 mA"},
		{0.025, 1e-5, "A", "25.00 mA"}, {31.2, 0.1, "degC", "31.2 °C"}, {1.2, 1e-3, "W", "1.200 W"}, {math.NaN(), 1e-3, "V", "---- V"}, {3.1, 0, "V", "3.100 V"},
		{0.0523, 0, "A", "52.30 mA"}, {199.9e-3, 1e-4, "V", "0.1999 V"}, {5, 0.3e-3, "V", "5.0000 V"},
	} {
		text, unit := Fixed(c.x, c.digit, c.unit)
		if got := text + " " + unit; got != c.want {
			t.Errorf("Fixed(%g, %g, %s) is %s, want %s", c.x, c.digit, c.unit, got, c.want)
		}
	}
}

// terminal plays what is written to it on a page of its own: as much of a
// terminal as the codes here need.
type terminal struct {
	w, h, x, y int
	page       [][]rune
	second     bool
	cursor     bool
	erased     int // times the whole page was erased
	bad        []string
}

func newTerminal(w, h int) *terminal {
	t := &terminal{w: w, h: h, cursor: true}
	for range h {
		t.page = append(t.page, []rune(strings.Repeat(" ", w)))
	}
	return t
}

var code = regexp.MustCompile("^\x1b\\[(\\??[0-9;]*)([A-Za-z])")

func (t *terminal) Write(p []byte) (int, error) {
	blank := func(row, from int) { copy(t.page[row][from:], []rune(strings.Repeat(" ", t.w-from))) }
	for s := string(p); s != ""; {
		if m := code.FindStringSubmatch(s); m != nil {
			s = s[len(m[0]):]
			switch m[2] + m[1] {
			case "h?1049", "l?1049":
				t.second = m[2] == "h"
			case "h?25", "l?25":
				t.cursor = m[2] == "h"
			case "h?7", "l?7":
			case "H":
				t.x, t.y = 0, 0
			case "K": // with a full line the cursor stands on its last sign, which goes too
				blank(t.y, min(t.x, t.w-1))
			case "J":
				blank(t.y, min(t.x, t.w-1))
				for r := t.y + 1; r < t.h; r++ {
					blank(r, 0)
				}
			case "J2":
				t.erased++
				for r := range t.h {
					blank(r, 0)
				}
			default:
				if m[2] != "m" {
					t.bad = append(t.bad, m[0])
				}
			}
			continue
		}
		r, n := utf8.DecodeRuneInString(s)
		s = s[n:]
		switch r {
		case '\r':
			t.x = 0
		case '\n':
			if t.y++; t.y >= t.h {
				t.bad = append(t.bad, "scrolled")
				t.y--
			}
		default:
			if t.x >= t.w {
				t.bad = append(t.bad, fmt.Sprintf("%q beyond the edge", r))
				continue
			}
			t.page[t.y][t.x] = r
			t.x++
		}
	}
	return len(p), nil
}

func (t *terminal) text() string {
	var rows []string
	for _, r := range t.page {
		rows = append(rows, strings.TrimRight(string(r), " "))
	}
	return strings.TrimRight(strings.Join(rows, "\n"), "\n") + "\n"
}

// TestLive: every picture drawn over another leaves what a fresh page would show,
// without erasing the page, also after the window changed its size; in the end
// the terminal is as before.
func TestLive(t *testing.T) {
	term := newTerminal(80, 24)
	w, h := 80, 24
	l := NewLive(term, func() (int, int) { return w, h }, true)
	short := Model{Title: "short", Lines: []string{"one line"}}
	for i, m := range []Model{sweep(), short, sweep(), {}, sweep()} {
		require.NoError(t, l.Show(m))
		require.Equal(t, drawn(t, m, 80, 24, false), term.text(), i)
	}
	require.Equal(t, 1, term.erased, "erased at the start only")
	require.True(t, term.second)
	require.False(t, term.cursor)
	w, h = 60, 20
	require.NoError(t, l.Show(sweep()))
	require.Equal(t, drawn(t, sweep(), 60, 20, false), term.text())
	require.NoError(t, l.Close())
	require.NoError(t, l.Close())
	require.False(t, term.second)
	require.True(t, term.cursor)
	require.Empty(t, term.bad)
}

// TestPlainLines: where there is no terminal, one line for each change.
func TestPlainLines(t *testing.T) {
	var b strings.Builder
	l := NewLive(&b, nil, false)
	m := sweep()
	for i := range 5 {
		m.Values[0].Text, m.Values[0].Age = fmt.Sprintf("3.10%d", i), float64(i)/10
		require.NoError(t, l.Show(m))
	}
	m.Instruction, m.Notices = "take the device out", nil
	require.NoError(t, l.Show(m))
	require.NoError(t, l.Close())
	require.Equal(t, "turn the gate up to 3.15 V; caution: the load meter has said nothing for 2.4 s; the point waits for it; "+
		"gate 3.100 V; current 52.31 mA; load 0.523 V (stale, 2.4 s ago); temperature 31.2 °C\n"+
		"take the device out; gate 3.104 V; current 52.31 mA; load 0.523 V (stale, 2.4 s ago); temperature 31.2 °C\n", b.String())
}

func BenchmarkDraw(b *testing.B) {
	m := sweep()
	for b.Loop() {
		drawn(b, m, 120, 40, true)
	}
}
