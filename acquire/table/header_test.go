package table

import (
	"strings"
	"testing"

	"gatesill/store/record"
)

func TestHeadings(t *testing.T) {
	for _, c := range []struct{ header, role, unit string }{
		// Gate voltage.
		{"Vg", "vg", ""}, {"VGS", "vg", ""}, {"V_GS", "vg", ""}, {"V GS", "vg", ""}, {"v.gs", "vg", ""}, {"U_GS", "vg", ""}, {"Ugs", "vg", ""}, {"Ug", "vg", ""},
		{"Vgate", "vg", ""}, {"gate voltage", "vg", ""}, {"Gate-Source Voltage (V)", "vg", "V"}, {"V_{GS}", "vg", ""}, {"Gate-Spannung [V]", "vg", "V"}, {"Gatespannung/mV", "vg", "mV"},
		{"Tension de grille (V)", "vg", "V"}, {"Tensión de puerta", "vg", ""}, {"tensione di gate", "vg", ""}, {"Napięcie bramki", "vg", ""}, {"gate (V)", "vg", "V"}, {"Vgs measured (V)", "vg", "V"},
		// Drain current.
		{"Id", "id", ""}, {"I_D", "id", ""}, {"IDS", "id", ""}, {"Idrain", "id", ""}, {"Drain Current [mA]", "id", "mA"}, {"Drainstrom in µA", "id", "µA"}, {"courant de drain", "id", ""},
		{"Id (mA)", "id", "mA"}, {"Id [mA]", "id", "mA"}, {"Id{mA}", "id", "mA"}, {"Id/mA", "id", "mA"}, {"Id / mA", "id", "mA"}, {"id_mA", "id", "mA"}, {"Id in mA", "id", "mA"}, {"Id, mA", "id", "mA"},
		{"Id mA", "id", "mA"}, {"id_ma", "id", "mA"}, {"ID_UA", "id", "µA"}, {"id_a", "id", "A"}, {"Id (uA)", "id", "µA"}, {"Id [\u03bcA]", "id", "µA"}, {"Id [\u00b5A]", "id", "µA"}, {"Id (nA)", "id", "nA"},
		{"I_D (Ampere)", "id", "A"}, {"drain (mA)", "id", "mA"}, {"Id(A) @ Vds = 10 V", "id", "A"}, {"corriente de drenador (mA)", "id", "mA"}, {"Prąd drenu", "id", ""},
		// Load and drain voltage, supply.
		{"V_load", roleLoad, ""}, {"U_L", roleLoad, ""}, {"VL (V)", roleLoad, "V"}, {"Vout", roleLoad, ""}, {"Lastspannung [V]", roleLoad, "V"}, {"tension de charge", roleLoad, ""}, {"Load (mA)", "id", "mA"},
		{"V_RL", "vl", ""}, {"Vds", "vd", ""}, {"U_DS", "vd", ""}, {"V_D (V)", "vd", "V"}, {"Vdrain", "vd", ""}, {"drain (V)", "vd", "V"}, {"Drain-Source-Spannung", "vd", ""},
		{"Vdd", "vdd", ""}, {"Ub", "vdd", ""}, {"U_B [V]", "vdd", "V"}, {"supply voltage", "vdd", ""}, {"Betriebsspannung", "vdd", ""}, {"alimentación", "vdd", ""},
		{"Ig (nA)", "ig", "nA"}, {"I_GSS", "ig", ""}, {"gate (nA)", "ig", "nA"},
		{"gm_S", "gm", "S"}, {"gm (mS)", "gm", "mS"}, {"g_fs [A/V]", "gm", "S"}, {"gfs (mA/V)", "gm", "mS"}, {"Steilheit/S", "gm", "S"}, {"gm_s", "gm", "S"},
		// Temperature and time.
		{"Temp", "temp", ""}, {"temp_C", "temp", "°C"}, {"T [°C]", "temp", "°C"}, {"T (ºC)", "temp", "°C"}, {"T_case (°C)", "temp", "°C"}, {"Temperatur in °C", "temp", "°C"}, {"température (°C)", "temp", "°C"},
		{"t (s)", "t", "s"}, {"time_s", "t", "s"}, {"Zeit [s]", "t", "s"}, {"t [ms]", "t", "ms"}, {"elapsed", "t", ""},
		// Generic words and bare units.
		{"Spannung [V]", roleVolt, "V"}, {"Strom [mA]", roleAmp, "mA"}, {"V", roleVolt, "V"}, {"mA", roleAmp, "mA"}, {"°C", "temp", "°C"},
		// Device and other texts.
		{"device", "device", ""}, {"DUT", "device", ""}, {"Serial No.", "device", ""}, {"Nr.", "device", ""}, {"No", "device", ""}, {"№", "device", ""}, {"#", "device", ""}, {"Bauteil", "device", ""},
		{"Prüfling", "device", ""}, {"Pruefling", "device", ""}, {"PRÜFLING-NR.", "device", ""}, {"échantillon", "device", ""}, {"Echantillon", "device", ""}, {"muestra", "device", ""}, {"campione", "device", ""}, {"próbka", "device", ""}, {"part", "device", ""}, {"Device Name", "device", ""}, {"DUT-ID", "device", ""}, {"Lot Name", "lot", ""},
		{"Lot", "lot", ""}, {"Charge", "lot", ""}, {"batch no", "lot", ""}, {"charge (V)", roleLoad, "V"},
		{"Gehäuse", "package", ""}, {"Side", "side", ""}, {"Datum", "date", ""}, {"fecha", "date", ""}, {"Bediener", "operator", ""}, {"Prüfer", "operator", ""}, {"jig", "fixture", ""},
		{"date code", "date-code", ""}, {"Aufdruck", "marking", ""}, {"R_L (Ω)", "rl", "Ω"},
		{"Vth", roleVth, ""}, {"VGS(th) [V]", roleVth, "V"}, {"vth_V", roleVth, "V"}, {"V_GS(off)", roleVth, ""}, {"Schwellspannung (V)", roleVth, "V"},
		// Not known.
		{"D07", "", ""}, {"", "", ""}, {"comment on it", "", ""}, {"Q1 [mA]", "", "mA"},
	} {
		h := readHeading(c.header)
		if h.role != c.role || h.unit.text != c.unit || h.hasUnit != (c.unit != "") || h.spot.IsKnown() {
			t.Errorf("%q: role %q unit %q (%+v), want %q %q", c.header, h.role, h.unit.text, h, c.role, c.unit)
		}
	}
}

func TestSpotHeadings(t *testing.T) {
	for _, c := range []struct {
		header, role, unit string
		current            float64
		text               string
	}{
		{"vgs_at_10mA_V", "vg", "V", 0.01, "10e-3"},
		{"vgs_at_150mA", "vg", "", 0.15, "150e-3"},
		{"vgs@250mA", "vg", "", 0.25, "250e-3"},
		{"V_GS @ 250 mA [V]", "vg", "V", 0.25, "250e-3"},
		{"Vgs [mV] @ 1 A", "vg", "mV", 1, "1"},
		{"Ugs bei 10mA (V)", "vg", "V", 0.01, "10e-3"},
		{"Ugs bei 0,5 A (V)", "vg", "V", 0.5, "0.5"},
		{"V_GS (I_D = 10 mA) [V]", "vg", "V", 0.01, "10e-3"},
		{"VGS(250uA) V", "vg", "V", 250e-6, "250e-6"},
		{"vgs_10mA_V", "vg", "V", 0.01, "10e-3"},
		{"vgs_at_10ma_v", "vg", "V", 0.01, "10e-3"},
		{"Vth @ 250 µA (V)", "vg", "V", 250e-6, "250e-6"},
		{"gm_at_250mA_S", "gm", "S", 0.25, "250e-3"},
		{"gm_at_1A_S", "gm", "S", 1, "1"},
		{"g_fs @ 2.5 A [mS]", "gm", "mS", 2.5, "2.5"},
		{"tension de grille à 10 mA (V)", "vg", "V", 0.01, "10e-3"},
	} {
		h := readHeading(c.header)
		col := column{heading: h}
		x, ok := h.spot.Get()
		if h.role != c.role || h.unit.text != c.unit || !ok || x != c.current || col.spotText() != c.text {
			t.Errorf("%q: role %q unit %q current %v text %s, want %q %q %g %s", c.header, h.role, h.unit.text, h.spot, col.spotText(), c.role, c.unit, c.current, c.text)
		}
	}
}

func TestUnits(t *testing.T) {
	for text, want := range map[string]unit{
		"V": {"V", "V", 0}, "mV": {"mV", "V", -3}, "mv": {"mV", "V", -3}, "MV": {"MV", "V", 6}, "kV": {"kV", "V", 3},
		"A": {"A", "A", 0}, "mA": {"mA", "A", -3}, "uA": {"µA", "A", -6}, "\u00b5A": {"µA", "A", -6}, "\u03bcA": {"µA", "A", -6}, "nA": {"nA", "A", -9}, "pA": {"pA", "A", -12},
		"milliampere": {"mA", "A", -3}, "S": {"S", "S", 0}, "mS": {"mS", "S", -3}, "s": {"s", "s", 0}, "ms": {"ms", "s", -3}, "A/V": {"S", "S", 0}, "mA/V": {"mS", "S", -3},
		"°C": {"°C", "degC", 0}, "℃": {"°C", "degC", 0}, "Ω": {"Ω", "ohm", 0}, "kΩ": {"kΩ", "ohm", 3}, "\u2126": {"Ω", "ohm", 0},
	} {
		if got, ok := readUnit(text); !ok || got != want {
			t.Errorf("%q: %+v %v, want %+v", text, got, ok, want)
		}
	}
	for _, text := range []string{"", "x", "m", "GS", "VV", "mAh", "D07", "A1", "12"} {
		if got, ok := readUnit(text); ok {
			t.Errorf("%q read as %+v", text, got)
		}
	}
}

func TestUnitIsNeededAndFlagsWin(t *testing.T) {
	text := "device,vg,id\nD1,2,1\nD1,3,2\nD1,4,3\n"
	wantError(t, "x.csv", text, Options{}, ErrAmbiguous, "no unit for columns 2 \"vg\", 3 \"id\"", "--units vg=V,id=A")
	wantError(t, "x.csv", text, Options{Units: map[string]string{"vg": "V"}}, ErrAmbiguous, "no unit for column 3 \"id\"", "--units id=A")
	wantError(t, "x.csv", text, Options{Units: map[string]string{"vg": "A"}}, ErrRefused, "does not fit", "")
	wantError(t, "x.csv", text, Options{Units: map[string]string{"vg": "furlong"}}, ErrRefused, "does not fit", "")
	wantError(t, "x.csv", text, Options{Units: map[string]string{"colour": "V"}}, ErrRefused, "names no quantity", "")
	checkShow(t, mustRead(t, "x.csv", text, Options{Units: map[string]string{"Ugs": "mV", "id": "uA"}}), "D1 up vg_v[2e-3,3e-3,4e-3] id_a[1e-6,2e-6,3e-6]")

	var asked []string
	f := mustRead(t, "x.csv", text, Options{Ask: func(q Question) (string, error) {
		asked = append(asked, q.Flag)
		return map[string]string{"--units vg=": "V", "--units id=": "mA"}[q.Flag], nil
	}})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1e-3,2e-3,3e-3]")
	if len(asked) != 2 {
		t.Errorf("asked %q", asked)
	}

	f = mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,1\nD1,3,2\nD1,4,3\n", Options{Units: map[string]string{"id": "mA"}})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1e-3,2e-3,3e-3]")
	if !hasRemark(f, CodeFlagWins, "headed in A and read in mA") {
		t.Errorf("%+v", f.Remarks)
	}
	wantError(t, "x.csv", "device,vg_V,ID_MA\nD1,2,1\nD1,3,2\nD1,4,3\n", Options{}, ErrAmbiguous, "cannot be meant", "--units id=mA")
	wantError(t, "x.csv", "device,vg_V,id (V)\nD1,2,1\nD1,3,2\nD1,4,3\n", Options{}, ErrAmbiguous, "no unit of it", "id")
}

func TestTemperatureAndTimeWithoutUnit(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A,temperature,T\nD1,2,1,25,1\nD1,3,2,25,1\nD1,4,3,26,1\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1,2,3] temp_c[25,25,26]")
	if !hasNote(f, "taken in °C") || !hasNote(f, "temperature and time have the same letter") {
		t.Errorf("%q", f.Dialect.Notes)
	}
}

func TestDoubtfulUnits(t *testing.T) {
	for _, c := range []struct{ text, words string }{
		{"device,vg_V,id_A\nD1,2000,1\nD1,3000,2\nD1,4000,3\n", `"vg_V" goes up to 4e+03 V`},
		{"device,vg_V,id_A\nD1,2,100\nD1,3,2000\nD1,4,3000\n", `"id_A" goes up to 3e+03 A`},
		{"device,vg_mV,id_A\nD1,2,1\nD1,3,2\nD1,4,3\n", `"vg_mV" never gets beyond 0.004 V`},
	} {
		f := mustRead(t, "x.csv", c.text, Options{})
		if !hasRemark(f, CodeUnitDoubtful, c.words) {
			t.Errorf("no remark %q: %+v", c.words, f.Remarks)
		}
	}
	f := mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\n", Options{})
	if len(f.Remarks) != 0 {
		t.Errorf("%+v", f.Remarks)
	}
}

func TestGenericColumns(t *testing.T) {
	f := mustRead(t, "D1.csv", "Spannung [V];Strom [mA]\n2;1\n3;2\n4;5\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1e-3,2e-3,5e-3]")
	if !hasNote(f, "taken for vg") || !hasNote(f, "taken for id") {
		t.Errorf("%q", f.Dialect.Notes)
	}
	f = mustRead(t, "D1.csv", "V;mA\n2;1\n3;2\n4;5\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1e-3,2e-3,5e-3]")
}

func TestLoadOrDrain(t *testing.T) {
	rise := "device,vg_V,id_A,V_load (V)\nD1,2,0.0,0.0\nD1,3,0.1,1.0\nD1,4,0.5,5.0\n"
	f := mustRead(t, "x.csv", rise, Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[0.0,0.1,0.5] vl_v[0.0,1.0,5.0]")
	if !hasNote(f, "the voltage across R_L: it rises") || f.Dialect.Columns[3].As != "vl" || f.Dialect.Columns[3].How != "behaviour" {
		t.Errorf("%+v", f.Dialect)
	}
	fall := "device,vg_V,id_A,U_L (V)\nD1,2,0.0,12.0\nD1,3,0.1,OL\nD1,4,0.5,7.0\n"
	f = mustRead(t, "x.csv", fall, Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[0.0,0.1,0.5] vd_v[12.0,null,7.0] 1:vd_v=overload(OL)")
	if !hasNote(f, "the drain voltage: it falls") {
		t.Errorf("%q", f.Dialect.Notes)
	}
	// Without a current column the gate tells, also of a p-channel part.
	checkShow(t, mustRead(t, "x.csv", "device,vg_V,Vout (V)\nD1,2,12\nD1,3,11\nD1,4,7\n", Options{}), "D1 up vg_v[2,3,4] vd_v[12,11,7]")
	checkShow(t, mustRead(t, "x.csv", "device,vg_V,Vout (V)\nD1,-2,0\nD1,-3,-1\nD1,-4,-5\n", Options{PChannel: true}), "D1 up vg_v[-2,-3,-4] vl_v[0,-1,-5]")
	// Drain tied to gate.
	checkShow(t, mustRead(t, "x.csv", "device,vg_V,id_A,Vout (V)\nD1,2,0.1,2.01\nD1,3,0.2,3.0\nD1,4,0.3,4.01\n", Options{}), "D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3] vd_v[2.01,3.0,4.01]")
	checkShow(t, mustRead(t, "x.csv", "device,vg_V,id_A,Vout (V)\nD1,2,0.1,2.5\nD1,3,0.2,3.5\nD1,4,0.3,4.5\n",
		Options{Given: record.Condition{Circuit: record.Diode}}), "D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3] vd_v[2.5,3.5,4.5]")
	// It stands still: a flag must tell.
	still := "device,vg_V,id_A,U_L (V)\nD1,2,0,12.0\nD1,3,0,12.0\nD1,4,0,12.0\n"
	wantError(t, "x.csv", still, Options{}, ErrAmbiguous, "across R_L (vl) or at the drain (vd)", "--map vl=4 or --map vd=4")
	checkShow(t, mustRead(t, "x.csv", still, Options{Map: map[string]string{"vd": "4"}}), "D1 up vg_v[2,3,4] id_a[0,0,0] vd_v[12.0,12.0,12.0]")
	checkShow(t, mustRead(t, "x.csv", still, Options{Map: map[string]string{"vl": "U_L (V)"}}), "D1 up vg_v[2,3,4] id_a[0,0,0] vl_v[12.0,12.0,12.0]")
	checkShow(t, mustRead(t, "x.csv", strings.Replace(still, "U_L (V)", "vl_V", 1), Options{}), "D1 up vg_v[2,3,4] id_a[0,0,0] vl_v[12.0,12.0,12.0]")
	// A column headed V_DS is the drain voltage whatever it does.
	checkShow(t, mustRead(t, "x.csv", "device,vg_V,id_A,V_DS (V)\nD1,2,0,1\nD1,3,0,2\nD1,4,1,3\n", Options{}), "D1 up vg_v[2,3,4] id_a[0,0,1] vd_v[1,2,3]")
}

func TestColumnsThatGiveWay(t *testing.T) {
	// The set voltage yields to the measured one, and serves where it is alone.
	f := mustRead(t, "x.csv", "device,Vg set (V),Vg (V),id_A\nD1,2,2.01,1\nD1,3,3.02,2\nD1,4,4.01,3\n", Options{})
	checkShow(t, f, "D1 up vg_v[2.01,3.02,4.01] id_a[1,2,3]")
	f = mustRead(t, "x.csv", "device,Vg set (V),id_A\nD1,2,1\nD1,3,2\nD1,4,3\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1,2,3]")
	f = mustRead(t, "x.csv", "Vg set (V),Vg (V),D1 (A)\n2,2.01,1\n3,3.02,2\n4,4.01,3\n", Options{})
	checkShow(t, f, "D1 up vg_v[2.01,3.02,4.01] id_a[1,2,3]")
	// The serial names the device, the part is the type.
	f = mustRead(t, "x.csv", "part,serial,vgs_at_10mA_V\nIRF,7,2\nIRF,8,3\n", Options{})
	checkShow(t, f, "7 spot vg_v[2] id_a[10e-3]\n8 spot vg_v[3] id_a[10e-3]")
}

func TestTemperatureInKelvinIsNotRead(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A,T (K)\nD1,2,1,298\nD1,3,2,298\nD1,4,3,298\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4] id_a[1,2,3]")
	if !hasRemark(f, CodeColumnNotUsed, "K is not read") {
		t.Errorf("%+v", f.Remarks)
	}
}
