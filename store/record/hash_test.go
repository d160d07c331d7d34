package record

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"testing"
)

func TestHashIsSHA256OfColumnsAndMarks(t *testing.T) {
	s := Sweep{
		Columns: []Column{
			{Quantity: VG, Values: []float64{2.5, 2.6}, Text: []byte("[2.50,2.60]")},
			{Quantity: ID, Values: []float64{0.001, math.NaN()}, Text: []byte("[1e-3,null]")},
		},
		Marks: []Mark{{Index: 1, Quantity: ID, State: Overload, Raw: "OL"}},
	}
	sum := sha256.Sum256([]byte("vg_v\n[2.50,2.60]\nid_a\n[1e-3,null]\n1 id_a overload \"OL\"\n"))
	if got, want := s.Hash(), hex.EncodeToString(sum[:]); got != want {
		t.Errorf("hash %s, want %s", got, want)
	}
}

func TestHashTellsWhatWasMeasured(t *testing.T) {
	base := func() Sweep {
		return Sweep{
			Columns: []Column{{Quantity: VG, Values: []float64{1, 2}}},
			Marks:   []Mark{{Index: 0, Quantity: VG, State: Missing}},
		}
	}
	a := base()
	for name, change := range map[string]func(*Sweep){
		"value":    func(s *Sweep) { s.Columns[0].Values[1] = 3 },
		"text":     func(s *Sweep) { s.Columns[0].Text = []byte("[1,2.0]") },
		"quantity": func(s *Sweep) { s.Columns[0].Quantity = VD },
		"mark":     func(s *Sweep) { s.Marks[0].State = Overload },
		"raw mark": func(s *Sweep) { s.Marks[0].Raw = "n/a" },
		"no mark":  func(s *Sweep) { s.Marks = nil },
	} {
		b := base()
		change(&b)
		if a.Hash() == b.Hash() {
			t.Errorf("another %s gives the same hash", name)
		}
	}
	b := base()
	b.ID, b.DeviceID, b.Direction, b.Lines = "x", "y", Down, []Lines{{0, 7, 2}}
	if a.Hash() != b.Hash() {
		t.Error("names, direction and lines must take no part in the hash")
	}
}

func TestHashOfColumnWithoutTextIsThatOfItsNumbers(t *testing.T) {
	a := Sweep{Columns: []Column{{Quantity: VG, Values: []float64{1, math.NaN(), 0.25}}}}
	b := Sweep{Columns: []Column{{Quantity: VG, Text: []byte("[1,null,0.25]")}}}
	if a.Hash() != b.Hash() {
		t.Error("a column without text must hash as it is written")
	}
}
