package fit

import (
	"math"
	"testing"
)

func TestNotBelow(t *testing.T) {
	q := Quantity{Value: 3, U: 0.3e-3, UBetween: 1e-3, UAbsolute: 8e-3, N: 4}
	q.Budget = &Budget{Lines: []Contribution{
		{Input: InGateStep, U: 0.3e-3, C: 1, Nu: math.Inf(1)},
		{Input: InGateOffset, U: math.Sqrt(1e-6 - 0.09e-6), C: 1, Nu: math.Inf(1)},
		{Input: InGateGain, U: math.Sqrt(64e-6 - 1e-6), C: 1, Nu: math.Inf(1)},
	}}
	old := q.Budget
	q.NotBelow(1.5e-3, 20)
	// The variance added is 1.5² - 0.3² = 2.16 mV².
	for _, c := range []struct {
		what      string
		got, want float64
	}{
		{"within", q.U, 1.5e-3}, {"between", q.UBetween, math.Sqrt(1e-6 + 2.16e-6)}, {"absolute", q.UAbsolute, math.Sqrt(64e-6 + 2.16e-6)},
		{"budget within", q.Budget.Total(Within).U, 1.5e-3},
		{"budget between", q.Budget.Total(Between).U, math.Sqrt(1e-6 + 2.16e-6)},
		{"budget absolute", q.Budget.Total(Absolute).U, math.Sqrt(64e-6 + 2.16e-6)},
	} {
		if !(math.Abs(c.got-c.want) <= 1e-12) {
			t.Errorf("%s: %v, want %v", c.what, c.got, c.want)
		}
	}
	if len(old.Lines) != 3 {
		t.Error("the budget given was changed")
	}
	if q.Budget.Lines[1].Input != InRepeat {
		t.Errorf("line 2 is input %d, want it in the order of the inputs", q.Budget.Lines[1].Input)
	}
	same := q
	q.NotBelow(1e-3, 20)
	if q != same {
		t.Error("a floor below the uncertainty changed it")
	}
	unknown := Quantity{Value: 3, U: math.NaN(), UBetween: math.NaN(), UAbsolute: math.NaN()}
	unknown.NotBelow(1e-3, 20)
	if unknown.U != 1e-3 || !math.IsNaN(unknown.UBetween) {
		t.Errorf("not known: %v and %v, want 1 mV and NaN", unknown.U, unknown.UBetween)
	}
	none := None()
	if none.NotBelow(1, 1); none.Ok() || !math.IsNaN(none.U) {
		t.Error("a quantity without a value got an uncertainty")
	}
}

func TestRepeated(t *testing.T) {
	one := func(v float64) Result {
		r := NewResult()
		r.State = Measured
		r.Vgsth = Quantity{Value: v, U: 0.3e-3, UBetween: math.NaN(), UAbsolute: math.NaN(), N: 1}
		return r
	}
	run := func(sigma float64, values ...float64) Result {
		var rs []Result
		var dirs []string
		var ins []Quantity
		for _, v := range values {
			rs, dirs = append(rs, one(v)), append(dirs, "spot")
			ins = append(ins, rs[len(rs)-1].Vgsth)
		}
		r := Combine(rs, dirs)
		Repeated(&r, KeyVgsth, ins, sigma, sigma, 20)
		return r
	}
	const sigma = 1.5e-3
	// 3 mV apart is nothing at 1.5 mV: the mean, with sigma/√2, and no warning.
	r := run(sigma, 3.000, 3.003)
	if math.Abs(r.Vgsth.Value-3.0015) > 1e-12 || math.Abs(r.Vgsth.U-sigma/math.Sqrt2) > 1e-12 || r.Has(CodeSweepsDisagree) {
		t.Errorf("3 mV apart: %+v %v", r.Vgsth, r.Warnings)
	}
	// Without sigma they disagree, and the first counts.
	if r := run(0, 3.000, 3.003); r.Vgsth.Value != 3 || !r.Has(CodeSweepsDisagree) {
		t.Errorf("without sigma: %+v", r.Vgsth)
	}
	// The limit for two is 3·√2·sigma = 6.364 mV.
	if r := run(sigma, 3.000, 3.00636); r.Has(CodeSweepsDisagree) {
		t.Error("6.36 mV apart: disagree, the limit is 6.364 mV")
	}
	r = run(sigma, 3.000, 3.00637)
	if !r.Has(CodeSweepsDisagree) || r.Vgsth.Value != 3 || math.Abs(r.Vgsth.U-sigma) > 1e-12 {
		t.Errorf("6.37 mV apart: %+v, want the first with sigma itself", r.Vgsth)
	}
	// A single insertion has sigma.
	if r := run(sigma, 3); math.Abs(r.Vgsth.U-sigma) > 1e-12 {
		t.Errorf("one insertion: u %v, want %v", r.Vgsth.U, sigma)
	}
}
