package bias

import (
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"os"
	"strconv"
	"testing"

	"gatesill/fit"
	"gatesill/fit/lot"
)

var nan = math.NaN()

// device is one with that gate voltage at its idle current and that transconductance there.
func device(name string, v, gm float64) lot.Device {
	r := fit.NewResult()
	r.State, r.VgsIdle, r.GmIdle = fit.Measured, fit.None(), fit.None()
	r.VgsIdle.Value, r.GmIdle.Value = v, gm
	return lot.Device{Name: name, Result: r}
}

// rowsOf reads a file of testdata/scenarios.
func rowsOf(t *testing.T, file string) [][]string {
	t.Helper()
	f, err := os.Open("../../testdata/scenarios/" + file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows[1:]
}

func numberOf(t *testing.T, text string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// scenarioLot is one of the two lots of testdata/scenarios/s4_lots.csv.
func scenarioLot(t *testing.T, name string) Lot {
	t.Helper()
	l := Lot{Name: name, Populations: 1}
	for _, row := range rowsOf(t, "s4_lots.csv") {
		if row[0] == name {
			l.Devices = append(l.Devices, device(row[1], numberOf(t, row[2]), nan))
		}
	}
	if len(l.Devices) != 30 {
		t.Fatalf("lot %s: %d devices", name, len(l.Devices))
	}
	return l
}

func planOf(t *testing.T, l Lot, o Options) *Plan {
	t.Helper()
	p, err := Of(l, o)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// TestScenarioLots checks the arithmetic that goes with testdata/scenarios/s4_lots.csv, an invented
// pair of lots: centres, tolerance interval, coverage with its bound, resistors.
func TestScenarioLots(t *testing.T) {
	o := Options{Idle: 0.25, Beta: 3.8, Tempco: NoTempco(), Temp: nan, Series: []Series{E96, E24},
		Network: &Network{Supply: 8, Top: 1960, Bottom: 1200}}
	old, now := planOf(t, scenarioLot(t, "2431"), o), planOf(t, scenarioLot(t, "2612"), o)
	near(t, "old centre", old.Centre, 3.042, 0.0005)
	near(t, "new centre", now.Centre, 3.188, 0.0006)
	near(t, "band", now.Band.Low, 3.006, 0.0006)
	near(t, "band", now.Band.High, 3.369, 0.0006)
	if now.By != "mean" {
		t.Error(now.By)
	}
	// 8·1.2/3.02 and 8·1.2/3.0.
	for _, c := range now.Choices {
		if c.Change != ChangeTop {
			continue
		}
		want := map[Series]float64{E96: 1820, E24: 1800}[c.Series]
		if c.Network.Top != want || math.Abs(c.Gate-8*1200/(want+1200)) > 1e-9 {
			t.Errorf("%s: %g ohm, %g V", c.Series, c.Network.Top, c.Gate)
		}
	}
	// At the old centre: 1.9 A/V²·(0.3627-0.145)² V² = 90 mA.
	near(t, "at the old centre", now.AtCentre(old.Centre).I, 0.090, 0.001)
	reach := Range{2.90, 3.25}
	o.Reach, o.Network = &reach, nil
	old, now = planOf(t, scenarioLot(t, "2431"), o), planOf(t, scenarioLot(t, "2612"), o)
	if c := old.Now.Covered; c.Count != 30 || c.Of != 30 {
		t.Errorf("old lot: %+v", c)
	}
	if c := now.Now.Covered; c.Count != 22 || len(c.Outside) != 8 {
		t.Errorf("new lot: %+v", c)
	}
	near(t, "share outside", now.Now.Covered.Upper, 0.43, 0.005)
}

// TestRecentre: the trimmer covers the range on every board, the next smaller value
// does not with any resistor of the series.
func TestRecentre(t *testing.T) {
	for _, in := range []string{AtGate, InBottom} {
		n := Network{Supply: 8, SupplyTol: 0.04, Top: 1960, Bottom: 1200, Tol: 0.01, TrimTol: 0.1, Trimmer: 100, In: in}
		want := Range{3.006, 3.369}
		r := n.recentre([]Series{E96}, want)
		if !r.Found || r.Sure.Low > want.Low || r.Sure.High < want.High {
			t.Fatalf("%s: %+v", in, r)
		}
		if r.From < 0 || r.To > 1 || r.From >= r.To {
			t.Errorf("%s: settings %g to %g", in, r.From, r.To)
		}
		smaller := n
		smaller.Trimmer = r.Network.Trimmer / 2
		if f := r.Network.Trimmer; math.Mod(math.Log10(f/5)+10, 1) < 1e-9 {
			smaller.Trimmer = f / 2.5
		}
		for _, d := range E96.Decade() {
			for _, e := range []float64{1, 10, 100} {
				m := smaller
				m.Top = float64(d) * e
				if s := m.Sure(); s.Low <= want.Low && s.High >= want.High {
					t.Fatalf("%s: %g ohm with %g ohm would do", in, m.Trimmer, m.Top)
				}
			}
		}
	}
	n := Network{Supply: 8, SupplyTol: 0.9, Top: 1960, Bottom: 1200}
	if r := n.recentre([]Series{E96}, Range{3, 3.4}); r.Found {
		t.Errorf("a supply of anything: %+v", r)
	}
}

func TestRefusals(t *testing.T) {
	base := Lot{Name: "L", Populations: 1, Devices: []lot.Device{device("a", 3, 1), device("b", 3.1, 1)}}
	o := func(n *Network) Options {
		return Options{Idle: 0.25, Beta: nan, Tempco: NoTempco(), Temp: nan, Network: n}
	}
	for _, c := range []struct {
		what string
		l    Lot
		o    Options
		want error
	}{
		{"no idle current", base, Options{Idle: nan}, ErrIdle},
		{"no value", Lot{Devices: []lot.Device{device("a", nan, 1)}}, o(nil), ErrNone},
		{"supply below", base, o(&Network{Supply: 2.5, Top: 1, Bottom: 1}), ErrSupply},
		{"wrong sign", base, o(&Network{Supply: -8, Top: 1, Bottom: 1}), ErrSupply},
		{"negative resistor", base, o(&Network{Supply: 8, Top: -1, Bottom: 1}), ErrNetwork},
	} {
		if _, err := Of(c.l, c.o); !errors.Is(err, c.want) {
			t.Errorf("%s: %v", c.what, err)
		}
	}
	p := planOf(t, base, o(&Network{Supply: 8, Top: 1960, Bottom: 1200}))
	if p.Band.Declined == "" || p.Trim != nil || p.By != "median" {
		t.Errorf("two devices: %+v", p.Band)
	}
	// Spots without a gain: no current is claimed.
	bare := Lot{Name: "L", Populations: 1, Devices: []lot.Device{device("a", 3, nan), device("b", 3.1, nan)}}
	p = planOf(t, bare, o(&Network{Supply: 8, Top: 1960, Bottom: 1200}))
	if s := p.Now.Idle; s.Known != 0 || s.Unknown != 2 || !math.IsNaN(s.Median.I) || !math.IsNaN(p.Thermal.ZeroGate) {
		t.Errorf("a current out of nothing: %+v", s)
	}
}

// TestMirrored: a p-channel lot is the n-channel one with every voltage negative.
func TestMirrored(t *testing.T) {
	var up, down Lot
	down.PChannel = true
	for k := range 12 {
		v := 3 + 0.02*float64(k*k%12)
		up.Devices = append(up.Devices, device(fmt.Sprint(k), v, 1.4))
		down.Devices = append(down.Devices, device(fmt.Sprint(k), -v, -1.4))
	}
	tempco := Tempco{Value: -4e-3, Basis: TempcoGiven}
	o := Options{Idle: 0.25, Beta: nan, Tempco: tempco, Temp: 30, IdleTol: 0.2, Network: &Network{Supply: 8, SupplyTol: 0.02, Top: 1820, Bottom: 1200, Tol: 0.01, Trimmer: 100, In: AtGate, TrimTol: 0.1}}
	a := planOf(t, up, o)
	n := *o.Network
	n.Supply, o.Network, o.Tempco.Value = -8, &n, 4e-3
	b := planOf(t, down, o)
	near(t, "centre", b.Centre, -a.Centre, 1e-12)
	near(t, "band", b.Band.Low, -a.Band.High, 1e-9)
	near(t, "median", b.Now.Idle.Median.I, a.Now.Idle.Median.I, 1e-12)
	near(t, "worst", b.Now.Worst.Least.I, a.Now.Worst.Least.I, 1e-12)
	near(t, "worst", b.Now.Worst.Most.I, a.Now.Worst.Most.I, 1e-12)
	near(t, "rate", b.Thermal.Rate, a.Thermal.Rate, 1e-12)
	near(t, "zero point", b.Thermal.ZeroGate, -a.Thermal.ZeroGate, 1e-12)
	near(t, "typical", b.Thermal.Typical, -a.Thermal.Typical, 1e-12)
	near(t, "typical", b.Thermal.TypicalLow, -a.Thermal.TypicalHigh, 1e-12)
	if a.Now.Covered.Count != b.Now.Covered.Count || a.Now.Always.Count != b.Now.Always.Count {
		t.Error(a.Now.Covered, b.Now.Covered)
	}
	for i := range a.Units {
		if d := a.Units[i].Setting - b.Units[i].Setting; !(math.Abs(d) < 1e-9) && !math.IsNaN(d) {
			t.Errorf("setting of %s: %g and %g", a.Units[i].Name, a.Units[i].Setting, b.Units[i].Setting)
		}
	}
}

// TestDominance: 4 % of a supply is 73 mV as a rectangle, more than a lot of 5 mV and
// less than one of 200 mV.
func TestDominance(t *testing.T) {
	o := Options{Idle: 0.25, Beta: 3.8, Tempco: NoTempco(), Temp: nan, Network: &Network{Supply: 8, SupplyTol: 0.04, Top: 1820, Bottom: 1200, Tol: 0.001}}
	for _, c := range []struct {
		step float64
		want string
	}{{0.005, "supply"}, {0.2, ""}} {
		var l Lot
		for k := range 9 {
			l.Devices = append(l.Devices, device(fmt.Sprint(k), 3.18+c.step*math.Sin(float64(k)), nan))
		}
		p := planOf(t, l, o)
		own := 0.04 * 0.04 * 3.1788 * 3.1788 / 3
		near(t, "share", p.Now.Share, own/(own+p.SD*p.SD), 2e-3)
		if p.Now.Dominant != c.want {
			t.Errorf("step %g: %q", c.step, p.Now.Dominant)
		}
	}
}
