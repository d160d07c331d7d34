package record

import (
	"encoding/json"
	"errors"
	"math"
	"strings"
	"testing"
	"time"
)

// invalid checks that err is a refusal that says want.
func invalid(t *testing.T, err error, want string) {
	t.Helper()
	if !errors.Is(err, ErrInvalid) || !strings.Contains(err.Error(), want) {
		t.Errorf("%v; want a refusal with %q", err, want)
	}
}

func valid(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Errorf("refused: %v", err)
	}
}

func TestCheckName(t *testing.T) {
	for _, name := range []string{"D1", "=1+1", "../../x", "C:\\x", "Bauteil 7 (rot)", "échantillon", "日本", "a,b;c\"d", strings.Repeat("x", MaxName)} {
		valid(t, CheckName("device", name))
	}
	invalid(t, CheckName("lot", ""), "lot name is empty")
	invalid(t, CheckName("lot", strings.Repeat("x", MaxName+1)), "201 bytes long, at most 200")
	invalid(t, CheckName("lot", "a\xff"), "not UTF-8")
	for _, name := range []string{" a", "a ", "\u00a0a", "a\n"} {
		invalid(t, CheckName("lot", name), "blank")
	}
	for _, name := range []string{"a\x1b[31mb", "a\x00b", "a\tb", "a\nb", "a\u2028b", "a\u202eb", "a\u200bb", "a\u0085b"} {
		invalid(t, CheckName("lot", name), "control character")
	}
}

func TestCheckStamp(t *testing.T) {
	valid(t, CheckStamp("time", Now()))
	valid(t, CheckStamp("time", "2024-02-29T23:59:59Z"))
	valid(t, CheckStamp("time", "2024-02-29T23:59:59.123456Z"))
	for _, s := range []string{"", "2024-02-29", "2023-02-29T00:00:00Z", "2024-02-29 10:00:00Z", "2024-02-29T10:00:00", "29.2.2024"} {
		invalid(t, CheckStamp("time", s), "is no time")
	}
	for _, s := range []string{"2024-02-29T10:00:00+01:00", "2024-02-29T10:00:00+00:00"} {
		invalid(t, CheckStamp("time", s), "not in UTC")
	}
	valid(t, CheckStampOrDate("time", ""))
	valid(t, CheckStampOrDate("time", "2024-02-29"))
	valid(t, CheckStampOrDate("time", "2024-02-29T10:00:00.000Z"))
	invalid(t, CheckStampOrDate("time", "2023-02-29"), "is no time")
	if got, want := Stamp(time.Date(2024, 5, 6, 7, 8, 9, 123456789, time.FixedZone("", 3600))), "2024-05-06T06:08:09.123Z"; got != want {
		t.Errorf("Stamp gives %s, want %s", got, want)
	}
}

func TestPartValidate(t *testing.T) {
	good := NewPart("P")
	good.VgsthMin, good.VgsthMax, good.OffVoltage, good.MaxVgs = Known(2), Known(2), Known(-20), Known(20)
	valid(t, good.Validate())
	for want, change := range map[string]func(*Part){
		"name is empty":                       func(p *Part) { p.Name = "" },
		"neither n nor p":                     func(p *Part) { p.Channel = "N" },
		"neither enhancement nor depletion":   func(p *Part) { p.Mode = "" },
		"test current is 0, must be above 0":  func(p *Part) { p.TestCurrent = Known(0) },
		"idle current is -0.1":                func(p *Part) { p.IdleCurrent = Known(-0.1) },
		"max P_D is 0":                        func(p *Part) { p.MaxPD = Known(0) },
		"R_th is -1":                          func(p *Part) { p.Rth = Known(-1) },
		"limit 2.1 V is above the upper":      func(p *Part) { p.VgsthMin = Known(2.1) },
		"off voltage -21 V is beyond":         func(p *Part) { p.OffVoltage = Known(-21) },
		"off voltage 20.5 V is beyond":        func(p *Part) { p.OffVoltage = Known(20.5) },
		"max V_GS is -20, must be above 0":    func(p *Part) { p.MaxVgs = Known(-20) },
		"max V_DS is -1, must be above 0 (a ": func(p *Part) { p.Channel = PChannel; p.MaxVds = Known(-1) },
	} {
		p := good
		change(&p)
		invalid(t, p.Validate(), want)
	}
	if NewPart("P").Sign() != 1 || (Part{Channel: PChannel}).Sign() != -1 {
		t.Error("signs of the channels")
	}
}

func TestLotValidate(t *testing.T) {
	good := Lot{Name: "A", Quantity: Known(1), Margin: Amount{0.05, "V"}, Guard: Amount{0, "u"}, SendBack: "outside-limits"}
	valid(t, good.Validate())
	for want, change := range map[string]func(*Lot){
		"lot name is empty":               func(l *Lot) { l.Name = "" },
		"quantity 0 is not a whole":       func(l *Lot) { l.Quantity = Known(0) },
		"quantity 1.5 is not a whole":     func(l *Lot) { l.Quantity = Known(1.5) },
		"margin in \"u\"":                 func(l *Lot) { l.Margin = Amount{2, "u"} },
		"margin 0V must be above 0":       func(l *Lot) { l.Margin = Amount{0, "V"} },
		"guard band in \"%\"":             func(l *Lot) { l.Guard = Amount{2, "%"} },
		"guard band -0.1V is negative":    func(l *Lot) { l.Guard = Amount{-0.1, "V"} },
		"send-back rule \"always\", must": func(l *Lot) { l.SendBack = "always" },
	} {
		l := good
		change(&l)
		invalid(t, l.Validate(), want)
	}
}

func TestDeviceValidate(t *testing.T) {
	valid(t, Device{Name: "D1", Side: "B", Role: Control}.Validate())
	invalid(t, Device{Role: Sample}.Validate(), "device name is empty")
	invalid(t, Device{Name: "D1", Side: "a", Role: Sample}.Validate(), "neither A nor B")
	invalid(t, Device{Name: "D1"}.Validate(), "neither sample nor control")
}

func TestSweepValidate(t *testing.T) {
	nan := math.NaN()
	good := func() Sweep {
		return Sweep{
			Position: 1, Direction: Up, MeasuredAt: "2024-05-06",
			Condition: Condition{Circuit: Load, RL: Known(10), Ammeter: "drain", GateReturn: "ground", Pulsed: "pulsed", PulseDuty: Known(1), TempOf: "case"},
			Columns:   []Column{{Quantity: VG, Values: []float64{1, 2}}, {Quantity: ID, Values: []float64{0.1, nan}}},
			Marks:     []Mark{{Index: 1, Quantity: ID, State: Overload}},
			Lines:     []Lines{{Point: 0, Line: 2, Count: 2}},
		}
	}
	s := good()
	valid(t, s.Validate())
	if s.Len() != 2 || s.Line(1) != 3 || s.Line(2) != 0 || s.Values(ID)[0] != 0.1 || s.Values(VD) != nil || s.Column(VL) != nil {
		t.Errorf("accessors of %+v", s)
	}
	for want, change := range map[string]func(*Sweep){
		"direction \"\" is none of":        func(s *Sweep) { s.Direction = "" },
		"position 0, must count from 1":    func(s *Sweep) { s.Position = 0 },
		"time of measuring \"6.5.24\"":     func(s *Sweep) { s.MeasuredAt = "6.5.24" },
		"circuit is \"series\", must be":   func(s *Sweep) { s.Condition.Circuit = "series" },
		"ammeter place is \"gate\"":        func(s *Sweep) { s.Condition.Ammeter = "gate" },
		"gate return is \"drain\"":         func(s *Sweep) { s.Condition.GateReturn = "drain" },
		"pulsed is \"ac\"":                 func(s *Sweep) { s.Condition.Pulsed = "ac" },
		"temperature of is \"air\"":        func(s *Sweep) { s.Condition.TempOf = "air" },
		"R_L is 0 ohm":                     func(s *Sweep) { s.Condition.RL = Known(0) },
		"pulse duty is 1.1":                func(s *Sweep) { s.Condition.PulseDuty = Known(1.1) },
		"dwell is -1":                      func(s *Sweep) { s.Condition.Dwell = Known(-1) },
		"no points":                        func(s *Sweep) { s.Columns = nil },
		"unknown column \"vgs\"":           func(s *Sweep) { s.Columns[0].Quantity = "vgs" },
		"column vg_v twice":                func(s *Sweep) { s.Columns[1].Quantity = VG },
		"column id_a has 1 points, vg_v":   func(s *Sweep) { s.Columns[1].Values = []float64{1} },
		"point 1 is infinite":              func(s *Sweep) { s.Columns[0].Values[1] = math.Inf(-1) },
		"state \"hidden\" is none of":      func(s *Sweep) { s.Marks[0].State = "hidden" },
		"mark at point 2 of 2":             func(s *Sweep) { s.Marks[0].Index = 2 },
		"mark at point -1 of 2":            func(s *Sweep) { s.Marks[0].Index = -1 },
		"mark in column \"vd_v\"":          func(s *Sweep) { s.Marks[0].Quantity = VD },
		"point 0 of id_a is 0.1 and overl": func(s *Sweep) { s.Marks[0].Index = 0 },
		"lie outside of the 2 points":      func(s *Sweep) { s.Lines[0].Count = 3 },
	} {
		s := good()
		change(&s)
		invalid(t, s.Validate(), want)
	}
}

func TestReadingAndSessionValidate(t *testing.T) {
	valid(t, Reading{Value: Known(1)}.Validate())
	valid(t, Reading{State: Overload}.Validate())
	invalid(t, Reading{}.Validate(), "do not go together")
	invalid(t, Reading{Value: Known(1), State: Missing}.Validate(), "do not go together")
	invalid(t, Reading{State: "odd"}.Validate(), "none of")
	invalid(t, Reading{Value: Known(1), At: math.NaN()}.Validate(), "not a number")
	valid(t, Session{}.Validate())
	valid(t, Session{StartedAt: "2024-05-06"}.Validate())
	invalid(t, Session{Name: "S", StartedAt: "today"}.Validate(), "session \"S\"")
}

func TestNum(t *testing.T) {
	var unknown Num
	if x, ok := unknown.Get(); ok || unknown.IsKnown() || !math.IsNaN(unknown.Float()) || unknown.Or(7) != 7 || unknown.String() != "" {
		t.Errorf("unknown gives %v, %v", x, ok)
	}
	if Known(math.NaN()).IsKnown() || Known(math.Inf(1)).IsKnown() {
		t.Error("a number that is not finite is known")
	}
	zero := Known(0)
	if x, ok := zero.Get(); x != 0 || !ok || zero == unknown || zero.String() != "0" || zero.Or(7) != 0 || zero.Float() != 0 {
		t.Error("0 passes for unknown")
	}
	if unknown.Else(Known(2)) != Known(2) || Known(1).Else(Known(2)) != Known(1) {
		t.Error("Else")
	}
}

func TestNumJSON(t *testing.T) {
	type pair struct{ A, B Num }
	b, err := json.Marshal(pair{A: Known(2.5e-3)})
	if err != nil || string(b) != `{"A":0.0025,"B":null}` {
		t.Fatalf("%s, %v", b, err)
	}
	p := pair{B: Known(1)}
	if err := json.Unmarshal(b, &p); err != nil || p != (pair{A: Known(2.5e-3)}) {
		t.Errorf("%+v, %v", p, err)
	}
	for _, text := range []string{`{"A":"1"}`, `{"A":true}`, `{"A":[1]}`, `{"A":1e999}`} {
		if err := json.Unmarshal([]byte(text), &p); err == nil {
			t.Errorf("%s is read as %+v", text, p)
		}
	}
}

func TestNumScan(t *testing.T) {
	check := func(src any, want Num) {
		t.Helper()
		n := Known(99)
		if err := n.Scan(src); err != nil || n != want {
			t.Errorf("%T %v: %v, %v; want %v", src, src, n, err, want)
		}
		v, err := want.Value()
		if x, known := want.Get(); err != nil || known && v != x || !known && v != nil {
			t.Errorf("%v goes to the driver as %v, %v", want, v, err)
		}
	}
	check(nil, Num{})
	check(1.5, Known(1.5))
	check(int64(-3), Known(-3))
	check("2.5e-3", Known(2.5e-3))
	check([]byte("0"), Known(0))
	check(math.NaN(), Num{})
	for _, src := range []any{"x", "", true, time.Now(), []byte("1,5")} {
		n := Known(99)
		if err := n.Scan(src); err == nil {
			t.Errorf("%T %v is read as %v", src, src, n)
		}
	}
}
