package replay

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// TestWriteLogs writes testdata/logs anew when GATESILL_UPDATE is set: invented logs
// of the invented bench of this package, for the scripts of the command line.
func TestWriteLogs(t *testing.T) {
	if os.Getenv("GATESILL_UPDATE") == "" {
		t.Skip("writes testdata/logs")
	}
	dir := filepath.Join("..", "..", "testdata", "logs")
	put := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	r := rand.New(rand.NewPCG(1, 2))
	b := staircase(r, 2, 4.5)
	ms := b.meters()
	var notes strings.Builder
	wall := func(start time.Time, layout string) func(float64) string {
		return func(at float64) string { return start.Add(time.Duration(at * 1e9)).Format(layout) }
	}
	// The mixture: date and time with zone, Unix milliseconds, time of day with a
	// decimal comma, clocks 2.4 s and -1.7 s apart; the first sweep of two devices.
	start := time.Date(2026, 5, 20, 23, 58, 0, 0, time.FixedZone("", 7200)) // over midnight
	gate, current, load := ms["gate"], ms["current"], ms["load"]
	gate.form, gate.offset = wall(start, "2006-01-02T15:04:05.000-07:00"), 2.4
	current.form = func(at float64) string {
		return fmt.Sprint(start.Add(time.Duration(at * 1e9)).UnixMilli())
	}
	load.form, load.offset, load.dropped = wall(start, "15:04:05.000"), -1.7, true
	put("mixed_gate.csv", b.text(gate))
	put("mixed_current.csv", b.text(current))
	put("mixed_load.txt", strings.NewReplacer("time,reading,unit\n", "", ",V", " V", ".", ",", ",", " ").Replace(strings.ReplaceAll(b.text(load), ".", "\x00")))
	fix := func(name string) {
		p := filepath.Join(dir, name)
		raw, _ := os.ReadFile(p)
		put(name, strings.ReplaceAll(string(raw), "\x00", ","))
	}
	fix("mixed_load.txt")
	off := offTimes(b)
	first, _ := b.gateFor(1e-3, off-20)
	second, _ := b.gateFor(1e-3, off+20)
	t.Logf("true gate voltages at 1 mA, for the scripts: %.4f and %.4f V", first, second)
	notes.WriteString("# invented notes to the invented logs mixed_*\n")
	fmt.Fprintf(&notes, "%s device B in socket\n", wall(start, "15:04:05")(2))
	fmt.Fprintf(&notes, "%s removed\n", wall(start, "15:04:05")(off-2))
	fmt.Fprintf(&notes, "%s Bauteil 7 drin\n", wall(start, "15:04:05")(off+2))
	put("mixed_notes.txt", notes.String())

	// Daylight saving time ends in one log, the other is in UTC.
	dst := time.Date(2026, 10, 25, 0, 58, 0, 0, time.UTC)
	berlin := func(at float64) string { // the wall clock of +02:00 until 01:00 UTC, +01:00 after
		u := dst.Add(time.Duration(at * 1e9))
		zone := 2 * time.Hour
		if !u.Before(time.Date(2026, 10, 25, 1, 0, 0, 0, time.UTC)) {
			zone = time.Hour
		}
		return u.Add(zone).Format("2006-01-02 15:04:05.000")
	}
	gate.form, gate.offset = berlin, 0
	current.form = wall(dst, "2006-01-02T15:04:05.000Z")
	put("dst_gate.csv", b.text(gate))
	put("dst_current.csv", b.text(current))

	// And begins: the hour is missing on the wall.
	spring := time.Date(2026, 3, 29, 0, 58, 0, 0, time.UTC)
	gate.form = func(at float64) string {
		u := spring.Add(time.Duration(at * 1e9))
		zone := time.Hour
		if !u.Before(time.Date(2026, 3, 29, 1, 0, 0, 0, time.UTC)) {
			zone = 2 * time.Hour
		}
		return u.Add(zone).Format("2006-01-02 15:04:05.000")
	}
	current.form = wall(spring, "2006-01-02T15:04:05.000Z")
	put("spring_gate.csv", b.text(gate))
	put("spring_current.csv", b.text(current))

	// A logger that writes the milliseconds as a bare number, over the year's end.
	year := time.Date(2026, 12, 31, 23, 58, 0, 0, time.UTC)
	bare := func(at float64) string {
		u := year.Add(time.Duration(at * 1e9))
		return fmt.Sprintf("%s.%d", u.Format("2006-01-02 15:04:05"), u.Nanosecond()/1e6)
	}
	gate.form, current.form = bare, bare
	put("bare_gate.csv", b.text(gate))
	put("bare_current.csv", b.text(current))

	// Elapsed seconds on the one side, a clock on the other.
	gate.form = func(at float64) string { return fmt.Sprintf("%.2f", at) }
	gate.offset = 400
	current.form = wall(start, "15:04:05.00")
	put("elapsed_gate.csv", b.text(gate))
	put("clock_current.csv", b.text(current))
}

// offTimes is when the second device goes in.
func offTimes(b *bench) float64 {
	half := b.end() / 2
	for i, k := range b.knots {
		if k[0] > half-30 && k[1] == 0 && i+1 < len(b.knots) && b.knots[i+1][1] == 0 {
			return (k[0] + b.knots[i+1][0]) / 2
		}
	}
	return math.NaN()
}
