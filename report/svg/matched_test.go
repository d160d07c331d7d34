package svg

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit/match"
)

// pictures draws everything of matched and biased devices from numbers of any kind.
func pictures(x []float64, name string) map[string][]byte {
	at := func(i int) float64 {
		if len(x) == 0 {
			return math.NaN()
		}
		return x[i%len(x)]
	}
	f := Frame{ID: "p", Title: name, Desc: name}
	var groups []Group
	var left []Mate
	var rows []match.TradeOff
	var panel Panel
	var spots []Spot
	var draws []Draw
	var shares []Share
	for i := range x {
		groups = append(groups, Group{Name: name, Note: name, Apart: i%2 == 0, Mates: []Mate{{Name: name, X: at(i), Ref: i}, {Name: name, X: at(i + 1), Hollow: true}}})
		left = append(left, Mate{Name: name, X: at(i)})
		rows = append(rows, match.TradeOff{Within: at(i), Sets: i, Mean: at(i + 1), Imbalance: at(i + 2), Exact: i%2 == 0})
		panel.Curves = append(panel.Curves, Curve{Name: name, X: []float64{at(i), at(i + 1), at(i + 2)}, Y: []float64{at(i + 3), at(i)}})
		spots = append(spots, Spot{Name: name, X: at(i), Flag: name})
		draws = append(draws, Draw{Name: name, X: at(i), Y: at(i + 1), Beyond: i%3 - 1, Out: i%2 == 0})
		shares = append(shares, Share{Name: name, Cold: at(i), Hot: at(i + 1), Bare: at(i + 2)})
	}
	panel.Title = name
	out := map[string][]byte{}
	out["sets"], _ = AppendSets(nil, groups, SetsOptions{Frame: f, Quantity: name, Unit: "V", Left: left, Within: at(0)})
	out["trade-off"], _ = AppendTradeOff(nil, rows, TradeOffOptions{Frame: f, Chosen: at(1), Most: len(x)})
	for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
		out["panels "+axis.String()], _ = AppendPanels(nil, []Panel{panel, panel, panel}, PanelsOptions{Frame: f, XAxis: axis, XUnit: "A", YUnit: "V", MarkX: at(0), MarkY: at(1)})
		out["panels up "+axis.String()], _ = AppendPanels(nil, []Panel{panel}, PanelsOptions{Frame: f, YAxis: SquareRoot, XUnit: "V", YUnit: "A", MarkX: at(0), MarkY: at(1), Least: at(2)})
	}
	out["coverage"], _ = AppendCoverage(nil, spots, CoverageOptions{Frame: f, Quantity: name, Unit: "V", Reach: Span{at(0), at(1)}, Sure: Span{at(2), at(3)}, Band: Span{at(1), at(2)}, ReachIs: name, BandIs: name, Centre: at(0), CentreIs: name, Above: []string{name}, Negative: len(x)%2 == 0})
	out["draws"], _ = AppendDraws(nil, draws, DrawsOptions{Frame: f, Gate: at(0), Wanted: at(1), Allowed: Span{at(2), at(3)}})
	out["line"], _ = AppendLine(nil, shares, LineOptions{Frame: f, Each: at(0)})
	return out
}

// Whatever the numbers are, a picture is well-formed and its places are finite.
func TestMatchedPicturesOfAnything(t *testing.T) {
	odd := []float64{nan, math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), 1e300, -1e300, 1e-320, 3.2, -3.2, math.MaxFloat64}
	for n := range len(odd) + 1 {
		for what, p := range pictures(odd[:n], nasty) {
			list := read(t, p)
			if bytes.Contains(p, []byte("<script>alert")) || bytes.ContainsRune(p, '\x1b') {
				t.Errorf("%s: a name stands raw", what)
			}
			if list[0].attr["role"] == "" || list[0].attr["aria-labelledby"] != "p-t p-d" {
				t.Errorf("%s: not named to a reader: %v", what, list[0].attr)
			}
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.OneOf(rapid.Float64(), rapid.Float64Range(3, 3.5), rapid.SampledFrom(odd)), 0, 12).Draw(t, "x")
		for _, p := range pictures(x, rapid.String().Draw(t, "name")) {
			read(t, p)
		}
	})
}

// Neighbours on the axis have different marks, and no two sets in a row meet.
func TestSetsStandApart(t *testing.T) {
	var groups []Group
	for i := range 60 {
		x := 3 + 0.0071*float64((i*37)%60)
		groups = append(groups, Group{Name: fmt.Sprint(i + 1), Mates: []Mate{{Name: "a", X: x}, {Name: "b", X: x + 0.009}}})
	}
	c := &canvas{l: 24, r: 856, t: 30}
	s := &sets{canvas: c, groups: groups}
	s.ranges()
	s.pack()
	if len(s.placed)+len(s.rest) != 60 {
		t.Fatalf("%d sets placed and %d left", len(s.placed), len(s.rest))
	}
	for i, a := range s.placed {
		for _, b := range s.placed[:i] {
			if a.row == b.row && s.x.at(b.Mates[1].X)+7 > s.x.at(a.Mates[0].X) {
				t.Errorf("sets %s and %s in row %d meet", a.Name, b.Name, a.row)
			}
		}
		if i > 0 && a.shape == s.placed[i-1].shape {
			t.Errorf("sets %s and %s have one shape", a.Name, s.placed[i-1].Name)
		}
	}
}

// Of more sets than there is room for the widest are drawn. Here the widest lie side by
// side, so that few have room.
func TestTheWidestSetsAreDrawn(t *testing.T) {
	var groups []Group
	for i := range 2500 {
		x := 3 + 0.0001*float64(i)
		groups = append(groups, Group{Name: fmt.Sprint(i + 1), Mates: []Mate{{Name: "a", X: x}, {Name: "b", X: x + 1e-6*float64(i)}}})
	}
	b, drawn := AppendSets(nil, groups, SetsOptions{Frame: Frame{ID: "p"}, Unit: "V"})
	if drawn.Labels+drawn.Unlabeled != 2500 || drawn.Labels < 10 || drawn.Labels > 400 {
		t.Errorf("%+v", drawn)
	}
	if !strings.Contains(string(b), "a in set 2500:") || strings.Contains(string(b), "a in set 1:") {
		t.Error("not the widest")
	}
	if len(b) > 200<<10 {
		t.Errorf("%d bytes", len(b))
	}
}

// The trade-off says each tolerance in words, and marks what is not known to be all.
func TestTradeOffInWords(t *testing.T) {
	b, drawn := AppendTradeOff(nil, []match.TradeOff{
		{Within: 0.01, Sets: 14, Mean: 0.0026, Left: 44, Exact: true, Imbalance: 0.0095},
		{Within: 0.02, Sets: 20, Mean: 0.0043, Left: 20, Imbalance: nan},
	}, TradeOffOptions{Frame: Frame{ID: "p"}, Chosen: 0.02, Most: 25})
	if drawn.Shown != 2 {
		t.Fatalf("%+v", drawn)
	}
	text := string(b)
	for _, want := range []string{"within 10 mV: 14 sets, 44 left over, mean spread 2.6 mV; two devices that far apart differ by about 9.5 mA", "within 20 mV: 20 sets or more, 20 left over", "chosen: 20 mV", "devices for 25", `class="mhollow"`} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not in the picture", want)
		}
	}
}
