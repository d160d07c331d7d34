package table

import (
	"slices"
	"strings"
	"testing"
	"time"

	"gatesill/store/record"
)

func TestConditionsInOneLineWithoutMarks(t *testing.T) {
	k := record.Known
	all := record.Condition{RL: k(10), VDD: k(12.05), Temp: k(23.5)}
	for comment, want := range map[string]record.Condition{
		"# RL=10R VDD=12.05V T=23.5C":                            all,
		"# tester v0.3 RL=10R VDD=12.05V T=23.5C":                all,
		"# tester v0.3, RL=10R VDD=12.05V T=23.5C":               all,
		"# tester v0.3\n# RL=10R VDD=12.05V T=23.5C":             all,
		"# bench 3: RL = 10 Ohm VDD = 12,05 V T = 23,5 °C":       all,
		"# RL: 10R VDD: 12.05 V T: 23.5 °C":                      all,
		"# T=23.5 VDD=12.05 RL=10":                               all,
		"# RL=10R | VDD (mV) = 12050 T=23.5C":                    all,
		"# R_L = 10 Ω ±1 % VDD = 12 V":                           {RL: k(10), RLTol: k(0.01), VDD: k(12)},
		"# load resistor = 10 supply voltage = 12 V T case = 30": {RL: k(10), VDD: k(12), Temp: k(30), TempOf: "case"},
		"# pulse width = 300 us duty cycle = 1 %":                {PulseWidth: k(300e-6), PulseDuty: k(0.01)},
		"# the supply was VDD=12V":                               {VDD: k(12)},
		// No conditions: prose, and words that only end like a key.
		"# see page T:12 of XVDD=12": {},
		"# noisy at 10:30 today":     {},
		"# http://example.org/rl=12": {},
	} {
		f := mustRead(t, "x.csv", comment+"\n"+talkBody, Options{})
		if got := f.Sweeps[0].Condition; got != want {
			t.Errorf("%q: %+v, want %+v (%q, %q)", comment, got, want, f.Proposed, f.Dialect.Notes)
		}
	}
	f := mustRead(t, "x.csv", "# operator: Ada L. VDD=12V\n"+talkBody, Options{})
	if f.Sweeps[0].Operator != "Ada L." || f.Sweeps[0].Condition.VDD != k(12) {
		t.Errorf("%+v", f.Sweeps[0])
	}
}

func TestConditionsThatCannotBeReadAreTold(t *testing.T) {
	for comment, want := range map[string]string{
		"# VDD = twelve":              "line 1: VDD = twelve looks like a condition and cannot be read",
		"# VDD = 12 A":                "VDD = 12 A looks",
		"# VDD = 1,200 V":             "VDD = 1,200 V looks",
		"# RL=10R VDD=12furlongs T=2": "VDD = 12furlongs looks",
		"# circuit: see photo":        "circuit = see photo looks",
		"# duty: small":               "duty = small looks",
		"# VDD = \x1b[31m12":          `VDD = \x1b[31m12 looks`,
	} {
		f := mustRead(t, "x.csv", comment+"\n"+talkBody, Options{})
		if !hasNote(f, want) {
			t.Errorf("%q: %q", comment, f.Dialect.Notes)
		}
		told := 0
		for _, n := range f.Dialect.Notes {
			told += strings.Count(n, "cannot be read")
		}
		if told != 1 {
			t.Errorf("%q: told %d times", comment, told)
		}
	}
	f := mustRead(t, "x.csv", "# VDD = 12 V\n# a note on nothing\n# operator: Ada\n"+talkBody, Options{})
	if hasNote(f, "cannot be read") {
		t.Errorf("%q", f.Dialect.Notes)
	}
}

// Comments made to cost time cost little of it.
func TestManyConditionsInManyComments(t *testing.T) {
	for _, piece := range []string{"a=1 ", "T =1", "VDD=1 ", "p-channel ", "p n ", "=1", "T T T T=1 "} {
		text := strings.Repeat("#"+strings.Repeat(piece, maxTalk/len(piece))+"\n", maxTalkLines/10) + talkBody
		start := time.Now()
		mustRead(t, "x.csv", text, Options{})
		if d := time.Since(start); d > 3*time.Second {
			t.Errorf("%q took %v", piece, d)
		}
	}
}

func TestChannelInComments(t *testing.T) {
	for comment, want := range map[string]string{
		"# channel: p":                     "p",
		"# channel = P":                    "p",
		"# Kanal: P-Kanal":                 "p",
		"# p-channel":                      "p",
		"# P-Kanal":                        "p",
		"# IRF9530, P-Kanal, bag 3":        "p",
		"# IRF9530 (p-channel) VDD=12V":    "p",
		"# MOSFET canale P":                "p",
		"# channel: n":                     "n",
		"# N-channel":                      "n",
		"# n- and p-channel: n-channel":    "",
		"# step channel of the meter":      "",
		"# channel: 2":                     "",
		"# stop channel":                   "",
		"# drain voltage up channel by up": "",
	} {
		f := mustRead(t, "x.csv", comment+"\n"+talkBody, Options{})
		proposed := "channel " + want + " (line 1)"
		if want == "" {
			if slices.ContainsFunc(f.Proposed, func(p string) bool { return strings.HasPrefix(p, "channel") }) || len(f.Remarks) > 0 {
				t.Errorf("%q: %q %+v", comment, f.Proposed, f.Remarks)
			}
			continue
		}
		if n := len(slices.DeleteFunc(slices.Clone(f.Proposed), func(p string) bool { return p != proposed })); n != 1 {
			t.Errorf("%q: proposed %q", comment, f.Proposed)
		}
		for _, isP := range []bool{false, true} {
			f := mustRead(t, "x.csv", comment+"\n"+talkBody, Options{PChannel: isP})
			if told := hasRemark(f, CodeFlagWins, "--channel "+want); told != (isP != (want == "p")) {
				t.Errorf("%q, p-channel %v: %+v", comment, isP, f.Remarks)
			}
		}
	}
	f := mustRead(t, "x.csv", "# p-channel\n# channel: n\n"+talkBody, Options{PChannel: true})
	if !hasRemark(f, CodeCommentsDiffer, "line 2 says channel n") {
		t.Errorf("%+v", f.Remarks)
	}
}
