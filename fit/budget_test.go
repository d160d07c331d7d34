package fit

import (
	"fmt"
	"math"
	"slices"
	"testing"
)

// Typical values (common practice, no source) give -3.9, -3.0 and +1.7 mV/K at
// overdrives of 0.05, 0.36 and 2 V of a square law, I/g_m = v/2, at 300 K; and the
// same by differences of V_GS at constant current between two temperatures.
func TestGatePerKelvin(t *testing.T) {
	for _, x := range []struct{ v, want float64 }{{0.05, -3.9e-3}, {0.36, -3.0e-3}, {2, 1.7e-3}} {
		near(t, fmt.Sprintf("mV/K at %g V", x.v), gatePerKelvin(x.v/2, 300), x.want, 0.05e-3)
		gate := func(kelvin float64) float64 { // V_T + √(2I/β), β = (T/T0)^-α
			i := x.v * x.v / 2
			return 3 - kappa*(kelvin-300) + math.Sqrt(2*i*math.Pow(kelvin/300, alpha))
		}
		near(t, "by differences", gatePerKelvin(x.v/2, 300), (gate(300.1)-gate(299.9))/0.2, 1e-8)
	}
	// With mobility reduction I/g_m is v (1+θv)/(2+θv).
	const theta, v = 0.3, 1.2
	gate := func(kelvin float64) float64 {
		i := v * v / 2 / (1 + theta*v) * math.Pow(kelvin/300, alpha) // at β = 1
		return 3 - kappa*(kelvin-300) + (theta*i + math.Sqrt(theta*theta*i*i+2*i))
	}
	near(t, "with θ", gatePerKelvin(v*(1+theta*v)/(2+theta*v), 300), (gate(300.1)-gate(299.9))/0.2, 1e-8)
	// Where the drift of the threshold and of the mobility cancel: v = 2κT/α.
	near(t, "no drift", gatePerKelvin(kappa*300/alpha, 300), 0, 1e-15)
}

// 0.5 % + 2 counts of 1 mV at 3 V is a limit of 17 mV: the parts add up to it.
func TestStatementParts(t *testing.T) {
	a := Accuracy{Percent: 0.5, Counts: 2, Resolution: 1e-3}
	gain, offset := a.parts(3)
	near(t, "whole", math.Hypot(gain, offset), 17e-3/math.Sqrt(3), 1e-12)
	near(t, "counts", offset, 2e-3/math.Sqrt(3), 1e-12)
	if gain, offset := (Accuracy{Resolution: 1e-3}).parts(3); !math.IsNaN(gain) || !math.IsNaN(offset) {
		t.Errorf("no statement: %g %g", gain, offset)
	}
	if gain, offset := (Accuracy{Counts: 2, Resolution: 1e-3, Divisor: 2}).parts(3); gain != 0 || offset != 1e-3 {
		t.Errorf("counts only, k = 2: %g %g", gain, offset)
	}
}

// budgetSetups are benches with statements in every circuit, spots and a p-channel
// part, self-made.
func budgetSetups(t *testing.T) map[string]func(seed uint64) (Curve, Setup) {
	t.Helper()
	stated := func(s Setup) Setup {
		s.Gate = []Accuracy{{Top: 6, Percent: 0.5, Counts: 2, Resolution: 1e-3}}
		s.Current = handheld().current.statement(1, 3)
		s.Load = handheld().load.statement(0.5, 2)
		s.Drain = []Accuracy{{Top: 60, Percent: 0.5, Counts: 2, Resolution: 1e-2}}
		s.TestCurrent, s.IdleCurrent, s.Budget = 1e-3, 100e-3, true
		return s
	}
	swept := func(b simBench, step float64) func(uint64) (Curve, Setup) {
		return func(seed uint64) (Curve, Setup) {
			r := randomSource(seed)
			d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()), n: 1.4, theta: 0.1}
			return d.sweep(r, b, handheld(), d.vt-0.8, d.vt+0.9, step, step/5), stated(b.setup())
		}
	}
	all := map[string]func(uint64) (Curve, Setup){
		"load":         swept(simBench{circuit: Load, rl: 10, vdd: 12}, 0.05),
		"diode":        swept(simBench{circuit: Diode}, 0.05),
		"fixed":        swept(simBench{circuit: Fixed, vds: 10}, 0.05),
		"fine":         swept(simBench{circuit: Diode}, 0.005),
		"small V_DS":   swept(simBench{circuit: Fixed, vds: 0.1}, 0.05),
		"coarse steps": swept(simBench{circuit: Fixed, vds: 10}, 0.3),
	}
	all["p-channel"] = func(seed uint64) (Curve, Setup) {
		c, s := all["diode"](seed)
		for k := range c.Vg {
			c.Vg[k], c.Id[k] = -c.Vg[k], -c.Id[k]
		}
		s.PChannel, s.Temperature = true, 25
		return c, s
	}
	all["burden"] = func(seed uint64) (Curve, Setup) {
		c, s := all["small V_DS"](seed)
		s.Burden = 0.1
		return c, s
	}
	all["paired"] = func(seed uint64) (Curve, Setup) {
		c, s := all["load"](seed)
		for k := range c.Vg {
			c.VgBound = append(c.VgBound, 1e-3+1e-4*float64(k%7))
		}
		return c, s
	}
	all["two spots"] = func(seed uint64) (Curve, Setup) {
		return Curve{Vg: []float64{3.012, 3.334}, Id: []float64{1e-3, 100e-3}}, stated(simBench{circuit: Diode}.setup())
	}
	return all
}

// The lines of every budget are the computation: their squares add up to those of
// the three uncertainties, each sum holds the one before it, and without the table
// the numbers are the same.
func TestBudgetAddsUp(t *testing.T) {
	seen, quantities := map[Input]bool{}, 0
	check := func(name string, k Key, q Quantity) {
		t.Helper()
		if !q.Ok() {
			return
		}
		if q.Budget == nil {
			t.Errorf("%s: %s has no budget: %+v", name, k, q)
			return
		}
		quantities++
		for s, want := range map[Sum]float64{Within: q.U, Between: q.UBetween, Absolute: q.UAbsolute} {
			if got := q.Budget.Total(s).U; !(math.Abs(got-want) <= 1e-12*want) {
				t.Errorf("%s: %s, sum %d: lines give %g, the quantity has %g", name, k, s, got, want)
			}
		}
		if !(q.U <= q.UBetween && q.UBetween <= q.UAbsolute) {
			t.Errorf("%s: %s: %g, %g, %g do not grow", name, k, q.U, q.UBetween, q.UAbsolute)
		}
		for _, c := range q.Budget.Lines {
			seen[c.Input] = true
			if c.Name == "" || c.Type != "A" && c.Type != "B" || !(c.Nu >= 1) || !(c.U > 0) || !(c.Share() > 0) {
				t.Errorf("%s: %s: line %+v", name, k, c)
			}
		}
		total := q.Budget.Total(Absolute)
		if !(total.K > 1.6 && total.Nu > 0) || math.Abs(total.Expanded-total.K*q.UAbsolute) > 1e-12*total.Expanded {
			t.Errorf("%s: %s: %+v", name, k, total)
		}
	}
	for name, draw := range budgetSetups(t) {
		for seed := range uint64(12) {
			c, s := draw(seed)
			var rs []Result
			for range 1 {
				rs = append(rs, One(c, s))
			}
			other, _ := draw(seed) // the same device, read once more
			for k := range other.Vg {
				other.Vg[k] += 1e-3 * float64(k%3-1)
			}
			rs = append(rs, One(other, s))
			again := Combine(rs, []string{"up", "down"}) // the same with the device put in anew
			for _, k := range []Key{KeyVgsth, KeyVgsIdle} {
				Repeated(&again, k, []Quantity{*rs[0].At(k), *rs[1].At(k)}, 10e-3, 10e-3, 20)
			}
			for _, r := range append(slices.Clone(rs), Combine(rs, []string{"up", "down"}), again) {
				for _, k := range Keys {
					check(name, k, *r.At(k))
				}
				for method, x := range r.VtBy {
					check(name+" "+method, KeyVt, x.Vt)
				}
			}
			s.Budget = false
			plain := One(c, s)
			for _, k := range Keys {
				a, b := *plain.At(k), *rs[0].At(k)
				b.Budget = nil
				if a.Budget != nil || fmt.Sprint(a) != fmt.Sprint(b) {
					t.Errorf("%s: %s: %v without the table, %v with it", name, k, a, b)
				}
			}
		}
	}
	t.Logf("%d quantities", quantities)
	for in := range inputCount {
		if !seen[in] && in != InTwoCurrents {
			t.Errorf("no budget has %s", inputInfos[in].name)
		}
	}
}

// What is missing makes exactly the sums null that it enters.
func TestUncertaintyNulls(t *testing.T) {
	c, s := budgetSetups(t)["load"](3)
	known := func(q Quantity) string {
		return fmt.Sprint(!math.IsNaN(q.U), !math.IsNaN(q.UBetween), !math.IsNaN(q.UAbsolute))
	}
	for _, x := range []struct {
		name   string
		change func(s *Setup)
		gate   string // V_GS(th): within, between, absolute known
		beta   string
	}{
		{"all stated", func(*Setup) {}, "true true true", "true true true"},
		{"no gate meter", func(s *Setup) { s.Gate = nil }, "true false false", "true true false"},
		{"gate: step only", func(s *Setup) { s.Gate = []Accuracy{{Top: 6, Resolution: 1e-3}} }, "true false false", "true true false"},
		{"no load meter", func(s *Setup) { s.Load = nil }, "true false false", "true false false"},
		{"no tolerance", func(s *Setup) { s.RLTol = math.NaN() }, "true true false", "true true false"},
	} {
		s := s
		x.change(&s)
		r := One(c, s)
		if got := known(r.Vgsth); got != x.gate {
			t.Errorf("%s: V_GS(th) %s, want %s", x.name, got, x.gate)
		}
		if got := known(r.Beta); got != x.beta {
			t.Errorf("%s: beta %s, want %s", x.name, got, x.beta)
		}
		if want := x.name != "all stated"; r.Has(CodeNoAccuracy) != want {
			t.Errorf("%s: said %v", x.name, !want)
		}
	}
}

// Recording the temperature is worth something: 1 K against ±3 K.
func TestRecordedTemperature(t *testing.T) {
	c, s := budgetSetups(t)["diode"](5)
	line := func(s Setup) Contribution {
		for _, x := range One(c, s).VgsIdle.Budget.Lines {
			if x.Input == InTemperature {
				return x
			}
		}
		return Contribution{}
	}
	without := line(s)
	s.Temperature = 25
	with := line(s)
	near(t, "u, K", without.U, math.Sqrt(3), 1e-12)
	near(t, "u, K", with.U, 1, 1e-12)
	if without.Basis == with.Basis || with.Shape != normal || without.Shape != rectangular {
		t.Errorf("%+v, %+v", without, with)
	}
	near(t, "V/K", with.C, -3.1e-3, 0.5e-3)
	// The gate voltage of a p-channel part is negative, and comes nearer to 0.
	c, s = budgetSetups(t)["p-channel"](5)
	near(t, "V/K, p-channel", line(s).C, 3.1e-3, 0.5e-3)
}

// Meters that do not read at one instant: the greater bound of the two points around a crossing,
// as three standard uncertainties, is one more input to every gate voltage and to nothing else; a bound that is not there or
// not known leaves every digit as it was.
func TestPairing(t *testing.T) {
	line := func(q Quantity) (u float64) {
		for _, x := range q.Budget.Lines {
			if x.Input == InPairing {
				if u != 0 || x.Shape != normal || x.C*x.C != 1 || x.Name == "" {
					t.Errorf("line %+v", x)
				}
				u = x.U
			}
		}
		return u
	}
	for _, name := range []string{"load", "diode", "fixed", "fine", "p-channel", "two spots", "coarse steps"} {
		c, s := budgetSetups(t)[name](3)
		plain := One(c, s)
		bounds := func(f func(k int) float64) Result {
			c := c
			for k := range c.Vg {
				c.VgBound = append(c.VgBound, f(k))
			}
			return One(c, s)
		}
		for what, r := range map[string]Result{
			"0": bounds(func(int) float64 { return 0 }), "not known": bounds(func(int) float64 { return math.NaN() }),
		} {
			for _, k := range Keys {
				if x, y := fmt.Sprintf("%+v", *r.At(k)), fmt.Sprintf("%+v", *plain.At(k)); !sameButBudget(*r.At(k), *plain.At(k)) {
					t.Errorf("%s: bound %s: %s %s, without %s", name, what, k, x, y)
				}
			}
		}
		const bound = 4e-3
		r := bounds(func(int) float64 { return bound })
		for _, k := range []Key{KeyVgsth, KeyVgsIdle, KeyVt} {
			q, p := *r.At(k), *plain.At(k)
			if !q.Ok() || q.Budget == nil {
				continue
			}
			near(t, name+" "+string(k)+" input", line(q), bound/3, 1e-12)
			near(t, name+" "+string(k)+" value", q.Value, p.Value, 0)
			near(t, name+" "+string(k)+" U", q.U, math.Hypot(p.U, bound/3), 1e-12)
			if !math.IsNaN(p.UAbsolute) {
				near(t, name+" "+string(k)+" U absolute", q.UAbsolute, math.Hypot(p.UAbsolute, bound/3), 1e-12)
			}
		}
		for _, k := range []Key{KeyBeta, KeyGmIdle} {
			if !sameButBudget(*r.At(k), *plain.At(k)) {
				t.Errorf("%s: %s follows the pairing: %+v, %+v", name, k, *r.At(k), *plain.At(k))
			}
		}
		// Of the points around the crossing only.
		far := bounds(func(k int) float64 {
			if math.Abs(math.Abs(c.Vg[k])-math.Abs(plain.Vgsth.Value)) > 0.4 {
				return bound
			}
			return 0
		})
		if far.Vgsth.U != plain.Vgsth.U {
			t.Errorf("%s: a bound far off counts: %g, %g", name, far.Vgsth.U, plain.Vgsth.U)
		}
	}
}

func sameButBudget(a, b Quantity) bool {
	a.Budget, b.Budget = nil, nil
	return fmt.Sprint(a) == fmt.Sprint(b)
}
