package job

import (
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/compare"
)

// Only lots with a time are in the run, those that hold the same devices once.
func TestWhichLotsAreInTheRun(t *testing.T) {
	lot := func(name, at, serial string, off float64) compare.Lot {
		l := compare.Lot{Name: name, At: at, Populations: 1}
		for i := range 8 {
			r := fit.NewResult()
			r.State, r.Vgsth = fit.Measured, fit.Quantity{Value: 3 + 0.01*float64(i*i%7) + off + 1e-5*float64(i%2), N: 1}
			l.Members = append(l.Members, compare.Member{Name: fmt.Sprint(serial, i), Result: r})
		}
		return l
	}
	r := run{by: fit.KeyVgsth}
	r.add(lot("A", "2026-01-01", "a", 0))
	require.Empty(t, r.leftOut())
	r.add(lot("B", "", "b", 0.02))
	r.add(lot("C", "2026-02-01", "c", 0.02))
	r.add(lot("again", "2026-03-01", "a", 0.013))
	r.unlike = append(r.unlike, "odd")
	var names []string
	for _, l := range r.lots {
		names = append(names, l.Name)
	}
	require.Equal(t, []string{"A", "C"}, names)
	require.Equal(t, "all lots of the part in the store were looked at; left out: without a time: B; the same devices once more: again (those of A); not measured alike, or without a value: odd", r.leftOut())
	for i := range 20 {
		r.add(lot(fmt.Sprint("U", i), "", "u", 0))
	}
	require.Contains(t, r.leftOut(), "U6 and 13 more")
}
