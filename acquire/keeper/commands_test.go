package keeper

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// letters is a supply with a language of letters in which 1 means off.
func letters() map[string]string {
	return map[string]string{"set": "U{v}", "on": "K0", "off": "K1", "read": "u?"}
}

func TestOwnLanguageIsNeverMixed(t *testing.T) {
	c, err := commandsOf(Supply{Commands: letters()})
	if err != nil {
		t.Fatal(err)
	}
	for name, text := range c {
		if name != "own language" && letters()[name] == "" {
			t.Errorf("%s would be sent as %q", name, text)
		}
	}
	if c["off"] != "K1" || fill(c["set"], 3) != "U3" {
		t.Errorf("%v", c)
	}
	for _, missing := range []string{"set", "on", "off", "read"} {
		l := letters()
		delete(l, missing)
		if _, err := commandsOf(Supply{Commands: l}); !errors.Is(err, ErrConfig) {
			t.Errorf("without %q: %v", missing, err)
		}
	}
	l := letters()
	l["on_query"] = "k?"
	if _, err := commandsOf(Supply{Commands: l}); err == nil {
		t.Error("a question for the state whose answer nobody can read")
	}
}

func TestTemplates(t *testing.T) {
	for _, bad := range []map[string]string{
		{"set": "VOLT"}, {"set": "VOLT %g %g"}, {"set": "VOLT %s"}, {"set": "VOLT %"}, {"set": "VOLT %g\nOUTP ON"}, {"off": "OUTP %d"},
		{"fire": "x"}, {"set": ""}, {"read": ""}, {"off": ""}, {"limit": "CURR %*g"}, {"select": "INST %s"}, {"set": "VOLT %[2]g"}, {"off": "\x00"},
	} {
		if _, err := commandsOf(Supply{Commands: bad}); !errors.Is(err, ErrConfig) {
			t.Errorf("%v: %v", bad, err)
		}
	}
	for _, c := range []struct {
		template string
		v        float64
		want     string
	}{
		{"VOLT %g", 3, "VOLT 3"}, {"VOLT %g", 1e-5, "VOLT 0.00001"}, {"VOLT %g", 0.1 + 0.2, "VOLT 0.3"}, {"VOLT %g", math.Copysign(0, -1), "VOLT 0"},
		{"VOLT %g", -2.5, "VOLT -2.5"}, {"VOLT %g", 100, "VOLT 100"}, {"V%05.2f", 3.1, "V03.10"}, {"INST:NSEL %d", 2, "INST:NSEL 2"}, {"V %.3e", 12, "V 1.200e+01"},
	} {
		if got := fill(c.template, c.v); got != c.want {
			t.Errorf("%q with %g: %q, want %q", c.template, c.v, got, c.want)
		}
	}
}

func TestWhatIsSentIsWhatWasAsked(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64Range(-1000, 1000).Draw(t, "v")
		got, err := parseNumber(fill("VOLT %g", v))
		if err != nil || math.Abs(got-v) > 0.5000001e-6 {
			t.Fatalf("%g is sent as %q", v, fill("VOLT %g", v))
		}
	})
}

func TestParseNumber(t *testing.T) {
	for text, want := range map[string]float64{"+2.99980E+00": 2.9998, "V3.00": 3, "3.000 V": 3, "-0.5": -0.5, ".5": 0.5, "12": 12} {
		if v, err := parseNumber(text); err != nil || v != want {
			t.Errorf("%q: %g, %v", text, v, err)
		}
	}
	for _, text := range []string{"", "OVLD", "9.9E37", "-9.90000000E+37", "9.91E37", "1e999"} {
		if v, err := parseNumber(text); err == nil {
			t.Errorf("%q is %g", text, v)
		}
	}
}

func TestConfigRefused(t *testing.T) {
	for name, spoil := range map[string]func(*Config){
		"no greatest voltage":      func(c *Config) { c.MaxVgs = 0 },
		"off voltage beyond it":    func(c *Config) { c.OffVoltage = -11 },
		"off voltage no number":    func(c *Config) { c.OffVoltage = math.NaN() },
		"depletion, drain fixed":   func(c *Config) { c.Depletion, c.Drain = true, nil },
		"drain without a voltage":  func(c *Config) { c.Drain.Voltage = 0 },
		"no line":                  func(c *Config) { c.Gate.Address = "" },
		"drives the wrong thing":   func(c *Config) { c.Gate.Drives = "drain" },
		"one output for both":      func(c *Config) { c.Drain.Address = c.Gate.Address },
		"two settings of one line": func(c *Config) { c.Drain.Address, c.Drain.Output, c.Drain.Settings = c.Gate.Address, 2, "9600" },
		"negative heartbeat":       func(c *Config) { c.BeatLimit = -time.Second },
		"negative current":         func(c *Config) { c.Gate.Limit = -1 },
		"swapped, positive drain":  func(c *Config) { c.Drain.Negative = true },
		"limit without a command":  func(c *Config) { c.Gate.Commands = letters() },
	} {
		c := gateAndDrain()
		if err := c.Check(); err != nil {
			t.Fatal(err)
		}
		spoil(&c)
		if err := c.Check(); !errors.Is(err, ErrConfig) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestReportTravels(t *testing.T) {
	for _, v := range []float64{math.NaN(), 0, -4.5} {
		r := OffReport{Reason: "x", Took: time.Second, Drain: "off", Gate: v, GateHeld: true, Errors: []string{"e"}, Reached: true}
		b, err := json.Marshal(answer{Off: &r})
		if err != nil {
			t.Fatal(err)
		}
		var a answer
		if err := json.Unmarshal(b, &a); err != nil {
			t.Fatal(err)
		}
		if g := a.Off; g.Reason != "x" || g.Took != r.Took || !g.GateHeld || !g.Reached || len(g.Errors) != 1 || !(g.Gate == v || math.IsNaN(v) && math.IsNaN(g.Gate)) {
			t.Errorf("%s: %+v", b, g)
		}
		if math.IsNaN(v) != strings.Contains(string(b), `"gate_v":null`) {
			t.Errorf("%s", b)
		}
	}
}

// A start that failed half-way says so when the supplies may still be on.
func TestStartSaysWhatIsNotProved(t *testing.T) {
	for _, x := range []struct {
		off  *OffReport
		word bool
	}{{nil, false}, {&OffReport{Reached: true, Drain: "off"}, false}, {&OffReport{Drain: "not known"}, true}} {
		a := answer{Off: x.off}
		a.fail(fmt.Errorf("%w: the gate supply", ErrLine))
		err := a.startErr()
		if !errors.Is(err, ErrLine) || strings.Contains(err.Error(), "by hand") != x.word {
			t.Errorf("%+v: %v", x.off, err)
		}
	}
	if err := (&answer{}).startErr(); err != nil {
		t.Error(err)
	}
}

func FuzzOrder(f *testing.F) {
	for _, s := range []string{`{"do":"beat"}`, `{"do":"gate","v":3,"id":1}`, `{"do":"off","reason":"x"}`, `null`, `{}`, `[]`, `{"do":"gate","v":1e999}`} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, line []byte) {
		o, err := parseOrder(line)
		if err != nil {
			return
		}
		if math.IsNaN(o.V) || math.IsInf(o.V, 0) {
			t.Fatalf("%q: %+v", line, o)
		}
		again, err := parseOrder(encode(o))
		if err != nil || again != o {
			t.Fatalf("%q: %+v, then %+v (%v)", line, o, again, err)
		}
	})
}

func FuzzTemplate(f *testing.F) {
	for _, s := range []string{"VOLT %g", "U{v}", "V%05.2f", "%", "%%g", "%d%g", "VOLT %1000000g", "%g%!"} {
		f.Add(s, 3.25)
	}
	f.Fuzz(func(t *testing.T, text string, v float64) {
		c, err := commandsOf(Supply{Commands: map[string]string{"set": text, "on": "a", "off": "b", "read": "c"}})
		if err != nil || math.IsNaN(v) || math.Abs(v) > 1e6 {
			return
		}
		s := fill(c["set"], v)
		if strings.Contains(s, "%!") || strings.ContainsAny(s, "\r\n") || len(s) > len(text)+400 {
			t.Fatalf("%q with %g: %q", text, v, s)
		}
	})
}

func FuzzReply(f *testing.F) {
	for _, s := range []string{"1", "+3.0E+00", "V3.00", "9.9E37", "--3", "1e"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, err := parseNumber(s)
		if err == nil && !(math.Abs(v) < 9.0e37) || err != nil && !math.IsNaN(v) {
			t.Fatalf("%q: %g, %v", s, v, err)
		}
	})
}
