package bias

import (
	"errors"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit"
)

const spiceFolder = "../../testdata/spice/"

// simulated fits a noise-free curve of the simulator.
func simulated(t *testing.T, device string, vds float64) *fit.Result {
	t.Helper()
	kind := "dense"
	if strings.HasPrefix(device, "h") {
		kind = "adaptive"
	}
	b, err := os.ReadFile(fmt.Sprintf("%s%s_fixed%g_%s.csv", spiceFolder, device, vds, kind))
	if err != nil {
		t.Fatal(err)
	}
	var c fit.Curve
	for line := range strings.Lines(string(b)) {
		f := strings.Split(strings.TrimSpace(line), ",")
		if strings.HasPrefix(line, "#") || len(f) < 2 || f[0] == "vg_V" {
			continue
		}
		c.Vg, c.Id = append(c.Vg, numberOf(t, f[0])), append(c.Id, numberOf(t, f[1]))
	}
	r := fit.One(c, fit.Setup{Circuit: fit.Fixed, OffV: nan, RL: nan, RLTol: nan, Vdd: nan, Vds: vds, TestCurrent: 1e-3, IdleCurrent: 0.25, MaxID: nan, VgsthMax: nan, Temperature: nan})
	return &r
}

// TestParalleledAgainstSimulator: shares of a total current against operating points of
// ngspice 39 (testdata/spice/parallel, made by scripts/spice/parallel), within 1 % of each device's current and 2 mV of
// the gate voltage. Invented cards; only their curves, each taken alone, are read here.
func TestParalleledAgainstSimulator(t *testing.T) {
	b, err := os.ReadFile(spiceFolder + "parallel/points.csv")
	if err != nil {
		t.Fatal(err)
	}
	type point struct {
		total, rs, vds, vg float64
		devices            []string
		i                  []float64
	}
	var points []*point
	last := ""
	for _, line := range strings.Split(strings.TrimSpace(string(b)), "\n")[1:] {
		f := strings.Split(line, ",")
		if key := strings.Join(f[:5], ","); key != last {
			points = append(points, &point{total: numberOf(t, f[1]), rs: numberOf(t, f[2]), vds: numberOf(t, f[3]), vg: numberOf(t, f[4])})
			last = key
		}
		p := points[len(points)-1]
		p.devices, p.i = append(p.devices, f[5]), append(p.i, numberOf(t, f[6]))
	}
	if len(points) != 12 {
		t.Fatalf("%d operating points", len(points))
	}
	curves := map[string]*fit.Result{}
	worst := 0.0
	for _, p := range points {
		var members []Member
		for _, d := range p.devices {
			if curves[d] == nil {
				curves[d] = simulated(t, d, p.vds)
			}
			members = append(members, Member{d, curves[d]})
		}
		l, err := LineOf(members, 0.25, nan, false, LineOptions{Total: p.total, Source: p.rs, VDS: p.vds, Rth: nan, Sink: nan, Temp: 27, Tempco: nan})
		if err != nil {
			t.Fatal(err)
		}
		if l.Cold.Err != nil {
			t.Fatalf("%+v: %v", p, l.Cold.Err)
		}
		near(t, fmt.Sprintf("gate for %g A with %g ohm", p.total, p.rs), l.Cold.Gate, p.vg, 2e-3)
		for k, d := range l.Cold.Devices {
			off := d.I/p.i[k] - 1
			worst = math.Max(worst, math.Abs(off))
			near(t, fmt.Sprintf("%s of %g A with %g ohm, share of its current", p.devices[k], p.total, p.rs), off, 0, 0.01)
		}
	}
	t.Logf("greatest difference %.2f %%", 100*worst)
}

// TestLineExtremes: two devices at the ends of the lot of testdata/scenarios/s2_push_pull_20.csv on one line: 500
// and 0 mA of 500 mA (arithmetic beside the scenario).
func TestLineExtremes(t *testing.T) {
	var low, high Member
	for _, row := range rowsOf(t, "s2_push_pull_20.csv") {
		d := device(row[0], numberOf(t, row[1]), numberOf(t, row[2]))
		m := Member{d.Name, &d.Result}
		if low.Result == nil || d.Result.VgsIdle.Value < low.Result.VgsIdle.Value {
			low = m
		}
		if high.Result == nil || d.Result.VgsIdle.Value > high.Result.VgsIdle.Value {
			high = m
		}
	}
	o := LineOptions{Total: 0.5, VDS: 28, Rth: nan, Sink: nan, Temp: 25, Tempco: nan}
	l, err := LineOf([]Member{low, high}, 0.25, nan, false, o)
	if err != nil || l.Cold.Err != nil {
		t.Fatal(err, l.Cold.Err)
	}
	near(t, "least gate voltage", l.Cold.Devices[0].I, 0.5, 1e-9)
	near(t, "greatest gate voltage", l.Cold.Devices[1].I, 0, 1e-9)
	near(t, "dissipation", l.Cold.Devices[0].Power, 14, 1e-6)
	if l.Hot.Devices != nil || l.Bare != nil {
		t.Error("hot or bare state of nothing")
	}
	// With 1 ohm the other one takes part.
	o.Source = 1
	if l, err = LineOf([]Member{low, high}, 0.25, nan, false, o); err != nil || l.Cold.Devices[1].I <= 0 || l.Bare == nil || l.Bare.Devices[1].I > 1e-9 {
		t.Errorf("with 1 ohm: %+v", l)
	}
}

// TestLineBelowTheCurve: a current below the end of a curve is told as less than that.
func TestLineBelowTheCurve(t *testing.T) {
	r := fit.NewResult()
	for _, i := range []float64{0.1, 0.2, 0.5, 1} {
		r.Levels = append(r.Levels, fit.Level{I: i, Vg: 4 + math.Sqrt(i)})
	}
	strong := device("a", 3, 1.4)
	l, err := LineOf([]Member{{"a", &strong.Result}, {"b", &r}}, 0.25, nan, false, LineOptions{Total: 0.5, VDS: nan, Rth: nan, Sink: nan, Temp: 25, Tempco: nan})
	if err != nil || l.Cold.Err != nil {
		t.Fatal(err, l.Cold.Err)
	}
	if d := l.Cold.Devices[1].Told; d.Beyond != -1 || math.Abs(d.I-0.1) > 1e-9 {
		t.Errorf("%+v", l.Cold.Devices[1])
	}
	if d := l.Cold.Devices[0].Told; d.Beyond != 0 || math.Abs(d.I-0.5) > 1e-6 {
		t.Errorf("%+v", d)
	}
}

// TestLineSolves: whatever the devices, the shares sum up to the total, each solves its
// own equation, cold and hot, and a p-channel line is the mirror.
func TestLineSolves(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var up, down []Member
		for k := range rapid.IntRange(2, 5).Draw(t, "devices") {
			v, gm := rapid.Float64Range(2.5, 4).Draw(t, "v"), rapid.Float64Range(0.3, 3).Draw(t, "gm")
			a, b := device("a", v, gm), device("b", -v, -gm)
			up, down = append(up, Member{fmt.Sprint(k), &a.Result}), append(down, Member{fmt.Sprint(k), &b.Result})
		}
		o := LineOptions{
			Total: rapid.Float64Range(0.01, 5).Draw(t, "total"), Source: rapid.SampledFrom([]float64{0, 0.1, 1}).Draw(t, "source"), VDS: 28,
			Rth: rapid.Float64Range(0, 3).Draw(t, "rth"), Sink: rapid.Float64Range(20, 80).Draw(t, "sink"), Temp: 25, Tempco: rapid.Float64Range(-6e-3, 3e-3).Draw(t, "tempco"),
		}
		l, err := LineOf(up, 0.25, nan, false, o)
		if err != nil {
			t.Fatal(err)
		}
		for what, s := range map[string]State{"cold": l.Cold, "hot": l.Hot, "kept": l.Kept} {
			if s.Err != nil {
				if what == "cold" || !errors.Is(s.Err, ErrRunaway) {
					t.Fatalf("%s: %v", what, s.Err)
				}
				continue
			}
			sum := 0.0
			for k, d := range s.Devices {
				sum += d.I
				dr := up[k].Result.Drain(0.25, nan, false)
				shift := 0.0
				if what != "cold" {
					shift = o.Tempco * (o.Sink + o.Rth*d.Power - o.Temp)
				}
				if want := dr.Continued(s.Gate - d.I*o.Source - shift); math.Abs(want-d.I) > 1e-6*o.Total {
					t.Fatalf("%s: device %d draws %g A, its law says %g", what, k, d.I, want)
				}
			}
			if what != "kept" && math.Abs(sum-o.Total) > 1e-4*o.Total {
				t.Fatalf("%s: %g A of %g", what, sum, o.Total)
			}
		}
		o.Tempco = -o.Tempco
		m, err := LineOf(down, 0.25, nan, true, o)
		if err != nil || math.Abs(m.Cold.Gate+l.Cold.Gate) > 1e-9 || (m.Hot.Err == nil) != (l.Hot.Err == nil) {
			t.Fatalf("mirror: %v, %v V, %v V", err, m.Cold.Gate, l.Cold.Gate)
		}
		if l.Hot.Err == nil && math.Abs(m.Hot.Gate+l.Hot.Gate) > 1e-6 {
			t.Fatalf("mirror hot: %g and %g V", m.Hot.Gate, l.Hot.Gate)
		}
	})
}

// TestRunaway: 28 V, 2 K/W and -5 mV/K are a loop gain of g_m·0.28 V/A: a device of 2 S holds, one of
// 5 S does not, and with 1 ohm in the source it does again.
func TestRunaway(t *testing.T) {
	for _, c := range []struct {
		gm, source float64
		stable     bool
	}{{2, 0, true}, {5, 0, false}, {5, 1, true}} {
		// Both alike, so that the total is twice the idle current.
		a, b := device("a", 3.2, c.gm), device("b", 3.2, c.gm)
		l, err := LineOf([]Member{{"a", &a.Result}, {"b", &b.Result}}, 0.5, nan, false,
			LineOptions{Total: 1, Source: c.source, VDS: 28, Rth: 2, Sink: 25, Temp: 25, Tempco: -5e-3})
		if err != nil {
			t.Fatal(err)
		}
		if (l.Hot.Err == nil) != c.stable || l.Hot.Err != nil && !errors.Is(l.Hot.Err, ErrRunaway) {
			t.Errorf("%g S, %g ohm: %v", c.gm, c.source, l.Hot.Err)
		}
	}
	if _, err := LineOf(nil, 0.25, nan, false, LineOptions{Total: 1}); !errors.Is(err, ErrLine) {
		t.Error(err)
	}
	bare := device("a", 3, nan)
	if _, err := LineOf([]Member{{"a", &bare.Result}, {"b", &bare.Result}}, 0.25, nan, false, LineOptions{Total: 1}); !errors.Is(err, ErrLine) {
		t.Error(err)
	}
}
