package replay

import (
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gatesill/acquire/table"
)

// The drain voltage falls in a line with the current; and without an ammeter it
// stands for the current itself. A p-channel part turns on downwards.
func TestClocksOfTheDrainMeter(t *testing.T) {
	for _, c := range []struct {
		name     string
		without  string
		pChannel bool
	}{{"with current", "load", false}, {"drain alone", "current", false}, {"p-channel", "load", true}} {
		r := rand.New(rand.NewPCG(9, 9))
		b := oneDevice(r, motions[0].make(r))
		ms := b.meters()
		ms["drain"] = simLog{cycle: 0.35, digit: 1e-3, read: func(at float64) float64 { return simVDD - simRL*b.current(at) }, form: isoUTC, unit: "V"}
		delete(ms, c.without)
		if c.without == "current" {
			delete(ms, "load")
		}
		for _, role := range Roles {
			m, ok := ms[role]
			if !ok {
				continue
			}
			m.offset = 40*r.Float64() - 20
			if read := m.read; c.pChannel {
				m.read = func(at float64) float64 { return -read(at) }
			}
			ms[role] = m
		}
		opt := Options{Table: table.Options{PChannel: c.pChannel}}
		s, err := Join(b.logs(t, ms, opt), nil, nil, opt)
		if err != nil {
			t.Fatal(err)
		}
		for _, l := range s.Logs {
			k := l.Found.Clock
			if k == nil {
				continue
			}
			e := k.Offset - (ms[k.Against].offset - ms[l.Role].offset)
			t.Logf("%s: %s off by %.1f ms, bound %.1f ms, %s", c.name, l.Role, e*1e3, k.Bound*1e3, k.Why)
			if k.Assumed || math.Abs(e) > k.Bound || math.Abs(e) > 0.05 {
				t.Errorf("%s: %s: %+v, off by %.3f s", c.name, l.Role, k, e)
			}
		}
	}
}

// Logs of gate and load that are given for one another are seen by their readings.
func TestExchangedLogs(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	b := oneDevice(r, motions[0].make(r))
	ms := b.meters()
	ms["gate"], ms["load"] = ms["load"], ms["gate"]
	_, err := Join(b.logs(t, ms, Options{}), nil, nil, Options{})
	var e *table.Error
	if !errors.As(err, &e) || !strings.Contains(err.Error(), "exchanged") || e.Hint != "--meter-logs gate=load.csv,load=gate.csv" {
		t.Errorf("%v", err)
	}
}

func join(t *testing.T, opt Options, gate, current, notes string) (*Session, error) {
	t.Helper()
	g, err := readText(t, "gate", gate, opt)
	if err != nil {
		t.Fatal(err)
	}
	c, err := readText(t, "current", current, opt)
	if err != nil {
		t.Fatal(err)
	}
	var nl *Log
	var ns []Note
	if notes != "" {
		x, err := table.TextOf("notes.txt", []byte(notes), table.Options{})
		if err != nil {
			t.Fatal(err)
		}
		if nl, ns, err = readNotes(x, "notes.txt", opt); err != nil {
			t.Fatal(err)
		}
	}
	return Join([]*Log{g, c}, nl, ns, opt)
}

// What the times leave open: which day, which zone.
func TestDaysAndZones(t *testing.T) {
	const zoned, utc, local = "2026-05-20T23:59:59+02:00 3.0 V\n2026-05-21T00:00:01+02:00 3.0 V\n", "2026-05-20T21:59:59Z 1 mA\n2026-05-20T22:00:01Z 1 mA\n", "2026-05-20 23:59:59 1 mA\n2026-05-21 00:00:01 1 mA\n"
	const wall, wallV, late = "23:59:59 1 mA\n00:00:01 1 mA\n", "23:59:59 3 V\n00:00:01 3 V\n", "00:00:00 1 mA\n00:00:02 1 mA\n"
	for _, c := range []struct {
		name, gate, current string
		opt                 Options
		start               string
		apart               float64 // s, from the first of the gate to that of the current
		refused             string  // in error or hint
	}{
		{name: "zone and UTC", gate: zoned, current: utc, start: "2026-05-20T21:59:59.000Z"},
		{name: "zone and none", gate: zoned, current: local, start: "2026-05-20T21:59:59.000Z"},
		{name: "zone and the time of day", gate: zoned, current: wall, start: "2026-05-20T21:59:59.000Z"},
		{name: "zone and the next day", gate: zoned, current: late, start: "2026-05-20T21:59:59.000Z", apart: 1},
		{name: "time of day only", gate: wallV, current: wall, start: ""},
		{name: "time of day, one behind midnight", gate: wallV, current: late, start: "", apart: 1},
		{name: "time of day with a date", gate: wallV, current: late, opt: Options{Date: "2026-12-31"}, start: "2026-12-31", apart: 1},
		{name: "time of day with date and zone", gate: wallV, current: late, opt: Options{Date: "2026-12-31", Zone: "+02:00"}, start: "2026-12-31T21:59:59.000Z", apart: 1},
		{name: "UTC and the time of day", gate: wallV, current: utc, refused: "--log-zone"},
		{name: "UTC and the time of day, zone given", gate: wallV, current: utc, opt: Options{Zone: "+02:00"}, start: "2026-05-20T21:59:59.000Z"},
		{name: "UTC and the time of day, zone answered", gate: wallV, current: utc, opt: Options{Table: table.Options{Ask: func(table.Question) (string, error) { return "+02:00", nil }}}, start: "2026-05-20T21:59:59.000Z"},
		{name: "the wrong zone", gate: zoned, current: local, opt: Options{Zone: "+01:00"}, refused: "do not overlap"},
		{name: "another date", gate: zoned, current: wall, opt: Options{Date: "2026-05-25"}, refused: "--log-date 2026-05-25 is another day"},
		{name: "no origin", gate: "t (s),V\n0.0,3\n1.0,3\n", current: wall, refused: "--log-times gate="},
		{name: "a start", gate: "t (s),V\n0.0,3\n2.0,3\n", current: wall, opt: Options{Times: map[string]string{"gate": "2026-05-20 23:59:58"}}, start: "2026-05-20", apart: 1},
	} {
		t.Run(c.name, func(t *testing.T) {
			if c.current == late { // near zero it must be said
				c.opt.Times = map[string]string{"current": "clock"}
			}
			s, err := join(t, c.opt, c.gate, c.current, "")
			if c.refused != "" {
				var e *table.Error
				if !errors.As(err, &e) || !strings.Contains(err.Error()+e.Hint, c.refused) {
					t.Errorf("%v, %+v", err, e)
				}
				return
			}
			if err != nil {
				t.Fatal(err)
			}
			if d := s.Logs[1].from() - s.Logs[0].from(); s.Started != c.start || math.Abs(d-c.apart) > 1e-6 {
				t.Errorf("start %q, %g s apart; want %q, %g", s.Started, d, c.start, c.apart)
			}
		})
	}
}

func TestNotesCutTheSession(t *testing.T) {
	gate, current := "t (s),V\n", "t (s),mA\n"
	for i := range 60 {
		at := string(rune('0'+i/10)) + string(rune('0'+i%10))
		gate += at + ".0,3.000\n"
		current += at + ".5,1.00\n"
	}
	opt := Options{Times: map[string]string{"gate": "current", "notes": "gate"}}
	s, err := join(t, opt, gate, current, "5 hello\n10 device A in\n20 removed\n30 Bauteil 7 drin\n40 swap to D8\n")
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Cut(Socket{}); err != nil {
		t.Fatal(err)
	}
	want := []Stretch{{"A", 10, 20, 2}, {"7", 30, 40, 4}, {"D8", 40, 59.5, 5}}
	if len(s.Stretches) != 3 || s.Stretches[0] != want[0] || s.Stretches[1] != want[1] || s.Stretches[2] != want[2] {
		t.Errorf("%+v", s.Stretches)
	}
	if len(s.Warnings) == 0 || !strings.Contains(strings.Join(s.Warnings, "\n"), "the drain current flows at that moment") {
		t.Errorf("%q", s.Warnings)
	}
	if err := s.Cut(Socket{Device: "X"}); err == nil {
		t.Error("a name for all beside names in the notes")
	}
	if _, err := join(t, Options{Times: map[string]string{"gate": "current"}}, gate, current, "5 device A in\n"); err == nil || !strings.Contains(err.Error(), "no origin in common") {
		t.Errorf("notes of an unknown clock: %v", err)
	}
}
