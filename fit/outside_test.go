package fit

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// The curves under testdata/spice come from a general circuit simulator
// (ngspice 39) that shares no code and no equation with this package; INDEX.csv
// beside them gives the gate voltage of the dense run at 1, 10, 100 and 250 mA.
// All devices are invented cards.
const spiceFolder = "../testdata/spice"

type outsideCurve struct {
	file                  string
	device, circuit       string
	step, meter, mode     string
	currents              []float64 // A
	truth                 []float64 // V, NaN: never reached
	curve                 Curve
	setup                 Setup
	vto, beta, theta, rs  float64
	vg, id                []float64
	channelP, isDepletion bool
}

func nan() float64 { return math.NaN() }

// unknownSetup is a setup of which nothing is known.
func unknownSetup() Setup {
	return Setup{
		OffV: nan(), RL: nan(), RLTol: nan(), Vdd: nan(), Vds: nan(), Burden: nan(),
		TestCurrent: nan(), IdleCurrent: nan(), MaxID: nan(), VgsthMax: nan(), Temperature: nan(),
	}
}

func parse(t *testing.T, s string) float64 {
	t.Helper()
	if s == "" {
		return nan()
	}
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

func outsideCurves(t *testing.T) []outsideCurve {
	t.Helper()
	f, err := os.Open(filepath.Join(spiceFolder, "INDEX.csv"))
	if err != nil {
		t.Skip("no simulator curves here")
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	col := map[string]int{}
	for k, h := range rows[0] {
		col[h] = k
	}
	var all []outsideCurve
	for _, row := range rows[1:] {
		get := func(h string) string { return row[col[h]] }
		o := outsideCurve{
			file: get("file"), device: get("device"), circuit: get("circuit"), step: get("step"), meter: get("meter"), mode: get("mode"),
			currents: []float64{1e-3, 10e-3, 100e-3, 250e-3},
		}
		for _, h := range []string{"vgs_1mA_V", "vgs_10mA_V", "vgs_100mA_V", "vgs_250mA_V"} {
			o.truth = append(o.truth, parse(t, get(h)))
		}
		o.channelP = get("channel") == "p"
		o.isDepletion = o.mode == "depletion"
		o.setup = unknownSetup()
		o.setup.RL, o.setup.Vdd, o.setup.Vds = parse(t, get("rl_ohm")), parse(t, get("vdd_V")), parse(t, get("vds_V"))
		o.setup.Burden = 0
		o.setup.RLTol = 0
		o.setup.PChannel, o.setup.Depletion = o.channelP, o.isDepletion
		switch {
		case strings.HasPrefix(o.circuit, "load"):
			o.setup.Circuit = Load
		case o.circuit == "diode":
			o.setup.Circuit = Diode
		default:
			o.setup.Circuit = Fixed
		}
		o.read(t)
		all = append(all, o)
	}
	return all
}

// read takes the columns of the file; vd_V and, where there is an ammeter,
// vl_V are left to the tests that want them.
func (o *outsideCurve) read(t *testing.T) {
	t.Helper()
	b, err := os.ReadFile(filepath.Join(spiceFolder, o.file))
	if err != nil {
		t.Fatal(err)
	}
	var header []string
	cols := map[string][]float64{}
	for line := range strings.Lines(string(b)) {
		line = strings.TrimSpace(line)
		if key, value, ok := strings.Cut(strings.TrimPrefix(line, "# "), ": "); ok && strings.HasPrefix(line, "#") {
			switch key {
			case "vto":
				o.vto = parse(t, value)
			case "kp":
				o.beta = parse(t, value)
			case "theta":
				o.theta = parse(t, value)
			case "rs":
				o.rs = parse(t, value)
			}
			continue
		}
		cells := strings.Split(line, ",")
		if header == nil {
			header = cells
			continue
		}
		for k, c := range cells {
			cols[header[k]] = append(cols[header[k]], parse(t, c))
		}
	}
	o.vg, o.id = cols["vg_V"], cols["id_A"]
	o.curve = Curve{Vg: o.vg, Id: o.id, Vl: cols["vl_V"]}
}

func TestExploreOutside(t *testing.T) {
	for _, o := range outsideCurves(t) {
		for k, want := range o.truth {
			if math.IsNaN(want) {
				continue
			}
			s := o.setup
			s.TestCurrent = o.currents[k]
			r := One(o.curve, s)
			d := (r.Vgsth.Value - want) * 1e3
			codes := ""
			for _, w := range r.Warnings {
				codes += " " + w.Code
			}
			if k == 0 && (len(r.LeftOut) > 0 || r.State != Measured) {
				t.Logf("LEFT %s %v %s %v", o.file, r.State, r.Why, r.LeftOut)
			}
			t.Logf("%-34s %5.0f mA err %8.3f mV u %7.3f n %2d %s", o.file, 1e3*o.currents[k], d, r.Vgsth.U*1e3, r.Vgsth.N, codes)
		}
	}
}
