package table

import (
	"slices"
	"strings"
	"testing"

	"gatesill/store/record"
)

const talkBody = "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\n"

func TestCommentsProposeConditions(t *testing.T) {
	k := record.Known
	for _, c := range []struct {
		comment string
		want    record.Condition
	}{
		{"# VDD = 12 V", record.Condition{VDD: k(12)}},
		{"# VDD: 12", record.Condition{VDD: k(12)}},
		{"# U_B = 12,5 V", record.Condition{VDD: k(12.5)}},
		{"# VDD (mV) = 12500", record.Condition{VDD: k(12.5)}},
		{"# VDD 12 V", record.Condition{VDD: k(12)}},
		{"# R_L = 10 Ohm", record.Condition{RL: k(10)}},
		{"# RL: 10R", record.Condition{RL: k(10)}},
		{"# RL: 4k7", record.Condition{RL: k(4700)}},
		{"# R_L = 10 Ω ±1 %", record.Condition{RL: k(10), RLTol: k(0.01)}},
		{"# R_L = 10 Ω, 5 %, 25 W", record.Condition{RL: k(10)}},
		{"# R_L = 10 Ω 5% 25W", record.Condition{RL: k(10), RLTol: k(0.05), RLRating: k(25)}},
		{"# tolerance: 0,5 %", record.Condition{RLTol: k(0.005)}},
		{"# V_DS = 10 V", record.Condition{VDS: k(10)}},
		{"# circuit: load", record.Condition{Circuit: record.Load}},
		{"# Schaltung: Drain-Gate verbunden, diode", record.Condition{Circuit: record.Diode}},
		{"# circuit = fixed V_DS", record.Condition{Circuit: record.Fixed}},
		{"# VDD=12V; RL=10R; T=25C", record.Condition{VDD: k(12), RL: k(10), Temp: k(25)}},
		{"# VDD=12V, RL=10R, circuit=load", record.Condition{VDD: k(12), RL: k(10), Circuit: record.Load}},
		{"# T_case = 25.5 °C", record.Condition{Temp: k(25.5), TempOf: "case"}},
		{"# Temperatur: 23 °C", record.Condition{Temp: k(23)}},
		{"# ammeter: in the drain lead", record.Condition{Ammeter: "drain"}},
		{"# burden: 100 mOhm", record.Condition{Burden: k(0.1)}},
		{"# pulse width: 300 us", record.Condition{PulseWidth: k(300e-6)}},
		{"# duty: 1 %", record.Condition{PulseDuty: k(0.01)}},
		{"# pulsed: yes", record.Condition{Pulsed: "pulsed"}},
		{"# dwell: 2 s", record.Condition{Dwell: k(2)}},
		{"// V_DS = 10 V", record.Condition{VDS: k(10)}},
		{"; V_DS = 10 V", record.Condition{VDS: k(10)}},
		{"VDD,12,V", record.Condition{VDD: k(12)}},
		// Not taken: prose, wrong units, numbers that may be read two ways.
		{"# the VDD was noisy today", record.Condition{}},
		{"# VDD = twelve", record.Condition{}},
		{"# VDD = 12 A", record.Condition{}},
		{"# VDD = 1,200 V", record.Condition{}},
		{"# R_L = big", record.Condition{}},
		{"# circuit: see photo of the world", record.Condition{}},
		{"# http://example.org/vdd:12", record.Condition{}},
	} {
		f := mustRead(t, "x.csv", c.comment+"\n"+talkBody, Options{})
		if got := f.Sweeps[0].Condition; got != c.want {
			t.Errorf("%q: %+v, want %+v (%q)", c.comment, got, c.want, f.Proposed)
		}
		if (c.want != record.Condition{}) != (len(f.Proposed) > 0) {
			t.Errorf("%q: proposed %q", c.comment, f.Proposed)
		}
	}
}

func TestCommentsNameOperatorFixtureAndDate(t *testing.T) {
	f := mustRead(t, "x.csv", "# operator: Ada L.\n# Fassung: F3\n# Datum: 2026-03-01\n"+talkBody, Options{})
	s := f.Sweeps[0]
	if s.Operator != "Ada L." || s.Fixture != "F3" || s.Date != "2026-03-01" || s.MeasuredAt != "2026-03-01" {
		t.Errorf("%+v", s)
	}
	if !slices.Contains(f.Proposed, "operator Ada L. (line 1)") {
		t.Errorf("%q", f.Proposed)
	}
	if f.Dialect.Comments != 3 {
		t.Errorf("%d comments", f.Dialect.Comments)
	}
}

func TestFlagsWinOverComments(t *testing.T) {
	given := record.Condition{VDD: record.Known(24), Circuit: record.Fixed}
	f := mustRead(t, "x.csv", "# VDD = 12 V\n# circuit: load\n# RL = 10\n"+talkBody, Options{Given: given})
	if got := f.Sweeps[0].Condition; got.VDD != record.Known(24) || got.Circuit != record.Fixed || got.RL != record.Known(10) {
		t.Errorf("%+v", got)
	}
	if !hasRemark(f, CodeFlagWins, "V_DD 12 V, the flag says 24") || !hasRemark(f, CodeFlagWins, "circuit load, the flag says fixed") {
		t.Errorf("%+v", f.Remarks)
	}
	f = mustRead(t, "x.csv", "# VDD = 24 V\n"+talkBody, Options{Given: given})
	if len(f.Remarks) != 0 {
		t.Errorf("no contradiction, but %+v", f.Remarks)
	}
}

func TestCommentsThatContradictEachOther(t *testing.T) {
	f := mustRead(t, "x.csv", "# VDD = 12 V\n"+talkBody+"# VDD = 13 V\n", Options{})
	if f.Sweeps[0].Condition.VDD != record.Known(12) || !hasRemark(f, CodeCommentsDiffer, "line 6 says V_DD 13 V") {
		t.Errorf("%+v %+v", f.Sweeps[0].Condition, f.Remarks)
	}
}

func TestContradictionsAreToldOnce(t *testing.T) {
	f := mustRead(t, "x.csv", "# VDD = 12 V\n# VDD = 13 V\n"+talkBody, Options{})
	if len(f.Remarks) != 1 {
		t.Errorf("%+v", f.Remarks)
	}
}

func TestSpotCurrentByFlagAndHeader(t *testing.T) {
	text := "dut,vgs_at_10mA_V\nA,2\n"
	f := mustRead(t, "x.csv", text, Options{SpotCurrent: record.Known(0.02)})
	if f.Sweeps[0].Condition.SpotCurrent != record.Known(0.02) || !hasRemark(f, CodeFlagWins, "0.01 A, read as 0.02 A") {
		t.Errorf("%+v %+v", f.Sweeps[0].Condition, f.Remarks)
	}
	f = mustRead(t, "x.csv", "dut,vgs_at_10mA_V,vgs_at_1A_V\nA,2,3\n", Options{SpotCurrent: record.Known(0.02)})
	checkShow(t, f, "A spot vg_v[2,3] id_a[10e-3,1]")
	if !hasRemark(f, CodeFlagWins, "keeps its own current") {
		t.Errorf("%+v", f.Remarks)
	}
	if f.Sweeps[0].Condition.SpotCurrent.IsKnown() {
		t.Error("two currents have no one spot current")
	}
}

func TestHostileComments(t *testing.T) {
	for _, c := range []string{
		"# VDD = " + strings.Repeat("9", 5000), "#", "#:", "#=", "# = 5", "# VDD =", "# VDD = \x1b[31m12", "# R_L = 10 % % %", "# R_L = W", "# R_L = 10 W W", "# R_L =  W", "# VDD = 1e999 V",
		"# device:", "# operator: \x1b[2J",
	} {
		f := mustRead(t, "x.csv", c+"\n"+talkBody, Options{})
		for _, p := range f.Proposed {
			if strings.ContainsAny(p, "\x1b\x00") {
				t.Errorf("%q: proposed %q", c, p)
			}
		}
	}
}

func TestCommentsNameTheDevice(t *testing.T) {
	body := "vg_V,id_A\n2,0.1\n3,0.2\n4,0.3\n"
	for comment, want := range map[string]string{
		"# device: D07":                   "D07",
		"# device: IRF530\n# serial: D07": "D07",
		"# serial: D07\n# device: IRF530": "D07",
		"# Prüfling: 7":                   "7",
		"Seriennummer,A 12":               "A 12",
		"# sample: 20 of 200":             "file",
		"# transistor: IRF530":            "file",
		"# the device: see photo":         "file",
	} {
		f := mustRead(t, "file.csv", comment+"\n"+body, Options{})
		if f.Sweeps[0].Device != want {
			t.Errorf("%q: device %q, want %q", comment, f.Sweeps[0].Device, want)
		}
	}
}
