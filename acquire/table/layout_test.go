package table

import (
	"errors"
	"fmt"
	"strings"
	"testing"

	"gatesill/store/record"
)

func TestLayouts(t *testing.T) {
	for _, c := range []struct {
		name, file, text string
		opt              Options
		layout, want     string
	}{
		{"long", "x.csv", "device,vg_V,id_mA\nD1,2.0,0.10\nD1,2.5,0.90\nD1,3.0,2.2\nD2,2.0,0.11\nD2,2.5,1.0\nD2,3.0,2.30\n", Options{}, "long", `
D1 up vg_v[2.0,2.5,3.0] id_a[0.10e-3,0.90e-3,2.2e-3]
D2 up vg_v[2.0,2.5,3.0] id_a[0.11e-3,1.0e-3,2.30e-3]`},
		{"long, columns in any order", "x.csv", "I_D [A];U_GS [V];Nr.\n0,1;2;7\n0,2;3;7\n0,4;4;7\n", Options{}, "long", `
7 up vg_v[2,3,4] id_a[0.1,0.2,0.4]`},
		{"long, device comes back", "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\nD2,2,0.1\nD2,3,0.2\nD2,4,0.5\nD1,2,0.11\nD1,3,0.21\nD1,4,0.31\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D2 up vg_v[2,3,4] id_a[0.1,0.2,0.5]
D1 up vg_v[2,3,4] id_a[0.11,0.21,0.31]`},
		{"long, swept twice in a row", "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\nD1,2,0.11\nD1,3,0.21\nD1,4,0.31\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D1 up vg_v[2,3,4] id_a[0.11,0.21,0.31]`},
		{"long, up and down", "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\nD1,3,0.21\nD1,2,0.11\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D1 down vg_v[3,2] id_a[0.21,0.11]`},
		{"long, devices take turns", "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD2,2,0.2\nD1,3,0.3\nD2,3,0.4\nD1,4,0.5\nD2,4,0.6\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.3,0.5]
D2 up vg_v[2,3,4] id_a[0.2,0.4,0.6]`},
		{"long, sweep column", "x.csv", "device,run,vg_V,id_A\nD1,1,2,0.1\nD1,1,3,0.2\nD1,1,4,0.3\nD1,2,4.1,0.3\nD1,2,5,0.31\nD1,2,6,0.4\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D1 up vg_v[4.1,5,6] id_a[0.3,0.31,0.4]`},
		{"long, lot, package and side", "x.csv", "lot,package,side,vg_V,id_A,device\nL1,F1,a,2,0.1,T1\nL1,F1,a,3,0.2,T1\nL1,F1,a,4,0.3,T1\nL2,F1,B,2,0.1,T1\nL2,F1,B,3,0.2,T1\nL2,F1,B,4,0.3,T1\n", Options{}, "long", `
T1/L1/F1/A up vg_v[2,3,4] id_a[0.1,0.2,0.3]
T1/L2/F1/B up vg_v[2,3,4] id_a[0.1,0.2,0.3]`},
		{"two in a package", "x.csv", "package,device,vgs_at_10mA_V\nF1,T1,2\nF1,T2,3\n", Options{}, "spot", `
T1/F1 spot vg_v[2] id_a[10e-3]
T2/F1 spot vg_v[3] id_a[10e-3]`},
		{"the package is the outline", "x.csv", "package,device,vgs_at_10mA_V\nTO-220,T1,2\nTO-220,T2,3\nTO-220,T3,4\n", Options{}, "spot", `
T1 spot vg_v[2] id_a[10e-3]
T2 spot vg_v[3] id_a[10e-3]
T3 spot vg_v[4] id_a[10e-3]`},
		{"long, lot column by flag", "x.csv", "bag,device,vg_V,id_A,reel\nx,D1,2,0.1,R7\nx,D1,3,0.2,R7\nx,D1,4,0.2,R7\n", Options{LotColumn: "reel"}, "long", `
D1/R7 up vg_v[2,3,4] id_a[0.1,0.2,0.2]`},
		{"long, temperature and time", "x.csv", "device,t (s),vg_V,id_A,T [°C]\nD1,0,2,0.1,25.0\nD1,1.5,3,0.2,25.1\nD1,3,4,0.3,25.3\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3] temp_c[25.0,25.1,25.3] t_s[0,1.5,3]`},
		{"ID is the identifier", "x.csv", "ID,vg_V,I_D (A)\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]`},
		{"ID is the identifier of spots", "x.csv", "id,vgs_V\n1,2.5\n2,2.6\n", Options{SpotCurrent: ten()}, "spot", `
1 spot vg_v[2.5] id_a[0.01]
2 spot vg_v[2.6] id_a[0.01]`},
		{"no. counts the readings", "D7.csv", "Nr.;U_GS [V];I_D [A]\n1;2,0;0,1\n2;2,2;0,2\n3;2,4;0,3\n4;2,6;0,4\n5;2,8;0,5\n6;3,0;0,6\n", Options{}, "per-device", `
D7 up vg_v[2.0,2.2,2.4,2.6,2.8,3.0] id_a[0.1,0.2,0.3,0.4,0.5,0.6]`},
		{"no. counts few readings", "D7.csv", "Nr.;U_GS [V];I_D [A]\n1;2,0;0,1\n2;2,2;0,2\n3;2,4;0,9\n", Options{}, "per-device", `
D7 up vg_v[2.0,2.2,2.4] id_a[0.1,0.2,0.9]`},
		{"no. numbers few devices", "x.csv", "Nr.;U_GS [V];I_D [A]\n1;2,0;0,011\n2;2,2;0,010\n3;2,4;0,009\n", Options{}, "spot", `
1 spot vg_v[2.0] id_a[0.011]
2 spot vg_v[2.2] id_a[0.010]
3 spot vg_v[2.4] id_a[0.009]`},
		{"no. numbers the devices", "x.csv", "Nr.;U_GS [V];I_D [A]\n1;2,9;0,01\n2;2,2;0,01\n3;2,7;0,01\n4;2,6;0,01\n5;2,8;0,01\n6;2,0;0,01\n", Options{}, "spot", `
1 spot vg_v[2.9] id_a[0.01]
2 spot vg_v[2.2] id_a[0.01]
3 spot vg_v[2.7] id_a[0.01]
4 spot vg_v[2.6] id_a[0.01]
5 spot vg_v[2.8] id_a[0.01]
6 spot vg_v[2.0] id_a[0.01]`},
		{"the type is no device", "x.csv", "Nr;Bauteil;Ugs bei 10mA (V)\n1;IRF530;2,9\n2;IRF530;2,24\n3;IRF530;2,7\n", Options{}, "spot", `
1 spot vg_v[2.9] id_a[10e-3]
2 spot vg_v[2.24] id_a[10e-3]
3 spot vg_v[2.7] id_a[10e-3]`},
		{"per device", "bench/D07.csv", "Vg (V),Id (mA)\n2.0,0.1\n2.5,0.9\n3.0,2.2\n", Options{}, "per-device", `
D07 up vg_v[2.0,2.5,3.0] id_a[0.1e-3,0.9e-3,2.2e-3]`},
		{"per device, named by a comment", "x.csv", "# device: D07\nVg (V),Id (mA)\n2.0,0.1\n2.5,0.9\n3.0,2.2\n", Options{}, "per-device", `
D07 up vg_v[2.0,2.5,3.0] id_a[0.1e-3,0.9e-3,2.2e-3]`},
		{"per device, several joined", "x.csv", "# Prüfling: A\nVg (V),Id (A)\n2,0.1\n3,0.2\n4,0.3\n# Prüfling: B\nVg (V),Id (A)\n2,0.1\n3,0.3\n4,0.4\n", Options{}, "per-device", `
A up vg_v[2,3,4] id_a[0.1,0.2,0.3]
B up vg_v[2,3,4] id_a[0.1,0.3,0.4]`},
		{"per device, header again", "A.csv", "Vg (V),Id (A)\n2,0.1\n3,0.2\n4,0.3\nVg (V),Id (A)\n4.5,0.1\n5,0.3\n6,0.4\n", Options{}, "per-device", `
A up vg_v[2,3,4] id_a[0.1,0.2,0.3]
A up vg_v[4.5,5,6] id_a[0.1,0.3,0.4]`},
		{"wide", "x.csv", "Vg (V),D07,D08,=1+1\n2.0,0.1,0.2,0\n2.5,0.9,1,0.10\n3.0,2.2,3,0.2\n", Options{Units: map[string]string{"id": "mA"}}, "wide", `
D07 up vg_v[2.0,2.5,3.0] id_a[0.1e-3,0.9e-3,2.2e-3]
D08 up vg_v[2.0,2.5,3.0] id_a[0.2e-3,1e-3,3e-3]
=1+1 up vg_v[2.0,2.5,3.0] id_a[0e-3,0.10e-3,0.2e-3]`},
		{"wide, units in the headers", "x.csv", "Vg (V),D07 (mA),D08 [µA],D09/A\n2,0.1,0.2,1\n3,0.9,1,2\n4,1,1,3\n", Options{}, "wide", `
D07 up vg_v[2,3,4] id_a[0.1e-3,0.9e-3,1e-3]
D08 up vg_v[2,3,4] id_a[0.2e-6,1e-6,1e-6]
D09 up vg_v[2,3,4] id_a[1,2,3]`},
		{"wide, unit as last word of all", "x.csv", "vg_V,D07_mA,D08_mA\n2,0.1,0.2\n3,0.9,1\n4,1,1\n", Options{}, "wide", `
D07 up vg_v[2,3,4] id_a[0.1e-3,0.9e-3,1e-3]
D08 up vg_v[2,3,4] id_a[0.2e-3,1e-3,1e-3]`},
		{"wide, sides are no units", "x.csv", "vg_V,D07_A,D07_B\n2,0.1,0.2\n3,0.9,1\n4,1,1\n", Options{Units: map[string]string{"id": "A"}}, "wide", `
D07_A up vg_v[2,3,4] id_a[0.1,0.9,1]
D07_B up vg_v[2,3,4] id_a[0.2,1,1]`},
		{"wide, lead before the names", "x.csv", "U_GS/V;I_D_T1/mA;I_D_T2/mA\n2;0,1;0,2\n3;0,9;1\n4;1;1\n", Options{}, "wide", `
T1 up vg_v[2,3,4] id_a[0.1e-3,0.9e-3,1e-3]
T2 up vg_v[2,3,4] id_a[0.2e-3,1e-3,1e-3]`},
		{"wide, numbered devices and a unit line", "x.csv", "Vg;T;1;2\nV;°C;mA;mA\n2;25;0,1;0,2\n3;25;0,9;1\n4;26;1;1\n", Options{}, "wide", `
1 up vg_v[2,3,4] id_a[0.1e-3,0.9e-3,1e-3] temp_c[25,25,26]
2 up vg_v[2,3,4] id_a[0.2e-3,1e-3,1e-3] temp_c[25,25,26]`},
		{"wide, shorter column and overload", "x.csv", "Vg (V),D1 (A),D2 (A)\n2,0.1,0.2\n3,0.2,OL\n4,,0.4\n", Options{}, "wide", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,null] 2:id_a=missing()
D2 up vg_v[2,3,4] id_a[0.2,null,0.4] 1:id_a=overload(OL)`},
		{"wide, up and down", "x.csv", "Vg (V),D1 (A),D2 (A)\n2,1,2\n3,2,3\n4,3,4\n3,2.1,3.1\n2,1.1,2.1\n", Options{}, "wide", `
D1 up vg_v[2,3,4] id_a[1,2,3]
D2 up vg_v[2,3,4] id_a[2,3,4]
D1 down vg_v[3,2] id_a[2.1,1.1]
D2 down vg_v[3,2] id_a[3.1,2.1]`},
		{"wide, volts across the load", "x.csv", "Vg (V),D1 (V),D2 (V)\n2,0.1,0.2\n3,0.2,0.3\n4,0.3,0.4\n", Options{}, "wide", `
D1 up vg_v[2,3,4] vl_v[0.1,0.2,0.3]
D2 up vg_v[2,3,4] vl_v[0.2,0.3,0.4]`},
		{"wide, volts at the drain by flag", "x.csv", "Vg (V),D1,D2\n2,12,12\n3,12,12\n4,12,12\n", Options{Units: map[string]string{"vd": "V"}}, "wide", `
D1 up vg_v[2,3,4] vd_v[12,12,12]
D2 up vg_v[2,3,4] vd_v[12,12,12]`},
		{"wide, volts in the cells", "x.csv", "Vg (V);D1;D2\n2;12 V;OL\n3;11 V;10,5 V\n4;10 V;9 V\n", Options{}, "wide", `
D1 up vg_v[2,3,4] vd_v[12,11,10]
D2 up vg_v[2,3,4] vd_v[null,10.5,9] 0:vd_v=overload(OL)`},
		{"wide, gate without a number", "x.csv", "Vg (V),D1 (A),D2 (A)\n2,0.1,0.2\nOL,0.2,n/a\n4,0.3,0.4\n", Options{}, "wide", `
D1 up vg_v[2,null,4] id_a[0.1,0.2,0.3] 1:vg_v=overload(OL)
D2 up vg_v[2,null,4] id_a[0.2,null,0.4] 1:vg_v=overload(OL) 1:id_a=missing(n/a)`},
		{"wide, header again", "x.csv", "Vg (V),D1 (A),D2 (A)\n2,0.1,0.2\n3,0.2,0.3\n4,0.3,0.4\nVg (V),D1 (A),D2 (A)\n4.5,0.1,0.2\n5,0.2,0.3\n", Options{}, "wide", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D2 up vg_v[2,3,4] id_a[0.2,0.3,0.4]
D1 up vg_v[4.5,5] id_a[0.1,0.2]
D2 up vg_v[4.5,5] id_a[0.2,0.3]`},
		{"wide, one header twice", "x.csv", "Vg (V),D1 (A),D1 (A)\n2,0.1,0.2\n3,0.2,0.3\n4,0.3,0.4\n", Options{}, "wide", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]
D1 up vg_v[2,3,4] id_a[0.2,0.3,0.4]`},
		{"current known by its unit", "x.csv", "device,vg_V,channel 2 (mA)\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1e-3,0.2e-3,0.3e-3]`},
		{"drain by --units", "x.csv", "device,vg_V,Drain\nD1,2,0.1\nD1,3,0.2\nD1,4,0.3\n", Options{Units: map[string]string{"id": "mA"}}, "long", `
D1 up vg_v[2,3,4] id_a[0.1e-3,0.2e-3,0.3e-3]`},
		{"spots and thresholds beside sweeps", "x.csv", "device,vg_V,id_A,vth_V,vgs_at_10mA_V\nD1,2,0.1,2.5,2.7\nD1,3,0.2,2.5,2.7\nD1,4,0.3,2.5,2.7\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]`},
		{"spots, transconductance at their current", "x.csv", "dut,vgs_at_250mA_V,gm_S\nA,3.5,1.4\n", Options{}, "spot", `
A spot vg_v[3.5] id_a[250e-3] gm_s[1.4]`},
		{"spot of the file itself", "D9.csv", "vgs_at_250mA_V\n3.5\n", Options{}, "spot", `
D9 spot vg_v[3.5] id_a[250e-3]`},
		{"time of day", "x.csv", "device,time,vg_V,id_A,t_min\nD1,12:00:01,2,0.1,1\nD1,12:00:02,3,0.2,2\nD1,12:00:03,4,0.3,3\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3]`},
		{"all quantities", "x.csv", "device,Vg (V),Id (A),V_RL (V),Vds (V),Vdd (V),Ig (nA),temp_C,t_s\nD1,2,0.1,1,11,12,5,25,0\nD1,3,0.2,2,10,12,5,25,1\nD1,4,0.3,3,9,12,6,25,2\n", Options{}, "long", `
D1 up vg_v[2,3,4] id_a[0.1,0.2,0.3] vl_v[1,2,3] vd_v[11,10,9] vdd_v[12,12,12] ig_a[5e-9,5e-9,6e-9] temp_c[25,25,25] t_s[0,1,2]`},
		{"spots", "x.csv", "part,vgs@250mA\n=1+1,3.1\n../../etc,9.10\n", Options{Units: map[string]string{"vgs": "V"}}, "spot", `
=1+1 spot vg_v[3.1] id_a[250e-3]
../../etc spot vg_v[9.10] id_a[250e-3]`},
		{"spots, current by flag", "x.csv", "Prüfling;Ugs [V]\nA;2,5\nB;2,6\n", Options{SpotCurrent: ten()}, "spot", `
A spot vg_v[2.5] id_a[0.01]
B spot vg_v[2.6] id_a[0.01]`},
		{"spots, current in a comment", "x.csv", "# Prüfstrom: 10 mA\nPrüfling;Ugs [V]\nA;2,5\nB;2,6\n", Options{}, "spot", `
A spot vg_v[2.5] id_a[0.01]
B spot vg_v[2.6] id_a[0.01]`},
		{"spots, threshold column", "x.csv", "serial,vth_V\nA,2.5\nB,2.6\n", Options{SpotCurrent: record.Known(250e-6)}, "spot", `
A spot vg_v[2.5] id_a[0.00025]
B spot vg_v[2.6] id_a[0.00025]`},
		{"spots, two currents", "x.csv", "dut,vgs_at_1A_V,vgs_at_10mA_mV\nA,3.5,2500\nB,3.6,2600\n", Options{}, "spot", `
A spot vg_v[2500e-3,3.5] id_a[10e-3,1]
B spot vg_v[2600e-3,3.6] id_a[10e-3,1]`},
		{"spots, transconductance", "x.csv", "dut,vgs_at_250mA_V,gm_at_250mA_mS,temp (°C)\nA,3.5,1400,25.0\n", Options{}, "spot", `
A spot vg_v[3.5] id_a[250e-3] gm_s[1400e-3] temp_c[25.0]`},
		{"spots, repeated and one missing", "x.csv", "dut,vgs_at_10mA_V\nA,3.5\nB,OL\nA,3.51\n", Options{}, "spot", `
A spot vg_v[3.5] id_a[10e-3]
B spot vg_v[null] id_a[10e-3] 0:vg_v=overload(OL)
A spot vg_v[3.51] id_a[10e-3]`},
		{"spots as rows with their currents", "x.csv", "device,vgs_V,id_A\nA,2.5,0.01\nA,3.5,1\nB,2.6,0.01\nB,3.6,1\n", Options{}, "spot", `
A spot vg_v[2.5,3.5] id_a[0.01,1]
B spot vg_v[2.6,3.6] id_a[0.01,1]`},
		{"two rounds at two currents", "x.csv", "device,vgs_V,id_A\nA,2.5,0.01\nB,2.6,0.01\nA,3.5,1\nB,3.6,1\n", Options{}, "spot", `
A spot vg_v[2.5,3.5] id_a[0.01,1]
B spot vg_v[2.6,3.6] id_a[0.01,1]`},
		{"two rounds at one current", "x.csv", "device,vgs_V,id_A\nA,2.5,0.01\nB,2.6,0.01\nA,2.51,0.01\nB,2.61,0.01\n", Options{}, "spot", `
A spot vg_v[2.5] id_a[0.01]
B spot vg_v[2.6] id_a[0.01]
A spot vg_v[2.51] id_a[0.01]
B spot vg_v[2.61] id_a[0.01]`},
		{"p-channel spots keep their sign", "x.csv", "dut,vgs_at_10mA_V\nA,-3.5\n", Options{PChannel: true}, "spot", `
A spot vg_v[-3.5] id_a[-10e-3]`},
		{"p-channel sweep turns on downwards", "x.csv", "dut,vg_V,id_A\nA,-2,-0.1\nA,-3,-0.2\nA,-4,-0.3\nA,-3,-0.21\nA,-2,-0.11\n", Options{PChannel: true}, "long", `
A up vg_v[-2,-3,-4] id_a[-0.1,-0.2,-0.3]
A down vg_v[-3,-2] id_a[-0.21,-0.11]`},
	} {
		t.Run(c.name, func(t *testing.T) {
			f := mustRead(t, c.file, c.text, c.opt)
			checkShow(t, f, c.want)
			if f.Layout != c.layout {
				t.Errorf("layout %s, want %s", f.Layout, c.layout)
			}
			if f.Refused != 0 {
				t.Errorf("refused %+v", f.Refusals)
			}
		})
	}
}

func TestTextColumnsGoWithTheSweep(t *testing.T) {
	f := mustRead(t, "x.csv", `device;Datum;Bediener;Fassung;date code;Aufdruck;Stange;Bemerkung;R_L [Ohm];Ug [V];Id [A]
D1;2026-03-01;Ada;F1;2431;IRF;T1;"ein; Wort";10;2;0,1
D1;2026-03-01;Ada;F1;2431;IRF;T1;;10;3;0,2
D1;2026-03-01;Ada;F1;2431;IRF;T1;;10;4;0,3
D1;2026-03-02;Bob;F2;2431;IRF;T1;;10,5;3;0,2
D1;2026-03-02;Bob;F2;2431;IRF;T1;;10,5;2;0,1
`, Options{})
	if len(f.Sweeps) != 2 {
		t.Fatalf("%s", show(f))
	}
	a, b := f.Sweeps[0], f.Sweeps[1]
	if a.Date != "2026-03-01" || a.MeasuredAt != a.Date || a.Operator != "Ada" || a.Fixture != "F1" || a.DateCode != "2431" || a.Marking != "IRF" || a.Tube != "T1" || a.Note != "ein; Wort" || a.Condition.RL != record.Known(10) {
		t.Errorf("up: %+v", a)
	}
	if b.Date != "2026-03-02" || b.Operator != "Bob" || b.Fixture != "F2" || b.Note != "" || b.Condition.RL != record.Known(10.5) {
		t.Errorf("down: %+v", b)
	}
}

func TestWideOfFiveThousandDevices(t *testing.T) {
	var b strings.Builder
	b.WriteString("Vg [V]")
	for d := range 5000 {
		fmt.Fprintf(&b, ";D%04d [mA]", d)
	}
	for i := range 20 {
		fmt.Fprintf(&b, "\r\n%d,5", i)
		for d := range 5000 {
			fmt.Fprintf(&b, ";%d,%03d", i*i, d%1000)
		}
	}
	f := mustRead(t, "x.csv", b.String(), Options{})
	if len(f.Sweeps) != 5000 || f.Points != 100000 || f.Rows != 20 {
		t.Fatalf("%d sweeps, %d points, %d rows", len(f.Sweeps), f.Points, f.Rows)
	}
	if s := f.Sweeps[4321]; s.Device != "D4321" || s.Column(record.ID).Values[3] != 9.321e-3 {
		t.Errorf("%+v", s)
	}
	if len(f.Dialect.Columns) > maxListed {
		t.Errorf("%d columns described", len(f.Dialect.Columns))
	}
}

func TestLayoutAmbiguous(t *testing.T) {
	for _, c := range []struct{ name, text, words, hint string }{
		{"no gate", "device,foo,bar\nD1,2,3\nD1,3,4\n", "gate voltage", "--map vg=COLUMN"},
		{"no current", "device,vg_V\nD1,2\nD1,3\n", "current", "--spot-current"},
		{"two gates", "device,Vg (V),Ugs (V),id_A\nD1,2,2,3\nD1,3,3,4\n", "both look like vg", "--map vg=2 or --map vg=3"},
		{"drain of what", "device,Vg (V),Drain\nD1,2,2\nD1,3,3\n", "drain current or drain voltage", "--map id=3"},
		{"wide in two units", "Vg (V),D1 (A),D2 (V)\n2,1,2\n3,2,3\n", "other device columns are not", ""},
		{"gm at which current", "dut,vgs_at_1mA_V,vgs_at_1A_V,gm_S\nA,1,2,3\n", "at which current", "--spot-current"},
		{"two spots at one current", "dut,vgs_at_10mA_V,Ugs bei 10 mA (V)\nA,1,2\n", "same current", "--map vg=2"},
	} {
		t.Run(c.name, func(t *testing.T) {
			wantError(t, "x.csv", c.text, Options{}, ErrAmbiguous, c.words, c.hint)
		})
	}
	wantError(t, "-", "Vg (V),Id (A)\n2,0.1\n3,0.2\n4,0.3\n", Options{}, ErrAmbiguous, "no device column", "# device: D07")
}

func TestMap(t *testing.T) {
	text := "who,a,b\nD1,2,1\nD1,3,2\nD1,4,4\n"
	opt := Options{Map: map[string]string{"device": "who", "Ugs": "A", "id": "3"}, Units: map[string]string{"vgs": "V", "ids": "mA"}}
	want := "D1 up vg_v[2,3,4] id_a[1e-3,2e-3,4e-3]"
	checkShow(t, mustRead(t, "x.csv", text, opt), want)

	// What was settled earlier for this header serves again; flags win over it.
	var asked string
	opt = Options{Units: opt.Units, Remembered: func(s string) (map[string]string, bool) {
		asked = s
		return map[string]string{"device": "1", "vg": "2", "id": "3"}, true
	}}
	f := mustRead(t, "x.csv", text, opt)
	checkShow(t, f, want)
	if asked == "" || asked != f.Dialect.Signature || f.Dialect.Columns[1].How != "remembered" {
		t.Errorf("signature %q asked, %q reported; %+v", asked, f.Dialect.Signature, f.Dialect.Columns)
	}
	opt.Map = map[string]string{"vg": "b", "id": "a"}
	checkShow(t, mustRead(t, "x.csv", text, opt), "D1 up vg_v[1,2,4] id_a[2e-3,3e-3,4e-3]")

	for _, c := range []struct {
		m     map[string]string
		words string
		hint  string
	}{
		{map[string]string{"vg": "nope"}, "no column is headed so", ""},
		{map[string]string{"vg": "9"}, "there is no column 9", ""},
		{map[string]string{"colour": "a"}, "names no quantity", ""},
		{map[string]string{"vg": "a", "id": "a"}, "is mapped to", ""},
	} {
		wantError(t, "x.csv", text, Options{Map: c.m}, ErrRefused, c.words, c.hint)
	}
	wantError(t, "x.csv", "x,y,y\nD1,2,3\n", Options{Map: map[string]string{"vg": "y"}}, ErrAmbiguous, "2 columns are headed", "--map vg=2")
}

func TestWithoutHeader(t *testing.T) {
	units := map[string]string{"vg": "V", "id": "A"}
	sweep := "D1,2.0,0.001\nD1,2.1,0.010\nD1,2.2,0.050\nD1,2.3,0.120\nD1,2.4,0.210\nD1,2.5,0.400\n"
	want := "D1 up vg_v[2.0,2.1,2.2,2.3,2.4,2.5] id_a[0.001,0.010,0.050,0.120,0.210,0.400]"
	f := mustRead(t, "x.csv", sweep, Options{Units: units})
	checkShow(t, f, want)
	if !hasNote(f, "no header") || f.Dialect.Header != 0 || f.Dialect.Signature != "" {
		t.Errorf("%+v", f.Dialect)
	}
	checkShow(t, mustRead(t, "x.csv", sweep, Options{Units: units, Map: map[string]string{"device": "1", "vg": "2", "id": "3"}}), want)
	checkShow(t, mustRead(t, "x.txt", "0,2.78\n1,2.67\n2,2.94\n", Options{Units: units, SpotCurrent: record.Known(0.01)}), `
0 spot vg_v[2.78] id_a[0.01]
1 spot vg_v[2.67] id_a[0.01]
2 spot vg_v[2.94] id_a[0.01]`)
	checkShow(t, mustRead(t, "D3.txt", "2.0 V;1 mA\n2.5 V;7 mA\n3.0 V;20 mA\n", Options{}), "D3 up vg_v[2.0,2.5,3.0] id_a[1e-3,7e-3,20e-3]")
	wantError(t, "x.csv", "D1,2.0,0.001,1\nD1,2.1,0.010,1\n", Options{Units: units}, ErrAmbiguous, "no header", "--map device=1,vg=2,id=3")
	wantError(t, "x.csv", "Q1,2.01\nQ2,2.05\n", Options{Units: units}, ErrAmbiguous, "no header", "--spot-current")
	// Current before voltage: the even steps stand in the second column.
	wantError(t, "x.csv", "0.001,2.0\n0.010,2.1\n0.050,2.2\n0.120,2.3\n0.210,2.4\n0.400,2.5\n", Options{Units: units}, ErrAmbiguous, "no header", "--map")
}

func TestSixWeeksOfRowsInOneFileKeepTheirLines(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A\n\nD1,2,0.1\n# a comment\nD1,3,0.2\n\n\nD1,4,0.3\nD1,3,0.2\nD1,2,0.1\n", Options{})
	var lines []int
	for i := range f.Sweeps {
		for p := range f.Sweeps[i].Len() {
			lines = append(lines, f.Sweeps[i].Line(p))
		}
	}
	if fmt.Sprint(lines) != "[3 5 8 9 10]" {
		t.Errorf("lines %v", lines)
	}
}

func TestTooManyDevices(t *testing.T) {
	var b strings.Builder
	b.WriteString("device,vgs_at_10mA_V\n")
	for i := range maxSweeps + 1 {
		fmt.Fprintf(&b, "%d,2\n", i)
	}
	_, err := Read("x.csv", strings.NewReader(b.String()), Options{})
	if !errors.Is(err, ErrRefused) || !strings.Contains(err.Error(), "more than 100000") {
		t.Error(err)
	}
}

// What a file leaves open is asked when somebody can answer, once each.
func TestQuestions(t *testing.T) {
	for _, c := range []struct{ name, text, flag, answer, want string }{
		{"gate", "device,foo (V),id_A\nD1,2,1\nD1,3,2\nD1,4,3\n", "--map vg=", "2", "D1 up vg_v[2,3,4] id_a[1,2,3]"},
		{"which gate", "device,Vg (V),Ugs (V),id_A\nD1,2,2.1,1\nD1,3,3.1,2\nD1,4,4.1,3\n", "--map vg=", "3", "D1 up vg_v[2.1,3.1,4.1] id_a[1,2,3]"},
		{"current of spots", "device,Vg (V)\nD1,2\nD2,3\n", "--spot-current", "10mA", "D1 spot vg_v[2] id_a[0.01]\nD2 spot vg_v[3] id_a[0.01]"},
		{"load", "device,vg_V,id_A,U_L (V)\nD1,2,0,12.0\nD1,3,0,12.0\nD1,4,0,12.0\n", "--map", "vd", "D1 up vg_v[2,3,4] id_a[0,0,0] vd_v[12.0,12.0,12.0]"},
	} {
		t.Run(c.name, func(t *testing.T) {
			asked := 0
			f := mustRead(t, "x.csv", c.text, Options{Ask: func(q Question) (string, error) {
				asked++
				if q.Flag != c.flag || q.Text == "" {
					t.Errorf("asked %+v", q)
				}
				return c.answer, nil
			}})
			checkShow(t, f, c.want)
			if asked != 1 {
				t.Errorf("asked %d times", asked)
			}
			wantError(t, "x.csv", c.text, Options{Ask: func(Question) (string, error) { return "", errors.New("no terminal") }}, ErrAmbiguous, "no terminal", c.flag[:5])
		})
	}
}

func TestNamesAreTrimmed(t *testing.T) {
	f := mustRead(t, "x.csv", "device, vg_V, id_A\nD1,2,0.1\n D1 ,3,0.2\nD1\u00a0,4,0.3\n\"D1\",5,0.4\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,4,5] id_a[0.1,0.2,0.3,0.4]")
}

func TestGarbageBetweenRowsCutsNoSweep(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,0.1\nD1,3,0.2\nD1,3.5,0.25\nXX,what,is\nD1,4,0.3\nD1,5,0.4\n", Options{})
	checkShow(t, f, "D1 up vg_v[2,3,3.5,4,5] id_a[0.1,0.2,0.25,0.3,0.4]")
	if f.Refused != 1 || f.Sweeps[0].Line(3) != 6 {
		t.Errorf("%+v %+v", f.Refusals, f.Sweeps[0].Lines)
	}
}

func TestWideRefusesRowsWhole(t *testing.T) {
	text := "Vg (V),T (°C),D1 (A),D2 (A)\n2,25,0.1,0.2\n3,OL,0.2,bad\n4,OL,0.3,0.4\n5,25,1,1\n6,25,1,1\n7,25,1\n8,25,1,1\n9,25,1,1\n10,25,1,1\n11,25,1,1\n"
	f := mustRead(t, "x.csv", text, Options{})
	checkShow(t, f, `
D1 up vg_v[2,4,5,6,8,9,10,11] id_a[0.1,0.3,1,1,1,1,1,1] temp_c[25,null,25,25,25,25,25,25] 1:temp_c=overload(OL)
D2 up vg_v[2,4,5,6,8,9,10,11] id_a[0.2,0.4,1,1,1,1,1,1] temp_c[25,null,25,25,25,25,25,25] 1:temp_c=overload(OL)`)
	if f.Refused != 2 || f.States != 1 || f.Refusals[0].Reason != `D2 "bad" is no number` || f.Refusals[1].Reason != "the row has 3 cells, want 4" {
		t.Errorf("%d states, %+v", f.States, f.Refusals)
	}
	wantError(t, "x.csv", "Vg (V),D1 (A),D\x1b2 (A)\n2,1,1\n3,2,2\n", Options{}, ErrRefused, "column 3: device name", "")
}

func TestLoadResistorColumn(t *testing.T) {
	read := func(text string, opt Options) record.Num {
		f := mustRead(t, "x.csv", text, opt)
		return f.Sweeps[0].Condition.RL
	}
	const rows = "\nD1,2,0.1,%s\nD1,3,0.2,%s\nD1,4,0.3,%s\n"
	fill := func(head, cell string) string { return head + fmt.Sprintf(rows, cell, cell, cell) }
	for _, c := range []struct {
		text string
		want record.Num
	}{
		{fill("device,vg_V,id_A,R_L (Ohm)", "10"), record.Known(10)},
		{fill("device,vg_V,id_A,R_L (kΩ)", "1.5"), record.Known(1500)},
		{fill("device,vg_V,id_A,RL", "4k7"), record.Known(4700)},
		{fill("device,vg_V,id_A,RL", "big"), record.Num{}},
	} {
		if got := read(c.text, Options{}); got != c.want {
			t.Errorf("%q: %s, want %s", c.text, got, c.want)
		}
	}
	if got := read(fill("device,vg_V,id_A,RL", "10"), Options{Given: record.Condition{RL: record.Known(22)}}); got != record.Known(22) {
		t.Errorf("the flag must win: %s", got)
	}
}
