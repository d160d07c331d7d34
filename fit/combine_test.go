package fit

import (
	"math"
	"strings"
	"testing"
)

func quantity(v, u, abs float64) Quantity {
	return Quantity{Value: v, U: u, UBetween: math.NaN(), UAbsolute: abs, N: 4}
}

func measured(v, u, abs float64) Result {
	r := NewResult()
	r.State, r.Method = Measured, "current"
	r.Vgsth = quantity(v, u, abs)
	return r
}

func TestCombine(t *testing.T) {
	// Weighted mean of 3.000 ± 0.001 and 3.002 ± 0.002: weights 4 : 1, 3.0004 ±
	// 0.000894; the common 10 mV of the gate meter stays.
	abs := func(u float64) float64 { return math.Hypot(u, 10e-3) }
	r := Combine([]Result{measured(3.000, 1e-3, abs(1e-3)), measured(3.002, 2e-3, abs(2e-3))}, []string{"up", "down"})
	near(t, "mean", r.Vgsth.Value, 3.0004, 1e-9)
	near(t, "u", r.Vgsth.U, 0.894427e-3, 1e-8)
	near(t, "absolute u", r.Vgsth.UAbsolute, math.Hypot(0.894427e-3, 10e-3), 1e-7)
	if r.Vgsth.N != 8 || !math.IsNaN(r.Vgsth.UBetween) || len(r.Warnings) != 0 {
		t.Errorf("n %d, warnings %v", r.Vgsth.N, r.Warnings)
	}
	// Scatter beyond the stated u widens it: ±1 mV three times, spread over 2 mV.
	three := []Result{measured(2.999, 0.5e-3, 0), measured(3.000, 0.5e-3, 0), measured(3.001, 0.5e-3, 0)}
	near(t, "widened u", Combine(three, []string{"up", "up", "down"}).Vgsth.U, 1e-3/math.Sqrt(3), 1e-9)

	// 5 mV apart with 1 mV each: more than 3√2 mV.
	apart := []Result{measured(3.005, 1e-3, 0), measured(3.000, 1e-3, 0)}
	r = Combine(apart, []string{"down", "up"})
	near(t, "the first up sweep", r.Vgsth.Value, 3.000, 0)
	if !r.Has(CodeSweepsDisagree) || !r.Has(CodeHeating) || r.Has(CodeHeatingNotChecked) {
		t.Errorf("codes %s", codesOf(r))
	}
	r = Combine(apart, []string{"up", "up"})
	near(t, "the first up sweep", r.Vgsth.Value, 3.005, 0)
	if !r.Has(CodeSweepsDisagree) || r.Has(CodeHeating) || !r.Has(CodeHeatingNotChecked) {
		t.Errorf("codes %s", codesOf(r))
	}
	// Both sides of the limit: 3√2 = 4.243 mV.
	for d, hot := range map[float64]bool{4.2e-3: false, 4.3e-3: true} {
		r = Combine([]Result{measured(3, 1e-3, 0), measured(3+d, 1e-3, 0)}, []string{"up", "down"})
		if r.Has(CodeHeating) != hot || r.Has(CodeSweepsDisagree) != hot {
			t.Errorf("%g V apart: %s", d, codesOf(r))
		}
	}
}

func TestCombineDirections(t *testing.T) {
	one := []Result{measured(3, 1e-3, 0)}
	for _, c := range []struct {
		dirs []string
		said bool
	}{{[]string{"up"}, true}, {[]string{"down"}, true}, {[]string{"spot"}, false}, {nil, true}} {
		if r := Combine(one, c.dirs); r.Has(CodeHeatingNotChecked) != c.said {
			t.Errorf("%v: %s", c.dirs, codesOf(r))
		}
	}
	if r := Combine(nil, nil); r.State != Declined {
		t.Errorf("no sweep: %s", r.State)
	}
}

func TestCombineStates(t *testing.T) {
	bad := NewResult()
	bad.State, bad.Why = Declined, "Because."
	r := Combine([]Result{bad, measured(3, 1e-3, 0)}, []string{"up", "down"})
	if r.State != Measured || !r.Has(CodeSweepsDisagree) {
		t.Errorf("%s, %s", r.State, codesOf(r))
	}
	near(t, "the one that has a value", r.Vgsth.Value, 3, 0)
	r = Combine([]Result{bad, bad}, []string{"up", "down"})
	if r.State != Declined || r.Why == "" || r.Vgsth.Ok() || r.Has(CodeSweepsDisagree) {
		t.Errorf("%s %q %v", r.State, r.Why, r.Warnings)
	}
}

// The inputs stay as they are, and thresholds of different methods are not
// averaged.
func TestCombineMethods(t *testing.T) {
	a, b := measured(3, 1e-3, 0), measured(3.001, 1e-3, 0)
	a.Method, b.Method = "sqrt", "current"
	a.Vt = quantity(2.9, 1e-3, 0)
	a.VtBy = map[string]Threshold{"sqrt": {Vt: a.Vt, From: 3, To: 9}}
	a.Warnings = []Warning{{CodeNoAccuracy, "x"}}
	b.Warnings = []Warning{{CodeNoAccuracy, "x"}, {CodeOverload, "y"}}
	a.LeftOut = []LeftOut{{Index: 1}}
	r := Combine([]Result{a, b}, []string{"up", "down"})
	if r.Method != "sqrt" || r.Vt.Value != 2.9 || r.VtBy["sqrt"].From != 3 || r.LeftOut != nil {
		t.Errorf("%q %v %v", r.Method, r.Vt, r.VtBy)
	}
	if len(r.Warnings) != 2 {
		t.Errorf("warnings are not joined once: %v", r.Warnings)
	}
	if len(a.LeftOut) != 1 || len(a.Warnings) != 1 || len(b.Warnings) != 2 {
		t.Error("an input was changed")
	}
	b.Method, b.Vt = "sqrt", quantity(2.902, 1e-3, 0)
	b.VtBy = map[string]Threshold{"sqrt": {Vt: b.Vt, From: 2, To: 8}}
	r = Combine([]Result{a, b}, []string{"up", "down"})
	near(t, "V_T", r.Vt.Value, 2.901, 1e-9)
	near(t, "V_T by method", r.VtBy["sqrt"].Vt.Value, 2.901, 1e-9)
}

// A part that warms up: the down sweep lies lower at the same current
// (self-made: -4 mV/K and 5 K).
func TestHeatingOnCurves(t *testing.T) {
	b := simBench{circuit: Fixed, vds: 10}
	up := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	down := up
	s := b.setup()
	s.TestCurrent, s.IdleCurrent = 1e-3, 100e-3
	for _, kelvin := range []float64{0, 5} {
		down.vt = 3 - 4e-3*kelvin
		rs := []Result{
			One(up.sweep(randomSource(1), b, handheld(), 2.3, 3.6, 0.03, 0.01), s),
			One(down.sweep(randomSource(2), b, handheld(), 2.3, 3.6, 0.03, 0.01), s),
		}
		r := Combine(rs, []string{"up", "down"})
		if r.Has(CodeHeating) != (kelvin > 0) {
			t.Errorf("%g K: %s", kelvin, codesOf(r))
		}
		if kelvin == 0 {
			near(t, "mean", r.VgsIdle.Value, up.gateFor(b, 100e-3), 1.5e-3)
		}
	}
	if text := warningText(Combine([]Result{measured(3, 1e-4, 0), measured(2.9, 1e-4, 0)}, []string{"up", "down"}), CodeHeating); !strings.Contains(text, "100 mV") {
		t.Errorf("the distance is not told: %s", text)
	}
}

// The sentence names the quantity in words and tells both numbers with their
// unit and sweep.
func TestDisagreementInWords(t *testing.T) {
	a, b := measured(3.381, 1e-3, 0), measured(3.301, 1e-3, 0)
	a.VgsIdle, b.VgsIdle = quantity(3.5, 1e-3, 0), quantity(3.7, 1e-3, 0)
	for _, c := range []struct {
		dirs []string
		want []string
	}{
		{[]string{"down", "up"}, []string{"V_GS(th) differs", "3.3010 V up, 3.3810 V down", "Gate bias at the idle current differs", "3.7000 V up, 3.5000 V down"}},
		{[]string{"up", "up"}, []string{"3.3810 V in sweep 1, 3.3010 V in sweep 2", "3.5000 V in sweep 1, 3.7000 V in sweep 2"}},
		{nil, []string{"3.3810 V in sweep 1, 3.3010 V in sweep 2"}},
	} {
		text := warningText(Combine([]Result{a, b}, c.dirs), CodeSweepsDisagree)
		for _, want := range c.want {
			if !strings.Contains(text, want) {
				t.Errorf("%v: %q is not in %q", c.dirs, want, text)
			}
		}
		for _, k := range Keys {
			if strings.Contains(text, string(k)) {
				t.Errorf("%v: the key %s stands in %q", c.dirs, k, text)
			}
		}
	}
	for _, k := range Keys {
		if keyWords[k] == "" {
			t.Errorf("no words for %s", k)
		}
	}
}
