package acquire

import (
	"cmp"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gatesill/store/record"

	"pgregory.net/rapid"
)

// A meter whose display changes its range: the first conversion on the new one and the one
// after are left out; text whose trailing zeros are dropped is not a change of range.
func TestChangeOfRange(t *testing.T) {
	rs := change(standing(0, 8, 3, 0.02), Current, func(k int, r *record.Reading) bool {
		if k >= 8 {
			r.Digit = record.Known(1e-4)
		}
		return true
	})
	_, report := Pair(rs, exact())
	if report.RangeChanges != 2 {
		t.Errorf("%+v", report)
	}
	// After an overload the first on the new range is what is left out.
	rs = change(rs, Current, func(k int, r *record.Reading) bool {
		if k == 7 {
			*r = overOf(Current, r.At)
		}
		return true
	})
	if _, report := Pair(rs, exact()); report.RangeChanges != 1 || report.States != 1 {
		t.Errorf("%+v", report)
	}
	rs = change(standing(0, 30, 3, 0.02), Gate, func(k int, r *record.Reading) bool {
		r.Digit = record.Known([]float64{1e-3, 1e-4, 1e-2}[k%3])
		return true
	})
	points, report := Pair(rs, exact())
	if len(settledOf(points)) != 1 || report.RangeChanges > 10 {
		t.Errorf("%d points, %+v", len(points), report)
	}
}

// Columns of one line are of one instant: no interpolation, no bound, a point a line on
// the move and one on a plateau.
func TestLines(t *testing.T) {
	var rs []record.Reading
	for k := range 120 {
		at := 0.1 * float64(k)
		vg := 2.8 + 0.05*math.Min(at, 6)
		for _, r := range []record.Reading{saidOf(Current, at, 1e-3*math.Exp(at/4), 1e-6), saidOf(Gate, at, vg, 1e-4), saidOf(Drain, at, 12-at/10, 1e-3)} {
			r.Meter = "board"
			if at > 6 {
				r = saidOf(r.Role, at, map[string]float64{Gate: 3.1, Current: 4.48e-3, Drain: 11.4}[r.Role], r.Digit.Float())
				r.Meter = "board"
			}
			rs = append(rs, r)
		}
	}
	points, _ := Pair(rs, Pairing{Free: true})
	lines := 0
	for _, p := range points {
		if p.Bound != 0 {
			t.Errorf("bound %g", p.Bound)
		}
		if p.Settled {
			continue
		}
		lines++
		if k := math.Round(10 * p.At); math.Abs(p.Vg-(2.8+0.005*k)) > 1e-9 || math.Abs(p.Vd-(12-k/100)) > 1e-9 || math.Abs(p.Id-rounded(1e-3*math.Exp(k/40), 1e-6)) > 1e-12 {
			t.Errorf("line %g: %+v", k, p)
		}
	}
	if lines < 55 || lines > 61 {
		t.Errorf("%d lines gave points", lines)
	}
	wantSettled(t, "the end", points, 3.1)
}

// The other roles come along, as means or as they were last.
func TestOtherRoles(t *testing.T) {
	rs := standing(0, 12, 3.012, 0.02)
	for k := range 30 {
		rs = append(rs, saidOf(Load, 0.02+0.4*float64(k), 0.1, 1e-4), saidOf(Drain, 0.03+0.4*float64(k), 11.9, 1e-2), saidOf(Supply, 0.04+0.4*float64(k), 12.01, 1e-2))
	}
	rs = append(rs, saidOf(Temperature, 0.1, 24.5, 0.1), saidOf(Temperature, 5.1, 25.5, 0.1), saidOf(Temperature, 10.1, 26.5, 0.1))
	points, _ := Pair(byTime(rs), exact())
	if len(points) != 1 {
		t.Fatalf("%d points", len(points))
	}
	if p := points[0]; p.Vl != 0.1 || p.Vd != 11.9 || p.Vdd != 12.01 || p.Temp != 24.5 || len(p.Marks) != 0 {
		t.Errorf("%+v", p)
	}
	// With a gate meter alone there is a point too.
	points, _ = Pair(change(standing(0, 5, 3.012, 0.02), Current, func(int, *record.Reading) bool { return false }), Pairing{Timing: map[string]Timing{Gate: {}}})
	wantSettled(t, "gate alone", points, 3.012)
}

// Means are written with a hundredth of a digit and no more, and the text reads back as
// the numbers.
func TestColumnsDecimals(t *testing.T) {
	for _, x := range []struct {
		v, digit float64
		want     string
	}{{3.0123456, 1e-3, "3.01235"}, {2.0015e-5, 1e-6, "0.00002002"}, {0.1 + 0.2, 1e-3, "0.3"}, {12.5, 5, "12.5"}, {12.345, 10, "12.3"},
		{-0.0000001, 1e-3, "0"}, {-3.0100001, 1e-3, "-3.01"}, {120, 100, "120"}, {1.0 / 3, 0, "0.333333333"}, {0.0049999, 5e-4, "0.005"}} {
		if got := decimal(x.v, x.digit); got != x.want {
			t.Errorf("%g with %g: %s, want %s", x.v, x.digit, got, x.want)
		}
	}
	g := rand.New(rand.NewPCG(1, 2))
	s := simulate(g, stairs(g, 10e-3, 2.6, 3.3), handhelds(g))
	points, _ := Pair(s.readings, s.pairing)
	columns, marks := Columns(points)
	var names []record.Quantity
	for _, c := range columns {
		names = append(names, c.Quantity)
		var back []*float64
		if err := json.Unmarshal(c.Text, &back); err != nil || len(back) != len(points) {
			t.Fatalf("%s: %v", c.Quantity, err)
		}
		for i, x := range back {
			if (x == nil) != math.IsNaN(c.Values[i]) || x != nil && *x != c.Values[i] {
				t.Errorf("%s %d: %v, text %v", c.Quantity, i, c.Values[i], x)
			}
		}
		if d := c.LastDigit(); d < 0.99e-8 {
			t.Errorf("%s is written to %g", c.Quantity, d)
		}
	}
	if want := []record.Quantity{record.VG, record.ID, record.VL, record.T, record.PairBound, record.Settled}; !slices.Equal(names, want) {
		t.Errorf("columns %v", names)
	}
	sweep := record.Sweep{Direction: record.Up, Position: 1, Columns: columns, Marks: marks}
	if err := sweep.Validate(); err != nil {
		t.Error(err)
	}
	for i, x := range sweep.Values(record.PairBound) {
		if x < points[i].Bound {
			t.Errorf("point %d: bound %g is written as %g", i, points[i].Bound, x)
		}
	}
	if columns, marks := Columns(nil); columns != nil || marks != nil {
		t.Error("columns of nothing")
	}
}

// The points do not depend on when they are taken, nor on the order in which meters
// are heard within half a second; nor does a list make other points than the stream.
func TestSamePointsHoweverDealt(t *testing.T) {
	fewer(t)
	rapid.Check(t, func(rt *rapid.T) {
		g := rand.New(rand.NewPCG(rapid.Uint64().Draw(rt, "seed"), 7))
		b := rapid.SampledFrom(benches[:2]).Draw(rt, "bench")
		p := stairs(g, rapid.SampledFrom([]float64{4e-3, 30e-3}).Draw(rt, "rate"), 2.95, 3.1)
		s := simulate(g, p, b.meters(g))
		var rs []record.Reading // with faults
		for _, r := range s.readings {
			switch x := g.Float64(); {
			case x < 0.003:
				continue
			case x < 0.006:
				r.Refused = "held"
			case x < 0.009:
				r.Value = record.Known(r.Value.Float() * 10)
				if r.State != "" {
					r.Value = record.Num{}
				}
			}
			rs = append(rs, r)
		}
		want, report := Pair(rs, s.pairing)
		q := NewPairer(s.pairing)
		var got []Point
		late := slices.Clone(rs)
		delay := map[string]float64{Gate: 0.4 * g.Float64(), Current: 0.4 * g.Float64(), Load: 0.4 * g.Float64()}
		slices.SortStableFunc(late, func(a, b record.Reading) int { return cmp.Compare(a.At+delay[a.Role], b.At+delay[b.Role]) })
		for _, r := range late {
			q.Add(r)
			if g.IntN(10) == 0 {
				got = append(got, q.Take()...)
			}
		}
		q.Flush()
		got = append(got, q.Take()...)
		if len(want) == 0 {
			rt.Fatal("no points")
		}
		if x, y := fmt.Sprintf("%+v", want), fmt.Sprintf("%+v", got); x != y || report != q.Report() {
			rt.Fatalf("%d and %d points\n%+v\n%+v", len(want), len(got), report, q.Report())
		}
		if !slices.IsSortedFunc(got, func(a, b Point) int { return cmp.Compare(a.At, b.At) }) {
			rt.Fatal("points are not in the order of their instants")
		}
	})
}
