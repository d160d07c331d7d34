package match

import (
	"context"
	"strings"
	"testing"

	"gatesill/fit"
)

// A device whose nearest is near in gate voltage and too far off in gain is told
// that the gain is the reason.
func TestLeftForItsGain(t *testing.T) {
	of := func(name string, v, gm float64) Member {
		r := fit.NewResult()
		r.State = fit.Measured
		r.VgsIdle = fit.Quantity{Value: v, U: 1e-4, UBetween: 1e-3, UAbsolute: 1e-2, N: 5}
		r.GmIdle = fit.Quantity{Value: gm, U: 1e-3, UBetween: 1e-3, UAbsolute: 1e-2, N: 5}
		return Member{Name: name, Lot: "L", Result: r}
	}
	m, err := Match(context.Background(), []Member{of("A", 3, 1), of("B", 3.001, 1.01), of("C", 3.003, 1.5)}, Options{
		By:   []Criterion{{Key: fit.KeyVgsIdle, Within: 0.01}, {Key: fit.KeyGmIdle, Within: 0.05}},
		Size: 2, Aim: Most, At: 0.25,
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(m.LeftOver) != 1 || !strings.Contains(m.LeftOver[0].Why, "away and too far off in transconductance") {
		t.Errorf("left over: %+v", m.LeftOver)
	}
}
