package table

import (
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

const scenarios = "../../testdata/scenarios/"

func readScenario(t *testing.T, name string, opt Options) *File {
	t.Helper()
	f, err := ReadFile(scenarios+name, opt)
	if err != nil {
		t.Fatalf("%v (hint: %s)", err, hintOf(err))
	}
	checkFile(t, f)
	return f
}

// gates gives the gate voltage of every spot.
func gates(f *File) []float64 {
	var v []float64
	for i := range f.Sweeps {
		v = append(v, f.Sweeps[i].Values(record.VG)[0])
	}
	return v
}

func meanSD(v []float64) (mean, sd float64) {
	for _, x := range v {
		mean += x / float64(len(v))
	}
	for _, x := range v {
		sd += (x - mean) * (x - mean) / float64(len(v)-1)
	}
	return mean, math.Sqrt(sd)
}

func checkMean(t *testing.T, f *File, n int, mean, sd float64) {
	t.Helper()
	v := gates(f)
	m, s := meanSD(v)
	if len(v) != n || math.Abs(m-mean) > 0.0005 || math.Abs(s-sd) > 0.00005 {
		t.Errorf("n %d, mean %.4f V, sd %.5f V; want %d, %.3f, %.4f", len(v), m, s, n, mean, sd)
	}
}

// The published ten: the weblog lists 2.78 2.67 2.94 2.82 2.47 2.82 2.83 2.91
// 2.81 2.82 V at 10 mA; mean and standard deviation are computed from these.
func TestScenarioTenParts(t *testing.T) {
	f := readScenario(t, "s1_ten_parts.csv", Options{})
	checkMean(t, f, 10, 2.787, 0.1327)
	if f.Layout != "spot" || f.Refused != 0 || f.Rows != 10 {
		t.Errorf("layout %s, %d rows, %d refused", f.Layout, f.Rows, f.Refused)
	}
	want := []string{"2.78", "2.67", "2.94", "2.82", "2.47", "2.82", "2.83", "2.91", "2.81", "2.82"}
	for i := range f.Sweeps {
		s := &f.Sweeps[i]
		if got := string(s.Column(record.VG).Text); got != "["+want[i]+"]" {
			t.Errorf("part %s: %s, want %s", s.Device, got, want[i])
		}
		if s.Device != string(rune('0'+i)) || s.Direction != record.Spot || s.Condition.SpotCurrent != record.Known(0.01) || s.Line(0) != i+2 {
			t.Errorf("device %s, %s, at %s A, line %d", s.Device, s.Direction, s.Condition.SpotCurrent, s.Line(0))
		}
	}
}

func TestScenarioPushPull(t *testing.T) {
	f := readScenario(t, "s2_push_pull_20.csv", Options{})
	checkMean(t, f, 20, 3.356, 0.1198)
	if s := &f.Sweeps[0]; s.Device != "P01" || s.Values(record.GM)[0] != 1.406 || s.Values(record.ID)[0] != 0.25 {
		t.Errorf("first %+v", s)
	}
}

func TestScenarioAudioAsksForTheUnit(t *testing.T) {
	_, err := ReadFile(scenarios+"s3_audio_100.csv", Options{})
	if err == nil || !strings.Contains(err.Error(), "no unit") || hintOf(err) != "--units vg=V" {
		t.Fatalf("%v, hint %q", err, hintOf(err))
	}
	f := readScenario(t, "s3_audio_100.csv", Options{Units: map[string]string{"vg": "V"}})
	checkMean(t, f, 100, 4.196, 0.0642)
	if d := f.Dialect; d.Delimiter != "semicolon" || d.Decimal != "comma" || f.Refused != 0 || f.Rows != 100 {
		t.Errorf("%+v, %d rows, %d refused", d, f.Rows, f.Refused)
	}
	asked := 0
	f = readScenario(t, "s3_audio_100.csv", Options{Ask: func(q Question) (string, error) {
		asked++
		if q.Flag != "--units vg=" || q.Choices[0] != "V" {
			t.Errorf("asked %+v", q)
		}
		return "V", nil
	}})
	if asked != 1 {
		t.Errorf("asked %d times, want once", asked)
	}
	checkMean(t, f, 100, 4.196, 0.0642)
}

func TestScenarioMixedBagNeedsItsCurrent(t *testing.T) {
	_, err := ReadFile(scenarios+"s9_mixed.csv", Options{})
	if err == nil || !strings.Contains(hintOf(err), "--spot-current") {
		t.Fatalf("%v, hint %q", err, hintOf(err))
	}
	f := readScenario(t, "s9_mixed.csv", Options{SpotCurrent: record.Known(0.001)})
	checkMean(t, f, 25, 2.873, 0.3470)
	// The transconductance was read at another current than the threshold: a
	// point of its own.
	s := &f.Sweeps[0]
	if s.Len() != 2 || s.Condition.SpotCurrent != record.Known(0.001) {
		t.Fatalf("%+v", s)
	}
	if id, gm := s.Values(record.ID), s.Values(record.GM); id[0] != 0.001 || id[1] != 1 || gm[0] == gm[0] || gm[1] != 4.55 {
		t.Errorf("currents %v, transconductances %v", id, gm)
	}
	f = readScenario(t, "s9_mixed.csv", Options{SpotCurrent: record.Known(1)})
	if s := &f.Sweeps[0]; s.Len() != 1 || s.Values(record.GM)[0] != 4.55 {
		t.Errorf("at one current: %+v", s)
	}
}
