package fit

import (
	"math"
	"testing"
)

// A gate voltage of 3.012 V on a meter of 0.5 % + 2 counts of 1 mV, repeatability
// 1.5 mV, temperature within 1 K at 4.6 mV/K, worked out by hand with k = 2: limit of
// the statement 17.1 mV, u 9.9 mV; 20.6 mV absolute, 8.7 mV between two devices on the
// same meter.
func TestDifferenceOfTwo(t *testing.T) {
	gain, offset := (Accuracy{Percent: 0.5, Counts: 2, Resolution: 1e-3}).parts(3.012)
	inf := math.Inf(1)
	b := Budget{Lines: []Contribution{
		{Input: InScatter, U: 1.5e-3, C: 1, Nu: inf, Shape: normal},
		{Input: InGateStep, U: 1e-3 / math.Sqrt(12), C: 1, Nu: inf, Shape: rectangular},
		{Input: InGateOffset, U: offset, C: 1, Nu: inf, Shape: rectangular},
		{Input: InTemperature, U: 1 / math.Sqrt(3), C: -4.6e-3, Nu: inf, Shape: rectangular},
		{Input: InGateGain, U: gain, C: 1, Nu: inf, Shape: rectangular},
	}}
	near(t, "limit of the statement", math.Hypot(gain, offset)*math.Sqrt(3), 17.1e-3, 0.05e-3)
	near(t, "u of the statement", math.Hypot(gain, offset), 9.9e-3, 0.06e-3)
	near(t, "absolute", 2*b.Total(Absolute).U, 20.6e-3, 0.05e-3)
	near(t, "difference of two", 2*b.Difference().U, 8.7e-3, 0.05e-3)
	if d := (&Budget{}).Difference(); d.U != 0 {
		t.Errorf("nothing: %+v", d)
	}
	b.Lines = append(b.Lines, Contribution{Input: InGateScatter, U: math.NaN(), C: 1, Nu: inf})
	if d := b.Difference(); !math.IsNaN(d.U) {
		t.Errorf("not known: %+v", d)
	}
}
