package bias

import (
	"errors"
	"math"
	"testing"

	"pgregory.net/rapid"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %v, want %v ± %v", what, got, want, tolerance)
	}
}

// Voltages by hand: 8 V over 1.82 kohm and 1.2 kohm is 8·1200/3020 = 3.1788 V.
func TestNetwork(t *testing.T) {
	n := Network{Supply: 8, Top: 1820, Bottom: 1200}
	near(t, "divider", n.At(0.5), 8*1200.0/3020, 1e-12)
	if r := n.Reach(); r.Low != r.High || !math.IsNaN(n.Setting(3)) {
		t.Error("a divider has a reach", r)
	}
	n.Trimmer, n.In = 200, AtGate
	near(t, "wiper down", n.At(0), 8*1200.0/3220, 1e-12)
	near(t, "wiper up", n.At(1), 8*1400.0/3220, 1e-12)
	near(t, "setting", n.Setting(8*1300.0/3220), 0.5, 1e-12)
	n.In = InBottom
	near(t, "shorted", n.At(0), 8*1200.0/3020, 1e-12)
	near(t, "all of it", n.At(1), 8*1400.0/3220, 1e-12)
	near(t, "setting in bottom", n.Setting(8*1300.0/3120), 0.5, 1e-12)
	// Worst case by hand: 8.32 V, top 1 % less, bottom 1 % more.
	n = Network{Supply: 8, SupplyTol: 0.04, Top: 1820, Bottom: 1200, Tol: 0.01}
	near(t, "worst", n.Tolerated(0.5).High, 8.32*1212/(1212+1820*0.99), 1e-12)
	near(t, "least", n.Tolerated(0.5).Low, 7.68*1188/(1188+1820*1.01), 1e-12)
	// The supply moves it by 4 % of 3.1788 V; the two resistors by about V·1%·(1-V/supply) each.
	parts := n.Parts(0.5)
	near(t, "by supply", parts[0].Volts, 0.04*n.At(0.5), 1e-12)
	near(t, "by top", parts[1].Volts, 0.01*n.At(0.5)*1820/3020, 2e-5)
	near(t, "root-sum-square", RootSumSquare(parts), math.Sqrt(0.12715*0.12715+2*0.019157*0.019157), 1e-4)
	for _, c := range []struct {
		n    Network
		want error
	}{
		{Network{Supply: 8, Top: -1, Bottom: 1}, ErrNetwork},
		{Network{Supply: 0, Top: 1, Bottom: 1}, ErrNetwork},
		{Network{Supply: math.NaN(), Top: 1, Bottom: 1}, ErrNetwork},
		{Network{Supply: 8, Top: 1, Bottom: 1, Trimmer: -2, In: AtGate}, ErrNetwork},
		{Network{Supply: 8, Top: 1, Bottom: 1, Trimmer: 2}, ErrNetwork},
		{Network{Supply: 8, Top: 1, Bottom: 1, Tol: 1}, ErrTolerance},
		{Network{Supply: 8, Top: 1, Bottom: math.NaN()}, nil},
	} {
		if err := c.n.Check(); !errors.Is(err, c.want) || (err == nil) != (c.want == nil) {
			t.Errorf("%+v: %v, want %v", c.n, err, c.want)
		}
	}
}

// TestNetworkHolds: whatever the network, a setting gives back its voltage, tolerances
// only widen, and what every board reaches lies within what the nominal one does.
func TestNetworkHolds(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ohm := rapid.Float64Range(10, 1e5)
		n := Network{
			Supply: rapid.SampledFrom([]float64{-12, 5, 8, 24}).Draw(t, "supply"), SupplyTol: rapid.Float64Range(0, 0.1).Draw(t, "supply tol"),
			Top: ohm.Draw(t, "top"), Bottom: ohm.Draw(t, "bottom"), Trimmer: ohm.Draw(t, "trimmer"),
			In:  rapid.SampledFrom([]string{AtGate, InBottom}).Draw(t, "in"),
			Tol: rapid.Float64Range(0, 0.1).Draw(t, "tol"), TrimTol: rapid.Float64Range(0, 0.2).Draw(t, "trim tol"),
		}
		x := rapid.Float64Range(0, 1).Draw(t, "x")
		v := n.At(x)
		if got := n.Setting(v); math.Abs(got-x) > 1e-6 {
			t.Fatalf("setting %g for the voltage at %g", got, x)
		}
		near, reach, sure := n.Tolerated(x), n.Reach(), n.Sure()
		if !near.Holds(v) || !reach.Holds(v) {
			t.Fatalf("%g V not in %v, %v", v, near, reach)
		}
		if sure.Low < reach.Low-slack || sure.High > reach.High+slack {
			t.Fatalf("every board reaches %v, the nominal one %v", sure, reach)
		}
		if half := (near.High - near.Low) / 2; RootSumSquare(n.Parts(x)) > half*1.1 {
			t.Fatalf("root-sum-square %g above the worst case %g", RootSumSquare(n.Parts(x)), half)
		}
	})
}

// TestChoicesAreNearest: no other value of the series in place of one resistor comes
// nearer to the gate voltage wanted.
func TestChoicesAreNearest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ohm := rapid.Float64Range(100, 1e4)
		n := Network{Supply: 10, Top: ohm.Draw(t, "top"), Bottom: ohm.Draw(t, "bottom")}
		if rapid.Bool().Draw(t, "trimmed") {
			n.Trimmer, n.In = rapid.Float64Range(10, 500).Draw(t, "trimmer"), rapid.SampledFrom([]string{AtGate, InBottom}).Draw(t, "in")
		}
		s := rapid.SampledFrom(AllSeries).Draw(t, "series")
		v := rapid.Float64Range(2, 7).Draw(t, "wanted")
		for _, c := range n.choices(s, v, nil) {
			if c.Change == ChangeBoth {
				if change := (c.Network.Top + c.Network.Bottom) / (n.Top + n.Bottom); change < 0.8 || change > 1.2 {
					t.Fatalf("both: the sum goes to %g of what it was", change)
				}
				for _, b := range s.Around(c.Network.Bottom, 12) {
					m := n
					m.Bottom = b
					m, _ = m.nearestTop(s, v)
					sum := (m.Top + m.Bottom) / (n.Top + n.Bottom)
					if off := math.Abs(m.At(0.5) - v); sum > 0.8 && sum < 1.2 && off < math.Abs(c.Off)-1.01e-4 {
						t.Fatalf("%s both: %+v is %g V off, %+v %g V", s, c.Network, c.Off, m, off)
					}
				}
				continue
			}
			for _, d := range decades[s] {
				for exp := 0.0; exp <= 5; exp++ {
					m := n
					if r := of(d, exp); c.Change == ChangeTop {
						m.Top = r
					} else {
						m.Bottom = r
					}
					if off := math.Abs(m.At(0.5) - v); off < math.Abs(c.Off)-1e-9 {
						t.Fatalf("%s %s: %+v is %g V off, %+v %g V", s, c.Change, c.Network, c.Off, m, off)
					}
				}
			}
		}
	})
}
