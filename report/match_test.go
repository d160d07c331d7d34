package report

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/store/record"
)

// inventedMatch is an answer of one pair, with what would repair it.
func inventedMatch() Matched {
	nan := math.NaN()
	pair := match.Set{
		Number: 1, Spread: 0.03, Spreads: []float64{0.03}, Distance: 0.03, Limit: nan,
		Devices: []match.Placed{{Name: "A", Lot: "L", Values: []float64{2.81}, U: nan}, {Name: "B", Lot: "L", Values: []float64{2.84}, U: nan}},
		Sharing: match.Sharing{Imbalance: nan, Share: nan, Power: nan, Gate: nan, Hottest: -1},
		Repair:  match.Repair{Trim: []float64{0, 0.03}, Resistors: []float64{3, 0}, Text: "..."},
	}
	return Matched{
		Sheets: []*Sheet{{Lot: record.Lot{Name: "L"}, TestCurrent: 0.01, IdleCurrent: nan}}, Gm: nan, Vds: nan, SourceOhms: 0.22,
		Members: []match.Member{{Name: "A", Lot: "L"}, {Name: "B", Lot: "L"}},
		Matching: match.Matching{
			Size: 2, At: 0.01, Aim: match.Most, By: []match.Criterion{{Key: fit.KeyVgsth, Within: 0.03}}, Step: 0.01, Offered: 2, Sets: []match.Set{pair}, Total: 0.03, Worst: 0.03,
			Bound:    match.Bound{Kind: match.Optimal, Total: 0.03, Worst: nan, Sets: 1},
			TradeOff: []match.TradeOff{{Within: 0.01, Mean: nan, Imbalance: 0.014}, {Within: 0.05, Sets: 1, Total: 0.03, Mean: 0.03, Exact: true, Imbalance: 0.07}},
		},
		Locked: map[int]record.Set{1: {Name: "S7", ID: "id"}},
	}
}

func TestMatchWords(t *testing.T) {
	m := inventedMatch()
	check := func(what, got, want string) {
		t.Helper()
		if got != want {
			t.Errorf("%s:\n%s\nwant\n%s", what, got, want)
		}
	}
	check("first line", m.MatchLine(), "Matched by V_GS(th) at 10 mA within 30 mV: as many pairs as possible, and of those choices the one with the least sum of spreads.")
	check("tolerance", m.toleranceLine(), "Two devices 30 mV apart differ by about 42 mA on one gate line, 420 % of 10 mA.")
	check("repair", repairWords(&m.Sets[0], m.At, m.SourceOhms), "gate trimmed by +30 mV at B; or in the source 3.0 Ω at A, in addition")
	var b bytes.Buffer
	if err := m.Labels(&b); err != nil {
		t.Fatal(err)
	}
	check("labels", b.String(), "A\t2.81 V\tS7\nB\t2.84 V\tS7\n")
	for v, want := range map[float64]string{0: "0", 0.004: "4", 0.0041: "4.1", 0.00404: "4", 0.1: "100", 0.2512: "251", math.NaN(): "n/a"} {
		check("spread", spreadText(v), want)
	}
}

// The answer itself stands among the rows of the trade-off, in its place, once.
func TestTradeRows(t *testing.T) {
	m := inventedMatch()
	rows := m.tradeRows()
	if len(rows) != 3 || rows[1].Within != 0.03 || rows[1].Sets != 1 || !rows[1].Exact || math.Abs(rows[1].Imbalance-0.042) > 1e-12 {
		t.Errorf("rows %+v", rows)
	}
	if len(m.TradeOff) != 2 {
		t.Error("the trade-off of the matching was changed")
	}
	m.By[0].Within = 0.05
	m.TradeOff[1].Sets, m.TradeOff[1].Exact = 0, false // a short search found fewer
	if rows = m.tradeRows(); len(rows) != 2 || rows[1].Sets != 1 || !rows[1].Exact {
		t.Errorf("rows %+v", rows)
	}
	m.TradeOff[1].Sets = 2 // it found more: that is told
	if rows = m.tradeRows(); rows[1].Sets != 2 {
		t.Errorf("rows %+v", rows)
	}
	m.Aim = match.Total
	if rows = m.tradeRows(); len(rows) != 2 {
		t.Errorf("rows %+v", rows)
	}
}

// A name from outside cannot do anything on the terminal.
func TestMatchTableIsClean(t *testing.T) {
	m := inventedMatch()
	bad := "A\x1b[31m\nB"
	m.Sets[0].Devices[0].Name, m.Members[0].Lot = bad, "M"
	m.LeftOver = []match.LeftOver{{Name: bad, Lot: bad, Why: bad}}
	m.Near = m.Sets
	m.Sets[0].Within = false
	m.Locked[1] = record.Set{Name: bad}
	m.VdsFrom, m.Text, m.Bound.Proof = bad, bad, bad
	var b bytes.Buffer
	if err := MatchTable(&b, m, Style{}); err != nil {
		t.Fatal(err)
	}
	s := record.Set{Name: bad, Unit: bad, State: record.Used, Reason: bad, CreatedBy: bad, Members: []record.SetMember{{Device: bad, Lot: bad}, {Device: "x", Lot: "y"}}}
	for _, err := range []error{
		SetsTable(&b, []record.Set{s}, Style{}), SetCard(&b, SetFile{Set: s, Changes: []record.Change{{Field: "state", New: bad}}}, Style{}), SetLabels(&b, &s), m.Labels(&b),
	} {
		if err != nil {
			t.Fatal(err)
		}
	}
	if strings.ContainsAny(b.String(), "\x1b") {
		t.Errorf("an escape got through:\n%q", b.String())
	}
}
