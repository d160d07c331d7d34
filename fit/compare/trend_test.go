package compare

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

func trendOf(t *testing.T, lots []Lot) Trend {
	t.Helper()
	tr, err := TrendOf(lots, plain())
	if err != nil {
		t.Fatal(err)
	}
	return tr
}

// Lots in the order of time, limits by the moving range, pairs adjusted.
func TestTrend(t *testing.T) {
	means := []float64{3, 3.01, 2.99, 3.005, 3.2, 3}
	var lots []Lot
	for i, m := range means {
		l := lotOf(fmt.Sprintf("L%d", i), spreadOut(20, m, 0.03)...)
		l.At = fmt.Sprintf("2026-%02d-01", i+1)
		l.DateCode = fmt.Sprintf("26%02d", 4*i)
		lots = append([]Lot{l}, lots...) // the latest first
	}
	tr := trendOf(t, lots)
	for _, s := range tr.Text {
		t.Log(s)
	}
	for i, l := range tr.Lots {
		near(t, l.Name, l.Centre, means[i], 1e-9)
		if l.Name != fmt.Sprintf("L%d", i) || l.N != 20 || !(l.U > 0) {
			t.Errorf("%d: %+v", i, l)
		}
	}
	// Moving ranges 10, 20, 15, 195 and 200 mV: their mean is 88, /1.128 × 3 = 234 mV.
	near(t, "centre", tr.Centre, stats.Mean(means), 1e-9)
	near(t, "high", tr.High-tr.Centre, 3*0.088*math.Sqrt(math.Pi)/2, 1e-9)
	if !tr.Provisional || tr.Untimed {
		t.Errorf("%+v", tr)
	}
	if len(tr.Pairs) != 15 {
		t.Fatalf("%d pairs", len(tr.Pairs))
	}
	apart := 0
	for _, q := range tr.Pairs {
		five := q.A == "L4" || q.B == "L4"
		if q.PAdjusted < 0.05 {
			apart++
		}
		if five != (q.PAdjusted < 0.05) || five != (q.Low > 0 || q.High < 0) || q.PAdjusted < q.P {
			t.Errorf("%+v", q)
		}
	}
	if apart != 5 || !strings.Contains(strings.Join(tr.Text, "\n"), "5 of 15 comparisons differ") {
		t.Error(tr.Text)
	}
	// A pair is what the comparison of the two says, but for the level.
	a, b := lots[5], lots[1]
	c := compareLots(t, a, b, plain())
	for _, q := range tr.Pairs {
		if q.A == a.Name && q.B == b.Name {
			near(t, "shift", q.Shift, c.Shift, 1e-12)
			near(t, "p", q.P/c.P, 1, 1e-9)
			if !(q.Low < c.Low && q.High > c.High) {
				t.Errorf("simultaneous %v to %v, alone %v to %v", q.Low, q.High, c.Low, c.High)
			}
		}
	}
}

func TestTrendOfLittle(t *testing.T) {
	a, b := lotOf("A", 3, 3.1, 3.2, 3.05), lotOf("B", 3, 3.1)
	a.At = "2026-01-01"
	tr := trendOf(t, []Lot{b, a})
	if tr.Lots[0].Name != "A" || !tr.Untimed || !math.IsNaN(tr.Low) || !math.IsNaN(tr.Lots[1].Centre) || !math.IsNaN(tr.Pairs[0].P) {
		t.Errorf("%+v", tr)
	}
	inf := math.Inf(1)
	if tr = trendOf(t, []Lot{a, lotOf("C", inf, inf, inf, inf)}); !math.IsNaN(tr.Lots[1].Centre) {
		t.Errorf("%+v", tr)
	}
	check := func(lots []Lot, want error) {
		t.Helper()
		if _, err := TrendOf(lots, plain()); !errors.Is(err, want) {
			t.Errorf("%v, want %v", err, want)
		}
	}
	check([]Lot{a}, ErrFewLots)
	check([]Lot{a, a}, ErrSameLot)
	check([]Lot{lotOf("X"), lotOf("Y")}, ErrNothing)
	opt := plain()
	opt.By = fit.KeyIdss
	if _, err := TrendOf([]Lot{a, b}, opt); !errors.Is(err, ErrQuantity) {
		t.Error(err)
	}
}
