package table

import (
	"fmt"
	"slices"
	"strings"
	"testing"
)

// The hint is typed as it stands: it must not make amperes of 998 mA.
func TestUnitsAreProposedByMagnitude(t *testing.T) {
	for _, c := range []struct {
		text, hint string
		first      []string // of the choices, in the order asked
	}{
		{"device,vg,id\nD1,2,1\nD1,3,50\nD1,4,998\n", "--units vg=V,id=mA", []string{"V", "mA"}},
		{"device,vg,id\nD1,2,0.001\nD1,3,0.05\nD1,4,0.998\n", "--units vg=V,id=A", []string{"V", "A"}},
		{"device,vg,id\nD1,2,1\nD1,3,50\nD1,20,15\n", "--units vg=V,id=mA", []string{"V", "mA"}},
		{"device,vg,id\nD1,-2,-1\nD1,-3,-50\nD1,-4,-998\n", "--units vg=V,id=mA", []string{"V", "mA"}},
		{"device,vg,id\nD1,2000,1000\nD1,3000,50000\nD1,4000,998000\n", "--units vg=mV,id=uA", []string{"mV", "uA"}},
		{"device,vg,id_A,ig\nD1,2,1,12.5\nD1,3,2,13.5\nD1,4,3,14.5\n", "--units vg=V,ig=nA", []string{"V", "nA"}},
		{"dut;vgs bei 10 mA\nA;3121\nB;OL\nC;x\nD;3001\nE;2999\nF;3002\nG;3003\n", "--units vg=mV", []string{"mV"}},
		{"Vg,D1,D2\n2,1,2\n3,20,30\n4,700,900\n", "--units vg=V,id=mA, with vl=V or vd=V in place of id=mA", []string{"V", "mA"}},
		// What tells may stand far behind the head of the file.
		{"device,vg,id\n" + strings.Repeat("D1,2,1\nD1,3,2\n", 2*sampleRows) + "D1,4,998\n", "--units vg=V,id=mA", []string{"V", "mA"}},
	} {
		_, err := Read("x.csv", strings.NewReader(c.text), Options{})
		if !strings.HasPrefix(hintOf(err), c.hint) {
			t.Errorf("%.60q: hint %q, want %q (%v)", c.text, hintOf(err), c.hint, err)
		}
		var first []string
		_, err = Read("x.csv", strings.NewReader(c.text), Options{Ask: func(q Question) (string, error) {
			if !strings.HasPrefix(q.Flag, "--units") {
				return "", fmt.Errorf("asked %s", q.Flag)
			}
			first = append(first, q.Choices[0])
			sorted := slices.Clone(q.Choices)
			slices.Sort(sorted)
			if len(slices.Compact(sorted)) != len(q.Choices) {
				t.Errorf("choices %q", q.Choices)
			}
			return q.Choices[0], nil
		}})
		if err != nil || !slices.Equal(first, c.first) {
			t.Errorf("%.60q: first choices %q, want %q (%v)", c.text, first, c.first, err)
		}
	}
}
