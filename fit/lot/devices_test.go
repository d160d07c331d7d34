package lot

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"gatesill/fit"
	"pgregory.net/rapid"
)

func deviceName(i int) string { return "D" + strconv.Itoa(i+1) }

// measured makes a device with these values, all with uncertainty u.
func measured(name string, values map[fit.Key]float64, u float64) Device {
	d := Device{Name: name, Result: fit.NewResult()}
	d.Result.State = fit.Measured
	for k, v := range values {
		q := d.Result.At(k)
		q.Value, q.U, q.N = v, u, 1
	}
	return d
}

// scenario reads one of the lots of testdata/scenarios: names in the first
// column, the quantities named in the others. All are invented, but for
// s1_ten_parts: ten IRF530 from a web marketplace, V_GS at 10 mA as published at
// logger.hatenablog.com in March 2021.
func scenario(t *testing.T, file string, keys ...fit.Key) []Device {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "testdata", "scenarios", file))
	if err != nil {
		t.Fatal(err)
	}
	text := string(b)
	if strings.Contains(text, ";") { // decimal comma
		text = strings.NewReplacer(",", ".", ";", ",").Replace(text)
	}
	rows, err := csv.NewReader(strings.NewReader(text)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var devs []Device
	for _, row := range rows[1:] {
		values := map[fit.Key]float64{}
		for i, k := range keys {
			v, err := strconv.ParseFloat(row[i+1], 64)
			if err != nil {
				t.Fatal(err)
			}
			values[k] = v
		}
		devs = append(devs, measured(row[0], values, math.NaN()))
	}
	return devs
}

// flagged lists the flagged devices with their codes.
func flagged(s Spread) string {
	var out []string
	for _, v := range s.Devices {
		if v.Flagged {
			var codes []string
			for _, r := range v.Reasons {
				codes = append(codes, r.Code)
			}
			out = append(out, fmt.Sprintf("%s(%s)", v.Name, strings.Join(codes, ",")))
		}
	}
	return strings.Join(out, " ")
}

// warnings joins the warnings with that code.
func warnings(s Spread, code string) string {
	var out []string
	for _, w := range s.Warnings {
		if w.Code == code {
			out = append(out, w.Text)
		}
	}
	return strings.Join(out, "; ")
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %v, want %v within %v", what, got, want, tol)
	}
}

// anyDevices draws up to 30 devices with whatever a fit may come up with, and
// what it should not.
func anyDevices(t *rapid.T) []Device {
	number := rapid.OneOf(
		rapid.Float64Range(-5, 5),
		rapid.Map(rapid.IntRange(-300, 300), func(i int) float64 { return float64(i) / 100 }),
		rapid.SampledFrom([]float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, 3, 1e300, -1e300, 5e-324}),
	)
	states := []fit.State{fit.Measured, fit.Measured, fit.Measured, fit.Above, fit.Open, fit.Shorted,
		fit.WrongWayRound, fit.Declined, fit.Excluded, ""}
	n := rapid.IntRange(0, 30).Draw(t, "n")
	devs := make([]Device, n)
	for i := range devs {
		d := &devs[i]
		d.Name = deviceName(i)
		d.Control = rapid.IntRange(0, 9).Draw(t, "control") == 0
		d.Result = fit.NewResult()
		d.Result.State = rapid.SampledFrom(states).Draw(t, "state")
		for _, k := range fit.Keys {
			q := d.Result.At(k)
			q.Value = number.Draw(t, "value")
			q.U = number.Draw(t, "u")
		}
		for _, i := range rapid.SliceOfN(rapid.SampledFrom(append([]float64{0, 3, math.NaN(), math.Inf(1)}, fit.LevelCurrents[:8]...)), 0, 12).Draw(t, "currents") {
			l := fit.Level{I: i, Vg: number.Draw(t, "level"), U: number.Draw(t, "u of level")}
			if rapid.Bool().Draw(t, "rising") {
				l.Vg = 3 + 0.1*math.Log(1e5*i)
			}
			d.Result.Levels = append(d.Result.Levels, l)
		}
	}
	return devs
}
