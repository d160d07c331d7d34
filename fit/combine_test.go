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

// Self-made: twelve devices swept up and down over one grid of whole multiples of
// the display's step. What the display rounds off is the same in both sweeps, and
// averaging them does not make it less; over two sweeps of a dithered display it does.
func TestCombineDisplayStep(t *testing.T) {
	const step = 1e-3
	r := randomSource(821)
	d := simDevice{law: smoothLaw, vt: 3.3, beta: 4.8, n: 1.4}
	for _, b := range offBenches {
		s := b.setup()
		s.Gate, s.TestCurrent, s.IdleCurrent = displayOnly(step), 10e-3, 150e-3
		one := One(d.sweep(r, b, exact(), 2.6, 4, 0.02, 0), s)
		two := Combine([]Result{one, one}, []string{"up", "down"})
		for _, k := range []Key{KeyVgsth, KeyVgsIdle, KeyVt} {
			u, floor := two.At(k).U, step/math.Sqrt(12)
			if one.At(k).U > floor*1.001 {
				continue // more than the step is in it
			}
			near(t, string(b.circuit)+": u of the mean of "+string(k), u, floor, 1e-9)
		}
		x := One(d.sweep(r, b, handheld(), 2.6, 4, 0.02, 0.01), s)
		y := One(d.sweep(r, b, handheld(), 2.6, 4, 0.02, 0.01), s)
		if u := Combine([]Result{x, y}, []string{"up", "up"}).VgsIdle.U; !(u < math.Max(x.VgsIdle.U, y.VgsIdle.U)) {
			t.Errorf("%s: u of the mean %.3g V, of the sweeps %.3g and %.3g V", b.circuit, u, x.VgsIdle.U, y.VgsIdle.U)
		}
	}
	// 1 and 1 mV, both the step: 1 mV. 1, 1 and 2 mV: the 1 mV stays, 1.7 mV of the third is its own.
	at := func(u ...float64) float64 {
		var rs []Result
		for _, x := range u {
			rs = append(rs, measured(3, x, 0))
		}
		return Combine(rs, []string{"up", "down", "up"}).Vgsth.U
	}
	near(t, "two at the step", at(1e-3, 1e-3), 1e-3, 1e-12)
	weights := 1/1e-6 + 1/1e-6 + 1/4e-6
	near(t, "and a worse one", at(1e-3, 1e-3, 2e-3), math.Sqrt(1e-6+3e-6/(4e-6*4e-6)/(weights*weights)), 1e-9)
	near(t, "unlike ones", at(1e-3, 2e-3), 0.894427e-3, 1e-8)
}

// A threshold that one sweep shows and the other only has; one that the leading
// sweep lacks; and values over different stretches, which are no disagreement.
func TestCombineThresholds(t *testing.T) {
	at := func(v, u float64) Threshold {
		return Threshold{Vt: quantity(v, u, math.Hypot(u, 10e-3)), Beta: quantity(2, 0.01, 0.1), From: 3, To: 9}
	}
	a, b := measured(3, 1e-3, 0), measured(3, 1e-3, 0)
	a.Method, a.Vt, a.VtBy = "curve", quantity(2.900, 1e-3, 0), map[string]Threshold{"curve": at(2.900, 1e-3), "sqrt": at(2.910, 1e-3)}
	b.Method, b.Vt, b.VtBy = "sqrt", quantity(2.912, 1e-3, 0), map[string]Threshold{"sqrt": at(2.912, 1e-3)}
	r := Combine([]Result{a, b}, []string{"up", "down"})
	if r.Method != "curve" || r.Vt.Value != 2.9 {
		t.Errorf("the leading sweep's method: %s %v", r.Method, r.Vt)
	}
	near(t, "both by the square root", r.VtBy["sqrt"].Vt.Value, 2.911, 1e-9)
	near(t, "one by the curve", r.VtBy["curve"].Vt.Value, 2.900, 1e-12)
	// Led by the one without the curve, both have the square root.
	r = Combine([]Result{b, a}, []string{"up", "down"})
	if r.Method != "sqrt" {
		t.Errorf("method %s", r.Method)
	}
	near(t, "the mean of the method shown", r.Vt.Value, 2.911, 1e-9)
	// The leading sweep has none at all.
	a.Vt, a.VtBy, a.Method = None(), nil, "current"
	r = Combine([]Result{a, b}, []string{"up", "down"})
	if r.Method != "sqrt" || r.Vt.Value != 2.912 || r.VtBy["sqrt"].From != 3 {
		t.Errorf("from the other sweep: %s %v", r.Method, r.Vt)
	}
	// 20 mV apart with 1 mV each, by one method over two stretches: the leading
	// sweep's, widened to 10 mV, and no word of a disagreement.
	c := b
	c.Vt, c.VtBy = quantity(2.932, 1e-3, 0), map[string]Threshold{"sqrt": at(2.932, 1e-3)}
	r = Combine([]Result{b, c}, []string{"up", "down"})
	near(t, "V_T", r.Vt.Value, 2.912, 1e-12)
	near(t, "u", r.Vt.U, 10e-3, 1e-9)
	near(t, "absolute u", r.Vt.UAbsolute, math.Hypot(10e-3, 10e-3), 1e-5)
	if r.Has(CodeSweepsDisagree) {
		t.Errorf("codes %s", codesOf(r))
	}
	// Of the largest transconductances the greatest, and what is known of it.
	a, b = measured(3, 1e-3, 0), measured(3, 1e-3, 0)
	a.GmMax, a.GmRising, b.GmMax = quantity(1.5, 1e-3, 0), true, quantity(2.5, 1e-3, 0)
	if r := Combine([]Result{a, b}, []string{"up", "down"}); r.GmMax.Value != 2.5 || r.GmRising || r.Has(CodeSweepsDisagree) {
		t.Errorf("g_m(max) %v, rising %v, codes %s", r.GmMax, r.GmRising, codesOf(r))
	}
}
