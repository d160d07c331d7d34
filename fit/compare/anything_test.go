package compare

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit"
)

var oddNumbers = []float64{0, -1, nan, math.Inf(1), math.Inf(-1), 1e-300, 1e6, 3, 3, 3.1}

// anyLot draws lots as no bench gives them.
func anyLot(t *rapid.T, name string) Lot {
	number := rapid.OneOf(rapid.SampledFrom(oddNumbers), rapid.Float64Range(2.5, 3.5), rapid.Float64Range(2.9, 3.1))
	quantity := func() fit.Quantity {
		return fit.Quantity{Value: number.Draw(t, "v"), U: number.Draw(t, "u"), UBetween: number.Draw(t, "ub"), UAbsolute: number.Draw(t, "ua")}
	}
	text := rapid.SampledFrom([]string{"", "a", "b"})
	l := Lot{
		Name: name, PChannel: rapid.Bool().Draw(t, "p"), Populations: rapid.IntRange(0, 2).Draw(t, "pop"),
		Idle: number.Draw(t, "idle"), Temp: number.Draw(t, "temp"), At: text.Draw(t, "at"),
	}
	for range rapid.IntRange(0, 12).Draw(t, "n") {
		r := fit.NewResult()
		r.State = rapid.SampledFrom([]fit.State{fit.Measured, fit.Measured, fit.Measured, fit.Above, fit.Open, fit.Declined, fit.Excluded}).Draw(t, "state")
		r.VgsIdle, r.Vgsth, r.Beta, r.GmIdle, r.Theta = quantity(), quantity(), quantity(), quantity(), quantity()
		r.Method = text.Draw(t, "method")
		for range rapid.IntRange(0, 6).Draw(t, "levels") {
			r.Levels = append(r.Levels, fit.Level{I: rapid.SampledFrom(fit.LevelCurrents[5:10]).Draw(t, "i"), Vg: number.Draw(t, "vg")})
		}
		m := Member{Name: fmt.Sprint(rapid.IntRange(0, 15).Draw(t, "name")), Result: r, Control: rapid.IntRange(0, 5).Draw(t, "c") == 0, Flagged: rapid.Bool().Draw(t, "f")}
		for range rapid.IntRange(0, 2).Draw(t, "sat") {
			m.Sittings = append(m.Sittings, Sitting{text.Draw(t, "s"), text.Draw(t, "m")})
		}
		l.Members = append(l.Members, m)
	}
	return l
}

// Whatever the lots are, there is an error or an answer that holds together.
func TestAnyLots(t *testing.T) {
	verdicts := []Verdict{InsideMargin, OutsideMargin, Differs, NoDifference, TooFew}
	rapid.Check(t, func(t *rapid.T) {
		a, b := anyLot(t, "A"), anyLot(t, "B")
		opt := plain()
		opt.By = rapid.SampledFrom([]fit.Key{fit.KeyVgsIdle, fit.KeyVgsth}).Draw(t, "by")
		opt.Margin = rapid.SampledFrom([]float64{nan, 0.05}).Draw(t, "margin")
		opt.Tempco = rapid.SampledFrom([]float64{nan, -0.004}).Draw(t, "tempco")
		opt.Pairing = rapid.SampledFrom([]Pairing{ByLikeness, BySerial, Never}).Draw(t, "pairing")
		opt.SendBack = rapid.SampledFrom([]string{"", ByLimits, ByMargin, "?"}).Draw(t, "rule")
		opt.LimitHigh, opt.Beta = 4, 3.8
		c, err := Lots(a, b, opt)
		if err != nil {
			if !errors.Is(err, ErrNothing) {
				t.Fatal(err)
			}
			return
		}
		if !slices.Contains(verdicts, c.Verdict) || c.Sentence == "" || (len(c.Options) != 5) != (c.Paired != nil) {
			t.Errorf("%q %q", c.Verdict, c.Sentence)
		}
		if math.IsNaN(c.Shift) && c.Verdict != TooFew || c.Low > c.High || c.MarginLow > c.MarginHigh || c.P < 0 || c.P > 1 {
			t.Errorf("%+v", c)
		}
		for i, v := range []Lot{a, b} {
			k := c.Counts[i]
			if k.N+k.Aside+k.Control != len(v.Members) || k.WithValue+k.Above+k.Without != k.N || k.Flagged > k.N {
				t.Errorf("%+v of %d", k, len(v.Members))
			}
		}
		for _, s := range c.Secondary {
			if s.P < 0 || s.P > 1 || s.PAdjusted < s.P {
				t.Errorf("%+v", s)
			}
		}
		all := c.Sentence
		for _, o := range c.Options {
			all += o.Text
		}
		for _, w := range c.Warnings {
			all += w.Text
			if _, ok := fit.Explain(w.Code); !ok {
				t.Errorf("no code %q", w.Code)
			}
		}
		if strings.Contains(all, "NaN") || strings.Contains(all, "%!") {
			t.Error(all)
		}
		if _, err := TrendOf([]Lot{a, b}, opt); err != nil && !errors.Is(err, ErrNothing) {
			t.Fatal(err)
		}
	})
}
