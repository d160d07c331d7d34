package table

import (
	"strings"
	"testing"
)

// Package and side name a device where no column of its own does.
func TestDevicesNamedByPackageAndSide(t *testing.T) {
	for _, text := range []string{
		"package,side,vg_V,id_mA\nP1,A,2.8,0.2\nP1,A,2.9,1.9\nP1,B,2.8,0.3\nP1,B,2.9,2.1\nP2,A,2.8,0.1\nP2,A,2.9,1.7\n",
		"package,side,vgs_at_10mA_V\nP1,A,2.81\nP1,B,2.83\nP2,A,2.84\n",
	} {
		f, err := Read("t.csv", strings.NewReader(text), Options{})
		if err != nil {
			t.Fatal(err)
		}
		var got []string
		for _, s := range f.Sweeps {
			got = append(got, s.Device+"/"+s.Package+"/"+s.Side)
		}
		if want := "P1A/P1/A P1B/P1/B P2A/P2/A"; strings.Join(got, " ") != want {
			t.Errorf("%v, want %s", got, want)
		}
	}
}
