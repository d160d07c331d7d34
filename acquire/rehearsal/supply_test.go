package rehearsal

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"
)

func supplies(t *testing.T, change func(*Config)) *Bench {
	return hand(t, cold(), func(c *Config) {
		c.Supplies, c.Bleed = []string{"gate", "drain"}, 1e5
		if change != nil {
			change(c)
		}
	})
}

func TestSupplySCPI(t *testing.T) {
	b := supplies(t, nil)
	say := func(line, message, want string) {
		t.Helper()
		if got := strings.TrimSpace(converse(b, line, message, 0.5)); got != want {
			t.Errorf("%s: %q: %q, want %q", line, message, got, want)
		}
	}
	gate, drain := "supply-gate", "supply-drain"
	say(gate, "*IDN?\n", "REHEARSAL,simulated gate supply,0,1")
	say(gate, "OUTP?;:VOLT?\n", "0;0.0000")
	say(gate, "*CLS;OUTP OFF;VOLT 3.25;CURR 20mA;*OPC?\n", "1")
	say(gate, "VOLT?;CURR?\n", "3.2500;0.0200")
	near(t, "off", b.Truth().Vg, 0, 1e-9)
	say(gate, ":SOURce1:VOLTage:LEVel:IMMediate:AMPLitude 3500 mV;:OUTPut:STATe ON\n", "")
	near(t, "on", b.Truth().Vg, 3.5, 1e-6)
	say(gate, "outp?\n", "1")
	if v := strings.TrimSpace(converse(b, gate, "MEAS:VOLT?\n", 0.5)); v < "3.49" || v > "3.51" {
		t.Errorf("reads back %q", v)
	}
	say(gate, "VOLT 31;VOLT -1;VOLT x;VOLT;OUTP MAYBE;FOO 1\n", "")
	say(gate, "VOLT?\n", "3.5000")
	say(gate, "SYST:ERR?\n", outOfRange)
	say(gate, "SYST:ERR:NEXT?\n", outOfRange)
	say(gate, "SYST:ERR?\nSYST:ERR?\nSYST:ERR?\nSYST:ERR?\nSYST:ERR?\n", strings.Join([]string{badArgument, missingArgument, badArgument, undefinedHeader, noError}, "\n"))
	say(gate, strings.Repeat("FOO\n", 2*depth), "")
	last := ""
	for range depth {
		last = strings.TrimSpace(converse(b, gate, "SYST:ERR?\n", 0.1))
	}
	if last != overflow {
		t.Errorf("last of a full queue: %q", last)
	}
	say(gate, "SYST:ERR?\n", noError)
	say(gate, "*STB?;*ESR?;*TST?\n", "0;48;0")
	say(gate, strings.Repeat("9", 5000)+"\nSYST:ERR?\n", tooLong)

	// Limits of the drain supply: 1 A into a device that would take more.
	say(drain, "VOLT 12;CURR 0.2;OUTP ON\n", "")
	b.Insert("D")
	say(drain, "*OPC?\n", "1")
	s := b.Truth()
	near(t, "current limit", s.Id, 0.2, 1e-9)
	near(t, "V_DD = V_L + V_D", s.Vdd, s.Vl+s.Vd, 1e-9)
	say(drain, "CURR MAX\n", "")
	if s := b.Truth(); s.Id <= 0.2 || math.Abs(s.Vdd-12) > 1e-6 {
		t.Errorf("without limit: %+v", s)
	}
	say(gate, "*RST\n", "")
	say(gate, "OUTP?;VOLT?;CURR?\n", "0;0.0000;1.0000")
	if err := b.Knob(1, 1); err == nil {
		t.Error("a knob beside a gate supply")
	}
}

func TestRefused(t *testing.T) {
	b := supplies(t, nil)
	converse(b, "supply-gate", "VOLT 3;OUTP ON\n", 0.5)
	if err := b.Fault(Fault{Kind: Refused, Role: "supply-gate", Match: "outp off"}); err != nil {
		t.Fatal(err)
	}
	if got := converse(b, "supply-gate", "VOLT 2;OUTP?;OUTP OFF;OUTP?;SYST:ERR?\n", 0.5); got != "1;1;"+notNow+"\n" {
		t.Errorf("refused: %q", got)
	}
	near(t, "what does not match is done", b.Truth().Vg, 2, 1e-6)
	if got := converse(b, "supply-gate", "OUTP OFF;OUTP?;SYST:ERR?\n", 0.5); got != "0;"+noError+"\n" {
		t.Errorf("the second time: %q", got)
	}
	b.Fault(Fault{Kind: Silence, Role: "supply-gate", For: 1})
	if got := converse(b, "supply-gate", "OUTP ON;*OPC?\n", 2); got != "" || b.world.gate.on {
		t.Errorf("silent: %q, on %v", got, b.world.gate.on)
	}
	b.Fault(Fault{Kind: Slow, Role: "supply-gate", Value: 0.3})
	b.Hear("supply-gate", []byte("*OPC?\n"))
	at := b.now
	sent := b.Step(at + 1)
	near(t, "slow", sent[0].At-at, 0.302, 1e-6)
}

// A one-quadrant output falls with its own time constant; a gate without a bleed
// resistor keeps its charge when the output opens, a drain's feed does not.
func TestOutputFalls(t *testing.T) {
	b := supplies(t, func(c *Config) { c.Settle, c.Decay = 0.01, 0.5 })
	b.Hear("supply-gate", []byte("VOLT 4;OUTP ON\n"))
	b.Step(0.002 + 0.01)
	near(t, "rise after one time constant", b.Truth().Vg, 4*(1-math.Exp(-1)), 1e-6)
	b.Step(1)
	b.Hear("supply-gate", []byte("OUTP OFF\n"))
	b.Step(1.002 + 0.5)
	near(t, "fall after one time constant", b.Truth().Vg, 4*math.Exp(-1), 1e-6)

	b = supplies(t, func(c *Config) { c.Bleed = 0 })
	for _, line := range []string{"supply-gate", "supply-drain"} {
		converse(b, line, "VOLT 4;OUTP ON\n", 1)
		converse(b, line, "OUTP OFF\n", 5)
	}
	near(t, "gate without bleed", b.Truth().Vg, 4, 1e-6)
	near(t, "drain", b.Truth().Vdd, 0, 1e-6)
}

func TestSupplyLog(t *testing.T) {
	b := supplies(t, nil)
	var log bytes.Buffer
	b.Log("gate", &log, func(at float64) int64 { return 1e18 + int64(math.Round(at*1e9)) })
	b.Step(2)
	converse(b, "supply-gate", "VOLT 3;OUTP ON;VOLT?\nVOLT 99\n*OPC?\n", 1)
	b.Hear("supply-gate", []byte("OUTP OFF\n"))
	b.Step(4)
	var got []string
	for i, line := range strings.Split(strings.TrimSpace(log.String()), "\n") {
		var h Heard
		if err := json.Unmarshal([]byte(line), &h); err != nil {
			t.Fatal(err)
		}
		at := 2.002
		if i == 5 {
			at = 3.002
		}
		near(t, "time", h.Elapsed, at, 1e-6)
		near(t, "clock", float64(h.UnixNano-1e18)/1e9, at, 1e-6)
		got = append(got, fmt.Sprintf("%s|%s|%v|%g|%s", h.Text, h.Reply, h.On, h.Set, h.Error))
	}
	want := []string{"VOLT 3||false|3|", "OUTP ON||true|3|", "VOLT?|3.0000|true|3|", "VOLT 99||true|3|" + outOfRange, "*OPC?|1|true|3|", "OUTP OFF||false|3|"}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("log:\n%s\nwant:\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
}

func TestSpellings(t *testing.T) {
	for _, c := range []struct {
		header, pattern string
		want            bool
	}{
		{"VOLT", voltLevel, true}, {"volt:lev", voltLevel, true}, {"SOUR:VOLT:IMM:AMPL", voltLevel, true},
		{"SOURCE1:VOLTAGE1", voltLevel, true}, {"VOLT?", voltLevel, false}, {"VOLTA", voltLevel, false},
		{"VOLT:PROT", voltLevel, false}, {"SYST:ERR?", "SYSTem:ERRor[:NEXT]?", true}, {"SYST?", "SYSTem:ERRor[:NEXT]?", false},
		{"", voltLevel, false}, {":", voltLevel, false}, {"MEAS?", "MEASure[:SCALar][:VOLTage][:DC]?", true},
	} {
		if got := spells(c.header, c.pattern); got != c.want {
			t.Errorf("%q as %q: %v", c.header, c.pattern, got)
		}
	}
}

func FuzzConsole(f *testing.F) {
	f.Add([]byte("VOLT 3;OUTP ON\n*OPC?\nREAD?;SYST:ERR?\n"))
	f.Add([]byte("CONF:VOLT:DC 1e99;READ?;FETC?\n:;;\r\n*ESE x\n"))
	f.Fuzz(func(t *testing.T, b []byte) {
		c, _ := Standard(Quick)
		bench, err := NewBench(c)
		if err != nil {
			t.Fatal(err)
		}
		for _, line := range []string{"supply-gate", "supply-drain", "line-current"} {
			bench.Hear(line, b)
		}
		bench.Step(0.2)
		if s := bench.Truth(); !(s.Vg >= 0 && s.Vg <= 30 && s.Vdd >= 0 && s.Vdd <= 60) {
			t.Errorf("%+v", s)
		}
		if n := len(bench.at("supply-gate").console.errs); n > depth {
			t.Errorf("%d errors in a queue of %d", n, depth)
		}
	})
}
