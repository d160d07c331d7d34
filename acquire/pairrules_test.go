package acquire

import (
	"cmp"
	"fmt"
	"math"
	"reflect"
	"slices"
	"testing"

	"gatesill/store/record"
)

// said makes the reading of a meter: digits as displayed, in counts of digit.
func saidOf(role string, at, value, digit float64) record.Reading {
	return record.Reading{Role: role, Meter: role + " meter", At: at, Value: record.Known(rounded(value, digit)), Digit: record.Known(digit),
		Raw: fmt.Appendf(nil, "%s %.12g", role, value)}
}

func overOf(role string, at float64) record.Reading {
	return record.Reading{Role: role, Meter: role + " meter", At: at, State: record.Overload, Raw: []byte(role + " OL")}
}

// standing is two meters that say the same all the time, gate every 0.3 s and current
// every 0.4 s, from one time to another.
func standing(from, to, vg, id float64) []record.Reading {
	var rs []record.Reading
	for k := range int((to - from) / 0.3) {
		rs = append(rs, saidOf(Gate, from+0.3*float64(k), vg, 1e-3))
	}
	for k := range int((to - from) / 0.4) {
		rs = append(rs, saidOf(Current, from+0.05+0.4*float64(k), id, 1e-5))
	}
	return byTime(rs)
}

func byTime(rs []record.Reading) []record.Reading {
	slices.SortStableFunc(rs, func(a, b record.Reading) int { return cmp.Compare(a.At, b.At) })
	return rs
}

// change edits the readings of one role; what change returns false for is lost.
func change(rs []record.Reading, role string, f func(k int, r *record.Reading) bool) []record.Reading {
	var out []record.Reading
	k := 0
	for _, r := range rs {
		if r.Role == role {
			if !f(k, &r) {
				k++
				continue
			}
			k++
		}
		out = append(out, r)
	}
	return out
}

func exact() Pairing {
	t := Timing{Integration: 0.1, Processing: 0.05, LagU: 0.03}
	return Pairing{Timing: map[string]Timing{Gate: t, Current: t}, Free: true}
}

// settledOf are the gate voltages of the settled points.
func settledOf(points []Point) []float64 {
	var vg []float64
	for _, p := range points {
		if p.Settled {
			vg = append(vg, p.Vg)
		}
	}
	return vg
}

func wantSettled(t *testing.T, what string, points []Point, want ...float64) {
	t.Helper()
	if got := settledOf(points); !slices.Equal(got, want) {
		t.Errorf("%s: settled at %v, want %v", what, got, want)
	}
}

// One point a plateau, however long; the next when the gate has moved three bands.
func TestOnePointAPlateau(t *testing.T) {
	points, _ := Pair(standing(0, 20, 3.012, 0.02), exact())
	wantSettled(t, "20 s", points, 3.012)
	if p := points[0]; p.Id != 0.02 || p.N < leastCount || !(p.Bound > 0 && p.Bound < 1e-3) || p.Digits[record.VG] != 1e-3 || p.Digits[record.ID] != 1e-5 {
		t.Errorf("%+v", p)
	}
	for _, x := range []struct {
		next float64
		want []float64
	}{{3.019, []float64{3.012}}, {3.020, []float64{3.012, 3.02}}} {
		points, _ := Pair(append(standing(0, 6, 3.012, 0.02), standing(6, 12, x.next, 0.02)...), exact())
		wantSettled(t, fmt.Sprint(x.next), points, x.want...)
	}
	// A driven step is smaller than three bands.
	p := exact()
	p.Step = 5e-3
	points, _ = Pair(append(standing(0, 6, 3.012, 0.02), standing(6, 12, 3.017, 0.02)...), p)
	wantSettled(t, "steps of 5 mV", points, 3.012, 3.017)
	// Three conversions of each and 1.6 s, not before.
	for _, x := range []struct{ end, n float64 }{{1.7, 0}, {3, 1}} {
		points, _ := Pair(standing(0, x.end, 3.012, 0.02), exact())
		if len(settledOf(points)) != int(x.n) {
			t.Errorf("%g s: %d points, want %g", x.end, len(points), x.n)
		}
	}
}

// What spoils a window spoils it: the gate moves by more than its band, runs with a
// slope, or the current drifts between the halves. At small readings counts are not
// a drift.
func TestStandingStill(t *testing.T) {
	count := func(what string, rs []record.Reading, p Pairing, want int) {
		t.Helper()
		points, _ := Pair(rs, p)
		if got := len(settledOf(points)); got != want {
			t.Errorf("%s: %d settled points, want %d", what, got, want)
		}
	}
	base := func() []record.Reading { return standing(0, 6, 3, 20e-3) }
	gate := func(f func(at float64) float64) []record.Reading {
		return change(base(), Gate, func(_ int, r *record.Reading) bool { *r = saidOf(Gate, r.At, f(r.At), 1e-3); return true })
	}
	id := func(digit float64, f func(at float64) float64) []record.Reading {
		return change(base(), Current, func(_ int, r *record.Reading) bool { *r = saidOf(Current, r.At, f(r.At), digit); return true })
	}
	back := func(at float64) float64 { return 3 + 1e-3*math.Mod(math.Round(at/0.3), 4) } // 0 1 2 3 0 1 2 3 mV
	count("flicker of 3 counts", gate(back), exact(), 0)
	count("flicker of 2 counts", gate(func(at float64) float64 { return 3 + 1e-3*math.Mod(math.Round(at/0.3), 3) }), exact(), 1)
	count("3 mV/s", gate(func(at float64) float64 { return 3 + 3e-3*at }), exact(), 0)
	tight := exact()
	tight.SlopeMax = 0.1e-3 // the counts of the display take over
	count("0.5 mV/s with a display of 1 mV", gate(func(at float64) float64 { return 3 + 0.5e-3*at }), tight, 1)
	count("current 1 %/s", id(1e-5, func(at float64) float64 { return 20e-3 * (1 + 0.01*at) }), exact(), 1)
	count("current 4 %/s", id(1e-5, func(at float64) float64 { return 20e-3 * (1 + 0.04*at) }), exact(), 0)
	flicker := func(at float64) float64 { return 20e-6 + 1e-6*math.Mod(math.Round(at/0.4), 2) }
	count("20 uA, a display of 1 uA", id(1e-6, flicker), exact(), 1)
	count("20 uA, steps of 3 uA", id(1e-6, func(at float64) float64 { return 20e-6 + 3e-6*math.Floor(at/0.8) }), exact(), 0)
}

// Readings that cannot stand for their quantity, the same frame again, a single wild
// one: left out, counted, and a plateau is not a plateau across the hole.
func TestLeftOut(t *testing.T) {
	base := standing(0, 3.3, 3.012, 0.02)
	middle := 5 // of the gate's eleven
	for _, x := range []struct {
		name    string
		change  func(r *record.Reading) bool
		count   func(r Report) int
		settled int
	}{
		{"nothing", func(*record.Reading) bool { return true }, func(r Report) int { return r.Gaps + r.Refused + r.Jumps + r.States + r.RangeChanges + 1 }, 1},
		{"lost", func(*record.Reading) bool { return false }, func(r Report) int { return r.Gaps }, 0},
		{"held", func(r *record.Reading) bool { r.Refused = "held"; return true }, func(r Report) int { return r.Refused }, 0},
		{"wild", func(r *record.Reading) bool { r.Value = record.Known(0.3012); return true }, func(r Report) int { return r.Jumps }, 0},
		{"overload", func(r *record.Reading) bool { *r = overOf(Gate, r.At); return true }, func(r Report) int { return r.States }, 0},
		{"earlier than the last", func(r *record.Reading) bool { r.At = 0.7; return true }, func(r Report) int { return r.Refused }, 0},
		{"no time", func(r *record.Reading) bool { r.At = math.NaN(); return true }, func(r Report) int { return r.Refused }, 0},
	} {
		rs := change(base, Gate, func(k int, r *record.Reading) bool { return k != middle || x.change(r) })
		points, report := Pair(rs, exact())
		if got := len(settledOf(points)); got != x.settled || x.count(report) != 1 {
			t.Errorf("%s: %d settled points, want %d; %+v", x.name, got, x.settled, report)
		}
		for _, p := range points {
			if math.Abs(p.Vg-3.012) > 1e-9 {
				t.Errorf("%s: a point at %g", x.name, p.Vg)
			}
		}
	}
	// A jump that stays is a step.
	rs := append(standing(0, 6, 1, 1e-5), standing(6, 12, 3, 0.02)...)
	points, report := Pair(rs, exact())
	wantSettled(t, "step", points, 1, 3)
	if report.Jumps != 0 {
		t.Errorf("step: %+v", report)
	}
	// Everything twice at once: the same points, and the copies counted.
	var twice []record.Reading
	for _, r := range standing(0, 6, 3.012, 0.02) {
		again := r
		again.At += 0.02
		twice = append(twice, r, again)
	}
	points, report = Pair(byTime(twice), exact())
	wantSettled(t, "twice", points, 3.012)
	if n := len(twice) / 2; report.Duplicates < n-2 || points[0].N > 6 {
		t.Errorf("twice: %d of %d copies, %d conversions", report.Duplicates, n, points[0].N)
	}
	// Sent twice half a cycle apart, it takes the bench file to know.
	twice = twice[:0]
	for k := range 60 {
		twice = append(twice, saidOf(Gate, 0.15*float64(k), 3+1e-3*float64(k/2%2), 1e-3), saidOf(Current, 0.01+0.15*float64(k), 0.02, 1e-5))
	}
	p := exact()
	p.Twice = map[string]bool{Gate: true}
	q := NewPairer(p)
	for _, r := range twice {
		q.Add(r)
	}
	if c := q.channels[Gate].cycle(); math.Abs(c-0.3) > 1e-9 || q.Report().Duplicates != 30 {
		t.Errorf("cycle %g, %+v", c, q.Report())
	}
}

// No interpolation across a lost conversion, an overload, or a change of range, with
// the conversion after it; nor beside one, where the rate is not known.
func TestGapsOnTheMove(t *testing.T) {
	moving := func() []record.Reading {
		var rs []record.Reading
		for k := range 60 {
			at := 0.3 * float64(k)
			rs = append(rs, saidOf(Gate, at, 2.8+5e-3*at, 1e-3))
		}
		for k := range 45 {
			at := 0.05 + 0.4*float64(k)
			rs = append(rs, saidOf(Current, at, 1e-3*math.Exp(at/10), 1e-6))
		}
		return byTime(rs)
	}
	hole := func(points []Point, from, to float64) int {
		n := 0
		for _, p := range points {
			if p.At > from && p.At < to {
				n++
			}
		}
		return n
	}
	instant := func(k int) float64 { return 0.3*float64(k) - 0.1 } // of the gate's conversion
	all, _ := Pair(moving(), exact())
	if len(all) < 38 || hole(all, instant(24), instant(36)) < 8 {
		t.Fatalf("undisturbed: %d points", len(all))
	}
	for _, p := range all {
		if p.Settled || !(p.Bound > 0 && p.Bound <= tolerance) || math.Abs(p.Vg-(2.8+5e-3*(p.At+0.1))) > 1e-3 {
			t.Errorf("%+v", p)
		}
	}
	for _, x := range []struct {
		name     string
		role     string
		change   func(k int, r *record.Reading) bool
		from, to float64
	}{
		{"lost", Gate, func(k int, r *record.Reading) bool { return k != 30 }, instant(28), instant(32)},
		{"overload", Gate, func(k int, r *record.Reading) bool {
			if k == 30 {
				*r = overOf(Gate, r.At)
			}
			return true
		}, instant(28), instant(33)},
		{"range", Gate, func(k int, r *record.Reading) bool {
			if k >= 30 {
				r.Digit = record.Known(2e-3)
			}
			return true
		}, instant(28), instant(33)},
	} {
		points, report := Pair(change(moving(), x.role, x.change), exact())
		if n := hole(points, x.from, x.to); n != 0 || report.Unpaired == 0 || len(points) < 25 {
			t.Errorf("%s: %d points across it, %d in all, %+v", x.name, n, len(points), report)
		}
	}
	// Of the current: overload gives no point on the move, nor does what follows it.
	points, _ := Pair(change(moving(), Current, func(k int, r *record.Reading) bool {
		if k == 20 {
			*r = overOf(Current, r.At)
		}
		return true
	}), exact())
	if n := hole(points, 7.9, 8.4); n != 0 || len(points) != len(all)-2 {
		t.Errorf("overload of the current: %d points, %d without it", len(points), len(all))
	}
	// Too fast for the tolerance: refused and counted.
	p := exact()
	p.Tolerance = 0.5e-3
	points, report := Pair(moving(), p)
	if len(points) != 0 || report.OverTolerance < 35 {
		t.Errorf("tolerance 0.5 mV: %d points, %+v", len(points), report)
	}
	// Not wanted: none.
	p = exact()
	p.Free = false
	if points, _ := Pair(moving(), p); len(points) != 0 {
		t.Errorf("%d points that were not asked for", len(points))
	}
	// A meter of which nothing is known is taken with an error of its cycle.
	unknown, _ := Pair(moving(), Pairing{Free: true, Tolerance: 20e-3})
	if len(unknown) == 0 || unknown[10].Bound < 2*all[10].Bound {
		t.Errorf("unknown meters: %d points", len(unknown))
	}
}

// A current over the range while the gate stands still is a point of its own kind.
func TestOverloadOfTheCurrent(t *testing.T) {
	rs := change(standing(0, 6, 3.3, 1), Current, func(_ int, r *record.Reading) bool { *r = overOf(Current, r.At); return true })
	points, _ := Pair(rs, exact())
	wantSettled(t, "overload", points, 3.3)
	want := []record.Mark{{Quantity: record.ID, State: record.Overload, Raw: "current OL"}}
	if p := points[0]; !math.IsNaN(p.Id) || !reflect.DeepEqual(p.Marks, want) {
		t.Errorf("%+v", p)
	}
	// Not when a number was among them.
	rs = change(standing(0, 2.4, 3.3, 1), Current, func(k int, r *record.Reading) bool {
		if k != 3 {
			*r = overOf(Current, r.At)
		}
		return true
	})
	if points, _ := Pair(rs, exact()); len(points) != 0 {
		t.Errorf("mixed: %+v", points)
	}
	// Columns with the mark, and no number beside it.
	columns, marks := Columns(points)
	s := record.Sweep{Direction: record.Up, Position: 1, Columns: columns, Marks: marks}
	if err := s.Validate(); err != nil || s.Column(record.ID) == nil || s.Column(record.VL) != nil {
		t.Errorf("%v: %+v", err, s)
	}
}

// A meter that falls silent, one that repeats itself, one that was never there.
func TestLostAndStuck(t *testing.T) {
	p := exact()
	p.Timing[Load] = Timing{LagU: 0.03}
	q := NewPairer(p)
	for _, r := range standing(0, 6, 3, 0.02) {
		q.Add(r)
	}
	if s := q.State(6); !slices.Equal(s.Lost, []string{Load}) || len(s.Stuck) != 0 || !s.Settled || !s.Taken || s.Wait != 0 {
		t.Errorf("%+v", s)
	}
	if s := q.State(6.95); !slices.Contains(s.Lost, Gate) || s.Settled { // 0.3 s cycle: after 1 s
		t.Errorf("%+v", s)
	}
	if s := q.State(6.6); slices.Contains(s.Lost, Gate) {
		t.Errorf("%+v", s)
	}
	points := q.Take()
	wantSettled(t, "without a load meter", points, 3)
	if m := points[0].Marks; len(m) != 1 || m[0].Quantity != record.VL || m[0].State != record.Missing {
		t.Errorf("%+v", m)
	}
	if now := q.Now(); now[Gate].Value != 3 || now[Gate].Unit != "" || math.Abs(now[Current].Age(6)-0.35) > 0.2 || len(now) != 2 {
		t.Errorf("%+v", now)
	}

	// The gate is turned from 3.0 V on, its meter goes on saying so: the current tells.
	frozen := standing(0, 4, 3, 0.02)
	frozen = append(frozen, standing(4, 12, 3, 0.02)...)
	frozen = change(frozen, Current, func(k int, r *record.Reading) bool {
		if r.At > 3.5 {
			*r = saidOf(Current, r.At, 0.02+0.01*math.Min(4, math.Floor(r.At-2.5)), 1e-5)
		}
		return true
	})
	frozen = change(frozen, Gate, func(k int, r *record.Reading) bool {
		if k < 10 {
			*r = saidOf(Gate, r.At, 2.9, 1e-3)
		}
		return true
	})
	points, report := Pair(frozen, exact())
	wantSettled(t, "frozen", points, 2.9)
	if report.Frozen == 0 {
		t.Errorf("%+v", report)
	}
	q = NewPairer(exact())
	for _, r := range frozen {
		q.Add(r)
	}
	if s := q.State(12); !slices.Equal(s.Stuck, []string{Gate}) || s.Settled || s.Why == "" {
		t.Errorf("%+v", s)
	}
	// A part that warms up by 3 %/s at a steady gate is no frozen meter, but worth a look.
	warm := change(standing(0, 8, 3, 0.02), Current, func(_ int, r *record.Reading) bool {
		*r = saidOf(Current, r.At, 0.02*(1+0.1*(1-math.Exp(-r.At/2))), 1e-5)
		return true
	})
	points, report = Pair(warm, exact())
	wantSettled(t, "warming up", points, 3)
	if report.Frozen != 0 {
		t.Errorf("%+v", report)
	}
	// How long still.
	q = NewPairer(exact())
	for _, r := range append(standing(0, 3, 2.9, 0.01), standing(3, 4, 3, 0.02)...) {
		q.Add(r)
	}
	if s := q.State(4); s.Settled || !(s.Wait > 0.4 && s.Wait < 0.9) || s.Why == "" {
		t.Errorf("%+v", s)
	}
}
