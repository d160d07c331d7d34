package record

import (
	"math"
	"testing"
)

func TestLastDigit(t *testing.T) {
	check := func(text string, want float64) {
		t.Helper()
		c := Column{Text: []byte(text)}
		if got := c.LastDigit(); math.Abs(got-want) > 1e-12*want {
			t.Errorf("%s: %g, want %g", text, got, want)
		}
	}
	check("[3.012,2.98]", 1e-3)
	check("[2.50e-3,-1e-3]", 1e-5)
	check("[250e-6]", 1e-6)
	check("[12,7]", 1)
	check("[1.5E+2]", 10)
	check("[null,null]", 0)
	check("[null,-0.10]", 0.01)
	check("[]", 0)
	check("", 0)
	check("[1e-9999]", 0) // below every number
}
