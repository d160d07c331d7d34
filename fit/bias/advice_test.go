package bias

import (
	"math"
	"strings"
	"testing"
)

func TestAgainst(t *testing.T) {
	o := Options{Idle: 0.25, Beta: 3.8, Tempco: NoTempco(), Temp: nan, Series: []Series{E96, E24},
		Network: &Network{Supply: 8, Top: 1960, Bottom: 1200}}
	old, now := planOf(t, scenarioLot(t, "2431"), o), planOf(t, scenarioLot(t, "2612"), o)
	c := Against(old, now)
	near(t, "shift", c.Shift, 0.145, 0.001)
	near(t, "at the old gate voltage", c.AtOld, 0.090, 0.001)
	all := strings.Join(append(c.Text, now.Ways()...), "\n")
	for _, want := range []string{
		"draws 89", "instead of 250 mA", "Change the top resistor from 1.96 kΩ to 1.82 kΩ (E96): 3.179 V", "to 1.8 kΩ (E24): 3.200 V",
		"Use a trimmer of 200 Ω",
	} {
		if !strings.Contains(all, want) {
			t.Errorf("%q is not in\n%s", want, all)
		}
	}
	// A trimmer that does: 2.883 to 3.202 V of the old lot lie within 2.80 to 3.25 V.
	for _, c := range []struct {
		high float64
		want string
	}{{3.25, "As it is, the trimmer reaches 2.883 to 3.202 V"}, {3.15, "Re-centre the trimmer: it has to reach 2.883 to 3.202 V"}} {
		given := o
		given.Network, given.Reach = nil, &Range{2.80, c.high}
		if got := strings.Join(planOf(t, scenarioLot(t, "2431"), given).Ways(), "\n"); !strings.HasPrefix(got, c.want) {
			t.Errorf("to %g V: %s", c.high, got)
		}
	}
	if got := ResistorFor(o.Network, 3.188, []Series{E24}); !strings.Contains(got, "to 1.8 kΩ (E24): 3.200 V, +12 mV") {
		t.Error(got)
	}
	if got := ResistorFor(o.Network, -3, []Series{E24}); got != "" {
		t.Error(got)
	}
	// 3.064 and 3.365 V: √I of the two differ by 0.301·√1.9, and I sums up to 0.5 A.
	if l := now.ExtremeLine(LineOptions{VDS: nan, Rth: nan, Sink: nan, Temp: 25, Tempco: nan}); l == nil || l.Cold.Err != nil || math.Abs(l.Cold.Devices[0].I-0.4388) > 1e-4 {
		t.Errorf("%+v", l)
	}
}
