package record

import (
	"errors"
	"math"
	"strings"
	"testing"
)

func TestParseNumber(t *testing.T) {
	check := func(text, unit string, want float64) {
		t.Helper()
		got, err := ParseNumber(text, unit)
		if err != nil || got != want {
			t.Errorf("ParseNumber(%q, %q) = %v, %v; want %v", text, unit, got, err, want)
		}
	}
	check("2.2m", "A", 2.2e-3)
	check("2.2 mA", "A", 2.2e-3)
	check("2m2", "A", 2.2e-3)
	check("-4mV/K", "V/K", -4e-3)
	check("-4m", "V/K", -4e-3)
	check("-0.004 V/°C", "V/K", -4e-3)
	check("2m2A", "A", 2.2e-3)
	check("4k7", "ohm", 4.7e3)
	check("4K7", "ohm", 4.7e3)
	check("2R2", "ohm", 2.2)
	check("10R", "ohm", 10)
	check("10 Ω", "ohm", 10)
	check("250uA", "A", 250e-6)
	check("250 \u00b5A", "A", 250e-6)
	check("250 \u03bcA", "A", 250e-6)
	check("50mV", "V", 50e-3)
	check("1.5E-3", "A", 1.5e-3)
	check("-3", "V", -3)
	check("\u22123.5 V", "V", -3.5)
	check("25C", "degC", 25)
	check("25 °C", "degC", 25)
	check("1M", "ohm", 1e6)
	check("1m", "ohm", 1e-3)
	check(".5", "V", 0.5)
	check("5.", "V", 5)
	check("0.6K/W", "K/W", 0.6)
	check("1 2", "V", 12) // blanks group digits
	check("10s", "s", 10)
	check("10ms", "s", 0.01)
	refuse := func(text, unit string) {
		t.Helper()
		got, err := ParseNumber(text, unit)
		if !errors.Is(err, ErrInvalid) {
			t.Errorf("ParseNumber(%q, %q) = %v, %v; want a refusal", text, unit, got, err)
		}
	}
	refuse("", "V")
	refuse("abc", "V")
	refuse("1,5", "V")
	refuse("1.234,5", "V")
	refuse("50mA", "V")
	refuse("5 V", "A")
	refuse("1e999", "V")
	refuse("1e308k", "V")
	refuse("4k7k", "ohm")
	refuse("4.5k7", "ohm")
	refuse("K5", "ohm")
	refuse("5K", "A")
	refuse("inf", "V")
	refuse("nan", "V")
	refuse("0x10", "V")
	refuse("2V2V2", "V")
	refuse("1mm", "V")
}

func TestParseAmount(t *testing.T) {
	check := func(text string, units []string, want Amount) {
		t.Helper()
		got, err := ParseAmount(text, units...)
		if err != nil || got != want {
			t.Errorf("ParseAmount(%q) = %+v, %v; want %+v", text, got, err, want)
		}
		back, err := ParseAmount(got.String(), units...)
		if err != nil || back != got {
			t.Errorf("%+v written as %q reads back as %+v, %v", got, got.String(), back, err)
		}
	}
	margin := []string{"V", "%", "A"}
	check("50mV", margin, Amount{0.05, "V"})
	check("10%", margin, Amount{10, "%"})
	check("25mA", margin, Amount{0.025, "A"})
	check("0.05", margin, Amount{0.05, "V"})
	guard := []string{"V", "u"}
	check("2u", guard, Amount{2, "u"})
	check("20mV", guard, Amount{0.02, "V"})
	check("0", guard, Amount{0, "V"})
	if _, err := ParseAmount("25kg", margin...); !errors.Is(err, ErrInvalid) {
		t.Errorf("25kg: %v", err)
	}
}

func FuzzParseNumber(f *testing.F) {
	for _, s := range []string{"2m2", "4k7", "250 µA", "1e308", "-.5V", "2R2ohm", "1,234"} {
		f.Add(s, "A")
		f.Add(s, "ohm")
	}
	f.Fuzz(func(t *testing.T, text, unit string) {
		x, err := ParseNumber(text, unit)
		if err == nil && (math.IsNaN(x) || math.IsInf(x, 0)) {
			t.Errorf("ParseNumber(%q, %q) = %v without an error", text, unit, x)
		}
		if err != nil && !errors.Is(err, ErrInvalid) {
			t.Errorf("ParseNumber(%q, %q): %v is not ErrInvalid", text, unit, err)
		}
	})
}

// A prefix or unit in the wrong case is refused with the right one, and so are amounts
// that no gate voltage has.
func TestCase(t *testing.T) {
	says := func(text, unit, want string) {
		t.Helper()
		_, err := ParseNumber(text, unit)
		if !errors.Is(err, ErrInvalid) || !strings.Contains(err.Error(), want) {
			t.Errorf("ParseNumber(%q, %q): %v, want it to say %q", text, unit, err, want)
		}
	}
	says("50mv", "V", "write 50mV")
	says("250 ua", "A", "write 250uA")
	says("-4mv/k", "V/K", "write -4mV/K")
	says("50mA", "V", "no unit")
	says("mv", "V", "not a number")
	for text, want := range map[string]string{"50mv": "write 50mV", "50MV": "M is mega", "1001": "more than any", "20 cows": "as in 50mV, 10%, 25mA", "25ma": "write 25mA"} {
		a, err := ParseAmount(text, "V", "%", "A")
		if !errors.Is(err, ErrInvalid) || !strings.Contains(err.Error(), want) {
			t.Errorf("ParseAmount(%q) = %v, %v, want it to say %q", text, a, err, want)
		}
	}
	for _, text := range []string{"1kV", "1000", "50mV", "2000%", "2000A"} {
		if _, err := ParseAmount(text, "V", "%", "A"); err != nil {
			t.Errorf("ParseAmount(%q): %v", text, err)
		}
	}
}
