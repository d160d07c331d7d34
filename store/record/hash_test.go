package record

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"testing"
)

func TestSweepHash(t *testing.T) {
	nan := math.NaN()
	s := Sweep{
		DeviceID: "whoever", MeasuredAt: "2024-05-06",
		Columns: []Column{
			{Quantity: ID, Values: []float64{0.0010, nan}, Text: []byte("[0.0010,null]")},
			{Quantity: VG, Values: []float64{3, 3.1}},
		},
		Marks: []Mark{{Index: 1, Quantity: ID, State: Overload, Raw: "O.L"}},
	}
	sum := sha256.Sum256([]byte("vg_v\n[3,3.1]\nid_a\n[0.0010,null]\n1 id_a overload\n"))
	want := hex.EncodeToString(sum[:])
	if got := s.Hash(); got != want {
		t.Errorf("%s, want %s", got, want)
	}
	other := s
	other.DeviceID, other.MeasuredAt = "another", ""
	other.Columns = []Column{s.Columns[1], s.Columns[0]}
	other.Marks = []Mark{{Index: 1, Quantity: ID, State: Overload, Raw: "OVLD"}}
	if got := other.Hash(); got != want {
		t.Errorf("device, time, order of columns or spelling of a state changed it: %s", got)
	}
	for name, change := range map[string]func(*Sweep){
		"a digit": func(s *Sweep) {
			s.Columns = []Column{s.Columns[0], {Quantity: VG, Values: []float64{3, 3.10001}}}
		},
		"a zero written":    func(s *Sweep) { s.Columns = []Column{s.Columns[0], {Quantity: VG, Text: []byte("[3.0,3.1]")}} },
		"the quantity":      func(s *Sweep) { s.Columns = []Column{s.Columns[0], {Quantity: VD, Values: []float64{3, 3.1}}} },
		"a column less":     func(s *Sweep) { s.Columns = s.Columns[:1] },
		"the state":         func(s *Sweep) { s.Marks = []Mark{{Index: 1, Quantity: ID, State: Missing}} },
		"the mark's place":  func(s *Sweep) { s.Marks = []Mark{{Index: 0, Quantity: ID, State: Overload}} },
		"no mark":           func(s *Sweep) { s.Marks = nil },
		"the mark's column": func(s *Sweep) { s.Marks = []Mark{{Index: 1, Quantity: VG, State: Overload}} },
	} {
		changed := s
		change(&changed)
		if changed.Hash() == want {
			t.Errorf("%s does not show in the hash", name)
		}
	}
}
