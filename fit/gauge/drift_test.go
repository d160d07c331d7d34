package gauge

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// Two devices put in at places 1, 4 and 2, 3: within the devices x is ∓1.5 and ∓0.5, y
// ∓3 and ∓1 mV, so the slope is (2·4.5 + 2·0.5)/(2·2.25 + 2·0.25) = 2 mV a place, with
// no scatter left; one degree of freedom is too few to say so, two more devices make it
// three.
func TestDriftByHand(t *testing.T) {
	at := func(device string, place int, mv float64) Measuring {
		return Measuring{Device: device, Place: place, Value: 3 + mv*1e-3, U: math.NaN()}
	}
	ms := []Measuring{at("A", 1, 0), at("B", 2, 100), at("B", 3, 102), at("A", 4, 6)}
	if d := DriftsOf(ms, None()); len(d) != 0 {
		t.Errorf("one degree of freedom: %+v", d)
	}
	ms = append(ms, at("C", 5, 50), at("D", 6, 70), at("C", 7, 54), at("D", 8, 74))
	d := DriftsOf(ms, None())
	if len(d) != 1 || !d[0].Again {
		t.Fatalf("%+v", d)
	}
	near(t, "slope", d[0].PerPlace.Value, 2e-3, 1e-12)
	near(t, "over the session", d[0].Over, 14e-3, 1e-12)
	near(t, "without the drift", d[0].Rest, 0, 1e-9)
	if !d[0].Seen() {
		t.Errorf("not seen: p %v", d[0].P)
	}
}

func TestFirstAgain(t *testing.T) {
	var ms []Measuring
	for i := range 12 {
		ms = append(ms, Measuring{Device: fmt.Sprint("D", i), Place: i + 1, Value: 3 + 0.01*float64((i*7)%12), U: 0.5e-3})
	}
	ms[11].Device, ms[11].Value = "D0", ms[0].Value+1.5e-3
	d := DriftsOf(ms, Given(0.4e-3)) // the reading's own u is larger
	if len(d) != 1 || d[0].First == nil || !d[0].First.Beyond {
		t.Fatalf("1.5 mV against 2√2·0.5 mV = 1.41 mV: %+v", d)
	}
	ms[11].Value = ms[0].Value + 1.4e-3
	if d := DriftsOf(ms, Given(0.4e-3)); d[0].First.Beyond {
		t.Errorf("1.40 mV against 1.41 mV: beyond")
	}
	known := Repeatability{Estimate: Estimate{Value: 1e-3, DF: 20}, Devices: 10}
	ms[11].Value = ms[0].Value + 2.5e-3
	if d := DriftsOf(ms, known); d[0].First.Beyond {
		t.Errorf("2.5 mV against 2.83 mV: beyond")
	}
	ms[11].Value = ms[0].Value + 2.9e-3
	if d := DriftsOf(ms, known); !d[0].First.Beyond {
		t.Errorf("2.9 mV against 2.83 mV: within")
	}
	// Without a repeatability a change says nothing.
	if d := DriftsOf(ms, None()); d[0].First.Beyond {
		t.Errorf("beyond without a repeatability")
	}
}

// Without drift 5 % of benches at most show one; one of 0.2 mV a place is seen by
// devices put in again where a single round does not show it.
func TestDriftFalseAlarms(t *testing.T) {
	r := rand.New(rand.NewPCG(13, 8))
	const runs = 250
	count := func(b bench) (n int) {
		for range runs {
			for _, d := range DriftsOf(b.run(r), None()) {
				if d.Seen() {
					n++
					break
				}
			}
		}
		return n
	}
	for name, b := range map[string]bench{
		"put in again": {devices: 10, operators: 3, rounds: 3, lot: 60e-3, repeat: 1.5e-3},
		"in order":     {devices: 30, operators: 2, rounds: 1, lot: 60e-3, repeat: 1.5e-3},
	} {
		// Four standard deviations of the count.
		if n := count(b); float64(n) > 0.05*runs+4*math.Sqrt(0.05*0.95*runs) {
			t.Errorf("%s: a drift in %d of %d benches without one", name, n, runs)
		}
	}
	again := count(bench{devices: 10, operators: 1, rounds: 3, lot: 60e-3, repeat: 1.5e-3, drift: 0.2e-3})
	once := count(bench{devices: 30, operators: 1, rounds: 1, lot: 60e-3, repeat: 1.5e-3, drift: 0.2e-3})
	if again < 9*runs/10 || once > runs/2 {
		t.Errorf("0.2 mV a place: seen in %d of %d with devices put in again, %d with one round", again, runs, once)
	}
}

// Values 0 1 0 1 0 ... mV about 3 V: every moving range is 1 mV, sigma 1/1.1284 mV, the
// limits 3 × 0.8862 = 2.659 mV about the mean.
func TestChartByHand(t *testing.T) {
	var ms []Measuring
	for i := range 6 {
		ms = append(ms, Measuring{Device: "K1", Control: true, Value: 3 + float64(i%2)*1e-3, Sitting: fmt.Sprint(i), Occasion: fmt.Sprint(i), Temp: 20 + float64(i), Rank: i + 1})
	}
	c := ChartsOf(ms, math.NaN())
	if len(c) != 1 || c[0].By != "session" || !c[0].Provisional || c[0].Corrected {
		t.Fatalf("%+v", c)
	}
	near(t, "mean", c[0].Centre, 3.0005, 1e-12)
	near(t, "upper limit", c[0].High, 3.0005+2.6587e-3, 1e-7)
	near(t, "moving range", c[0].RangeHigh, 3.2665e-3, 1e-7)
	if len(c[0].Outside()) != 0 {
		t.Errorf("outside: %v", c[0].Outside())
	}
	// A jump of 20 mV at the end.
	jump := append(ms[:6:6], Measuring{Device: "K1", Control: true, Value: 3.02, Sitting: "6", Occasion: "6", Temp: 26, Rank: 7})
	if c := ChartsOf(jump, math.NaN()); len(c[0].Outside()) != 1 || c[0].Outside()[0] != 7 {
		t.Errorf("a jump at point 7: outside %v", c[0].Outside())
	}
	// At -4 mV/K the fifth degree takes 20 mV off a value that rose by as much less.
	if c := ChartsOf(ms, -4e-3); !c[0].Corrected || math.Abs(c[0].Points[5].Value-(3.001+20e-3)) > 1e-12 {
		t.Errorf("corrected: %+v", c[0].Points)
	}
	ms[2].Temp = math.NaN()
	if c := ChartsOf(ms, -4e-3); c[0].Corrected {
		t.Error("corrected with a temperature missing")
	}
	// In one sitting a point is an insertion; no chart of one value.
	for i := range ms {
		ms[i].Sitting = "x"
	}
	if c := ChartsOf(ms, math.NaN()); c[0].By != "insertion" || len(c[0].Points) != 6 {
		t.Errorf("%+v", c)
	}
	if c := ChartsOf(ms[:1], math.NaN()); len(c) != 0 {
		t.Errorf("a chart of one value: %+v", c)
	}
}
