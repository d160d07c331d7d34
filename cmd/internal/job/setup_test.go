package job

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// What the meters were paired with goes to the fit with the points; without the column there
// is none.
func TestCurveOfPairedMeters(t *testing.T) {
	sw := record.Sweep{Columns: []record.Column{
		{Quantity: record.VG, Values: []float64{3, 3.1}}, {Quantity: record.ID, Values: []float64{1e-3, math.NaN()}},
	}, Marks: []record.Mark{{Index: 1, Quantity: record.ID, State: record.Overload}}}
	require.Nil(t, curveOf(&sw).VgBound)
	sw.Columns = append(sw.Columns, record.Column{Quantity: record.PairBound, Values: []float64{0.5e-3, 2e-3}})
	c := curveOf(&sw)
	require.Equal(t, []float64{0.5e-3, 2e-3}, c.VgBound)
	require.True(t, math.IsInf(c.Id[1], 1))
}
