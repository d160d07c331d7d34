package lot

import (
	"errors"
	"math"
	"strings"
	"testing"

	"gatesill/fit"
	"pgregory.net/rapid"
)

// at makes measured devices with these V_GS(th), named D1, D2, ...
func at(u float64, values ...float64) []Device {
	var devs []Device
	for i, v := range values {
		devs = append(devs, measured(deviceName(i), map[fit.Key]float64{fit.KeyVgsth: v}, u))
	}
	return devs
}

func sorted(t *testing.T, devs []Device, opt SortOptions) Sorting {
	t.Helper()
	if opt.By == "" {
		opt.By = fit.KeyVgsth
	}
	s, err := SortInto(devs, opt)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// binOf names the bin of every device, with what Maybe says behind a slash.
func binOf(s Sorting) map[string]string {
	out := map[string]string{}
	for _, b := range s.Bins {
		for _, p := range b.Devices {
			out[p.Name] = b.Name
			if p.Maybe != "" {
				out[p.Name] += "/" + p.Maybe
			}
		}
	}
	for _, u := range s.Unsorted {
		out[u.Name] = "-"
	}
	return out
}

// Decimal arithmetic decides on which side of an edge a value lies, not what is
// left of it in binary: 2.80/0.05 and 0.3/0.1 fall short of whole numbers there.
func TestSortExactEdges(t *testing.T) {
	for _, c := range []struct {
		width, value, low float64
	}{
		{0.05, 2.80, 2.80}, {0.05, 2.7999, 2.75}, {0.05, 2.85, 2.85}, {0.1, 0.3, 0.3}, {0.1, 0.7, 0.7},
		{0.01, 3.07, 3.07}, {0.01, 3.069999, 3.06}, {0.05, -3.05, -3.05}, {0.05, -3.051, -3.10}, {0.05, 0, 0},
		{0.05, 0.1 + 0.2, 0.30}, {0.1, 1.1 * 3, 3.3}, {0.003, 2.787, 2.787},
	} {
		s := sorted(t, at(math.NaN(), c.value), SortOptions{Width: c.width})
		if len(s.Bins) != 1 || len(s.Bins[0].Devices) != 1 || s.Bins[0].Low != c.low {
			t.Errorf("%v in bins of %v: %+v, want the bin from %v", c.value, c.width, s.Bins, c.low)
		}
	}
	s := sorted(t, at(math.NaN(), 2.75, 2.80, 2.85, 2.95), SortOptions{Edges: []float64{2.75, 2.80, 2.85}})
	want := map[string]string{"D1": "A", "D2": "B", "D3": "B", "D4": "-"}
	for d, b := range binOf(s) {
		if want[d] != b {
			t.Errorf("%s is in %s, want %s", d, b, want[d])
		}
	}
}

func TestSortMaybe(t *testing.T) {
	// u = 2 mV: within 4 mV of an edge a device may belong across it.
	s := sorted(t, at(0.002, 2.801, 2.804, 2.8041, 2.848, 2.799), SortOptions{Width: 0.05})
	want := map[string]string{"D1": "B/A", "D2": "B/A", "D3": "B", "D4": "B/C", "D5": "A/B"}
	for d, b := range binOf(s) {
		if want[d] != b {
			t.Errorf("%s is in %s, want %s", d, b, want[d])
		}
	}
	if len(s.Bins) != 3 || s.SmallestWidth != 0.008 {
		t.Errorf("%d bins, smallest width %v; want 3 (the last empty, to have a name) and 0.008", len(s.Bins), s.SmallestWidth)
	}
	s = sorted(t, at(0.002, 2.751, 2.76, 2.849, 2.851, 2.86), SortOptions{Edges: []float64{2.75, 2.85}})
	want = map[string]string{"D1": "A/outside", "D2": "A", "D3": "A/outside", "D4": "-", "D5": "-"}
	for d, b := range binOf(s) {
		if want[d] != b {
			t.Errorf("%s is in %s, want %s", d, b, want[d])
		}
	}
	if why := s.Unsorted[0].Why; !strings.Contains(why, "above the last edge of 2.850 V, by no more than its uncertainty") {
		t.Errorf("just outside: %q", why)
	}
	if why := s.Unsorted[1].Why; why != "2.860 V is above the last edge of 2.850 V" {
		t.Errorf("outside: %q", why)
	}
}

func TestSortByNumber(t *testing.T) {
	s := sorted(t, at(0.001, 3, 3.1, 3.2, 3.399, 3.4), SortOptions{Bins: 4})
	want := map[string]string{"D1": "A", "D2": "B/A", "D3": "C/B", "D4": "D", "D5": "D"}
	for d, b := range binOf(s) {
		if want[d] != b {
			t.Errorf("%s is in %s, want %s", d, b, want[d])
		}
	}
	one := sorted(t, at(0.001, 3, 3, 3), SortOptions{Bins: 4})
	if len(one.Bins) != 1 || len(one.Bins[0].Devices) != 3 || len(one.Warnings) != 1 {
		t.Errorf("equal devices: %+v", one)
	}
	if none := sorted(t, nil, SortOptions{Bins: 4}); len(none.Bins) != 0 || len(none.Unsorted) != 0 {
		t.Errorf("no devices: %+v", none)
	}
}

func TestSortUnsorted(t *testing.T) {
	devs := at(0.001, 3.0, 3.0, 3.0, 3.0, 3.0, 3.0, math.NaN(), 3.0)
	devs[0].Control = true
	for i, st := range []fit.State{fit.Excluded, fit.Open, fit.Shorted, fit.Declined} {
		devs[i+1].Result.State = st
	}
	devs[1].Result.Why = "dropped on the floor"
	devs[5].Result.State = fit.Above
	devs[5].Result.Vgsth = fit.None()
	s := sorted(t, devs, SortOptions{Width: 0.05})
	var got []string
	for _, u := range s.Unsorted {
		got = append(got, u.Name+": "+u.Why)
	}
	want := []string{
		"D1: control part", "D2: dropped on the floor", "D3: no drain current flows at any gate voltage of the sweep",
		"D4: drain current flows whatever the gate voltage", "D5: the readings give no number that may be believed",
		"D6: the device never reaches the current within the sweep", "D7: no V_GS(th) could be had",
	}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("unsorted:\n%s\nwant:\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	if b := binOf(s)["D8"]; b != "B/A" {
		t.Errorf("D8 is in %q, want B/A", b)
	}
}

func TestSortWarnings(t *testing.T) {
	code := func(s Sorting) string {
		var codes []string
		for _, w := range s.Warnings {
			codes = append(codes, w.Code)
		}
		return strings.Join(codes, " ")
	}
	for _, c := range []struct {
		u, width float64
		want     string
	}{
		{0.001, 0.004, ""}, {0.001, 0.0039, fit.CodeBenchLimited}, {math.NaN(), 0.05, fit.CodeNoAccuracy},
	} {
		s := sorted(t, at(c.u, 3.0012, 3.0154, 3.0227), SortOptions{Width: c.width})
		if code(s) != c.want {
			t.Errorf("u %v, width %v: %+v, want %q", c.u, c.width, s.Warnings, c.want)
		}
	}
	s := sorted(t, at(0.0001, 3.01, 3.02, 3.05), SortOptions{Width: 0.005})
	if len(s.Warnings) != 1 || s.Warnings[0].Text != "bins 5.0 mV wide are narrower than the step of the readings, 10 mV" {
		t.Errorf("bins finer than the step: %+v", s.Warnings)
	}
}

func TestSortWrongUse(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		opt  SortOptions
		want error
	}{
		{SortOptions{}, ErrSortChoice},
		{SortOptions{Width: 0.05, Bins: 4}, ErrSortChoice},
		{SortOptions{Width: 0.05, Edges: []float64{1, 2}}, ErrSortChoice},
		{SortOptions{Width: -1}, ErrWidth}, {SortOptions{Width: nan}, ErrWidth}, {SortOptions{Width: inf}, ErrWidth},
		{SortOptions{Width: 1e-13}, ErrWidth}, {SortOptions{Width: 1e-6}, ErrBinCount},
		{SortOptions{Bins: -1}, ErrBinCount}, {SortOptions{Bins: mostBins + 1}, ErrBinCount},
		{SortOptions{Edges: []float64{}}, ErrEdges}, {SortOptions{Edges: []float64{1}}, ErrEdges},
		{SortOptions{Edges: []float64{1, 1}}, ErrEdges}, {SortOptions{Edges: []float64{2, 1}}, ErrEdges},
		{SortOptions{Edges: []float64{1, nan}}, ErrEdges}, {SortOptions{Edges: []float64{1, inf}}, ErrEdges},
		{SortOptions{By: "vgs", Bins: 2}, ErrSortQuantity},
	} {
		if c.opt.By == "" {
			c.opt.By = fit.KeyVgsth
		}
		if _, err := SortInto(at(0.001, 3, 3.5), c.opt); !errors.Is(err, c.want) {
			t.Errorf("%+v: %v, want %v", c.opt, err, c.want)
		}
	}
}

func TestBinNames(t *testing.T) {
	for i, want := range map[int]string{0: "A", 25: "Z", 26: "AA", 51: "AZ", 52: "BA", 701: "ZZ", 702: "AAA"} {
		if got := binName(i); got != want {
			t.Errorf("bin %d: %s, want %s", i, got, want)
		}
	}
}

// Whatever the devices and the bins, every device is in one bin that holds its
// value, or unsorted, and the bins join without gaps.
func TestSortPartition(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		devs := anyDevices(t)
		opt := SortOptions{By: rapid.SampledFrom(fit.Keys).Draw(t, "by")}
		switch rapid.IntRange(0, 2).Draw(t, "way") {
		case 0:
			opt.Width = rapid.Float64Range(1e-3, 10).Draw(t, "width")
		case 1:
			opt.Bins = rapid.IntRange(1, 40).Draw(t, "bins")
		default:
			e := rapid.Float64Range(-5, 5).Draw(t, "edge")
			opt.Edges = []float64{e, e + rapid.Float64Range(0.01, 3).Draw(t, "step"), e + 4}
		}
		s, err := SortInto(devs, opt)
		if err != nil {
			if !errors.Is(err, ErrBinCount) && !errors.Is(err, ErrWidth) {
				t.Fatal(err)
			}
			return
		}
		n := len(s.Unsorted)
		for i, b := range s.Bins {
			n += len(b.Devices)
			if i > 0 && b.Low != s.Bins[i-1].High || b.Low > b.High || b.Name != binName(i) {
				t.Fatalf("bin %d: %+v after %+v", i, b, s.Bins[max(0, i-1)])
			}
			slack := 1e-8 * (b.High - b.Low)
			for j, p := range b.Devices {
				if p.Value < b.Low-slack || p.Value > b.High+slack || j > 0 && p.Value < b.Devices[j-1].Value {
					t.Fatalf("%+v in bin %+v", p, b)
				}
				if p.Maybe == b.Name {
					t.Fatalf("%+v: its own bin across the edge", p)
				}
			}
		}
		if n != len(devs) {
			t.Fatalf("%d devices in, %d out", len(devs), n)
		}
	})
}
