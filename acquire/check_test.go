package acquire

import (
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// Scenario 7: V_DD 12.02 V, R_L 10 ohm, V_D 10.02 V. 0.200 A is right, 0.0002 and
// 200 have lost their prefix.
func TestLostPrefixOfScenario7(t *testing.T) {
	c := record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12)}
	for _, sign := range []float64{1, -1} {
		for _, way := range []string{"V_DD - V_D", "V_L"} {
			for _, x := range []struct {
				id, ratio float64
				refuse    bool
				key       string
				factor    float64
			}{
				{0.200, 1, false, "", 0},
				{200, 1000, true, "this channel is mA", 1e-3},
				{0.0002, 0.001, true, "this channel is A, not mA", 1e3},
				{2e5, 1e6, true, "this channel is µA", 1e-6},
			} {
				p := NewPoint(1)
				p.Id = sign * x.id
				if way == "V_L" {
					p.Vl = sign * 2.0
				} else {
					p.Vd, p.Vdd = sign*10.02, sign*12.02
				}
				check := NewPrefixCheck(c)
				v := check.Look(p, math.NaN())
				if math.Abs(v.Ratio/x.ratio-1) > 1e-9 || v.Refuse != x.refuse || v.Key != x.key {
					t.Errorf("%s, %g A: %+v, want ratio %g, refused %v, key %q", way, p.Id, v, x.ratio, x.refuse, x.key)
				}
				if !x.refuse {
					continue
				}
				if f := check.Fix(v); math.Abs(f/x.factor-1) > 1e-12 {
					t.Errorf("%g A: factor %g, want %g", x.id, f, x.factor)
				}
				r := check.Apply(record.Reading{Role: Current, Value: record.Known(p.Id), Digit: record.Known(p.Id / 1000)})
				p.Id = r.Value.Float()
				if again := check.Look(p, math.NaN()); again.Refuse || math.Abs(again.Ratio-1) > 1e-9 || math.Abs(r.Digit.Float()-p.Id/1000) > 1e-12 {
					t.Errorf("%g A put right: %+v, digit %g", x.id, again, r.Digit.Float())
				}
			}
		}
	}
}

// A few percent are said, not refused; what cannot be compared is not.
func TestCurrentAgainstLoadResistor(t *testing.T) {
	c := record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12)}
	for _, x := range []struct {
		name          string
		id, vl, vd    float64
		text          string
		refuse, blank bool
	}{
		{"one percent", 0.202, 2, math.NaN(), "", false, false},
		{"five percent", 0.210, 2, math.NaN(), "+5.0 %", false, false},
		{"minus five percent", 0.190, 2, math.NaN(), "-5.0 %", false, false},
		{"factor of three", 0.6, 2, math.NaN(), "10 Ω", false, false},
		{"too small to compare", 0.0005, 0.01, math.NaN(), "", false, true},
		{"supply not read, drop small", 0.05, math.NaN(), 11.5, "", false, true},
		{"nothing to compare with", 0.05, math.NaN(), math.NaN(), "", false, true},
	} {
		p := NewPoint(0)
		p.Id, p.Vl, p.Vd = x.id, x.vl, x.vd
		v := NewPrefixCheck(c).Look(p, math.NaN())
		if v.Refuse != x.refuse || math.IsNaN(v.Ratio) != x.blank || !strings.Contains(v.Text, x.text) || x.text == "" && v.Text != "" {
			t.Errorf("%s: %+v", x.name, v)
		}
	}
	p := NewPoint(0)
	p.Id, p.Vl = 200, 2
	if v := NewPrefixCheck(record.Condition{Circuit: record.Fixed, RL: record.Known(10)}).Look(p, math.NaN()); v.Refuse {
		t.Errorf("held V_DS has no load resistor: %+v", v)
	}
}

// A prefix lost on the way: nothing is taken until one key puts it right; in between
// the power is still seen.
func TestPrefixLostInASweep(t *testing.T) {
	for _, factor := range []float64{1000, 0.001} {
		p := testPlan(ByHand)
		p.Roles = []string{Gate, Current, Load}
		s := newSim(t, p, testDevice()).start()
		for s.now < 300 && s.done == nil {
			s.step()
			if id, _ := s.solve(); id > 0.06 {
				break
			}
		}
		n := len(s.taken)
		s.meter(Current).factor = factor
		s.run(8)
		if len(s.taken) != n || s.done != nil {
			t.Fatalf("factor %g: %d points of %d, %+v", factor, len(s.taken), n, s.done)
		}
		v := s.r.View(s.now)
		if v.Fix == "" || v.Paused == "" || !s.heard("prefix is lost") {
			t.Fatalf("factor %g: view %q, fix %q", factor, v.Instruction, v.Fix)
		}
		if id, _ := s.solve(); math.Abs(v.PD/(id*(12-id*5))-1) > 0.05 && factor < 1 {
			t.Errorf("factor %g: the view shows %.3g W, the device has %.3g W", factor, v.PD, id*(12-id*5))
		}
		s.key(KeyFix)
		if f := s.r.Scale(Current); math.Abs(f*factor-1) > 1e-9 {
			t.Fatalf("factor %g is put right by %g", factor, f)
		}
		s.run(300)
		for i, k := range s.taken {
			if k.Point.Id > 1 || i > n && k.Point.Id < 1e-4 {
				t.Fatalf("point %d has %g A", i, k.Point.Id)
			}
		}
		s.complete(0.0015)
	}
	// Driven, a prefix lost upwards is above the limit, whatever it is.
	p := testPlan(Driven)
	p.Roles = []string{Gate, Current, Load}
	s := begun(t, p)
	s.meter(Current).factor = 1000
	s.run(10)
	if s.done == nil || s.done.Complete || !s.heard("prefix is lost") {
		t.Errorf("%+v", s.done)
	}
}

// swap hands out readings as two meters with exchanged lines give them: each says
// what the other should.
func turnGate(c *StartCheck, values func(turned float64) map[string]float64, units map[string]string) StartResult {
	at := 0.0
	for _, turned := range []float64{0, 0, 0, 0, 0.2, 0.6, 1, 1, 1, 1, 1} {
		for _, role := range []string{Gate, Current, Drain} {
			at += 0.1
			x := values(turned)[role]
			unit := units[role]
			if unit == "" {
				unit = unitOf(role)
			}
			rd := record.Reading{Role: role, At: at, Value: record.Known(x), Unit: unit, Digit: record.Known(0.001)}
			if unit != unitOf(role) {
				rd.Refused = "says " + unit
			}
			c.Event(Event{At: at, Role: role, Readings: []record.Reading{rd}})
		}
	}
	return c.Result()
}

func TestStartCheck(t *testing.T) {
	roles := []string{Gate, Current, Drain}
	for _, x := range []struct {
		name     string
		channel  record.Channel
		circuit  record.Circuit
		values   func(u float64) map[string]float64
		units    map[string]string
		ok       bool
		moved    string
		exchange [2]string
		text     string
	}{
		{"right", record.NChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: u, Current: 0, Drain: 12}
		}, nil, true, Gate, [2]string{}, "in its place"},
		{"right, p-channel", record.PChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: -u, Current: 0, Drain: -12}
		}, nil, true, Gate, [2]string{}, "in its place"},
		{"gate and drain swapped (scenario 8)", record.NChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: 12, Current: 0, Drain: u}
		}, nil, false, Drain, [2]string{Gate, Drain}, "nothing was stored"},
		{"gate and current swapped", record.NChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: 0, Current: u, Drain: 12}
		}, map[string]string{Gate: "A", Current: "V"}, false, Current, [2]string{Gate, Current}, "swapped"},
		{"leads swapped", record.NChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: -u, Current: 0, Drain: 12}
		}, nil, false, Gate, [2]string{}, "wrong way"},
		{"a part is inserted", record.NChannel, record.Load, func(u float64) map[string]float64 {
			return map[string]float64{Gate: u, Current: 0.1 * u, Drain: 12 - u}
		}, nil, false, Gate, [2]string{}, "still inserted"},
		{"drain tied to gate", record.NChannel, record.Diode, func(u float64) map[string]float64 {
			return map[string]float64{Gate: u, Current: 0, Drain: u}
		}, nil, true, Gate, [2]string{}, "in its place"},
	} {
		c := NewStartCheck(roles, x.channel, x.circuit)
		if !strings.Contains(c.Instruction(), "leave the knob alone") {
			t.Errorf("%s: begins with %q", x.name, c.Instruction())
		}
		r := turnGate(c, x.values, x.units)
		if !r.Done || r.OK != x.ok || r.Moved != x.moved || r.Exchange != x.exchange || r.Expected != Gate || !strings.Contains(r.Text, x.text) {
			t.Errorf("%s: %+v", x.name, r)
		}
	}
	// Nothing moves: no verdict.
	r := turnGate(NewStartCheck(roles, record.NChannel, record.Load), func(float64) map[string]float64 { return map[string]float64{Drain: 12} }, nil)
	if r.Done {
		t.Errorf("nothing moved: %+v", r)
	}
	// One glitch is no movement.
	n := 0
	r = turnGate(NewStartCheck(roles, record.NChannel, record.Load), func(u float64) map[string]float64 {
		n++
		v := map[string]float64{Gate: u, Drain: 12}
		if n == 24 {
			v[Drain] = 0
		}
		return v
	}, nil)
	if !r.OK {
		t.Errorf("one glitch of the drain meter: %+v", r)
	}
}

func TestZeros(t *testing.T) {
	z := NewZeros([]string{Gate, Current, Drain, Temperature}, 5, map[string]float64{Gate: 6, Current: 0.6, Drain: 60})
	if m := z.Missing(); len(m) != 3 {
		t.Errorf("missing %v, want three roles and no temperature", m)
	}
	give := func(role string, digit float64, values ...float64) {
		for i, x := range values {
			z.Event(Event{Readings: []record.Reading{{Role: role, At: float64(i), Value: record.Known(x), Digit: record.Known(digit)}}})
		}
	}
	z.Event(Event{Readings: []record.Reading{{Role: Drain, State: record.Overload}}})
	if m := strings.Join(z.Missing(), "; "); !strings.Contains(m, "drain meter: 0 of 5 readings, it says: overload") {
		t.Errorf("missing %q", m)
	}
	give(Gate, 0.001, 0.003, 0.003, 0.003, 0.003, 0.003)      // three counts: still well
	give(Current, 1e-4, 4e-4, 3e-4, 4e-4, 4e-4, 4e-4)         // 3.8 counts, 0.06 % of the range
	give(Drain, 0.01, 11.98, 11.99, 11.98, 11.98, 11.98, 500) // the supply is on; the sixth does not count
	res := z.Result()
	if len(z.Missing()) != 0 || len(res) != 3 {
		t.Fatalf("missing %v, %d results", z.Missing(), len(res))
	}
	if g := res[0]; g.Large || g.Text != "" || math.Abs(g.Offset-0.003) > 1e-12 || g.N != 5 || g.Noise > 1e-9 {
		t.Errorf("gate %+v", g)
	}
	if c := res[1]; !c.Large || !strings.Contains(c.Text, "3.8 counts") || strings.Contains(c.Text, "range") {
		t.Errorf("current %+v", c)
	}
	if d := res[2]; !d.Large || !strings.Contains(d.Text, "of its range") || !strings.Contains(d.Text, "is the supply off") || math.Abs(d.Offset-11.982) > 1e-9 {
		t.Errorf("drain %+v", d)
	}
}

// With some meters it can never be seen that a part may be touched.
func TestInterlockBlind(t *testing.T) {
	for _, x := range []struct {
		roles []string
		rl    float64
		blind bool
	}{
		{[]string{Gate}, 10, true}, {[]string{Gate, Drain}, 10, true}, {[]string{Gate, Load}, math.NaN(), true},
		{[]string{Gate, Load}, 10, false}, {[]string{Gate, Current}, math.NaN(), false}, {[]string{Gate, Supply}, math.NaN(), false},
	} {
		p := testPlan(ByHand)
		p.Roles, p.Circuit.RL = x.roles, record.Known(x.rl)
		l := NewInterlock(p)
		if l.Blind() != x.blind {
			t.Errorf("%v, R_L %g: blind %v", x.roles, x.rl, l.Blind())
		}
		for i := range 20 { // everything at zero, fresh
			for _, role := range x.roles {
				l.Event(Event{Readings: []record.Reading{{Role: role, At: 0.1 * float64(i), Value: record.Known(0), Unit: "V"}}})
			}
		}
		if l.Open(2) == x.blind {
			t.Errorf("%v, R_L %g: %v", x.roles, x.rl, l.Missing(2))
		}
	}
}

func TestInterlock(t *testing.T) {
	for _, k := range kinds {
		p := testPlan(ByHand)
		p.Channel, p.PartMode, p.OffVoltage = k.channel, k.mode, record.Known(k.off)
		p.Cycle = map[string]float64{Gate: 0.3, Current: 0.3}
		type given struct {
			vg, id, age float64
			supply      float64
		}
		for _, x := range []struct {
			name string
			given
			open bool
			want string
		}{
			{"off", given{k.off, 0, 0.1, 12}, true, ""},
			{"just off", given{k.off + 0.199, 0.0009, 0.59, 12}, true, ""},
			{"just off, negative", given{k.off - 0.199, -0.0009, 0.1, 12}, true, ""},
			{"gate not off", given{k.off + 0.2, 0, 0.1, 12}, false, "gate at its off voltage"},
			{"current flows", given{k.off, 0.001, 0.1, 12}, false, "drain current below"},
			{"negative current flows", given{k.off, -0.5, 0.1, 12}, false, "drain current below"},
			{"not fresh", given{k.off, 0, 0.61, 12}, false, "fresh reading"},
			{"current flows, supply seen off", given{k.off, 0.5, 0.1, 0}, true, ""},
			{"supply off, gate not", given{k.off + 1, 0, 0.1, 0}, false, "gate at its off voltage"},
		} {
			q := p
			if x.supply == 0 {
				q.Roles = append([]string{Supply}, p.Roles...)
			}
			l := NewInterlock(q)
			if l.Open(0) {
				t.Fatalf("open before anything was read")
			}
			now := 100.0
			for role, v := range map[string]float64{Gate: x.vg, Current: x.id, Supply: x.supply} {
				l.Event(Event{Readings: []record.Reading{reads(role, now-x.age, v)}})
			}
			if m := strings.Join(l.Missing(now), "; "); l.Open(now) != x.open || !strings.Contains(m, x.want) {
				t.Errorf("%s, %s: open %v, missing %q", k.name, x.name, l.Open(now), m)
			}
		}
	}
	l := NewInterlock(testPlan(ByHand))
	l.Event(Event{Readings: []record.Reading{reads(Gate, 10, 0), overloaded(Current, 10)}})
	if m := strings.Join(l.Missing(10.1), "; "); !strings.Contains(m, "over its range") {
		t.Errorf("overload: missing %q", m)
	}
	l.DrainOff(true, 10)
	if !l.Open(10.1) {
		t.Errorf("drain supply read back as off: missing %v", l.Missing(10.1))
	}
	if l.Open(10.6) {
		t.Errorf("a drain supply that was off 0.6 s ago opens it")
	}
	l.DrainOff(false, 10.1)
	if l.Open(10.2) {
		t.Errorf("drain supply on again, open")
	}
	held := reads(Gate, 11, 0)
	held.Refused = "held"
	l.Event(Event{Readings: []record.Reading{held, reads(Current, 11, 0)}})
	if m := strings.Join(l.Missing(11.1), "; "); !strings.Contains(m, "held") {
		t.Errorf("held gate meter: missing %q", m)
	}
}
