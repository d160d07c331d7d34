package match

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gatesill/fit"
)

func plain(v ...float64) []Member {
	var ms []Member
	for i, x := range v {
		ms = append(ms, member(string(rune('A'+i)), x, 0, 0))
	}
	return ms
}

// TestPublishedPairs: the tiny cases worked out by hand: 1, 2, 4, 7 pair at a total
// of 1 + 3; 0, 1, 1.9, 2.95 at 1 + 1.05, where taking the nearest two first, 1 and
// 1.9, would cost 0.9 + 2.95.
func TestPublishedPairs(t *testing.T) {
	near(t, "1 2 4 7", mustMatch(t, plain(1, 2, 4, 7), Options{}).Total, 4, 1e-9)
	near(t, "0 1 1.9 2.95", mustMatch(t, plain(0, 1, 1.9, 2.95), Options{}).Total, 2.05, 1e-9)
	m := mustMatch(t, plain(0, 0.01, 0.5), Options{})
	if len(m.Sets) != 1 || len(m.LeftOver) != 1 || m.LeftOver[0].Name != "C" {
		t.Errorf("an odd device: have %+v left over, want C", m.LeftOver)
	}
}

// TestDisplayStep: a difference shown as equal to the tolerance is within it, the
// next step is not, whatever the computer makes of 2.81 - 2.78.
func TestDisplayStep(t *testing.T) {
	pair := func(a, b, within, step float64) int {
		ms := []Member{member("a", a, 0, step), member("b", b, 0, step)}
		return len(mustMatch(t, ms, Options{By: idle(within)}).Sets)
	}
	for _, c := range []struct {
		a, b, within, step float64
		sets               int
	}{
		{2.78, 2.81, 0.03, 0.01, 1}, {2.78, 2.82, 0.03, 0.01, 0},
		{2.78, 2.81, 0.03, 0, 1}, {2.78, 2.81, 0.03, 0.001, 1}, {2.78, 2.811, 0.03, 0.001, 0},
		{2.78, 2.79, 0.005, 0.01, 0},    // half a step is not a step
		{2.7803, 2.8143, 0.03, 0.01, 0}, // read between the steps: no slack
	} {
		if n := pair(c.a, c.b, c.within, c.step); n != c.sets {
			t.Errorf("%g and %g within %g, step %g: have %d sets, want %d", c.a, c.b, c.within, c.step, n, c.sets)
		}
	}
}

// TestImbalancePublished: β from the data sheet of an RF power part (g_fs 7 S at
// 5 A, so β = 49/10 = 4.9 A/V²) at 250 mA: a threshold 100 mV higher carries 52.8 %
// less, 100 mV lower 72.4 % more; 0.1 ohm in each source divides small differences by
// 1 + 0.1·1.5652 = 1/0.8647. Worked out from the square law.
func TestImbalancePublished(t *testing.T) {
	m := member("a", 3.3, math.Sqrt(2*4.9*0.25), 0)
	l := lawOf(&m, 0.25, 0)
	if l.basis != byGm {
		t.Fatalf("basis %d, want the square law", l.basis)
	}
	near(t, "overdrive", l.v0, 0.31944, 1e-5)
	near(t, "transconductance", m.Result.GmIdle.Value, 1.5652, 1e-4)
	near(t, "100 mV less", l.current(3.2)/0.25-1, -0.528, 5e-4)
	near(t, "100 mV more", l.current(3.4)/0.25-1, 0.724, 5e-4)
	b := member("b", 3.3001, m.Result.GmIdle.Value, 0)
	without := Share([]Member{m, b}, Options{At: 0.25}).Imbalance
	with := Share([]Member{m, b}, Options{At: 0.25, SourceResistor: 0.1}).Imbalance
	near(t, "factor of 0.1 ohm", with/without, 0.8647, 1e-4)
}

// TestShareBalances: the mean current is the idle current, every device is on its
// own curve at V_G - I·R, and more resistance never makes the imbalance greater.
func TestShareBalances(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 2026))
	for range 100 {
		n := 2 + rng.IntN(4)
		var ms []Member
		for range n {
			m := member("x", 3.3+0.03*rng.NormFloat64(), 0, 0)
			m.Result.Beta.Value = 3 + rng.Float64()
			m.Result.Theta.Value = 0.1 * rng.Float64()
			if m.PChannel = rng.IntN(4) == 0; m.PChannel {
				m.Result.VgsIdle.Value *= -1
			}
			ms = append(ms, m)
		}
		last := math.Inf(1)
		for _, r := range []float64{0, 0.1, 0.5, 2} {
			s := Share(ms, Options{At: 0.25, SourceResistor: r, Vds: 12})
			var sum float64
			for k, i := range s.Currents {
				sum += i
				l := lawOf(&ms[k], 0.25, 0)
				near(t, "current on its curve", l.current(s.Gate-i*r), i, 1e-9)
			}
			near(t, "mean current", sum/float64(n), 0.25, 1e-9)
			near(t, "dissipation", s.Power, 12*s.Currents[s.Hottest], 1e-12)
			if s.Imbalance > last+1e-9 {
				t.Errorf("%g ohm: imbalance %g, with less %g", r, s.Imbalance, last)
			}
			last = s.Imbalance
		}
	}
}

// swept gives a device the levels of I = (β/2)·v²/(1+θ·v) with a foot, at threshold vt.
func swept(name string, vt, beta, theta float64) Member {
	m := member(name, 0, 0, 0)
	gate := func(i float64) float64 {
		return vt + (theta*i+math.Sqrt(theta*theta*i*i+2*beta*i))/beta
	}
	for _, i := range fit.LevelCurrents {
		if i >= 1e-3 && i <= 2 {
			m.Result.Levels = append(m.Result.Levels, fit.Level{I: i, Vg: gate(i), U: 0.0005})
		}
	}
	m.Result.VgsIdle.Value = gate(0.25)
	return m
}

// TestShareByCurve: currents read off the levels agree with the law that the levels
// were made of, and each way to know a device gives its name.
func TestShareByCurve(t *testing.T) {
	a, b := swept("a", 3.00, 4, 0.15), swept("b", 3.02, 4.4, 0.15)
	curve := Share([]Member{a, b}, Options{At: 0.25})
	if curve.Basis != basisText[byCurve] {
		t.Errorf("basis %q", curve.Basis)
	}
	x, y := a, b
	x.Result.Levels, y.Result.Levels = nil, nil
	x.Result.Beta.Value, x.Result.Theta.Value = 4, 0.15
	y.Result.Beta.Value, y.Result.Theta.Value = 4.4, 0.15
	law := Share([]Member{x, y}, Options{At: 0.25})
	for k := range law.Currents {
		near(t, "current", curve.Currents[k], law.Currents[k], 0.0003)
	}
	near(t, "imbalance", curve.Imbalance, law.Imbalance, 0.0005)
	// Without VgsIdle it is read off the curve too.
	a.Result.VgsIdle, b.Result.VgsIdle = fit.None(), fit.None()
	near(t, "imbalance without an idle point", Share([]Member{a, b}, Options{At: 0.25}).Imbalance, law.Imbalance, 0.002)

	two := func(v, at1 float64) Member {
		m := member("s", v, 0, 0)
		m.Result.Vgsth.Value = at1
		return m
	}
	s := Share([]Member{two(3.3, 3.0), two(3.31, 3.0)}, Options{At: 0.25, TestCurrent: 0.01})
	if s.Basis != basisText[bySecant] || !(s.Imbalance > 0) {
		t.Errorf("two spots: %q, %g", s.Basis, s.Imbalance)
	}
	one := Share([]Member{member("p", 3.3, 0, 0), member("q", 3.31, 0, 0)}, Options{At: 0.25})
	if !math.IsNaN(one.Imbalance) || !strings.HasPrefix(one.Basis, "not claimed") || one.Currents != nil {
		t.Errorf("one spot: imbalance %g, %q, want none", one.Imbalance, one.Basis)
	}
}

func TestCurves(t *testing.T) {
	var ms []Member
	for i := range 12 {
		ms = append(ms, swept(string(rune('A'+i)), 3+0.01*float64(i%6), 4+0.2*float64(i/6), 0.1))
	}
	ms[11].Result.Levels = ms[11].Result.Levels[:5] // reaches 20 mA only
	m := mustMatch(t, ms, Options{By: []Criterion{{Key: KeyCurve, Within: 0.015}}, From: 0.05, To: 1, At: 0.25})
	if len(m.Currents) != 5 || m.Currents[0] != 0.05 || m.Currents[4] != 1 {
		t.Errorf("currents %v, want 0.05 to 1 A", m.Currents)
	}
	if i := len(m.LeftOver); i == 0 || !strings.Contains(m.LeftOver[i-1].Why, "no gate voltage at") {
		t.Errorf("left over: %+v, want L without a value", m.LeftOver)
	}
	if m.Bound.Kind != Optimal || len(m.Sets) < 4 {
		t.Errorf("%d sets, %s", len(m.Sets), m.Bound.Kind)
	}
	for _, s := range m.Sets {
		var worst float64
		a, b := ms[s.Devices[0].Member].Result.Levels, ms[s.Devices[1].Member].Result.Levels
		for k := range a {
			if a[k].I >= 0.05 && a[k].I <= 1 {
				worst = math.Max(worst, math.Abs(a[k].Vg-b[k].Vg))
			}
		}
		near(t, "greatest difference of "+namesOf(&s), s.Distance, worst, 1.1e-6)
	}
	q := mustMatch(t, ms, Options{Size: 3, By: []Criterion{{Key: KeyCurve, Within: 0.03}}, From: 0.05, To: 1, TimeLimit: time.Second})
	checkSets(t, ms, q)
	if _, err := Match(context.Background(), plain(1, 2, 3), Options{By: []Criterion{{Key: KeyCurve}}}); !errors.Is(err, ErrCurrents) {
		t.Errorf("curves of devices without any: %v", err)
	}
}

func TestAlike(t *testing.T) {
	ms := plain(3, 3.0028, 4, 4.0029)
	for i := range ms {
		ms[i].Result.VgsIdle.U = 0.001
	}
	m := mustMatch(t, ms, Options{})
	if !m.Sets[0].Alike || m.Sets[1].Alike {
		t.Errorf("2.8 mV and 2.9 mV with u = 1 mV: alike %v and %v, want true and false", m.Sets[0].Alike, m.Sets[1].Alike)
	}
	ms[0].Result.VgsIdle.U = math.NaN()
	if mustMatch(t, ms, Options{}).Sets[0].Alike {
		t.Error("alike although u is not known")
	}
}

func TestRepair(t *testing.T) {
	m := mustMatch(t, []Member{member("a", 3.30, 1.4, 0), member("b", 3.40, 1.4, 0)}, Options{At: 0.005})
	r := m.Sets[0].Repair
	// 100 mV at 5 mA is 20 ohm.
	near(t, "resistor", r.Resistors[0], 20, 1e-9)
	near(t, "trim", r.Trim[1], 0.1, 1e-9)
	if r.Resistors[1] != 0 || r.Trim[0] != 0 || !strings.Contains(r.Text, "20 ohm at a") || !strings.Contains(r.Text, "100 mV at b") {
		t.Errorf("repair %+v", r)
	}
}

func TestKeptOut(t *testing.T) {
	ms := plain(3, 3.001, 3.002, 3.003, 3.004, 3.005, 3.006, 3.007)
	ms[0].Locked = "S1"
	ms[1].Out = "it is a control part"
	ms[2].Result.State, ms[2].Result.VgsIdle = fit.Above, fit.None()
	ms[3].Result.VgsIdle = fit.None()
	ms[4].Package, ms[0].Package = "P", "P"
	ms[5].Result.State, ms[5].Result.Why = fit.Open, "no current"
	m := mustMatch(t, ms, Options{At: 0.25})
	checkSets(t, ms, m)
	if len(m.Sets) != 1 || namesOf(&m.Sets[0]) != "G,H" {
		t.Fatalf("sets %+v", m.Sets)
	}
	for i, want := range []string{"in set S1", "control part", "never reaches 250 mA", "no gate voltage at 250 mA", "other side of package P", "open: no current"} {
		if l := m.LeftOver[i]; !l.Out || !strings.Contains(l.Why, want) {
			t.Errorf("%s: %q, want %q", l.Name, l.Why, want)
		}
	}
	for i := range ms {
		ms[i].Locked = "S2"
	}
	m, err := Match(context.Background(), ms, Options{})
	if !errors.Is(err, ErrTooFew) || m == nil || len(m.LeftOver) != len(ms) {
		t.Errorf("all locked: %v", err)
	}
}

func TestRefusals(t *testing.T) {
	ms := plain(1, 2, 3, 4)
	pn := plain(1, 2, -3, -4)
	pn[2].PChannel, pn[3].PChannel = true, true
	two := func(within, weight float64) []Criterion {
		return []Criterion{{Key: fit.KeyVgsIdle}, {Key: fit.KeyGmIdle, Within: within, Weight: weight}}
	}
	for _, c := range []struct {
		what string
		ms   []Member
		opt  Options
		want error
	}{
		{"one device", ms[:1], Options{}, ErrTooFew},
		{"none", nil, Options{}, ErrTooFew},
		{"fewer than a set", ms, Options{Size: 5}, ErrTooFew},
		{"size 1", ms, Options{Size: 1}, ErrSize},
		{"odd n with p", pn, Options{Size: 3}, ErrSize},
		{"most without tolerance", ms, Options{Aim: Most}, ErrTolerance},
		{"negative tolerance", ms, Options{By: idle(-1)}, ErrTolerance},
		{"weight without tolerance", ms, Options{By: two(0.05, 1)}, ErrWeights},
		{"negative weight", ms, Options{By: two(0.05, -1)}, ErrWeights},
		{"gain first", ms, Options{By: two(0.05, 0)[1:]}, ErrCriteria},
		{"leakage", ms, Options{By: []Criterion{{Key: fit.KeyVgsIdle}, {Key: fit.KeyIdss}}}, ErrCriteria},
		{"twice", ms, Options{By: append(idle(0), idle(0)...)}, ErrCriteria},
		{"weight beyond all measure", member2(), Options{By: []Criterion{{Key: fit.KeyVgsIdle, Within: 1}, {Key: fit.KeyGmIdle, Within: 1e-9, Weight: 1e6}}}, ErrWeights},
		{"aim", ms, Options{Aim: "nice"}, ErrAim},
		{"no sets", ms, Options{Aim: Best}, ErrSize},
	} {
		if _, err := Match(context.Background(), c.ms, c.opt); !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", c.what, err, c.want)
		}
	}
	m := mustMatch(t, ms, Options{Sets: 3})
	if len(m.Sets) != 2 || len(m.Warnings) == 0 || m.Warnings[0].Code != fit.CodeNTooSmall {
		t.Errorf("3 sets of 4 devices: %d, %v", len(m.Sets), m.Warnings)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := Match(ctx, stock(40, 1), Options{By: twoQuantities()}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled before it began: %v", err)
	}
}

func member2() []Member { return []Member{member("a", 3, 1, 0), member("b", 3, 2, 0)} }

// TestCells: parts of a great stock hold every item once and are small enough.
func TestCells(t *testing.T) {
	p, err := newProblem(stock(901, 3), Options{Size: 4, By: twoQuantities(), Aim: Total})
	if err != nil {
		t.Fatal(err)
	}
	g := p.newGroups(t.Context(), time.Now().Add(time.Minute))
	seen := make([]int, g.n)
	for _, c := range p.cells(g) {
		if len(c) == 0 || len(c) > cellSize {
			t.Errorf("a part of %d items", len(c))
		}
		for _, i := range c {
			seen[i]++
		}
	}
	for i, n := range seen {
		if n != 1 {
			t.Errorf("item %d is in %d parts", i, n)
		}
	}
}

// TestTradeOff: wider tolerances never give fewer sets, exact or searched.
func TestTradeOff(t *testing.T) {
	m := mustMatch(t, stock(40, 4), Options{Size: 4, By: twoQuantities(), Aim: Most, TimeLimit: time.Second, At: 0.25, SourceResistor: 0.1})
	last := 0
	for _, r := range m.TradeOff {
		if r.Sets < last || r.Left != 40-4*r.Sets || !(r.Imbalance > 0) {
			t.Errorf("%+v after %d sets", r, last)
		}
		last = r.Sets
	}
	if len(m.TradeOff) != len(tolerances) {
		t.Errorf("%d rows", len(m.TradeOff))
	}
}

func TestComplementary(t *testing.T) {
	ms := plain(3.00, 3.10, 3.20, -3.01, -3.12, -3.50)
	for i := 3; i < 6; i++ {
		ms[i].PChannel = true
	}
	m := mustMatch(t, ms, Options{By: idle(0.03)})
	if !m.Complementary || len(m.Sets) != 2 || namesOf(&m.Sets[0]) != "A,D" || namesOf(&m.Sets[1]) != "B,E" || m.Bound.Kind != Optimal {
		t.Errorf("sets %+v", m.Sets)
	}
	near(t, "total", m.Total, 0.03, 1e-9)
}

func TestPackage(t *testing.T) {
	ms := plain(3.00, 3.02, 3.01, 3.03, 3.5, 3.6)
	for i := range ms {
		ms[i].Package, ms[i].Side = string(rune('p'+i/2)), string(rune('1'+i%2))
	}
	m := mustMatch(t, ms, Options{Size: 4, By: idle(0.05)})
	if len(m.Sets) != 1 || namesOf(&m.Sets[0]) != "A,B,C,D" || len(m.Sets[0].Inside) != 2 {
		t.Fatalf("sets %+v", m.Sets)
	}
	near(t, "inside", m.Sets[0].Inside[0].Spread, 0.02, 1e-9)
	near(t, "spread", m.Sets[0].Spread, 0.03, 1e-9)
}

func TestPartners(t *testing.T) {
	ms := plain(3.00, 3.05, 3.01, 3.02, 3.005, 3.3)
	ms[0].Locked = "unit 7" // the survivor
	ms[4].Locked = "S2"
	ms[5].Result.VgsIdle = fit.None()
	ps, err := PartnersFor(ms, 0, Options{By: idle(0.015), At: 0.25})
	if err != nil {
		t.Fatal(err)
	}
	var order []string
	for _, p := range ps {
		order = append(order, p.Name)
	}
	if s := strings.Join(order, ""); s != "CDBEF" {
		t.Errorf("order %s, want CDBEF", s)
	}
	if !ps[0].Within || ps[1].Within || ps[0].Refused != "" || !strings.Contains(ps[3].Refused, "S2") || !math.IsNaN(ps[4].Distance) || ps[4].Refused == "" {
		t.Errorf("partners %+v", ps)
	}
	near(t, "distance", ps[0].Distance, 0.01, 1e-9)
	if _, err := PartnersFor(ms, 5, Options{}); !errors.Is(err, ErrNoDevice) {
		t.Errorf("a device without value: %v", err)
	}
	if _, err := PartnersFor(ms, 9, Options{}); !errors.Is(err, ErrNoDevice) {
		t.Errorf("no such device: %v", err)
	}
}

// TestMoreParts: what is said of further devices is held against lots drawn anew
// from the population that the lot itself was drawn from.
func TestMoreParts(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 2026))
	lotOf := func(n int) []Member {
		var v []float64
		for range n {
			v = append(v, math.Round(1000*(3.3+0.1*rng.NormFloat64()))/1000)
		}
		ms := plain(v...)
		for i := range ms {
			ms[i].Step = 0.001
		}
		return ms
	}
	opt := Options{Size: 4, By: idle(0.01)}
	var said, gained float64
	const lots = 40
	for range lots {
		ms := lotOf(40)
		m, err := MoreParts(context.Background(), ms, opt, []int{20}, 60, 1)
		if err != nil {
			t.Fatal(err)
		}
		if m[0].Low > m[0].Sets || m[0].Sets > m[0].High || !m[0].Exact || m[0].Text == "" {
			t.Errorf("%+v", m[0])
		}
		said += m[0].Sets / lots
		now := mustMatch(t, ms, Options{Size: 4, By: idle(0.01), NoTradeOff: true})
		then := mustMatch(t, append(ms, lotOf(20)...), Options{Size: 4, By: idle(0.01), NoTradeOff: true})
		gained += float64(len(then.Sets)-len(now.Sets)) / lots
	}
	t.Logf("said %.2f, gained %.2f sets", said, gained)
	near(t, "mean gain", said, gained, 0.8)
	if _, err := MoreParts(context.Background(), lotOf(9), Options{}, []int{5}, 0, 1); !errors.Is(err, ErrTolerance) {
		t.Errorf("without tolerance: %v", err)
	}
}
