package compare

import (
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"os"
	"strconv"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

var nan = math.NaN()

// plain are options without anything given.
func plain() Options {
	return Options{By: fit.KeyVgsIdle, Margin: nan, MarginSet: None, Pairing: Never, Repeatability: nan, Tempco: nan, Beta: nan, LimitLow: nan, LimitHigh: nan}
}

// member is a device with a gate bias at the idle current; +Inf, -Inf: above.
func member(name string, v, u, between, absolute float64, sat ...Sitting) Member {
	r := fit.NewResult()
	r.State = fit.Measured
	if math.IsInf(v, 0) {
		r.State = fit.Above
	} else {
		r.VgsIdle = fit.Quantity{Value: v, U: u, UBetween: between, UAbsolute: absolute, N: 1}
	}
	return Member{Name: name, Result: r, Sittings: sat}
}

// bench is one session on one bench.
var bench = Sitting{Session: "s", Meters: "m"}

// lotOf is a lot measured in one session on one bench whose uncertainties are known.
func lotOf(name string, values ...float64) Lot {
	l := Lot{Name: name, Populations: 1, Idle: 0.25, Temp: nan}
	for i, v := range values {
		l.Members = append(l.Members, member(fmt.Sprintf("%s%02d", name, i+1), v, 1e-5, 1e-4, 1e-3, bench))
	}
	return l
}

func compareLots(t *testing.T, a, b Lot, opt Options) Comparison {
	t.Helper()
	c, err := Lots(a, b, opt)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) && !(math.IsNaN(got) && math.IsNaN(want)) {
		t.Errorf("%s: %v, want %v ± %v", what, got, want, tolerance)
	}
}

// scenarioLots reads the two lots of testdata/scenarios/s4_lots.csv.
func scenarioLots(t *testing.T) (a, b Lot) {
	t.Helper()
	f, err := os.Open("../../testdata/scenarios/s4_lots.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	v := map[string][]float64{}
	for _, r := range rows[1:] {
		x, err := strconv.ParseFloat(r[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		v[r[0]] = append(v[r[0]], x)
	}
	return lotOf("2431", v["2431"]...), lotOf("2612", v["2612"]...)
}

// Two lots of 30 with a margin of 50 mV. Welch's figures stand with the data:
// shift +145 mV, 95 % 111 to 180 mV, p 1.5e-11, ratio of variances 1.31.
func TestTwoLotsBeforeTheRun(t *testing.T) {
	a, b := scenarioLots(t)
	opt := plain()
	opt.Margin, opt.MarginSet, opt.Beta = 0.05, Before, 3.8
	c := compareLots(t, a, b, opt)
	t.Logf("%s; %.1f to %.1f mV, df %.2f, p %.3g; spread %.3f (%.3f to %.3f)", c.Sentence, c.Low*1e3, c.High*1e3, c.DF, c.P, c.Spread.Value, c.Spread.Low, c.Spread.High)
	// scipy 1.10.1: ttest_ind(new, old, equal_var=False, trim=.2) and trim_mean(x, .2).
	near(t, "Yuen, p", c.P/2.6111426966122565e-08, 1, 1e-9)
	near(t, "trimmed mean of the reference", c.Centre[0], 3.0423333333333336, 1e-12)
	near(t, "trimmed mean of the candidate", c.Centre[1], 3.181611111111111, 1e-12)
	w := c.Secondary[0]
	if c.Verdict != OutsideMargin || !c.No() {
		t.Errorf("verdict %q", c.Verdict)
	}
	if !(w.P > 1.45e-11 && w.P < 1.55e-11) {
		t.Errorf("Welch: p %v, want 1.5e-11", w.P)
	}
	welch := stats.WelchT(values30(b), values30(a), 0.95)
	near(t, "Welch, shift", welch.Estimate, 0.1452, 0.0005)
	near(t, "Welch, low", welch.Low, 0.111, 0.0005)
	near(t, "Welch, high", welch.High, 0.180, 0.0005)
	near(t, "ratio of variances", math.Pow(c.SD[1]/c.SD[0], 2), 1.31, 0.005)
}

func values30(l Lot) []float64 { return valuesOf(&l, fit.KeyVgsIdle).plain }

// Yuen's interval is that of the stats package where nothing is common.
func TestYuenIsThatOfStats(t *testing.T) {
	a, b := scenarioLots(t)
	c := compareLots(t, a, b, plain())
	y := stats.YuenT(values30(b), values30(a), 0.2, 0.95)
	for _, n := range []struct {
		what      string
		got, want float64
	}{{"shift", c.Shift, y.Estimate}, {"low", c.Low, y.Low}, {"high", c.High, y.High}, {"df", c.DF, y.DF}, {"p", c.P / y.P, 1}} {
		near(t, n.what, n.got, n.want, 1e-9)
	}
	if c.Verdict != Differs || c.Common.U != 0 || c.Common.Basis != "same session" {
		t.Errorf("%s; common %+v", c.Verdict, c.Common)
	}
}

func TestRefused(t *testing.T) {
	check := func(a, b Lot, edit func(*Options), want error) {
		t.Helper()
		opt := plain()
		edit(&opt)
		if _, err := Lots(a, b, opt); !errors.Is(err, want) {
			t.Errorf("%v, want %v", err, want)
		}
	}
	a, b := lotOf("A", 3, 3.1, 3.2), lotOf("B", 3, 3.1, 3.2)
	same := func(*Options) {}
	check(a, a, same, ErrSameLot)
	check(a, Lot{Name: "B"}, same, ErrNothing)
	check(lotOf("A"), b, same, ErrNothing)
	check(a, b, func(o *Options) { o.By = fit.KeyBeta }, ErrQuantity)
	check(a, b, func(o *Options) { o.Level = 95 }, ErrLevel)
	check(a, b, func(o *Options) { o.Margin = -0.05 }, ErrMargin)
}
