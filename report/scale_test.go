package report

import (
	"math"
	"testing"

	"gatesill/fit"
)

func TestDigitsFollowTheUncertainty(t *testing.T) {
	check := func(x, u float64, unit, want string) {
		t.Helper()
		if got := FormatPlain(x, u, unit); got != want {
			t.Errorf("%g ± %g %s: %q, want %q", x, u, unit, got, want)
		}
	}
	// JCGM 100:2008, 7.2.2: a mass of 100.021 47 g with u = 0.35 mg.
	check(100.02147, 0.00035, "g", "100.02147 ± 0.00035 g")
	// JCGM 100:2008, 7.2.6: 10.057 62 Ω with u = 27 mΩ is rounded to 10.058 Ω.
	check(10.05762, 0.027, "Ω", "10.058 ± 0.027 Ω")
	// JCGM 100:2008, 7.2.6: u = 28.05 kHz is rounded down to 28 kHz.
	check(1234567, 28050, "Hz", "1.235 ± 0.028 MHz")

	check(2.78, math.NaN(), "V", "2.78 V")
	check(2.5, 0.0996, "V", "2.50 ± 0.10 V") // rounds up to two digits of 0.10
	check(-3.0123456, 0.0005, "V", "-3.01235 ± 0.00050 V")
	check(0.000250, 0.000001, "A", "250.0 ± 1.0 µA")
	check(3.9e-6, 3e-7, "A", "3.90 ± 0.30 µA")
	check(0, 0.001, "V", "0.0 ± 1.0 mV")
	check(-0.00001, 0.01, "A", "0 ± 10 mA") // lost in its uncertainty
	check(1234, 150, "V", "1.23 ± 0.15 kV")
	check(math.NaN(), 1, "V", "n/a")
	check(math.Inf(1), 1, "V", "n/a")
	check(0.123456789, math.NaN(), "V", "123.5 mV")
	check(0.05, math.NaN(), "1/V", "0.05 1/V")
}

func TestFormatGiven(t *testing.T) {
	check := func(x float64, unit, want string) {
		t.Helper()
		if got := FormatGiven(x, unit); got != want {
			t.Errorf("%g %s: %q, want %q", x, unit, got, want)
		}
	}
	check(0.25, "A", "250 mA")
	check(0.00025, "A", "250 µA")
	check(4700, "Ω", "4.7 kΩ")
	check(1, "A", "1 A")
	check(0.999, "A", "999 mA")
	check(25, "°C", "25 °C")
	check(1, "%", "1 %")
	check(80, "", "80")
	check(-4, "V", "-4 V")
	check(0, "V", "0 V")
	check(12.02, "V", "12.02 V")
}

func TestFormatTwoDigits(t *testing.T) {
	check := func(x float64, unit, want string) {
		t.Helper()
		if got := FormatTwoDigits(x, unit); got != want {
			t.Errorf("%g %s: %q, want %q", x, unit, got, want)
		}
	}
	check(0.000561, "V", "560 µV")
	check(0.0011, "V", "1.1 mV")
	check(0.001, "V", "1.0 mV")
	check(0.053, "V", "53 mV")
	check(0.104, "V", "100 mV")
	check(0, "V", "0 V")
	check(math.NaN(), "V", "n/a")
}

func TestFormatQuantity(t *testing.T) {
	q := fit.Quantity{Value: 2.78012, U: 0.00052, N: 4}
	if got := FormatQuantity(q, "V"); got != "2.78012 ± 0.00052 V (n = 4)" {
		t.Errorf("%q", got)
	}
	if got := FormatQuantity(fit.None(), "V"); got != "n/a" {
		t.Errorf("a quantity that could not be had: %q", got)
	}
}

// One prefix holds for a whole column, and resolution decides where no
// uncertainty is known.
func TestColumn(t *testing.T) {
	s := ScaleOf("A", 2e-6, 3e-6, 5e-3, math.NaN(), 0)
	if s.Prefix != "µ" {
		t.Errorf("prefix %q", s.Prefix)
	}
	if got := s.FormatNumber(5e-3, math.NaN(), 1e-6); got != "5000" {
		t.Errorf("%q", got)
	}
	v := ScaleOf("V", 2.78)
	if got := v.FormatNumber(2.8, math.NaN(), 0.001); got != "2.800" {
		t.Errorf("resolution 1 mV: %q", got)
	}
	cells, unit := numbers("V", []float64{2.78, 12.5, math.NaN()}, []float64{0.0005, 0.05, math.NaN()}, func(int) string { return NotAvailable })
	want := []string{" 2.78000 ± 0.00050", "12.500   ± 0.050", "n/a"}
	for i := range want {
		if cells[i] != want[i] {
			t.Errorf("cell %d: %q, want %q", i, cells[i], want[i])
		}
	}
	if unit != "V" {
		t.Errorf("unit %q", unit)
	}
}

func TestClean(t *testing.T) {
	check := func(in, want string) {
		t.Helper()
		if got := Clean(in); got != want {
			t.Errorf("Clean(%q) = %q, want %q", in, got, want)
		}
	}
	check("D07", "D07")
	check("\x1b[31mred", `\x1b[31mred`)
	check("a\tb\r\n", `a\x09b\x0d\x0a`)
	check("\u202egnp.exe", `\u202egnp.exe`)
	check("é 二極管 مقاومة Ω", "é 二極管 مقاومة Ω")
	check("bad \xff\xfe", `bad \xff\xfe`)
	check("\u009b31m", `\u009b31m`) // the one-character form of the escape
	check("zero\u200bwidth", `zero\u200bwidth`)
	check("=1+1", "=1+1")
	check("\ufffd stays", "\ufffd stays")
	check("\U000e0041tag", `\U000e0041tag`)
}

func FuzzClean(f *testing.F) {
	f.Add("\x1b]0;x\x07")
	f.Add("D07")
	f.Fuzz(func(t *testing.T, s string) {
		c := Clean(s)
		if Clean(c) != c {
			t.Errorf("%q is not clean: %q", c, Clean(c))
		}
		for _, r := range c {
			if hidden(r) {
				t.Errorf("%q holds %U", c, r)
			}
		}
	})
}
